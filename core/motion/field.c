#include "core/motion/field.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/motion/program.h"

mt_status mt_field_new(mt_field **out, mt_forms *forms, mt_grid *grid, const char *name, mt_error *err) {
    mt_field *f;
    mt_status st = mt_new(&f, 1, sizeof *f, "a field", err);
    *out = NULL;
    if (st) return st;
    f->refs = 1;
    st = mt_symbol_new(&f->symbol, forms, MT_SYMBOL_FIELD, name, grid, err);
    if (!st) st = mt_new(&f->values, grid->cells, sizeof(double), "the values of a field", err);
    if (st) {
        mt_field_unref(&f);
        return mt_context(err, st, "field '%s'", name);
    }
    f->grid = f->symbol->grid;
    *out = f;
    return MT_OK;
}

mt_field *mt_field_ref(mt_field *field) {
    field->refs++;
    return field;
}

void mt_field_unref(mt_field **field) {
    mt_field *f = *field;
    *field = NULL;
    if (!f || --f->refs > 0) return;
    mt_free(f->values);
    mt_symbol_unref(&f->symbol);
    mt_free(f);
}

void mt_field_touch(mt_field *field) {
    field->version++;
}

/* --- evaluation
 * ---------------------------------------------------------------------------------------------------------
 */

/* The fields that e needs in real space and the kernel that makes e from them: no transform, so no mode is
 * projected out. */
typedef struct plain_ctx {
    const mt_kernel *kernel;
    const mt_grid *grid;
    int n;
    const double *const *in;
    double *out;
    double **scratch;
} plain_ctx;

#define PLAIN_CELLS 16384

static mt_status plain_job(void *ctx, size_t index, int worker, mt_error *err) {
    plain_ctx *x = ctx;
    size_t first = index * PLAIN_CELLS, n = x->grid->cells - first;
    const double *in[64];
    double *out[1] = {x->out + first};
    mt_place place = {.grid = x->grid, .first = first};
    (void)err;
    if (n > PLAIN_CELLS) n = PLAIN_CELLS;
    for (int i = 0; i < x->n; i++) in[i] = x->in[i] + first;
    mt_kernel_run(x->kernel, &place, n, in, out, NULL, x->scratch[worker]);
    return MT_OK;
}

static mt_status evaluate_plain(mt_sweeper *sweeper, const mt_expr *e, int n, mt_field *const fields[],
                                double time, double *out, mt_error *err) {
    mt_pool *pool = mt_sweeper_pool(sweeper);
    int workers = mt_pool_threads(pool), used = 0;
    const mt_expr *leaf[64];
    const double *in[64];
    plain_ctx x = {.grid = mt_sweeper_grid(sweeper), .in = in, .out = out};
    mt_kernel *kernel = NULL;
    int leaves = mt_split_leaves(e, leaf, 64);
    if (leaves < 0) return mt_fail(err, MT_ENOMEM, "no memory for an expression");
    if (leaves > 64) return mt_fail(err, MT_EUNSUPPORTED, "an expression with more than 64 fields");
    for (int i = 0; i < leaves; i++)
        for (int f = 0; f < n; f++)
            if (fields[f]->symbol == leaf[i]->symbol) leaf[used] = leaf[i], in[used++] = fields[f]->values;
    mt_kernel_spec spec = {.nin = used, .in = leaf, .nout = 1, .out = &e};
    mt_status st = mt_kernel_new(&kernel, &spec, err);
    if (!st) st = mt_kernel_prepare(kernel, time, err);
    if (!st) st = mt_new(&x.scratch, (size_t)workers, sizeof *x.scratch, "scratch memory", err);
    for (int i = 0; i < workers && !st; i++)
        st = mt_new(&x.scratch[i], mt_kernel_scratch(kernel), sizeof(double), "scratch memory", err);
    x.kernel = kernel, x.n = used;
    if (!st) st = mt_pool_run(pool, (x.grid->cells + PLAIN_CELLS - 1) / PLAIN_CELLS, plain_job, &x, err);
    for (int i = 0; i < workers && x.scratch; i++) mt_free(x.scratch[i]);
    mt_free(x.scratch);
    mt_kernel_free(&kernel);
    return st;
}

