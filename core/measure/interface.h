/* Interfaces: how much of them there is, and how wide they are. */
#ifndef MT_MEASURE_INTERFACE_H
#define MT_MEASURE_INTERFACE_H

#include "core/space/grid.h"

/* 2-D: length of the level line by marching squares between cell centres with linear interpolation (after
 * Lorensen & Cline, Computer Graphics 21 (1987) 163); a saddle is cut by the mean of its four corners. 1-D:
 * number of crossings. 3-D: area of the level surface by marching tetrahedra, six to a cube (Payne & Toga,
 * IEEE Comput. Graph. 10 (1990) 33). References from memory.
 *
 * The contour runs on across periodic walls; up to a mirror wall (half a cell beyond the last centre) it is
 * continued by reflection, so that it meets the wall at right angles. For a smooth field the error is of
 * second order: measured, a circle of radius R reads h^2 / (16 R^2) short and a sphere h^2 / (4 R^2), so 0.5
 * % needs R > 4 h and R > 7 h. For a field of two values (a thresholded picture) no refinement helps: circles
 * come out 5.5 % and spheres 27 % long, as for any contour of steps; smooth first. Allocates nothing. */
MT_API double mt_interface_measure(const mt_grid *grid, const double *a, double level);

/* Characteristic length volume / interface, m: for stripes (lamellae) of period p it is p / 2 in any
 * dimension, and it scales with the Porod tail of the structure factor (Porod 1951; from memory). NaN without
 * interface. */
MT_API double mt_interface_spacing(const mt_grid *grid, double measure);

/* 10-90 width of a single interface along a line of n values a, spacing h: distance between the places where
 * the trigonometric (periodic) or cosine (mirror walls) interpolant of the line passes low + 0.1 (high - low)
 * and low + 0.9 (high - low), around the first crossing of the middle, by bisection to rounding. For tanh(x /
 * w) it is 2 atanh(0.8) w = 2.197 w. The highest mode of an even periodic line is left out, as everywhere.
 * EINPUT (and NaN) if the line does not pass from 10 to 90 % there, or low = high; ENOMEM (two lines). Takes
 * 10 n^2 sines: for lines, not fields. */
MT_API mt_status mt_interface_width(int n, double h, mt_wall wall, const double *a, double low, double high,
                                    double *width, mt_error *err) MT_MUST_USE;

#endif
