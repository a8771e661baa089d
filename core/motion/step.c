/* One step: the column sweep that updates the spectra, the row sweep that evaluates the new state.
 *
 * The two-step method is SBDF2 with variable steps (Wang & Ruuth, J. Comput. Math. 26 (2008) 838, eq. for
 * general IMEX BDF2), w = dt / dt_old: [ (1+2w)/(1+w) u+ - (1+w) u + w^2/(1+w) u- ] / dt = Lambda u+ + (1+w)
 * E - w E-,     E = R + (L - Lambda) u, R the explicit part of the right-hand side without its own linear
 * terms. Lambda <= 0 is implicit; L - Lambda is the stabilisation, extrapolated, which costs accuracy of the
 * second order only. Started and restarted by the one-step method (u+ - u) / dt = Lambda u+ + E.
 *
 * Error estimate: u+ minus the explicit second-order predictor u + dt [ (1+w/2) (R + L u) - w/2 (R- + L u-)
 * ], divided by (1 - dt Lambda) so that stiff modes, which the predictor cannot follow, do not count. L in
 * the predictor is taken in the middle of the step, so that a ramp does not look like an error.
 *
 * Arrays per field: u, um (u-, overwritten by u+), r (R-, overwritten by R). A rejected step finds u and R
 * intact. */
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
    double dt, a0, a1, a2; /* a0 u+ + a1 u + a2 u- */
    double b0, b1;         /* weights of E, E- */
    double h0, h1;         /* weights in the predictor */
    double theta;          /* dominance needed for stability: (1+2w)/(2+2w); 1/2 for the one-step method */
} scheme;

static scheme two_step(double dt, double w) {
    return (scheme){dt,     (1 + 2 * w) / (1 + w),    -(1 + w), w * w / (1 + w), 1 + w, -w, 1 + w / 2,
                    -w / 2, (1 + 2 * w) / (2 + 2 * w)};
}

static scheme one_step(double dt) {
    return (scheme){dt, 1, -1, 0, 1, 0, 1, 0, 0.5};
}

static scheme euler_with_history(double dt, double w) {
    return (scheme){dt, 1, -1, 0, 1, 0, 1 + w / 2, -w / 2, 0.5};
}

/* --- the update along one column
 * ---------------------------------------------------------------------------------------- */

typedef struct lines {
    const double *l, *lambda, *middle,
        *cross;                 /* per double of the column; cross: the partner's spectrum times it */
    const double *rn, *uo, *ro; /* R; u- and R- (of the present state where the method uses none: never what a
                                   rejected step left) */
    double *u, *um, *r;
} lines;

typedef struct sums {
    double error, change, norm;
} sums;

/* a1 u + a2 u- and the explicit parts: what stands on the right of a0 u+ - dt Lambda u+. */
static inline __attribute__((always_inline)) double right_side(const scheme *s, const lines *x, size_t i) {
    double l = x->l[i], im = x->lambda[i], un = x->u[i], uo = x->uo[i];
    double explicit_now = x->rn[i] + (l - im) * un, explicit_old = x->ro[i] + (l - im) * uo;
    return -s->a1 * un - s->a2 * uo + s->dt * (s->b0 * explicit_now + s->b1 * explicit_old);
}

static inline __attribute__((always_inline)) void judge_one(const scheme *s, const lines *x, double weight,
                                                            double up, size_t i, double *e2, double *d2,
                                                            double *n2) {
    double un = x->u[i], rn = x->rn[i];
    double slope = s->h0 * rn + s->h1 * x->ro[i] + x->middle[i] * (s->h0 * un + s->h1 * x->uo[i]);
    double e = (up - un - s->dt * slope) / (1 - s->dt * x->lambda[i]), d = up - un;
    x->um[i] = up;
    x->r[i] = rn;
    *e2 += weight * e * e;
    *d2 += weight * d * d;
    *n2 += weight * up * up;
}

static inline __attribute__((always_inline)) void update_one(const scheme *s, const lines *x, const double *w,
                                                             size_t i, double *e2, double *d2, double *n2) {
    double up = right_side(s, x, i) / (s->a0 - s->dt * x->lambda[i]);
    judge_one(s, x, w[i], up, i, e2, d2, n2);
}

/* Sums in LANES interleaved parts, joined in fixed order: vector code, and the same bits whatever its width.
 */
