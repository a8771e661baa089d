/* Domains: connected sets of cells above (or not above) a level, joined across periodic walls.
 *
 * Labels by union-find (Hoshen & Kopelman, Phys. Rev. B 14 (1976) 3438; union by smaller root with path
 * halving) in the box cut open, then the pieces are joined across the seams by a union-find that carries how
 * often the way to the root winds around each periodic axis; a piece met again with another winding
 * percolates (the criterion of Machta, Choi, Lucke, Schweizer & Chayes, Phys. Rev. E 54 (1996) 1332).
 *
 * Shape: second moments about the centre of mass, each cell being a box of its own (it adds h^2 / 12 along
 * each axis, so a rectangle of cells has its exact moments). The equivalent ellipse has the full axes 4
 * sqrt(m), the ellipsoid 2 sqrt(5 m), a line sqrt(12 m), m the principal moments (the ellipse of inertia:
 * Medalia, J. Colloid Interface Sci. 24 (1967) 393). A domain cut by a mirror wall is measured as it lies in
 * the box. References from memory. */
#ifndef MT_MEASURE_DOMAINS_H
#define MT_MEASURE_DOMAINS_H

#include "core/space/grid.h"

/* Arrays are in the order of each domain's first cell; all is freed by mt_domains_free. */
typedef struct mt_domains {
    size_t count;
    double *size;          /* [count] volumes (areas in 2-D, lengths in 1-D) */
    double *diameter;      /* [count] of the sphere (circle, line) of that size */
    double (*centroid)[3]; /* [count] centre of mass, in the box; NaN along an axis that is wrapped around; 0
                              along axes beyond dim */
    double (*axis)[3]; /* [count] full axes of the ellipsoid (ellipse, line) with the domain's second moments,
                          longest first; 0 beyond dim; NaN where the domain winds around the box */
    double (*direction)[3];    /* [count] unit vector along the longest axis, its last component that is not 0
                                  positive; NaN likewise */
    double *aspect;            /* [count] longest over shortest axis; NaN likewise */
    unsigned char *percolates; /* [count] bit a: reaches around periodic axis a, or from wall to wall on
                                  mirror axis a. An axis of one cell is never percolated */
    unsigned char *walls; /* [count] bit 2a: touches the lower mirror wall of axis a, bit 2a + 1: the upper */
    double largest;       /* volumes; 0 without domains */
    double mean;          /* total / count */
    double total;
    double mean_diameter;    /* mean of the diameters; 0 without domains */
    double mean_aspect;      /* mean over domains that have one; NaN without */
    double density;          /* count / volume of the box; a domain cut by a mirror wall counts as one */
    unsigned any_percolates; /* all bits of percolates together */
    void *block;             /* memory of the arrays */
} mt_domains;

/* above: cells with a > level, else the others. full: neighbours across edges and corners count too, else
 * faces only (for a picture of two phases: one phase full, the other by faces, else both may percolate at a
 * saddle or neither does). labels: NULL, or grid->cells numbers to be filled: 0 outside, domain 1 .. count
 * inside, numbered by first cell. ENOMEM (4 bytes per cell and 104 per piece while it works; 4 bytes per cell
 * less when labels are given). */
MT_API mt_status mt_domains_find(const mt_grid *grid, const double *a, double level, bool above, bool full,
                                 int32_t *labels, mt_domains *out, mt_error *err) MT_MUST_USE;

/* Frees the arrays and zeroes the struct; once more does no harm. */
MT_API void mt_domains_free(mt_domains *domains);

/* Diameter of the sphere (dim 3), circle (2) or line (1) of a given size: (6 V / pi)^(1/3), 2 sqrt(A / pi),
 * L. */
MT_API double mt_equivalent_diameter(int dim, double size);

#endif
