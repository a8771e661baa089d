/* The oracle: expressions evaluated node by node over the whole grid, spectral operators by direct sums in
 * long double. Slow and simple on purpose; shares no code with the kernels or the transforms. */
#include "core/formula/expr.h"
#include "core/formula/expr_inside.h"
#include "core/formula/filter.h"
#include "core/formula/map.h"

#include <complex.h>
#include <math.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct oracle {
    const mt_grid *grid;
    int n;
    mt_symbol *const *symbols;
    const double *const *fields;
    double time;
    mt_map done; /* node -> values */
    mt_status status;
    mt_error *err;
} oracle;

static double *values_of(oracle *o, const mt_expr *e);

static double *fresh(oracle *o) {
    double *v = NULL;
    if (!o->status) o->status = mt_new(&v, o->grid->cells, sizeof *v, "an evaluation", o->err);
    return v;
}

/* --- lines along an axis
 * ---------------------------------------------------------------------------------------------------------
 */

typedef long double real;

static const real pi = 3.14159265358979323846264338327950288L;

/* What is done with each mode of a line. */
typedef enum line_op { LINE_PROJECT, LINE_FIRST, LINE_SECOND } line_op;

/* Periodic line: v_j = sum over modes of (a cos + b sin); Nyquist dropped. */
static void periodic_line(const mt_grid *g, int axis, line_op op, const real *v, real *out) {
    int n = g->n[axis];
    real length = (real)n * (real)g->h[axis];
    for (int j = 0; j < n; j++) out[j] = 0;
    for (int m = 0; 2 * m < n || m == 0; m++) {
        real a = 0, b = 0, k = 2 * pi * m / length;
        for (int j = 0; j < n; j++) {
            a += v[j] * cosl(2 * pi * m * j / n);
            b += v[j] * sinl(2 * pi * m * j / n);
        }
        real scale = (m == 0 ? 1.0L : 2.0L) / n;
        for (int j = 0; j < n; j++) {
            real c = cosl(2 * pi * m * j / n), s = sinl(2 * pi * m * j / n);
            if (op == LINE_PROJECT)
                out[j] += scale * (a * c + b * s);
            else if (op == LINE_FIRST)
                out[j] += scale * k * (b * c - a * s);
            else
                out[j] -= scale * k * k * (a * c + b * s);
        }
    }
}

/* Mirror line: cosines (even) or sines (odd, modes 1 .. n-1) about the walls. */
static void mirror_line(const mt_grid *g, int axis, bool odd, line_op op, const real *v, real *out) {
    int n = g->n[axis];
    real length = (real)n * (real)g->h[axis];
    for (int j = 0; j < n; j++) out[j] = 0;
    for (int m = odd ? 1 : 0; m < n; m++) {
        real a = 0, k = pi * m / length, scale = (m == 0 ? 1.0L : 2.0L) / n;
        for (int j = 0; j < n; j++) {
            real x = pi * m * (j + 0.5L) / n;
            a += v[j] * (odd ? sinl(x) : cosl(x));
        }
        for (int j = 0; j < n; j++) {
            real x = pi * m * (j + 0.5L) / n, basis = odd ? sinl(x) : cosl(x),
                 other = odd ? cosl(x) : -sinl(x);
            if (op == LINE_PROJECT)
                out[j] += scale * a * basis;
            else if (op == LINE_FIRST)
                out[j] += scale * k * a * other;
            else
                out[j] -= scale * k * k * a * basis;
        }
    }
}

static void along(const mt_grid *g, int axis, bool odd, line_op op, const real *from, real *to, real *line) {
    size_t step = 1, n = (size_t)g->n[axis];
    for (int a = 0; a < axis; a++) step *= (size_t)g->n[a];
    for (size_t i = 0; i < g->cells; i++) {
        if (i / step % n) continue; /* first cell of each line */
        for (size_t j = 0; j < n; j++) line[j] = from[i + j * step];
        if (g->wall[axis] == MT_PERIODIC)
            periodic_line(g, axis, op, line, line + n);
        else
            mirror_line(g, axis, odd, op, line, line + n);
        for (size_t j = 0; j < n; j++) to[i + j * step] = line[n + j];
    }
}

/* The modes dropped along the other axes too, as every transform does. */
static void project(const mt_grid *g, mt_parities parity, real *v, real *line) {
    for (int a = 0; a < g->dim; a++) along(g, a, (parity >> a) & 1, LINE_PROJECT, v, v, line);
}

