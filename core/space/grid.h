/* The box: cells, spacing and walls. Immutable once made; shared by reference count.
 *
 * Arrays in real space ("field arrays") are contiguous, row-major, x fastest: value of cell (ix, iy, iz) at
 * (iz * n[1] + iy) * n[0] + ix; its centre lies at ((ix + 1/2) h[0], ...). Axes beyond `dim` have n = 1, h
 * = 1. */
#ifndef MT_SPACE_GRID_H
#define MT_SPACE_GRID_H

#include "core/base/error.h"

typedef enum mt_wall {
    MT_PERIODIC, /* value at one end continues at the other */
    MT_MIRROR /* no flux: the field is even about the wall, which lies half a cell beyond the last centre */
} mt_wall;

typedef struct mt_grid {
    int refs;
    int dim;     /* 1, 2 or 3 */
    int n[3];    /* cells along x, y, z */
    double h[3]; /* spacing, m (or dimensionless) */
    mt_wall wall[3];
    size_t cells;       /* n[0] n[1] n[2] */
    double cell_volume; /* product of the spacings of the `dim` axes */
    double volume;      /* cells * cell_volume */
} mt_grid;

/* n, h, wall hold `dim` entries. Fails with EINPUT for dim outside 1..3, n < 1, more than 2^31 - 1 cells, h
 * not finite or not positive. The new grid has one reference. */
MT_API mt_status mt_grid_new(mt_grid **out, int dim, const int n[], const double h[], const mt_wall wall[],
                             mt_error *err) MT_MUST_USE;

MT_API mt_grid *mt_grid_ref(mt_grid *grid);
MT_API void mt_grid_unref(mt_grid **grid); /* sets *grid to NULL; NULL inside is allowed */

/* Same shape, spacing and walls. */
MT_API bool mt_grid_equal(const mt_grid *a, const mt_grid *b);

/* Wavenumber of mode m along an axis, rad per length: 2 pi m / L for m <= n/2, 2 pi (m - n) / L above
 * (periodic); pi m / L (mirror), L = n h. */
MT_API double mt_grid_wavenumber(const mt_grid *grid, int axis, int mode);

#endif
