/* One step: the column sweep that updates the spectra, the row sweep that evaluates the new state.
 *
 * Semi-implicit backward differentiation of order 1 to 3 with variable steps (SBDF: Ascher, Ruuth & Wetton,
 * SIAM J. Numer. Anal. 32 (1995) 797; variable steps: Wang & Ruuth, J. Comput. Math. 26 (2008) 838):
 *   [ a0 u+ + a1 u + a2 u- + a3 u-- ] / dt = Lambda u+ + b0 E + b1 E- + b2 E--,     E = R + (L - Lambda) u,
 * a the derivative at the new time of the polynomial through the u's, b the extrapolation to it, R the
 * explicit part of the right-hand side without its own linear terms. Lambda <= 0 is implicit; L - Lambda is
 * the stabilisation, extrapolated, so it costs accuracy of the method's order only. For waves that are stiff
 * beyond all bounds the root that leaves the unit circle first is -1: a rate lambda is stable for
 * Lambda >= S/(1 + S) lambda, S = b0 - b1 + b2: 1/2, (1+2w)/(2+2w), 7/8 at equal steps. Started with the
 * one-step method; each accepted step adds one to the order.
 *
 * Error estimate: u+ minus the explicit Adams-Bashforth predictor of the same order, divided by (1 - dt
 * Lambda)^1.5: stiff waves, which the predictor cannot follow, are slaved to the others, and what they lag
 * behind does not add up from step to step. Of a field that is not conserved, stabilisation is the larger
 * part of Lambda for all waves, also for those that move an interface: there it counts as a square root only
 * (without this a shrinking circle was 10 % off at an accuracy of 1 %). L in the predictor is taken in the
 * middle of the step, so that a ramp does not look like an error. A step passes with up to MT_TOLERATED times
 * the error that is aimed at: rejections cost history, and one large error among small ones does not matter.
 *
 * Arrays per field: u, and u-, u-- and R-, R-- as far back as the method goes; the oldest are written over.
 */
#include "core/motion/column.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/base/vector.h"

#define LANES 8

/* A step that changes less than this fraction of the field may err by the accuracy times this fraction: at
 * rest, or where a ramp sets in, the change is of the order of its own error. */
#define REST 1e-4

/* Nor is anything seen below this fraction of the mean: a homogenised alloy has no fluctuations but rounding.
 */
#define ROUNDING 1e-14

typedef struct scheme {
    double dt, a[4]; /* a[0] u+ + a[1] u + a[2] u- + a[3] u-- */
    double b[3];     /* weights of E, E-, E-- */
    double h[3];     /* weights in the predictor */
    double g[3];     /* and in that of one order less */
    double theta;    /* dominance needed for stability */
    int order;
} scheme;

/* Nodes in units of dt, the new time at 0: -1, -1 - 1/w ...; l_j the Lagrange polynomials through them. */
static double product(const double *x, int first, int n, int skip, double at) {
    double p = 1;
    for (int m = first; m <= n; m++)
        if (m != skip) p *= at - x[m];
    return p;
}

/* Integral over [-1, 0] of a polynomial of degree <= 3, by Simpson's rule, which is exact for it. */
static double predictor_weight(const double *x, int n, int j) {
    double at[3] = {-1, -0.5, 0}, f[3];
    for (int i = 0; i < 3; i++) f[i] = product(x, 1, n, j, at[i]) / product(x, 1, n, j, x[j]);
    return (f[0] + 4 * f[1] + f[2]) / 6;
}

/* implicit: levels of the differentiation formula; predicted: of the predictor (more for Euler's method). */
static scheme make_scheme(const mt_model *m, double dt, int implicit, int predicted) {
    double x[4] = {0, -1, -1 - m->past_dt[0] / dt, -1 - (m->past_dt[0] + m->past_dt[1]) / dt}, spread = 0;
    scheme s = {.dt = dt, .order = predicted};
    for (int j = 1; j <= implicit; j++) {
        s.a[0] -= 1 / x[j];
        s.a[j] = product(x, 1, implicit, j, 0) / (x[j] * product(x, 1, implicit, j, x[j]));
        s.b[j - 1] = product(x, 1, implicit, j, 0) / product(x, 1, implicit, j, x[j]);
        spread += fabs(s.b[j - 1]);
    }
    for (int j = 1; j <= predicted; j++) s.h[j - 1] = predictor_weight(x, predicted, j);
    for (int j = 1; j < predicted; j++) s.g[j - 1] = predictor_weight(x, predicted - 1, j);
    s.theta = spread / (1 + spread);
    return s;
}

