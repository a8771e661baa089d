/* Which way interfaces face and how they are bent, from the field itself.
 *
 * At the middle of each piece of the level line or surface (interface.h) the normal n = -+ grad c / |grad c|
 * points out of the phase asked for, and the curvature is div n: 1 / R for a circle of radius R. In 3-D the
 * mean curvature is H = div n / 2 (1 / R for a ball) and the Gaussian curvature K = grad c . adj(Hess c) .
 * grad c / |grad c|^4 (Goldman, Comput. Aided Geom. Des. 22 (2005) 632). Both are positive where the phase is
 * convex; K is negative at saddles. Pieces count with their length or area; averages, like mean curvatures
 * over an area, follow DeHoff (Trans. AIME 239 (1967) 617). By Gauss and Bonnet the integral of the curvature
 * of closed lines is 2 pi times their Euler characteristic, that of K over closed surfaces 4 pi times that of
 * the body: a test of the resolution. References from memory.
 *
 * Derivatives are central differences of fourth order at cell centres, interpolated linearly to the piece;
 * they go on around periodic walls and by reflection at mirror walls. For a smooth interface of about 8 cells
 * the errors are below 1 % for radii above 10 cells. A picture of two values or noise has no curvature to
 * speak of: smooth it first. Where the gradient vanishes the piece is left out and counted in `lost`. */
#ifndef MT_MEASURE_CURVATURE_H
#define MT_MEASURE_CURVATURE_H

#include "core/space/grid.h"

/* Distribution of a curvature over the interface. */
typedef struct mt_bend {
    double mean, deviation; /* NaN without interface */
    double integral;        /* over the interface */
    double low, width; /* class i reaches from low + i width to low + (i + 1) width; from mean - 4 deviation
                          to mean + 4 deviation in all; what lies outside is in the first or last class */
    double *share;     /* [classes] shares of the interface, together 1 */
} mt_bend;

typedef struct mt_curvature {
    double size;         /* of the interface: length or area, less what was lost */
    double lost;         /* share of the interface where the field is flat */
    mt_bend mean, gauss; /* mean: 1/m; gauss: 1/m^2, 3-D only (else NaN and all shares 0) */
    int classes;
    double tensor[6];    /* averages of n_x n_x, n_y n_y, n_z n_z, n_x n_y, n_y n_z, n_z n_x: 1 / dim and 0
                            without a    preferred direction; NaN without interface */
    double preferred[3]; /* unit vector along which most normals lie, its last component that is not 0
                            positive */
    double anisotropy; /* largest less smallest principal value of the tensor: 0 none, 1 all normals along one
                          line */
    int polar,
        azimuth; /* classes of directions, all of equal size, around the axes, not between them: in 2-D polar
                    1, azimuth 36, class i around i 10 degrees from the x axis; in 3-D polar 13 (equal steps
                    of the cosine of the angle from z, from 1 down) and azimuth 24 (around i 15 degrees) */
    double *facing; /* [polar * azimuth] shares of the interface by the direction of the normal */
    double *block;
} mt_curvature;

/* above: the phase of cells with a > level, else the others. classes: of curvature, from 1 to 10000. EINPUT
 * in 1-D or for other numbers of classes. ENOMEM (the classes). */
MT_API mt_status mt_curvature_of(const mt_grid *grid, const double *a, double level, bool above, int classes,
                                 mt_curvature *out, mt_error *err) MT_MUST_USE;
MT_API void mt_curvature_free(mt_curvature *c);

#endif
