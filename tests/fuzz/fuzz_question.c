/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzzes the bodies of questions, through the decoder, the core and the writer. The first byte
 * picks the question ('0' inverse ... '4' reach, '5' path, '6' free-travel), the rest is the body.
 * The machine stays a draft: "revision": 1 is what a body must say to reach the core, as the saved
 * inputs do. */
#include "fuzz_api.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const lwd_handler handler[] = {lwd_post_inverse, lwd_post_forward, lwd_post_jacobian,
                                          lwd_post_margin, lwd_post_reach, lwd_post_path,
                                          lwd_post_free_travel};
    static lwd_reply reply;
    if (size == 0) {
        return 0;
    }
    lwd_app *app = fuzz_app(&reply);
    char *body = malloc(size);
    if (body == NULL) {
        return 0;
    }
    memcpy(body, data + 1, size - 1);
    body[size - 1] = '\0';
    const lwd_request request = {.method = LWD_POST, .path = "", .param = {"f"}, .n_param = 1,
                                 .body = body, .body_len = size - 1, .token_name = "f",
                                 .request_id = "f"};
    handler[(data[0] + 1) % 7](app, &request, &reply);
    fuzz_check(&reply, false);
    free(body);
    return 0;
}
