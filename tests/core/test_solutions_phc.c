/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sets of all solutions, complex ones too, one to one against an independent solver: phc (Debian:
 * phcpack, J. Verschelde, Algorithm 795, ACM TOMS 25(2), 1999). Each mechanism is written for it
 * here as polynomials in plain coordinates of points and axes, from the same drawing and apart from
 * the closure code; two come from the documents of the demo line. */
#define _POSIX_C_SOURCE 200809L

#include "lwt.h"
#include "lwt_all.h"
#include "lwt_kit.h"
#include "lwt_phc.h"
#include "lwt_subjects.h"

#include "bench/demo.h"
#include "homotopy/sets.h"
#include "model/model.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

enum { SEED = 3, MOST = 64, WIDE = 24 };

/* Coordinates agree to this share of 1 + their size. Both solvers polish in doubles; the worst
 * condition met here leaves five digits more. */
static const double TOL = 1e-8;

/* A point of a body, or a direction on it, as drawn in the reference posture. */
typedef struct probe {
    size_t body;
    bool direction;
    double at[3];
} probe;

typedef struct places {
    size_t n, width;
    double complex at[LWT_PHC_MAX][WIDE];
} places;

/* Where the probes stand in every end of the question asked last, complex ones too. */
static void ours(places *out, const lw_model *model, lw_work *work, int kind, const probe *p,
                 size_t n_probe)
{
    const lwi_set *set = model->set[kind];
    lwi_set_work *w = work->set;
    lwi_hpoint end;
    memset(&end, 0, sizeof end);
    assert_true(w->n_end <= MOST && 3 * n_probe <= WIDE);
    out->n = w->n_end;
    out->width = 3 * n_probe;
    for (size_t i = 0; i < w->n_end; i++) {
        lwi_cunpack(&end.st, set->sys, w->ends + i * set->fibre.pack);
        assert_true(lwi_hom_residual(&end, &w->h, 1.0, &w->track) < 1e-9);
        for (size_t k = 0; k < n_probe; k++) {
            const lwi_cframe *x = &w->track.ev.node[set->sys->body_node[p[k].body]];
            for (size_t r = 0; r < 3; r++) {
                double complex v = p[k].direction ? 0.0 : x->pos_m[r];
                for (size_t c = 0; c < 3; c++) {
                    v += x->rot[3 * r + c] * p[k].at[c];
                }
                out->at[i][3 * k + r] = v;
            }
        }
    }
}

/* Every solution of the one is one of the other, no two the same. */
static void expect_same(const char *name, const places *a, const places *b, size_t count)
{
    bool taken[LWT_PHC_MAX] = {false};
    double worst = 0.0;
    if (a->n != count || b->n != count) {
        lwt_fail("%s: %zu solutions here, %zu by phc, %zu expected", name, a->n, b->n, count);
    }
    assert_int_equal(a->width, b->width);
    for (size_t i = 0; i < a->n; i++) {
        double best = INFINITY;
        size_t at = 0;
        for (size_t k = 0; k < b->n; k++) {
            double off = 0.0;
            for (size_t c = 0; c < a->width; c++) {
                off = fmax(off, cabs(a->at[i][c] - b->at[k][c]) / (1.0 + cabs(a->at[i][c])));
            }
            if (!taken[k] && off < best) {
                best = off;
                at = k;
            }
        }
        if (!(best < TOL)) {
            lwt_fail("%s: solution %zu is none of phc's, the nearest is off by %g", name, i, best);
        }
        taken[at] = true;
        worst = fmax(worst, best);
    }
    print_message("%s: %zu solutions are the same to %.1e\n", name, count, worst);
}

static void load(lwt_machine *m, places **a, places **b)
{
    if (m != NULL) {
        lwt_machine_load_prepared(m, SEED, LWT_PATHS);
    }
    *a = calloc(1, sizeof **a);
    *b = calloc(1, sizeof **b);
    assert_non_null(*a);
    assert_non_null(*b);
}

static void drop(lwt_machine *m, places *a, places *b)
{
    free(a);
    free(b);
    lwt_machine_free(m);
}

/* ---- text for phc ---------------------------------------------------------------------------- */

typedef struct text {
    char *at;
    size_t size;
    FILE *to;
} text;

