/* Nodes, the table that shares them, symbols. */
#include "core/formula/expr.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/formula/expr_inside.h"

/* --- table
 * ----------------------------------------------------------------------------------------------------------------
 */

mt_status mt_forms_new(mt_forms **out, mt_error *err) {
    mt_forms *f;
    *out = NULL;
    mt_status st = mt_new(&f, 1, sizeof *f, "formulas", err);
    if (st) return st;
    f->owned = true;
    f->buckets = 64;
    st = mt_new(&f->bucket, f->buckets, sizeof *f->bucket, "formulas", err);
    if (st)
        mt_free(f);
    else
        *out = f;
    return st;
}

static void drop_table(mt_forms *f) {
    if (f->owned || f->nodes) return;
    mt_free(f->bucket);
    mt_free(f);
}

void mt_forms_free(mt_forms **forms) {
    mt_forms *f = *forms;
    *forms = NULL;
    if (!f) return;
    f->owned = false;
    drop_table(f);
}

static uint64_t mix(uint64_t h, uint64_t v) {
    h ^= v + 0x9E3779B97F4A7C15u + (h << 6) + (h >> 2);
    h *= 0xFF51AFD7ED558CCDu;
    return h ^ (h >> 33);
}

static uint64_t hash_key(const mt_key *k) {
    uint64_t bits, h = mix(0x6D6F74746C65u, (uint64_t)k->op);
    memcpy(&bits, &k->value, sizeof bits);
    if (k->op == MT_CONST_OP) h = mix(h, bits);
    if (k->symbol) {
        h = mix(mix(h, k->symbol->number), (uint64_t)k->symbol->kind);
        for (const char *c = k->symbol->name; *c; c++) h = mix(h, (unsigned char)*c);
    }
    h = mix(h, (uint64_t)k->axis);
    if (k->op == MT_NOISE_OP) h = mix(mix(h, (uint64_t)k->random), k->seed);
    for (int i = 0; i < k->nargs; i++) h = mix(h, k->arg[i]->hash);
    return h;
}

static bool same(const mt_expr *e, const mt_key *k) {
    if (e->op != k->op || e->nargs != k->nargs || e->symbol != k->symbol || e->axis != k->axis) return false;
    if (e->random != k->random || e->seed != k->seed || memcmp(&e->value, &k->value, sizeof k->value) != 0)
        return false;
    for (int i = 0; i < k->nargs; i++)
        if (e->arg[i] != k->arg[i]) return false;
    return true;
}

static void rehash(mt_forms *f) {
    size_t buckets = 2 * f->buckets;
    mt_expr **fresh = mt_alloc(buckets, sizeof *fresh);
    if (!fresh) return; /* longer chains, nothing worse */
    for (size_t i = 0; i < f->buckets; i++)
        for (mt_expr *e = f->bucket[i], *next; e; e = next) {
            next = e->next;
            e->next = fresh[e->hash & (buckets - 1)];
            fresh[e->hash & (buckets - 1)] = e;
        }
    mt_free(f->bucket);
    f->bucket = fresh;
    f->buckets = buckets;
}

static unsigned own_contents(const mt_key *k) {
    switch (k->op) {
    case MT_FIELD_OP: return k->symbol->kind == MT_SYMBOL_FILTER ? MT_HAS_WAVE : MT_HAS_FIELD;
    case MT_PARAM_OP: return MT_HAS_PARAM;
    case MT_TIME_OP: return MT_HAS_TIME;
    case MT_COORD_OP: return MT_HAS_COORD;
    case MT_WAVE_OP: return MT_HAS_WAVE;
    case MT_NOISE_OP: return MT_HAS_NOISE;
    case MT_GRADSQ_OP: return MT_HAS_SPECTRAL;
    default: return mt_op_spectral(k->op) ? MT_HAS_SPECTRAL : 0;
    }
}

static mt_expr *fill(mt_expr *e, mt_forms *f, const mt_key *k, uint64_t hash) {
    e->op = k->op, e->nargs = k->nargs, e->refs = 1, e->hash = hash, e->forms = f;
    e->value = k->value, e->axis = k->axis, e->random = k->random, e->seed = k->seed;
    e->symbol = k->symbol ? mt_symbol_ref(k->symbol) : NULL;
    e->contents = own_contents(k);
    for (int i = 0; i < k->nargs; i++) {
        e->arg[i] = mt_expr_ref(k->arg[i]);
        e->contents |= k->arg[i]->contents;
        if (k->arg[i]->depth >= e->depth) e->depth = k->arg[i]->depth + 1;
    }
    return e;
}

mt_status mt_node(const mt_expr **out, mt_forms *f, const mt_key *k, mt_error *err) {
    uint64_t hash = hash_key(k);
    mt_expr *e;
    *out = NULL;
    for (e = f->bucket[hash & (f->buckets - 1)]; e; e = e->next)
        if (e->hash == hash && same(e, k)) {
            *out = mt_expr_ref(e);
            return MT_OK;
        }
    for (int i = 0; i < k->nargs; i++)
        if (k->arg[i]->depth >= MT_MOST_DEPTH)
            return mt_fail(err, MT_EINPUT,
                           "a formula is nested more than %d levels deep; build it from shorter parts",
                           MT_MOST_DEPTH);
    mt_status st = mt_new(&e, 1, sizeof *e, "a formula", err);
    if (st) return st;
    if (f->nodes > f->buckets) rehash(f);
    fill(e, f, k, hash);
    e->next = f->bucket[hash & (f->buckets - 1)];
    f->bucket[hash & (f->buckets - 1)] = e;
    f->nodes++;
    *out = e;
    return MT_OK;
}

