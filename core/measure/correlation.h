/* The two-point correlation, averaged over directions.
 *
 * C(r) = <dc(x) dc(x + r)> / <dc^2>, dc = c - mean, over all places x and all directions of r: 1 at r = 0. It
 * is the transform of the structure factor (Wiener & Khinchin), C(r) = sum over modes of S phi(k r) / sum of
 * S, with phi the mean of exp(i k r) over directions: cos(k r) in 1-D, J0(k r) in 2-D, sin(k r) / (k r) in
 * 3-D (Debye, Anderson & Brumberger, J. Appl. Phys. 28 (1957) 679, for scattering by two phases; from
 * memory). So it belongs to the trigonometric interpolant of the field, all directions count alike, and
 * mirror walls continue by reflection. Modes are gathered in steps of k of 1/16 of a shell: against
 * the sum mode by mode that moves C by less than 1e-3 at the largest r, and the first zero of a structure
 * with several domains to the box by 1e-5. */
#ifndef MT_MEASURE_CORRELATION_H
#define MT_MEASURE_CORRELATION_H

#include "core/space/sweep.h"

typedef struct mt_correlation {
    int count;
    double *r, *c; /* [count] r = 0, h, 2 h ... with the smallest spacing h, up to half the shortest side (the
                      whole side along mirror axes); c all NaN for a field without variance */
    double zero;   /* first r with C = 0: the usual length of a domain, m; NaN where there is none */
    double spacing; /* first maximum of C beyond it: distance from domain to domain; NaN likewise */
    double *block;
} mt_correlation;

/* ENOMEM (16 bytes per cell while it works). */
MT_API mt_status mt_correlation_of(mt_sweeper *sweeper, const double *a, mt_correlation *out,
                                   mt_error *err) MT_MUST_USE;
MT_API void mt_correlation_free(mt_correlation *c);

#endif
