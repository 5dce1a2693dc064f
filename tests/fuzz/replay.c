/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Runs a fuzz target over saved inputs in an ordinary build: every file of the folders named, whole
 * and cut short at up to 64 places, from memory that ends where the input ends. */
#include <dirent.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { MOST = 1 << 22, CUTS = 64 };

static void run(const uint8_t *data, size_t size)
{
    uint8_t *copy = malloc(size == 0 ? 1 : size);
    if (copy == NULL) {
        (void)fprintf(stderr, "not enough memory\n");
        exit(2);
    }
    memcpy(copy, data, size);
    (void)LLVMFuzzerTestOneInput(copy, size);
    free(copy);
}

static int run_file(const char *path)
{
    static uint8_t data[MOST];
    FILE *file = fopen(path, "rb");
    if (file == NULL) {
        (void)fprintf(stderr, "%s: can not be read\n", path);
        return 1;
    }
    size_t size = fread(data, 1, MOST, file);
    (void)fclose(file);
    size_t step = size / CUTS + 1;
    for (size_t cut = 0; cut < size; cut += step) {
        run(data, cut);
    }
    run(data, size);
    return 0;
}

int main(int argc, char **argv)
{
    size_t files = 0;
    int bad = 0;
    for (int i = 1; i < argc; i++) {
        DIR *folder = opendir(argv[i]);
        if (folder == NULL) {
            (void)fprintf(stderr, "%s: no such folder\n", argv[i]);
            return 2;
        }
        for (struct dirent *entry = readdir(folder); entry != NULL; entry = readdir(folder)) {
            char path[1024];
            int n = snprintf(path, sizeof path, "%s/%s", argv[i], entry->d_name);
            if (entry->d_name[0] != '.' && n > 0 && (size_t)n < sizeof path) {
                bad += run_file(path);
                files++;
            }
        }
        (void)closedir(folder);
    }
    (void)printf("%zu inputs\n", files);
    return bad > 0 || files == 0 ? 1 : 0; /* an empty corpus checks nothing */
}
