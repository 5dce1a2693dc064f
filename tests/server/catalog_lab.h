/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the catalog's tests share: a scratch directory, documents and digests made from numbers,
 * short forms of the calls. Included once by each test_catalog*.c, which defines _DEFAULT_SOURCE
 * first. */
#ifndef CATALOG_LAB_H
#define CATALOG_LAB_H

#include "lwt.h"

#include "catalog/catalog.h"

#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { LAB_WHEN = 1700000000 };
#define LAB_WHEN_MS (INT64_C(1000) * LAB_WHEN)

/* Makes a directory of its own below TMPDIR or /tmp. */
static inline void lab_dir(char out[256])
{
    const char *tmp = getenv("TMPDIR");
    (void)snprintf(out, 256, "%s/lwd-catalog-XXXXXX", tmp && tmp[0] ? tmp : "/tmp");
    if (!mkdtemp(out))
        lwt_fail("could not make %s", out);
}

/* Removes the files in it and the directory. */
static inline void lab_remove(const char *dir)
{
    DIR *d = opendir(dir);
    if (!d)
        return;
    for (const struct dirent *e = readdir(d); e; e = readdir(d)) {
        char path[600];
        if (strcmp(e->d_name, ".") == 0 || strcmp(e->d_name, "..") == 0)
            continue;
        if (snprintf(path, sizeof path, "%s/%s", dir, e->d_name) >= (int)sizeof path)
            continue;
        if (unlink(path) != 0)
            lab_remove(path);
    }
    (void)closedir(d);
    (void)rmdir(dir);
}

static inline int lab_count_files(const char *dir, const char *part)
{
    int n = 0;
    DIR *d = opendir(dir);
    if (!d)
        return -1;
    for (const struct dirent *e = readdir(d); e; e = readdir(d))
        n += strstr(e->d_name, part) != NULL;
    (void)closedir(d);
    return n;
}

/* 64 hex digits that differ for every n; the catalog takes them as they are. */
static inline void lab_digest(char out[LWD_CATALOG_DIGEST_LEN + 1], unsigned long n)
{
    (void)snprintf(out, LWD_CATALOG_DIGEST_LEN + 1, "%064lx", n);
}

/* Fails the case with the catalog's own sentence if the result is another. */
#define lab_is(call, want) lab_is_at((call), (want), &lab_err, #call, __FILE__, __LINE__)
static lwd_catalog_error lab_err;

static inline void lab_is_at(lwd_catalog_result got, lwd_catalog_result want,
                             const lwd_catalog_error *err, const char *call, const char *file,
                             int line)
{
    if (got != want)
        lwt_fail_at(file, line, "%.60s: got %d (%s), expected %d", call, (int)got, err->why,
                    (int)want);
    if (err->result != got || (got == LWD_CATALOG_OK) != (err->why[0] == '\0'))
        lwt_fail_at(file, line, "%.60s: error says %d '%s' for result %d", call, (int)err->result,
                    err->why, (int)got);
}

static inline lwd_catalog_put lab_put_of(const char *name, const char *document, const char *digest)
{
    return (lwd_catalog_put){.name = name,
                             .document = document,
                             .document_len = strlen(document),
                             .digest = digest,
                             .report = "{}",
                             .report_len = 2,
                             .who = "tester",
                             .when_ms = LAB_WHEN_MS};
}

/* Puts document number n and returns the revision's number. */
static inline int64_t lab_put(lwd_catalog *c, const char *name, unsigned long n)
{
    char digest[LWD_CATALOG_DIGEST_LEN + 1];
    char document[64];
    lab_digest(digest, n);
    (void)snprintf(document, sizeof document, "{\"n\": %lu}", n);
    lwd_catalog_put in = lab_put_of(name, document, digest);
    lwd_catalog_put_result out = {0};
    lab_is(lwd_catalog_put_revision(c, &in, &out, &lab_err), LWD_CATALOG_OK);
    return out.number;
}

static inline lwd_catalog_result lab_set(lwd_catalog *c, const char *name, int64_t number,
                                         lwd_catalog_action action, const int64_t *tag,
                                         lwd_catalog_state_result *out)
{
    lwd_catalog_set_state_request in = {.name = name,
                                        .number = number,
                                        .action = action,
                                        .who = "tester",
                                        .when_ms = LAB_WHEN_MS + (number & 0xff),
                                        .reason = "because",
                                        .accepted = "",
                                        .expect_tag = tag};
    return lwd_catalog_set_state(c, &in, out, &lab_err);
}

static inline lwd_catalog *lab_open(const char *dir, const lwd_catalog_options *options)
{
    lwd_catalog *c = NULL;
    lab_is(lwd_catalog_open(&c, dir, options, &lab_err), LWD_CATALOG_OK);
    assert_non_null(c);
    return c;
}

#endif