/* --- the update along one column
 * ---------------------------------------------------------------------------------------- */

typedef struct lines {
    const double *l, *lambda, *middle, *inverse, *filter,
        *cross; /* per double of the column; cross: the partner's spectrum times it */
    const double *rn, *u1, *r1, *u2, *r2; /* R; u-, R-, u--, R-- (of the present state where the method uses
                                             none: never what a rejected step left) */
    double *u, *to, *r;                   /* u; u+ and R are written there */
} lines;

typedef struct sums {
    double error, lower, change, norm; /* lower: the error that a method of one order less would make */
} sums;

/* The past and the explicit parts: what stands on the right of a0 u+ - dt Lambda u+. */
static inline __attribute__((always_inline)) double right_side(const scheme *s, const lines *x, size_t i) {
    double d = x->l[i] - x->lambda[i], un = x->u[i], u1 = x->u1[i], u2 = x->u2[i];
    double past = s->a[1] * un + s->a[2] * u1 + s->a[3] * u2;
    double known =
        s->b[0] * (x->rn[i] + d * un) + s->b[1] * (x->r1[i] + d * u1) + s->b[2] * (x->r2[i] + d * u2);
    return s->dt * known - past;
}

static inline __attribute__((always_inline)) void judge_one(const scheme *s, const lines *x, double weight,
                                                            double up, size_t i, double *e2, double *l2,
                                                            double *d2, double *n2) {
    double un = x->u[i], rn = x->rn[i], q = x->filter[i];
    double slope = s->h[0] * rn + s->h[1] * x->r1[i] + s->h[2] * x->r2[i] +
                   x->middle[i] * (s->h[0] * un + s->h[1] * x->u1[i] + s->h[2] * x->u2[i]);
    double miss = up - un - s->dt * slope, e = miss * q, d = up - un;
    double lower = s->g[0] * (rn + x->middle[i] * un) + s->g[1] * (x->r1[i] + x->middle[i] * x->u1[i]);
    double f = (miss + s->dt * (slope - lower)) * q;
    x->to[i] = up;
    x->r[i] = rn;
    *e2 += weight * e * e;
    *l2 += weight * f * f;
    *d2 += weight * d * d;
    *n2 += weight * up * up;
}

static inline __attribute__((always_inline)) void update_one(const scheme *s, const lines *x, const double *w,
                                                             size_t i, double *e2, double *l2, double *d2,
                                                             double *n2) {
    double up = right_side(s, x, i) * x->inverse[i];
    judge_one(s, x, w[i], up, i, e2, l2, d2, n2);
}

/* Sums in LANES interleaved parts, joined in fixed order: vector code, and the same bits whatever its width.
 */
MT_VECTOR_CLONES static sums update_line(const scheme *s, const lines *x, const double *weight, size_t n) {
    double e[LANES] = {0}, l[LANES] = {0}, d[LANES] = {0}, q[LANES] = {0};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) update_one(s, x, weight, i + j, &e[j], &l[j], &d[j], &q[j]);
    for (size_t j = 0; i < n; i++, j++) update_one(s, x, weight, i, &e[j], &l[j], &d[j], &q[j]);
    sums t = {0, 0, 0, 0};
    for (int j = 0; j < LANES; j++) t.error += e[j], t.lower += l[j], t.change += d[j], t.norm += q[j];
    return t;
}

/* A fixed step needs no estimate. */
MT_VECTOR_CLONES static void plain_line(const scheme *s, const lines *x, size_t n) {
    for (size_t i = 0; i < n; i++) {
        double up = right_side(s, x, i) * x->inverse[i], rn = x->rn[i];
        x->to[i] = up;
        x->r[i] = rn;
    }
}