static mt_status run_staged(mt_program *p, int n, mt_field *const fields[], double time, mt_error *err) {
    mt_status st = MT_OK;
    for (int f = 0; f < n && !st; f++) {
        st = mt_new(&p->u[f], p->spectrum->doubles, sizeof(double), "a spectrum", err);
        if (!st) st = mt_transform_forward(p->sweeper, fields[f]->values, 0, p->u[f], p->work[0], err);
    }
    if (!st) st = mt_program_columns(p, -1, time, err);
    for (int s = 0; s < p->stages && !st; s++) {
        st = mt_program_rows(p, s, time, err);
        if (!st && s + 1 < p->stages) st = mt_program_columns(p, s, time, err);
    }
    for (int f = 0; f < n; f++) mt_free(p->u[f]);
    return st;
}

static mt_status evaluate_staged(mt_sweeper *sweeper, const mt_expr *e, int n, mt_field *const fields[],
                                 double time, double *out, mt_error *err) {
    mt_program p;
    mt_symbol **symbols;
    mt_status st = mt_new(&symbols, (size_t)n + 1, sizeof *symbols, "an expression", err);
    if (st) return st;
    for (int i = 0; i < n; i++) symbols[i] = fields[i]->symbol;
    st = mt_program_begin(&p, e->forms, sweeper, n, symbols, err);
    if (!st)
        p.direct = mt_build_collect(&p.split.build, mt_build_expand(&p.split.build, e, p.split.grid->dim));
    if (!st) st = p.direct ? mt_split_needs(&p.split, p.direct, &p.direct_stage) : p.split.build.status;
    if (!st) st = mt_program_finish(&p, 0, NULL);
    if (!st) st = mt_program_compile(&p);
    if (!st && p.works == 0) p.works = 1;
    if (!st) st = mt_program_allocate(&p, 0);
    p.direct_out = out;
    if (!st) st = run_staged(&p, n, fields, time, err);
    mt_program_end(&p);
    mt_free(symbols);
    return st;
}

mt_status mt_evaluate(mt_sweeper *sweeper, const mt_expr *e, int n, mt_field *const fields[], double time,
                      double *out, mt_error *err) {
    mt_grid *grid = NULL;
    mt_status st = mt_expr_grid(e, &grid, err);
    if (st) return st;
    if (grid && !mt_grid_equal(grid, mt_sweeper_grid(sweeper)))
        return mt_fail(err, MT_EINPUT, "the expression's fields live on another grid");
    if (mt_expr_contents(e) & MT_HAS_SPECTRAL) return evaluate_staged(sweeper, e, n, fields, time, out, err);
    return evaluate_plain(sweeper, e, n, fields, time, out, err);
}

mt_status mt_field_set(mt_field *field, mt_sweeper *sweeper, const mt_expr *e, int n,
                       mt_field *const fields[], double time, mt_error *err) {
    mt_status st = mt_evaluate(sweeper, e, n, fields, time, field->values, err);
    if (st) return mt_context(err, st, "field '%s'", field->symbol->name);
    mt_field_touch(field);
    return MT_OK;
}

/* --- another grid
 * --------------------------------------------------------------------------------------------------------
 */

static bool same_box(const mt_grid *a, const mt_grid *b) {
    bool same = a->dim == b->dim;
    for (int i = 0; i < 3 && same; i++) {
        double la = a->n[i] * a->h[i], lb = b->n[i] * b->h[i];
        same = a->wall[i] == b->wall[i] && (i >= a->dim || fabs(la - lb) <= 1e-9 * la);
    }
    return same;
}

/* Stored mode of s for the signed mode m of an axis, or -1. */
static int stored_mode(const mt_spectrum *s, int axis, int m) {
    int n = s->grid->n[axis];
    if (s->grid->wall[axis] == MT_MIRROR || axis == s->half) return m >= 0 && m < s->modes[axis] ? m : -1;
    if (2 * abs(m) >= n && m != 0) return -1;
    return m >= 0 ? m : m + n;
}

static int signed_mode(const mt_spectrum *s, int axis, int mode) {
    int n = s->grid->n[axis];
    return s->grid->wall[axis] == MT_MIRROR || axis == s->half || 2 * mode < n ? mode : mode - n;
}

