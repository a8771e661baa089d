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
#include "core/motion/model_inside.h"

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
    const double *l, *lambda, *middle, *weight; /* per double of the column */
    const double *rn, *uo, *ro; /* R; u- and R- (of the present state where the method uses none: never what a
                                   rejected step left) */
    double *u, *um, *r;
} lines;

typedef struct sums {
    double error, change, norm;
} sums;

static inline __attribute__((always_inline)) void update_one(const scheme *s, const lines *x, size_t i,
                                                             double *e2, double *d2, double *n2) {
    double l = x->l[i], im = x->lambda[i], un = x->u[i], uo = x->uo[i], rn = x->rn[i], ro = x->ro[i];
    double explicit_now = rn + (l - im) * un, explicit_old = ro + (l - im) * uo;
    double num = -s->a1 * un - s->a2 * uo + s->dt * (s->b0 * explicit_now + s->b1 * explicit_old);
    double up = num / (s->a0 - s->dt * im);
    double slope = s->h0 * rn + s->h1 * ro + x->middle[i] * (s->h0 * un + s->h1 * uo);
    double e = (up - un - s->dt * slope) / (1 - s->dt * im), d = up - un, w = x->weight[i];
    x->um[i] = up;
    x->r[i] = rn;
    *e2 += w * e * e;
    *d2 += w * d * d;
    *n2 += w * up * up;
}

/* Sums in LANES interleaved parts, joined in fixed order: vector code, and the same bits whatever its width.
 */
MT_VECTOR_CLONES static sums update_line(const scheme *s, const lines *x, size_t n) {
    double e[LANES] = {0}, d[LANES] = {0}, q[LANES] = {0};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) update_one(s, x, i + j, &e[j], &d[j], &q[j]);
    for (size_t j = 0; i < n; i++, j++) update_one(s, x, i, &e[j], &d[j], &q[j]);
    sums t = {0, 0, 0};
    for (int j = 0; j < LANES; j++) t.error += e[j], t.change += d[j], t.norm += q[j];
    return t;
}

MT_VECTOR_CLONES static double quadratic_line(const double *q, const double *weight, const double *u,
                                              size_t n) {
    double s[LANES] = {0}, t = 0;
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) s[j] += weight[i + j] * q[i + j] * u[i + j] * u[i + j];
    for (size_t j = 0; i < n; i++, j++) s[j] += weight[i] * q[i] * u[i] * u[i];
    for (int j = 0; j < LANES; j++) t += s[j];
    return t;
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

/* One double per double of the column: complex values need each factor twice. */
static void spread(const mt_program *p, const double *line, int factor, const mt_column *c, double *to) {
    size_t n = (size_t)c->length;
    const double *from = factor >= 0 ? line + (size_t)factor * n : NULL;
    double constant = factor == -1 ? 1 : 0;
    if (!p->spectrum->complex) {
        if (from)
            memcpy(to, from, n * sizeof *to);
        else
            for (size_t i = 0; i < n; i++) to[i] = constant;
        return;
    }
    for (size_t i = 0; i < n; i++) to[2 * i] = to[2 * i + 1] = from ? from[i] : constant;
}

typedef struct room {
    double *rn, *l, *lambda, *middle, *weight, *middle_lines, *middle_scratch;
} room;

static room rooms(const mt_model *m, int worker) {
    const mt_spectrum *s = m->program.spectrum;
    size_t line = mt_round_up(2 * (size_t)s->length, 8), n = (size_t)m->n;
    double *at = mt_program_scratch(&m->program, worker);
    room r = {.l = at, .lambda = at + line, .middle = at + 2 * line, .weight = at + 3 * line};
    r.rn = at + 6 * line;
    r.middle_lines = r.rn + n * line;
    r.middle_scratch = r.middle_lines + n * line;
    return r;
}