MT_VECTOR_CLONES static sums update_line(const scheme *s, const lines *x, const double *weight, size_t n) {
    double e[LANES] = {0}, d[LANES] = {0}, q[LANES] = {0};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) update_one(s, x, weight, i + j, &e[j], &d[j], &q[j]);
    for (size_t j = 0; i < n; i++, j++) update_one(s, x, weight, i, &e[j], &d[j], &q[j]);
    sums t = {0, 0, 0};
    for (int j = 0; j < LANES; j++) t.error += e[j], t.change += d[j], t.norm += q[j];
    return t;
}

/* Two fields coupled by linear terms: a 2 x 2 block per mode. */
static inline __attribute__((always_inline)) void update_two(const scheme *s, const lines *x, const lines *y,
                                                             const double *w, size_t i, double e[2],
                                                             double d[2], double n[2]) {
    double cx = s->dt * x->cross[i], cy = s->dt * y->cross[i];
    double past_x = s->b0 * x->u[i] + s->b1 * x->uo[i], past_y = s->b0 * y->u[i] + s->b1 * y->uo[i];
    double p = right_side(s, x, i) - cx * past_y, q = right_side(s, y, i) - cy * past_x;
    double ax = s->a0 - s->dt * x->lambda[i], ay = s->a0 - s->dt * y->lambda[i], det = ax * ay - cx * cy;
    double up = (ay * p + cx * q) / det, uq = (ax * q + cy * p) / det;
    judge_one(s, x, w[i], up, i, &e[0], &d[0], &n[0]);
    judge_one(s, y, w[i], uq, i, &e[1], &d[1], &n[1]);
}

MT_VECTOR_CLONES static void pair_line(const scheme *s, const lines *x, const lines *y, const double *weight,
                                       size_t n, sums t[2]) {
    double e[LANES][2] = {{0}}, d[LANES][2] = {{0}}, q[LANES][2] = {{0}};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) update_two(s, x, y, weight, i + j, e[j], d[j], q[j]);
    for (size_t j = 0; i < n; i++, j++) update_two(s, x, y, weight, i, e[j], d[j], q[j]);
    for (int k = 0; k < 2; k++) {
        t[k] = (sums){0, 0, 0};
        for (int j = 0; j < LANES; j++) t[k].error += e[j][k], t[k].change += d[j][k], t[k].norm += q[j][k];
    }
}

/* --- the column body
 * ---------------------------------------------------------------------------------------------------- */

typedef struct column_ctx {
    mt_model *m;
    scheme s;
    bool history;        /* um and r hold the step before */
    bool fresh;          /* right-hand sides come from the sweep; else from r */
    bool moving;         /* params change during the step: L in its middle differs */
    bool update;         /* false: only the quadratic energy and quantities of the present state */
    double *const *next; /* spectra that quantities are formed from */
} column_ctx;

static lines from(lines x, size_t skip) {
    x.l += skip, x.lambda += skip, x.middle += skip, x.cross += skip;
    x.rn += skip, x.uo += skip, x.ro += skip, x.u += skip, x.um += skip, x.r += skip;
    return x;
}

static sums plus(sums a, sums b) {
    return (sums){a.error + b.error, a.change + b.change, a.norm + b.norm};
}

typedef struct kept {
    double u, r;
} kept;

/* Mode 0 of a conserved field is copied, not computed: the mean moves by nothing at all. What was computed
 * for it is taken back. */
static sums hold_mean(const mt_mover *v, const lines *x, kept k, sums mean) {
    if (!v->mean_held) return mean; /* its mean moves, and errs, too */
    x->um[0] = k.u, x->r[0] = k.r;
    return (sums){0, 0, 0};
}

static void update_single(const column_ctx *x, const mt_mover *v, const lines *ln, const mt_lines *c,
                          size_t skip, sums *t) {
    const double *w = c->at[MT_LINE_WEIGHT];
    sums mean = {0, 0, 0};
    if (skip) {
        kept k = {ln->u[0], ln->r[0]};
        mean = hold_mean(v, ln, k, update_line(&x->s, ln, w, skip));
    }
    lines rest = from(*ln, skip);
    *t = plus(mean, update_line(&x->s, &rest, w + skip, c->doubles - skip));
}

