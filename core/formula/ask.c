/* Questions about expressions: operators, contents, grid, parity. */
#include "core/formula/expr.h"

#include "core/formula/expr_inside.h"
#include "core/formula/map.h"

enum { LEAF, POINT, SPECTRAL };

static const struct {
    const char *name, *text;
    int nargs, kind;
} ops[MT_OP_COUNT] = {
#define MT_OP(name, text, nargs, kind) {#name, text, nargs, kind},
#include "core/formula/ops.def"
#undef MT_OP
};

const char *mt_op_name(mt_op op) {
    return ops[op].name;
}
const char *mt_op_text(mt_op op) {
    return ops[op].text;
}
int mt_op_args(mt_op op) {
    return ops[op].nargs;
}
bool mt_op_spectral(mt_op op) {
    return ops[op].kind == SPECTRAL;
}

unsigned mt_expr_contents(const mt_expr *e) {
    return e->contents;
}

bool mt_expr_uniform(const mt_expr *e) {
    return !(e->contents & (MT_HAS_FIELD | MT_HAS_COORD | MT_HAS_WAVE | MT_HAS_NOISE));
}

/* --- walks over the shared graph: each node once
 * --------------------------------------------------------------------------- */

static int contains(mt_map *seen, const mt_expr *e, const mt_expr *what) {
    if (e == what) return 1;
    if (e->depth <= what->depth || (what->contents & ~e->contents)) return 0;
    uintptr_t *mark = mt_map_at(seen, e, true);
    if (mark && *mark) return 0;
    if (mark) *mark = 1;
    for (int i = 0; i < e->nargs; i++)
        if (contains(seen, e->arg[i], what)) return 1;
    return 0;
}

bool mt_expr_contains(const mt_expr *e, const mt_expr *what) {
    mt_map seen = {0};
    bool found = contains(&seen, e, what);
    mt_map_end(&seen);
    return found;
}

typedef struct grid_walk {
    mt_map seen;
    mt_symbol *first;
    mt_error *err;
} grid_walk;

static mt_status find_grid(grid_walk *w, const mt_expr *e) {
    if (!(e->contents & MT_HAS_FIELD)) return MT_OK;
    uintptr_t *mark = mt_map_at(&w->seen, e, true);
    if (mark && *mark) return MT_OK;
    if (mark) *mark = 1;
    if (e->op == MT_FIELD_OP) {
        if (!w->first)
            w->first = e->symbol;
        else if (!mt_grid_equal(w->first->grid, e->symbol->grid))
            return mt_fail(w->err, MT_EINPUT, "fields '%s' and '%s' live on different grids", w->first->name,
                           e->symbol->name);
    }
    for (int i = 0; i < e->nargs; i++) {
        mt_status st = find_grid(w, e->arg[i]);
        if (st) return st;
    }
    return MT_OK;
}

mt_status mt_expr_grid(const mt_expr *e, mt_grid **grid, mt_error *err) {
    grid_walk w = {.err = err};
    mt_status st = find_grid(&w, e);
    *grid = !st && w.first ? w.first->grid : NULL;
    mt_map_end(&w.seen);
    return st;
}

/* --- numbers
 * -----------------------------------------------------------------------------------------------------------------
 */

static double value_of(const mt_expr *e, double time) {
    double a[3] = {0, 0, 0};
    if (e->op == MT_CONST_OP) return e->value;
    if (e->op == MT_PARAM_OP) return e->symbol->value;
    if (e->op == MT_TIME_OP) return time;
    for (int i = 0; i < e->nargs; i++) a[i] = value_of(e->arg[i], time);
    return mt_op_apply(e->op, a);
}

mt_status mt_expr_number(const mt_expr *e, double time, double *value, mt_error *err) {
    char text[200];
    if (!mt_expr_uniform(e) || (e->contents & MT_HAS_SPECTRAL)) {
        mt_expr_print(e, text, sizeof text);
        return mt_fail(err, MT_EINPUT, "'%s' is not one number: it varies over the cells", text);
    }
    *value = value_of(e, time);
    return MT_OK;
}

