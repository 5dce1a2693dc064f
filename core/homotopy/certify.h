/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Certificate for a real solution of a closure system: by the theorem of Newton and Kantorovich
 * there is exactly one solution within `radius` of the state found. */
#ifndef LWI_CERTIFY_H
#define LWI_CERTIFY_H

#include "../closure/system.h"

typedef struct lwi_certificate {
    bool holds;
    double radius; /* scaled distance within which the solution lies */
    double unique; /* scaled distance within which there is no other */
} lwi_certificate;

typedef struct lwi_certify_work {
    double rows[LWI_MAX_ROWS * 48];
    double qr[LWI_MAX_ROWS * 48];
    double square[48 * 48];
    double inverse[48];
    double res[LWI_MAX_ROWS];
    double tau[48];
    size_t perm[LWI_MAX_ROWS];
    size_t piv[48];
} lwi_certify_work;

/* The state must be on the system with its inputs set; ev is evaluated by the call. Systems of
 * more than 48 unknowns are not certified. */
void lwi_certify(lwi_certificate *out, const lwi_system *sys, const lwi_state *state, lwi_eval *ev,
                 lwi_certify_work *w);

#endif
