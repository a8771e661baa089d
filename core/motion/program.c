#include "core/motion/program.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/base/vector.h"

#define MOST_LEAVES 256
#define MOST_FACTORS 256

mt_status mt_program_begin(mt_program *p, mt_forms *forms, mt_sweeper *sweeper, int fields,
                           mt_symbol **symbols, mt_error *err) {
    memset(p, 0, sizeof *p);
    p->sweeper = sweeper;
    p->spectrum = mt_sweeper_spectrum(sweeper);
    p->workers = mt_pool_threads(mt_sweeper_pool(sweeper));
    p->direct_stage = -1;
    return mt_split_begin(&p->split, forms, mt_sweeper_grid(sweeper), fields, symbols, err);
}

static void free_list(double **list, int n) {
    for (int i = 0; list && i < n; i++) mt_free(list[i]);
    mt_free(list);
}

void mt_factors_end(mt_factors *f) {
    mt_free(f->e), mt_free(f->table);
    mt_kernel_free(&f->kernel);
    memset(f, 0, sizeof *f);
}

void mt_program_end(mt_program *p) {
    for (int s = 0; s < p->stages; s++) {
        if (p->stage) {
            mt_stage *t = &p->stage[s];
            mt_free(t->in), mt_free(t->out), mt_free(t->in_parity), mt_free(t->out_parity);
            mt_kernel_free(&t->kernel);
        }
        if (p->factors) { mt_factors_end(&p->factors[s]); }
    }
    mt_free(p->stage), mt_free(p->factors);
    free_list(p->work, p->works);
    free_list(p->hold, p->split.points);
    free_list(p->scratch, p->workers);
    mt_free(p->u), mt_free(p->capture);
    mt_free(p->reduced_expr), mt_free(p->reduce), mt_free(p->tally), mt_free(p->total);
    mt_split_end(&p->split);
    memset(p, 0, sizeof *p);
}

/* --- building
 * ---------------------------------------------------------------------------------------------------------
 */

static mt_status no_memory(mt_program *p) {
    mt_builder *b = &p->split.build;
    if (b->status == MT_OK) b->status = mt_fail(b->err, MT_ENOMEM, "no memory for the equations");
    return b->status;
}

mt_status mt_program_reduce(mt_program *p, const mt_expr *e, mt_reduce how, int *index) {
    mt_builder *b = &p->split.build;
    int level = 0;
    e = mt_build_collect(b, mt_build_expand(b, e, p->split.grid->dim));
    *index = -1;
    if (!e) return b->status;
    for (int i = 0; i < p->reduced; i++)
        if (p->reduced_expr[i] == e && p->reduce[i] == how) {
            *index = i;
            return MT_OK;
        }
    if (mt_split_needs(&p->split, e, &level) != MT_OK) return b->status;
    if (level > 0) return mt_fail(b->err, MT_EUNSUPPORTED, "not computable from the fields alone");
    int n = p->reduced;
    const mt_expr **exprs = mt_resize(p->reduced_expr, (size_t)n + 1, sizeof *exprs);
    if (exprs) p->reduced_expr = exprs;
    mt_reduce *hows = mt_resize(p->reduce, (size_t)n + 1, sizeof *hows);
    if (hows) p->reduce = hows;
    if (!exprs || !hows) return no_memory(p);
    p->reduced_expr[n] = e;
    p->reduce[n] = how;
    *index = n;
    p->reduced = n + 1;
    return MT_OK;
}

static void wants_points(mt_split *s, const mt_sum *sum, int sweep) {
    for (int i = 0; i < sum->n; i++)
        if (sum->term[i].source < 0) {
            mt_point *q = &s->point[~sum->term[i].source];
            if (q->last_sweep < sweep) q->last_sweep = sweep;
        }
}

static bool add_input(mt_program *p, mt_stage *t, int quantity) {
    for (int i = 0; i < t->nin; i++)
        if (t->in[i] == quantity) return true;
    t->in[t->nin] = quantity;
    t->in_parity[t->nin] = p->split.quantity[quantity].sum.parity;
    t->nin++;
    return true;
}

