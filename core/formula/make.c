/* Constructors with local simplification. The rules are those of algebra on numbers: 0 * x is 0 and x - x is
 * 0 even where x might not be finite in some cell; constants are folded only where the result is finite. */
#include "core/formula/expr.h"

#include <math.h>
#include <string.h>

#include "core/formula/expr_inside.h"

typedef mt_status (*rule)(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err);

/* --- leaves
 * ---------------------------------------------------------------------------------------------------------------
 */

mt_status mt_expr_const(const mt_expr **out, mt_forms *forms, double value, mt_error *err) {
    if (value == 0) value = 0; /* no negative zero */
    return mt_node(out, forms, &(mt_key){.op = MT_CONST_OP, .value = value}, err);
}

mt_status mt_expr_symbol(const mt_expr **out, mt_forms *forms, mt_symbol *symbol, mt_error *err) {
    mt_op op = symbol->kind == MT_SYMBOL_PARAM ? MT_PARAM_OP : MT_FIELD_OP;
    return mt_node(out, forms, &(mt_key){.op = op, .symbol = symbol}, err);
}

mt_status mt_expr_time(const mt_expr **out, mt_forms *forms, mt_error *err) {
    return mt_node(out, forms, &(mt_key){.op = MT_TIME_OP}, err);
}

mt_status mt_expr_coord(const mt_expr **out, mt_forms *forms, int axis, mt_error *err) {
    MT_REQUIRE(axis >= 0 && axis < 3, err);
    return mt_node(out, forms, &(mt_key){.op = MT_COORD_OP, .axis = axis}, err);
}

mt_status mt_expr_wave(const mt_expr **out, mt_forms *forms, int axis, mt_error *err) {
    MT_REQUIRE(axis >= 0 && axis < 3, err);
    return mt_node(out, forms, &(mt_key){.op = MT_WAVE_OP, .axis = axis}, err);
}

mt_status mt_expr_noise(const mt_expr **out, mt_forms *forms, mt_random_kind kind, uint64_t seed,
                        mt_error *err) {
    return mt_node(out, forms, &(mt_key){.op = MT_NOISE_OP, .random = kind, .seed = seed}, err);
}

mt_status mt_expr_thermal(const mt_expr **out, mt_forms *forms, uint64_t seed, int stream, mt_error *err) {
    MT_REQUIRE(stream > 0, err);
    return mt_node(out, forms,
                   &(mt_key){.op = MT_NOISE_OP, .random = MT_RANDOM_NORMAL, .seed = seed, .axis = stream},
                   err);
}

/* --- numbers
 * --------------------------------------------------------------------------------------------------------------
 */

static double extended_log(double a, int derivative) {
    const double c = MT_LOG_CUT;
    double t = (a - c) / c;
    if (derivative == 0) return a >= c ? log(a) : log(c) + t - 0.5 * t * t;
    if (derivative == 1) return a >= c ? 1 / a : 1 / c - t / c;
    return a >= c ? -1 / (a * a) : -1 / (c * c);
}

static double whole_power(double a, double n) {
    double p = 1;
    for (unsigned i = (unsigned)fabs(n); i; i >>= 1, a *= a)
        if (i & 1) p *= a;
    return n < 0 ? 1 / p : p;
}

double mt_op_apply(mt_op op, const double a[3]) {
    switch (op) {
    case MT_NEG_OP: return -a[0];
    case MT_EXP_OP: return exp(a[0]);
    case MT_LOG_OP: return extended_log(a[0], 0);
    case MT_DLOG_OP: return extended_log(a[0], 1);
    case MT_DDLOG_OP: return extended_log(a[0], 2);
    case MT_SQRT_OP: return sqrt(a[0]);
    case MT_SIN_OP: return sin(a[0]);
    case MT_COS_OP: return cos(a[0]);
    case MT_TANH_OP: return tanh(a[0]);
    case MT_ABS_OP: return fabs(a[0]);
    case MT_SIGN_OP: return a[0] > 0 ? 1 : a[0] < 0 ? -1 : 0;
    case MT_ADD_OP: return a[0] + a[1];
    case MT_SUB_OP: return a[0] - a[1];
    case MT_MUL_OP: return a[0] * a[1];
    case MT_DIV_OP: return a[0] / a[1];
    case MT_POW_OP:
        return fabs(a[1]) <= 64 && a[1] == floor(a[1]) ? whole_power(a[0], a[1]) : pow(a[0], a[1]);
    case MT_MIN_OP: return a[0] <= a[1] ? a[0] : a[1];
    case MT_MAX_OP: return a[0] >= a[1] ? a[0] : a[1];
    case MT_ABOVE_OP: return a[0] > a[1];
    case MT_WHERE_OP: return a[0] != 0 ? a[1] : a[2];
    default: return NAN;
    }
}

