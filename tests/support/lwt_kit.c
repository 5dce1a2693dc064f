/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Ready mechanisms for tests, see lwt_kit.h. */
#include "lwt_kit.h"

#include <math.h>

#include <cjson/cJSON.h>

#include "lwt.h"

static void unit_length(lwt_machine *m)
{
    m->spec->needs.characteristic_length_m = (lw_figure){.asked = true, .value = 1.0};
}

lwt_machine *lwt_kit_struts(const char *name, size_t n, const double *base, const double *platform,
                            const lw_frame *ref)
{
    lwt_machine *m = lwt_machine_new(name);
    size_t plate = lwt_add_body(m);
    size_t rod[LW_MAX_RODS];
    for (size_t i = 0; i < n; i++) {
        double end[3];
        lwt_frame_point(end, ref, &platform[3 * i]);
        rod[i] = lwt_add_rod(m, 0, &base[3 * i], plate, end);
    }
    for (size_t i = 0; i < n; i++) {
        (void)lwt_drive_rod(m, rod[i]);
    }
    (void)lwt_add_tool(m, plate, ref);
    lwt_add_outputs(m, "x y z rx ry rz");
    unit_length(m);
    return m;
}

lwt_machine *lwt_kit_struts_case(const cJSON *layout, const lw_frame *ref)
{
    double base[18];
    double platform[18];
    assert_int_equal(lwt_numbers(layout, "base", base, 18), 18);
    assert_int_equal(lwt_numbers(layout, "platform", platform, 18), 18);
    return lwt_kit_struts("six-struts", 6, base, platform, ref);
}

double lwt_two_link(double x_m, double y_m, double first_m, double second_m, int elbow)
{
    double square = x_m * x_m + y_m * y_m;
    double c = (square + first_m * first_m - second_m * second_m) / (2.0 * first_m * sqrt(square));
    return atan2(y_m, x_m) + (double)elbow * acos(c);
}

static const double Z_AXIS[3] = {0, 0, 1};

/* Crank from `base` and link to `point`, both revolutes about z; returns the link's body. */
static size_t add_two_link(lwt_machine *m, const double base[2], const double point[2],
                           double first_m, double second_m, int elbow, double *theta,
                           size_t *crank_joint)
{
    *theta = lwt_two_link(point[0] - base[0], point[1] - base[1], first_m, second_m, elbow);
    assert_true(isfinite(*theta));
    double at_base[3] = {base[0], base[1], 0.0};
    double at_elbow[3] = {base[0] + first_m * cos(*theta), base[1] + first_m * sin(*theta), 0.0};
    size_t crank = lwt_add_body(m);
    size_t link = lwt_add_body(m);
    *crank_joint = lwt_add_revolute(m, 0, crank, at_base, Z_AXIS);
    (void)lwt_add_revolute(m, crank, link, at_elbow, Z_AXIS);
    return link;
}

lwt_machine *lwt_kit_planar_rrr(const char *name, size_t n, const double *base,
                                const double *platform, double crank_m, double link_m,
                                const double pose[3], const int *elbow, double *theta_ref)
{
    lwt_machine *m = lwt_machine_new(name);
    lw_frame ref = lwt_frame_planar(pose[0], pose[1], pose[2]);
    size_t plate = lwt_add_body(m);
    size_t crank[LW_MAX_LIMBS];
    for (size_t i = 0; i < n; i++) {
        double corner[3];
        lwt_frame_point(corner, &ref, (const double[3]){platform[2 * i], platform[2 * i + 1], 0});
        size_t link = add_two_link(m, &base[2 * i], corner, crank_m, link_m, elbow[i],
                                   &theta_ref[i], &crank[i]);
        (void)lwt_add_revolute(m, link, plate, corner, Z_AXIS);
    }
    for (size_t i = 0; i < n; i++) {
        (void)lwt_drive_joint(m, crank[i]);
    }
    (void)lwt_add_tool(m, plate, &ref);
    lwt_add_outputs(m, "x y rz");
    unit_length(m);
    return m;
}

lwt_machine *lwt_kit_planar_struts(const char *name, const double base[6],
                                   const double platform[6], const double pose[3])
{
    lwt_machine *m = lwt_machine_new(name);
    lw_frame ref = lwt_frame_planar(pose[0], pose[1], pose[2]);
    size_t plate = lwt_add_body(m);
    (void)lwt_add_planar(m, 0, plate, ref.pos_m, Z_AXIS, (const double[3]){1, 0, 0});
    size_t rod[3];
    for (size_t i = 0; i < 3; i++) {
        double corner[3];
        lwt_frame_point(corner, &ref, (const double[3]){platform[2 * i], platform[2 * i + 1], 0});
        rod[i] = lwt_add_rod(m, 0, (const double[3]){base[2 * i], base[2 * i + 1], 0}, plate,
                             corner);
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_rod(m, rod[i]);
    }
    (void)lwt_add_tool(m, plate, &ref);
    lwt_add_outputs(m, "x y rz");
    unit_length(m);
    return m;
}

