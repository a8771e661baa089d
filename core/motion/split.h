/* The splitter: brings expressions with spectral operators to the form that the two sweeps can evaluate,
 *
 *   FT[e] = sum over terms of  factor(k) * i^turns * FT[source],
 *
 * where a source is a field or a *point*: an expression computed cell by cell from *quantities* (fields and
 * spectral nodes needed in real space), which are such sums themselves. Evaluation alternates: stage s
 * computes in real space all points whose quantities are known by then; the column sweep after it forms the
 * quantities of stage s + 1. Linear terms with constant coefficients come out as field terms, whatever their
 * order. Internal to core/motion. */
#ifndef MT_MOTION_SPLIT_H
#define MT_MOTION_SPLIT_H

#include "core/formula/build.h"

typedef struct mt_term {
    const mt_expr *factor; /* real: WAVE nodes, FILTER symbols, params, time, numbers */
    int turns;             /* power of i, 0 .. 3 */
    int source;            /* >= 0: number of a field; < 0: point ~source */
} mt_term;

typedef struct mt_sum {
    int n, room;
    mt_term *term;
    mt_parities parity; /* of the sum in real space */
} mt_sum;

typedef struct mt_point {
    const mt_expr *e;
    mt_parities parity;
    int stage;      /* at which it is computed */
    int last_sweep; /* last column sweep that needs its spectrum (sweep s follows stage s) */
} mt_point;

typedef struct mt_quantity {
    const mt_expr *node; /* FIELD or SPECTRAL */
    mt_sum sum;
    int level; /* first stage at which it can be there: 0 if it is made of fields alone */
} mt_quantity;

typedef struct mt_split {
    mt_builder build;
    mt_grid *grid; /* borrowed */
    int fields;
    mt_symbol **symbol; /* borrowed; the fields' symbols */
    int points, point_room;
    mt_point *point;
    int quantities, quantity_room;
    mt_quantity *quantity;
} mt_split;

/* symbols: borrowed for the split's life. */
mt_status mt_split_begin(mt_split *s, mt_forms *forms, mt_grid *grid, int fields, mt_symbol **symbols,
                         mt_error *err);
void mt_split_end(mt_split *s);

/* Brings e to a sum (to be freed with mt_sum_end), adding the points and quantities it needs. */
mt_status mt_split_sum(mt_split *s, const mt_expr *e, mt_sum *sum);

/* Registers what the cell-wise expression e needs; level: the stage at which it can be computed. */
mt_status mt_split_needs(mt_split *s, const mt_expr *e, int *level);

/* Registers a point of given parity that is not derived from its formula: white noise fits either. */
mt_status mt_split_point(mt_split *s, const mt_expr *e, mt_parities parity, int *number);

/* sum += factor i^turns FT[source]. */
mt_status mt_sum_add(mt_builder *b, mt_sum *sum, mt_term term);

/* Number of the quantity that holds `node`, or -1. */
int mt_split_find(const mt_split *s, const mt_expr *node);

/* The distinct FIELD and SPECTRAL nodes that e uses cell by cell (those below a SPECTRAL node do not count),
 * in a fixed order; at most `most` are written, the number found is returned (-1: no memory). Borrowed. */
int mt_split_leaves(const mt_expr *e, const mt_expr *leaf[], int most);

void mt_sum_end(mt_sum *sum);

#endif