/* --- helpers: each gives a fresh reference
 * ---------------------------------------------------------------------------------- */

static mt_status raw(const mt_expr **out, mt_op op, int n, const mt_expr *const a[], mt_error *err) {
    mt_key k = {.op = op, .nargs = n};
    for (int i = 0; i < n; i++) k.arg[i] = a[i];
    return mt_node(out, a[0]->forms, &k, err);
}

static mt_status give(const mt_expr **out, const mt_expr *e) {
    *out = mt_expr_ref(e);
    return MT_OK;
}

static mt_status number(const mt_expr **out, const mt_expr *like, double v, mt_error *err) {
    return mt_expr_const(out, like->forms, v, err);
}

/* op(op1(a, b), c) and op(a, op1(b, c)) with the inner result dropped */
static mt_status after(const mt_expr **out, mt_op op, mt_status inner, const mt_expr *x, const mt_expr *y,
                       int swapped, mt_error *err) {
    if (inner) return inner;
    mt_status st = swapped ? mt_expr_binary(out, op, y, x, err) : mt_expr_binary(out, op, x, y, err);
    mt_expr_unref(&x);
    return st;
}

static bool is(const mt_expr *e, double v) {
    return mt_expr_is_const(e, v);
}

/* x = coefficient * base */
static const mt_expr *base_of(const mt_expr *x, double *coefficient) {
    if (x->op == MT_NEG_OP) {
        const mt_expr *b = base_of(x->arg[0], coefficient);
        *coefficient = -*coefficient;
        return b;
    }
    *coefficient = 1;
    if (x->op != MT_MUL_OP || x->arg[0]->op != MT_CONST_OP) return x;
    *coefficient = x->arg[0]->value;
    return x->arg[1];
}

static mt_status scaled(const mt_expr **out, double coefficient, const mt_expr *base, mt_error *err) {
    const mt_expr *c;
    mt_status st = number(&c, base, coefficient, err);
    return after(out, MT_MUL_OP, st, c, base, 0, err);
}

/* -(what `inner` has just written to *x) */
static mt_status negated(const mt_expr **out, mt_status inner, const mt_expr **x, mt_error *err) {
    if (inner) return inner;
    mt_status st = mt_expr_unary(out, MT_NEG_OP, *x, err);
    mt_expr_unref(x);
    return st;
}

/* Constants first, then by structural hash: an order that does not depend on addresses or age. */
static bool in_order(const mt_expr *a, const mt_expr *b) {
    bool ca = a->op == MT_CONST_OP, cb = b->op == MT_CONST_OP;
    return ca != cb ? ca : a->hash <= b->hash;
}

static mt_status commuting(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    const mt_expr *swapped[2] = {a[1], a[0]};
    return raw(out, op, 2, in_order(a[0], a[1]) ? a : swapped, err);
}

/* --- sums
 * -------------------------------------------------------------------------------------------------------------------
 */

/* constant + e: where e is constant + y, constant - y or y - constant, the constants become one. false:
 * nothing to do */
static bool join_constants(const mt_expr **out, double c, const mt_expr *e, mt_status *st, mt_error *err) {
    const mt_expr *k;
    if (e->op != MT_ADD_OP && e->op != MT_SUB_OP) return false;
    bool first = e->arg[0]->op == MT_CONST_OP, second = e->arg[1]->op == MT_CONST_OP;
    if (!first && !second) return false;
    double inner = e->arg[!first]->value, sum = c + (second && e->op == MT_SUB_OP ? -inner : inner);
    if (!isfinite(sum)) return false;
    *st = number(&k, e, sum, err);
    *st = after(out, first ? e->op : MT_ADD_OP, *st, k, e->arg[first], 0, err);
    return true;
}

