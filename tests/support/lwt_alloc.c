/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Allocations that count themselves and fail on demand. The linker's --wrap sends every call from
 * our own objects here (CMakeLists.txt beside this file names the functions). */
#include "lwt.h"

#include <stdatomic.h>
#include <stdlib.h>

#include <cjson/cJSON.h>

void *__real_malloc(size_t size);
void *__real_calloc(size_t n, size_t size);
void *__real_realloc(void *old, size_t size);
char *__real_strdup(const char *text);
char *__real_strndup(const char *text, size_t max);
void *__real_aligned_alloc(size_t alignment, size_t size);
void *__wrap_malloc(size_t size);
void *__wrap_calloc(size_t n, size_t size);
void *__wrap_realloc(void *old, size_t size);
char *__wrap_strdup(const char *text);
char *__wrap_strndup(const char *text, size_t max);
void *__wrap_aligned_alloc(size_t alignment, size_t size);

static atomic_size_t calls;      /* since the last reset */
static atomic_size_t fail_first; /* 0: none fails */
static atomic_size_t fail_last;
static atomic_bool failed;

static bool must_fail(void)
{
    size_t n = atomic_fetch_add(&calls, 1) + 1;
    size_t first = atomic_load(&fail_first);
    if (first == 0 || n < first || n > atomic_load(&fail_last)) {
        return false;
    }
    atomic_store(&failed, true);
    return true;
}

void *__wrap_malloc(size_t size)
{
    return must_fail() ? NULL : __real_malloc(size);
}

void *__wrap_calloc(size_t n, size_t size)
{
    return must_fail() ? NULL : __real_calloc(n, size);
}

void *__wrap_realloc(void *old, size_t size)
{
    return must_fail() ? NULL : __real_realloc(old, size);
}

char *__wrap_strdup(const char *text)
{
    return must_fail() ? NULL : __real_strdup(text);
}

char *__wrap_strndup(const char *text, size_t max)
{
    return must_fail() ? NULL : __real_strndup(text, max);
}

void *__wrap_aligned_alloc(size_t alignment, size_t size)
{
    return must_fail() ? NULL : __real_aligned_alloc(alignment, size);
}

static void arm(size_t first, size_t last)
{
    atomic_store(&fail_first, 0);
    atomic_store(&fail_last, last);
    atomic_store(&calls, 0);
    atomic_store(&failed, false);
    atomic_store(&fail_first, first);
}

void lwt_alloc_reset(void)
{
    arm(0, 0);
}

size_t lwt_alloc_calls(void)
{
    return atomic_load(&calls);
}

void lwt_alloc_fail_at(size_t n)
{
    arm(n, n);
}

void lwt_alloc_fail_from(size_t n)
{
    arm(n, SIZE_MAX);
}

bool lwt_alloc_failed(void)
{
    return atomic_load(&failed);
}

void lwt_alloc_cjson(bool counted)
{
    cJSON_Hooks hooks = {.malloc_fn = __wrap_malloc, .free_fn = free};
    cJSON_InitHooks(counted ? &hooks : NULL);
}

/* Under a sanitizer the same code paths come again and again, each one slow: after the first few
 * hundred every one failing allocation stands for some. The ordinary builds leave none out. */
static size_t sweep_stride(size_t n)
{
#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
    return n < 300 ? 1 : n / 40;
#else
    (void)n;
    return 1;
#endif
}

size_t lwt_alloc_sweep(void (*step)(void *context, size_t n), void *context, size_t limit)
{
    size_t last = 0;
    for (size_t n = 1, next; n <= limit + 1; n = next) {
        next = n + sweep_stride(n);
        next = n <= limit && next > limit + 1 ? limit + 1 : next;
        lwt_alloc_fail_at(n);
        step(context, n);
        bool met = lwt_alloc_failed();
        lwt_alloc_reset();
        if (!met) {
            if (n == 1) {
                lwt_fail("lwt_alloc_sweep: the step allocates nothing, so nothing was tested");
            }
            return last;
        }
        last = n;
    }
    lwt_fail("lwt_alloc_sweep: more than %zu allocations", limit);
    return 0;
}
