/* Expressions as text a person reads: sums by ascending power, numbers and params in front, derivatives last.
 */
#include "core/formula/expr.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct out {
    char *buf;
    size_t size, n;
} out;

static void put(out *o, const char *text) {
    for (; *text; text++, o->n++)
        if (o->n + 1 < o->size) o->buf[o->n] = *text;
}

static void put_number(out *o, double v) {
    char text[40];
    for (int digits = 15; digits <= 17; digits++) {
        snprintf(text, sizeof text, "%.*g", digits, v);
        if (strtod(text, NULL) == v) break;
    }
    put(o, text);
}

enum { SUM, PRODUCT, UNARY, POWER, ATOM }; /* how tightly a text holds together */

static int tightness(const mt_expr *e) {
    switch (e->op) {
    case MT_ADD_OP:
    case MT_SUB_OP: return SUM;
    case MT_MUL_OP:
    case MT_DIV_OP:
    case MT_DLOG_OP:
    case MT_DDLOG_OP: return PRODUCT;
    case MT_NEG_OP: return UNARY;
    case MT_POW_OP: return POWER;
    case MT_CONST_OP: return e->value < 0 ? UNARY : ATOM;
    default: return ATOM;
    }
}

static void print(out *o, const mt_expr *e);

static void print_at(out *o, const mt_expr *e, int least) {
    bool brackets = tightness(e) < least;
    if (brackets) put(o, "(");
    print(o, e);
    if (brackets) put(o, ")");
}

/* --- order
 * -------------------------------------------------------------------------------------------------------------------
 */

/* Degree in the fields, for sorting; functions of fields count little more than nothing, spectral nodes come
 * last. */
static double degree(const mt_expr *e) {
    switch (e->op) {
    case MT_FIELD_OP:
        return 1 + 1e-6 * e->symbol->number; /* fields of one power in the order they were made */
    case MT_MUL_OP: return degree(e->arg[0]) + degree(e->arg[1]);
    case MT_DIV_OP: return degree(e->arg[0]);
    case MT_NEG_OP: return degree(e->arg[0]);
    case MT_POW_OP: return e->arg[1]->op == MT_CONST_OP ? degree(e->arg[0]) * fabs(e->arg[1]->value) : 0.5;
    case MT_ADD_OP:
    case MT_SUB_OP: return fmax(degree(e->arg[0]), degree(e->arg[1]));
    case MT_CONST_OP: return 0;
    case MT_GRADSQ_OP: return 1000;
    case MT_DERIV_OP: return 1001 + 1e-3 * e->axis; /* x before y before z */
    default: return mt_op_spectral(e->op) ? 1001 : e->contents & MT_HAS_FIELD ? 0.5 : 0;
    }
}

typedef struct item {
    const mt_expr *e;
    bool minus; /* subtracted, or divided by */
    double rank;
    size_t place;
} item;

typedef struct items {
    size_t n, room;
    item *at;
} items;

static void add_item(items *l, const mt_expr *e, bool minus, double rank) {
    if (l->n == l->room) {
        size_t room = l->room ? 2 * l->room : 16;
        item *more = mt_resize(l->at, room, sizeof *more);
        if (!more) return;
        l->at = more;
        l->room = room;
    }
    l->at[l->n] = (item){e, minus, rank, l->n};
    l->n++;
}

static int by_rank(const void *a, const void *b) {
    const item *x = a, *y = b;
    if (x->rank != y->rank) return x->rank < y->rank ? -1 : 1;
    if (x->e->hash != y->e->hash) return x->e->hash < y->e->hash ? -1 : 1;
    return x->place < y->place ? -1 : 1;
}

static void flatten_sum(items *l, const mt_expr *e, bool minus) {
    if (e->op == MT_ADD_OP || e->op == MT_SUB_OP) {
        flatten_sum(l, e->arg[0], minus);
        flatten_sum(l, e->arg[1], minus != (e->op == MT_SUB_OP));
    } else if (e->op == MT_NEG_OP)
        flatten_sum(l, e->arg[0], !minus);
    else
        add_item(l, e, minus, degree(e));
}

static double factor_rank(const mt_expr *e) {
    if (e->op == MT_CONST_OP) return 0;
    if (mt_expr_uniform(e)) return 1;
    if (tightness(e) == SUM) return 4 + degree(e) * 1e-3;
    const mt_expr *base = e->op == MT_POW_OP ? e->arg[0] : e;
    if (base->op == MT_FIELD_OP) return 2 + base->symbol->number * 1e-6;
    return mt_op_spectral(base->op) ? 5 : 3;
}