static void spectral(oracle *o, mt_op op, int only, const mt_expr *arg, const double *a, double *v) {
    const mt_grid *g = o->grid;
    mt_parities parity = 0;
    size_t most = (size_t)(g->n[0] > g->n[1] ? g->n[0] : g->n[1]);
    if ((size_t)g->n[2] > most) most = (size_t)g->n[2];
    o->status = mt_expr_parity(arg, g, &parity, o->err);
    real *from = mt_alloc(g->cells, sizeof *from), *to = mt_alloc(g->cells, sizeof *to);
    real *line = mt_alloc(2 * most, sizeof *line);
    if (!o->status && (!from || !to || !line))
        o->status = mt_fail(o->err, MT_ENOMEM, "no memory for an evaluation");
    for (size_t i = 0; i < g->cells && !o->status; i++) from[i] = a[i];
    if (!o->status) project(g, parity, from, line);
    for (int axis = 0; axis < g->dim && !o->status; axis++) {
        if (op == MT_DERIV_OP && axis != only) continue;
        along(g, axis, (parity >> axis) & 1, op == MT_DERIV_OP ? LINE_FIRST : LINE_SECOND, from, to, line);
        for (size_t i = 0; i < g->cells; i++) v[i] += (double)to[i];
    }
    mt_free(from), mt_free(to), mt_free(line);
}

/* --- filters: every mode by its own sums over the cells, one axis after the other
 * ------------------------------------------------ */

/* Basis functions of an axis, counted over signed modes: exp(i k x) or cos(k x) or sin(k x). */
static int modes_of(const mt_grid *g, int axis) {
    return g->wall[axis] == MT_PERIODIC ? 2 * ((g->n[axis] - 1) / 2) + 1 : g->n[axis];
}

static int signed_mode(const mt_grid *g, int axis, int i) {
    return g->wall[axis] == MT_PERIODIC ? i - (g->n[axis] - 1) / 2 : i;
}

static long double complex basis(const mt_grid *g, int axis, bool odd, int mode, int cell) {
    if (g->wall[axis] == MT_PERIODIC) return cexpl(2 * pi * I * mode * cell / g->n[axis]);
    real x = pi * mode * (cell + 0.5L) / g->n[axis];
    return odd ? sinl(x) : cosl(x);
}

static double wavenumber(const mt_grid *g, int axis, int mode) {
    return (double)((g->wall[axis] == MT_PERIODIC ? 2 : 1) * pi * mode / ((real)g->n[axis] * g->h[axis]));
}

/* One mode's part of the filtered field is added to v. */
static void filter_mode(oracle *o, const mt_symbol *filter, mt_parities parity, const int mode[3],
                        const double *a, real *v) {
    const mt_grid *g = o->grid;
    double k[3] = {0, 0, 0}, f = 0;
    long double complex c = 0;
    real norm = 1;
    for (int axis = 0; axis < g->dim; axis++) {
        k[axis] = wavenumber(g, axis, mode[axis]);
        norm *= g->n[axis] / (g->wall[axis] == MT_MIRROR && mode[axis] ? 2.0L : 1.0L);
    }
    o->status = mt_filter_at(filter, k, &f, o->err);
    for (int pass = 0; pass < 2; pass++)
        for (size_t i = 0; i < g->cells; i++) {
            int place[3] = {(int)(i % (size_t)g->n[0]), (int)(i / (size_t)g->n[0] % (size_t)g->n[1]),
                            (int)(i / ((size_t)g->n[0] * (size_t)g->n[1]))};
            long double complex b = 1;
            for (int axis = 0; axis < g->dim; axis++)
                b *= basis(g, axis, (parity >> axis) & 1, mode[axis], place[axis]);
            if (pass == 0)
                c += conjl(b) * a[i];
            else
                v[i] += creall(b * c) * f / norm;
        }
}

static void filtered(oracle *o, const mt_expr *e, const double *a, double *v) {
    const mt_grid *g = o->grid;
    mt_parities parity = 0;
    o->status = mt_expr_parity(e->arg[0], g, &parity, o->err);
    real *sum = mt_alloc(g->cells, sizeof *sum);
    if (!sum && !o->status) o->status = mt_fail(o->err, MT_ENOMEM, "no memory for an evaluation");
    int m[3] = {modes_of(g, 0), g->dim > 1 ? modes_of(g, 1) : 1, g->dim > 2 ? modes_of(g, 2) : 1};
    for (int i = 0; i < m[0] * m[1] * m[2] && !o->status; i++) {
        int mode[3] = {signed_mode(g, 0, i % m[0]), g->dim > 1 ? signed_mode(g, 1, i / m[0] % m[1]) : 0,
                       g->dim > 2 ? signed_mode(g, 2, i / (m[0] * m[1])) : 0};
        bool none = false;
        for (int axis = 0; axis < g->dim; axis++) none = none || (((parity >> axis) & 1) && mode[axis] == 0);
        if (!none) filter_mode(o, e->symbol, parity, mode, a, sum);
    }
    for (size_t i = 0; i < g->cells && !o->status; i++) v[i] = (double)sum[i];
    mt_free(sum);
}

