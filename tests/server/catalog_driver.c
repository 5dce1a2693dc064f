/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The process that crash_catalog.py kills.
 *   catalog_driver write DIR SEED   writes for ever from three threads, one acknowledgement a line:
 *       ready                            the catalog is open
 *       rev NAME NUMBER SHA256           a revision; the digest is that of its document text
 *       pub|wdr NAME NUMBER SERIAL       a state event
 *       sol NAME NUMBER LENGTH           solution sets: LENGTH times the byte (NUMBER mod 256)
 *   catalog_driver check DIR            opens, verifies the file, reads every revision; prints
 *       whole REVISIONS MECHANISMS
 * A line goes out by one write() after the call has returned, so what the parent has read had been
 * acknowledged before the kill. Any failure prints "fail ..." and ends with status 1. */
#define _DEFAULT_SOURCE
#include "catalog/catalog.h"
#include "codec/sha256.h"

#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { THREADS = 3, MECHANISMS = 12, LONGEST = 24000 };

static lwd_catalog *catalog;

static void say(const char *line)
{
    size_t len = strlen(line);
    if (write(STDOUT_FILENO, line, len) != (ssize_t)len)
        _exit(1);
}

static void fail(const char *what, const lwd_catalog_error *err)
{
    char line[300];
    (void)snprintf(line, sizeof line, "fail %.60s: %.200s\n", what, err->why);
    say(line);
    _exit(1);
}

typedef struct worker {
    uint64_t random;
    unsigned long seed;
    int thread;
    char text[LONGEST + 1];
} worker;