static bool inputs_of(mt_program *p, mt_stage *t, const mt_expr *e) {
    const mt_expr **leaf = mt_alloc(MOST_LEAVES, sizeof *leaf);
    int n = leaf ? mt_split_leaves(e, leaf, MOST_LEAVES) : -1;
    for (int i = 0; i < n; i++) add_input(p, t, mt_split_find(&p->split, leaf[i]));
    mt_free(leaf);
    return n >= 0;
}

static bool make_stage(mt_program *p, int number) {
    mt_split *s = &p->split;
    mt_stage *t = &p->stage[number];
    size_t nq = (size_t)s->quantities + 1, np = (size_t)s->points + 1;
    t->in = mt_alloc(nq, sizeof *t->in), t->in_parity = mt_alloc(nq, sizeof *t->in_parity);
    t->out = mt_alloc(np, sizeof *t->out), t->out_parity = mt_alloc(np, sizeof *t->out_parity);
    if (!t->in || !t->in_parity || !t->out || !t->out_parity) return false;
    if (number == 0 && !p->direct) /* all fields, so that any step can hand their values out */
        for (int f = 0; f < s->fields; f++)
            for (int q = 0; q < s->quantities; q++)
                if (s->quantity[q].node->op == MT_FIELD_OP && s->quantity[q].node->symbol == s->symbol[f])
                    add_input(p, t, q);
    for (int i = 0; i < s->points; i++) {
        if (s->point[i].stage != number) continue;
        t->out[t->nout] = i;
        t->out_parity[t->nout++] = s->point[i].parity;
        if (!inputs_of(p, t, s->point[i].e)) return false;
    }
    if (number == 0)
        for (int i = 0; i < p->reduced; i++)
            if (!inputs_of(p, t, p->reduced_expr[i])) return false;
    if (number == p->direct_stage && !inputs_of(p, t, p->direct)) return false;
    for (int i = 0; i < t->nin && number > 0; i++) wants_points(s, &s->quantity[t->in[i]].sum, number - 1);
    if (t->nin > p->works) p->works = t->nin;
    if (t->nout > p->works) p->works = t->nout;
    return true;
}

mt_status mt_program_finish(mt_program *p, int sums, const mt_sum sum[]) {
    mt_split *s = &p->split;
    mt_builder *b = &s->build;
    int level = 0;
    for (int f = 0; f < s->fields && !p->direct; f++) /* registers the fields themselves as quantities */
        mt_split_needs(s, mt_build_symbol(b, s->symbol[f]), &level);
    if (b->status != MT_OK) return b->status;
    p->stages = 1 + (p->direct_stage > 0 ? p->direct_stage : 0);
    for (int i = 0; i < s->points; i++)
        if (s->point[i].stage + 1 > p->stages) p->stages = s->point[i].stage + 1;
    for (int i = 0; i < sums; i++) wants_points(s, &sum[i], p->stages - 1);
    p->stage = mt_alloc((size_t)p->stages, sizeof *p->stage);
    p->factors = mt_alloc((size_t)p->stages, sizeof *p->factors);
    p->u = mt_alloc((size_t)s->fields + 1, sizeof *p->u);
    p->capture = mt_alloc((size_t)s->fields + 1, sizeof *p->capture);
    if (!p->stage || !p->factors || !p->u || !p->capture) return no_memory(p);
    for (int i = 0; i < p->stages; i++)
        if (!make_stage(p, i)) return no_memory(p);
    for (int i = 0; i < sums; i++)
        for (int j = 0; j < sum[i].n; j++) mt_program_factor(p, p->stages - 1, sum[i].term[j].factor);
    for (int i = 0; i < p->stages;
         i++) { /* the sweep before stage i; stage 0 is formed after the last one, and at a start */
        int sweep = i ? i - 1 : p->stages - 1;
        for (int j = 0; j < p->stage[i].nin; j++) {
            const mt_sum *q = &s->quantity[p->stage[i].in[j]].sum;
            for (int t = 0; t < q->n; t++) mt_program_factor(p, sweep, q->term[t].factor);
        }
    }
    return b->status;
}