/* Two fields coupled by linear terms: a 2 x 2 block per mode. */
static inline __attribute__((always_inline)) void update_two(const scheme *s, const lines *x, const lines *y,
                                                             const double *w, size_t i, double e[2],
                                                             double l[2], double d[2], double n[2]) {
    double cx = s->dt * x->cross[i], cy = s->dt * y->cross[i];
    double past_x = s->b[0] * x->u[i] + s->b[1] * x->u1[i] + s->b[2] * x->u2[i],
           past_y = s->b[0] * y->u[i] + s->b[1] * y->u1[i] + s->b[2] * y->u2[i];
    double p = right_side(s, x, i) - cx * past_y, q = right_side(s, y, i) - cy * past_x;
    double ax = s->a[0] - s->dt * x->lambda[i], ay = s->a[0] - s->dt * y->lambda[i], det = ax * ay - cx * cy;
    double up = (ay * p + cx * q) / det, uq = (ax * q + cy * p) / det;
    judge_one(s, x, w[i], up, i, &e[0], &l[0], &d[0], &n[0]);
    judge_one(s, y, w[i], uq, i, &e[1], &l[1], &d[1], &n[1]);
}

MT_VECTOR_CLONES static void pair_line(const scheme *s, const lines *x, const lines *y, const double *weight,
                                       size_t n, sums t[2]) {
    double e[LANES][2] = {{0}}, l[LANES][2] = {{0}}, d[LANES][2] = {{0}}, q[LANES][2] = {{0}};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) update_two(s, x, y, weight, i + j, e[j], l[j], d[j], q[j]);
    for (size_t j = 0; i < n; i++, j++) update_two(s, x, y, weight, i, e[j], l[j], d[j], q[j]);
    for (int k = 0; k < 2; k++) {
        t[k] = (sums){0, 0, 0, 0};
        for (int j = 0; j < LANES; j++) t[k].error += e[j][k], t[k].change += d[j][k], t[k].norm += q[j][k];
    }
}

/* --- the column body
 * ---------------------------------------------------------------------------------------------------- */

typedef struct column_ctx {
    mt_model *m;
    scheme s;
    int levels;          /* of the past that the scheme uses */
    bool fresh;          /* right-hand sides come from the sweep; else they are stored */
    bool moving;         /* params change during the step: L in its middle differs */
    bool update;         /* false: only the quadratic energy and quantities of the present state */
    double *const *next; /* spectra that quantities are formed from */
} column_ctx;

static lines from(lines x, size_t skip) {
    x.l += skip, x.lambda += skip, x.middle += skip, x.cross += skip;
    x.inverse += skip, x.filter += skip;
    x.rn += skip, x.u1 += skip, x.r1 += skip, x.u2 += skip, x.r2 += skip;
    x.u += skip, x.to += skip, x.r += skip;
    return x;
}

static sums plus(sums a, sums b) {
    return (sums){a.error + b.error, a.lower + b.lower, a.change + b.change, a.norm + b.norm};
}

typedef struct kept {
    double u, r;
} kept;

/* Mode 0 of a conserved field is copied, not computed: the mean moves by nothing at all. What was computed
 * for it is taken back. */
static sums hold_mean(const mt_mover *v, const lines *x, kept k, sums mean) {
    if (!v->mean_held) return mean; /* its mean moves, and errs, too */
    x->to[0] = k.u, x->r[0] = k.r;
    return (sums){0, 0, 0, 0};
}

static void update_single(const column_ctx *x, const mt_mover *v, const lines *ln, const mt_lines *c,
                          size_t skip, sums *t) {
    const double *w = c->at[MT_LINE_WEIGHT];
    sums mean = {0, 0, 0, 0};
    if (skip) {
        kept k = {ln->u[0], ln->r[0]};
        mean = hold_mean(v, ln, k, update_line(&x->s, ln, w, skip));
    }
    lines rest = from(*ln, skip);
    if (x->m->options.fixed > 0) {
        plain_line(&x->s, &rest, c->doubles - skip);
        return;
    }
    *t = plus(mean, update_line(&x->s, &rest, w + skip, c->doubles - skip));
}

