/* Rewriting whole expressions: expansion of gradsq, replacement, and polynomials in normal form. */
#include "core/formula/build.h"
#include "core/formula/expr.h"
#include "core/formula/map.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/memory.h"

/* --- node by node
 * -----------------------------------------------------------------------------------------------------------------
 */

typedef struct rewrite {
    mt_builder *b;
    mt_map done;
    int dim;                  /* expand */
    const mt_expr *what, *by; /* replace */
} rewrite;

/* e with other arguments, simplified again */
static const mt_expr *remade(mt_builder *b, const mt_expr *e, const mt_expr *const a[]) {
    const mt_expr *out = NULL;
    bool same = true;
    for (int i = 0; i < e->nargs; i++) {
        if (!a[i]) return NULL;
        same = same && a[i] == e->arg[i];
    }
    if (same) return e;
    mt_status st =
        mt_expr_make(&out, e->op, e->nargs, a, e->axis, e->op == MT_FILTER_OP ? e->symbol : NULL, b->err);
    return mt_build_keep(b, st, out);
}

static const mt_expr *rewritten(rewrite *w, const mt_expr *e);

static const mt_expr *rewrite_arguments(rewrite *w, const mt_expr *e) {
    const mt_expr *a[3] = {NULL, NULL, NULL};
    for (int i = 0; i < e->nargs; i++) a[i] = rewritten(w, e->arg[i]);
    if (w->what || e->op != MT_GRADSQ_OP) return remade(w->b, e, a);
    const mt_expr *sum = mt_build_number(w->b, 0);
    for (int axis = 0; axis < w->dim; axis++) {
        const mt_expr *d = mt_build_deriv(w->b, axis, a[0]);
        sum = mt_build_add(w->b, sum, mt_build_mul(w->b, d, d));
    }
    return sum;
}

static const mt_expr *rewritten(rewrite *w, const mt_expr *e) {
    if (w->b->status) return NULL;
    if (e == w->what) return w->by;
    if (!e->nargs || (!w->what && !(e->contents & MT_HAS_SPECTRAL))) return e;
    uintptr_t *known = mt_map_at(&w->done, e, false);
    if (known) return (const mt_expr *)*known;
    const mt_expr *r = rewrite_arguments(w, e);
    known = mt_map_at(&w->done, e, true);
    if (known) *known = (uintptr_t)r;
    return r;
}

static mt_status run_rewrite(const mt_expr **out, const mt_expr *e, rewrite w, mt_error *err) {
    mt_builder b = {.forms = e->forms, .err = err};
    w.b = &b;
    const mt_expr *r = rewritten(&w, e);
    *out = b.status == MT_OK && r ? mt_expr_ref(r) : NULL;
    mt_map_end(&w.done);
    mt_build_end(&b);
    return b.status;
}

mt_status mt_expr_expand(const mt_expr **out, const mt_expr *e, int dim, mt_error *err) {
    return run_rewrite(out, e, (rewrite){.dim = dim}, err);
}

mt_status mt_expr_replace(const mt_expr **out, const mt_expr *e, const mt_expr *what, const mt_expr *by,
                          mt_error *err) {
    return run_rewrite(out, e, (rewrite){.what = what, .by = by}, err);
}

/* --- polynomials
 * -------------------------------------------------------------------------------------------------------------------
 */

#define MOST_TERMS 64
#define MOST_FIELDS 6
#define MOST_DEGREE 12

/* coefficient * product of fields^power, or coefficient * atom (anything that is no polynomial in fields) */
typedef struct pterm {
    const mt_expr *coefficient; /* uniform */
    const mt_expr *atom;        /* or NULL */
    int power[MOST_FIELDS];
} pterm;

typedef struct poly {
    int n;
    pterm term[MOST_TERMS];
} poly;

typedef struct collect {
    mt_builder *b;
    int fields;
    const mt_expr *field[MOST_FIELDS];
    mt_map done; /* node -> collected node */
} collect;

static const mt_expr *collected(collect *w, const mt_expr *e);

static poly *new_polys(mt_builder *b, size_t n) {
    poly *p = mt_alloc(n, sizeof *p);
    if (!p && b->status == MT_OK) b->status = mt_fail(b->err, MT_ENOMEM, "no memory for a formula");
    return p;
}

static int field_number(collect *w, const mt_expr *e) {
    for (int i = 0; i < w->fields; i++)
        if (w->field[i] == e) return i;
    if (w->fields == MOST_FIELDS) return -1;
    w->field[w->fields] = e;
    return w->fields++;
}