static mt_status make_sum(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    bool minus = op == MT_SUB_OP;
    double ca, cb;
    mt_status joined;
    if (is(a[1], 0)) return give(out, a[0]);
    if (is(a[0], 0)) return minus ? mt_expr_unary(out, MT_NEG_OP, a[1], err) : give(out, a[1]);
    const mt_expr *ba = base_of(a[0], &ca), *bb = base_of(a[1], &cb);
    if (ba == bb) {
        double c = minus ? ca - cb : ca + cb;
        if (isfinite(c)) return c == 0 ? number(out, ba, 0, err) : scaled(out, c, ba, err);
    }
    if (a[1]->op == MT_CONST_OP &&
        join_constants(out, minus ? -a[1]->value : a[1]->value, a[0], &joined, err))
        return joined;
    if (a[0]->op == MT_CONST_OP && !minus && join_constants(out, a[0]->value, a[1], &joined, err))
        return joined;
    if (a[1]->op == MT_NEG_OP)
        return mt_expr_binary(out, minus ? MT_ADD_OP : MT_SUB_OP, a[0], a[1]->arg[0], err);
    if (bb != a[1] && cb < 0) { /* a + (-3) b = a - 3 b */
        const mt_expr *p;
        mt_status st = scaled(&p, -cb, bb, err);
        return after(out, minus ? MT_ADD_OP : MT_SUB_OP, st, p, a[0], 1, err);
    }
    if (!minus && (a[0]->op == MT_NEG_OP || (ba != a[0] && ca < 0))) { /* (-a) + b = b - a */
        const mt_expr *p;
        mt_status st = scaled(&p, -ca, ba, err);
        return after(out, MT_SUB_OP, st, p, a[1], 1, err);
    }
    return minus ? raw(out, op, 2, a, err) : commuting(out, op, a, err);
}

/* --- products
 * ---------------------------------------------------------------------------------------------------------------
 */

static bool whole(const mt_expr *e) {
    return e->op == MT_CONST_OP && e->value == floor(e->value) && fabs(e->value) <= 64;
}

/* x = base^power with a whole positive power */
static const mt_expr *power_of(const mt_expr *x, double *power) {
    *power = 1;
    if (x->op != MT_POW_OP || !whole(x->arg[1]) || x->arg[1]->value < 1) return x;
    *power = x->arg[1]->value;
    return x->arg[0];
}

static mt_status make_product(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    double pa, pb;
    const mt_expr *p;
    for (int i = 0; i < 2; i++) {
        const mt_expr *x = a[i], *y = a[1 - i];
        if (is(x, 0)) return give(out, x);
        if (is(x, 1)) return give(out, y);
        if (is(x, -1)) return mt_expr_unary(out, MT_NEG_OP, y, err);
        if (x->op == MT_NEG_OP)
            return negated(out, mt_expr_binary(&p, MT_MUL_OP, x->arg[0], y, err), &p, err);
    }
    for (int i = 0; i < 2; i++) { /* numbers to the front */
        const mt_expr *x = a[i], *y = a[1 - i];
        if (y->op != MT_MUL_OP || y->arg[0]->op != MT_CONST_OP) continue;
        if (mt_expr_uniform(y) && !mt_expr_uniform(x)) continue;
        mt_status st = mt_expr_binary(&p, MT_MUL_OP, x, x->op == MT_CONST_OP ? y->arg[0] : y->arg[1], err);
        return after(out, MT_MUL_OP, st, p, x->op == MT_CONST_OP ? y->arg[1] : y->arg[0], 0, err);
    }
    for (int i = 0; i < 2; i++) { /* what is the same in every cell stays together: kernels compute it once */
        const mt_expr *x = a[i], *y = a[1 - i];
        if (y->op != MT_MUL_OP || mt_expr_uniform(y)) continue;
        int u = mt_expr_uniform(y->arg[0]) ? 0 : mt_expr_uniform(y->arg[1]) ? 1 : -1;
        if (u < 0 || (y->arg[u]->op == MT_CONST_OP && !mt_expr_uniform(x))) continue;
        bool together = mt_expr_uniform(x);
        mt_status st = mt_expr_binary(&p, MT_MUL_OP, x, together ? y->arg[u] : y->arg[1 - u], err);
        return after(out, MT_MUL_OP, st, p, together ? y->arg[1 - u] : y->arg[u], 0, err);
    }
    const mt_expr *ba = power_of(a[0], &pa), *bb = power_of(a[1], &pb);
    if (ba == bb && ba->op != MT_CONST_OP && pa + pb <= 64) {
        mt_status st = number(&p, ba, pa + pb, err);
        return after(out, MT_POW_OP, st, p, ba, 1, err);
    }
    return commuting(out, op, a, err);
}