static void begin(text *t, int polynomials)
{
    t->to = open_memstream(&t->at, &t->size);
    assert_non_null(t->to);
    (void)fprintf(t->to, "%d\n", polynomials);
}

static void solve(lwt_phc_list *out, text *t, const char *const *name, size_t n, unsigned seed)
{
    assert_int_equal(fclose(t->to), 0);
    if (!lwt_phc_solve(out, t->at, name, n, seed)) {
        lwt_fail("phc (Debian package phcpack) is not here, or its answer cannot be read");
    }
    free(t->at);
}

/* ---- a platform in the plane ----------------------------------------------------------------- */

/* Pivot drawn at `pivot` on the platform, `length` away from the fixed point `from`. */
static void write_planar(FILE *to, const double pivot[2], const double from[2], double length)
{
    (void)fprintf(to, "(x %+.17e*c %+.17e*s %+.17e)^2 + ", pivot[0], -pivot[1], -from[0]);
    (void)fprintf(to, "(y %+.17e*s %+.17e*c %+.17e)^2 %+.17e;\n", pivot[0], pivot[1], -from[1],
                  -length * length);
}

/* `knees` joints more are unknown, by names k and l. */
static void planar_places(places *out, text *t, const double *pivot, size_t knees, unsigned seed)
{
    static const char *const name[6] = {"x", "y", "c", "s", "k", "l"};
    lwt_phc_list *list = calloc(1, sizeof *list);
    assert_non_null(list);
    (void)fprintf(t->to, "c^2 + s^2 - 1;\n");
    solve(list, t, name, 4 + 2 * knees, seed);
    out->n = list->n;
    out->width = 9 + 3 * knees;
    for (size_t i = 0; i < list->n; i++) {
        const double complex *v = list->value[i];
        for (size_t k = 0; k < 3; k++) {
            out->at[i][3 * k] = v[0] + v[2] * pivot[2 * k] - v[3] * pivot[2 * k + 1];
            out->at[i][3 * k + 1] = v[1] + v[3] * pivot[2 * k] + v[2] * pivot[2 * k + 1];
            out->at[i][3 * k + 2] = 0.0;
        }
        if (knees > 0) {
            out->at[i][9] = v[4];
            out->at[i][10] = v[5];
            out->at[i][11] = 0.0;
        }
    }
    free(list);
}

static lwt_machine *subject(const char *name)
{
    for (size_t i = 0; i < LWT_SUBJECTS; i++) {
        if (strcmp(lwt_subjects[i].name, name) == 0) {
            return lwt_subjects[i].make();
        }
    }
    lwt_fail("no subject is called %s", name);
    return NULL;
}

static void planar_platform_on_three_struts(void **state)
{
    (void)state;
    static const double drive[3] = {0.13, -0.07, 0.11};
    lwt_machine *m = subject("planar-struts");
    places *a;
    places *b;
    load(m, &a, &b);
    probe p[3];
    double pivot[6];
    text t;
    begin(&t, 4);
    for (size_t i = 0; i < 3; i++) {
        const lw_spec_rod *rod = &m->spec->rod[i];
        const double *foot = rod->end_m[0];
        const double *top = rod->end_m[1];
        p[i] = (probe){.body = rod->body[1], .at = {top[0], top[1], 0}};
        memcpy(&pivot[2 * i], top, 2 * sizeof *top);
        write_planar(t.to, top, foot, hypot(top[0] - foot[0], top[1] - foot[1]) + drive[i]);
    }
    planar_places(b, &t, pivot, 0, 11);
    assert_true(lwt_forward_all(m, drive)->complete);
    ours(a, m->model, m->work, 0, p, 3);
    expect_same("planar platform on three struts", a, b, 6);
    drop(m, a, b);
}

/* A mechanism of the demo line, asked for all postures by the readings drive[] (changes against the
 * drawing, SI units). */