static void update_pair(const column_ctx *x, const mt_mover *v, const mt_mover *u, const lines ln[2],
                        const mt_lines *c, size_t skip, sums t[2]) {
    const double *w = c->at[MT_LINE_WEIGHT];
    sums mean[2] = {{0, 0, 0, 0}, {0, 0, 0, 0}};
    if (skip) {
        kept k[2] = {{ln[0].u[0], ln[0].r[0]}, {ln[1].u[0], ln[1].r[0]}};
        pair_line(&x->s, &ln[0], &ln[1], w, skip, mean);
        mean[0] = hold_mean(v, &ln[0], k[0], mean[0]);
        mean[1] = hold_mean(u, &ln[1], k[1], mean[1]);
    }
    lines a = from(ln[0], skip), b = from(ln[1], skip);
    pair_line(&x->s, &a, &b, w + skip, c->doubles - skip, t);
    for (int i = 0; i < 2; i++) t[i] = plus(mean[i], t[i]);
}

MT_VECTOR_CLONES static void ratio_line(const scheme *s, size_t n, const double *lambda, const double *extra,
                                        double *inverse, double *filter) {
    for (size_t i = 0; i < n; i++) {
        double im = lambda[i], damping = extra ? fmin(0, im + extra[i]) : im;
        inverse[i] = 1 / (s->a[0] - s->dt * im);
        filter[i] = 1 / ((1 - s->dt * damping) * sqrt(1 - s->dt * im));
    }
}

static void double_up(const mt_program *p, size_t n, const double *from, double *to) {
    if (!p->spectrum->complex)
        memcpy(to, from, n * sizeof *to);
    else
        for (size_t i = 0; i < n; i++) to[2 * i] = to[2 * i + 1] = from[i];
}

/* What is divided by, once for each mode: complex values come in twos. Stabilisation counts as damping for
 * conserved fields only (see the top). */
static void ratios(const column_ctx *x, const mt_column *c, const mt_lines *at, const mt_mover *v,
                   double *inverse, double *filter) {
    const mt_program *p = &x->m->program;
    size_t n = (size_t)c->length;
    bool apart = v->stabilising_factor >= 0 && v->motion != MT_MOTION_CONSERVE;
    const double *extra = apart ? at->factors + (size_t)v->stabilising_factor * n : NULL;
    double *a = at->at[MT_LINE_SPARE], *b = a + n;
    if (v->implicit_factor < 0) { /* nothing implicit */
        for (size_t i = 0; i < at->doubles; i++) inverse[i] = 1 / x->s.a[0], filter[i] = 1;
        return;
    }
    ratio_line(&x->s, n, at->factors + (size_t)v->implicit_factor * n, extra, a, b);
    double_up(p, n, a, inverse), double_up(p, n, b, filter);
}

/* The lines of mover i, in the places of the first or the second of a pair. */
static lines lines_of(const column_ctx *x, const mt_column *c, const mt_lines *at, int i, int second) {
    const mt_program *p = &x->m->program;
    const mt_mover *v = &x->m->mover[i];
    int shift = second ? MT_LINE_L2 : MT_LINE_L;
    double *l = at->at[MT_LINE_L + shift], *lambda = at->at[MT_LINE_LAMBDA + shift],
           *middle = at->at[MT_LINE_MIDDLE + shift], *cross = at->at[MT_LINE_CROSS + shift],
           *inverse = at->at[MT_LINE_INVERSE + shift], *filter = at->at[MT_LINE_FILTER + shift];
    lines ln = {.l = l, .lambda = lambda, .middle = l, .inverse = inverse, .filter = filter, .cross = cross};
    ln.u = v->u + c->offset, ln.to = mt_next_u(x->m, v) + c->offset, ln.r = mt_next_r(x->m, v) + c->offset;
    ln.rn = x->fresh ? at->rhs + (size_t)i * at->line : ln.r;
    ln.u1 = x->levels > 0 ? v->past_u[0] + c->offset : ln.u;
    ln.r1 = x->levels > 0 ? v->past_r[0] + c->offset : ln.rn;
    ln.u2 = x->levels > 1 ? v->past_u[1] + c->offset : ln.u;
    ln.r2 = x->levels > 1 ? v->past_r[1] + c->offset : ln.rn;
    mt_column_spread(p, at->factors, v->linear_factor, c, l);
    mt_column_spread(p, at->factors, v->implicit_factor, c, lambda);
    if (v->partner >= 0) mt_column_spread(p, at->factors, v->cross_factor, c, cross);
    ratios(x, c, at, v, inverse, filter);
    if (x->moving) {
        mt_column_spread(p, at->middle, i, c, middle);
        ln.middle = middle;
    }
    return ln;
}

