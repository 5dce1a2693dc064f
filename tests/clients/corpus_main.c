/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Feeds every file of the folders named, whole and cut short at every length, to a fuzz target, so
 * that its corpus runs in an ordinary build. Fails where a folder holds no file. */
#include <dirent.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "text.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { FILE_MAX = 1024 * 1024 };

/* A copy of its own size, so that a sanitizer sees a read past the end. */
static void feed(const char *data, size_t len)
{
    char *exact = lwc_grow(NULL, len);
    memcpy(exact, data, len);
    (void)LLVMFuzzerTestOneInput((const uint8_t *)exact, len);
    free(exact);
}

static bool feed_file(const char *folder, const char *name)
{
    lwc_text path = {0};
    lwc_text content = {0};
    lwc_text why = {0};
    lwc_text_printf(&path, "%s/%s", folder, name);
    bool ok = lwc_read_file(&content, path.data, FILE_MAX, &why);
    if (ok) {
        for (size_t len = 0; len <= content.len; len++) {
            feed(lwc_text_string(&content), len);
        }
    } else {
        (void)fprintf(stderr, "%s\n", lwc_text_string(&why));
    }
    lwc_text_clear(&path);
    lwc_text_clear(&content);
    lwc_text_clear(&why);
    return ok;
}

int main(int argc, char **argv)
{
    size_t files = 0;
    bool ok = argc > 1;
    for (int i = 1; i < argc && ok; i++) {
        size_t before = files;
        DIR *folder = opendir(argv[i]);
        const struct dirent *entry = NULL;
        while (folder != NULL && ok && (entry = readdir(folder)) != NULL) {
            if (entry->d_name[0] != '.') {
                ok = feed_file(argv[i], entry->d_name);
                files++;
            }
        }
        if (folder == NULL || files == before) {
            (void)fprintf(stderr, "%s holds no corpus\n", argv[i]);
            ok = false;
        }
        if (folder != NULL) {
            (void)closedir(folder);
        }
    }
    (void)printf("%zu files\n", files);
    return ok ? 0 : 1;
}
