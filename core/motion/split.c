#include "core/motion/split.h"

#include <string.h>

#include "core/base/memory.h"

#define MOST_LEAVES 256

mt_status mt_split_begin(mt_split *s, mt_forms *forms, mt_grid *grid, int fields, mt_symbol **symbols,
                         mt_error *err) {
    memset(s, 0, sizeof *s);
    s->build.forms = forms;
    s->build.err = err;
    s->grid = grid;
    s->fields = fields;
    s->symbol = symbols;
    return MT_OK;
}

void mt_sum_end(mt_sum *sum) {
    mt_free(sum->term);
    memset(sum, 0, sizeof *sum);
}

void mt_split_end(mt_split *s) {
    for (int i = 0; i < s->quantities; i++) mt_sum_end(&s->quantity[i].sum);
    mt_free(s->quantity);
    mt_free(s->point);
    mt_build_end(&s->build);
    memset(s, 0, sizeof *s);
}

int mt_split_find(const mt_split *s, const mt_expr *node) {
    for (int i = 0; i < s->quantities; i++)
        if (s->quantity[i].node == node) return i;
    return -1;
}

/* --- leaves: an explicit stack and a small open set of visited nodes
 * ------------------------------------------------- */

typedef struct visit {
    int n, room;
    const mt_expr **seen;
} visit;

static bool seen_before(visit *v, const mt_expr *e) {
    for (int i = 0; i < v->n; i++)
        if (v->seen[i] == e) return true;
    return false;
}

/* Visits each shared node once: the graph may be exponentially larger when written out as a tree. Quadratic
 * in the number of nodes, which stays in the hundreds for models that people write. */
static int leaves_below(visit *v, const mt_expr *e, const mt_expr *leaf[], int most, int found) {
    if (found < 0 || seen_before(v, e)) return found;
    if (v->n == v->room) {
        int room = v->room ? 2 * v->room : 64;
        const mt_expr **fresh = mt_resize(v->seen, (size_t)room, sizeof *fresh);
        if (!fresh) return -1;
        v->seen = fresh;
        v->room = room;
    }
    v->seen[v->n++] = e;
    if (e->op == MT_FIELD_OP || mt_op_spectral(e->op)) {
        if (found < most) leaf[found] = e;
        return found + 1;
    }
    for (int i = 0; i < e->nargs; i++) found = leaves_below(v, e->arg[i], leaf, most, found);
    return found;
}

int mt_split_leaves(const mt_expr *e, const mt_expr *leaf[], int most) {
    visit v = {0};
    int found = leaves_below(&v, e, leaf, most, 0);
    mt_free(v.seen);
    return found;
}

/* --- sums
 * -----------------------------------------------------------------------------------------------------------
 */

/* Cell-wise parts of a sum while it is being collected: parts under the same factor share one transform. */
typedef struct part {
    const mt_expr *factor, *e;
    int turns;
} part;

typedef struct gather {
    mt_split *s;
    mt_sum *sum;
    int n, room;
    part *part;
} gather;

static void add_field(gather *g, int field, const mt_expr *factor, int turns) {
    mt_builder *b = &g->s->build;
    for (int i = 0; i < g->sum->n; i++) {
        mt_term *t = &g->sum->term[i];
        if (t->source != field || (t->turns - turns) % 2 != 0) continue;
        const mt_expr *f = t->turns == turns ? factor : mt_build_neg(b, factor);
        t->factor = mt_build_add(b, t->factor, f);
        return;
    }
    if (!factor || !mt_build_grow(b, &g->sum->term, g->sum->n, &g->sum->room, sizeof *g->sum->term)) return;
    g->sum->term[g->sum->n++] = (mt_term){factor, turns, field};
}

static void add_part(gather *g, const mt_expr *e, const mt_expr *factor, int turns) {
    mt_builder *b = &g->s->build;
    if (!e || !factor || mt_expr_is_const(e, 0)) return;
    for (int i = 0; i < g->n; i++) {
        part *p = &g->part[i];
        if (p->factor != factor || p->turns != turns) continue;
        p->e = mt_build_add(b, p->e, e);
        return;
    }
    if (!mt_build_grow(b, &g->part, g->n, &g->room, sizeof *g->part)) return;
    g->part[g->n++] = (part){factor, e, turns};
}