static void ask_demo(lw_model **model, lw_work **work, const char *name, const double *drive)
{
    lw_err err = {.code = LW_OK};
    *model = lwt_bench_demo(name);
    assert_int_equal(lw_model_prepare(*model, SEED, LWT_PATHS, NULL, &err), LW_OK);
    assert_int_equal(lw_work_new(work, *model, &err), LW_OK);
    lw_posture_ask readings = {.kind = LW_BY_DRIVES};
    for (size_t i = 0; i < (*model)->spec->n_drive; i++) {
        readings.has_drive[i] = true;
        readings.drive[i] = drive[i];
    }
    lw_forward_ask ask = {.readings = &readings, .all = true};
    const lw_forward_answer *answer = NULL;
    assert_int_equal(lw_forward(&answer, *model, &ask, *work, &err), LW_OK);
    assert_int_equal(answer->found.not_converged, 0);
}

static cJSON *demo_file(const char *name)
{
    char path[512];
    (void)snprintf(path, sizeof path, "%s/deploy/demo/%s.json", LWT_SOURCE_DIR, name);
    FILE *from = fopen(path, "rb");
    assert_non_null(from);
    char *raw = calloc(1, 1 << 20);
    assert_non_null(raw);
    assert_true(fread(raw, 1, (1 << 20) - 1, from) > 0);
    (void)fclose(from);
    cJSON *file = cJSON_Parse(raw);
    assert_non_null(file);
    free(raw);
    return file;
}

/* A point of the document, millimetres to metres. */
static void point_of(double out[3], const cJSON *numbers)
{
    for (int i = 0; i < 3; i++) {
        out[i] = 1e-3 * cJSON_GetArrayItem(numbers, i)->valuedouble;
    }
}

static const cJSON *item(const cJSON *list, size_t i)
{
    return cJSON_GetArrayItem(list, (int)i);
}

/* A limb of the label stage: joints stand in the order shoulder, elbow, pivot a limb. */
typedef struct limb {
    double shoulder[3], elbow[3], top[3], crank, link;
} limb;

static limb limb_of(const cJSON *joints, size_t i)
{
    limb out;
    point_of(out.shoulder, cJSON_GetObjectItem(item(joints, 3 * i), "at"));
    point_of(out.elbow, cJSON_GetObjectItem(item(joints, 3 * i + 1), "at"));
    point_of(out.top, cJSON_GetObjectItem(item(joints, 3 * i + 2), "at"));
    out.crank = hypot(out.elbow[0] - out.shoulder[0], out.elbow[1] - out.shoulder[1]);
    out.link = hypot(out.top[0] - out.elbow[0], out.top[1] - out.elbow[1]);
    return out;
}

/* Three of the four readings are a square choice; positive ones turn about +z. The crank of the
 * fourth limb follows, its elbow to either side: 6 postures of the plate, 12 of the machine. */
static void label_stage_by_three_readings(void **state)
{
    (void)state;
    static const double turn[4] = {0.21, -0.16, 0.3, 0.12};
    cJSON *file = demo_file("label-stage");
    const cJSON *joints = cJSON_GetObjectItem(file, "joints");
    lw_model *model;
    lw_work *work;
    places *a;
    places *b;
    load(NULL, &a, &b);
    ask_demo(&model, &work, "label-stage", turn);
    const lw_set_info *set = &lw_model_report(model)->forward_set;
    assert_int_equal(set->n_drive, 3);
    probe p[4];
    double pivot[6];
    size_t other = 0 + 1 + 2 + 3;
    text t;
    begin(&t, 6);
    for (size_t i = 0; i < 3; i++) {
        limb l = limb_of(joints, set->drive[i]);
        double cs = cos(turn[set->drive[i]]);
        double sn = sin(turn[set->drive[i]]);
        double dx = l.elbow[0] - l.shoulder[0];
        double dy = l.elbow[1] - l.shoulder[1];
        const double knee[2] = {l.shoulder[0] + cs * dx - sn * dy,
                                l.shoulder[1] + sn * dx + cs * dy};
        write_planar(t.to, l.top, knee, l.link);
        memcpy(&pivot[2 * i], l.top, 2 * sizeof l.top[0]);
        p[i] = (probe){.body = model->spec->n_body - 1, .at = {l.top[0], l.top[1], 0}};
        other -= set->drive[i];
    }
    limb l = limb_of(joints, other);
    (void)fprintf(t.to, "(k %+.17e)^2 + (l %+.17e)^2 %+.17e;\n", -l.shoulder[0], -l.shoulder[1],
                  -l.crank * l.crank);
    (void)fprintf(t.to, "(x %+.17e*c %+.17e*s - k)^2 + ", l.top[0], -l.top[1]);
    (void)fprintf(t.to, "(y %+.17e*s %+.17e*c - l)^2 %+.17e;\n", l.top[0], l.top[1],
                  -l.link * l.link);
    /* bodies: bed, then crank and link a limb, then the plate */
    p[3] = (probe){.body = 1 + 2 * other, .at = {l.elbow[0], l.elbow[1], 0}};
    planar_places(b, &t, pivot, 1, 12);
    ours(a, model, work, 0, p, 4);
    expect_same("label stage by three readings", a, b, 12);
    drop(NULL, a, b);
    lw_work_free(work);
    lw_model_free(model);
    cJSON_Delete(file);
}

