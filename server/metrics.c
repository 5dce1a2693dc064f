/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The registry of metrics.h. Relaxed atomics: each figure is right by itself, and a scrape may see
 * one request in one figure and not yet in another. */
#include "metrics.h"

#include <inttypes.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "log.h"

/* Upper bounds of the duration buckets. A fast question takes 50 to 500 us, a job seconds. */
static const struct {
    int64_t us;
    const char *seconds;
} bucket[] = {{100, "0.0001"},  {250, "0.00025"},  {500, "0.0005"},  {1000, "0.001"},
              {2500, "0.0025"}, {5000, "0.005"},   {10000, "0.01"},  {25000, "0.025"},
              {100000, "0.1"},  {250000, "0.25"},  {1000000, "1"},   {5000000, "5"},
              {30000000, "30"}};
enum { BUCKETS = sizeof bucket / sizeof bucket[0], CLASSES = 5 };

typedef struct series {
    const char *name;
    _Atomic uint64_t by_class[CLASSES]; /* 1xx to 5xx */
    _Atomic uint64_t by_bucket[BUCKETS + 1];
    _Atomic uint64_t sum_us;
} series;

static struct {
    series route[LWD_METRICS_ROUTES_MAX + 1]; /* [0]: no route found */
    size_t n_route;
    const lwd_route *routes;
    size_t n_routes;
    unsigned char of_route[LWD_METRICS_ROUTES_MAX];
    _Atomic uint64_t refused[LWD_REFUSED_COUNT];
    _Atomic uint64_t accepted;
    _Atomic int64_t in_flight;
    _Atomic int64_t connections;
    _Atomic int64_t queued;
    _Atomic int64_t start_ms; /* since 1970 */
    const char *version;
    _Atomic bool ready;
} m = {.route = {{.name = "none"}}, .n_route = 1, .version = "unknown"};

static const char *const refused_text[] = {
#define X(id, text) text,
    LWD_REFUSED_LIST(X)
#undef X
};

