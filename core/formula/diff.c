/* Derivatives: cell-wise partial ones, and the exact gradient of the discrete energy by reverse accumulation.
 *
 * Reverse accumulation (Griewank & Walther, Evaluating Derivatives, SIAM 2008, ch. 3) walks the shared graph
 * once from the density down, each node passing its adjoint times the local derivative to its arguments; a
 * spectral operator passes the adjoint through its transpose under the sum over cells: DERIV -> -DERIV,
 * LAPLACIAN and FILTER -> themselves. */
#include "core/formula/build.h"
#include "core/formula/expr.h"
#include "core/formula/map.h"

#include <string.h>

#include "core/base/memory.h"

/* --- local derivatives
 * ---------------------------------------------------------------------------------------------------------
 */

/* d(e)/d(argument i); NULL on failure, which the builder keeps. */
typedef const mt_expr *(*local)(mt_builder *b, const mt_expr *e, int i);

static const mt_expr *num(mt_builder *b, double v) {
    return mt_build_number(b, v);
}

static const mt_expr *d_none(mt_builder *b, const mt_expr *e, int i) {
    (void)e, (void)i;
    return num(b, 0);
}
static const mt_expr *d_neg(mt_builder *b, const mt_expr *e, int i) {
    (void)e, (void)i;
    return num(b, -1);
}
static const mt_expr *d_exp(mt_builder *b, const mt_expr *e, int i) {
    (void)b, (void)i;
    return e;
}
static const mt_expr *d_log(mt_builder *b, const mt_expr *e, int i) {
    return mt_build_unary(b, MT_DLOG_OP, e->arg[i]);
}
static const mt_expr *d_dlog(mt_builder *b, const mt_expr *e, int i) {
    return mt_build_unary(b, MT_DDLOG_OP, e->arg[i]);
}
static const mt_expr *d_ddlog(mt_builder *b, const mt_expr *e, int i) {
    const mt_expr *a = e->arg[i], *in = mt_build_binary(b, MT_ABOVE_OP, a, num(b, MT_LOG_CUT));
    const mt_expr *third = mt_build_div(b, num(b, 2), mt_build_binary(b, MT_POW_OP, a, num(b, 3)));
    const mt_expr *x[3] = {in, third, num(b, 0)}, *out = NULL;
    if (b->status) return NULL;
    mt_status st = mt_expr_make(&out, MT_WHERE_OP, 3, x, 0, NULL, b->err);
    return mt_build_keep(b, st, out);
}
static const mt_expr *d_sqrt(mt_builder *b, const mt_expr *e, int i) {
    (void)i;
    return mt_build_div(b, num(b, 0.5), e);
}
static const mt_expr *d_sin(mt_builder *b, const mt_expr *e, int i) {
    return mt_build_unary(b, MT_COS_OP, e->arg[i]);
}
static const mt_expr *d_cos(mt_builder *b, const mt_expr *e, int i) {
    return mt_build_neg(b, mt_build_unary(b, MT_SIN_OP, e->arg[i]));
}
static const mt_expr *d_tanh(mt_builder *b, const mt_expr *e, int i) {
    (void)i;
    return mt_build_sub(b, num(b, 1), mt_build_mul(b, e, e));
}
static const mt_expr *d_abs(mt_builder *b, const mt_expr *e, int i) {
    return mt_build_unary(b, MT_SIGN_OP, e->arg[i]);
}
static const mt_expr *d_add(mt_builder *b, const mt_expr *e, int i) {
    (void)e, (void)i;
    return num(b, 1);
}
static const mt_expr *d_sub(mt_builder *b, const mt_expr *e, int i) {
    (void)e;
    return num(b, i == 0 ? 1 : -1);
}
static const mt_expr *d_mul(mt_builder *b, const mt_expr *e, int i) {
    (void)b;
    return e->arg[1 - i];
}
static const mt_expr *d_div(mt_builder *b, const mt_expr *e, int i) {
    if (i == 0) return mt_build_div(b, num(b, 1), e->arg[1]);
    return mt_build_neg(b, mt_build_div(b, e, e->arg[1]));
}
static const mt_expr *d_pow(mt_builder *b, const mt_expr *e, int i) {
    const mt_expr *base = e->arg[0], *n = e->arg[1];
    if (i == 1) return mt_build_mul(b, e, mt_build_unary(b, MT_LOG_OP, base));
    return mt_build_mul(b, n, mt_build_binary(b, MT_POW_OP, base, mt_build_sub(b, n, num(b, 1))));
}
/* MIN takes the first argument unless it is above the second; MAX unless the second is above it. */
static const mt_expr *d_chosen(mt_builder *b, const mt_expr *e, int i) {
    bool min = e->op == MT_MIN_OP;
    const mt_expr *second = mt_build_binary(b, MT_ABOVE_OP, e->arg[min ? 0 : 1], e->arg[min ? 1 : 0]);
    return i == 1 ? second : mt_build_sub(b, num(b, 1), second);
}
static const mt_expr *d_where(mt_builder *b, const mt_expr *e, int i) {
    const mt_expr *x[3] = {e->arg[0], num(b, i == 1), num(b, i == 2)}, *out = NULL;
    if (i == 0) return num(b, 0);
    if (b->status) return NULL;
    mt_status st = mt_expr_make(&out, MT_WHERE_OP, 3, x, 0, NULL, b->err);
    return mt_build_keep(b, st, out);
}

