/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Limbs of one body with rods to the platform: a carriage on a rail (line against sphere) and a
 * crank (circle against sphere). The sign factor is the rod's component along the driven motion:
 * it vanishes exactly where the rod stands square to the rail, or in the plane of crank and
 * axis. */
#include "../math/vec3.h"
#include "../model/model.h"

/* World ends of the limb's first rod with the moving body in its reference attitude against the
 * anchor: `end` on the moving body, `far` on the known one. Returns the length. */
static double rod_ends(double end[3], double far[3], const lw_model *m, const lwi_limb *limb,
                       const lw_config *config)
{
    const lw_spec_rod *rod = &m->spec->rod[limb->rod[0]];
    size_t moving = m->fused[limb->chain[0].next];
    size_t own = m->fused[rod->body[0]] == moving ? 0 : 1;
    double d[3];
    lwi_frame_apply(end, &config->body[limb->anchor[0]], rod->end_m[own]);
    lwi_frame_apply(far, &config->body[rod->body[1 - own]], rod->end_m[1 - own]);
    lwi_sub(d, rod->end_m[1], rod->end_m[0]);
    return lwi_norm(d);
}

static void place(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                  const lw_config *config, double q)
{
    double coord[3] = {q * limb->chain[0].sign, 0, 0};
    lw_frame x;
    lwi_joint_carry(&x, m->spec, limb->chain[0].joint, coord, NULL, limb->chain[0].sign > 0.0,
                    &config->body[limb->anchor[0]]);
    for (size_t i = 0; i < limb->n_body; i++) {
        out->body[i] = x;
    }
}

void lwi_rail_rod_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                        unsigned bits, const lw_config *config)
{
    double end[3];
    double far[3];
    double w[3];
    double d[3];
    double length = rod_ends(end, far, m, limb, config);
    /* Motion of the moving body along +w for +q, whichever way the joint is written. */
    lwi_rot_apply(w, config->body[limb->anchor[0]].rot, m->spec->joint[limb->chain[0].joint].axis);
    lwi_sub(d, far, end);
    double along = lwi_dot(d, w);
    double across2 = lwi_dot(d, d) - along * along;
    double root2 = length * length - across2;
    out->real = root2 >= 0.0;
    if (!out->real) {
        /* rounding on the very edge of reach */
        if (root2 > -1e-12 * length * length) {
            root2 = 0.0;
            out->real = true;
        } else {
            out->miss_m = sqrt(across2) - length;
            return;
        }
    }
    double root = sqrt(root2);
    place(out, m, limb, config, bits & 1u ? along + root : along - root);
}

unsigned lwi_rail_rod_bits(double *value, const lw_model *m, const lwi_limb *limb,
                           const lw_config *config)
{
    const lw_spec_rod *rod = &m->spec->rod[limb->rod[0]];
    size_t moving = m->fused[limb->chain[0].next];
    size_t own = m->fused[rod->body[0]] == moving ? 0 : 1;
    double end[3];
    double far[3];
    double w[3];
    double d[3];
    lwi_frame_apply(end, &config->body[rod->body[own]], rod->end_m[own]);
    lwi_frame_apply(far, &config->body[rod->body[1 - own]], rod->end_m[1 - own]);
    lwi_rot_apply(w, config->body[limb->anchor[0]].rot, m->spec->joint[limb->chain[0].joint].axis);
    lwi_sub(d, end, far);
    *value = lwi_dot(d, w) / lwi_norm(d);
    return *value > 0.0 ? 1u : 0u;
}

void lwi_crank_rod_solve(lwi_limb_result *out, const lw_model *m, const lwi_limb *limb,
                         unsigned bits, const lw_config *config)
{
    const lw_spec_joint *joint = &m->spec->joint[limb->chain[0].joint];
    const lw_frame *base = &config->body[limb->anchor[0]];
    double end[3];
    double far[3];
    double w[3];
    double o[3];
    double r[3];
    double c[3];
    double t[3];
    double length = rod_ends(end, far, m, limb, config);
    lwi_rot_apply(w, base->rot, joint->axis);
    lwi_frame_apply(o, base, joint->at_m);
    lwi_sub(r, end, o);
    lwi_sub(c, far, o);
    double height = lwi_dot(r, w) - lwi_dot(c, w);
    lwi_axpy(r, r, -lwi_dot(r, w), w);
    lwi_axpy(c, c, -lwi_dot(c, w), w);
    double crank = lwi_norm(r);
    lwi_cross(t, w, r);
    double x = lwi_dot(c, r) / crank;
    double y = lwi_dot(c, t) / crank;
    double reach = hypot(x, y);
    /* |P(q) - C|^2 = length^2 with x cos q + y sin q = k */
    double k = (height * height + crank * crank + reach * reach - length * length) / (2.0 * crank);
    double cosine = k / reach;
    if (reach < 1e-9 * length && fabs(k) < 1e-9 * length) {
        out->real = true; /* the rod's far end on the crank's axis: every angle closes */
        out->open = true;
        place(out, m, limb, config, 0.0);
        return;
    }
    if (!(fabs(cosine) <= 1.0)) {
        if (fabs(cosine) < 1.0 + 1e-12) {
            cosine = cosine > 0.0 ? 1.0 : -1.0;
        } else {
            double gap = cosine > 0.0 ? hypot(reach - crank, height) - length
                                      : hypot(reach + crank, height) - length;
            out->real = false;
            out->miss_m = gap;
            return;
        }
    }
    out->real = true;
    double spread = acos(cosine);
    place(out, m, limb, config, atan2(y, x) + (bits & 1u ? spread : -spread));
}

unsigned lwi_crank_rod_bits(double *value, const lw_model *m, const lwi_limb *limb,
                            const lw_config *config)
{
    const lw_spec_joint *joint = &m->spec->joint[limb->chain[0].joint];
    const lw_spec_rod *rod = &m->spec->rod[limb->rod[0]];
    size_t moving = m->fused[limb->chain[0].next];
    size_t own = m->fused[rod->body[0]] == moving ? 0 : 1;
    const lw_frame *base = &config->body[limb->anchor[0]];
    double end[3];
    double far[3];
    double w[3];
    double o[3];
    double r[3];
    double v[3];
    double d[3];
    lwi_frame_apply(end, &config->body[rod->body[own]], rod->end_m[own]);
    lwi_frame_apply(far, &config->body[rod->body[1 - own]], rod->end_m[1 - own]);
    lwi_rot_apply(w, base->rot, joint->axis);
    lwi_frame_apply(o, base, joint->at_m);
    lwi_sub(r, end, o);
    lwi_cross(v, w, r);
    lwi_sub(d, end, far);
    double size = lwi_norm(v) * lwi_norm(d);
    *value = size > 0.0 ? lwi_dot(d, v) / size : 0.0;
    return *value > 0.0 ? 1u : 0u;
}
