/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes postures as questions give them, against a small machine with every kind of coordinate. */
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "codec/posture_in.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static const char machine[] =
    "{\"format\":\"leeway-mechanism/1\",\"name\":\"f\",\"units\":{\"length\":\"mm\",\"angle\":"
    "\"deg\"},\"frame\":\"bed\",\"bodies\":[\"bed\",\"a\",\"b\"],\"joints\":[{\"name\":\"j\","
    "\"type\":\"revolute\",\"between\":[\"bed\",\"a\"],\"at\":[0,0,0],\"axis\":[0,0,1]},{\"name\":"
    "\"s\",\"type\":\"spherical\",\"between\":[\"a\",\"b\"],\"at\":[0,0,0]},{\"name\":\"c\","
    "\"type\":\"cylindrical\",\"between\":[\"bed\",\"b\"],\"at\":[0,0,0],\"axis\":[0,0,1]}],"
    "\"rods\":[{\"name\":\"r\",\"between\":[\"bed\",\"b\"],\"ends\":[[0,0,0],[0,3,4]]}],"
    "\"drives\":[{\"name\":\"m\",\"moves\":\"j\"},{\"name\":\"n\",\"moves\":\"r\"}],\"tools\":"
    "[{\"name\":\"t\",\"body\":\"b\",\"at\":[0,0,0]}],\"outputs\":[\"x\"]}";

static void must(bool holds)
{
    if (!holds) {
        abort();
    }
}

static void check_pose(const lw_pose_ask *p)
{
    must(p->n_joint <= LW_MAX_OUTPUTS);
    for (int i = 0; i < 3; i++) {
        must(isfinite(p->position_m[i]) && isfinite(p->zyx_rad[i]));
    }
    if (p->orient == LW_ORIENT_QUATERNION) {
        double n = 0.0;
        for (int i = 0; i < 4; i++) {
            n += p->quat[i] * p->quat[i];
        }
        must(fabs(n - 1.0) < 1e-9);
    }
}

static void check_posture(const lw_posture_ask *p)
{
    if (p->kind == LW_BY_POSE) {
        check_pose(&p->pose);
    } else if (p->kind == LW_BY_DRIVES) {
        must(p->has_drive[0] || p->has_drive[1]);
        must(isfinite(p->drive[0]) && isfinite(p->drive[1]));
    } else if (p->kind == LW_BY_JOINTS) {
        must(isfinite(p->coord[0] + p->coord[1] + p->coord[2] + p->coord[3]));
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static lwd_document *doc;
    static lwd_findings findings;
    static lw_posture_ask out;
    static lw_posture_ask near;
    if (doc == NULL) {
        char digest[LWD_DIGEST_SIZE];
        lwd_findings_init(&findings);
        doc = lwd_document_read_text(machine, sizeof machine - 1, &findings, digest, NULL);
        must(doc != NULL);
    }
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    lwd_findings_init(&findings);
    struct cJSON *tree = lwd_json_parse((const char *)data, size, &limits, &findings);
    if (tree != NULL) {
        lwd_reader r = lwd_reader_of(tree, &findings);
        const lwd_posture_scope scope = {.document = doc, .units = {.metres = size % 2 == 0}};
        if (lwd_posture_in(&r, &scope, &out, &near)) {
            must(findings.n_error == 0 && out.kind != LW_BY_NOTHING);
            check_posture(&out);
            if (out.near != NULL) {
                check_posture(out.near);
            }
        } else {
            must(findings.n_error > 0);
        }
    }
    lwd_json_free(tree);
    return 0;
}