static void update_all(const column_ctx *x, const mt_column *c, double *const in[], const mt_lines *at,
                       double *tally) {
    mt_model *m = x->m;
    mt_program *p = &m->program;
    size_t skip = c->index == 0 ? (p->spectrum->complex ? 2 : 1) : 0;
    if (x->moving)
        mt_program_factors_at(p, &m->linear_factors, m->linear_factors.kernel, c, at->middle,
                              at->middle_scratch);
    if (x->fresh) mt_column_rhs(m, c, in, at);
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        sums t[2] = {{0, 0, 0, 0}, {0, 0, 0, 0}};
        if (v->motion == MT_MOTION_STILL || (v->partner >= 0 && v->partner < i)) continue;
        lines ln[2] = {lines_of(x, c, at, i, 0)};
        if (v->partner < 0)
            update_single(x, v, &ln[0], at, skip, t);
        else {
            ln[1] = lines_of(x, c, at, v->partner, 1);
            update_pair(x, v, &m->mover[v->partner], ln, at, skip, t);
        }
        for (int k = 0; k < (v->partner < 0 ? 1 : 2); k++) {
            double *to = tally + MT_TALLY * (k ? v->partner : i);
            to[0] = t[k].error, to[1] = t[k].change, to[2] = t[k].norm, to[3] = t[k].lower;
        }
    }
}

static mt_status column_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    const column_ctx *x = ctx;
    double *tally = mt_column_tally(x->m, c);
    mt_lines at = mt_column_lines(x->m, c, worker);
    (void)err;
    if (x->update) update_all(x, c, in, &at, tally);
    mt_column_finish(x->m, c, in, x->next, &at, tally, out);
    return MT_OK;
}

/* --- params
 * -------------------------------------------------------------------------------------------------------------
 */

void mt_step_params(mt_model *m, double time, bool before_jump) {
    for (int i = 0; i < m->params; i++)
        if (m->param[i]->knots) m->param[i]->value = mt_symbol_at(m->param[i], time, before_jump);
}

static bool params_move(const mt_model *m, double from, double to) {
    for (int i = 0; i < m->params; i++)
        if (m->param[i]->knots &&
            mt_symbol_at(m->param[i], from, false) != mt_symbol_at(m->param[i], to, true))
            return true;
    return false;
}

void mt_step_dominate(mt_model *m, double theta) {
    for (int i = 0; i < m->n; i++)
        for (int j = 0; j < m->mover[i].dominates; j++) {
            mt_dominate *d = &m->mover[i].dominate[j];
            d->scale->value = theta * m->mover[i].theta * fmax(0, m->program.total[d->reduction].value);
        }
}

/* --- attempt
 * ------------------------------------------------------------------------------------------------------------
 */

double mt_step_energy(const mt_model *m) {
    double e = m->totals[MT_TALLY * m->n] * m->grid->volume;
    if (!m->energy_known) return NAN;
    if (m->energy_reduction >= 0) e += m->program.total[m->energy_reduction].value * m->grid->cell_volume;
    return e;
}

mt_status mt_step_columns(mt_model *m, bool fresh, mt_column_body body, void *ctx, double time,
                          mt_error *err) {
    mt_program *p = &m->program;
    mt_stage *from = &p->stage[p->stages - 1], *to = &p->stage[0];
    mt_status st = mt_kernel_prepare(p->factors[p->stages - 1].kernel, time, err);
    if (!st)
        st = mt_sweep_columns(m->sweeper, fresh ? from->nout : 0, p->work, from->out_parity, to->nin, p->work,
                              to->in_parity, body, ctx, err);
    if (!st) mt_column_merge(m);
    return st;
}

