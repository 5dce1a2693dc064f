/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The token file and the check of a presented token, see auth.h. Hashing without salt is enough
 * here: tokens are 256 random bits, not passwords. */
#include "auth.h"

#include <errno.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/random.h>
#include <sys/stat.h>

#include "codec/sha256.h"

typedef struct entry {
    char name[LWD_TOKEN_NAME_SIZE];
    lwd_role role;
    unsigned char digest[LWD_SHA256_SIZE];
} entry;

struct lwd_auth {
    pthread_mutex_t lock;
    char *path;
    size_t n;
    entry *entries;
};

static const struct {
    const char *text;
    lwd_role role;
} role_table[] = {
    {"query", LWD_ROLE_QUERY}, {"author", LWD_ROLE_AUTHOR}, {"admin", LWD_ROLE_ADMIN}};

bool lwd_role_parse(lwd_role *out, const char *text, size_t len)
{
    for (size_t i = 0; i < sizeof role_table / sizeof role_table[0]; i++) {
        if (strlen(role_table[i].text) == len && memcmp(role_table[i].text, text, len) == 0) {
            *out = role_table[i].role;
            return true;
        }
    }
    return false;
}

const char *lwd_role_text(lwd_role role)
{
    for (size_t i = 0; i < sizeof role_table / sizeof role_table[0]; i++) {
        if (role_table[i].role == role) {
            return role_table[i].text;
        }
    }
    return "none";
}

static bool name_ok(const char *text, size_t len)
{
    if (len == 0 || len >= LWD_TOKEN_NAME_SIZE) {
        return false;
    }
    for (size_t i = 0; i < len; i++) {
        char c = text[i];
        if (!((c >= 'a' && c <= 'z') || (c >= '0' && c <= '9') || c == '-' || c == '_' ||
              c == '.')) {
            return false;
        }
    }
    return true;
}

static bool digest_parse(unsigned char out[LWD_SHA256_SIZE], const char *text, size_t len)
{
    if (len != 2 * LWD_SHA256_SIZE) {
        return false;
    }
    for (size_t i = 0; i < len; i++) {
        const char *digits = "0123456789abcdef";
        char c = (char)(text[i] >= 'A' && text[i] <= 'F' ? text[i] + 32 : text[i]);
        const char *at = memchr(digits, c, 16);
        if (at == NULL) {
            return false;
        }
        out[i / 2] = (unsigned char)((out[i / 2] << 4) | (at - digits));
    }
    return true;
}

/* The next word of a line; its length, 0 at the end. */
static size_t word(const char **at)
{
    *at += strspn(*at, " \t\r\n");
    return strcspn(*at, " \t\r\n");
}

/* NULL where the line is good or empty (then *used is false), else what is wrong with it. */
static const char *line_parse(entry *e, bool *used, const char *at)
{
    size_t n = word(&at);

    *used = false;
    if (n == 0 || *at == '#') {
        return NULL;
    }
    if (!name_ok(at, n)) {
        return "the name must be 1 to 32 of a-z, 0-9, '-', '_' and '.'";
    }
    memcpy(e->name, at, n);
    e->name[n] = '\0';
    at += n;
    n = word(&at);
    if (!lwd_role_parse(&e->role, at, n)) {
        return "the role must be query, author or admin";
    }
    at += n;
    n = word(&at);
    memset(e->digest, 0, sizeof e->digest);
    if (!digest_parse(e->digest, at, n)) {
        return "the third word must be 64 hexadecimal digits (see leewayd --make-token)";
    }
    at += n;
    if (word(&at) != 0) {
        return "nothing may follow the third word";
    }
    *used = true;
    return NULL;
}

static const char *entry_clash(const entry *entries, size_t n, const entry *e)
{
    for (size_t i = 0; i < n; i++) {
        if (strcmp(entries[i].name, e->name) == 0) {
            return "the name was used before in this file";
        }
        if (memcmp(entries[i].digest, e->digest, sizeof e->digest) == 0) {
            return "the same token was listed before in this file";
        }
    }
    return NULL;
}

static bool lines_read(entry *entries, size_t *n, FILE *file, const char *path, char *why,
                       size_t why_size)
{
    char line[256];
    size_t line_no = 0;

    while (fgets(line, sizeof line, file) != NULL) {
        const char *wrong = NULL;
        bool used = false;
        entry e;
        line_no++;
        if (strchr(line, '\n') == NULL && !feof(file)) {
            wrong = "the line is too long";
        }
        if (wrong == NULL) {
            wrong = line_parse(&e, &used, line);
        }
        if (wrong == NULL && used) {
            wrong = *n >= LWD_TOKEN_MAX ? "more than 256 tokens" : entry_clash(entries, *n, &e);
        }
        if (wrong != NULL) {
            snprintf(why, why_size, "%s, line %zu: %s", path, line_no, wrong);
            return false;
        }
        if (used) {
            entries[(*n)++] = e;
        }
    }
    if (ferror(file)) {
        snprintf(why, why_size, "%s can not be read: %s", path, strerror(errno));
        return false;
    }
    if (*n == 0) {
        snprintf(why, why_size, "%s holds no token; make one with leewayd --make-token NAME ROLE",
                 path);
        return false;
    }
    return true;
}