int mt_program_factor(mt_program *p, int sweep, const mt_expr *factor) {
    mt_factors *f = &p->factors[sweep];
    if (!factor || mt_expr_is_const(factor, 1)) return -1;
    for (int i = 0; i < f->n; i++)
        if (f->e[i] == factor) return i;
    if (f->n == MOST_FACTORS) {
        mt_builder *b = &p->split.build;
        b->status = mt_fail(b->err, MT_EUNSUPPORTED, "more than %d different wavenumber factors in one stage",
                            MOST_FACTORS);
        return -1;
    }
    if (!mt_build_grow(&p->split.build, &f->e, f->n, &f->room, sizeof *f->e)) return -1;
    f->e[f->n] = factor;
    return f->n++;
}

static int find_factor(const mt_factors *f, const mt_expr *factor) {
    for (int i = 0; i < f->n; i++)
        if (f->e[i] == factor) return i;
    return -1;
}

/* FILTER symbols that stand in factors become inputs of their kernel. */
static bool add_tables(mt_factors *f, const mt_expr *e) {
    if (e->op == MT_FIELD_OP || e->op == MT_PARAM_OP || !e->nargs) {
        if (!e->symbol || e->symbol->kind != MT_SYMBOL_FILTER) return true;
        for (int i = 0; i < f->tables; i++)
            if (f->table[i] == e) return true;
        const mt_expr **more = mt_resize(f->table, (size_t)f->tables + 1, sizeof *more);
        if (!more) return false;
        f->table = more;
        f->table[f->tables++] = e;
        return true;
    }
    for (int i = 0; i < e->nargs; i++)
        if (!add_tables(f, e->arg[i])) return false;
    return true;
}

mt_status mt_program_compile_factors(mt_program *p, mt_factors *f) {
    for (int i = 0; i < f->n; i++)
        if (!add_tables(f, f->e[i])) return no_memory(p);
    mt_kernel_spec spec = {.nin = f->tables, .in = f->table, .nout = f->n, .out = f->e};
    return mt_kernel_new(&f->kernel, &spec, p->split.build.err);
}

static mt_status compile_stage(mt_program *p, int number) {
    mt_stage *t = &p->stage[number];
    bool direct = number == p->direct_stage;
    const mt_expr **in = mt_alloc((size_t)t->nin + 1, sizeof *in),
                  **out = mt_alloc((size_t)t->nout + 1, sizeof *out);
    mt_status st = MT_OK;
    if (!in || !out) st = no_memory(p);
    for (int i = 0; i < t->nin && !st; i++) in[i] = p->split.quantity[t->in[i]].node;
    for (int i = 0; i < t->nout && !st; i++) out[i] = p->split.point[t->out[i]].e;
    if (!st && direct) out[t->nout] = p->direct;
    if (!st) {
        mt_kernel_spec spec = {.nin = t->nin, .in = in, .nout = t->nout + direct, .out = out};
        if (number == 0) spec.nreduced = p->reduced, spec.reduced = p->reduced_expr, spec.reduce = p->reduce;
        st = mt_kernel_new(&t->kernel, &spec, p->split.build.err);
    }
    mt_free(in), mt_free(out);
    return st;
}

mt_status mt_program_compile(mt_program *p) {
    mt_status st = p->split.build.status;
    for (int i = 0; i < p->stages && !st; i++) {
        st = compile_stage(p, i);
        if (!st) st = mt_program_compile_factors(p, &p->factors[i]);
    }
    return st;
}

/* --- memory
 * ------------------------------------------------------------------------------------------------------------
 */