static bool add_term(collect *w, poly *p, pterm t) {
    if (!t.coefficient) return false;
    if (mt_expr_is_const(t.coefficient, 0)) return true;
    for (int i = 0; i < p->n; i++) {
        if (p->term[i].atom != t.atom || memcmp(p->term[i].power, t.power, sizeof t.power) != 0) continue;
        p->term[i].coefficient = mt_build_add(w->b, p->term[i].coefficient, t.coefficient);
        return p->term[i].coefficient != NULL;
    }
    if (p->n == MOST_TERMS) return false;
    p->term[p->n++] = t;
    return true;
}

static bool add_poly(collect *w, poly *p, const poly *q, const mt_expr *factor) {
    for (int i = 0; i < q->n; i++) {
        pterm t = q->term[i];
        t.coefficient = mt_build_mul(w->b, factor, t.coefficient);
        if (!add_term(w, p, t)) return false;
    }
    return true;
}

static bool pure(const poly *p) {
    for (int i = 0; i < p->n; i++)
        if (p->term[i].atom) return false;
    return true;
}

static bool multiply(collect *w, poly *out, const poly *p, const poly *q) {
    if (!pure(p) || !pure(q)) return false;
    for (int i = 0; i < p->n; i++)
        for (int j = 0; j < q->n; j++) {
            pterm t = p->term[i];
            int degree = 0;
            t.coefficient = mt_build_mul(w->b, t.coefficient, q->term[j].coefficient);
            for (int f = 0; f < MOST_FIELDS; f++) degree += t.power[f] += q->term[j].power[f];
            if (degree > MOST_DEGREE || !add_term(w, out, t)) return false;
        }
    return true;
}

/* Fills *p with e written out; false where that is not possible within the limits (or on failure). */
static bool to_poly(collect *w, const mt_expr *e, poly *p);

static bool atom(collect *w, const mt_expr *e, poly *p) {
    p->n = 0;
    return add_term(w, p, (pterm){.coefficient = mt_build_number(w->b, 1), .atom = collected(w, e)});
}

static bool product(collect *w, const mt_expr *e, poly *p) {
    for (int i = 0; i < 2; i++) {
        if (!mt_expr_uniform(e->arg[i])) continue;
        poly *q = new_polys(w->b, 1);
        bool ok = q && to_poly(w, e->arg[1 - i], q) && add_poly(w, p, q, e->arg[i]);
        mt_free(q);
        return ok;
    }
    poly *q = new_polys(w->b, 2);
    bool ok =
        q && to_poly(w, e->arg[0], &q[0]) && to_poly(w, e->arg[1], &q[1]) && multiply(w, p, &q[0], &q[1]);
    mt_free(q);
    return ok || atom(w, e, p);
}

static bool power(collect *w, const mt_expr *e, poly *p) {
    const mt_expr *n = e->arg[1];
    if (n->op != MT_CONST_OP || n->value != floor(n->value) || n->value < 2 || n->value > MOST_DEGREE)
        return atom(w, e, p);
    poly *q = new_polys(w->b, 2);
    bool ok = q && to_poly(w, e->arg[0], &q[0]);
    if (ok) *p = q[0];
    for (int i = 1; i < n->value && ok; i++) {
        q[1] = *p;
        p->n = 0;
        ok = multiply(w, p, &q[1], &q[0]);
    }
    mt_free(q);
    return ok || atom(w, e, p);
}

static bool sum(collect *w, const mt_expr *e, poly *p) {
    poly *q = new_polys(w->b, 2);
    const mt_expr *one = mt_build_number(w->b, 1), *sign = mt_build_number(w->b, e->op == MT_SUB_OP ? -1 : 1);
    bool ok = q && to_poly(w, e->arg[0], &q[0]) && to_poly(w, e->arg[1], &q[1]) &&
              add_poly(w, p, &q[0], one) && add_poly(w, p, &q[1], sign);
    mt_free(q);
    return ok || atom(w, e, p);
}

static bool scaled(collect *w, const mt_expr *e, const mt_expr *factor, poly *p) {
    poly *q = new_polys(w->b, 1);
    bool ok = q && to_poly(w, e, q) && add_poly(w, p, q, factor);
    mt_free(q);
    return ok;
}

