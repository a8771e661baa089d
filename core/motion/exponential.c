/* Second-order exponential Runge-Kutta, ETDRK2 (Cox & Matthews, J. Comput. Phys. 176 (2002) 430, eq. 22),
 * written with F the whole right-hand side and Lambda <= 0 the implicit part, z = dt Lambda:
 *   a  = u + dt phi1(z) F(u) + W,      u+ = a + dt phi2(z) [ F(a) - F(u) - Lambda (a - u) ],
 *   phi1 = (e^z - 1)/z,  phi2 = (e^z - 1 - z)/z^2.
 * Any Lambda serves (what it leaves is handled explicitly), also another one in either line: the order stays.
 *
 * W is thermal noise, the increment of the Ornstein-Uhlenbeck process of Lambda: variance (e^2z - 1)/(2z) dt
 * times that of the noise. With it in both stages the scheme has weak order 2 for additive noise (expand both
 * lines to dt^2), so equal distributions S(k) = kT/(f'' + kappa k^2) hold to order dt^2 also in the part that
 * Lambda does not contain.
 *
 * The error estimate is the second line's correction. Relative to the change over the step it is about q =
 * dt/2 times the rate of the explicit part, and the error that remains about 2 q^2/3: a step passes where q
 * is below 0.7 sqrt(accuracy). With noise, steps are chosen by it from the past alone.
 *
 * Arrays as in step.c: the oldest spectrum takes a and then u+, the oldest explicit part F(u). */
#include "core/motion/column.h"

#include <math.h>

#include "core/base/vector.h"

#define LANES 8
#define SERIES 0.5 /* below this |z|, phi2 by its series: the difference loses digits there */

typedef struct exponential_ctx {
    mt_model *m;
    double dt;
    bool second, fresh;
} exponential_ctx;

static double phi1(double z) {
    return z == 0 ? 1 : expm1(z) / z;
}

static double phi2(double z) {
    double term = 0.5, sum = 0.5;
    if (fabs(z) > SERIES) return (phi1(z) - 1) / z;
    for (int n = 3; n < 16; n++) term *= z / n, sum += term;
    return sum;
}

/* z = dt Lambda -> dt phi1 and the noise's factor sqrt(dt (e^2z - 1)/(2z)), or dt phi2. Complex values come
 * in twos of one wavenumber. */
static void weights_of(const exponential_ctx *x, const double *lambda, size_t n, double *phi, double *noise) {
    size_t twice = x->m->program.spectrum->complex ? 2 : 1;
    for (size_t i = 0; i < n; i += twice) {
        double z = x->dt * lambda[i], f = x->dt * (x->second ? phi2(z) : phi1(z));
        double w = x->second ? 0 : sqrt(x->dt * phi1(2 * z));
        for (size_t j = 0; j < twice; j++) phi[i + j] = f, noise[i + j] = w;
    }
}

typedef struct stage_lines {
    const double *l, *lambda, *phi, *root, *weight;
    const double *f, *noise; /* right-hand side without its own linear part; thermal noise, or NULL */
    double *u, *um, *r;
} stage_lines;

typedef struct sums {
    double error, change, norm;
} sums;

MT_VECTOR_CLONES static void first_stage(const stage_lines *x, size_t n) {
    for (size_t i = 0; i < n; i++) {
        double f = x->f[i] + x->l[i] * x->u[i];
        x->r[i] = f;
        x->um[i] = x->u[i] + x->phi[i] * f;
    }
    for (size_t i = 0; i < n && x->noise; i++) x->um[i] += x->root[i] * x->noise[i];
}

/* From a rejected step: F(u) is in r already. */
static void first_again(const stage_lines *x, size_t n) {
    for (size_t i = 0; i < n; i++) x->um[i] = x->u[i] + x->phi[i] * x->r[i];
}

MT_VECTOR_CLONES static sums second_stage(const stage_lines *x, size_t n) {
    double e[LANES] = {0}, d[LANES] = {0}, q[LANES] = {0};
    for (size_t i = 0; i < n; i++) {
        double a = x->um[i], change = a - x->u[i], f = x->f[i] + x->l[i] * a;
        double correction = x->phi[i] * (f - x->r[i] - x->lambda[i] * change), up = a + correction;
        x->um[i] = up;
        e[i % LANES] += x->weight[i] * correction * correction;
        d[i % LANES] += x->weight[i] * change * change;
        q[i % LANES] += x->weight[i] * up * up;
    }
    sums t = {0, 0, 0};
    for (int j = 0; j < LANES; j++) t.error += e[j], t.change += d[j], t.norm += q[j];
    return t;
}