static void update_pair(const column_ctx *x, const mt_mover *v, const mt_mover *u, const lines ln[2],
                        const mt_lines *c, size_t skip, sums t[2]) {
    const double *w = c->at[MT_LINE_WEIGHT];
    sums mean[2] = {{0, 0, 0}, {0, 0, 0}};
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

/* The lines of mover i, in the places of the first or the second of a pair. */
static lines lines_of(const column_ctx *x, const mt_column *c, const mt_lines *at, int i, int second) {
    const mt_program *p = &x->m->program;
    const mt_mover *v = &x->m->mover[i];
    int shift = second ? MT_LINE_L2 : MT_LINE_L;
    double *l = at->at[MT_LINE_L + shift], *lambda = at->at[MT_LINE_LAMBDA + shift],
           *middle = at->at[MT_LINE_MIDDLE + shift], *cross = at->at[MT_LINE_CROSS + shift];
    lines ln = {.l = l, .lambda = lambda, .middle = l, .cross = cross};
    ln.u = v->u + c->offset, ln.um = v->um + c->offset, ln.r = v->r + c->offset;
    ln.rn = x->fresh ? at->rhs + (size_t)i * at->line : ln.r;
    ln.uo = x->history ? ln.um : ln.u, ln.ro = x->history ? ln.r : ln.rn;
    mt_column_spread(p, at->factors, v->linear_factor, c, l);
    mt_column_spread(p, at->factors, v->implicit_factor, c, lambda);
    if (v->partner >= 0) mt_column_spread(p, at->factors, v->cross_factor, c, cross);
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
        sums t[2] = {{0, 0, 0}, {0, 0, 0}};
        if (v->motion == MT_MOTION_STILL || (v->partner >= 0 && v->partner < i)) continue;
        lines ln[2] = {lines_of(x, c, at, i, 0)};
        if (v->partner < 0)
            update_single(x, v, &ln[0], at, skip, t);
        else {
            ln[1] = lines_of(x, c, at, v->partner, 1);
            update_pair(x, v, &m->mover[v->partner], ln, at, skip, t);
        }
        for (int k = 0; k < (v->partner < 0 ? 1 : 2); k++) {
            double *to = tally + 3 * (k ? v->partner : i);
            to[0] = t[k].error, to[1] = t[k].change, to[2] = t[k].norm;
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
    double e = m->totals[3 * m->n] * m->grid->volume;
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

double mt_step_error_ratio(const mt_model *m, double accuracy) {
    double worst = 0;
    for (int i = 0; i < m->n; i++) {
        const double *t = m->totals + 3 * i;
        if (m->mover[i].motion == MT_MOTION_STILL) continue;
        double allowed =
            accuracy * (sqrt(t[1]) + REST * sqrt(t[2])) + ROUNDING * fabs(m->mover[i].u[0]) + 1e-300;
        double ratio = sqrt(t[0]) / allowed;
        if (!(ratio <= worst)) worst = isnan(ratio) ? INFINITY : ratio;
    }
    return worst;
}

static scheme choose_scheme(const mt_model *m, double dt) {
    if (m->history != MT_HISTORY_STEP) return one_step(dt);
    double w = dt / m->dt_old;
    return m->options.stepper == MT_STEPPER_EULER ? euler_with_history(dt, w) : two_step(dt, w);
}

/* Lambda has to dominate over the whole step: the extremes of a are those of the present state. */
mt_status mt_step_attempt(mt_model *m, mt_attempt *a, mt_error *err) {
    mt_status st = MT_OK;
    if (m->noisy || m->options.stepper == MT_STEPPER_ETDRK2) return mt_step_exponential(m, a, err);
    column_ctx x = {.m = m,
                    .fresh = m->history != MT_HISTORY_STORED,
                    .update = true,
                    .history = m->history == MT_HISTORY_STEP};
    a->swept = false;
    x.s = choose_scheme(m, a->dt);
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
        m->next[i] = m->mover[i].motion == MT_MOTION_STILL ? m->mover[i].u : m->mover[i].um;
    if (!st) st = mt_step_columns(m, x.fresh, column_body, &x, a->time_next, err);
    if (st) return st;
    for (int i = 0; i < m->n; i++) mt_spectrum_symmetrise(m->program.spectrum, m->next[i]);
    a->ratio = mt_step_error_ratio(m, m->options.accuracy);
    if (m->options.fixed <= 0 && a->ratio > 1) return MT_OK;
    a->swept = true;
    return mt_step_rows(m, a->time_next, a->capture, err);
}

void mt_step_accept(mt_model *m) {
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        if (v->motion == MT_MOTION_STILL) continue;
        double *t = v->u;
        v->u = v->um;
        v->um = t;
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