/* ---- six struts ------------------------------------------------------------------------------ */

/* base and plate points, the latter in a frame that stands at the identity when b is drawn. */
static void strut_places(places *out, const double *base, const double *plate,
                         const double *length, unsigned seed)
{
    lwt_phc *phc = calloc(1, sizeof *phc);
    assert_non_null(phc);
    if (!lwt_phc_struts(phc, base, plate, length, seed)) {
        lwt_fail("phc (Debian package phcpack) is not here, or its answer cannot be read");
    }
    out->n = (size_t)phc->finite;
    out->width = 18;
    for (size_t i = 0; i < out->n; i++) {
        for (size_t k = 0; k < 6; k++) {
            for (size_t r = 0; r < 3; r++) {
                double complex v = phc->all[i].pos_m[r];
                for (size_t c = 0; c < 3; c++) {
                    v += phc->all[i].rot[3 * r + c] * plate[3 * k + c];
                }
                out->at[i][3 * k + r] = v;
            }
        }
    }
    free(phc);
}

static void forty_postures_of_dietmaier(void **state)
{
    (void)state;
    cJSON *file = lwt_case_file("dietmaier-1998/cases.json");
    double base[18];
    double plate[18];
    double length[6];
    assert_int_equal(lwt_numbers(file, "base", base, 18), 18);
    assert_int_equal(lwt_numbers(file, "platform", plate, 18), 18);
    assert_int_equal(lwt_numbers(file, "length", length, 6), 6);
    lw_frame ref = lwt_frame_zyx((const double[3]){0.4, 0.3, 0.8}, 0.3, -0.2, 0.4);
    lwt_machine *m = lwt_kit_struts("forty", 6, base, plate, &ref);
    places *a;
    places *b;
    load(m, &a, &b);
    double drive[6];
    probe p[6];
    lwt_readings_of_lengths(drive, m, length);
    for (size_t i = 0; i < 6; i++) {
        p[i].body = 1;
        p[i].direction = false;
        lwt_frame_point(p[i].at, &ref, &plate[3 * i]);
    }
    assert_true(lwt_forward_all(m, drive)->complete);
    ours(a, m->model, m->work, 0, p, 6);
    strut_places(b, base, plate, length, 8);
    expect_same("six struts with forty real postures", a, b, 40);
    drop(m, a, b);
    cJSON_Delete(file);
}

static void tilt_table_by_its_six_readings(void **state)
{
    (void)state;
    static const double longer[6] = {0.021, -0.014, 0.009, 0.017, -0.02, 0.011};
    cJSON *file = demo_file("tilt-table");
    const cJSON *rods = cJSON_GetObjectItem(file, "rods");
    lw_model *model;
    lw_work *work;
    places *a;
    places *b;
    load(NULL, &a, &b);
    ask_demo(&model, &work, "tilt-table", longer);
    double base[18];
    double plate[18];
    double length[6];
    probe p[6];
    for (size_t i = 0; i < 6; i++) {
        const cJSON *ends = cJSON_GetObjectItem(item(rods, i), "ends");
        point_of(&base[3 * i], item(ends, 0));
        point_of(&plate[3 * i], item(ends, 1));
        p[i] = (probe){.body = 1, .at = {plate[3 * i], plate[3 * i + 1], plate[3 * i + 2]}};
        double d[3];
        for (size_t k = 0; k < 3; k++) {
            d[k] = plate[3 * i + k] - base[3 * i + k];
        }
        length[i] = lwt_norm(d) + longer[i];
    }
    ours(a, model, work, 0, p, 6);
    strut_places(b, base, plate, length, 9);
    expect_same("tilt table by its six readings", a, b, 40);
    drop(NULL, a, b);
    lw_work_free(work);
    lw_model_free(model);
    cJSON_Delete(file);
}

