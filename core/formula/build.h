/* Building expressions in bulk: nodes are kept alive by the builder, and the first failure sticks (later
 * calls then return NULL and do nothing), so that a derivation reads like the formula it makes. Internal to
 * core/motion. */
#ifndef MT_FORMULA_BUILD_H
#define MT_FORMULA_BUILD_H

#include "core/formula/expr.h"

typedef struct mt_builder {
    mt_forms *forms;
    mt_error *err;
    mt_status status;
    int n, room;
    const mt_expr **kept;
} mt_builder;

void mt_build_end(mt_builder *b); /* drops all kept nodes */

/* Takes over a fresh reference (or a failure). */
const mt_expr *mt_build_keep(mt_builder *b, mt_status status, const mt_expr *fresh);

const mt_expr *mt_build_number(mt_builder *b, double value);
const mt_expr *mt_build_wave(mt_builder *b, int axis);
const mt_expr *mt_build_symbol(mt_builder *b, mt_symbol *symbol);
const mt_expr *mt_build_unary(mt_builder *b, mt_op op, const mt_expr *x);
const mt_expr *mt_build_binary(mt_builder *b, mt_op op, const mt_expr *x, const mt_expr *y);
const mt_expr *mt_build_deriv(mt_builder *b, int axis, const mt_expr *x);
const mt_expr *mt_build_expand(mt_builder *b, const mt_expr *x, int dim);
const mt_expr *mt_build_collect(mt_builder *b, const mt_expr *x);
const mt_expr *mt_build_partial(mt_builder *b, const mt_expr *x, const mt_expr *wrt);
/* Sum of k_a^2 over the axes of a grid of `dim` dimensions, in WAVE nodes. */
const mt_expr *mt_build_wave_squared(mt_builder *b, int dim);

#define mt_build_add(b, x, y) mt_build_binary((b), MT_ADD_OP, (x), (y))
#define mt_build_sub(b, x, y) mt_build_binary((b), MT_SUB_OP, (x), (y))
#define mt_build_mul(b, x, y) mt_build_binary((b), MT_MUL_OP, (x), (y))
#define mt_build_div(b, x, y) mt_build_binary((b), MT_DIV_OP, (x), (y))
#define mt_build_neg(b, x) mt_build_unary((b), MT_NEG_OP, (x))

/* Grows an array of n elements of this size so that one more fits (room doubles). Sticky like the rest. */
bool mt_build_grow(mt_builder *b, void *array, int n, int *room, size_t size);

#endif
