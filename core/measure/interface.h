/* Interfaces: how much of them there is, and how wide they are. */
#ifndef MT_MEASURE_INTERFACE_H
#define MT_MEASURE_INTERFACE_H

#include "core/space/grid.h"

/* 2-D: length of the level line by marching squares between cell centres with linear interpolation (after
 * Lorensen & Cline, Computer Graphics 21 (1987) 163); a saddle is cut by the mean of its four corners. 1-D:
 * number of crossings. 3-D: area of the level surface by marching tetrahedra, six to a cube (Payne & Toga,
 * IEEE Comput. Graph. 10 (1990) 33). The contour runs on across periodic walls; up to a mirror wall (half a
 * cell beyond the last centre) it is continued by reflection, so that it meets the wall at right angles. */
MT_API double mt_interface_measure(const mt_grid *grid, const double *a, double level);

/* Width of a single interface along a line of n values a, spacing h: distance between the places where the
 * trigonometric (periodic) or cosine (mirror walls) interpolant of the line passes low + 0.1 (high - low) and
 * low + 0.9 (high - low), around the first crossing of the middle. EINPUT if there is none. */
MT_API mt_status mt_interface_width(int n, double h, mt_wall wall, const double *a, double low, double high,
                                    double *width, mt_error *err) MT_MUST_USE;

#endif
