/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Who asks: bearer tokens (RFC 6750) from a token file of lines "name role sha256hex". Only hashes
 * are kept; they are compared in constant time. Any thread may check while another reloads. */
#ifndef LWD_AUTH_H
#define LWD_AUTH_H

#include <stdbool.h>
#include <stddef.h>

#include "exchange.h"

enum { LWD_TOKEN_NAME_SIZE = 33, LWD_TOKEN_MAX = 256, LWD_TOKEN_TEXT_SIZE = 65 };

typedef struct lwd_auth lwd_auth;

typedef enum lwd_auth_result {
    LWD_AUTH_OK,
    LWD_AUTH_ABSENT,   /* no Authorization header */
    LWD_AUTH_MALFORMED, /* not "Bearer" and one token */
    LWD_AUTH_UNKNOWN   /* a token that is not in the file */
} lwd_auth_result;

/* NULL with a sentence naming file and line in `why`. */
lwd_auth *lwd_auth_load(const char *path, char *why, size_t why_size);
/* Reads the file again; on failure the old tokens stay in force. */
bool lwd_auth_reload(lwd_auth *auth, char *why, size_t why_size);
void lwd_auth_free(lwd_auth *auth);
size_t lwd_auth_count(lwd_auth *auth);

/* Judges the value of an Authorization header (NULL: absent). On OK fills role and name. */
lwd_auth_result lwd_auth_check(lwd_auth *auth, const char *authorization, lwd_role *role,
                               char name[LWD_TOKEN_NAME_SIZE]);

/* "query", "author" or "admin". */
bool lwd_role_parse(lwd_role *out, const char *text, size_t len);
const char *lwd_role_text(lwd_role role);

/* A new random token and the line to add to the file. False with `why` on a bad name or role. */
bool lwd_token_make(char token[LWD_TOKEN_TEXT_SIZE], lwd_buf *line, const char *name,
                    const char *role, char *why, size_t why_size);

#endif