static void flatten_product(items *l, const mt_expr *e) {
    if (e->op == MT_MUL_OP) {
        flatten_product(l, e->arg[0]);
        flatten_product(l, e->arg[1]);
    } else
        add_item(l, e, false, factor_rank(e));
}

/* --- text
 * --------------------------------------------------------------------------------------------------------------------
 */

/* A product shows its sign in front, wherever its number stands. */
static bool negative_number(const mt_expr *e) {
    if (e->op == MT_MUL_OP) return negative_number(e->arg[0]) != negative_number(e->arg[1]);
    return e->op == MT_CONST_OP && e->value < 0;
}

/* |e| of a term that shows its sign in front */
static void print_magnitude(out *o, const mt_expr *e);

static void print_sum(out *o, const mt_expr *e) {
    items l = {0};
    flatten_sum(&l, e, false);
    if (l.n) qsort(l.at, l.n, sizeof *l.at, by_rank);
    for (size_t i = 0; i < l.n; i++) {
        bool flip = negative_number(l.at[i].e), minus = l.at[i].minus != flip;
        if (i)
            put(o, minus ? " - " : " + ");
        else if (minus)
            put(o, "-");
        if (flip)
            print_magnitude(o, l.at[i].e);
        else
            print_at(o, l.at[i].e, PRODUCT);
    }
    mt_free(l.at);
}

static void print_factors(out *o, const mt_expr *e, bool magnitude) {
    items l = {0};
    flatten_product(&l, e);
    if (l.n) qsort(l.at, l.n, sizeof *l.at, by_rank);
    for (size_t i = 0; i < l.n; i++) {
        const mt_expr *f = l.at[i].e;
        if (i) put(o, "*");
        if (magnitude && f->op == MT_CONST_OP)
            put_number(o, fabs(f->value));
        else
            print_at(o, f, i || f->op == MT_CONST_OP ? UNARY + (i > 0) : PRODUCT);
    }
    mt_free(l.at);
}

static void print_magnitude(out *o, const mt_expr *e) {
    if (e->op == MT_CONST_OP)
        put_number(o, fabs(e->value));
    else
        print_factors(o, e, true);
}

static void print_call(out *o, const mt_expr *e) {
    if (e->op == MT_DERIV_OP)
        put(o, (const char *[]){"dx", "dy", "dz"}[e->axis]);
    else if (e->op == MT_FILTER_OP)
        put(o, e->symbol->name);
    else if (e->op == MT_DLOG_OP ||
             e->op == MT_DDLOG_OP) { /* 1/a and -1/a^2, with the logarithm's extension */
        put(o, e->op == MT_DLOG_OP ? "1/" : "-1/");
        print_at(o, e->arg[0], ATOM);
        if (e->op == MT_DDLOG_OP) put(o, "^2");
        return;
    } else
        put(o, mt_op_text(e->op));
    put(o, "(");
    for (int i = 0; i < e->nargs; i++) {
        if (i) put(o, ", ");
        print(o, e->arg[i]);
    }
    put(o, ")");
}

static void print(out *o, const mt_expr *e) {
    static const char *coord[] = {"x", "y", "z"}, *wave[] = {"kx", "ky", "kz"};
    switch (e->op) {
    case MT_CONST_OP: put_number(o, e->value); return;
    case MT_FIELD_OP:
    case MT_PARAM_OP: put(o, e->symbol->name); return;
    case MT_TIME_OP: put(o, "time"); return;
    case MT_COORD_OP: put(o, coord[e->axis]); return;
    case MT_WAVE_OP: put(o, wave[e->axis]); return;
    case MT_NOISE_OP: put(o, e->random == MT_RANDOM_UNIFORM ? "noise.uniform" : "noise.normal"); return;
    case MT_ADD_OP:
    case MT_SUB_OP: print_sum(o, e); return;
    case MT_MUL_OP: print_factors(o, e, false); return;
    case MT_NEG_OP:
        put(o, "-");
        print_at(o, e->arg[0], PRODUCT);
        return;
    case MT_DIV_OP:
        print_at(o, e->arg[0], PRODUCT);
        put(o, "/");
        print_at(o, e->arg[1], POWER);
        return;
    case MT_POW_OP:
        print_at(o, e->arg[0], ATOM);
        put(o, "^");
        print_at(o, e->arg[1], ATOM);
        return;
    default: print_call(o, e); return;
    }
}

size_t mt_expr_print(const mt_expr *e, char *buf, size_t size) {
    out o = {buf, size, 0};
    print(&o, e);
    if (!size) return o.n;
    if (o.n < size)
        buf[o.n] = 0;
    else {
        buf[size - 1] = 0;
        for (size_t i = size > 4 ? size - 4 : 0; i + 1 < size; i++) buf[i] = '.';
    }
    return o.n;
}