/* Periodic axes count from the centre of their first cell, which lies elsewhere on the other grid. */
static double phase_of(const mt_spectrum *to, const mt_spectrum *from, const int mode[3]) {
    double phase = 0;
    for (int a = 0; a < to->grid->dim; a++)
        if (to->grid->wall[a] == MT_PERIODIC)
            phase += to->k[a][mode[a]] * 0.5 * (to->grid->h[a] - from->grid->h[a]);
    return phase;
}

static void copy_modes(const mt_spectrum *to, const mt_spectrum *from, double *out, const double *in) {
    for (size_t j = 0; j < to->columns; j++) {
        int mode[3], there[3] = {0, 0, 0};
        mt_spectrum_column(to, j, mode);
        for (int i = 0; i < to->length; i++) {
            bool found = true;
            mode[to->outer] = i;
            for (int a = 0; a < 3 && found; a++) {
                there[a] = stored_mode(from, a, signed_mode(to, a, mode[a]));
                found = there[a] >= 0;
            }
            if (!found) continue;
            size_t column = 0, step = 1, width = to->complex ? 2 : 1;
            for (int a = 0; a < 3; a++)
                if (a != from->outer) column += (size_t)there[a] * step, step *= (size_t)from->modes[a];
            const double *v = in + column * from->stride + (size_t)there[from->outer] * width;
            double *w = out + j * to->stride + (size_t)i * width, phase = phase_of(to, from, mode);
            w[0] = to->complex ? v[0] * cos(phase) - v[1] * sin(phase) : v[0];
            if (to->complex) w[1] = v[0] * sin(phase) + v[1] * cos(phase);
        }
    }
}

mt_status mt_field_resample(mt_field *to, mt_sweeper *to_sweeper, const mt_field *from,
                            mt_sweeper *from_sweeper, mt_error *err) {
    const mt_spectrum *a = mt_sweeper_spectrum(to_sweeper), *b = mt_sweeper_spectrum(from_sweeper);
    double *in = NULL, *out = NULL, *work = NULL;
    size_t wa = mt_sweeper_work_doubles(to_sweeper), wb = mt_sweeper_work_doubles(from_sweeper);
    if (!same_box(to->grid, from->grid) || a->outer != b->outer || a->half != b->half)
        return mt_fail(err, MT_EINPUT, "field '%s': the other grid is not of the same box", to->symbol->name);
    mt_status st = mt_new(&in, b->doubles, sizeof(double), "a spectrum", err);
    if (!st) st = mt_new(&out, a->doubles, sizeof(double), "a spectrum", err);
    if (!st) st = mt_new(&work, wa > wb ? wa : wb, sizeof(double), "a spectrum", err);
    if (!st) st = mt_transform_forward(from_sweeper, from->values, 0, in, work, err);
    if (!st) copy_modes(a, b, out, in);
    if (!st) st = mt_transform_inverse(to_sweeper, out, 0, to->values, work, err);
    mt_free(in), mt_free(out), mt_free(work);
    if (!st) mt_field_touch(to);
    return st;
}

/* --- discs
 * ---------------------------------------------------------------------------------------------------------------
 */

/* Squared distance along one axis from cell i to a coordinate. */
static double apart(const mt_grid *g, int axis, int i, double x) {
    double length = g->n[axis] * g->h[axis], d = fabs((i + 0.5) * g->h[axis] - x);
    if (g->wall[axis] == MT_PERIODIC) d = fmin(d, length - d);
    return d * d;
}

static void add_disc(mt_field *f, const double *centre, double radius, double width, double amount) {
    const mt_grid *g = f->grid;
    double reach = radius + 20 * width;
    size_t cell = 0;
    for (int z = 0; z < g->n[2]; z++)
        for (int y = 0; y < g->n[1]; y++) {
            double rest =
                (g->dim > 1 ? apart(g, 1, y, centre[1]) : 0) + (g->dim > 2 ? apart(g, 2, z, centre[2]) : 0);
            for (int x = 0; x < g->n[0]; x++, cell++) {
                double r = sqrt(rest + apart(g, 0, x, centre[0]));
                if (r < reach) f->values[cell] += 0.5 * amount * (1 - tanh((r - radius) / width));
            }
        }
}

void mt_field_add_discs(mt_field *field, int count, const double *centres, double radius, double width,
                        double amount) {
    for (int i = 0; i < count; i++) add_disc(field, centres + i * field->grid->dim, radius, width, amount);
    mt_field_touch(field);
}
