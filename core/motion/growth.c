/* Linear growth about a homogeneous state. Each right-hand side is differentiated by forward accumulation: a
 * node carries its value in the homogeneous state and the amplitude of its response to a wave exp(i k x) of
 * unit amplitude in one field. Spectral operators multiply the response by their symbol (d/dx by i k_x ...).
 * This works for every equation the language can express. Cahn (Acta Metall. 9 (1961) 795) for div(M grad(f'
 * - kappa lap c)): R = -M k^2 (f'' + kappa k^2). */
#include "core/motion/waves.h"

#include <lapacke.h>
#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/formula/filter.h"

typedef struct dual {
    double v;     /* value in the homogeneous state */
    mt_complex d; /* response to the wave */
} dual;

typedef struct memo {
    const mt_expr *e;
    dual x;
} memo;

typedef struct walk {
    const mt_model *m;
    const double *mean, *k;
    double time;
    int wrt; /* field that carries the wave */
    int n, room;
    memo *seen;
    mt_status status;
    mt_error *err;
} walk;

static dual respond(walk *w, const mt_expr *e);

static dual leaf(walk *w, const mt_expr *e) {
    switch (e->op) {
    case MT_CONST_OP: return (dual){e->value, 0};
    case MT_PARAM_OP: return (dual){e->symbol->value, 0};
    case MT_TIME_OP: return (dual){w->time, 0};
    case MT_FIELD_OP:
        for (int i = 0; i < w->m->n; i++)
            if (w->m->mover[i].field->symbol == e->symbol) return (dual){w->mean[i], i == w->wrt ? 1 : 0};
        break;
    default: break;
    }
    w->status = mt_fail(w->err, MT_EUNSUPPORTED,
                        "the equations depend on position: there is no homogeneous state to grow waves from");
    return (dual){0, 0};
}

static dual power(dual a, dual b) {
    double v = pow(a.v, b.v);
    mt_complex d = b.v == 0 ? 0 : b.v * pow(a.v, b.v - 1) * a.d;
    if (b.d != 0) d += v * log(a.v) * b.d;
    return (dual){v, d};
}

/* Value and slope of the extended logarithm and its derivatives (expr.h). */
static dual logarithm(mt_op op, dual a) {
    const double c = MT_LOG_CUT;
    double t = (a.v - c) / c;
    bool in = a.v >= c;
    double log_ = in ? log(a.v) : log(c) + t - t * t / 2;
    double d1 = in ? 1 / a.v : 1 / c - t / c, d2 = in ? -1 / (a.v * a.v) : -1 / (c * c);
    double d3 = in ? 2 / (a.v * a.v * a.v) : 0;
    if (op == MT_LOG_OP) return (dual){log_, d1 * a.d};
    if (op == MT_DLOG_OP) return (dual){d1, d2 * a.d};
    return (dual){d2, d3 * a.d};
}

static dual unary(mt_op op, dual a) {
    double v;
    switch (op) {
    case MT_NEG_OP: return (dual){-a.v, -a.d};
    case MT_EXP_OP: v = exp(a.v); return (dual){v, v * a.d};
    case MT_SQRT_OP: v = sqrt(a.v); return (dual){v, a.d / (2 * v)};
    case MT_SIN_OP: return (dual){sin(a.v), cos(a.v) * a.d};
    case MT_COS_OP: return (dual){cos(a.v), -sin(a.v) * a.d};
    case MT_TANH_OP: v = tanh(a.v); return (dual){v, (1 - v * v) * a.d};
    case MT_ABS_OP: return (dual){fabs(a.v), (a.v > 0 ? 1 : a.v < 0 ? -1 : 0) * a.d};
    case MT_SIGN_OP: return (dual){a.v > 0 ? 1 : a.v < 0 ? -1 : 0, 0};
    default: return logarithm(op, a);
    }
}

static dual binary(mt_op op, dual a, dual b) {
    switch (op) {
    case MT_ADD_OP: return (dual){a.v + b.v, a.d + b.d};
    case MT_SUB_OP: return (dual){a.v - b.v, a.d - b.d};
    case MT_MUL_OP: return (dual){a.v * b.v, a.d * b.v + a.v * b.d};
    case MT_DIV_OP: return (dual){a.v / b.v, (a.d - a.v / b.v * b.d) / b.v};
    case MT_MIN_OP: return a.v <= b.v ? a : b;
    case MT_MAX_OP: return a.v >= b.v ? a : b;
    case MT_ABOVE_OP: return (dual){a.v > b.v, 0};
    default: return power(a, b);
    }
}

