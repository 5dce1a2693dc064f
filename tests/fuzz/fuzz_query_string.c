/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the query strings of reach and margin, as decoded: the first byte picks the question and
 * the form of the answer, the rest is NAME=VALUE members with & between them. */
#include "fuzz_api.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* Cuts the text into pairs in place. */
static size_t cut(char *text, lwd_pair *pair)
{
    size_t n = 0;
    for (char *at = text; at != NULL && *at != '\0' && n < LWD_QUERY_MAX;) {
        char *next = strchr(at, '&');
        if (next != NULL) {
            *next++ = '\0';
        }
        char *value = strchr(at, '=');
        if (value != NULL) {
            *value++ = '\0';
        }
        pair[n++] = (lwd_pair){.name = at, .value = value != NULL ? value : ""};
        at = next;
    }
    return n;
}

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
    request.n_query = cut(text, pair);
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