static void weights(const mt_program *p, const mt_column *c, double *to) {
    const mt_spectrum *s = p->spectrum;
    const double *outer = s->weight[s->outer];
    for (int i = 0; i < c->length; i++) {
        double w = c->weight * outer[i];
        if (s->complex)
            to[2 * i] = to[2 * i + 1] = w;
        else
            to[i] = w;
    }
}

/* Mode 0 of a conserved field is copied, not computed: the mean moves by nothing at all. */
static sums update_mover(const column_ctx *x, const mt_mover *v, lines ln, size_t doubles, bool holds_mean) {
    size_t skip = 0;
    sums mean = {0, 0, 0};
    if (holds_mean) {
        skip = x->m->program.spectrum->complex ? 2 : 1;
        double u0 = ln.u[0], r0 = ln.r[0];
        mean = update_line(&x->s, &ln, skip);
        if (v->motion == MT_MOTION_CONSERVE) {
            ln.um[0] = u0, ln.r[0] = r0;
            mean = (sums){0, 0, 0};
        }
        ln.l += skip, ln.lambda += skip, ln.middle += skip, ln.weight += skip, ln.rn += skip;
        ln.u += skip, ln.um += skip, ln.r += skip, ln.uo += skip, ln.ro += skip;
    }
    sums t = update_line(&x->s, &ln, doubles - skip);
    t.error += mean.error;
    t.change += mean.change;
    t.norm += mean.norm; /* of a field that is not conserved: its mean moves, and errs, too */
    return t;
}

static void update_all(const column_ctx *x, const mt_column *c, double *const in[],
                       const double *factor_lines, const room *r, double *tally) {
    mt_model *m = x->m;
    mt_program *p = &m->program;
    size_t doubles = (size_t)c->length * (p->spectrum->complex ? 2 : 1),
           line = mt_round_up(2 * (size_t)c->length, 8);
    if (x->moving)
        mt_program_factors_at(p, &m->linear_factors, m->linear_factors.kernel, c, r->middle_lines,
                              r->middle_scratch);
    for (int i = 0; i < m->n && x->fresh; i++) { /* all before the first update: they use the old spectra */
        if (m->mover[i].motion == MT_MOTION_STILL) continue;
        memset(r->rn + (size_t)i * line, 0, doubles * sizeof(double));
        mt_program_add(p, p->stages - 1, &m->mover[i].sum, c, in, p->u, factor_lines, i,
                       r->rn + (size_t)i * line);
    }
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        if (v->motion == MT_MOTION_STILL) continue;
        lines ln = {.l = r->l, .lambda = r->lambda, .middle = r->l, .weight = r->weight};
        ln.u = v->u + c->offset, ln.um = v->um + c->offset, ln.r = v->r + c->offset;
        ln.rn = x->fresh ? r->rn + (size_t)i * line : ln.r;
        ln.uo = x->history ? ln.um : ln.u, ln.ro = x->history ? ln.r : ln.rn;
        spread(p, factor_lines, v->linear_factor, c, r->l);
        spread(p, factor_lines, v->implicit_factor, c, r->lambda);
        if (x->moving) {
            spread(p, r->middle_lines, i, c, r->middle);
            ln.middle = r->middle;
        }
        sums t = update_mover(x, v, ln, doubles, c->index == 0);
        tally[3 * i] = t.error, tally[3 * i + 1] = t.change, tally[3 * i + 2] = t.norm;
    }
}

static mt_status column_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    const column_ctx *x = ctx;
    mt_model *m = x->m;
    mt_program *p = &m->program;
    room r = rooms(m, worker);
    double *tally = m->column_tally + c->index * (3 * (size_t)m->n + 1), energy = 0;
    size_t doubles = (size_t)c->length * (p->spectrum->complex ? 2 : 1);
    (void)err;
    double *factor_lines = mt_program_factor_lines(p, p->stages - 1, c, worker);
    weights(p, c, r.weight);
    if (x->update) update_all(x, c, in, factor_lines, &r, tally);
    for (int i = 0; i < m->quadratics; i++) {
        const mt_quadratic *q = &m->quadratic[i];
        spread(p, factor_lines, q->factor, c, r.l);
        energy += quadratic_line(r.l, r.weight, x->next[q->mover] + c->offset, doubles);
    }
    tally[3 * m->n] = energy;
    mt_program_quantities(p, 0, -1, c, in, x->next, factor_lines, out);
    return MT_OK;
}