/* --- nodes
 * -------------------------------------------------------------------------------------------------------------------------
 */

static void leaf(oracle *o, const mt_expr *e, double *v) {
    const mt_grid *g = o->grid;
    size_t nx = (size_t)g->n[0], ny = (size_t)g->n[1];
    if (e->op == MT_NOISE_OP) {
        mt_random_fill(e->random, e->seed, 0, g->cells, 0, 0, v);
        return;
    }
    for (size_t i = 0; i < g->cells; i++) {
        size_t place[3] = {i % nx, i / nx % ny, i / (nx * ny)};
        v[i] = e->op == MT_CONST_OP   ? e->value
               : e->op == MT_PARAM_OP ? e->symbol->value
               : e->op == MT_TIME_OP  ? o->time
               : e->op == MT_COORD_OP ? ((double)place[e->axis] + 0.5) * g->h[e->axis]
                                      : NAN;
    }
}

static void gradsq(oracle *o, const mt_expr *e, double *v) {
    const double *a = values_of(o, e->arg[0]);
    for (int axis = 0; axis < o->grid->dim && a && !o->status; axis++) {
        double *x = fresh(o);
        if (x) spectral(o, MT_DERIV_OP, axis, e->arg[0], a, x);
        for (size_t i = 0; i < o->grid->cells && x; i++) v[i] += x[i] * x[i];
        mt_free(x);
    }
}

static void point(oracle *o, const mt_expr *e, double *v) {
    const double *a[3] = {NULL, NULL, NULL};
    for (int i = 0; i < e->nargs; i++) a[i] = values_of(o, e->arg[i]);
    if (o->status) return;
    for (size_t i = 0; i < o->grid->cells; i++) {
        double x[3] = {0, 0, 0};
        for (int j = 0; j < e->nargs; j++) x[j] = a[j][i];
        v[i] = mt_op_apply(e->op, x);
    }
}

static void field(oracle *o, const mt_expr *e, double *v) {
    for (int i = 0; i < o->n; i++)
        if (o->symbols[i] == e->symbol) {
            memcpy(v, o->fields[i], o->grid->cells * sizeof *v);
            return;
        }
    o->status = mt_fail(o->err, MT_EINPUT, "no values for field '%s'", e->symbol->name);
}

static double *values_of(oracle *o, const mt_expr *e) {
    uintptr_t *known = mt_map_at(&o->done, e, false);
    if (known) return (double *)*known;
    double *v = fresh(o);
    if (!v) return NULL;
    if (e->op == MT_FIELD_OP)
        field(o, e, v);
    else if (!e->nargs)
        leaf(o, e, v);
    else if (e->op == MT_GRADSQ_OP)
        gradsq(o, e, v);
    else if (mt_op_spectral(e->op)) {
        const double *a = values_of(o, e->arg[0]);
        if (a && e->op == MT_FILTER_OP)
            filtered(o, e, a, v);
        else if (a)
            spectral(o, e->op, e->axis, e->arg[0], a, v);
    } else
        point(o, e, v);
    known = mt_map_at(&o->done, e, true);
    if (!known) {
        mt_free(v);
        if (!o->status) o->status = mt_fail(o->err, MT_ENOMEM, "no memory for an evaluation");
        return NULL;
    }
    *known = (uintptr_t)v;
    return v;
}

mt_status mt_expr_evaluate(const mt_expr *e, const mt_grid *grid, int n, mt_symbol *const symbols[],
                           const double *const fields[], double time, double *out, mt_error *err) {
    oracle o = {.grid = grid, .n = n, .symbols = symbols, .fields = fields, .time = time, .err = err};
    const double *v = values_of(&o, e);
    if (!o.status && v) memcpy(out, v, grid->cells * sizeof *out);
    for (size_t i = 0; i < o.done.room; i++)
        if (o.done.key[i]) mt_free((double *)o.done.value[i]);
    mt_map_end(&o.done);
    return o.status;
}