const mt_expr *mt_expr_ref(const mt_expr *e) {
    ((mt_expr *)(uintptr_t)e)->refs++;
    return e;
}

static void unlink_node(mt_expr *e) {
    mt_expr **at = &e->forms->bucket[e->hash & (e->forms->buckets - 1)];
    while (*at != e) at = &(*at)->next;
    *at = e->next;
    e->forms->nodes--;
}

/* Dead nodes wait in a list chained by `next`: no recursion, whatever the depth. */
void mt_expr_unref(const mt_expr **out) {
    mt_expr *e = (mt_expr *)(uintptr_t)*out, *dead = NULL;
    *out = NULL;
    if (!e || --e->refs) return;
    mt_forms *f = e->forms;
    unlink_node(e);
    e->next = NULL;
    for (dead = e; dead;) {
        e = dead;
        dead = e->next;
        for (int i = 0; i < e->nargs; i++) {
            mt_expr *a = (mt_expr *)(uintptr_t)e->arg[i];
            if (--a->refs) continue;
            unlink_node(a);
            a->next = dead;
            dead = a;
        }
        mt_symbol_unref(&e->symbol);
        mt_free(e);
    }
    drop_table(f);
}

/* --- symbols
 * --------------------------------------------------------------------------------------------------------------
 */

mt_status mt_symbol_new(mt_symbol **out, mt_forms *forms, mt_symbol_kind kind, const char *name,
                        mt_grid *grid, mt_error *err) {
    mt_symbol *s;
    *out = NULL;
    mt_status st = mt_new(&s, 1, sizeof *s, "a name", err);
    if (st) return st;
    s->refs = 1;
    s->kind = kind;
    s->number = forms->symbols++;
    s->name = mt_copy_text(name);
    s->grid = grid ? mt_grid_ref(grid) : NULL;
    if (!s->name) {
        mt_symbol_unref(&s);
        return mt_fail(err, MT_ENOMEM, "no memory for the name '%s'", name);
    }
    *out = s;
    return MT_OK;
}

mt_symbol *mt_symbol_ref(mt_symbol *symbol) {
    symbol->refs++;
    return symbol;
}

void mt_symbol_unref(mt_symbol **symbol) {
    mt_symbol *s = *symbol;
    *symbol = NULL;
    if (!s || --s->refs) return;
    if (s->release) s->release(s->ctx);
    mt_free(s->name), mt_free(s->knot_time), mt_free(s->knot_value), mt_free(s->table);
    mt_grid_unref(&s->grid);
    mt_free(s);
}

static mt_status check_history(int n, const double time[], const double value[], mt_error *err) {
    for (int i = 0; i < n; i++) {
        if (!isfinite(time[i]) || !isfinite(value[i]))
            return mt_fail(err, MT_EINPUT, "point %d of the history is not a finite number", i + 1);
        if (i > 0 && time[i] < time[i - 1])
            return mt_fail(err, MT_EINPUT,
                           "point %d of the history lies at time %.6g, before the point at %.6g", i + 1,
                           time[i], time[i - 1]);
        if (i > 1 && time[i] == time[i - 2])
            return mt_fail(err, MT_EINPUT, "three points of the history lie at time %.6g; a jump takes two",
                           time[i]);
    }
    return MT_OK;
}

mt_status mt_symbol_set_history(mt_symbol *p, int n, const double time[], const double value[],
                                mt_error *err) {
    double *t = NULL, *v = NULL;
    if (p->kind != MT_SYMBOL_PARAM) return mt_fail(err, MT_EINPUT, "only a param has a history");
    mt_status st = check_history(n, time, value, err);
    if (!st && n) st = mt_new(&t, (size_t)n, sizeof *t, "a history", err);
    if (!st && n) st = mt_new(&v, (size_t)n, sizeof *v, "a history", err);
    if (st) {
        mt_free(t);
        return st;
    }
    if (n) memcpy(t, time, (size_t)n * sizeof *t), memcpy(v, value, (size_t)n * sizeof *v);
    mt_free(p->knot_time), mt_free(p->knot_value);
    p->knots = n, p->knot_time = t, p->knot_value = v;
    return MT_OK;
}

double mt_symbol_at(const mt_symbol *p, double time, bool before_jump) {
    int n = p->knots, i = 0;
    if (!n) return p->value;
    while (i < n && (before_jump ? p->knot_time[i] < time : p->knot_time[i] <= time)) i++;
    if (i == 0) return p->knot_value[0];
    if (i == n) return p->knot_value[n - 1];
    double t0 = p->knot_time[i - 1], t1 = p->knot_time[i], v0 = p->knot_value[i - 1], v1 = p->knot_value[i];
    if (time == t1) return v1;
    return v0 + (v1 - v0) * ((time - t0) / (t1 - t0));
}
