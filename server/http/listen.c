/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Opens listening sockets, see listen.h. */
#include "listen.h"

#include <arpa/inet.h>
#include <errno.h>
#include <fcntl.h>
#include <netdb.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <unistd.h>

enum { BACKLOG = 256, FIRST_INHERITED_FD = 3 };

static bool address_loopback(const struct sockaddr *address)
{
    if (address->sa_family == AF_UNIX) {
        return true;
    }
    if (address->sa_family == AF_INET) {
        const struct sockaddr_in *in = (const struct sockaddr_in *)(const void *)address;
        return (ntohl(in->sin_addr.s_addr) >> 24) == 127;
    }
    if (address->sa_family == AF_INET6) {
        const struct sockaddr_in6 *in6 = (const struct sockaddr_in6 *)(const void *)address;
        return IN6_IS_ADDR_LOOPBACK(&in6->sin6_addr) ||
               (IN6_IS_ADDR_V4MAPPED(&in6->sin6_addr) && in6->sin6_addr.s6_addr[12] == 127);
    }
    return false;
}

/* Fills item from the socket's own address. */
static bool describe(lwd_listener *item)
{
    struct sockaddr_storage address;
    socklen_t len = sizeof address;
    char host[64] = "";

    memset(&address, 0, sizeof address);
    if (getsockname(item->fd, (struct sockaddr *)&address, &len) != 0) {
        return false;
    }
    item->is_unix = address.ss_family == AF_UNIX;
    item->loopback = address_loopback((const struct sockaddr *)&address);
    item->port = 0;
    if (address.ss_family == AF_INET) {
        const struct sockaddr_in *in = (const struct sockaddr_in *)(const void *)&address;
        item->port = ntohs(in->sin_port);
        inet_ntop(AF_INET, &in->sin_addr, host, sizeof host);
        snprintf(item->text, sizeof item->text, "%s:%d", host, item->port);
    } else if (address.ss_family == AF_INET6) {
        const struct sockaddr_in6 *in6 = (const struct sockaddr_in6 *)(const void *)&address;
        item->port = ntohs(in6->sin6_port);
        inet_ntop(AF_INET6, &in6->sin6_addr, host, sizeof host);
        snprintf(item->text, sizeof item->text, "[%s]:%d", host, item->port);
    } else if (item->is_unix) {
        const struct sockaddr_un *un = (const struct sockaddr_un *)(const void *)&address;
        snprintf(item->text, sizeof item->text, "unix:%.*s", (int)sizeof un->sun_path,
                 un->sun_path[0] != '\0' ? un->sun_path : "(unnamed)");
    } else {
        return false;
    }
    return true;
}

/* Splits "ADDR:PORT" and looks the address up; the caller frees the result. */
static struct addrinfo *resolve(const char *address, char *why, size_t why_size)
{
    char host[128];
    const char *colon = strrchr(address, ':');
    const char *start = address;
    size_t len = colon != NULL ? (size_t)(colon - address) : 0;
    struct addrinfo hints;
    struct addrinfo *found = NULL;
    size_t port_len;
    int rc;

    if (len >= 2 && address[0] == '[' && address[len - 1] == ']') {
        start++;
        len -= 2;
    } else if (colon != NULL && memchr(address, ':', len) != NULL) {
        colon = NULL; /* an IPv6 address without brackets */
    }
    port_len = colon != NULL ? strlen(colon + 1) : 0;
    if (colon == NULL || len == 0 || len >= sizeof host || port_len == 0 || port_len > 5 ||
        strspn(colon + 1, "0123456789") != port_len || strtol(colon + 1, NULL, 10) > 65535) {
        snprintf(why, why_size,
                 "\"%s\" is no address to listen on; write ADDR:PORT, such as 127.0.0.1:8470 or "
                 "[::1]:8470",
                 address);
        return NULL;
    }
    memcpy(host, start, len);
    host[len] = '\0';
    memset(&hints, 0, sizeof hints);
    hints.ai_family = AF_UNSPEC;
    hints.ai_socktype = SOCK_STREAM;
    hints.ai_flags = AI_PASSIVE | AI_NUMERICSERV;
    rc = getaddrinfo(host, colon + 1, &hints, &found);
    if (rc != 0) {
        snprintf(why, why_size, "the address \"%s\" is not known: %s", host, gai_strerror(rc));
        return NULL;
    }
    return found;
}

bool lwd_listen_is_loopback(const char *address, bool *loopback, char *why, size_t why_size)
{
    struct addrinfo *found = resolve(address, why, why_size);
    if (found == NULL) {
        return false;
    }
    *loopback = address_loopback(found->ai_addr);
    freeaddrinfo(found);
    return true;
}

static bool room(const lwd_listeners *list, char *why, size_t why_size)
{
    if (list->n >= LWD_LISTEN_MAX) {
        snprintf(why, why_size, "at most %d listening sockets", LWD_LISTEN_MAX);
        return false;
    }
    return true;
}

