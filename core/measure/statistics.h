/* Plain statistics of a field, and the peaks of its composition histogram.
 *
 * Arrays here and in the whole room: `a` holds grid->cells values, row-major, x fastest, in the field's unit.
 * All measurements run in one thread and in a fixed order: the same bits always. */
#ifndef MT_MEASURE_STATISTICS_H
#define MT_MEASURE_STATISTICS_H

#include "core/space/grid.h"

typedef struct mt_statistics {
    double mean, integral, variance; /* integral: sum times cell volume; variance: divided by cells */
    double minimum, maximum;
    size_t minimum_cell, maximum_cell; /* first cells where they are reached */
} mt_statistics;

/* Rows are summed first, then the rows in order; the variance takes a second pass about the mean, which keeps
 * its digits. NaN in a gives NaN throughout (cells 0). */
MT_API void mt_statistics_of(const mt_grid *grid, const double *a, mt_statistics *out);

typedef struct mt_peaks {
    bool two;         /* the histogram has two peaks */
    double low, high; /* compositions of the peaks; while there is one: mean -+ sqrt(2 variance) */
    double amplitude; /* high - low */
    double level;     /* midway between them: the level that separates the phases */
} mt_peaks;

/* Histogram of 256 classes from minimum to maximum, smoothed by a Gaussian of three classes (kernel density
 * estimate: Parzen, Ann. Math. Stat. 33 (1962) 1065). Two peaks are the highest maximum and the highest other
 * one that is parted from it by a valley below 0.7 of its height, provided that valley is deeper than six
 * standard deviations of the counts (Poisson), so that noise and outliers make no peak. Places of peaks are
 * refined to the mode of the estimate by mean shift (Fukunaga & Hostetler, IEEE Trans. Inf. Theory 21 (1975)
 * 32), which is exact for a picture of two values.
 *
 * With a single peak (noise, early growth) the field is taken for a sine wave of the same variance: peaks at
 * mean -+ sqrt(2 variance), where the histogram of a sine wave has its own; the level is then the mean. So
 * amplitude and level go on through the growth of a wave; `two` says which rule gave them. A constant field
 * has amplitude 0. Values not finite: NaN, and `two` false.
 *
 * Limits: a sine wave reads 2 % low (the smoothing rounds its edges); a phase of fewer than 26 cells, or more
 * where they spread, makes no peak. Rules and numbers are our own; that peaks rather than extremes are read
 * is common practice. References from memory. ENOMEM (6 kB). */
MT_API mt_status mt_peaks_of(const mt_grid *grid, const double *a, mt_peaks *out, mt_error *err) MT_MUST_USE;

/* The level that parts the values best into two classes: the one with the largest variance between the
 * classes (Otsu, IEEE Trans. Syst. Man Cybern. 9 (1979) 62; from memory), over a histogram of 256 classes
 * from minimum to maximum. The level is a bound of classes; where several do equally well (empty classes
 * between two peaks), the middle of them. Unlike the peaks it needs no two peaks, but it moves towards the
 * larger class where the phases are of unequal amounts. A constant field gives its value, values not finite
 * NaN. */
MT_API double mt_otsu_level(const mt_grid *grid, const double *a);

/* Fraction of the cells with a > level (above), or of the others. By the principle of Delesse (1847) and
 * Rosiwal (1898) the area fraction of a random section is the volume fraction (from memory). Whole cells are
 * counted: the error is about (cells on the interface) / cells times 0.3 / sqrt(cells on the interface). */
MT_API double mt_phase_fraction(const mt_grid *grid, const double *a, double level, bool above);

#endif
