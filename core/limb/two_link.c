/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Three parallel revolutes in a row between two known bodies: the planar two-link limb. The sign
 * factor is the sine of the elbow angle; it vanishes stretched and folded. */
#include "../math/vec3.h"
#include "../model/model.h"

bool lwi_two_link_recognise(const lw_model *model, const lwi_limb *limb)
{
    const double *u = model->spec->joint[limb->chain[0].joint].axis;
    for (size_t k = 1; k < 3; k++) {
        double c[3];
        lwi_cross(c, u, model->spec->joint[limb->chain[k].joint].axis);
        if (lwi_norm(c) > 1e-9) {
            return false;
        }
    }
    /* Both links need a length. */
    for (size_t k = 0; k < 2; k++) {
        double d[3];
        lwi_sub(d, model->spec->joint[limb->chain[k + 1].joint].at_m,
                model->spec->joint[limb->chain[k].joint].at_m);
        lwi_axpy(d, d, -lwi_dot(d, u), u);
        if (lwi_norm(d) < 1e-9) {
            return false;
        }
    }
    return true;
}

typedef struct plane {
    double u[3], e1[3], e2[3];
    double a[3];      /* first joint */
    double l1[2], l2[2]; /* links in the reference posture */
    double r1, r2;
} plane;

static void project(double out[2], const plane *p, const double v[3])
{
    out[0] = lwi_dot(v, p->e1);
    out[1] = lwi_dot(v, p->e2);
}

static void setup(plane *p, const lw_model *m, const lwi_limb *limb)
{
    const lw_spec_joint *ja = &m->spec->joint[limb->chain[0].joint];
    const lw_spec_joint *jb = &m->spec->joint[limb->chain[1].joint];
    const lw_spec_joint *jc = &m->spec->joint[limb->chain[2].joint];
    double d[3];
    lwi_copy3(p->u, ja->axis);
    lwi_perpendicular(p->e1, p->e2, p->u);
    lwi_copy3(p->a, ja->at_m);
    lwi_sub(d, jb->at_m, ja->at_m);
    project(p->l1, p, d);
    lwi_sub(d, jc->at_m, jb->at_m);
    project(p->l2, p, d);
    p->r1 = hypot(p->l1[0], p->l1[1]);
    p->r2 = hypot(p->l2[0], p->l2[1]);
}

/* Angle from a to b. */
static double angle2(const double a[2], const double b[2])
{
    return atan2(a[0] * b[1] - a[1] * b[0], a[0] * b[0] + a[1] * b[1]);
}

void lwi_two_link_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                        unsigned bits, const lw_config *config)
{
    plane p;
    setup(&p, m, limb);
    const lw_frame *base = &config->body[limb->anchor[0]];
    lw_frame rel;
    double t[3];
    double d[2];
    lwi_frame_between(&rel, base, &config->body[limb->anchor[1]]);
    lwi_frame_apply(t, &rel, m->spec->joint[limb->chain[2].joint].at_m);
    lwi_sub(t, t, p.a);
    project(d, &p, t);
    double square = d[0] * d[0] + d[1] * d[1];
    double cosine = (square - p.r1 * p.r1 - p.r2 * p.r2) / (2.0 * p.r1 * p.r2);
    if (!(fabs(cosine) <= 1.0)) {
        if (fabs(cosine) < 1.0 + 1e-12) {
            cosine = cosine > 0.0 ? 1.0 : -1.0;
        } else {
            out->real = false;
            out->miss_m = cosine > 0.0 ? sqrt(square) - (p.r1 + p.r2)
                                       : sqrt(square) - fabs(p.r1 - p.r2);
            return;
        }
    }
    out->real = true;
    out->open = sqrt(square) < 1e-9 * (p.r1 + p.r2); /* folded, ends on one axis */
    double elbow = bits & 1u ? acos(cosine) : -acos(cosine);
    double sum[2] = {p.r1 + p.r2 * cos(elbow), p.r2 * sin(elbow)};
    /* First link direction = direction of d less the angle between link and chord. */
    double theta1 = angle2(p.l1, d) - atan2(sum[1], sum[0]);
    double theta2 = elbow - angle2(p.l1, p.l2);
    lw_frame x1;
    lw_frame x2;
    lwi_frame_turn(&x1, base, p.u, p.a, theta1);
    lwi_frame_turn(&x2, &x1, p.u, m->spec->joint[limb->chain[1].joint].at_m, theta2);
    for (size_t i = 0; i < limb->n_body; i++) {
        bool first = m->fused[limb->body[i]] == m->fused[limb->chain[0].next];
        out->body[i] = first ? x1 : x2;
    }
}

unsigned lwi_two_link_bits(double *value, const lw_model *m, const lwi_limb *limb,
                           const lw_config *config)
{
    plane p;
    double b[3];
    double c[3];
    double a[3];
    double l1[3];
    double l2[3];
    double n[3];
    double u[3];
    setup(&p, m, limb);
    const lw_frame *x1 = &config->body[limb->chain[0].next];
    const lw_frame *x2 = &config->body[limb->chain[1].next];
    lwi_frame_apply(a, x1, p.a);
    lwi_frame_apply(b, x1, m->spec->joint[limb->chain[1].joint].at_m);
    lwi_frame_apply(c, x2, m->spec->joint[limb->chain[2].joint].at_m);
    lwi_sub(l1, b, a);
    lwi_sub(l2, c, b);
    lwi_cross(n, l1, l2);
    lwi_rot_apply(u, x1->rot, p.u);
    *value = lwi_dot(n, u) / (p.r1 * p.r2);
    return *value > 0.0 ? 1u : 0u;
}
