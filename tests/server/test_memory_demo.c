/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Memory that runs out while the demo line is loaded: decoding a document, building its model,
 * its scratch. At every single allocation the call says that memory is out, gives nothing out
 * and leaves nothing behind (the leak checker watches); with memory there again the same call
 * succeeds. */
#include "demo_model.h"
#include "lwt_making.h"

typedef struct loading {
    const char *text;
    size_t len;
    lwd_findings *findings;
    size_t good;
} loading;

static void decode(void *context, size_t n)
{
    loading *it = context;
    char digest[LWD_DIGEST_SIZE];
    (void)n;
    lwd_findings_init(it->findings);
    lwd_document *document =
        lwd_document_read_text(it->text, it->len, it->findings, digest, NULL);
    if (document != NULL) {
        it->good++;
        lwd_document_free(document);
    } else {
        assert_true(it->findings->no_memory);
        assert_true(lwt_alloc_failed());
    }
}

static void decoding_without_memory_says_so(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_DEMOS; i++) {
        loading it = {.findings = calloc(1, sizeof *it.findings)};
        char *text = lwt_demo_text(lwt_demo_name[i], &it.len);
        assert_non_null(it.findings);
        it.text = text;
        lwt_alloc_cjson(true);
        size_t n = lwt_alloc_sweep(decode, &it, 20000);
        lwt_alloc_cjson(false);
        assert_true(n > 100);
        assert_true(it.good >= 1);
        free(it.findings);
        free(text);
    }
}

static void building_without_memory_says_so(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_DEMOS; i++) {
        lwd_document *document = lwt_demo_document(lwt_demo_name[i]);
        lwt_making it = {.spec = &document->spec, .report = calloc(1, sizeof *it.report)};
        assert_non_null(it.report);
        assert_true(lwt_alloc_sweep(lwt_make_model, &it, 2000) > 5);
        assert_true(it.good >= 1);
        free(it.report);
        lwd_document_free(document);
    }
}

static void scratch_without_memory_says_so(void **state)
{
    (void)state;
    for (size_t i = 0; i < LWT_DEMOS; i++) {
        lwd_document *document = lwt_demo_document(lwt_demo_name[i]);
        lw_report *report = calloc(1, sizeof *report);
        lw_model *model = NULL;
        lw_err err = {.code = LW_OK};
        assert_non_null(report);
        assert_int_equal(lw_model_new(&model, &document->spec, 7, report, &err), LW_OK);
        lwt_making it = {.model = model};
        assert_true(lwt_alloc_sweep(lwt_make_work, &it, 500) > 10);
        assert_int_equal(it.good, 1);
        lw_model_free(model);
        free(report);
        lwd_document_free(document);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(decoding_without_memory_says_so),
        cmocka_unit_test(building_without_memory_says_so),
        cmocka_unit_test(scratch_without_memory_says_so),
    };
    lw_init();
    return cmocka_run_group_tests(tests, NULL, NULL);
}
