/* Topology: the Minkowski functionals of the thresholded image, all from the numbers of its 2 x 2 (x 2)
 * configurations of neighbouring cells (Ohser & Muecklich, Statistical Analysis of Microstructures in
 * Materials Science, 2000; Legland, Kieu & Devaux, Image Anal. Stereol. 26 (2007) 83). References from
 * memory.
 *
 * Boundary and mean breadth are averages over directions by Crofton's formula: crossings along the lines of
 * cells in 1, 4 and 13 directions, and Euler characteristics of the sections by the 13 families of planes of
 * cells, each weighted by the share of directions nearest to it, which takes unequal spacings into account.
 * They do not need a smooth field: a picture of two values is measured as well (where a contour is 5 to 27 %
 * long). Measured: discs and balls of 20 cells radius within 0.6 %, breadth of tori 2.1 %; what has one
 * direction only is worst along the axes: flat interfaces read 5 % short in 2-D and 7.5 % in 3-D, straight
 * rods 7.5 % in breadth.
 *
 * Mirror walls: boundary, breadth and euler_share are those of the picture continued by reflection, counted
 * for the box (what touches a wall counts by half there); the wall itself is no boundary. `euler` is that of
 * the part in the box: an integer, as the number of domains is. Without mirror walls both are the same. */
#ifndef MT_MEASURE_TOPOLOGY_H
#define MT_MEASURE_TOPOLOGY_H

#include "core/space/grid.h"

typedef struct mt_topology {
    double size;     /* volume (3-D), area (2-D), length (1-D) of the phase */
    double boundary; /* surface, boundary length, number of ends */
    double breadth;  /* 3-D: mean breadth, the integral of the mean curvature over 2 pi, m; negative where the
                        phase is the hollow one; NaN otherwise */
    double
        euler; /* Euler characteristic in the box. 2-D: domains less holes; 3-D: domains less tunnels plus
                  cavities; what winds around the box counts like a ring: 0 for a slab and a straight rod */
    double euler_share; /* with reflection at mirror walls: the one to divide by the volume */
} mt_topology;

/* above: the phase of cells with a > level, else the others. full: the phase is joined across edges and
 * corners too, as in mt_domains_find. Needs no memory. */
MT_API void mt_topology_of(const mt_grid *grid, const double *a, double level, bool above, bool full,
                           mt_topology *out);

#endif