static const local rules[] = {
    [MT_CONST_OP] = d_none,     [MT_FIELD_OP] = d_none,  [MT_PARAM_OP] = d_none,  [MT_TIME_OP] = d_none,
    [MT_COORD_OP] = d_none,     [MT_WAVE_OP] = d_none,   [MT_NOISE_OP] = d_none,  [MT_NEG_OP] = d_neg,
    [MT_EXP_OP] = d_exp,        [MT_LOG_OP] = d_log,     [MT_DLOG_OP] = d_dlog,   [MT_DDLOG_OP] = d_ddlog,
    [MT_SQRT_OP] = d_sqrt,      [MT_SIN_OP] = d_sin,     [MT_COS_OP] = d_cos,     [MT_TANH_OP] = d_tanh,
    [MT_ABS_OP] = d_abs,        [MT_SIGN_OP] = d_none,   [MT_ADD_OP] = d_add,     [MT_SUB_OP] = d_sub,
    [MT_MUL_OP] = d_mul,        [MT_DIV_OP] = d_div,     [MT_POW_OP] = d_pow,     [MT_MIN_OP] = d_chosen,
    [MT_MAX_OP] = d_chosen,     [MT_ABOVE_OP] = d_none,  [MT_WHERE_OP] = d_where, [MT_DERIV_OP] = d_none,
    [MT_LAPLACIAN_OP] = d_none, [MT_GRADSQ_OP] = d_none, [MT_FILTER_OP] = d_none,
};
_Static_assert(sizeof rules / sizeof *rules == MT_OP_COUNT, "a derivative rule for every operator");

static bool beyond_cell(const mt_expr *e) {
    return mt_op_spectral(e->op) || e->op == MT_GRADSQ_OP;
}

/* --- cell-wise partial derivative
 * ------------------------------------------------------------------------------------------------ */

typedef struct partial_walk {
    mt_builder *b;
    const mt_expr *wrt;
    mt_map done; /* node -> derivative */
} partial_walk;

static const mt_expr *partial(partial_walk *w, const mt_expr *e);

static const mt_expr *chain(partial_walk *w, const mt_expr *e) {
    mt_builder *b = w->b;
    const mt_expr *sum = num(b, 0);
    for (int i = 0; i < e->nargs && b->status == MT_OK; i++) {
        const mt_expr *d = partial(w, e->arg[i]);
        if (!d || mt_expr_is_const(d, 0)) continue;
        sum = mt_build_add(b, sum, mt_build_mul(b, rules[e->op](b, e, i), d));
    }
    return sum;
}

static const mt_expr *partial(partial_walk *w, const mt_expr *e) {
    if (w->b->status) return NULL;
    if (e == w->wrt) return num(w->b, 1);
    if (!e->nargs || beyond_cell(e)) return num(w->b, 0);
    uintptr_t *known = mt_map_at(&w->done, e, false);
    if (known) return (const mt_expr *)*known;
    const mt_expr *d = chain(w, e);
    known = mt_map_at(&w->done, e, true);
    if (known) *known = (uintptr_t)d;
    return d;
}

mt_status mt_expr_partial(const mt_expr **out, const mt_expr *e, const mt_expr *wrt, mt_error *err) {
    mt_builder b = {.forms = e->forms, .err = err};
    partial_walk w = {.b = &b, .wrt = wrt};
    const mt_expr *d = mt_build_collect(&b, partial(&w, e));
    *out = b.status == MT_OK && d ? mt_expr_ref(d) : NULL;
    mt_map_end(&w.done);
    mt_build_end(&b);
    return b.status;
}

/* --- variational derivative
 * -------------------------------------------------------------------------------------------------------- */

typedef struct order {
    mt_builder *b;
    const mt_expr *field;
    int dim;
    size_t n, room;
    const mt_expr **node; /* arguments before those that use them; only nodes that contain the field */
    mt_map state;         /* while ordering: 1 without the field, 2 with it; then: adjoint */
} order;

