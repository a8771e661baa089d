/* A field reduced to few points, for a picture made of letters: the mean over equal boxes. */
#ifndef MT_FILES_SKETCH_H
#define MT_FILES_SKETCH_H

#include "core/base/error.h"

/* out: width * height means (1 to 10000 each), the top row first (y upwards, as in a picture). The cells
 * along x and y are divided into width and height boxes of equal size, a cell on a border counting by the
 * part of it that lies within; with more boxes than cells each box takes the value of the cells it lies in.
 * Of a 3-D field the middle plane across z is taken. A box with a NaN in it is NaN. dim, n: cells along x, y,
 * z; values row-major, x fastest. */
MT_API mt_status mt_sketch(int dim, const int n[], const double *values, int width, int height, double *out,
                           mt_error *err) MT_MUST_USE;

#endif