static mt_status make_quotient(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    const mt_expr *p;
    if (is(a[1], 1)) return give(out, a[0]);
    if (is(a[0], 0) && !is(a[1], 0)) return give(out, a[0]);
    if (a[0] == a[1] && !is(a[0], 0)) return number(out, a[0], 1, err);
    if (a[0]->op == MT_NEG_OP)
        return negated(out, mt_expr_binary(&p, MT_DIV_OP, a[0]->arg[0], a[1], err), &p, err);
    if (a[1]->op == MT_CONST_OP && a[0]->op == MT_MUL_OP && a[0]->arg[0]->op == MT_CONST_OP) {
        double c = a[0]->arg[0]->value / a[1]->value;
        if (isfinite(c)) return scaled(out, c, a[0]->arg[1], err);
    }
    return raw(out, op, 2, a, err);
}

static mt_status make_power(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    const mt_expr *p;
    if (is(a[1], 0)) return number(out, a[0], 1, err);
    if (is(a[1], 1) || is(a[0], 1)) return give(out, a[0]);
    if (is(a[1], 0.5)) return mt_expr_unary(out, MT_SQRT_OP, a[0], err);
    if (a[0]->op == MT_POW_OP && whole(a[0]->arg[1]) && whole(a[1])) {
        double n = a[0]->arg[1]->value * a[1]->value;
        if (fabs(n) <= 64 && a[0]->arg[1]->value > 0) {
            mt_status st = number(&p, a[0], n, err);
            return after(out, MT_POW_OP, st, p, a[0]->arg[0], 1, err);
        }
    }
    return raw(out, op, 2, a, err);
}

static mt_status make_chosen(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    if (op == MT_WHERE_OP) {
        if (a[0]->op == MT_CONST_OP) return give(out, a[0]->value != 0 ? a[1] : a[2]);
        if (a[1] == a[2]) return give(out, a[1]);
        return raw(out, op, 3, a, err);
    }
    if (a[0] == a[1]) return op == MT_ABOVE_OP ? number(out, a[0], 0, err) : give(out, a[0]);
    return raw(out, op, 2, a, err);
}

static mt_status make_negative(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    if (a[0]->op == MT_NEG_OP) return give(out, a[0]->arg[0]);
    if (a[0]->op == MT_MUL_OP && a[0]->arg[0]->op == MT_CONST_OP)
        return scaled(out, -a[0]->arg[0]->value, a[0]->arg[1], err);
    if (a[0]->op == MT_SUB_OP) return mt_expr_binary(out, MT_SUB_OP, a[0]->arg[1], a[0]->arg[0], err);
    return raw(out, op, 1, a, err);
}

static mt_status make_plain(const mt_expr **out, mt_op op, const mt_expr *const a[], mt_error *err) {
    return raw(out, op, mt_op_args(op), a, err);
}

/* --- spectral operators
 * ----------------------------------------------------------------------------------------------------- */

typedef struct spectral {
    mt_op op;
    int axis;
    mt_symbol *filter;
} spectral;

static mt_status apply(const mt_expr **out, const spectral *s, const mt_expr *a, mt_error *err) {
    return mt_expr_make(out, s->op, 1, &a, s->axis, s->filter, err);
}

