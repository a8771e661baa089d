/* Profiles: a field along a line.
 *
 * Along an axis: mean and standard deviation over the cells of each plane (row, in 2-D) across it, at the
 * cell centres (i + 1/2) h. Along a line between two points: values interpolated linearly in each direction
 * between cell centres, going on around periodic walls and by reflection at mirror walls; an error of second
 * order in the spacing (h^2 / 8 times the second derivative at most, for each direction). */
#ifndef MT_MEASURE_PROFILE_H
#define MT_MEASURE_PROFILE_H

#include "core/space/grid.h"

/* mean, deviation: room for grid->n[axis] values each; deviation may be NULL. Needs no memory. */
MT_API void mt_profile_along(const mt_grid *grid, const double *a, int axis, double *mean, double *deviation);

/* value: room for `count` values, at equal distances from `from` to `to`, ends included (count 1: at `from`).
 * The places may lie outside the box. */
MT_API void mt_profile_between(const mt_grid *grid, const double *a, const double from[], const double to[],
                               int count, double *value);

#endif