static bool file_read(entry **out, size_t *n, const char *path, char *why, size_t why_size)
{
    FILE *file = fopen(path, "re");
    struct stat st;
    bool ok = false;

    *n = 0;
    *out = NULL;
    if (file == NULL) {
        snprintf(why, why_size, "the token file %s can not be opened: %s", path, strerror(errno));
        return false;
    }
    if (fstat(fileno(file), &st) != 0 || !S_ISREG(st.st_mode)) {
        snprintf(why, why_size, "the token file %s is not a regular file", path);
    } else if ((st.st_mode & (S_IWGRP | S_IWOTH)) != 0) {
        snprintf(why, why_size,
                 "the token file %s may be written by others, who could add a token; "
                 "run: chmod go-w %s",
                 path, path);
    } else if ((*out = calloc(LWD_TOKEN_MAX, sizeof **out)) == NULL) {
        snprintf(why, why_size, "out of memory for the token file");
    } else {
        ok = lines_read(*out, n, file, path, why, why_size);
    }
    fclose(file);
    if (!ok) {
        free(*out);
        *out = NULL;
    }
    return ok;
}

lwd_auth *lwd_auth_load(const char *path, char *why, size_t why_size)
{
    lwd_auth *auth = calloc(1, sizeof *auth);

    if (auth == NULL || (auth->path = strdup(path)) == NULL) {
        free(auth);
        snprintf(why, why_size, "out of memory for the token file");
        return NULL;
    }
    pthread_mutex_init(&auth->lock, NULL);
    if (!file_read(&auth->entries, &auth->n, path, why, why_size)) {
        lwd_auth_free(auth);
        return NULL;
    }
    return auth;
}

bool lwd_auth_reload(lwd_auth *auth, char *why, size_t why_size)
{
    entry *entries;
    entry *old;
    size_t n;

    if (!file_read(&entries, &n, auth->path, why, why_size)) {
        return false;
    }
    pthread_mutex_lock(&auth->lock);
    old = auth->entries;
    auth->entries = entries;
    auth->n = n;
    pthread_mutex_unlock(&auth->lock);
    free(old);
    return true;
}

void lwd_auth_free(lwd_auth *auth)
{
    if (auth == NULL) {
        return;
    }
    pthread_mutex_destroy(&auth->lock);
    free(auth->entries);
    free(auth->path);
    free(auth);
}

size_t lwd_auth_count(lwd_auth *auth)
{
    size_t n;
    pthread_mutex_lock(&auth->lock);
    n = auth->n;
    pthread_mutex_unlock(&auth->lock);
    return n;
}

/* 0 where equal; takes the same time wherever the first difference lies. */
static unsigned digest_differs(const unsigned char *a, const unsigned char *b)
{
    volatile unsigned char sum = 0;
    for (size_t i = 0; i < LWD_SHA256_SIZE; i++) {
        sum = (unsigned char)(sum | (a[i] ^ b[i]));
    }
    return sum;
}

lwd_auth_result lwd_auth_check(lwd_auth *auth, const char *authorization, lwd_role *role,
                               char name[LWD_TOKEN_NAME_SIZE])
{
    unsigned char digest[LWD_SHA256_SIZE];
    lwd_auth_result result = LWD_AUTH_UNKNOWN;
    const char *token;
    size_t len;

    if (authorization == NULL) {
        return LWD_AUTH_ABSENT;
    }
    if (strncasecmp(authorization, "Bearer ", 7) != 0) {
        return LWD_AUTH_MALFORMED;
    }
    token = authorization + 7;
    token += strspn(token, " ");
    len = strcspn(token, " \t,");
    if (len == 0 || token[len + strspn(token + len, " \t")] != '\0') {
        return LWD_AUTH_MALFORMED;
    }
    lwd_sha256(digest, token, len);
    pthread_mutex_lock(&auth->lock);
    for (size_t i = 0; i < auth->n; i++) {
        /* No early end: the time tells nothing about which entry matched. */
        if (digest_differs(auth->entries[i].digest, digest) == 0) {
            *role = auth->entries[i].role;
            memcpy(name, auth->entries[i].name, LWD_TOKEN_NAME_SIZE);
            result = LWD_AUTH_OK;
        }
    }
    pthread_mutex_unlock(&auth->lock);
    return result;
}

bool lwd_token_make(char token[LWD_TOKEN_TEXT_SIZE], lwd_buf *line, const char *name,
                    const char *role, char *why, size_t why_size)
{
    unsigned char random[32];
    char hash[LWD_SHA256_HEX_SIZE];
    lwd_role parsed;

    if (!name_ok(name, strlen(name))) {
        snprintf(why, why_size,
                 "the name must be 1 to 32 of a-z, 0-9, '-', '_' and '.', got \"%s\"", name);
        return false;
    }
    if (!lwd_role_parse(&parsed, role, strlen(role))) {
        snprintf(why, why_size, "the role must be query, author or admin, got \"%s\"", role);
        return false;
    }
    if (getrandom(random, sizeof random, 0) != (ssize_t)sizeof random) {
        snprintf(why, why_size, "no random numbers from the system: %s", strerror(errno));
        return false;
    }
    lwd_sha256_hex(token, random);
    lwd_sha256_text(hash, token, strlen(token));
    lwd_buf_puts(line, name);
    lwd_buf_puts(line, " ");
    lwd_buf_puts(line, role);
    lwd_buf_puts(line, " ");
    lwd_buf_puts(line, hash);
    lwd_buf_puts(line, "\n");
    return !line->failed;
}