lwt_machine *lwt_kit_pin_arms(const char *name, size_t n, const double *base,
                              const double *first_m, const double *second_m, const double point[2],
                              const int *elbow, double *theta_ref)
{
    lwt_machine *m = lwt_machine_new(name);
    double pin[3] = {point[0], point[1], 0.0};
    size_t crank[LW_MAX_LIMBS];
    size_t outer = 0;
    for (size_t i = 0; i < n; i++) {
        size_t link = add_two_link(m, &base[2 * i], pin, first_m[i], second_m[i], elbow[i],
                                   &theta_ref[i], &crank[i]);
        if (i == 0) {
            outer = link;
        } else {
            (void)lwt_add_revolute(m, outer, link, pin, Z_AXIS);
        }
    }
    for (size_t i = 0; i < n; i++) {
        (void)lwt_drive_joint(m, crank[i]);
    }
    lw_frame at = lwt_frame_planar(pin[0], pin[1], 0.0);
    (void)lwt_add_tool(m, outer, &at);
    lwt_add_outputs(m, "x y");
    unit_length(m);
    return m;
}

double lwt_delta_crank(double base_m, double hand_m, double crank_m, double rod_m,
                       double angle_rad, const double point[3], int branch)
{
    /* In the leg's own plane: along is outward, side is across, down is -z. The knee lies at
     * crank (cos t, -sin t); the rod reaches the hand's point. */
    double c = cos(angle_rad);
    double s = sin(angle_rad);
    double along = point[0] * c + point[1] * s + hand_m - base_m;
    double side = -point[0] * s + point[1] * c;
    double rest = along * along + side * side + point[2] * point[2] + crank_m * crank_m -
                  rod_m * rod_m;
    /* rest = 2 crank (along cos t - z sin t) */
    double size = hypot(along, point[2]);
    return atan2(-point[2], along) + (double)branch * acos(rest / (2.0 * crank_m * size));
}

lwt_machine *lwt_kit_delta(const char *name, double base_m, double hand_m, double crank_m,
                           double rod_m, double half_m, const double angle_rad[3],
                           const double point[3], double *crank_ref)
{
    lwt_machine *m = lwt_machine_new(name);
    size_t hand = lwt_add_body(m);
    size_t crank[3];
    size_t joint[3];
    for (size_t i = 0; i < 3; i++) {
        /* The knee farther out is the one machines of this kind use. */
        crank_ref[i] = lwt_delta_crank(base_m, hand_m, crank_m, rod_m, angle_rad[i], point, -1);
        double c = cos(angle_rad[i]);
        double s = sin(angle_rad[i]);
        crank[i] = lwt_add_body(m);
        /* Turning about (-s, c, 0) carries the outward direction downward. */
        joint[i] = lwt_add_revolute(m, 0, crank[i], (const double[3]){base_m * c, base_m * s, 0},
                                    (const double[3]){-s, c, 0});
    }
    for (size_t i = 0; i < 3; i++) {
        double c = cos(angle_rad[i]);
        double s = sin(angle_rad[i]);
        double out = base_m + crank_m * cos(crank_ref[i]);
        double down = -crank_m * sin(crank_ref[i]);
        for (int k = -1; k <= 1; k += 2) {
            double w = k * half_m;
            double knee[3] = {out * c - w * s, out * s + w * c, down};
            double end[3] = {point[0] + hand_m * c - w * s, point[1] + hand_m * s + w * c,
                             point[2]};
            (void)lwt_add_rod(m, crank[i], knee, hand, end);
        }
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, joint[i]);
    }
    lw_frame at = lwt_frame_identity();
    for (size_t i = 0; i < 3; i++) {
        at.pos_m[i] = point[i];
    }
    (void)lwt_add_tool(m, hand, &at);
    lwt_add_outputs(m, "x y z");
    unit_length(m);
    return m;
}

void lwt_table_read(lwt_table *out, const cJSON *set, double scale)
{
    *out = (lwt_table){.n = 0};
    out->n = lwt_numbers(set, "a", out->a, 12);
    assert_int_equal(lwt_numbers(set, "alpha_deg", out->alpha, 12), out->n);
    assert_int_equal(lwt_numbers(set, "d", out->d, 12), out->n);
    for (size_t i = 0; i < out->n; i++) {
        out->a[i] *= scale;
        out->d[i] *= scale;
        out->alpha[i] *= LWT_DEG;
    }
}

lw_frame lwt_table_forward(const lwt_table *table, const double *theta)
{
    lw_frame frame = lwt_frame_identity();
    for (size_t i = 0; i < table->n; i++) {
        lw_frame step =
            table->proximal
                ? lwt_dh_proximal(table->a[i], table->alpha[i], table->d[i], theta[i])
                : lwt_dh_distal(table->a[i], table->alpha[i], table->d[i], theta[i]);
        frame = lwt_frame_mul(&frame, &step);
    }
    return frame;
}