static bool put_in_order(order *o, const mt_expr *e) {
    if (!(e->contents & MT_HAS_FIELD)) return false;
    uintptr_t *known = mt_map_at(&o->state, e, false);
    if (known) return *known == 2;
    bool has = e == o->field;
    for (int i = 0; i < e->nargs; i++) has |= put_in_order(o, e->arg[i]);
    known = mt_map_at(&o->state, e, true);
    if (o->n == o->room && has) {
        size_t room = o->room ? 2 * o->room : 64;
        const mt_expr **more = mt_resize(o->node, room, sizeof *more);
        if (more) o->node = more, o->room = room;
    }
    if (!known || (has && o->n == o->room)) {
        if (o->b->status == MT_OK) o->b->status = mt_fail(o->b->err, MT_ENOMEM, "no memory for a derivative");
        return false;
    }
    *known = has ? 2 : 1;
    if (has) o->node[o->n++] = e;
    return has;
}

static void give_adjoint(order *o, const mt_expr *to, const mt_expr *amount) {
    uintptr_t *at = mt_map_at(&o->state, to, false);
    if (!at || !amount || mt_expr_is_const(amount, 0)) return;
    const mt_expr *sum = *at ? mt_build_add(o->b, (const mt_expr *)*at, amount) : amount;
    *at = (uintptr_t)sum;
}

/* |grad u|^2: -div(2 a grad u), one Laplacian where a is the same in every cell. */
static const mt_expr *gradsq_adjoint(order *o, const mt_expr *u, const mt_expr *a) {
    mt_builder *b = o->b;
    const mt_expr *twice = mt_build_mul(b, num(b, 2), a);
    if (!twice) return NULL;
    if (mt_expr_uniform(a))
        return mt_build_neg(b, mt_build_mul(b, twice, mt_build_unary(b, MT_LAPLACIAN_OP, u)));
    const mt_expr *sum = num(b, 0);
    for (int axis = 0; axis < o->dim; axis++)
        sum =
            mt_build_sub(b, sum, mt_build_deriv(b, axis, mt_build_mul(b, twice, mt_build_deriv(b, axis, u))));
    return sum;
}

static const mt_expr *filtered(order *o, const mt_expr *e, const mt_expr *a) {
    const mt_expr *out = NULL;
    mt_status st = mt_expr_make(&out, MT_FILTER_OP, 1, &a, 0, e->symbol, o->b->err);
    return mt_build_keep(o->b, st, out);
}

static void pass_down(order *o, const mt_expr *e, const mt_expr *a) {
    mt_builder *b = o->b;
    switch (e->op) {
    case MT_DERIV_OP: give_adjoint(o, e->arg[0], mt_build_neg(b, mt_build_deriv(b, e->axis, a))); return;
    case MT_LAPLACIAN_OP: give_adjoint(o, e->arg[0], mt_build_unary(b, MT_LAPLACIAN_OP, a)); return;
    case MT_FILTER_OP: give_adjoint(o, e->arg[0], filtered(o, e, a)); return;
    case MT_GRADSQ_OP: give_adjoint(o, e->arg[0], gradsq_adjoint(o, e->arg[0], a)); return;
    default: break;
    }
    for (int i = 0; i < e->nargs; i++) {
        uintptr_t *at = mt_map_at(&o->state, e->arg[i], false);
        if (!at || *at == 1) continue; /* does not contain the field */
        give_adjoint(o, e->arg[i], mt_build_mul(b, a, rules[e->op](b, e, i)));
    }
}

static const mt_expr *accumulate(order *o, const mt_expr *density) {
    for (size_t i = 0; i < o->n; i++) *mt_map_at(&o->state, o->node[i], false) = 0;
    give_adjoint(o, density, num(o->b, 1));
    for (size_t i = o->n; i-- > 0 && o->b->status == MT_OK;) {
        const mt_expr *a = (const mt_expr *)*mt_map_at(&o->state, o->node[i], false);
        if (a && o->node[i] != o->field) pass_down(o, o->node[i], a);
    }
    uintptr_t *at = mt_map_at(&o->state, o->field, false);
    return at && *at ? (const mt_expr *)*at : num(o->b, 0);
}

mt_status mt_expr_variation(const mt_expr **out, const mt_expr *density, const mt_expr *field, int dim,
                            mt_error *err) {
    mt_builder b = {.forms = density->forms, .err = err};
    order o = {.b = &b, .field = field, .dim = dim};
    *out = NULL;
    if (density->contents & (MT_HAS_NOISE | MT_HAS_WAVE))
        return mt_fail(err, MT_EINPUT, "an energy density cannot contain noise or wavenumbers");
    const mt_expr *d = num(&b, 0);
    if (put_in_order(&o, density) && b.status == MT_OK) d = mt_build_collect(&b, accumulate(&o, density));
    if (b.status == MT_OK && d) *out = mt_expr_ref(d);
    mt_free(o.node);
    mt_map_end(&o.state);
    mt_build_end(&b);
    return b.status;
}
