/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Comparing: each function ends the running cmocka case, with the place of the caller. */
#include "lwt.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

void lwt_fail_at(const char *file, int line, const char *format, ...)
{
    char text[1024];
    va_list list;
    va_start(list, format);
    (void)vsnprintf(text, sizeof text, format, list);
    va_end(list);
    print_error("%s\n", text);
    _fail(file, line);
}

static void tell_difference(double got, double want, double slack, const char *what,
                            const char *file, int line)
{
    lwt_fail_at(file, line, "%s\n  got    %.17g\n  want   %.17g\n  off by %.17g\n  allowed %.17g",
                what, got, want, got - want, slack);
}

/* Written so that a NaN on either side is off. */
static bool within(double got, double want, double slack)
{
    return got == want || fabs(got - want) <= slack;
}

void lwt_near_at(double got, double want, double tol, const char *what, const char *file, int line)
{
    if (!(tol >= 0.0 && isfinite(tol))) {
        lwt_fail_at(file, line, "%s: the tolerance must be finite and not negative, got %g", what,
                    tol);
    }
    if (!within(got, want, tol)) {
        tell_difference(got, want, tol, what, file, line);
    }
}

void lwt_near_n_at(const double *got, const double *want, size_t n, double tol, const char *what,
                   const char *file, int line)
{
    for (size_t i = 0; i < n; i++) {
        char name[160];
        (void)snprintf(name, sizeof name, "%s, number %zu of %zu", what, i, n);
        lwt_near_at(got[i], want[i], tol, name, file, line);
    }
}

void lwt_near_rel_at(double got, double want, double rel, const char *what, const char *file,
                     int line)
{
    double slack = rel * fmax(fabs(got), fabs(want));
    if (!within(got, want, slack)) {
        tell_difference(got, want, slack, what, file, line);
    }
}

void lwt_same_at(double got, double want, const char *what, const char *file, int line)
{
    if (memcmp(&got, &want, sizeof got) != 0) {
        lwt_fail_at(file, line, "%s: not the same bits\n  got  %.17g (%a)\n  want %.17g (%a)", what,
                    got, got, want, want);
    }
}

void lwt_holds_at(const char *text, const char *part, const char *file, int line)
{
    if (text == NULL || strstr(text, part) == NULL) {
        lwt_fail_at(file, line, "text without the part wanted\n  text %.600s\n  part %.200s",
                    text == NULL ? "(null)" : text, part);
    }
}