lwt_machine *lwt_kit_arm(const char *name, const lwt_table *table, const double *theta_ref,
                         const char *outputs)
{
    lwt_machine *m = lwt_machine_new(name);
    lw_frame end;
    size_t last = table->proximal
                      ? lwt_add_chain_proximal(m, 0, NULL, table->n, table->a, table->alpha,
                                               table->d, theta_ref, &end)
                      : lwt_add_chain_distal(m, 0, NULL, table->n, table->a, table->alpha,
                                             table->d, theta_ref, &end);
    for (size_t i = 0; i < table->n; i++) {
        (void)lwt_drive_joint(m, i);
    }
    (void)lwt_add_tool(m, last, &end);
    lwt_add_outputs(m, outputs);
    unit_length(m);
    return m;
}

lwt_machine *lwt_kit_three_upu(void)
{
    lwt_machine *m = lwt_machine_new("three-upu");
    size_t plate = lwt_add_body(m);
    size_t slide[3];
    for (size_t i = 0; i < 3; i++) {
        double c = cos(120.0 * LWT_DEG * (double)i);
        double s = sin(120.0 * LWT_DEG * (double)i);
        const double foot[3] = {c, s, 0};
        const double top[3] = {0.4 * c, 0.4 * s, 0.8};
        const double along[3] = {-0.6 * c, -0.6 * s, 0.8};
        const double tangent[3] = {-s, c, 0};
        double inner[3];
        lwt_cross(inner, along, tangent);
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        (void)lwt_add_universal(m, 0, lower, foot, tangent, inner);
        slide[i] = lwt_add_prismatic(m, lower, upper, along);
        (void)lwt_add_universal(m, upper, plate, top, inner, tangent);
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    lw_frame tool = lwt_frame_zyx((const double[3]){0, 0, 0.8}, 0, 0, 0);
    (void)lwt_add_tool(m, plate, &tool);
    lwt_add_outputs(m, "x y z");
    return m;
}

lwt_machine *lwt_kit_three_rps(double turn_rad, size_t *plate, size_t *hinge)
{
    lwt_machine *m = lwt_machine_new("three-rps");
    size_t slide[3];
    *plate = lwt_add_body(m);
    for (size_t i = 0; i < 3; i++) {
        double c = cos(120.0 * LWT_DEG * (double)i + turn_rad);
        double s = sin(120.0 * LWT_DEG * (double)i + turn_rad);
        size_t lower = lwt_add_body(m);
        size_t upper = lwt_add_body(m);
        hinge[i] = lwt_add_revolute(m, 0, lower, (const double[3]){c, s, 0},
                                    (const double[3]){-s, c, 0});
        slide[i] = lwt_add_prismatic(m, lower, upper, (const double[3]){-0.4 * c, -0.4 * s, 0.8});
        (void)lwt_add_spherical(m, upper, *plate, (const double[3]){0.6 * c, 0.6 * s, 0.8});
    }
    for (size_t i = 0; i < 3; i++) {
        (void)lwt_drive_joint(m, slide[i]);
    }
    return m;
}

/* ---- seven links ----------------------------------------------------------------------------- */

typedef struct vec2 {
    double x, y;
} vec2;

static vec2 turned(const cJSON *links, const char *name, double theta_deg)
{
    double v[2];
    assert_int_equal(lwt_numbers(links, name, v, 2), 2);
    double c = cos(theta_deg * LWT_DEG);
    double s = sin(theta_deg * LWT_DEG);
    return (vec2){c * v[0] - s * v[1], s * v[0] + c * v[1]};
}

static size_t pin(lwt_machine *m, size_t a, size_t b, vec2 at)
{
    return lwt_add_revolute(m, a, b, (const double[3]){at.x, at.y, 0}, (const double[3]){0, 0, 1});
}

static vec2 plus(vec2 a, vec2 b)
{
    return (vec2){a.x + b.x, a.y + b.y};
}

lwt_machine *lwt_kit_seven_links(const struct cJSON *links, const double *t)
{
    lwt_machine *m = lwt_machine_new("seven-links");
    for (size_t i = 0; i < 7; i++) {
        (void)lwt_add_body(m);
    }
    vec2 p3 = turned(links, "a0", 0);
    vec2 p4 = plus(p3, turned(links, "b0", 0));
    vec2 p6 = plus(p4, turned(links, "c0", 0));
    vec2 a = turned(links, "a1", t[0]);
    vec2 b = plus(a, turned(links, "a2", t[1]));
    vec2 c = plus(b, turned(links, "b2", t[1]));
    vec2 d = plus(p4, turned(links, "a4", t[3]));
    vec2 e = plus(d, turned(links, "b5", t[4]));
    size_t crank = pin(m, 0, 1, (vec2){-0.3, -0.4});
    (void)pin(m, 1, 2, (vec2){0, 0});
    (void)pin(m, 2, 3, a);
    (void)pin(m, 3, 4, b);
    (void)pin(m, 1, 4, p3);
    (void)pin(m, 3, 6, c);
    (void)pin(m, 6, 5, d);
    (void)pin(m, 1, 5, p4);
    (void)pin(m, 6, 7, e);
    (void)pin(m, 1, 7, p6);
    (void)lwt_drive_joint(m, crank);
    (void)lwt_add_tool(m, 6, NULL);
    lwt_add_output_coord(m, lwt_coord(m, crank, 0));
    return m;
}
