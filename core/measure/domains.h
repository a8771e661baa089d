/* Domains: connected sets of cells above (or not above) a level, joined across periodic walls. */
#ifndef MT_MEASURE_DOMAINS_H
#define MT_MEASURE_DOMAINS_H

#include "core/space/grid.h"

typedef struct mt_domains {
    size_t count;
    double *size;   /* [count] volumes (areas, lengths), in the order of each domain's first cell; free with
                       mt_domains_free */
    double largest; /* volumes; 0 without domains */
    double mean;
    double total;
} mt_domains;

/* above: cells with a > level, else the others. full: neighbours across edges and corners count too, else
 * faces only. labels: NULL, or cells numbers to be filled: 0 outside, domain 1 .. count inside, numbered by
 * first cell. Equivalences by union-find (Hoshen & Kopelman, Phys. Rev. B 14 (1976) 3438; union by smaller
 * root with path halving). ENOMEM (4 bytes per cell while it works). */
MT_API mt_status mt_domains_find(const mt_grid *grid, const double *a, double level, bool above, bool full,
                                 int32_t *labels, mt_domains *out, mt_error *err) MT_MUST_USE;
MT_API void mt_domains_free(mt_domains *domains);

#endif