static dual filtered(walk *w, const mt_expr *e, dual a) {
    const double none[3] = {0, 0, 0};
    double here = 0, zero = 0;
    mt_status st = mt_filter_at(e->symbol, w->k, &here, w->err);
    if (!st) st = mt_filter_at(e->symbol, none, &zero, w->err);
    if (st) w->status = st;
    return (dual){a.v * zero, a.d * here};
}

/* Spectral operators take a constant to 0 (FILTER: to its value times the multiplier at k = 0). */
static dual spectral(walk *w, const mt_expr *e, dual a) {
    double k2 = w->k[0] * w->k[0] + w->k[1] * w->k[1] + w->k[2] * w->k[2];
    if (e->op == MT_DERIV_OP) return (dual){0, I * w->k[e->axis] * a.d};
    if (e->op == MT_LAPLACIAN_OP) return (dual){0, -k2 * a.d};
    return filtered(w, e, a);
}

static dual compute(walk *w, const mt_expr *e) {
    dual a[3] = {{0, 0}, {0, 0}, {0, 0}};
    if (!e->nargs) return leaf(w, e);
    for (int i = 0; i < e->nargs; i++) a[i] = respond(w, e->arg[i]);
    if (mt_op_spectral(e->op)) return spectral(w, e, a[0]);
    if (e->op == MT_GRADSQ_OP) return (dual){0, 0};
    if (e->op == MT_WHERE_OP) return a[0].v != 0 ? a[1] : a[2];
    return e->nargs == 1 ? unary(e->op, a[0]) : binary(e->op, a[0], a[1]);
}

static dual respond(walk *w, const mt_expr *e) {
    for (int i = 0; i < w->n; i++)
        if (w->seen[i].e == e) return w->seen[i].x;
    dual x = compute(w, e);
    if (w->n == w->room) {
        int room = w->room ? 2 * w->room : 64;
        memo *more = mt_resize(w->seen, (size_t)room, sizeof *more);
        if (!more) {
            w->status = mt_fail(w->err, MT_ENOMEM, "no memory for the growth of waves");
            return x;
        }
        w->seen = more;
        w->room = room;
    }
    w->seen[w->n++] = (memo){e, x};
    return x;
}

mt_status mt_wave_matrix(const mt_waves *x, const double k[3], mt_complex *a, mt_error *err) {
    walk w = {.m = x->m, .mean = x->mean, .k = k, .time = x->time, .err = err};
    for (int j = 0; j < x->n && !w.status; j++) {
        w.wrt = x->field[j];
        w.n = 0;
        for (int i = 0; i < x->n && !w.status; i++) a[i * x->n + j] = respond(&w, x->row[i]).d;
    }
    mt_free(w.seen);
    for (int i = 0; i < x->n * x->n && !w.status; i++)
        if (!isfinite(creal(a[i])) || !isfinite(cimag(a[i])))
            return mt_fail(err, MT_ENUMERIC, "the linearised equations are not finite at this state");
    return w.status;
}

mt_status mt_waves_begin(mt_waves *x, mt_model *m, bool potentials, const double mean[], double time,
                         mt_error *err) {
    memset(x, 0, sizeof *x);
    mt_status st = mt_model_derive(m, err);
    if (st) return st;
    x->m = m, x->mean = mean, x->time = time;
    x->field = mt_alloc((size_t)m->n, sizeof *x->field), x->row = mt_alloc((size_t)m->n, sizeof *x->row);
    if (!x->field || !x->row) {
        mt_waves_end(x);
        return mt_fail(err, MT_ENOMEM, "no memory for the growth of waves");
    }
    for (int i = 0; i < m->n; i++) {
        const mt_expr *e = potentials ? m->mover[i].potential : m->mover[i].rhs;
        if (m->mover[i].motion == MT_MOTION_STILL || !e) continue;
        x->field[x->n] = i;
        x->row[x->n++] = e;
    }
    mt_step_params(m, time, false);
    return MT_OK;
}

void mt_waves_end(mt_waves *x) {
    mt_free(x->field), mt_free(x->row);
    memset(x, 0, sizeof *x);
}

