/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Geometry for tests, see lwt_geom.h. Plain textbook formulas on purpose. */
#include "lwt_geom.h"

#include <math.h>
#include <string.h>

enum { MAT_MAX = 24 };

double lwt_dot(const double a[3], const double b[3])
{
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

void lwt_cross(double out[3], const double a[3], const double b[3])
{
    double x = a[1] * b[2] - a[2] * b[1];
    double y = a[2] * b[0] - a[0] * b[2];
    double z = a[0] * b[1] - a[1] * b[0];
    out[0] = x;
    out[1] = y;
    out[2] = z;
}

double lwt_norm(const double a[3])
{
    return sqrt(lwt_dot(a, a));
}

double lwt_wrap(double angle_rad)
{
    double wrapped = remainder(angle_rad, 2.0 * LWT_PI);
    return wrapped <= -LWT_PI ? LWT_PI : wrapped;
}

lw_frame lwt_frame_identity(void)
{
    return (lw_frame){.rot = {1, 0, 0, 0, 1, 0, 0, 0, 1}, .pos_m = {0, 0, 0}};
}

void lwt_frame_vector(double out[3], const lw_frame *frame, const double vector[3])
{
    double turned[3];
    for (size_t i = 0; i < 3; i++) {
        turned[i] = lwt_dot(&frame->rot[3 * i], vector);
    }
    memcpy(out, turned, sizeof turned);
}

void lwt_frame_point(double out[3], const lw_frame *frame, const double point[3])
{
    lwt_frame_vector(out, frame, point);
    for (size_t i = 0; i < 3; i++) {
        out[i] += frame->pos_m[i];
    }
}

lw_frame lwt_frame_mul(const lw_frame *a, const lw_frame *b)
{
    lw_frame out;
    lwt_mat_mul(out.rot, a->rot, b->rot, 3, 3, 3);
    lwt_frame_point(out.pos_m, a, b->pos_m);
    return out;
}

lw_frame lwt_frame_inverse(const lw_frame *a)
{
    lw_frame out = {.pos_m = {0, 0, 0}};
    for (size_t i = 0; i < 3; i++) {
        for (size_t j = 0; j < 3; j++) {
            out.rot[3 * i + j] = a->rot[3 * j + i];
        }
    }
    lwt_frame_vector(out.pos_m, &out, a->pos_m);
    for (size_t i = 0; i < 3; i++) {
        out.pos_m[i] = -out.pos_m[i];
    }
    return out;
}

lw_frame lwt_frame_turn(const double axis[3], const double at_m[3], double angle_rad)
{
    double length = lwt_norm(axis);
    double u[3] = {axis[0] / length, axis[1] / length, axis[2] / length};
    double s = sin(angle_rad);
    double half = sin(0.5 * angle_rad);
    double v = 2.0 * half * half; /* 1 - cos, without loss for small angles */
    double c = 1.0 - v;
    lw_frame out = {.rot = {c + v * u[0] * u[0], v * u[0] * u[1] - s * u[2],
                            v * u[0] * u[2] + s * u[1], v * u[1] * u[0] + s * u[2],
                            c + v * u[1] * u[1], v * u[1] * u[2] - s * u[0],
                            v * u[2] * u[0] - s * u[1], v * u[2] * u[1] + s * u[0],
                            c + v * u[2] * u[2]}};
    double moved[3];
    lwt_frame_vector(moved, &out, at_m);
    for (size_t i = 0; i < 3; i++) {
        out.pos_m[i] = at_m[i] - moved[i];
    }
    return out;
}

lw_frame lwt_frame_slide(const double axis[3], double dist_m)
{
    lw_frame out = lwt_frame_identity();
    double length = lwt_norm(axis);
    for (size_t i = 0; i < 3; i++) {
        out.pos_m[i] = axis[i] / length * dist_m;
    }
    return out;
}

lw_frame lwt_frame_planar(double x_m, double y_m, double rz_rad)
{
    return lwt_frame_zyx((const double[3]){x_m, y_m, 0.0}, rz_rad, 0.0, 0.0);
}

lw_frame lwt_frame_quat(const double pos_m[3], const double quat[4])
{
    double n = sqrt(quat[0] * quat[0] + quat[1] * quat[1] + quat[2] * quat[2] + quat[3] * quat[3]);
    double w = quat[0] / n;
    double x = quat[1] / n;
    double y = quat[2] / n;
    double z = quat[3] / n;
    return (lw_frame){.rot = {1 - 2 * (y * y + z * z), 2 * (x * y - w * z), 2 * (x * z + w * y),
                              2 * (x * y + w * z), 1 - 2 * (x * x + z * z), 2 * (y * z - w * x),
                              2 * (x * z - w * y), 2 * (y * z + w * x), 1 - 2 * (x * x + y * y)},
                      .pos_m = {pos_m[0], pos_m[1], pos_m[2]}};
}

lw_frame lwt_frame_zyx(const double pos_m[3], double yaw_rad, double pitch_rad, double roll_rad)
{
    static const double zero[3] = {0, 0, 0};
    lw_frame yaw = lwt_frame_turn((const double[3]){0, 0, 1}, zero, yaw_rad);
    lw_frame pitch = lwt_frame_turn((const double[3]){0, 1, 0}, zero, pitch_rad);
    lw_frame roll = lwt_frame_turn((const double[3]){1, 0, 0}, zero, roll_rad);
    lw_frame both = lwt_frame_mul(&yaw, &pitch);
    lw_frame out = lwt_frame_mul(&both, &roll);
    memcpy(out.pos_m, pos_m, sizeof out.pos_m);
    return out;
}

/* The column of the matrix 4 q q^T with the largest diagonal entry, so that nothing cancels. */
void lwt_quat_of(double quat[4], const lw_frame *frame)
{
    const double *r = frame->rot;
    double diag[4] = {1 + r[0] + r[4] + r[8], 1 + r[0] - r[4] - r[8], 1 - r[0] + r[4] - r[8],
                      1 - r[0] - r[4] + r[8]};
    size_t big = 0;
    for (size_t i = 1; i < 4; i++) {
        if (diag[i] > diag[big]) {
            big = i;
        }
    }
    const double table[4][4] = {{diag[0], r[7] - r[5], r[2] - r[6], r[3] - r[1]},
                                {r[7] - r[5], diag[1], r[1] + r[3], r[2] + r[6]},
                                {r[2] - r[6], r[1] + r[3], diag[2], r[5] + r[7]},
                                {r[3] - r[1], r[2] + r[6], r[5] + r[7], diag[3]}};
    double scale = 0.5 / sqrt(diag[big]);
    double sign = table[big][0] < 0.0 ? -1.0 : 1.0;
    for (size_t i = 0; i < 4; i++) {
        quat[i] = sign * scale * table[big][i];
    }
}

double lwt_frame_distance(const lw_frame *a, const lw_frame *b)
{
    double d[3] = {b->pos_m[0] - a->pos_m[0], b->pos_m[1] - a->pos_m[1],
                   b->pos_m[2] - a->pos_m[2]};
    return lwt_norm(d);
}

void lwt_frame_turn_between(double out[3], const lw_frame *a, const lw_frame *b)
{
    lw_frame back = lwt_frame_inverse(a);
    lw_frame between = lwt_frame_mul(b, &back);
    double q[4];
    lwt_quat_of(q, &between);
    double s = lwt_norm(&q[1]);
    double angle = 2.0 * atan2(s, q[0]);
    for (size_t i = 0; i < 3; i++) {
        out[i] = s > 0.0 ? q[i + 1] / s * angle : 0.0;
    }
}

double lwt_frame_angle(const lw_frame *a, const lw_frame *b)
{
    double turn[3];
    lwt_frame_turn_between(turn, a, b);
    return lwt_norm(turn);
}

lw_frame lwt_dh_distal(double a_m, double alpha_rad, double d_m, double theta_rad)
{
    static const double zero[3] = {0, 0, 0};
    static const double x[3] = {1, 0, 0};
    static const double z[3] = {0, 0, 1};
    lw_frame turn = lwt_frame_turn(z, zero, theta_rad);
    lw_frame twist = lwt_frame_turn(x, zero, alpha_rad);
    lw_frame shift = lwt_frame_identity();
    shift.pos_m[0] = a_m;
    shift.pos_m[2] = d_m;
    lw_frame half = lwt_frame_mul(&turn, &shift);
    return lwt_frame_mul(&half, &twist);
}

lw_frame lwt_dh_proximal(double a_m, double alpha_rad, double d_m, double theta_rad)
{
    static const double zero[3] = {0, 0, 0};
    static const double x[3] = {1, 0, 0};
    static const double z[3] = {0, 0, 1};
    lw_frame twist = lwt_frame_turn(x, zero, alpha_rad);
    twist.pos_m[0] = a_m;
    lw_frame turn = lwt_frame_turn(z, zero, theta_rad);
    turn.pos_m[2] = d_m;
    return lwt_frame_mul(&twist, &turn);
}

void lwt_mat_mul(double *out, const double *a, const double *b, size_t rows, size_t inner,
                 size_t cols)
{
    for (size_t i = 0; i < rows; i++) {
        for (size_t j = 0; j < cols; j++) {
            double sum = 0.0;
            for (size_t k = 0; k < inner; k++) {
                sum += a[i * inner + k] * b[k * cols + j];
            }
            out[i * cols + j] = sum;
        }
    }
}

static void swap_rows(double *m, size_t n, size_t i, size_t j)
{
    for (size_t k = 0; k < n; k++) {
        double keep = m[i * n + k];
        m[i * n + k] = m[j * n + k];
        m[j * n + k] = keep;
    }
}

double lwt_det(const double *a, size_t n)
{
    double m[MAT_MAX * MAT_MAX];
    if (n > MAT_MAX) {
        return (double)NAN;
    }
    memcpy(m, a, n * n * sizeof *m);
    double det = 1.0;
    for (size_t c = 0; c < n; c++) {
        size_t pivot = c;
        for (size_t r = c + 1; r < n; r++) {
            if (fabs(m[r * n + c]) > fabs(m[pivot * n + c])) {
                pivot = r;
            }
        }
        if (m[pivot * n + c] == 0.0) {
            return 0.0;
        }
        if (pivot != c) {
            swap_rows(m, n, pivot, c);
            det = -det;
        }
        det *= m[c * n + c];
        for (size_t r = c + 1; r < n; r++) {
            double f = m[r * n + c] / m[c * n + c];
            for (size_t k = c; k < n; k++) {
                m[r * n + k] -= f * m[c * n + k];
            }
        }
    }
    return det;
}

/* Turns columns p and q of the n_row x n_col matrix so that they stand at right angles; returns
 * false if they did so already. */
static bool turn_columns(double *m, size_t n_row, size_t n_col, size_t p, size_t q)
{
    double pp = 0.0;
    double qq = 0.0;
    double pq = 0.0;
    for (size_t i = 0; i < n_row; i++) {
        pp += m[i * n_col + p] * m[i * n_col + p];
        qq += m[i * n_col + q] * m[i * n_col + q];
        pq += m[i * n_col + p] * m[i * n_col + q];
    }
    if (!(fabs(pq) > 1e-16 * sqrt(pp * qq)) || pq == 0.0) {
        return false;
    }
    double zeta = (qq - pp) / (2.0 * pq);
    double t = (zeta < 0.0 ? -1.0 : 1.0) / (fabs(zeta) + sqrt(1.0 + zeta * zeta));
    double c = 1.0 / sqrt(1.0 + t * t);
    double s = c * t;
    for (size_t i = 0; i < n_row; i++) {
        double x = m[i * n_col + p];
        double y = m[i * n_col + q];
        m[i * n_col + p] = c * x - s * y;
        m[i * n_col + q] = s * x + c * y;
    }
    return true;
}

void lwt_singular_values(double *out, const double *a, size_t rows, size_t cols)
{
    double m[MAT_MAX * MAT_MAX];
    /* Work on the tall side, so that the columns are as many as the values wanted. */
    bool tall = rows >= cols;
    size_t n_row = tall ? rows : cols;
    size_t n_col = tall ? cols : rows;
    for (size_t i = 0; i < n_row; i++) {
        for (size_t j = 0; j < n_col; j++) {
            m[i * n_col + j] = tall ? a[i * cols + j] : a[j * cols + i];
        }
    }
    bool moved = true;
    for (int sweep = 0; sweep < 60 && moved; sweep++) {
        moved = false;
        for (size_t p = 0; p + 1 < n_col; p++) {
            for (size_t q = p + 1; q < n_col; q++) {
                moved = turn_columns(m, n_row, n_col, p, q) || moved;
            }
        }
    }
    for (size_t j = 0; j < n_col; j++) {
        double sum = 0.0;
        for (size_t i = 0; i < n_row; i++) {
            sum += m[i * n_col + j] * m[i * n_col + j];
        }
        double value = sqrt(sum);
        size_t k = j;
        for (; k > 0 && out[k - 1] < value; k--) {
            out[k] = out[k - 1];
        }
        out[k] = value;
    }
}

double lwt_condition(const double *a, size_t rows, size_t cols)
{
    double value[MAT_MAX];
    size_t n = rows < cols ? rows : cols;
    lwt_singular_values(value, a, rows, cols);
    return value[n - 1] > 0.0 ? value[0] / value[n - 1] : (double)INFINITY;
}