/* splitmix64 (Steele, Lea, Flood 2014): any generator does, it only varies sizes and choices. */
static uint64_t next(worker *w)
{
    uint64_t z = (w->random += UINT64_C(0x9e3779b97f4a7c15));
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

static size_t make_document(worker *w, unsigned long count)
{
    /* Mostly a page or less, now and then several overflow pages. */
    size_t len = 120 + next(w) % 700;
    if (next(w) % 24 == 0)
        len = 4000 + next(w) % (LONGEST - 4000);
    int head =
        snprintf(w->text, sizeof w->text, "{\"seed\": %lu, \"thread\": %d, \"n\": %lu, \"x\": \"",
                 w->seed, w->thread, count);
    for (size_t i = (size_t)head; i < len; i++)
        w->text[i] = "0123456789abcdef"[next(w) & 15];
    w->text[len - 2] = '"';
    w->text[len - 1] = '}';
    w->text[len] = '\0';
    return len;
}

static int64_t put(worker *w, const char *name, unsigned long count)
{
    char digest[LWD_SHA256_HEX_SIZE];
    char line[200];
    lwd_catalog_error err;
    size_t len = make_document(w, count);
    lwd_sha256_text(digest, w->text, len);
    lwd_catalog_put in = {.name = name,
                          .document = w->text,
                          .document_len = len,
                          .digest = digest,
                          .report = "{}",
                          .report_len = 2,
                          .who = "driver",
                          .when_ms = (int64_t)count};
    lwd_catalog_put_result out;
    if (lwd_catalog_put_revision(catalog, &in, &out, &err) != LWD_CATALOG_OK)
        fail("put", &err);
    (void)snprintf(line, sizeof line, "rev %s %lld %s\n", name, (long long)out.number, digest);
    say(line);
    return out.number;
}

static void set(const char *name, int64_t number, lwd_catalog_action action)
{
    char line[200];
    lwd_catalog_error err;
    lwd_catalog_state_result out;
    lwd_catalog_set_state_request in = {.name = name,
                                        .number = number,
                                        .action = action,
                                        .who = "driver",
                                        .when_ms = number,
                                        .reason = "crash test",
                                        .accepted = "[]"};
    if (lwd_catalog_set_state(catalog, &in, &out, &err) != LWD_CATALOG_OK)
        fail("set", &err);
    if (!out.changed)
        return;
    (void)snprintf(line, sizeof line, "%s %s %lld %lld\n",
                   action == LWD_CATALOG_PUBLISH ? "pub" : "wdr", name, (long long)number,
                   (long long)out.tag);
    say(line);
}

static void save(worker *w, const char *name, int64_t number)
{
    char line[200];
    lwd_catalog_error err;
    size_t len = 1 + next(w) % 6000;
    memset(w->text, (int)(number & 0xff), len);
    if (lwd_catalog_save_solutions(catalog, name, number, w->text, len, number, &err) !=
        LWD_CATALOG_OK)
        fail("save", &err);
    (void)snprintf(line, sizeof line, "sol %s %lld %zu\n", name, (long long)number, len);
    say(line);
}

static void *work(void *context)
{
    worker *w = context;
    for (unsigned long count = 0;; count++) {
        char name[16];
        (void)snprintf(name, sizeof name, "m-%d", (int)(next(w) % MECHANISMS));
        int64_t number = put(w, name, count);
        if (next(w) % 3 == 0)
            set(name, number, LWD_CATALOG_PUBLISH);
        if (next(w) % 11 == 0)
            set(name, number, LWD_CATALOG_WITHDRAW);
        if (next(w) % 13 == 0)
            save(w, name, number);
    }
    return NULL;
}

static int write_for_ever(unsigned long seed)
{
    static worker workers[THREADS];
    pthread_t id[THREADS];
    say("ready\n");
    for (int t = 0; t < THREADS; t++) {
        workers[t].seed = seed;
        workers[t].thread = t;
        workers[t].random = seed * 1000 + (unsigned long)t;
        if (pthread_create(&id[t], NULL, work, &workers[t]) != 0)
            return 1;
    }
    for (int t = 0; t < THREADS; t++)
        (void)pthread_join(id[t], NULL);
    return 0;
}

static int check(void)
{
    lwd_catalog_error err;
    static lwd_catalog_mechanism page[MECHANISMS + 1];
    size_t n = 0;
    bool more = false;
    long revisions = 0;
    if (lwd_catalog_verify(catalog, true, &err) != LWD_CATALOG_OK)
        fail("verify", &err);
    if (lwd_catalog_list_mechanisms(catalog, NULL, page, MECHANISMS + 1, &n, &more, &err) !=
        LWD_CATALOG_OK)
        fail("list", &err);
    for (size_t i = 0; i < n; i++)
        for (int64_t number = 1; number <= page[i].revisions; number++) {
            lwd_catalog_revision rev;
            char digest[LWD_SHA256_HEX_SIZE];
            if (lwd_catalog_get_revision(catalog, page[i].name, number, &rev, &err) !=
                LWD_CATALOG_OK)
                fail("read", &err);
            lwd_sha256_text(digest, rev.document, rev.document_len);
            (void)snprintf(err.why, sizeof err.why, "%.32s %lld", page[i].name, (long long)number);
            if (strcmp(digest, rev.info.digest) != 0)
                fail("digest", &err);
            lwd_catalog_revision_clear(&rev);
            revisions++;
        }
    char line[80];
    (void)snprintf(line, sizeof line, "whole %ld %zu\n", revisions, n);
    say(line);
    return 0;
}

int main(int argc, char **argv)
{
    bool writing = argc == 4 && strcmp(argv[1], "write") == 0;
    if (!writing && !(argc == 3 && strcmp(argv[1], "check") == 0)) {
        (void)fprintf(stderr, "usage: catalog_driver write DIR SEED | check DIR\n");
        return 2;
    }
    /* Short logs, so that kills also fall into checkpoints. */
    lwd_catalog_options o = LWD_CATALOG_OPTIONS_DEFAULT;
    o.checkpoint_commits = 16;
    lwd_catalog_error err;
    if (lwd_catalog_open(&catalog, argv[2], &o, &err) != LWD_CATALOG_OK)
        fail("open", &err);
    if (writing)
        return write_for_ever(strtoul(argv[3], NULL, 10));
    int status = check();
    lwd_catalog_close(catalog);
    return status;
}
