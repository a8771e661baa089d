/* What makes a right-hand side stiff: its *frozen symbol*. Linearised about the present state with
 * coefficients frozen in each cell, du/dt = sum_q a_q(x) O_q(k) u^: O_q a product of wavenumbers, a_q a
 * cell-wise expression (for div(M grad(f' - kappa lap c)): -M f'' k^2 and -M kappa k^4). Terms of odd order
 * in k carry no damping and are left out. The stepper takes uniform a_q into its implicit part as they are
 * and dominates the others by their extremes. Internal to core/motion. */
#ifndef MT_MOTION_STIFF_H
#define MT_MOTION_STIFF_H

#include "core/formula/build.h"

typedef struct mt_stiff {
    const mt_expr *a; /* damping coefficient: the rate is -a * o; uniform or cell by cell */
    const mt_expr *o; /* function of WAVE (and FILTER symbols) */
    bool even;        /* o is a sum of products of even powers of wavenumbers: never negative */
} mt_stiff;

typedef struct mt_stiffness {
    int n, room;
    mt_stiff *item;
} mt_stiffness;

/* Frozen symbol of rhs with respect to the field node. Kept alive by the builder; free the list with
 * mt_stiff_end. */
mt_status mt_stiff_find(mt_builder *b, const mt_expr *rhs, const mt_expr *field, int dim, mt_stiffness *out);
void mt_stiff_end(mt_stiffness *list);

#endif