static size_t scratch_doubles(const mt_program *p, size_t column_doubles) {
    size_t most = 8;
    for (int i = 0; i < p->stages; i++) {
        size_t lines = mt_round_up((size_t)p->factors[i].n * (size_t)p->spectrum->length, 8);
        most = mt_max_size(most, mt_kernel_scratch(p->stage[i].kernel));
        most = mt_max_size(most, column_doubles + lines + mt_kernel_scratch(p->factors[i].kernel));
    }
    return mt_round_up(most, 8);
}

static bool held(const mt_program *p, int point) {
    return p->split.point[point].last_sweep > p->split.point[point].stage;
}

size_t mt_program_bytes(const mt_program *p, size_t column_doubles) {
    size_t bytes = (size_t)p->works * mt_sweeper_work_doubles(p->sweeper) * 8;
    for (int i = 0; i < p->split.points; i++)
        if (held(p, i)) bytes += p->spectrum->doubles * 8;
    bytes += (size_t)p->workers * scratch_doubles(p, column_doubles) * 8;
    return bytes + mt_sweeper_units(p->sweeper) * (size_t)p->reduced * sizeof(mt_reduced);
}

mt_status mt_program_allocate(mt_program *p, size_t column_doubles) {
    mt_error *err = p->split.build.err;
    mt_status st = MT_OK;
    p->column_doubles = mt_round_up(column_doubles, 8);
    p->work = mt_alloc((size_t)p->works + 1, sizeof *p->work);
    p->hold = mt_alloc((size_t)p->split.points + 1, sizeof *p->hold);
    p->scratch = mt_alloc((size_t)p->workers, sizeof *p->scratch);
    p->tally = mt_alloc(mt_sweeper_units(p->sweeper) * (size_t)p->reduced + 1, sizeof *p->tally);
    p->total = mt_alloc((size_t)p->reduced + 1, sizeof *p->total);
    if (!p->work || !p->hold || !p->scratch || !p->tally || !p->total) return no_memory(p);
    for (int i = 0; i < p->works && !st; i++)
        st = mt_new(&p->work[i], mt_sweeper_work_doubles(p->sweeper), 8, "the work arrays", err);
    for (int i = 0; i < p->split.points && !st; i++)
        if (held(p, i))
            st = mt_new(&p->hold[i], p->spectrum->doubles, 8, "a spectrum kept between stages", err);
    for (int i = 0; i < p->workers && !st; i++)
        st = mt_new(&p->scratch[i], scratch_doubles(p, column_doubles), 8, "scratch memory", err);
    return st;
}

/* --- row sweeps
 * ---------------------------------------------------------------------------------------------------------
 */

typedef struct rows_ctx {
    mt_program *p;
    int stage;
} rows_ctx;

static void capture(const mt_program *p, const mt_unit *unit, double *const in[]) {
    const mt_stage *t = &p->stage[0];
    for (int f = 0; f < p->split.fields; f++) {
        if (!p->capture[f]) continue;
        for (int i = 0; i < t->nin; i++) {
            const mt_expr *node = p->split.quantity[t->in[i]].node;
            if (node->op == MT_FIELD_OP && node->symbol == p->split.symbol[f])
                memcpy(p->capture[f] + unit->first, in[i], unit->n * sizeof(double));
        }
    }
}

static mt_status row_body(void *ctx, const mt_unit *unit, double *const in[], double *const out[], int worker,
                          mt_error *err) {
    rows_ctx *r = ctx;
    mt_program *p = r->p;
    mt_stage *t = &p->stage[r->stage];
    mt_place place = {.grid = p->split.grid, .first = unit->first, .step = p->step};
    double *outs[MOST_LEAVES];
    double *const *to = out;
    (void)err;
    if (r->stage == 0 && !p->direct) capture(p, unit, in);
    if (r->stage == p->direct_stage) {
        for (int i = 0; i < t->nout; i++) outs[i] = out[i];
        outs[t->nout] = p->direct_out + unit->first;
        to = outs;
    }
    mt_reduced *tally = r->stage == 0 ? p->tally + unit->index * (size_t)p->reduced : NULL;
    mt_kernel_run(t->kernel, &place, unit->n, (const double *const *)in, to, tally, p->scratch[worker]);
    return MT_OK;
}

