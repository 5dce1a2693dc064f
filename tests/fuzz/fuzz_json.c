/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the scan before the parser: what passes is parsed whole, its canonical form passes too and
 * stays the same, and the writer's numbers read back. */
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "codec/canonical.h"
#include "codec/json_in.h"
#include "codec/number.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static void must(bool holds)
{
    if (!holds) {
        abort();
    }
}

static void check_number(const uint8_t *data, size_t size)
{
    double x = 0.0;
    char text[LWD_NUMBER_SIZE + 1];
    if (size < sizeof x) {
        return;
    }
    memcpy(&x, data, sizeof x);
    size_t n = lwd_number_put(text, x);
    if (n > 0 && x != 0.0) {
        text[n] = '\0';
        double back = strtod(text, NULL);
        must(memcmp(&back, &x, sizeof x) == 0);
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static lwd_findings findings;
    lwd_scan_limits limits = LWD_SCAN_QUESTION;
    check_number(data, size);
    lwd_findings_init(&findings);
    struct cJSON *tree = lwd_json_parse((const char *)data, size, &limits, &findings);
    must((tree == NULL) == (findings.n_error == 1));
    must(!findings.no_memory); /* else the parser refused what the scan let pass */
    if (tree != NULL) {
        lwd_buf one;
        lwd_buf two;
        lwd_buf_init(&one, 0);
        lwd_buf_init(&two, 0);
        must(lwd_canonical(tree, &one));
        limits.size = SIZE_MAX / 4; /* short numbers may become long ones */
        struct cJSON *again = lwd_json_parse(one.data, one.len, &limits, &findings);
        must(again != NULL && lwd_canonical(again, &two));
        must(one.len == two.len && memcmp(one.data, two.data, one.len) == 0);
        lwd_json_free(again);
        lwd_buf_clear(&one);
        lwd_buf_clear(&two);
    }
    lwd_json_free(tree);
    return 0;
}