/* ---- three legs of hinge, slide and ball ----------------------------------------------------- */

/* Ball i lies in the plane of its leg, u_i outward and w_i up from the hinge at (cos, sin, 0):
 * three leg lengths and three distances between balls. */
static void three_legs_of_hinge_slide_and_ball(void **state)
{
    (void)state;
    static const double drive[3] = {0.06, -0.05, 0.02};
    static const char *const name[6] = {"u0", "u1", "u2", "w0", "w1", "w2"};
    lwt_machine *m = subject("three-rps");
    places *a;
    places *b;
    load(m, &a, &b);
    double c[3];
    double s[3];
    probe p[3];
    text t;
    begin(&t, 6);
    for (size_t i = 0; i < 3; i++) {
        c[i] = cos(120.0 * LWT_DEG * (double)i + 0.1);
        s[i] = sin(120.0 * LWT_DEG * (double)i + 0.1);
        double leg = hypot(0.4, 0.8) + drive[i];
        (void)fprintf(t.to, "u%zu^2 + w%zu^2 %+.17e;\n", i, i, -leg * leg);
        p[i] = (probe){.body = 1, .at = {0.6 * c[i], 0.6 * s[i], 0.8}};
    }
    for (size_t i = 0; i < 3; i++) {
        size_t k = (i + 1) % 3;
        (void)fprintf(t.to, "(%+.17e + %+.17e*u%zu %+.17e*u%zu)^2 + ", c[i] - c[k], c[i], i, -c[k],
                      k);
        (void)fprintf(t.to, "(%+.17e + %+.17e*u%zu %+.17e*u%zu)^2 + ", s[i] - s[k], s[i], i, -s[k],
                      k);
        (void)fprintf(t.to, "(w%zu - w%zu)^2 %+.17e;\n", i, k, -3.0 * 0.36);
    }
    lwt_phc_list *list = calloc(1, sizeof *list);
    assert_non_null(list);
    solve(list, &t, name, 6, 13);
    b->n = list->n;
    b->width = 9;
    for (size_t i = 0; i < list->n; i++) {
        for (size_t k = 0; k < 3; k++) {
            b->at[i][3 * k] = c[k] * (1.0 + list->value[i][k]);
            b->at[i][3 * k + 1] = s[k] * (1.0 + list->value[i][k]);
            b->at[i][3 * k + 2] = list->value[i][3 + k];
        }
    }
    free(list);
    assert_true(lwt_forward_all(m, drive)->complete);
    ours(a, m->model, m->work, 0, p, 3);
    expect_same("three legs of hinge, slide and ball", a, b, 16);
    drop(m, a, b);
}

/* ---- six revolutes --------------------------------------------------------------------------- */

/* One factor of a term: a number, or an unknown component of an axis. */
typedef struct factor {
    double number;
    const char *name; /* NULL: the number */
} factor;

static void write_product(FILE *to, double k, factor a, factor b)
{
    k *= (a.name == NULL ? a.number : 1.0) * (b.name == NULL ? b.number : 1.0);
    (void)fprintf(to, " %+.17e", k);
    if (a.name != NULL) {
        (void)fprintf(to, "*%s", a.name);
    }
    if (b.name != NULL) {
        (void)fprintf(to, "*%s", b.name);
    }
}

static const char *const AXES[11] = {"u1", "v1", "u2", "v2", "w2", "u3",
                                     "v3", "w3", "u4", "v4", "w4"};

/* Axes z0 (the frame's) to z5 (which the pose gives) of a general arm with a distal table. Unknown
 * are z1 to z4: unit vectors, at the twists to one another, and the links from axis to axis, d z +
 * a / sin(alpha) z x z', sum up to the hand (L.-W. Tsai, A. Morgan, J. Mech. 107, 1985). The third
 * component of z1 is cos(alpha1). */
