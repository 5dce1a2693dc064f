/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Systems through phc, see lwt_phc.h. Six-strut platforms: with a quaternion e of any length and
 * g = t e, a strut reads |g + e b - a e|^2 = L^2 |e|^2, and e . g = 0; a linear form in e set to 1
 * picks the scale (Study; Wampler 1996). */
#define _DEFAULT_SOURCE

#include "lwt_phc.h"

#include <math.h>
#include <spawn.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/wait.h>
#include <unistd.h>

#include "lwt_geom.h"

/* e = TURN (1, e1, e2, e3): an orthogonal matrix, so that no attitude in particular is left out. */
static const double TURN[4][4] = {{0.7, -0.1, 0.5, -0.5},
                                  {0.1, 0.7, 0.5, 0.5},
                                  {-0.5, -0.5, 0.7, 0.1},
                                  {0.5, -0.5, -0.1, 0.7}};

static void turned(double out[4][4], double m[4][4])
{
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            out[i][j] = 0.0;
            for (int k = 0; k < 4; k++) {
                out[i][j] += m[i][k] * TURN[k][j];
            }
        }
    }
}

/* Matrix of e -> e b - a e for pure a, b. */
static void strut_matrix(double m[4][4], const double a[3], const double b[3])
{
    const double right[4][4] = {{0, -b[0], -b[1], -b[2]},
                                {b[0], 0, b[2], -b[1]},
                                {b[1], -b[2], 0, b[0]},
                                {b[2], b[1], -b[0], 0}};
    const double left[4][4] = {{0, -a[0], -a[1], -a[2]},
                               {a[0], 0, -a[2], a[1]},
                               {a[1], a[2], 0, -a[0]},
                               {a[2], -a[1], a[0], 0}};
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            m[i][j] = right[i][j] - left[i][j];
        }
    }
}

static void write_term(FILE *to, double c, const char *name, int i, int j)
{
    (void)fprintf(to, " %+.17e", c);
    if (i >= 0) {
        (void)fprintf(to, "*%s%d", name, i);
    }
    if (j > 0) { /* e0 is 1 */
        (void)fprintf(to, "*e%d", j);
    }
}

static void write_system(FILE *to, const double *base, const double *plate, const double *length)
{
    (void)fprintf(to, "7\n");
    for (int s = 0; s < 6; s++) {
        double plain[4][4];
        double m[4][4];
        strut_matrix(plain, &base[3 * s], &plate[3 * s]);
        turned(m, plain);
        for (int i = 0; i < 4; i++) {
            (void)fprintf(to, "%sg%d*g%d", i > 0 ? " + " : "", i, i);
            for (int j = 0; j < 4; j++) {
                write_term(to, 2.0 * m[i][j], "g", i, j);
            }
        }
        for (int i = 0; i < 4; i++) {
            for (int j = i; j < 4; j++) {
                double c = i == j ? -length[s] * length[s] : 0.0;
                for (int k = 0; k < 4; k++) {
                    c += m[k][i] * m[k][j] * (i == j ? 1.0 : 2.0);
                }
                write_term(to, c, "e", i > 0 ? i : -1, j);
            }
        }
        (void)fprintf(to, ";\n");
    }
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            write_term(to, TURN[i][j], "g", i, j);
        }
    }
    (void)fprintf(to, ";\n");
}

static double children_s(void)
{
    struct rusage used;
    (void)getrusage(RUSAGE_CHILDREN, &used);
    return (double)(used.ru_utime.tv_sec + used.ru_stime.tv_sec) +
           1e-6 * (double)(used.ru_utime.tv_usec + used.ru_stime.tv_usec);
}

static bool run(const char *in, const char *out, unsigned seed, double *seconds)
{
    extern char **environ;
    char option[24];
    char *args[] = {"phc", "-b", option, (char *)in, (char *)out, NULL};
    pid_t pid;
    int status = 1;
    (void)snprintf(option, sizeof option, "-0%u", seed);
    double before = children_s();
    if (posix_spawnp(&pid, "phc", NULL, NULL, args, environ) != 0 ||
        waitpid(pid, &status, 0) != pid) {
        return false;
    }
    *seconds = children_s() - before;
    return WIFEXITED(status) && WEXITSTATUS(status) == 0;
}

/* One "name : re im" line; the index of the name, n_name for any other line. */
static size_t read_value(double complex *value, const char *line, const char *const *name,
                         size_t n_name)
{
    char word[16];
    double re = 0.0;
    double im = 0.0;
    if (sscanf(line, " %15[A-Za-z0-9] : %lf %lf", word, &re, &im) == 3) {
        for (size_t i = 0; i < n_name; i++) {
            if (strcmp(word, name[i]) == 0) {
                *value = re + im * I;
                return i;
            }
        }
    }
    return n_name;
}

/* The last list of solutions in the file. Each solution ends in a line with phc's verdict: what it
 * calls singular is no isolated solution, or none that doubles can tell. */
