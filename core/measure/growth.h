/* Growth laws fitted to a series of lengths. Pure functions; a single run's fit interval is far too small
 * (the scatter between seeds is larger), so intervals are to come from repeated seeds. */
#ifndef MT_MEASURE_GROWTH_H
#define MT_MEASURE_GROWTH_H

#include "core/base/error.h"

typedef struct mt_line_fit {
    double slope, intercept;
    double slope_error; /* standard error from the residuals; NaN for two points */
    int points;
} mt_line_fit;

/* Least squares of log y against log x for from <= x <= to, x and y positive. EINPUT for fewer than two
 * points. The slope is the growth exponent. */
MT_API mt_status mt_fit_power(int n, const double *x, const double *y, double from, double to,
                              mt_line_fit *fit, mt_error *err) MT_MUST_USE;

/* K and L0^3 of L^3 = L0^3 + K t (Lifshitz & Slyozov 1961, Wagner 1961) by least squares over all points:
 * slope, intercept. */
MT_API mt_status mt_fit_cubic(int n, const double *t, const double *length, mt_line_fit *fit,
                              mt_error *err) MT_MUST_USE;

#endif
