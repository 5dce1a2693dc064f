/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The demo line's documents for the tests of server that want real mechanisms. Included by
 * test_*.c only. */
#ifndef LWT_DEMO_MODEL_H
#define LWT_DEMO_MODEL_H

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <leeway/leeway.h>

#include "codec/document.h"
#include "lwt.h"

enum { LWT_DEMOS = 5 };
static const char *const lwt_demo_name[LWT_DEMOS] = {"tilt-table", "belt-hopper", "lid-turner",
                                                     "label-stage", "case-packer"};

/* The document's text, to be freed. */
static inline char *lwt_demo_text(const char *name, size_t *len)
{
    char path[512];
    (void)snprintf(path, sizeof path, "%s/deploy/demo/%s.json", LWT_SOURCE_DIR, name);
    FILE *stream = fopen(path, "rb");
    if (stream == NULL) {
        lwt_fail("%s cannot be read", path);
    }
    assert_int_equal(fseek(stream, 0, SEEK_END), 0);
    long size = ftell(stream);
    assert_true(size > 0);
    rewind(stream);
    char *text = malloc((size_t)size + 1);
    assert_non_null(text);
    assert_int_equal(fread(text, 1, (size_t)size, stream), (size_t)size);
    assert_int_equal(fclose(stream), 0);
    text[size] = '\0';
    *len = (size_t)size;
    return text;
}

/* To be freed with lwd_document_free. */
static inline lwd_document *lwt_demo_document(const char *name)
{
    char digest[LWD_DIGEST_SIZE];
    size_t len;
    char *text = lwt_demo_text(name, &len);
    lwd_findings *findings = calloc(1, sizeof *findings);
    assert_non_null(findings);
    lwd_findings_init(findings);
    lwd_document *document = lwd_document_read_text(text, len, findings, digest, NULL);
    assert_non_null(document);
    free(findings);
    free(text);
    return document;
}

#endif