static void merge(mt_reduced *into, const mt_reduced *more, mt_reduce how) {
    if (how == MT_REDUCE_SUM)
        into->value += more->value;
    else if (isnan(into->value))
        return;
    else if (isnan(more->value) ||
             (how == MT_REDUCE_MIN ? more->value < into->value : more->value > into->value))
        *into = *more;
}

static void merge_tallies(mt_program *p) {
    size_t units = mt_sweeper_units(p->sweeper);
    for (int i = 0; i < p->reduced; i++) {
        p->total[i] = p->tally[i];
        for (size_t u = 1; u < units; u++)
            merge(&p->total[i], &p->tally[u * (size_t)p->reduced + (size_t)i], p->reduce[i]);
    }
}

mt_status mt_program_rows(mt_program *p, int stage, double time, mt_error *err) {
    mt_stage *t = &p->stage[stage];
    rows_ctx ctx = {p, stage};
    p->time = time;
    mt_status st = mt_kernel_prepare(t->kernel, time, err);
    if (!st)
        st = mt_sweep_rows(p->sweeper, t->nin, p->work, t->in_parity, t->nout, p->work, t->out_parity,
                           row_body, &ctx, err);
    if (!st && stage == 0) merge_tallies(p);
    return st;
}

/* --- column sweeps
 * ------------------------------------------------------------------------------------------------------ */

double *mt_program_scratch(const mt_program *p, int worker) {
    return p->scratch[worker];
}

double *mt_program_factor_lines(const mt_program *p, int sweep, const mt_column *c, int worker) {
    const mt_factors *f = &p->factors[sweep];
    double *lines = p->scratch[worker] + p->column_doubles;
    mt_program_factors_at(p, f, f->kernel, c, lines,
                          lines + mt_round_up((size_t)f->n * (size_t)c->length, 8));
    return lines;
}

void mt_program_factors_at(const mt_program *p, const mt_factors *f, const mt_kernel *kernel,
                           const mt_column *c, double *lines, double *kernel_scratch) {
    const mt_spectrum *s = p->spectrum;
    const double *in[MOST_FACTORS];
    double *out[MOST_FACTORS];
    mt_place place = {0};
    size_t n = (size_t)c->length;
    for (int a = 0; a < 3; a++) place.wave_fixed[a] = c->k[a];
    place.wave[s->outer] = s->k[s->outer];
    for (int i = 0; i < f->tables; i++) in[i] = f->table[i]->symbol->table + c->index * n;
    for (int i = 0; i < f->n; i++) out[i] = lines + (size_t)i * n;
    mt_kernel_run(kernel, &place, n, in, out, NULL, kernel_scratch);
}

void mt_program_hold(const mt_program *p, int sweep, const mt_column *c, double *const in[]) {
    const mt_stage *t = &p->stage[sweep];
    size_t doubles = (size_t)c->length * (p->spectrum->complex ? 2 : 1);
    for (int i = 0; i < t->nout; i++)
        if (p->hold[t->out[i]]) memcpy(p->hold[t->out[i]] + c->offset, in[i], doubles * sizeof(double));
}

static const double *source_line(const mt_program *p, int sweep, const mt_term *t, const mt_column *c,
                                 double *const in[], double *const u[]) {
    if (t->source >= 0) return u[t->source] + c->offset;
    int point = ~t->source;
    const mt_stage *stage = &p->stage[sweep < 0 ? 0 : sweep];
    for (int i = 0; i < stage->nout && sweep >= 0; i++)
        if (stage->out[i] == point) return in[i];
    return p->hold[point] + c->offset;
}

MT_VECTOR_CLONES static void add_real(size_t n, const double *f, double sign, const double *x, double *y) {
    if (!f)
        for (size_t m = 0; m < n; m++) y[m] += sign * x[m];
    else
        for (size_t m = 0; m < n; m++) y[m] += sign * f[m] * x[m];
}