mt_status mt_step_rows(mt_model *m, double time, bool capture, mt_error *err) {
    mt_program *p = &m->program;
    for (int i = 0; i < m->n; i++) p->capture[i] = capture ? m->mover[i].field->values : NULL;
    mt_status st = mt_program_rows(p, 0, time, err);
    for (int i = 0; i < m->n; i++) p->capture[i] = NULL;
    if (!st) m->energy_now = mt_step_energy(m);
    return st;
}

mt_status mt_step_later_stages(mt_model *m, double time, mt_error *err) {
    mt_program *p = &m->program;
    mt_status st = MT_OK;
    for (int s = 0; s + 1 < p->stages && !st; s++) {
        st = mt_program_columns(p, s, time, err);
        if (!st) st = mt_program_rows(p, s + 1, time, err);
    }
    return st;
}

/* part: 0, of the method; 3, of that of one order less */
double mt_step_error_ratio(const mt_model *m, double accuracy, int part) {
    double worst = 0;
    for (int i = 0; i < m->n; i++) {
        const double *t = m->totals + MT_TALLY * i;
        if (m->mover[i].motion == MT_MOTION_STILL) continue;
        double allowed =
            accuracy * (sqrt(t[1]) + REST * sqrt(t[2])) + ROUNDING * fabs(m->mover[i].u[0]) + 1e-300;
        double ratio = sqrt(t[part]) / allowed;
        if (!(ratio <= worst)) worst = isnan(ratio) ? INFINITY : ratio;
    }
    return worst;
}

static int used_levels(const mt_model *m) {
    return m->levels < m->most_levels ? m->levels : m->most_levels;
}

static scheme choose_scheme(const mt_model *m, double dt) {
    bool euler = m->options.stepper == MT_STEPPER_EULER;
    int levels = used_levels(m);
    return make_scheme(m, dt, euler ? 1 : levels + 1, levels + 1);
}

/* Lambda has to dominate over the whole step: the extremes of a are those of the present state. */
mt_status mt_step_attempt(mt_model *m, mt_attempt *a, mt_error *err) {
    mt_status st = MT_OK;
    if (m->noisy || m->options.stepper == MT_STEPPER_ETDRK2) return mt_step_exponential(m, a, err);
    column_ctx x = {.m = m, .fresh = !m->stored, .update = true, .levels = used_levels(m)};
    a->swept = false;
    x.s = choose_scheme(m, a->dt);
    a->order = x.s.order;
    mt_step_dominate(m, x.s.theta);
    mt_step_params(m, a->time, false);
    if (x.fresh) {
        st = mt_step_later_stages(m, m->state.time, err);
        m->state.evaluations++;
    }
    x.moving = params_move(m, a->time, a->time_next);
    if (!st && x.moving) {
        mt_step_params(m, 0.5 * (a->time + a->time_next), false);
        st = mt_kernel_prepare(m->linear_factors.kernel, 0.5 * (a->time + a->time_next), err);
    }
    mt_step_params(m, a->time_next, a->lands_before_jump);
    x.next = m->next;
    for (int i = 0; i < m->n; i++)
        m->next[i] = m->mover[i].motion == MT_MOTION_STILL ? m->mover[i].u : mt_next_u(m, &m->mover[i]);
    if (!st) st = mt_step_columns(m, x.fresh, column_body, &x, a->time_next, err);
    if (st) return st;
    for (int i = 0; i < m->n; i++) mt_spectrum_symmetrise(m->program.spectrum, m->next[i]);
    a->ratio = mt_step_error_ratio(m, m->options.accuracy, 0);
    a->lower = mt_step_error_ratio(m, m->options.accuracy, 3);
    if (m->options.fixed <= 0 && a->ratio > MT_TOLERATED) return MT_OK;
    a->swept = true;
    return mt_step_rows(m, a->time_next, a->capture, err);
}