static stage_lines lines_of(const exponential_ctx *x, const mt_column *c, const mt_lines *at, int i) {
    const mt_program *p = &x->m->program;
    const mt_mover *v = &x->m->mover[i];
    double *l = at->at[MT_LINE_L], *lambda = at->at[MT_LINE_LAMBDA], *phi = at->at[MT_LINE_MIDDLE],
           *root = at->at[MT_LINE_CROSS];
    mt_column_spread(p, at->factors, v->linear_factor, c, l);
    mt_column_spread(p, at->factors, v->implicit_factor, c, lambda);
    /* No blocks here: a pair is dominated by twice its diagonal. */
    for (size_t j = 0; j < at->doubles && v->partner >= 0; j++) lambda[j] *= 2;
    weights_of(x, lambda, at->doubles, phi, root);
    return (stage_lines){.l = l,
                         .lambda = lambda,
                         .phi = phi,
                         .root = root,
                         .weight = at->at[MT_LINE_WEIGHT],
                         .f = at->rhs + (size_t)i * at->line,
                         .u = v->u + c->offset,
                         .um = mt_next_u(x->m, v) + c->offset,
                         .r = mt_next_r(x->m, v) + c->offset};
}

static void update(const exponential_ctx *x, const mt_column *c, double *const in[], const mt_lines *at,
                   double *tally) {
    mt_model *m = x->m;
    const mt_program *p = &m->program;
    size_t mean = c->index == 0 ? (p->spectrum->complex ? 2 : 1) : 0;
    if (x->fresh || x->second) mt_column_rhs(m, c, in, at);
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        if (v->motion == MT_MOTION_STILL) continue;
        stage_lines ln = lines_of(x, c, at, i);
        sums t = {0, 0, 0};
        double *noise = at->at[MT_LINE_L2];
        if (!x->second && v->noise_sum.n) {
            for (size_t j = 0; j < at->doubles; j++) noise[j] = 0;
            mt_program_add(p, p->stages - 1, &v->noise_sum, c, in, p->u, at->factors, -1, noise);
            ln.noise = noise;
        }
        double u0 = ln.u[0];
        if (x->second)
            t = second_stage(&ln, at->doubles);
        else if (x->fresh)
            first_stage(&ln, at->doubles);
        else
            first_again(&ln, at->doubles);
        if (mean && v->mean_held) {
            t.norm -= ln.weight[0] * ln.um[0] * ln.um[0];
            ln.um[0] = u0;
            if (mean == 2) ln.um[1] = ln.u[1];
        }
        double *to = tally + MT_TALLY * i;
        to[0] = t.error, to[1] = t.change, to[2] = fmax(0, t.norm), to[3] = 0;
    }
}

static mt_status column_body(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    const exponential_ctx *x = ctx;
    mt_model *m = x->m;
    double *tally = mt_column_tally(m, c);
    mt_lines at = mt_column_lines(m, c, worker);
    (void)err;
    update(x, c, in, &at, tally);
    mt_column_finish(m, c, in, m->next, &at, tally, out);
    return MT_OK;
}

/* Values at k and -k that are both stored were given independent noises nowhere: the noise is the transform
 * of a real array. Only rounding is symmetrised. */
static mt_status sweep(mt_model *m, exponential_ctx *x, double time, mt_error *err) {
    mt_status st = mt_step_columns(m, x->fresh || x->second, column_body, x, time, err);
    for (int i = 0; i < m->n && !st; i++) mt_spectrum_symmetrise(m->program.spectrum, m->next[i]);
    return st;
}

static void show_spectra(mt_model *m, bool stage) {
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        m->program.u[i] = stage && v->motion != MT_MOTION_STILL ? mt_next_u(m, v) : v->u;
    }
}

mt_status mt_step_exponential(mt_model *m, mt_attempt *a, mt_error *err) {
    exponential_ctx x = {.m = m, .dt = a->dt, .fresh = !m->stored};
    mt_status st = MT_OK;
    a->swept = false, a->order = 1;
    mt_step_dominate(m, 0.5);
    mt_step_params(m, a->time, false);
    if (x.fresh) {
        st = mt_step_later_stages(m, a->time, err);
        m->state.evaluations++;
    }
    for (int i = 0; i < m->n; i++)
        m->next[i] = m->mover[i].motion == MT_MOTION_STILL ? m->mover[i].u : mt_next_u(m, &m->mover[i]);
    if (!st) st = sweep(m, &x, a->time, err);
    mt_step_params(m, a->time_next, a->lands_before_jump);
    x.second = true;
    show_spectra(m, true);
    if (!st) st = mt_program_rows(&m->program, 0, a->time_next, err);
    if (!st) st = mt_step_later_stages(m, a->time_next, err);
    m->state.evaluations++;
    if (!st) st = sweep(m, &x, a->time_next, err);
    show_spectra(m, false);
    if (st) return st;
    a->ratio =
        mt_step_error_ratio(m, 0.7 * sqrt(m->options.accuracy), 0); /* see the top: the error is its square */
    if (m->options.fixed <= 0 && !m->noisy && a->ratio > MT_TOLERATED) return MT_OK;
    a->swept = true;
    m->program.step = (uint32_t)(m->state.steps + 2); /* noise of the step that begins there */
    return mt_step_rows(m, a->time_next, a->capture, err);
}