static bool to_poly(collect *w, const mt_expr *e, poly *p) {
    pterm t = {.coefficient = mt_build_number(w->b, 1)};
    p->n = 0;
    if (w->b->status) return false;
    if (mt_expr_uniform(e)) {
        t.coefficient = e;
        return add_term(w, p, t);
    }
    if (e->op == MT_FIELD_OP) {
        int f = field_number(w, e);
        if (f < 0) return atom(w, e, p);
        t.power[f] = 1;
        return add_term(w, p, t);
    }
    switch (e->op) {
    case MT_ADD_OP:
    case MT_SUB_OP: return sum(w, e, p);
    case MT_NEG_OP: return scaled(w, e->arg[0], mt_build_number(w->b, -1), p) || atom(w, e, p);
    case MT_MUL_OP: return product(w, e, p);
    case MT_POW_OP: return power(w, e, p);
    case MT_DIV_OP:
        if (mt_expr_uniform(e->arg[1]))
            return scaled(w, e->arg[0], mt_build_div(w->b, mt_build_number(w->b, 1), e->arg[1]), p) ||
                   atom(w, e, p);
        return atom(w, e, p);
    default: return atom(w, e, p);
    }
}

static int degree(const pterm *t) {
    int d = 0;
    for (int f = 0; f < MOST_FIELDS; f++) d += t->power[f];
    return t->atom ? MOST_DEGREE + 1 : d;
}

static int by_degree(const void *a, const void *b) {
    const pterm *x = a, *y = b;
    int dx = degree(x), dy = degree(y);
    if (dx != dy) return dx < dy ? -1 : 1;
    int c = memcmp(y->power, x->power, sizeof x->power);
    if (c || !x->atom) return c;
    return x->atom->hash < y->atom->hash ? -1 : x->atom->hash > y->atom->hash;
}

static const mt_expr *monomial(collect *w, const pterm *t) {
    mt_builder *b = w->b;
    const mt_expr *m = t->atom ? t->atom : mt_build_number(b, 1);
    for (int f = 0; f < w->fields && !t->atom; f++)
        if (t->power[f])
            m = mt_build_mul(b, m,
                             mt_build_binary(b, MT_POW_OP, w->field[f], mt_build_number(b, t->power[f])));
    return mt_build_mul(b, t->coefficient, m);
}

static const mt_expr *from_poly(collect *w, poly *p) {
    const mt_expr *s = mt_build_number(w->b, 0);
    qsort(p->term, (size_t)p->n, sizeof *p->term, by_degree);
    for (int i = 0; i < p->n; i++) s = mt_build_add(w->b, s, monomial(w, &p->term[i]));
    return s;
}

/* An atom: its arguments collected. */
static const mt_expr *inner(collect *w, const mt_expr *e) {
    const mt_expr *a[3] = {NULL, NULL, NULL};
    for (int i = 0; i < e->nargs; i++) {
        collect below = {.b = w->b, .done = w->done};
        a[i] = e->arg[i];
        if (!mt_expr_uniform(a[i])) {
            poly *p = new_polys(w->b, 1);
            if (p && to_poly(&below, a[i], p) && !(p->n == 1 && p->term[0].atom == a[i]))
                a[i] = from_poly(&below, p);
            mt_free(p);
        }
        w->done = below.done;
    }
    return remade(w->b, e, a);
}

static const mt_expr *collected(collect *w, const mt_expr *e) {
    if (!e->nargs || w->b->status) return e;
    uintptr_t *known = mt_map_at(&w->done, e, false);
    if (known) return (const mt_expr *)*known;
    const mt_expr *r = inner(w, e);
    if (!r) r = e;
    known = mt_map_at(&w->done, e, true);
    if (known) *known = (uintptr_t)r;
    return r;
}

mt_status mt_expr_collect(const mt_expr **out, const mt_expr *e, mt_error *err) {
    mt_builder b = {.forms = e->forms, .err = err};
    collect w = {.b = &b};
    *out = NULL;
    poly *p = new_polys(&b, 1);
    if (!p) return b.status;
    const mt_expr *r = e;
    if (!mt_expr_uniform(e)) {
        if (to_poly(&w, e, p))
            r = from_poly(&w, p);
        else if (b.status == MT_OK)
            r = collected(&w, e);
    }
    if (b.status == MT_OK && r) *out = mt_expr_ref(r);
    mt_free(p);
    mt_map_end(&w.done);
    mt_build_end(&b);
    if (b.status == MT_OK && !*out) return mt_fail(err, MT_ENOMEM, "no memory for a formula");
    return b.status;
}