void lwd_metrics_routes(const lwd_route *routes, size_t n)
{
    struct timespec now;

    clock_gettime(CLOCK_REALTIME, &now);
    atomic_store(&m.start_ms, (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000);
    m.routes = routes;
    m.n_routes = n < LWD_METRICS_ROUTES_MAX ? n : LWD_METRICS_ROUTES_MAX;
    m.n_route = 1;
    for (size_t i = 0; i < m.n_routes; i++) {
        size_t k = 1;
        while (k < m.n_route && strcmp(m.route[k].name, routes[i].name) != 0) {
            k++;
        }
        m.route[k].name = routes[i].name;
        m.n_route += k == m.n_route;
        m.of_route[i] = (unsigned char)k;
    }
}

void lwd_metrics_version(const char *version)
{
    m.version = version;
}

static void add(_Atomic uint64_t *counter, uint64_t n)
{
    atomic_fetch_add_explicit(counter, n, memory_order_relaxed);
}

void lwd_metrics_request(const lwd_route *route, int status, int64_t duration_us)
{
    size_t index = route != NULL ? (size_t)(route - m.routes) : m.n_routes;
    series *s = &m.route[index < m.n_routes ? m.of_route[index] : 0];
    int class = status / 100 - 1;
    size_t b = 0;

    if (class >= 0 && class < CLASSES) {
        add(&s->by_class[class], 1);
    }
    if (duration_us < 0) {
        duration_us = 0;
    }
    while (b < BUCKETS && duration_us > bucket[b].us) {
        b++;
    }
    add(&s->by_bucket[b], 1);
    add(&s->sum_us, (uint64_t)duration_us);
}

void lwd_metrics_refused(lwd_refused reason)
{
    add(&m.refused[reason], 1);
}

void lwd_metrics_in_flight(int change)
{
    atomic_fetch_add_explicit(&m.in_flight, change, memory_order_relaxed);
}

void lwd_metrics_connections(int change)
{
    atomic_fetch_add_explicit(&m.connections, change, memory_order_relaxed);
}

void lwd_metrics_queued(int change)
{
    atomic_fetch_add_explicit(&m.queued, change, memory_order_relaxed);
}

void lwd_metrics_connection_accepted(void)
{
    add(&m.accepted, 1);
}

void lwd_ready_set(bool ready)
{
    atomic_store(&m.ready, ready);
}

bool lwd_ready_get(void)
{
    return atomic_load(&m.ready);
}

static void put(lwd_buf *out, const char *format, ...) __attribute__((format(printf, 2, 3)));
static void put(lwd_buf *out, const char *format, ...)
{
    char text[256];
    va_list args;
    int n;

    va_start(args, format);
    n = vsnprintf(text, sizeof text, format, args);
    va_end(args);
    if (n < 0 || (size_t)n >= sizeof text) {
        out->failed = true;
        return;
    }
    lwd_buf_put(out, text, (size_t)n);
}

static void head(lwd_buf *out, const char *name, const char *type, const char *help)
{
    put(out, "# HELP %s %s\n# TYPE %s %s\n", name, help, name, type);
}

static uint64_t get(const _Atomic uint64_t *counter)
{
    return atomic_load_explicit(counter, memory_order_relaxed);
}

/* 1234567 microseconds as "1.234567". */
static void put_seconds(lwd_buf *out, uint64_t us)
{
    put(out, "%" PRIu64 ".%06" PRIu64 "\n", us / 1000000, us % 1000000);
}

static void write_requests(lwd_buf *out)
{
    head(out, "leeway_http_requests_total", "counter", "Answered requests by route and class.");
    for (size_t i = 0; i < m.n_route; i++) {
        for (int c = 0; c < CLASSES; c++) {
            uint64_t n = get(&m.route[i].by_class[c]);
            if (n != 0 || c == 1) { /* the good class is always there, so that rates start at 0 */
                put(out, "leeway_http_requests_total{route=\"%s\",status=\"%dxx\"} %" PRIu64 "\n",
                    m.route[i].name, c + 1, n);
            }
        }
    }
}

static void write_durations(lwd_buf *out)
{
    const char *name = "leeway_http_request_duration_seconds";

    head(out, name, "histogram", "From the complete head of a request to its sent answer.");
    for (size_t i = 0; i < m.n_route; i++) {
        const series *s = &m.route[i];
        uint64_t count = 0;
        for (size_t b = 0; b <= BUCKETS; b++) {
            count += get(&s->by_bucket[b]);
            put(out, "%s_bucket{route=\"%s\",le=\"%s\"} %" PRIu64 "\n", name, s->name,
                b < BUCKETS ? bucket[b].seconds : "+Inf", count);
        }
        put(out, "%s_sum{route=\"%s\"} ", name, s->name);
        put_seconds(out, get(&s->sum_us));
        put(out, "%s_count{route=\"%s\"} %" PRIu64 "\n", name, s->name, count);
    }
}

static void write_gauge(lwd_buf *out, const char *name, const char *help, int64_t value)
{
    head(out, name, "gauge", help);
    put(out, "%s %" PRId64 "\n", name, value);
}

/* Resident bytes of this process, -1 where the system does not say. */
static int64_t resident_bytes(void)
{
    long long total;
    long long resident;
    FILE *file = fopen("/proc/self/statm", "re");
    int n;

    if (file == NULL) {
        return -1;
    }
    n = fscanf(file, "%lld %lld", &total, &resident);
    fclose(file);
    return n == 2 ? resident * sysconf(_SC_PAGESIZE) : -1;
}

static void write_process(lwd_buf *out)
{
    int64_t start_ms = atomic_load(&m.start_ms);
    int64_t resident = resident_bytes();

    head(out, "process_start_time_seconds", "gauge", "Start of the process, seconds since 1970.");
    put(out, "process_start_time_seconds %" PRId64 ".%03" PRId64 "\n", start_ms / 1000,
        start_ms % 1000);
    if (resident >= 0) {
        write_gauge(out, "process_resident_memory_bytes", "Resident memory.", resident);
    }
}

void lwd_metrics_write(lwd_buf *out)
{
    head(out, "leeway_build_info", "gauge", "Version of this daemon; always 1.");
    put(out, "leeway_build_info{version=\"%s\"} 1\n", m.version);
    write_requests(out);
    write_durations(out);
    head(out, "leeway_http_refused_total", "counter",
         "Requests and connections turned away before a handler saw them, by reason.");
    for (int i = 0; i < LWD_REFUSED_COUNT; i++) {
        put(out, "leeway_http_refused_total{reason=\"%s\"} %" PRIu64 "\n", refused_text[i],
            get(&m.refused[i]));
    }
    head(out, "leeway_http_connections_accepted_total", "counter", "Connections taken over.");
    put(out, "leeway_http_connections_accepted_total %" PRIu64 "\n", get(&m.accepted));
    write_gauge(out, "leeway_http_connections", "Open connections.", atomic_load(&m.connections));
    write_gauge(out, "leeway_http_requests_in_flight", "Requests begun and not yet answered.",
                atomic_load(&m.in_flight));
    write_gauge(out, "leeway_http_queue_depth", "Slow requests that wait for a worker.",
                atomic_load(&m.queued));
    write_gauge(out, "leeway_ready", "1 while questions are answered.", lwd_ready_get() ? 1 : 0);
    head(out, "leeway_log_lines_dropped_total", "counter",
         "Log lines lost because nobody read them in time.");
    put(out, "leeway_log_lines_dropped_total %" PRIu64 "\n", lwd_log_dropped());
    write_process(out);
}
