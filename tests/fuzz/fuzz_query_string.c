/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the query strings of reach and margin, as decoded: the first byte picks the question and
 * the form of the answer, the rest is NAME=VALUE members with & between them. */
#include "fuzz_api.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static lwd_reply reply;
    lwd_pair pair[LWD_QUERY_MAX];
    if (size == 0 || size > 1100) {
        return 0;
    }
    lwd_app *app = fuzz_app(&reply);
    char *text = malloc(size);
    if (text == NULL) {
        return 0;
    }
    memcpy(text, data + 1, size - 1);
    text[size - 1] = '\0';
    bool plain = data[0] % 2 != 0;
    bool reach = data[0] / 2 % 2 == 0;
    lwd_request request = {.method = LWD_GET, .path = "", .param = {"f"}, .n_param = 1,
                           .body = "", .accept = plain ? "text/plain" : NULL, .token_name = "f",
                           .request_id = "f"};
    request.query = pair;
    request.n_query = fuzz_pairs(text, pair);
    if (reach) {
        lwd_get_reach(app, &request, &reply);
        fuzz_check(&reply, plain);
    } else {
        request.accept = NULL;
        lwd_get_margin(app, &request, &reply);
        fuzz_check(&reply, false);
    }
    free(text);
    return 0;
}