static bool read_answer(lwt_phc_list *out, const char *path, const char *const *name,
                        size_t n_name)
{
    char line[512];
    double complex v[LWT_PHC_NAMES];
    double complex one = 0.0;
    size_t have = 0;
    FILE *from = fopen(path, "r");
    if (from == NULL) {
        return false;
    }
    bool listed = false;
    bool fits = true;
    while (fgets(line, sizeof line, from) != NULL) {
        if (strstr(line, "THE SOLUTIONS") != NULL) {
            out->n = have = 0;
            listed = true;
        } else if (listed && strncmp(line, "==", 2) == 0 && strstr(line, "rco") != NULL) {
            fits = fits && out->n < LWT_PHC_MAX;
            if (fits && have == n_name && strstr(line, "regular") != NULL) {
                memcpy(out->value[out->n++], v, n_name * sizeof v[0]);
            }
            have = 0;
        } else if (listed) {
            size_t i = read_value(&one, line, name, n_name);
            if (i < n_name) {
                v[i] = one;
                have++;
            }
        }
    }
    (void)fclose(from);
    return listed && fits;
}

bool lwt_phc_solve(lwt_phc_list *out, const char *system, const char *const *name, size_t n_name,
                   unsigned seed)
{
    char folder[] = "/tmp/lwt-phc-XXXXXX";
    char in[64];
    char answer[64];
    memset(out, 0, sizeof *out);
    if (n_name > LWT_PHC_NAMES || mkdtemp(folder) == NULL) {
        return false;
    }
    (void)snprintf(in, sizeof in, "%s/in", folder);
    (void)snprintf(answer, sizeof answer, "%s/out", folder);
    FILE *to = fopen(in, "w");
    bool good = to != NULL && fputs(system, to) >= 0;
    good = to != NULL && fclose(to) == 0 && good && run(in, answer, seed, &out->seconds) &&
           read_answer(out, answer, name, n_name);
    (void)unlink(in);
    (void)unlink(answer);
    (void)rmdir(folder);
    return good;
}

/* ---- six-strut platforms --------------------------------------------------------------------- */

static void place_of(lwt_place *out, const double complex e[4], const double complex g[4])
{
    double complex n = 1.0 / (e[0] * e[0] + e[1] * e[1] + e[2] * e[2] + e[3] * e[3]);
    /* t = g conj(e) / |e|^2 */
    out->pos_m[0] = (-g[0] * e[1] + g[1] * e[0] - g[2] * e[3] + g[3] * e[2]) * n;
    out->pos_m[1] = (-g[0] * e[2] + g[1] * e[3] + g[2] * e[0] - g[3] * e[1]) * n;
    out->pos_m[2] = (-g[0] * e[3] - g[1] * e[2] + g[2] * e[1] + g[3] * e[0]) * n;
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            out->rot[3 * i + j] = 2.0 * n * e[i + 1] * e[j + 1];
        }
        out->rot[4 * i] += 2.0 * n * e[0] * e[0] - 1.0;
    }
    for (int i = 0; i < 3; i++) {
        int a = (i + 1) % 3;
        int b = (i + 2) % 3;
        out->rot[3 * b + a] += 2.0 * n * e[0] * e[i + 1];
        out->rot[3 * a + b] -= 2.0 * n * e[0] * e[i + 1];
    }
}

static void take(lwt_phc *out, const double complex *v)
{
    double imag = 0.0;
    double size = 0.0;
    double real[4] = {0, 0, 0, 0};
    double t[3];
    double complex e[4] = {0, 0, 0, 0};
    double complex square = 0.0;
    double plain = 0.0;
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            e[i] += TURN[i][j] * (j == 0 ? 1.0 : v[j - 1]);
        }
        square += e[i] * e[i];
        plain += creal(e[i] * conj(e[i]));
        real[i] = creal(e[i]);
    }
    /* Where |e|^2 vanishes there is no rotation. */
    if (!(cabs(square) > 1e-4 * plain) || out->finite >= LWT_PHC_MAX) {
        return;
    }
    for (int i = 0; i < 7; i++) {
        imag = fmax(imag, fabs(cimag(v[i])));
        size = fmax(size, cabs(v[i]));
    }
    lwt_place *at = &out->all[out->finite++];
    place_of(at, e, v + 3);
    if (imag < 1e-7 * fmax(size, 1.0)) {
        for (int i = 0; i < 3; i++) {
            t[i] = creal(at->pos_m[i]);
        }
        out->real[out->n++] = lwt_frame_quat(t, real);
    }
}

bool lwt_phc_struts(lwt_phc *out, const double *base, const double *plate, const double *length_m,
                    unsigned seed)
{
    static const char *const name[7] = {"e1", "e2", "e3", "g0", "g1", "g2", "g3"};
    char *text = NULL;
    size_t size = 0;
    lwt_phc_list *list = calloc(1, sizeof *list);
    FILE *to = open_memstream(&text, &size);
    memset(out, 0, sizeof *out);
    bool good = list != NULL && to != NULL;
    if (good) {
        write_system(to, base, plate, length_m);
    }
    good = to != NULL && fclose(to) == 0 && good && lwt_phc_solve(list, text, name, 7, seed);
    for (size_t i = 0; good && i < list->n; i++) {
        take(out, list->value[i]);
    }
    out->seconds = good ? list->seconds : 0.0;
    free(text);
    free(list);
    return good;
}
