/* Plain statistics of a field, and the peaks of its composition histogram. */
#ifndef MT_MEASURE_STATISTICS_H
#define MT_MEASURE_STATISTICS_H

#include "core/space/grid.h"

typedef struct mt_statistics {
    double mean, integral, variance; /* integral: sum times cell volume */
    double minimum, maximum;
    size_t minimum_cell, maximum_cell; /* first cells where they are reached */
} mt_statistics;

/* a: grid->cells values. Rows are summed first, then rows in order: the same bits always. NaN in a gives NaN.
 */
MT_API void mt_statistics_of(const mt_grid *grid, const double *a, mt_statistics *out);

typedef struct mt_peaks {
    bool two;         /* the histogram has two peaks */
    double low, high; /* compositions of the peaks; while there is one: mean -+ sqrt(2 variance) */
    double amplitude; /* high - low */
    double level;     /* midway between them: the level that separates the phases */
} mt_peaks;

/* Histogram of 256 classes from minimum to maximum, smoothed by a Gaussian of three classes. Two peaks are
 * the highest maximum and the highest other one that is parted from it by a valley below 0.7 of the lower of
 * both, refined by a parabola. With a single peak the composition wave is taken as a sine wave of the same
 * variance (peaks at mean -+ sqrt(2 variance)), which a histogram of a sine wave would show too. Our own
 * rule; that composition peaks rather than extremes are read is common practice. ENOMEM. */
MT_API mt_status mt_peaks_of(const mt_grid *grid, const double *a, mt_peaks *out, mt_error *err) MT_MUST_USE;

/* Fraction of the cells with a > level (above) or a <= level. */
MT_API double mt_phase_fraction(const mt_grid *grid, const double *a, double level, bool above);

#endif