/* --- parity
 * ------------------------------------------------------------------------------------------------------------------
 */

typedef struct parity_walk {
    mt_map seen; /* parity + 1 */
    const mt_grid *grid;
    mt_error *err;
    mt_status status;
} parity_walk;

static mt_parities parity_of(parity_walk *w, const mt_expr *e);

static mt_parities neither(parity_walk *w, const mt_expr *e) {
    char text[300];
    if (w->status) return 0;
    mt_expr_print(e, text, sizeof text);
    w->status = mt_fail(
        w->err, MT_EPARITY,
        "'%s' is neither even nor odd about a mirror wall; first derivatives have to come in pairs there "
        "(or make that axis periodic)",
        text);
    return 0;
}

static mt_parities equal_parity(parity_walk *w, const mt_expr *e, int first) {
    mt_parities p = 0;
    bool have = false;
    for (int i = first; i < e->nargs; i++) {
        mt_parities q = parity_of(w, e->arg[i]);
        if (mt_expr_is_const(e->arg[i], 0)) continue;
        if (have && q != p) return neither(w, e);
        p = q;
        have = true;
    }
    return p;
}

static mt_parities even_arguments(parity_walk *w, const mt_expr *e) {
    for (int i = 0; i < e->nargs; i++)
        if (parity_of(w, e->arg[i])) return neither(w, e);
    return 0;
}

static mt_parities power_parity(parity_walk *w, const mt_expr *e) {
    mt_parities p = parity_of(w, e->arg[0]);
    if (!p) return even_arguments(w, e);
    if (e->arg[1]->op != MT_CONST_OP || e->arg[1]->value != (int)e->arg[1]->value) return neither(w, e);
    return (int)e->arg[1]->value % 2 ? p : 0;
}

static mt_parities compute_parity(parity_walk *w, const mt_expr *e) {
    switch (e->op) {
    case MT_NEG_OP:
    case MT_SIN_OP:
    case MT_TANH_OP:
    case MT_SIGN_OP:
    case MT_LAPLACIAN_OP:
    case MT_FILTER_OP: return parity_of(w, e->arg[0]);
    case MT_ABS_OP:
    case MT_COS_OP:
    case MT_GRADSQ_OP: parity_of(w, e->arg[0]); return 0;
    case MT_ADD_OP:
    case MT_SUB_OP: return equal_parity(w, e, 0);
    case MT_WHERE_OP:
        if (parity_of(w, e->arg[0])) return neither(w, e);
        return equal_parity(w, e, 1);
    case MT_MUL_OP:
    case MT_DIV_OP: return parity_of(w, e->arg[0]) ^ parity_of(w, e->arg[1]);
    case MT_POW_OP: return power_parity(w, e);
    case MT_DERIV_OP: {
        mt_parities flip = w->grid->wall[e->axis] == MT_MIRROR ? 1u << e->axis : 0;
        return parity_of(w, e->arg[0]) ^ flip;
    }
    default: return even_arguments(w, e);
    }
}

static mt_parities parity_of(parity_walk *w, const mt_expr *e) {
    if (!(e->contents & MT_HAS_SPECTRAL) || w->status) return 0;
    uintptr_t *known = mt_map_at(&w->seen, e, false);
    if (known) return (mt_parities)(*known - 1);
    mt_parities p = compute_parity(w, e);
    known = mt_map_at(&w->seen, e, true);
    if (known) *known = p + 1;
    return p;
}

mt_status mt_expr_parity(const mt_expr *e, const mt_grid *grid, mt_parities *parity, mt_error *err) {
    parity_walk w = {.grid = grid, .err = err};
    *parity = parity_of(&w, e);
    mt_map_end(&w.seen);
    return w.status;
}
