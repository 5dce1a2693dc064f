/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Six-strut platforms through phc, see lwt_phc.h. With a quaternion e of any length and g = t e, a
 * strut reads |g + e b - a e|^2 = L^2 |e|^2, and e . g = 0; a linear form in e set to 1 picks the
 * scale (Study; Wampler 1996). */
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

/* One "name : re im" line into v: e0..e3, then g0..g3. */
static bool read_value(double v[8][2], const char *line)
{
    char name = 0;
    int index = 0;
    double re = 0.0;
    double im = 0.0;
    if (sscanf(line, " %c%d : %lf %lf", &name, &index, &re,
               &im) != 4 || index < (name == 'e') || index > 3 ||
        (name != 'e' && name != 'g')) {
        return false;
    }
    v[(name == 'g' ? 4 : 0) + index][0] = re;
    v[(name == 'g' ? 4 : 0) + index][1] = im;
    return true;
}

static void take(lwt_phc *out, double v[8][2])
{
    double imag = 0.0;
    double size = 0.0;
    double e[4] = {0, 0, 0, 0};
    double square = 0.0;
    for (int i = 0; i < 8; i++) {
        imag = fmax(imag, fabs(v[i][1]));
        size = fmax(size, hypot(v[i][0], v[i][1]));
    }
    out->finite++;
    if (!(imag < 1e-7 * size) || out->n >= LWT_PHC_MAX) {
        return;
    }
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            e[i] += TURN[i][j] * v[j][0];
        }
        square += e[i] * e[i];
    }
    const double g[4] = {v[4][0], v[5][0], v[6][0], v[7][0]};
    /* t = g conj(e) / |e|^2 */
    const double t[3] = {
        (-g[0] * e[1] + g[1] * e[0] - g[2] * e[3] + g[3] * e[2]) / square,
        (-g[0] * e[2] + g[1] * e[3] + g[2] * e[0] - g[3] * e[1]) / square,
        (-g[0] * e[3] - g[1] * e[2] + g[2] * e[1] + g[3] * e[0]) / square,
    };
    out->real[out->n++] = lwt_frame_quat(t, e);
}

/* The last list of solutions in the file. Singular ends are no isolated solutions: where |e|^2
 * vanishes there is no rotation; TURN keeps that square. */
static bool read_answer(lwt_phc *out, const char *path)
{
    char line[512];
    double v[8][2] = {{1.0, 0.0}};
    int have = 0;
    FILE *from = fopen(path, "r");
    if (from == NULL) {
        return false;
    }
    bool listed = false;
    while (fgets(line, sizeof line, from) != NULL) {
        if (strstr(line, "THE SOLUTIONS") != NULL) {
            out->finite = out->n = 0;
            have = 0;
            listed = true;
        } else if (listed && strncmp(line, "==", 2) == 0 && strstr(line, "rco") != NULL) {
            double rco = 0.0;
            const char *at = strstr(line, "rco :");
            double re = 0.0;
            double im = 0.0;
            double size = 0.0;
            for (int i = 0; i < 4; i++) {
                re += v[i][0] * v[i][0] - v[i][1] * v[i][1];
                im += 2.0 * v[i][0] * v[i][1];
                size += v[i][0] * v[i][0] + v[i][1] * v[i][1];
            }
            bool regular = at != NULL && sscanf(at, "rco : %lf", &rco) == 1 && rco > 1e-10;
            if (have == 7 && regular && hypot(re, im) > 1e-4 * size) {
                take(out, v);
            }
            have = 0;
        } else if (listed) {
            have += read_value(v, line);
        }
    }
    (void)fclose(from);
    return listed;
}

bool lwt_phc_struts(lwt_phc *out, const double *base, const double *plate, const double *length_m,
                    unsigned seed)
{
    char folder[] = "/tmp/lwt-phc-XXXXXX";
    char in[64];
    char answer[64];
    memset(out, 0, sizeof *out);
    if (mkdtemp(folder) == NULL) {
        return false;
    }
    (void)snprintf(in, sizeof in, "%s/in", folder);
    (void)snprintf(answer, sizeof answer, "%s/out", folder);
    FILE *to = fopen(in, "w");
    bool good = to != NULL;
    if (good) {
        write_system(to, base, plate, length_m);
        good = fclose(to) == 0 && run(in, answer, seed, &out->seconds) && read_answer(out, answer);
    }
    (void)unlink(in);
    (void)unlink(answer);
    (void)rmdir(folder);
    return good;
}
