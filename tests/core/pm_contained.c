/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Containment of polynomial models, operation by operation. Each input stands for functions;
 * members of it, mostly on the edge of its rest, are put through the operation in numbers of 113
 * bits (the compiler's __float128 with libquadmath, the outside reference here), and what comes out
 * must lie in the model that the operation gives, at places where the errors do not cancel.
 *
 * LWT_PM_ENTRY names the function; LWT_PM_MUTANTS lets error terms be left out. */
#include "pm_contained.h"

#include <fenv.h>
#include <lwt.h>
#include <quadmath.h>
#include <string.h>

#ifdef LWT_PM_MUTANTS
static int mutant_now;
#define LWI_PM_MUTANT mutant_now
#endif
#include "proof/pm.h"

__extension__ typedef __float128 quad;

enum op {
    OP_ADD,
    OP_SUB,
    OP_SHIFT,
    OP_WIDEN,
    OP_SCALE,
    OP_AXPY,
    OP_DOT3K,
    OP_MUL,
    OP_SQR,
    OP_MUL2,
    OP_MUL_SUB,
    OP_DOT3,
    OP_CROSS,
    OP_RECIP,
    OP_DIV,
    OP_RSQRT,
    OP_SQRT,
    OP_SINE,
    OP_COSINE,
    OP_RANGE_CHEAP,
    OP_RANGE,
    OP_AT,
    OP_AT_END,
    OPS
};
static const char *const op_name[OPS] = {
    "add",    "sub",  "shift", "widen", "scale", "axpy", "dot3k",  "mul",         "sqr",   "mul2",
    "mul_sub", "dot3", "cross", "recip", "div",   "rsqrt", "sqrt", "sine", "cosine", "range_cheap",
    "range",  "at",   "at_end"};

/* Inputs and outputs of the operation under test. Reachable from elsewhere, so that the compiler
 * cannot move arithmetic across a change of the rounding mode. */
#define PASTED(a, b) a##_##b
#define NAMED(a, b) PASTED(a, b)
#define in NAMED(LWT_PM_ENTRY, in)
#define factor NAMED(LWT_PM_ENTRY, factor)
#define out NAMED(LWT_PM_ENTRY, out)
#define low NAMED(LWT_PM_ENTRY, low)
#define high NAMED(LWT_PM_ENTRY, high)
extern lwi_pm in[6];
extern lwi_pm out;
extern double factor[3];
extern double low;
extern double high;
lwi_pm in[6];
lwi_pm out;
double factor[3];
double low;
double high;

static lwt_random rng;

/* ---- inputs -------------------------------------------------------------------------------- */

static double sized(void)
{
    static const int exponent[8] = {0, 0, 0, 0, 0, 0, 200, -530};
    double x = lwt_random_in(&rng, -1.0, 1.0);
    return ldexp(x, exponent[lwt_random_index(&rng, 8)] + (int)lwt_random_index(&rng, 7) - 3);
}

static lwi_pm any_model(void)
{
    lwi_pm a = {{0.0}, 0.0};
    double size = fabs(sized());
    size_t kind = lwt_random_index(&rng, 6);
    /* 0 nothing, 1 constant, 2 linear, 3 falling, 4 flat, 5 one alone */
    if (kind == 5) {
        a.c[lwt_random_index(&rng, LWI_PM_SIZE)] = lwt_random_in(&rng, -size, size);
    } else {
        double fall = kind == 3 ? lwt_random_in(&rng, 0.01, 0.6) : 1.0;
        size_t n = kind == 0 ? 0 : kind == 1 ? 1 : kind == 2 ? 2 : LWI_PM_SIZE;
        double s = size;
        for (size_t i = 0; i < n; i++) {
            a.c[i] = lwt_random_in(&rng, -s, s);
            s *= fall;
        }
    }
    static const double rest[4] = {0.0, 1e-15, 1e-4, 0.4};
    a.e = size * rest[lwt_random_index(&rng, 4)] * lwt_random_in(&rng, 0.5, 1.0);
    return a;
}

/* A model whose constant outweighs the rest of it. */
static lwi_pm positive_model(void)
{
    lwi_pm a = any_model();
    double spread = lwi_pm_norm(a) - fabs(a.c[0]) + a.e;
    a.c[0] = fabs(a.c[0]) + spread * lwt_random_in(&rng, 1.1, 6.0);
    if (!(a.c[0] > 0.0)) {
        a.c[0] = 1.0;
    }
    return a;
}

static lwi_pm angle_model(void)
{
    lwi_pm a = any_model();
    double norm = lwi_pm_mag(a);
    double size = lwt_random_in(&rng, 0.0, 1.0);
    size = size * size * 1.9;
    if (norm > 0.0) {
        double k = size / norm;
        for (int i = 0; i < LWI_PM_SIZE; i++) {
            a.c[i] *= k;
        }
        a.e *= k;
    }
    switch (lwt_random_index(&rng, 4)) {
    case 0:
        a.c[0] = lwt_random_in(&rng, -1000.0, 1000.0);
        break;
    case 1:
        a.c[0] = 0.0;
        break;
    default:
        a.c[0] = lwt_random_in(&rng, -7.0, 7.0);
        break;
    }
    return a;
}

static void draw(enum op op)
{
    for (int i = 0; i < 6; i++) {
        in[i] = any_model();
    }
    for (int i = 0; i < 3; i++) {
        factor[i] = sized();
    }
    switch (op) {
    case OP_WIDEN:
        factor[0] = fabs(factor[0]);
        break;
    case OP_RECIP:
    case OP_RSQRT:
    case OP_SQRT:
        in[0] = positive_model();
        if (op == OP_RECIP && lwt_random_index(&rng, 2) == 0) {
            in[0] = lwi_pm_neg(in[0]);
        }
        break;
    case OP_DIV:
        in[1] = positive_model();
        break;
    case OP_SINE:
    case OP_COSINE:
        in[0] = angle_model();
        break;
    case OP_AT:
        factor[0] = lwt_random_in(&rng, -1.0, 1.0);
        break;
    case OP_AT_END:
        factor[0] = lwt_random_index(&rng, 2) == 0 ? -1.0 : 1.0;
        break;
    default:
        break;
    }
}

/* ---- the operation, and the same on values -------------------------------------------------- */

__attribute__((noinline)) static void operate(enum op op)
{
    lwi_pm other;
    lwi_pm three[3];
    switch (op) {
    case OP_ADD: out = lwi_pm_add(in[0], in[1]); break;
    case OP_SUB: out = lwi_pm_sub(in[0], in[1]); break;
    case OP_SHIFT: out = lwi_pm_shift(in[0], factor[0]); break;
    case OP_WIDEN: out = lwi_pm_widen(in[0], factor[0]); break;
    case OP_SCALE: out = lwi_pm_scale(in[0], factor[0]); break;
    case OP_AXPY: out = lwi_pm_axpy(in[0], factor[0], in[1]); break;
    case OP_DOT3K: out = lwi_pm_dot3k(factor, in); break;
    case OP_MUL: out = lwi_pm_mul(in[0], in[1]); break;
    case OP_SQR: out = lwi_pm_sqr(in[0]); break;
    case OP_MUL2: out = lwi_pm_mul2(in[0], in[1], in[2], in[3]); break;
    case OP_MUL_SUB: out = lwi_pm_mul_sub(in[0], in[1], in[2], in[3]); break;
    case OP_DOT3: out = lwi_pm_dot3(in, in + 3); break;
    case OP_CROSS:
        lwi_pm_cross(three, in, in + 3);
        out = three[2];
        break;
    case OP_RECIP: out = lwi_pm_recip(in[0]); break;
    case OP_DIV: out = lwi_pm_div(in[0], in[1]); break;
    case OP_RSQRT: out = lwi_pm_rsqrt(in[0]); break;
    case OP_SQRT: out = lwi_pm_sqrt(in[0]); break;
    case OP_SINE: lwi_pm_sincos(in[0], &out, &other); break;
    case OP_COSINE: lwi_pm_sincos(in[0], &other, &out); break;
    case OP_RANGE_CHEAP: lwi_pm_range_cheap(in[0], &low, &high); break;
    case OP_RANGE: lwi_pm_range(in[0], &low, &high); break;
    case OP_AT: lwi_pm_at(in[0], factor[0], &low, &high); break;
    case OP_AT_END: lwi_pm_at_end(in[0], factor[0] > 0.0, &low, &high); break;
    default: lwt_fail("no such operation"); break;
    }
}

/* The value, and in *size the sum of the sizes of its terms, for the reference's own rounding. */
static quad apply(enum op op, const quad v[6], quad *size)
{
    const double *k = factor;
    quad r = 0;
    switch (op) {
    case OP_ADD: r = v[0] + v[1]; break;
    case OP_SUB: r = v[0] - v[1]; break;
    case OP_SHIFT: r = v[0] + k[0]; break;
    case OP_WIDEN: r = v[0] + k[0]; break;
    case OP_SCALE: r = k[0] * v[0]; break;
    case OP_AXPY: r = v[0] + k[0] * v[1]; break;
    case OP_DOT3K: r = k[0] * v[0] + k[1] * v[1] + k[2] * v[2]; break;
    case OP_DIV: r = v[0] / v[1]; break;
    case OP_MUL: r = v[0] * v[1]; break;
    case OP_SQR: r = v[0] * v[0]; break;
    case OP_MUL2: r = v[0] * v[1] + v[2] * v[3]; break;
    case OP_MUL_SUB: r = v[0] * v[1] - v[2] * v[3]; break;
    case OP_DOT3: r = v[0] * v[3] + v[1] * v[4] + v[2] * v[5]; break;
    case OP_CROSS: r = v[0] * v[4] - v[1] * v[3]; break;
    case OP_RECIP: r = 1 / v[0]; break;
    case OP_RSQRT: r = 1 / sqrtq(v[0]); break;
    case OP_SQRT: r = sqrtq(v[0]); break;
    case OP_SINE: r = sinq(v[0]); break;
    case OP_COSINE: r = cosq(v[0]); break;
    default: r = v[0]; break;
    }
    /* Generous for sums that cancel: the largest two products there may be. */
    quad largest = 0;
    for (int i = 0; i < 6; i++) {
        quad s = fabsq(v[i]);
        largest = s > largest ? s : largest;
    }
    *size = fabsq(r);
    if (op == OP_MUL2 || op == OP_MUL_SUB || op == OP_DOT3 || op == OP_CROSS) {
        *size += largest * largest;
    } else if (op == OP_AXPY || op == OP_DOT3K || op == OP_SHIFT || op == OP_WIDEN) {
        *size += largest * (fabs(k[0]) + fabs(k[1]) + fabs(k[2]) + 1);
        *size = op == OP_SHIFT || op == OP_WIDEN ? fabsq(r) + fabsq(v[0]) : *size;
    } else if (op == OP_ADD || op == OP_SUB) {
        *size += fabsq(v[0]) + fabsq(v[1]);
    }
    return r;
}

static quad polynomial(const lwi_pm *a, double d, quad *size)
{
    quad before = 1;
    quad t = d;
    quad s = a->c[0];
    *size = fabs(a->c[0]);
    for (int j = 1; j < LWI_PM_SIZE; j++) {
        s += a->c[j] * t;
        *size += fabs(a->c[j]);
        quad next = 2 * (quad)d * t - before;
        before = t;
        t = next;
    }
    return s;
}

/* ---- judging -------------------------------------------------------------------------------- */

static double place(int i)
{
    /* Where the T_k are 1 or -1, for the degrees that are dropped too. */
    switch (i) {
    case 0: return -1.0;
    case 1: return 1.0;
    case 2: return lwt_random_in(&rng, -1.0, 1.0);
    default: {
        double n = LWI_PM_SIZE + (double)lwt_random_index(&rng, LWI_PM_DEGREE);
        double x = cos(3.141592653589793 * (double)lwt_random_index(&rng, LWI_PM_SIZE) / n);
        return lwt_random_index(&rng, 2) == 0 ? x : -x;
    }
    }
}

static void judge(enum op op, pm_report *report)
{
    bool is_value = op == OP_AT || op == OP_AT_END;
    bool is_range = is_value || op == OP_RANGE || op == OP_RANGE_CHEAP;
    for (int i = 0; i < (is_value ? 1 : 6); i++) {
        double d = is_value ? factor[0] : place(i);
        quad p[6];
        quad sizes = 0;
        for (int j = 0; j < 6; j++) {
            quad s;
            p[j] = polynomial(&in[j], d, &s);
            sizes = j == 0 ? s : sizes;
        }
        quad result_size = 0;
        quad result = is_range ? 0 : polynomial(&out, d, &result_size);
        for (unsigned member = 0; member < 5; member++) {
            /* Two fixed choices of edges, two random ones, one inside. */
            unsigned signs = member == 0   ? 0
                             : member == 1 ? 63
                                           : (unsigned)lwt_random_index(&rng, 64);
            double inside = member == 4 ? lwt_random_in(&rng, 0.0, 1.0) : 1.0;
            quad v[6];
            for (int j = 0; j < 6; j++) {
                quad t = in[j].e * (signs >> j & 1 ? inside : -inside);
                v[j] = p[j] + t;
            }
            quad size;
            quad want = apply(op, v, &size);
            quad slack = ldexpq(size + sizes + result_size, -104);
            if (op == OP_ADD || op == OP_SUB || op == OP_WIDEN || op == OP_SHIFT) {
                slack = ldexpq(size + result_size, -104);
            }
            bool held;
            if (is_range) {
                slack = ldexpq(sizes, -104);
                held = want >= low - slack && want <= high + slack;
            } else {
                /* What widening adds is on either side. */
                quad off = fabsq(want - result);
                if (op == OP_WIDEN) {
                    off = fabsq(v[0] + (member & 1 ? -(quad)factor[0] : (quad)factor[0]) - result);
                }
                held = off <= out.e + slack;
                if (held && out.e > 0.0 && out.e < (double)INFINITY) {
                    double share = (double)(off / out.e);
                    report->tightest = share > report->tightest ? share : report->tightest;
                }
            }
            report->checked++;
            if (!held) {
                report->outside++;
                report->first = report->first ? report->first : op_name[op];
            }
        }
    }
}

pm_report LWT_PM_ENTRY(uint64_t seed, long rounds, int mutant, bool first_only);

pm_report LWT_PM_ENTRY(uint64_t seed, long rounds, int mutant, bool first_only)
{
    static const int modes[4] = {FE_TONEAREST, FE_DOWNWARD, FE_UPWARD, FE_TOWARDZERO};
    pm_report report = {0};
    report.terms = LWI_PM_TERMS;
#ifdef LWT_PM_MUTANTS
    mutant_now = mutant;
#else
    (void)mutant;
#endif
    lwt_random_init(&rng, seed);
    for (long round = 0; round < rounds; round++) {
        for (int op = 0; op < OPS; op++) {
            for (int mode = 0; mode < 4; mode++) {
                draw((enum op)op);
                memset(&out, 0, sizeof out);
                assert_int_equal(fesetround(modes[mode]), 0);
                operate((enum op)op);
                assert_int_equal(fesetround(FE_TONEAREST), 0);
                report.done++;
                report.failed += !lwi_pm_ok(out);
                assert_true(out.e >= 0.0);
                judge((enum op)op, &report);
                if (first_only && report.outside > 0) {
                    return report;
                }
            }
        }
    }
    return report;
}