static int field_number(const mt_split *s, const mt_symbol *symbol) {
    for (int i = 0; i < s->fields; i++)
        if (s->symbol[i] == symbol) return i;
    return -1;
}

static bool has_field(const mt_expr *e) {
    return (mt_expr_contents(e) & MT_HAS_FIELD) != 0;
}

static void walk(gather *g, const mt_expr *e, const mt_expr *scale, const mt_expr *factor, int turns);

/* d/dx is i k on a periodic axis; on a mirror axis it takes cos(kx) to -k sin(kx) and sin(kx) to k cos(kx).
 */
static void walk_deriv(gather *g, const mt_expr *e, const mt_expr *scale, const mt_expr *factor, int turns) {
    mt_builder *b = &g->s->build;
    const mt_grid *grid = g->s->grid;
    const mt_expr *k = mt_build_wave(b, e->axis);
    if (!k) return;
    if (grid->wall[e->axis] == MT_PERIODIC) {
        walk(g, e->arg[0], scale, mt_build_mul(b, factor, k), (turns + 1) % 4);
        return;
    }
    mt_parities parity = 0;
    mt_status st = mt_expr_parity(e->arg[0], grid, &parity, b->err);
    if (st != MT_OK) {
        b->status = st;
        return;
    }
    bool odd = (parity >> e->axis) & 1;
    walk(g, e->arg[0], scale, mt_build_mul(b, factor, odd ? k : mt_build_neg(b, k)), turns);
}

/* scale: uniform factor so far (kept with the cell-wise part); factor: function of the wavenumber so far. */
static void walk(gather *g, const mt_expr *e, const mt_expr *scale, const mt_expr *factor, int turns) {
    mt_builder *b = &g->s->build;
    if (b->status != MT_OK || !e || !scale || !factor) return;
    int field;
    switch (e->op) {
    case MT_FIELD_OP:
        field = field_number(g->s, e->symbol);
        if (field >= 0)
            add_field(g, field, mt_build_mul(b, scale, factor), turns);
        else
            b->status =
                mt_fail(b->err, MT_EINPUT, "field '%s' is not among the model's fields", e->symbol->name);
        return;
    case MT_ADD_OP:
        walk(g, e->arg[0], scale, factor, turns);
        walk(g, e->arg[1], scale, factor, turns);
        return;
    case MT_SUB_OP:
        walk(g, e->arg[0], scale, factor, turns);
        walk(g, e->arg[1], mt_build_neg(b, scale), factor, turns);
        return;
    case MT_NEG_OP: walk(g, e->arg[0], mt_build_neg(b, scale), factor, turns); return;
    case MT_LAPLACIAN_OP:
        walk(g, e->arg[0], scale,
             mt_build_mul(b, factor, mt_build_neg(b, mt_build_wave_squared(b, g->s->grid->dim))), turns);
        return;
    case MT_FILTER_OP:
        walk(g, e->arg[0], scale, mt_build_mul(b, factor, mt_build_symbol(b, e->symbol)), turns);
        return;
    case MT_DERIV_OP: walk_deriv(g, e, scale, factor, turns); return;
    case MT_MUL_OP:
        for (int i = 0; i < 2; i++)
            if (mt_expr_uniform(e->arg[i]) && has_field(e->arg[1 - i])) {
                walk(g, e->arg[1 - i], mt_build_mul(b, scale, e->arg[i]), factor, turns);
                return;
            }
        break;
    case MT_DIV_OP:
        if (mt_expr_uniform(e->arg[1]) && has_field(e->arg[0])) {
            walk(g, e->arg[0], mt_build_div(b, scale, e->arg[1]), factor, turns);
            return;
        }
        break;
    default: break;
    }
    add_part(g, mt_build_mul(b, scale, e), factor, turns);
}

