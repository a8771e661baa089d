#include "core/motion/stiff.h"

#include <string.h>

#include "core/base/memory.h"
#include "core/motion/split.h"

#define MOST_LEAVES 256

/* A monomial under construction: coefficient * i^turns * product of k_axis^power * rest. */
typedef struct mono {
    const mt_expr *a;
    const mt_expr *rest; /* FILTER symbols */
    int power[3];
    int turns;
} mono;

typedef struct list {
    mt_builder *b;
    int dim;
    const mt_expr *field;
    int n, room;
    mono *m;
} list;

static void push(list *l, mono m) {
    if (!m.a || !m.rest || mt_expr_is_const(m.a, 0)) return;
    for (int i = 0; i < l->n; i++) {
        mono *o = &l->m[i];
        if (o->rest != m.rest || (o->turns - m.turns) % 4 != 0 ||
            memcmp(o->power, m.power, sizeof m.power) != 0)
            continue;
        o->a = mt_build_add(l->b, o->a, m.a);
        return;
    }
    if (mt_build_grow(l->b, &l->m, l->n, &l->room, sizeof *l->m)) l->m[l->n++] = m;
}

static void frozen(list *l, const mt_expr *e, mono so_far);

static void below_spectral(list *l, const mt_expr *q, mono m) {
    if (q->op == MT_DERIV_OP) {
        m.power[q->axis]++;
        m.turns = (m.turns + 1) % 4;
        frozen(l, q->arg[0], m);
    } else if (q->op == MT_LAPLACIAN_OP) {
        m.turns = (m.turns + 2) % 4;
        for (int a = 0; a < l->dim; a++) {
            mono each = m;
            each.power[a] += 2;
            frozen(l, q->arg[0], each);
        }
    } else {
        m.rest = mt_build_mul(l->b, m.rest, mt_build_symbol(l->b, q->symbol));
        frozen(l, q->arg[0], m);
    }
}

/* Each field or spectral node that e uses cell by cell contributes its partial derivative times its own
 * symbol. */
static void frozen(list *l, const mt_expr *e, mono so_far) {
    if (l->b->status != MT_OK) return;
    const mt_expr **leaf = mt_alloc(MOST_LEAVES, sizeof *leaf);
    int n = leaf ? mt_split_leaves(e, leaf, MOST_LEAVES) : -1;
    if (n < 0 || n > MOST_LEAVES) l->b->status = mt_fail(l->b->err, MT_ENOMEM, "no memory for the equations");
    for (int i = 0; i < n && l->b->status == MT_OK; i++) {
        mono m = so_far;
        if (leaf[i] != l->field && (leaf[i]->op == MT_FIELD_OP || !mt_expr_contains(leaf[i], l->field)))
            continue;
        m.a = mt_build_mul(l->b, m.a, mt_build_partial(l->b, e, leaf[i]));
        if (!m.a || mt_expr_is_const(m.a, 0)) continue;
        if (leaf[i] == l->field)
            push(l, m);
        else
            below_spectral(l, leaf[i], m);
    }
    mt_free(leaf);
}

static const mt_expr *wave_product(list *l, const mono *m) {
    const mt_expr *p = m->rest;
    for (int a = 0; a < 3; a++)
        for (int i = 0; i < m->power[a]; i++) p = mt_build_mul(l->b, p, mt_build_wave(l->b, a));
    return p;
}

/* Monomials with one coefficient share one reduction: kx^2 and ky^2 under M f'' become M f'' (kx^2 + ky^2).
 */
static void add_item(list *l, mt_stiffness *out, const mt_expr *a, const mt_expr *o, bool even) {
    if (!a || !o) return;
    for (int i = 0; i < out->n; i++)
        if (out->item[i].a == a && out->item[i].even == even) {
            out->item[i].o = mt_build_add(l->b, out->item[i].o, o);
            return;
        }
    if (mt_build_grow(l->b, &out->item, out->n, &out->room, sizeof *out->item))
        out->item[out->n++] = (mt_stiff){a, o, even};
}

/* A number in front of the coefficient moves to the wavenumber side, so that 2 M kappa kx^2 ky^2 joins M
 * kappa kx^4. */
static void take_number(list *l, const mt_expr **a, const mt_expr **o) {
    if (!*a || (*a)->op != MT_MUL_OP) return;
    for (int i = 0; i < 2; i++)
        if ((*a)->arg[i]->op == MT_CONST_OP && (*a)->arg[i]->value > 0) {
            *o = mt_build_mul(l->b, *o, (*a)->arg[i]);
            *a = (*a)->arg[1 - i];
            return;
        }
}

/* |k_i k_j| <= (k_i^2 + k_j^2)/2 for the two axes with odd powers that a product of even order may have: a
 * bound by even powers, for coefficients of either sign. */
static const mt_expr *even_bound(list *l, const mono *m) {
    mono rest = *m;
    const mt_expr *squares = mt_build_number(l->b, 0);
    for (int a = 0; a < 3; a++) {
        if (m->power[a] % 2 == 0) continue;
        const mt_expr *k = mt_build_wave(l->b, a);
        squares = mt_build_add(l->b, squares, mt_build_mul(l->b, k, k));
        rest.power[a]--;
    }
    const mt_expr *half = mt_build_mul(l->b, mt_build_number(l->b, 0.5), squares);
    return mt_build_mul(l->b, wave_product(l, &rest), half);
}

/* One monomial of the symbol as an item: exact where its coefficient is uniform, else fit to be dominated. */
static void make_item(list *l, const mono *m, mt_stiffness *out) {
    const mt_expr *a = mt_build_collect(l->b, m->turns == 0 ? mt_build_neg(l->b, m->a) : m->a);
    const mt_expr *o = wave_product(l, m);
    bool even = mt_expr_is_const(m->rest, 1);
    bool odd_axes = m->power[0] % 2 || m->power[1] % 2 || m->power[2] % 2;
    if (!a || !o) return;
    if (even && odd_axes && !mt_expr_uniform(a))
        a = mt_build_unary(l->b, MT_ABS_OP, a), o = even_bound(l, m);
    else
        even = even && !odd_axes;
    take_number(l, &a, &o);
    add_item(l, out, a, o, even);
}

mt_status mt_stiff_find(mt_builder *b, const mt_expr *rhs, const mt_expr *field, int dim, mt_stiffness *out) {
    list l = {.b = b, .dim = dim, .field = field};
    memset(out, 0, sizeof *out);
    const mt_expr *one = mt_build_number(b, 1);
    frozen(&l, mt_build_expand(b, rhs, dim), (mono){one, one, {0, 0, 0}, 0});
    for (int i = 0; i < l.n && b->status == MT_OK; i++)
        if (l.m[i].turns % 2 == 0) make_item(&l, &l.m[i], out);
    mt_free(l.m);
    if (b->status != MT_OK) mt_stiff_end(out);
    return b->status;
}

void mt_stiff_end(mt_stiffness *list_) {
    mt_free(list_->item);
    memset(list_, 0, sizeof *list_);
}