MT_VECTOR_CLONES static void add_complex(size_t n, const double *f, double sign, const double *x, double *y) {
    if (!f)
        for (size_t m = 0; m < 2 * n; m++) y[m] += sign * x[m];
    else
        for (size_t m = 0; m < n; m++) {
            double g = sign * f[m];
            y[2 * m] += g * x[2 * m];
            y[2 * m + 1] += g * x[2 * m + 1];
        }
}

/* y += i sign f x */
MT_VECTOR_CLONES static void add_turned(size_t n, const double *f, double sign, const double *x, double *y) {
    for (size_t m = 0; m < n; m++) {
        double g = f ? sign * f[m] : sign;
        y[2 * m] -= g * x[2 * m + 1];
        y[2 * m + 1] += g * x[2 * m];
    }
}

void mt_program_add(const mt_program *p, int sweep, const mt_sum *sum, const mt_column *c, double *const in[],
                    double *const u[], const double *lines, int skip, double *dst) {
    const mt_factors *f = &p->factors[sweep < 0 ? p->stages - 1 : sweep];
    size_t n = (size_t)c->length;
    for (int i = 0; i < sum->n; i++) {
        const mt_term *t = &sum->term[i];
        if (t->source >= 0 && t->source == skip && t->turns % 2 == 0) continue;
        int number = mt_expr_is_const(t->factor, 1) ? -1 : find_factor(f, t->factor);
        const double *line = number < 0 ? NULL : lines + (size_t)number * n,
                     *x = source_line(p, sweep, t, c, in, u);
        double sign = t->turns >= 2 ? -1 : 1;
        if (!p->spectrum->complex)
            add_real(n, line, sign, x, dst);
        else if (t->turns % 2)
            add_turned(n, line, sign, x, dst);
        else
            add_complex(n, line, sign, x, dst);
    }
}

void mt_program_quantities(const mt_program *p, int stage, int sweep, const mt_column *c, double *const in[],
                           double *const u[], const double *lines, double *const out[]) {
    const mt_stage *t = &p->stage[stage];
    size_t bytes = (size_t)c->length * (p->spectrum->complex ? 2 : 1) * sizeof(double);
    for (int i = 0; i < t->nin; i++) {
        const mt_sum *sum = &p->split.quantity[t->in[i]].sum;
        if (sum->n == 1 && sum->term[0].turns == 0 && mt_expr_is_const(sum->term[0].factor, 1)) {
            memcpy(out[i], source_line(p, sweep, &sum->term[0], c, in, u), bytes);
            continue;
        }
        memset(out[i], 0, bytes);
        mt_program_add(p, sweep, sum, c, in, u, lines, -1, out[i]);
    }
}

typedef struct columns_ctx {
    mt_program *p;
    int sweep;
} columns_ctx;

static mt_status column_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    columns_ctx *x = ctx;
    mt_program *p = x->p;
    int last = p->stages - 1;
    (void)err;
    double *lines = mt_program_factor_lines(p, x->sweep < 0 ? last : x->sweep, c, worker);
    if (x->sweep >= 0) mt_program_hold(p, x->sweep, c, in);
    mt_program_quantities(p, x->sweep + 1, x->sweep, c, in, p->u, lines, out);
    return MT_OK;
}

mt_status mt_program_columns(mt_program *p, int sweep, double time, mt_error *err) {
    columns_ctx ctx = {p, sweep};
    mt_factors *f = &p->factors[sweep < 0 ? p->stages - 1 : sweep];
    const mt_stage *from = sweep < 0 ? NULL : &p->stage[sweep], *to = &p->stage[sweep + 1];
    mt_status st = mt_kernel_prepare(f->kernel, time, err);
    if (st) return st;
    return mt_sweep_columns(p->sweeper, from ? from->nout : 0, p->work, from ? from->out_parity : NULL,
                            to->nin, p->work, to->in_parity, column_body, &ctx, err);
}