mt_status mt_split_point(mt_split *s, const mt_expr *e, mt_parities parity, int *number) {
    mt_point p = {.e = e, .parity = parity};
    *number = 0;
    if (mt_split_needs(s, e, &p.stage) != MT_OK) return s->build.status;
    for (int i = 0; i < s->points; i++)
        if (s->point[i].e == e && s->point[i].parity == parity) {
            *number = i;
            return MT_OK;
        }
    if (!mt_build_grow(&s->build, &s->point, s->points, &s->point_room, sizeof *s->point))
        return s->build.status;
    p.last_sweep = p.stage;
    *number = s->points;
    s->point[s->points++] = p;
    return MT_OK;
}

static int add_point(mt_split *s, const mt_expr *e) {
    mt_builder *b = &s->build;
    mt_parities parity = 0;
    int number = 0;
    e = mt_build_collect(b, e);
    if (!e) return 0;
    mt_status st = mt_expr_parity(e, s->grid, &parity, b->err);
    if (st != MT_OK)
        b->status = st;
    else
        (void)!mt_split_point(s, e, parity, &number);
    return number;
}

mt_status mt_sum_add(mt_builder *b, mt_sum *sum, mt_term term) {
    if (b->status == MT_OK && term.factor &&
        mt_build_grow(b, &sum->term, sum->n, &sum->room, sizeof *sum->term))
        sum->term[sum->n++] = term;
    return b->status;
}

mt_status mt_split_sum(mt_split *s, const mt_expr *e, mt_sum *sum) {
    mt_builder *b = &s->build;
    gather g = {.s = s, .sum = sum};
    memset(sum, 0, sizeof *sum);
    e = mt_build_collect(b, mt_build_expand(b, e, s->grid->dim));
    const mt_expr *one = mt_build_number(b, 1);
    if (e && b->status == MT_OK) b->status = mt_expr_parity(e, s->grid, &sum->parity, b->err);
    walk(&g, e, one, one, 0);
    for (int i = 0; i < g.n && b->status == MT_OK; i++) {
        int point = add_point(s, g.part[i].e);
        (void)!mt_sum_add(b, sum, (mt_term){g.part[i].factor, g.part[i].turns, ~point});
    }
    mt_free(g.part);
    if (b->status != MT_OK) mt_sum_end(sum);
    return b->status;
}

static int sum_level(const mt_split *s, const mt_sum *sum) {
    int level = 0;
    for (int i = 0; i < sum->n; i++)
        if (sum->term[i].source < 0) {
            int stage = s->point[~sum->term[i].source].stage;
            if (stage + 1 > level) level = stage + 1;
        }
    return level;
}

static int add_quantity(mt_split *s, const mt_expr *node) {
    int found = mt_split_find(s, node);
    if (found >= 0) return found;
    mt_quantity q = {.node = node};
    if (mt_split_sum(s, node, &q.sum) != MT_OK) return 0;
    q.level = sum_level(s, &q.sum);
    if (!mt_build_grow(&s->build, &s->quantity, s->quantities, &s->quantity_room, sizeof *s->quantity)) {
        mt_sum_end(&q.sum);
        return 0;
    }
    s->quantity[s->quantities] = q;
    return s->quantities++;
}

mt_status mt_split_needs(mt_split *s, const mt_expr *e, int *level) {
    const mt_expr **leaf = mt_alloc(MOST_LEAVES, sizeof *leaf);
    int n = leaf ? mt_split_leaves(e, leaf, MOST_LEAVES) : -1;
    *level = 0;
    if (n < 0)
        s->build.status = mt_fail(s->build.err, MT_ENOMEM, "no memory for the equations");
    else if (n > MOST_LEAVES)
        s->build.status = mt_fail(
            s->build.err, MT_EUNSUPPORTED,
            "an expression uses %d fields and derivatives at once; at most %d are possible", n, MOST_LEAVES);
    for (int i = 0; i < n && s->build.status == MT_OK; i++) {
        int q = add_quantity(s, leaf[i]);
        if (s->build.status == MT_OK && s->quantity[q].level > *level) *level = s->quantity[q].level;
    }
    mt_free(leaf);
    return s->build.status;
}
