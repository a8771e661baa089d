/* Growth laws fitted to a series of lengths. Pure functions; a single run's standard error is far too small
 * (points of one run are not independent, and the scatter between seeds is larger), so intervals are to come
 * from repeated seeds.
 *
 * Expected laws (state the model with the exponent): 1/3 by bulk diffusion (Lifshitz & Slyozov, J. Phys.
 * Chem. Solids 19 (1961) 35; Wagner, Z. Elektrochem. 65 (1961) 581), 1/4 by surface diffusion (Mullins 1957),
 * 1/2 non-conserved (Allen & Cahn, Acta Metall. 27 (1979) 1085). References from memory. */
#ifndef MT_MEASURE_GROWTH_H
#define MT_MEASURE_GROWTH_H

#include "core/base/error.h"

typedef struct mt_line_fit {
    double slope, intercept;
    double slope_error; /* standard error from the residuals, sqrt(RSS / (n - 2) / Sxx); NaN for two points */
    int points;         /* used */
} mt_line_fit;

/* Least squares of log y against log x (natural) over the points with from <= x <= to, x and y finite and
 * positive: the slope is the growth exponent, exp(intercept) the prefactor. EINPUT for fewer than two points
 * at different x. */
MT_API mt_status mt_fit_power(int n, const double *x, const double *y, double from, double to,
                              mt_line_fit *fit, mt_error *err) MT_MUST_USE;

/* K (slope) and L0^3 (intercept, at t = 0 of the times given) of L^3 = L0^3 + K t by least squares over all
 * points with finite t and length: pass the points of one stage. EINPUT as above. */
MT_API mt_status mt_fit_cubic(int n, const double *t, const double *length, mt_line_fit *fit,
                              mt_error *err) MT_MUST_USE;

#endif