bool lwd_listen_tcp(lwd_listeners *list, const char *address, char *why, size_t why_size)
{
    struct addrinfo *found;
    lwd_listener *item = &list->item[list->n];
    const int on = 1;
    bool ok;

    if (!room(list, why, why_size)) {
        return false;
    }
    found = resolve(address, why, why_size);
    if (found == NULL) {
        return false;
    }
    memset(item, 0, sizeof *item);
    item->fd = socket(found->ai_family, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
    ok = item->fd >= 0;
    if (ok) {
        (void)setsockopt(item->fd, SOL_SOCKET, SO_REUSEADDR, &on, sizeof on);
        if (found->ai_family == AF_INET6) {
            (void)setsockopt(item->fd, IPPROTO_IPV6, IPV6_V6ONLY, &on, sizeof on);
        }
        ok = bind(item->fd, found->ai_addr, found->ai_addrlen) == 0 &&
             listen(item->fd, BACKLOG) == 0 && describe(item);
    }
    if (!ok) {
        snprintf(why, why_size, "can not listen on %s: %s%s", address, strerror(errno),
                 errno == EADDRINUSE ? "; another program has the port, choose one with --listen"
                                     : "");
        if (item->fd >= 0) {
            close(item->fd);
        }
    } else {
        list->n++;
    }
    freeaddrinfo(found);
    return ok;
}

/* A socket file nobody listens on is left over from a crash and may go. */
static bool remove_stale(const struct sockaddr_un *address)
{
    struct stat st;
    int fd;
    bool alive;

    if (lstat(address->sun_path, &st) != 0) {
        return errno == ENOENT;
    }
    if (!S_ISSOCK(st.st_mode)) {
        errno = EEXIST;
        return false;
    }
    fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    if (fd < 0) {
        return false;
    }
    alive = connect(fd, (const struct sockaddr *)(const void *)address, sizeof *address) == 0 ||
            errno != ECONNREFUSED;
    close(fd);
    if (alive) {
        errno = EADDRINUSE;
        return false;
    }
    return unlink(address->sun_path) == 0;
}

bool lwd_listen_unix(lwd_listeners *list, const char *path, char *why, size_t why_size)
{
    lwd_listener *item = &list->item[list->n];
    struct sockaddr_un address;
    struct stat st;
    mode_t mask;
    bool ok;

    if (!room(list, why, why_size)) {
        return false;
    }
    memset(&address, 0, sizeof address);
    address.sun_family = AF_UNIX;
    if (path[0] == '\0' || strlen(path) >= sizeof address.sun_path) {
        snprintf(why, why_size, "the socket path must have 1 to %zu bytes, got %zu",
                 sizeof address.sun_path - 1, strlen(path));
        return false;
    }
    memcpy(address.sun_path, path, strlen(path) + 1);
    memset(item, 0, sizeof *item);
    item->fd = -1;
    ok = remove_stale(&address);
    if (ok) {
        item->fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
        mask = umask(0117); /* owner and group may connect */
        ok = item->fd >= 0 &&
             bind(item->fd, (const struct sockaddr *)&address, sizeof address) == 0;
        umask(mask);
        ok = ok && listen(item->fd, BACKLOG) == 0 && describe(item) && lstat(path, &st) == 0;
    }
    if (!ok) {
        snprintf(why, why_size, "can not listen on unix socket %s: %s", path, strerror(errno));
        if (item->fd >= 0) {
            close(item->fd);
        }
        return false;
    }
    item->inode = (unsigned long)st.st_ino;
    list->n++;
    return true;
}

/* A small decimal number from the environment, -1 where there is none. */
static long env_number(const char *name)
{
    const char *text = getenv(name);
    char *end;
    long value;

    if (text == NULL || *text < '0' || *text > '9') {
        return -1;
    }
    errno = 0;
    value = strtol(text, &end, 10);
    return errno == 0 && *end == '\0' ? value : -1;
}

bool lwd_listen_inherited(lwd_listeners *list, size_t *count, char *why, size_t why_size)
{
    long n = env_number("LISTEN_FDS");

    *count = 0;
    if (n <= 0 || env_number("LISTEN_PID") != (long)getpid()) {
        return true;
    }
    if (n > LWD_LISTEN_MAX - (long)list->n) {
        snprintf(why, why_size, "LISTEN_FDS hands over %ld sockets, at most %d are used", n,
                 LWD_LISTEN_MAX);
        return false;
    }
    for (long i = 0; i < n; i++) {
        lwd_listener *item = &list->item[list->n];
        int listening = 0;
        socklen_t len = sizeof listening;
        int flags;
        memset(item, 0, sizeof *item);
        item->fd = FIRST_INHERITED_FD + (int)i;
        flags = fcntl(item->fd, F_GETFL);
        if (flags < 0 ||
            getsockopt(item->fd, SOL_SOCKET, SO_ACCEPTCONN, &listening, &len) != 0 ||
            listening == 0 || !describe(item)) {
            snprintf(why, why_size, "descriptor %d of LISTEN_FDS is no listening stream socket",
                     item->fd);
            return false;
        }
        (void)fcntl(item->fd, F_SETFL, flags | O_NONBLOCK);
        (void)fcntl(item->fd, F_SETFD, FD_CLOEXEC);
        list->n++;
        (*count)++;
    }
    unsetenv("LISTEN_FDS");
    unsetenv("LISTEN_PID");
    unsetenv("LISTEN_FDNAMES");
    return true;
}

bool lwd_listen_loopback_only(const lwd_listeners *list)
{
    for (size_t i = 0; i < list->n; i++) {
        if (!list->item[i].loopback) {
            return false;
        }
    }
    return true;
}

void lwd_listen_close(lwd_listeners *list)
{
    for (size_t i = 0; i < list->n; i++) {
        lwd_listener *item = &list->item[i];
        const char *path = item->text + strlen("unix:");
        struct stat st;
        if (item->fd >= 0) {
            close(item->fd);
            item->fd = -1;
        }
        if (item->inode != 0 && lstat(path, &st) == 0 &&
            (unsigned long)st.st_ino == item->inode) {
            unlink(path);
        }
    }
    list->n = 0;
}
