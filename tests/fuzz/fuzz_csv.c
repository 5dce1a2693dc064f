/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes paths sent as tables, through the reader of CSV, the core and the writers. The first byte
 * picks the form of the answer, the rest of the first line is the query string as decoded, what
 * follows is the table. */
#include "fuzz_api.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* A table of ours has a header, whole lines, and quotes in pairs. */
static void check_table(const lwd_reply *reply)
{
    static const char head[] = "line,code,outcome,at,";
    const char *text = reply->body.data;
    size_t len = reply->body.len;
    size_t quotes = 0;
    must(len > sizeof head && memcmp(text, head, sizeof head - 1) == 0, "header", reply);
    must(text[len - 2] == '\r' && text[len - 1] == '\n', "line end", reply);
    for (size_t i = 0; i < len; i++) {
        quotes += text[i] == '"';
    }
    must(quotes % 2 == 0, "quotes", reply);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static lwd_reply reply;
    lwd_pair pair[LWD_QUERY_MAX];
    const uint8_t *line = size > 0 ? memchr(data, '\n', size) : NULL;
    if (size == 0 || size > 65536) {
        return 0;
    }
    lwd_app *app = fuzz_app(&reply);
    size_t n = line != NULL ? (size_t)(line - data) : size;
    char *query = calloc(1, n + 1);
    char *body = calloc(1, size - n + 1);
    if (query != NULL && body != NULL) {
        memcpy(query, data + 1, n > 0 ? n - 1 : 0);
        memcpy(body, data + n + 1, line != NULL ? size - n - 1 : 0);
        const bool table = data[0] % 2 != 0;
        lwd_request request = {.method = LWD_POST, .path = "", .param = {"f"}, .n_param = 1,
                               .body = body, .body_len = line != NULL ? size - n - 1 : 0,
                               .accept = table ? "text/csv" : NULL, .content_type = "text/csv",
                               .token_name = "f", .request_id = "f"};
        request.query = pair;
        request.n_query = fuzz_pairs(query, pair);
        lwd_post_path(app, &request, &reply);
        if (table && reply.status == 200) {
            check_table(&reply);
        } else {
            fuzz_check(&reply, false);
        }
    }
    free(query);
    free(body);
    return 0;
}