static void merge_columns(mt_model *m) {
    size_t width = 3 * (size_t)m->n + 1;
    memset(m->totals, 0, width * sizeof(double));
    for (size_t c = 0; c < m->program.spectrum->columns; c++)
        for (size_t i = 0; i < width; i++) m->totals[i] += m->column_tally[c * width + i];
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

static void set_dominance(mt_model *m, double theta) {
    for (int i = 0; i < m->n; i++)
        for (int j = 0; j < m->mover[i].dominates; j++) {
            mt_dominate *d = &m->mover[i].dominate[j];
            d->scale->value = theta * fmax(0, m->program.total[d->reduction].value);
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

static mt_status sweep_columns(mt_model *m, column_ctx *x, double time, mt_error *err) {
    mt_program *p = &m->program;
    mt_stage *from = &p->stage[p->stages - 1], *to = &p->stage[0];
    mt_status st = mt_kernel_prepare(p->factors[p->stages - 1].kernel, time, err);
    if (!st)
        st = mt_sweep_columns(m->sweeper, x->fresh ? from->nout : 0, p->work, from->out_parity, to->nin,
                              p->work, to->in_parity, column_body, x, err);
    if (!st) merge_columns(m);
    return st;
}

static mt_status sweep_rows(mt_model *m, double time, bool capture, mt_error *err) {
    mt_program *p = &m->program;
    for (int i = 0; i < m->n; i++) p->capture[i] = capture ? m->mover[i].field->values : NULL;
    mt_status st = mt_program_rows(p, 0, time, err);
    if (!st) m->energy_now = mt_step_energy(m);
    return st;
}

/* Stages after the first, from the stage-0 outputs of the present state. */
static mt_status later_stages(mt_model *m, mt_error *err) {
    mt_program *p = &m->program;
    mt_status st = MT_OK;
    for (int s = 0; s + 1 < p->stages && !st; s++) {
        st = mt_program_columns(p, s, m->state.time, err);
        if (!st) st = mt_program_rows(p, s + 1, m->state.time, err);
    }
    return st;
}

static double error_ratio(const mt_model *m, double accuracy) {
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
    column_ctx x = {.m = m,
                    .fresh = m->history != MT_HISTORY_STORED,
                    .update = true,
                    .history = m->history == MT_HISTORY_STEP};
    a->swept = false;
    x.s = choose_scheme(m, a->dt);
    set_dominance(m, x.s.theta);
    mt_step_params(m, a->time, false);
    if (x.fresh) {
        st = later_stages(m, err);
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
    if (!st) st = sweep_columns(m, &x, a->time_next, err);
    if (st) return st;
    for (int i = 0; i < m->n; i++) mt_spectrum_symmetrise(m->program.spectrum, m->next[i]);
    a->ratio = error_ratio(m, m->options.accuracy);
    if (m->options.fixed <= 0 && a->ratio > 1) return MT_OK;
    a->swept = true;
    return sweep_rows(m, a->time_next, a->capture, err);
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
    mt_status st = sweep_columns(m, &x, m->state.time, err);
    return st ? st : sweep_rows(m, m->state.time, capture, err);
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
    set_dominance(m, 1);
    mt_step_params(m, time, false);
    if (mt_kernel_prepare(p->factors[p->stages - 1].kernel, time, NULL)) return 0;
    if (mt_sweep_columns(m->sweeper, 0, NULL, NULL, 0, NULL, NULL, fastest_body, &x, NULL)) return 0;
    for (size_t c = 0; c < p->spectrum->columns; c++) most = fmax(most, x.most[c]);
    return most;
}