void mt_step_accept(mt_model *m) {
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        if (v->motion == MT_MOTION_STILL) continue;
        double *u = mt_next_u(m, v), *r = mt_next_r(m, v);
        for (int j = m->depth - 1; j > 0; j--)
            v->past_u[j] = v->past_u[j - 1], v->past_r[j] = v->past_r[j - 1];
        v->past_u[0] = v->u, v->past_r[0] = r;
        v->u = u;
        m->program.u[i] = v->u;
    }
}

mt_status mt_step_refresh(mt_model *m, bool capture, mt_error *err) {
    column_ctx x = {.m = m, .next = m->program.u};
    mt_step_params(m, m->state.time, false);
    m->program.step = (uint32_t)(m->state.steps + 1);
    mt_status st = mt_step_columns(m, false, column_body, &x, m->state.time, err);
    return st ? st : mt_step_rows(m, m->state.time, capture, err);
}

/* --- how long a step of third order may be
 * ---------------------------------------------------------------------------- */

static mt_status stabilised_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                                 int worker, mt_error *err) {
    mt_model *m = ctx;
    mt_program *p = &m->program;
    double *factors = mt_program_factor_lines(p, p->stages - 1, c, worker), most = 0;
    size_t n = (size_t)c->length;
    (void)in, (void)out, (void)err;
    for (int i = 0; i < m->n; i++) {
        const mt_mover *v = &m->mover[i];
        if (v->stabilising_factor < 0 || v->implicit_factor < 0) continue;
        for (size_t k = 0; k < n; k++) {
            double extra = factors[(size_t)v->stabilising_factor * n + k],
                   all = -factors[(size_t)v->implicit_factor * n + k];
            if (extra > 0.85 * all) most = fmax(most, extra);
        }
    }
    m->column_tally[c->index] = most;
    return MT_OK;
}

/* The third-order formula grows slowly in waves whose damping is nearly all stabilisation, from dt Lambda of
 * about 10 on (largest root 1.06 at a rate of a tenth of that, 1.015 at 0.3 %); the second-order formula
 * never does. */
double mt_step_third_order_limit(mt_model *m, double time) {
    mt_program *p = &m->program;
    double most = 0;
    mt_step_dominate(m, 0.875);
    mt_step_params(m, time, false);
    if (mt_kernel_prepare(p->factors[p->stages - 1].kernel, time, NULL)) return INFINITY;
    if (mt_sweep_columns(m->sweeper, 0, NULL, NULL, 0, NULL, NULL, stabilised_body, m, NULL)) return INFINITY;
    for (size_t c = 0; c < p->spectrum->columns; c++) most = fmax(most, m->column_tally[c]);
    return most > 0 ? 8 / most : INFINITY;
}

/* --- how fast the fastest mode is
 * --------------------------------------------------------------------------------------- */

typedef struct fastest_ctx {
    mt_model *m;
    double *most; /* per column */
} fastest_ctx;

static mt_status fastest_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                              int worker, mt_error *err) {
    fastest_ctx *x = ctx;
    mt_program *p = &x->m->program;
    double *factors = mt_program_factor_lines(p, p->stages - 1, c, worker), most = 0;
    (void)in, (void)out, (void)err;
    for (int i = 0; i < x->m->n; i++) {
        int both[2] = {x->m->mover[i].linear_factor, x->m->mover[i].implicit_factor};
        for (int j = 0; j < 2; j++)
            for (int k = 0; k < c->length && both[j] >= 0; k++)
                most = fmax(most, fabs(factors[(size_t)both[j] * (size_t)c->length + (size_t)k]));
    }
    x->most[c->index] = most;
    return MT_OK;
}

double mt_step_fastest(mt_model *m, double time) {
    mt_program *p = &m->program;
    fastest_ctx x = {m, m->column_tally};
    double most = 0;
    mt_step_dominate(m, 1);
    mt_step_params(m, time, false);
    if (mt_kernel_prepare(p->factors[p->stages - 1].kernel, time, NULL)) return 0;
    if (mt_sweep_columns(m->sweeper, 0, NULL, NULL, 0, NULL, NULL, fastest_body, &x, NULL)) return 0;
    for (size_t c = 0; c < p->spectrum->columns; c++) most = fmax(most, x.most[c]);
    return most;
}
