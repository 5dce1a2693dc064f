/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Recording questions; see record.h. Every question goes out in one write() to a file opened for
 * appending, so that two programs recording into one file do not mix their lines. */
#include "record.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "replay_file.h"

static int open_record(const char *file)
{
    int fd = open(file, O_RDWR | O_CREAT | O_APPEND | O_CLOEXEC | O_NOCTTY, 0666);
    if (fd < 0) {
        lwc_complain("cannot write %s: %s; choose another file with --record FILE", file,
                     strerror(errno));
    }
    return fd;
}

/* Length of the file; -1 after a complaint if it holds anything but a replay. */
static off_t inspect(int fd, const char *file, bool *ends_open)
{
    struct stat info;
    *ends_open = false;
    if (fstat(fd, &info) != 0 || !S_ISREG(info.st_mode)) {
        lwc_complain("%s is no plain file; choose another with --record FILE", file);
        return -1;
    }
    if (info.st_size == 0) {
        return 0;
    }
    char start[8192];
    char last = '\n';
    ssize_t got = pread(fd, start, sizeof start, 0);
    bool ok = got > 0 && pread(fd, &last, 1, info.st_size - 1) == 1;
    if (ok) {
        const char *end = memchr(start, '\n', (size_t)got);
        size_t head = end != NULL ? (size_t)(end - start) : (size_t)got;
        lwc_replay replay;
        lwc_text why = {0};
        ok = lwc_replay_open(&replay, start, head, &why);
        lwc_replay_close(&replay);
        lwc_text_clear(&why);
    }
    if (!ok) {
        lwc_complain("%s is there and is no replay file, so nothing is added to it; choose another "
                     "with --record FILE",
                     file);
        return -1;
    }
    *ends_open = last != '\n';
    return info.st_size;
}

bool lwc_record_check(const char *file)
{
    bool ends_open = false;
    int fd = open_record(file);
    if (fd < 0) {
        return false;
    }
    off_t size = inspect(fd, file, &ends_open);
    (void)close(fd);
    return size >= 0;
}

static bool write_all(int fd, const char *data, size_t len)
{
    while (len > 0) {
        ssize_t put = write(fd, data, len);
        if (put < 0 && errno == EINTR) {
            continue;
        }
        if (put <= 0) {
            return false;
        }
        data += put;
        len -= (size_t)put;
    }
    return true;
}

bool lwc_record_append(const char *file, const char *path, const cJSON *body, long status,
                       const cJSON *answer)
{
    bool ends_open = false;
    int fd = open_record(file);
    if (fd < 0) {
        return false;
    }
    off_t size = inspect(fd, file, &ends_open);
    bool ok = size >= 0;
    if (ok) {
        lwc_text text = {0};
        if (size == 0) {
            lwc_replay_write_head(&text);
        } else if (ends_open) {
            lwc_text_putc(&text, '\n');
        }
        lwc_replay_write(&text, path, body, status, answer);
        ok = write_all(fd, text.data, text.len);
        if (!ok) {
            lwc_complain("cannot write %s: %s; the question was not recorded", file,
                         strerror(errno));
        }
        lwc_text_clear(&text);
    }
    if (close(fd) != 0 && ok) {
        lwc_complain("cannot write %s: %s", file, strerror(errno));
        ok = false;
    }
    return ok;
}

bool lwc_replace_file(const char *file, const lwc_text *content)
{
    lwc_text name = {0};
    struct stat info;
    mode_t mode = stat(file, &info) == 0 ? info.st_mode & 07777 : 0644;
    lwc_text_printf(&name, "%s.XXXXXX", file);
    int fd = mkstemp(name.data);
    bool ok = fd >= 0 && write_all(fd, content->data, content->len) && fchmod(fd, mode) == 0 &&
              fsync(fd) == 0;
    if (fd >= 0 && close(fd) != 0) {
        ok = false;
    }
    ok = ok && rename(name.data, file) == 0;
    if (!ok) {
        lwc_complain("cannot rewrite %s: %s; it is as it was", file, strerror(errno));
        if (fd >= 0) {
            (void)unlink(name.data);
        }
    }
    lwc_text_clear(&name);
    return ok;
}