static mt_status scaled_spectral(const mt_expr **out, const spectral *s, const mt_expr *factor,
                                 const mt_expr *rest, mt_error *err) {
    const mt_expr *inner, *square;
    mt_status st = apply(&inner, s, rest, err);
    if (st || s->op != MT_GRADSQ_OP) return after(out, MT_MUL_OP, st, inner, factor, 1, err);
    st = mt_expr_binary(&square, MT_MUL_OP, factor, factor, err);
    if (!st) st = after(out, MT_MUL_OP, MT_OK, square, inner, 0, err);
    mt_expr_unref(&inner);
    return st;
}

static mt_status make_spectral(const mt_expr **out, const spectral *s, const mt_expr *a, mt_error *err) {
    const mt_expr *p;
    if (mt_expr_uniform(a)) {
        if (s->op != MT_FILTER_OP) return number(out, a, 0, err);
        if (s->filter->table) return scaled(out, s->filter->table[0], a, err);
    }
    if (a->op == MT_NEG_OP) {
        if (s->op == MT_GRADSQ_OP) return apply(out, s, a->arg[0], err);
        return negated(out, apply(&p, s, a->arg[0], err), &p, err);
    }
    for (int i = 0; i < 2 && a->op == MT_MUL_OP; i++)
        if (mt_expr_uniform(a->arg[i])) return scaled_spectral(out, s, a->arg[i], a->arg[1 - i], err);
    if (a->op == MT_DIV_OP && mt_expr_uniform(a->arg[1]) && s->op != MT_GRADSQ_OP) {
        mt_status st = apply(&p, s, a->arg[0], err);
        return after(out, MT_DIV_OP, st, p, a->arg[1], 0, err);
    }
    return mt_node(out, a->forms,
                   &(mt_key){.op = s->op, .nargs = 1, .arg = {a}, .axis = s->axis, .symbol = s->filter}, err);
}

/* --- the door
 * -----------------------------------------------------------------------------------------------------------------
 */

static rule rule_of(mt_op op) {
    switch (op) {
    case MT_ADD_OP:
    case MT_SUB_OP: return make_sum;
    case MT_MUL_OP: return make_product;
    case MT_DIV_OP: return make_quotient;
    case MT_POW_OP: return make_power;
    case MT_NEG_OP: return make_negative;
    case MT_MIN_OP:
    case MT_MAX_OP:
    case MT_ABOVE_OP:
    case MT_WHERE_OP: return make_chosen;
    default: return make_plain;
    }
}

static bool fold(mt_op op, int n, const mt_expr *const a[], double *v) {
    double x[3] = {0, 0, 0};
    for (int i = 0; i < n; i++) {
        if (a[i]->op != MT_CONST_OP) return false;
        x[i] = a[i]->value;
    }
    *v = mt_op_apply(op, x);
    return isfinite(*v);
}

mt_status mt_expr_make(const mt_expr **out, mt_op op, int n, const mt_expr *const a[], int axis,
                       mt_symbol *filter, mt_error *err) {
    double v;
    *out = NULL;
    MT_REQUIRE((unsigned)op < MT_OP_COUNT && n == mt_op_args(op) && n > 0, err);
    for (int i = 1; i < n; i++) MT_REQUIRE(a[i]->forms == a[0]->forms, err);
    if (mt_op_spectral(op) || op == MT_GRADSQ_OP) {
        MT_REQUIRE((op != MT_DERIV_OP || (axis >= 0 && axis < 3)) && (op == MT_FILTER_OP) == (filter != NULL),
                   err);
        return make_spectral(out, &(spectral){op, op == MT_DERIV_OP ? axis : 0, filter}, a[0], err);
    }
    if (fold(op, n, a, &v)) return number(out, a[0], v, err);
    return rule_of(op)(out, op, a, err);
}

mt_status mt_expr_unary(const mt_expr **out, mt_op op, const mt_expr *a, mt_error *err) {
    return mt_expr_make(out, op, 1, &a, 0, NULL, err);
}

mt_status mt_expr_binary(const mt_expr **out, mt_op op, const mt_expr *a, const mt_expr *b, mt_error *err) {
    return mt_expr_make(out, op, 2, (const mt_expr *const[]){a, b}, 0, NULL, err);
}

mt_status mt_expr_deriv(const mt_expr **out, int axis, const mt_expr *a, mt_error *err) {
    return mt_expr_make(out, MT_DERIV_OP, 1, &a, axis, NULL, err);
}
