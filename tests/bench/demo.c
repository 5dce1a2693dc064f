/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Demo documents for the benches; see demo.h. */
#include "demo.h"

#include <stdio.h>
#include <stdlib.h>

#include "codec/document.h"

static _Noreturn void stop(const char *name, const char *sentence)
{
    (void)fprintf(stderr, "bench: %s: %s\n", name, sentence);
    exit(1);
}

static char *read_file(const char *path, size_t *len)
{
    FILE *stream = fopen(path, "rb");
    if (stream == NULL || fseek(stream, 0, SEEK_END) != 0) {
        stop(path, "cannot be read");
    }
    long size = ftell(stream);
    rewind(stream);
    char *text = size >= 0 ? malloc((size_t)size + 1) : NULL;
    if (text == NULL || fread(text, 1, (size_t)size, stream) != (size_t)size) {
        stop(path, "cannot be read");
    }
    (void)fclose(stream);
    text[size] = '\0';
    *len = (size_t)size;
    return text;
}

lw_model *lwt_bench_demo(const char *name)
{
    char path[512];
    char digest[LWD_DIGEST_SIZE];
    size_t len;
    lw_model *model;
    lw_err err = {.code = LW_OK};
    lwd_findings *findings = calloc(1, sizeof *findings);
    lw_report *report = calloc(1, sizeof *report);
    if (findings == NULL || report == NULL) {
        stop(name, "out of memory");
    }
    lwd_findings_init(findings);
    (void)snprintf(path, sizeof path, "%s/deploy/demo/%s.json", LWT_SOURCE_DIR, name);
    char *text = read_file(path, &len);
    lwd_document *document = lwd_document_read_text(text, len, findings, digest, NULL);
    if (document == NULL) {
        stop(name, "the document is refused");
    }
    if (lw_model_new(&model, &document->spec, 1, report, &err) != LW_OK) {
        stop(name, report->n_finding > 0 ? report->finding[0].text : err.msg);
    }
    lwd_document_free(document);
    free(findings);
    free(report);
    free(text);
    return model;
}