typedef struct rates {
    double rate, frequency; /* of the eigenvalue with the largest real part */
    double size;            /* largest modulus */
} rates;

/* The eigenvalue of the largest real part, by LAPACK; a is destroyed. */
static mt_status fastest(int n, mt_complex *a, mt_complex *w, rates *r, mt_error *err) {
    if (n == 1)
        w[0] = a[0];
    else if (LAPACKE_zgeev(LAPACK_ROW_MAJOR, 'N', 'N', n, a, n, w, NULL, n, NULL, n) != 0)
        return mt_fail(err, MT_ENUMERIC, "the growth rates of waves did not converge");
    for (int i = 0; i < n; i++) {
        if (i == 0 || creal(w[i]) > r->rate) r->rate = creal(w[i]), r->frequency = fabs(cimag(w[i]));
        r->size = fmax(r->size, cabs(w[i]));
    }
    return MT_OK;
}

static mt_status rates_at(mt_model *m, const double mean[], const double k[3], double time, rates *r,
                          mt_error *err) {
    mt_waves x;
    memset(r, 0, sizeof *r);
    mt_status st = mt_waves_begin(&x, m, false, mean, time, err);
    if (st) return st;
    mt_complex *a = mt_alloc((size_t)(x.n * x.n), sizeof *a), *w = mt_alloc((size_t)x.n, sizeof *w);
    if (!a || !w) st = mt_fail(err, MT_ENOMEM, "no memory for the growth of waves");
    if (!st) st = mt_wave_matrix(&x, k, a, err);
    if (!st) st = fastest(x.n, a, w, r, err);
    mt_free(a), mt_free(w);
    mt_waves_end(&x);
    return st;
}

mt_status mt_model_growth(mt_model *m, const double mean[], const double k[3], double time, double *rate,
                          double *frequency, mt_error *err) {
    rates r;
    mt_status st = rates_at(m, mean, k, time, &r, err);
    *rate = r.rate, *frequency = r.frequency;
    return st;
}

/* --- well-posed?
 * ------------------------------------------------------------------------------------------------------ */

/* Growth at the grid's shortest wave and ten and a hundred times shorter ones: where it rises on and on, the
 * equations have no solution that a finer grid would approach. */
static mt_status along(mt_model *m, const double mean[], const double direction[3], mt_error *err) {
    rates r[3];
    double size = 1;
    for (int i = 0; i < 3; i++, size *= 10) {
        double k[3] = {size * direction[0], size * direction[1], size * direction[2]};
        mt_status st = rates_at(m, mean, k, m->state.time, &r[i], err);
        if (st) return st;
        if (!(r[i].rate > 1e-9 * r[i].size)) return MT_OK; /* rounding of a rate of 0 */
    }
    if (!(r[1].rate > 2 * r[0].rate && r[2].rate > 2 * r[1].rate)) return MT_OK;
    return mt_fail(
        err, MT_EINPUT,
        "the shorter a wave, the faster it grows (rates %.3g, %.3g, %.3g at the grid's shortest wave, a "
        "tenth and a hundredth of it): the equations have no stable implicit part. A composition "
        "inside the spinodal needs a gradient energy, diffusion its sign, a mobility matrix positive "
        "eigenvalues (lowest here %.3g of the largest element)",
        r[0].rate, r[1].rate, r[2].rate, fmin(1, m->state.matrix_lowest));
}

mt_status mt_model_check_posed(mt_model *m, mt_error *err) {
    mt_error local = {0};
    double *mean = mt_alloc((size_t)m->n, sizeof *mean), corner[3] = {0, 0, 0};
    if (!mean) return mt_fail(err, MT_ENOMEM, "no memory for the growth of waves");
    for (int i = 0; i < m->n; i++) mean[i] = m->mover[i].u[0];
    mt_status st = MT_OK;
    for (int a = 0; a < m->grid->dim && !st; a++) {
        double axis[3] = {0, 0, 0};
        axis[a] = corner[a] = m->grid->n[a] > 1 ? M_PI / m->grid->h[a] : 0;
        if (axis[a] > 0) st = along(m, mean, axis, &local);
    }
    if (!st) st = along(m, mean, corner, &local);
    mt_free(mean);
    if (st == MT_EUNSUPPORTED || st == MT_ENUMERIC) return MT_OK; /* no homogeneous state to ask about */
    if (st && err) *err = local;
    return st;
}
