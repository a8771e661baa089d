/* The interface piece by piece. */
#ifndef MT_MEASURE_INTERFACE_INSIDE_H
#define MT_MEASURE_INTERFACE_INSIDE_H

#include "core/space/grid.h"

typedef struct mt_facet {
    double at[3]; /* its centre, in cells from the centre of the first corner: 0 .. 1 */
    double size;  /* length of a segment (2-D), area of a triangle (3-D) */
} mt_facet;

/* Pieces in one square or cube of neighbouring cell centres. */
typedef struct mt_facets {
    int cube[3]; /* cell of its first corner; -1 before the first cell at a mirror wall, where the reflected
                    cell stands in */
    int n;
    double share; /* of the square or cube that lies in the box */
    mt_facet facet[12];
} mt_facets;

typedef void (*mt_facet_visit)(void *ctx, const mt_facets *facets);

/* Calls visit for each square or cube that the level passes, in storage order; nothing in 1-D. */
void mt_interface_walk(const mt_grid *g, const double *a, double level, mt_facet_visit visit, void *ctx);

#endif
