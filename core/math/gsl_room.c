/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What comes from GSL: the error handler switch and distributions. The random generator is our own
 * small one so that samples are the same with every GSL version. */
#include "linalg.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <leeway/err.h>
#include <math.h>

void lw_init(void)
{
    gsl_set_error_handler_off();
}

double lwi_chi_square_quantile(double probability, double freedoms)
{
    return gsl_cdf_chisq_Pinv(probability, freedoms);
}

static unsigned long long splitmix(unsigned long long *x)
{
    unsigned long long z = (*x += 0x9e3779b97f4a7c15ULL);
    z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9ULL;
    z = (z ^ (z >> 27)) * 0x94d049bb133111ebULL;
    return z ^ (z >> 31);
}

void lwi_random_seed(lwi_random *r, unsigned long long seed)
{
    for (int i = 0; i < 4; i++) {
        r->s[i] = splitmix(&seed);
    }
}

static unsigned long long rotate_left(unsigned long long x, int k)
{
    return (x << k) | (x >> (64 - k));
}

double lwi_random_unit(lwi_random *r)
{
    unsigned long long *s = r->s;
    unsigned long long result = rotate_left(s[1] * 5, 7) * 9;
    unsigned long long t = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= t;
    s[3] = rotate_left(s[3], 45);
    return (double)(result >> 11) * 0x1p-53;
}

double lwi_random_normal(lwi_random *r)
{
    double u = lwi_random_unit(r);
    double v = lwi_random_unit(r);
    return sqrt(-2.0 * log(1.0 - u)) * cos(6.283185307179586 * v);
}