static void write_arm(FILE *to, const lwt_table *arm, const lw_frame *pose)
{
    factor z[6][3];
    double rest[3];
    memset(z, 0, sizeof z);
    z[0][2].number = 1.0;
    z[1][2].number = cos(arm->alpha[0]);
    for (size_t i = 0; i < 11; i++) {
        size_t at = i < 2 ? 3 + i : 4 + i;
        z[at / 3][at % 3].name = AXES[i];
    }
    for (size_t i = 0; i < 3; i++) {
        z[5][i].number = pose->rot[3 * i + 1] * sin(arm->alpha[5]) +
                         pose->rot[3 * i + 2] * cos(arm->alpha[5]);
        rest[i] = pose->pos_m[i] - arm->a[5] * pose->rot[3 * i] - arm->d[5] * z[5][i].number;
    }
    for (size_t k = 1; k < 5; k++) {
        for (size_t i = 0; i < 3; i++) {
            write_product(to, 1.0, z[k][i], z[k][i]);
        }
        (void)fprintf(to, " - 1;\n");
    }
    for (size_t k = 1; k < 5; k++) {
        for (size_t i = 0; i < 3; i++) {
            write_product(to, 1.0, z[k][i], z[k + 1][i]);
        }
        (void)fprintf(to, " %+.17e;\n", -cos(arm->alpha[k]));
    }
    for (size_t i = 0; i < 3; i++) {
        size_t j = (i + 1) % 3;
        size_t l = (i + 2) % 3;
        for (size_t k = 0; k < 5; k++) {
            double link = arm->a[k] / sin(arm->alpha[k]);
            write_product(to, arm->d[k], z[k][i], (factor){1.0, NULL});
            write_product(to, link, z[k][j], z[k + 1][l]);
            write_product(to, -link, z[k][l], z[k + 1][j]);
        }
        (void)fprintf(to, " %+.17e;\n", -rest[i]);
    }
}

static void sixteen_postures_of_a_general_arm(void **state)
{
    (void)state;
    static const double ref[6] = {0.3, -0.4, 0.6, -0.2, 0.5, 0.1};
    static const double to[6] = {14 * LWT_DEG, 29.7 * LWT_DEG,  -45 * LWT_DEG,
                                 71 * LWT_DEG, -63 * LWT_DEG, 10 * LWT_DEG};
    cJSON *file = lwt_case_file("raghavan-roth-1990/cases.json");
    lwt_table arm;
    lwt_table_read(&arm, file, 1.0);
    lwt_machine *m = lwt_kit_arm("general-arm", &arm, ref, "x y z rx ry rz");
    places *a;
    places *b;
    load(m, &a, &b);
    lw_frame pose = lwt_table_forward(&arm, to);
    text t;
    begin(&t, 11);
    write_arm(t.to, &arm, &pose);
    lwt_phc_list *list = calloc(1, sizeof *list);
    assert_non_null(list);
    solve(list, &t, AXES, 11, 14);
    b->n = list->n;
    b->width = 12;
    for (size_t i = 0; i < list->n; i++) {
        for (size_t k = 0; k < 11; k++) {
            b->at[i][k < 2 ? k : k + 1] = list->value[i][k];
        }
        b->at[i][2] = cos(arm.alpha[0]);
    }
    free(list);
    probe p[4];
    for (size_t k = 0; k < 4; k++) {
        const double *axis = m->spec->joint[k + 1].axis;
        p[k] = (probe){.body = k + 1, .direction = true, .at = {axis[0], axis[1], axis[2]}};
    }
    assert_true(lwt_inverse(m, &pose, NULL, NULL, NULL)->complete);
    ours(a, m->model, m->work, 1, p, 4);
    expect_same("general arm", a, b, 16);
    drop(m, a, b);
    cJSON_Delete(file);
}

int main(void)
{
    lw_init();
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(planar_platform_on_three_struts),
        cmocka_unit_test(label_stage_by_three_readings),
        cmocka_unit_test(forty_postures_of_dietmaier),
        cmocka_unit_test(tilt_table_by_its_six_readings),
        cmocka_unit_test(three_legs_of_hinge_slide_and_ball),
        cmocka_unit_test(sixteen_postures_of_a_general_arm),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
