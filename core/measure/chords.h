/* Chords: how far a line along an axis runs through one phase.
 *
 * A chord is a run of neighbouring cells on the same side of the level along a line of cell centres, as long
 * as its cells together. Chords go on across periodic walls. At a mirror wall a chord is continued by
 * reflection: m cells at the wall are half of a chord of 2 m cells, which counts as half a chord (its other
 * half lies beyond the wall); so a mirror box has half the chords of the box doubled by reflection. Lines
 * without any end of a chord (all of one phase) are kept apart as `endless`. Along an axis of one cell
 * there are no chords.
 *
 * The mean over the three directions of an isotropic structure is 4 V / S in a volume and pi A / L in an
 * area, V and A the phase's volume and area, S and L its interface (Cauchy 1841; Underwood, Quantitative
 * Stereology, 1970; Torquato, Random Heterogeneous Materials, 2002, for the distribution). References from
 * memory. Whole cells are counted, so chords below one cell are missed and each is known to a cell. */
#ifndef MT_MEASURE_CHORDS_H
#define MT_MEASURE_CHORDS_H

#include "core/space/grid.h"

/* Chords of one phase along one axis. */
typedef struct mt_chord_axis {
    int longest; /* cells of the longest chord possible: n - 1 periodic, 2 (n - 1) mirror, 0 for one cell */
    double *number;   /* [longest + 1]: chords of i cells; chords that are half at a mirror wall count 1/2 */
    double chords;    /* sum of number */
    double mean;      /* mean length, m; NaN without chords */
    double deviation; /* standard deviation of the lengths; NaN likewise */
    double endless;   /* share of the phase that lies on lines without an end; 0 without phase */
} mt_chord_axis;

typedef struct mt_chords {
    int dim;
    mt_chord_axis axis[3]; /* [dim] */
    double mean;           /* all chords along all axes; NaN without chords */
    double *block;
} mt_chords;

/* above: the phase of cells with a > level, else the others. ENOMEM (8 bytes per possible length). */
MT_API mt_status mt_chords_find(const mt_grid *grid, const double *a, double level, bool above,
                                mt_chords *out, mt_error *err) MT_MUST_USE;
MT_API void mt_chords_free(mt_chords *chords);

#endif
