/* From a declared model to a program: potentials, right-hand sides, the implicit part, the energy as
 * reductions. */
#include "core/motion/column.h"
#include "core/motion/model_inside.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

#define ZERO_FACTOR -2

static mt_builder *builder(mt_model *m) {
    return &m->program.split.build;
}

static mt_status status(mt_model *m) {
    return builder(m)->status;
}

/* --- right-hand sides
 * --------------------------------------------------------------------------------------------------- */

static const mt_expr *potential(mt_model *m, const mt_expr *node) {
    mt_builder *b = builder(m);
    const mt_expr *e = NULL;
    if (b->status != MT_OK || !node) return NULL;
    mt_status st = mt_expr_variation(&e, m->energy, node, m->grid->dim, b->err);
    return mt_build_keep(b, st, e);
}

/* div(M grad mu) stays in divergence form where M varies: expanding it by the product rule would no longer be
 * the gradient of the discrete energy. */
static const mt_expr *conserved(mt_model *m, const mt_expr *mobility, const mt_expr *mu) {
    mt_builder *b = builder(m);
    if (mt_expr_uniform(mobility)) return mt_build_unary(b, MT_LAPLACIAN_OP, mt_build_mul(b, mobility, mu));
    const mt_expr *sum = mt_build_number(b, 0);
    for (int a = 0; a < m->grid->dim; a++)
        sum = mt_build_add(b, sum, mt_build_deriv(b, a, mt_build_mul(b, mobility, mt_build_deriv(b, a, mu))));
    return sum;
}

static const mt_expr *driven(mt_model *m, const mt_mover *v, const mt_expr *coefficient, const mt_expr *mu) {
    mt_builder *b = builder(m);
    if (v->motion == MT_MOTION_CONSERVE) return conserved(m, coefficient, mu);
    return mt_build_neg(b, mt_build_mul(b, coefficient, mu));
}

static const mt_expr *carried(mt_model *m, const mt_mover *v) {
    mt_builder *b = builder(m);
    const mt_expr *sum = mt_build_number(b, 0);
    for (int a = 0; a < m->grid->dim && v->velocity[0]; a++)
        sum = mt_build_sub(b, sum, mt_build_deriv(b, a, mt_build_mul(b, v->velocity[a], v->node)));
    return sum;
}

static void derive_potential(mt_model *m, mt_mover *v) {
    v->node = mt_build_symbol(builder(m), v->field->symbol);
    if (v->motion == MT_MOTION_CONSERVE || v->motion == MT_MOTION_RELAX) v->potential = potential(m, v->node);
}

static void derive_rhs(mt_model *m, mt_mover *v) {
    mt_builder *b = builder(m);
    v->mean_held = (v->motion == MT_MOTION_CONSERVE && !v->source) || v->keeps_mean;
    if (v->motion == MT_MOTION_STILL) {
        v->rhs = mt_build_number(b, 0);
        return;
    }
    v->rhs = v->motion == MT_MOTION_EVOLVE ? v->given : driven(m, v, v->given, v->potential);
    for (int j = 0; j < v->couplings; j++)
        v->rhs = mt_build_add(b, v->rhs,
                              driven(m, v, v->coupling[j].given, m->mover[v->coupling[j].other].potential));
    if (v->source) v->rhs = mt_build_add(b, v->rhs, v->source);
    if (v->velocity[0]) v->rhs = mt_build_add(b, v->rhs, carried(m, v));
}

/* --- thermal noise
 * ------------------------------------------------------------------------------------------------------ */

static const mt_expr *thermal_node(mt_model *m, const mt_thermal *t, int part) {
    mt_builder *b = builder(m);
    const mt_expr *e = NULL;
    if (b->status != MT_OK) return NULL;
    mt_status st = mt_expr_thermal(&e, m->forms, t->seed, 4 * t->stream + part, b->err);
    return mt_build_keep(b, st, e);
}

static void add_thermal(mt_model *m, mt_mover *v, const mt_expr *e, mt_parities parity, mt_term term) {
    int point = 0;
    if (!e || !term.factor || mt_split_point(&m->program.split, e, parity, &point) != MT_OK) return;
    term.source = ~point;
    (void)!mt_sum_add(builder(m), &v->noise_sum, term);
}

/* With an amplitude that is the same everywhere, the divergence of a vector of independent noises has the
 * statistics of one noise times |k|: one transform instead of one per axis. Along a mirror axis the flux is
 * odd about the wall: the sine transform of white noise. */
static void derive_noise(mt_model *m, mt_mover *v) {
    mt_builder *b = builder(m);
    for (int i = 0; i < v->noises; i++) {
        const mt_thermal *t = &v->noise[i];
        bool flux = v->motion == MT_MOTION_CONSERVE;
        if (mt_expr_uniform(t->amplitude)) {
            const mt_expr *factor = t->amplitude;
            if (flux)
                factor = mt_build_mul(b, factor,
                                      mt_build_unary(b, MT_SQRT_OP, mt_build_wave_squared(b, m->grid->dim)));
            add_thermal(m, v, thermal_node(m, t, 0), 0, (mt_term){.factor = factor});
            continue;
        }
        for (int a = 0; a < (flux ? m->grid->dim : 1); a++) {
            bool mirror = flux && m->grid->wall[a] == MT_MIRROR, turned = flux && !mirror;
            const mt_expr *factor = flux ? mt_build_wave(b, a) : mt_build_number(b, 1);
            add_thermal(m, v, mt_build_mul(b, t->amplitude, thermal_node(m, t, 1 + a)), mirror ? 1u << a : 0,
                        (mt_term){.factor = factor, .turns = turned});
        }
    }
    m->noisy = m->noisy || v->noises > 0;
}

/* --- implicit part
 * ------------------------------------------------------------------------------------------------------ */

/* Linear terms of mover `number` in field `source` with real factors. */
static const mt_expr *linear_in(mt_model *m, int number, int source) {
    mt_builder *b = builder(m);
    const mt_sum *sum = &m->mover[number].sum;
    const mt_expr *l = mt_build_number(b, 0);
    for (int i = 0; i < sum->n; i++) {
        const mt_term *t = &sum->term[i];
        if (t->source != source || t->turns % 2) continue;
        l = t->turns == 0 ? mt_build_add(b, l, t->factor) : mt_build_sub(b, l, t->factor);
    }
    return l;
}

/* Only sums, uniform factors and spectral operators between e and the fields. */
static bool linear_in_fields(const mt_expr *e) {
    switch (e->op) {
    case MT_FIELD_OP: return true;
    case MT_ADD_OP:
    case MT_SUB_OP: return linear_in_fields(e->arg[0]) && linear_in_fields(e->arg[1]);
    case MT_NEG_OP:
    case MT_DERIV_OP:
    case MT_LAPLACIAN_OP:
    case MT_FILTER_OP: return linear_in_fields(e->arg[0]);
    case MT_MUL_OP:
        return (mt_expr_uniform(e->arg[0]) && linear_in_fields(e->arg[1])) ||
               (mt_expr_uniform(e->arg[1]) && linear_in_fields(e->arg[0]));
    default: return false;
    }
}

/* Whether a cell-wise formula needs nothing but fields and linear operators on them: stage 0 can compute it.
 */
static bool from_fields_alone(mt_model *m, const mt_expr *e) {
    const mt_expr *leaf[64];
    int n = mt_split_leaves(mt_build_expand(builder(m), e, m->grid->dim), leaf, 64);
    bool plain = n >= 0 && n <= 64;
    for (int i = 0; i < n && plain; i++) plain = linear_in_fields(leaf[i]);
    return plain;
}

static bool add_dominate(mt_model *m, mt_mover *v, const mt_stiff *item) {
    mt_builder *b = builder(m);
    int reduction = -1;
    if (!from_fields_alone(m, item->a)) return false; /* stays explicit */
    if (mt_program_reduce(&m->program, item->a, MT_REDUCE_MAX, &reduction) != MT_OK) return false;
    mt_dominate *more = mt_resize(v->dominate, (size_t)v->dominates + 1, sizeof *more);
    if (!more) {
        b->status = mt_fail(b->err, MT_ENOMEM, "no memory for the equations");
        return false;
    }
    v->dominate = more;
    mt_dominate *d = &v->dominate[v->dominates];
    b->status = mt_symbol_new(&d->scale, m->forms, MT_SYMBOL_PARAM, "stabilisation", NULL, b->err);
    if (b->status != MT_OK) return false;
    d->reduction = reduction;
    d->o = item->o;
    v->dominates++;
    return true;
}

/* Lambda = min(0, - sum of uniform a o - sum of scale o): uniform coefficients as they are, varying ones
 * dominated. Varying coefficients that contain derivatives, or come with a function of k that may be
 * negative, stay explicit. */
static void derive_implicit(mt_model *m, mt_mover *v) {
    mt_builder *b = builder(m);
    mt_stiffness stiff;
    if (mt_stiff_find(b, v->rhs, v->node, m->grid->dim, &stiff) != MT_OK) return;
    const mt_expr *zero = mt_build_number(b, 0), *sum = zero;
    v->stabilising = NULL;
    for (int i = 0; i < stiff.n && status(m) == MT_OK; i++) {
        mt_stiff *s = &stiff.item[i];
        if (mt_expr_uniform(s->a))
            sum = mt_build_sub(b, sum, mt_build_mul(b, s->a, s->o));
        else if (s->even && add_dominate(m, v, s)) {
            const mt_dominate *d = &v->dominate[v->dominates - 1];
            const mt_expr *extra = mt_build_mul(b, mt_build_symbol(b, d->scale), d->o);
            sum = mt_build_sub(b, sum, extra);
            v->stabilising = v->stabilising ? mt_build_add(b, v->stabilising, extra) : extra;
        }
    }
    mt_stiff_end(&stiff);
    v->implicit = mt_build_binary(b, MT_MIN_OP, zero, sum);
}

/* A mobility matrix M(x) that varies is dominated by n times its diagonal (n x n, positive semi-definite: the
 * largest eigenvalue is at most the trace). */
static double needed_theta(const mt_mover *v) {
    bool varies = !mt_expr_uniform(v->given ? v->given : v->node);
    for (int j = 0; j < v->couplings; j++) varies = varies || !mt_expr_uniform(v->coupling[j].given);
    return varies ? 1 + v->couplings : 1;
}

/* Two fields whose equations contain each other linearly are solved in one block per mode. Where the block is
 * not stable by itself (one of its eigenvalues would be positive) its cross terms are left to the explicit
 * part: those are long waves, which grow slowly. */
static void pair_up(mt_model *m) {
    mt_builder *b = builder(m);
    for (int i = 0; i < m->n; i++)
        for (int j = i + 1; j < m->n && status(m) == MT_OK; j++) {
            mt_mover *v = &m->mover[i], *w = &m->mover[j];
            if (v->partner >= 0 || w->partner >= 0 || v->motion == MT_MOTION_STILL ||
                w->motion == MT_MOTION_STILL)
                continue;
            const mt_expr *x = linear_in(m, i, j), *y = linear_in(m, j, i);
            if (!x || !y || mt_expr_is_const(x, 0) || mt_expr_is_const(y, 0)) continue;
            const mt_expr *both = mt_build_mul(b, v->implicit, w->implicit), *zero = mt_build_number(b, 0);
            const mt_expr *stable = mt_build_binary(b, MT_ABOVE_OP, both, mt_build_mul(b, x, y));
            v->cross = mt_build_mul(b, stable, x), w->cross = mt_build_mul(b, stable, y);
            if (!zero || !v->cross || !w->cross) return;
            v->partner = j, w->partner = i;
        }
}

/* --- energy
 * -------------------------------------------------------------------------------------------------------------
 */

static void add_quadratic(mt_model *m, const mt_symbol *field, const mt_expr *q) {
    mt_builder *b = builder(m);
    int number = -1;
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].field->symbol == field) number = i;
    for (int i = 0; i < m->quadratics; i++)
        if (m->quadratic[i].mover == number) {
            m->quadratic[i].q = mt_build_add(b, m->quadratic[i].q, q);
            return;
        }
    mt_quadratic *more = mt_resize(m->quadratic, (size_t)m->quadratics + 1, sizeof *more);
    if (!more) {
        b->status = mt_fail(b->err, MT_ENOMEM, "no memory for the equations");
        return;
    }
    m->quadratic = more;
    m->quadratic[m->quadratics++] = (mt_quadratic){.mover = number, .q = q};
}

/* scale * u * (linear operator on the same u): the operator's factor, or NULL. */
static const mt_expr *product_factor(mt_model *m, const mt_expr *e) {
    mt_sum sum;
    const mt_expr *factor = NULL;
    if (e->op != MT_MUL_OP) return NULL;
    for (int i = 0; i < 2 && !factor; i++) {
        const mt_expr *f = e->arg[i], *q = e->arg[1 - i];
        if (f->op != MT_FIELD_OP || !mt_op_spectral(q->op) || q->op == MT_DERIV_OP || !linear_in_fields(q))
            continue;
        if (mt_split_sum(&m->program.split, q, &sum) != MT_OK) return NULL;
        if (sum.n == 1 && sum.term[0].turns == 0 && sum.term[0].source >= 0 &&
            m->mover[sum.term[0].source].field->symbol == f->symbol)
            factor = sum.term[0].factor;
        mt_sum_end(&sum);
    }
    return factor;
}

/* Gathers quadratic terms by Parseval's theorem (no transform needed for their energy); the rest is
 * cell-wise. */
static void gather_energy(mt_model *m, const mt_expr *e, const mt_expr *scale) {
    mt_builder *b = builder(m);
    const mt_expr *q;
    if (!e || !scale || status(m) != MT_OK) return;
    switch (e->op) {
    case MT_ADD_OP:
        gather_energy(m, e->arg[0], scale);
        gather_energy(m, e->arg[1], scale);
        return;
    case MT_SUB_OP:
        gather_energy(m, e->arg[0], scale);
        gather_energy(m, e->arg[1], mt_build_neg(b, scale));
        return;
    case MT_NEG_OP: gather_energy(m, e->arg[0], mt_build_neg(b, scale)); return;
    case MT_GRADSQ_OP:
        if (e->arg[0]->op != MT_FIELD_OP) break;
        add_quadratic(m, e->arg[0]->symbol, mt_build_mul(b, scale, mt_build_wave_squared(b, m->grid->dim)));
        return;
    case MT_DIV_OP:
        if (!mt_expr_uniform(e->arg[1])) break;
        gather_energy(m, e->arg[0], mt_build_div(b, scale, e->arg[1]));
        return;
    case MT_MUL_OP:
        for (int i = 0; i < 2; i++)
            if (mt_expr_uniform(e->arg[i]) && !mt_expr_uniform(e->arg[1 - i])) {
                gather_energy(m, e->arg[1 - i], mt_build_mul(b, scale, e->arg[i]));
                return;
            }
        q = product_factor(m, e);
        if (!q) break;
        add_quadratic(m, e->arg[e->arg[0]->op != MT_FIELD_OP]->symbol, mt_build_mul(b, scale, q));
        return;
    default: break;
    }
    const mt_expr *rest = mt_build_mul(b, scale, e);
    m->energy_rest = m->energy_rest ? mt_build_add(b, m->energy_rest, rest) : rest;
}

static void derive_energy(mt_model *m) {
    mt_builder *b = builder(m);
    m->energy_reduction = -1;
    if (!m->energy) return;
    m->energy_known = true;
    gather_energy(m, m->energy, mt_build_number(b, 1));
    if (status(m) != MT_OK || !m->energy_rest) return;
    mt_status st = mt_program_reduce(&m->program, m->energy_rest, MT_REDUCE_SUM, &m->energy_reduction);
    if (st == MT_EUNSUPPORTED) m->energy_known = false;
}

/* --- guards
 * -------------------------------------------------------------------------------------------------------------
 */

static void guard_logs(mt_model *m, const mt_expr *e) {
    mt_builder *b = builder(m);
    if (!e || status(m) != MT_OK || mt_expr_uniform(e)) return;
    if (e->op == MT_LOG_OP && !mt_expr_uniform(e->arg[0]) &&
        !(mt_expr_contents(e->arg[0]) & MT_HAS_SPECTRAL)) {
        int index = -1;
        if (mt_program_reduce(&m->program, e->arg[0], MT_REDUCE_MIN, &index) != MT_OK) return;
        for (int i = 0; i < m->logs; i++)
            if (m->log_reduction[i] == index) return;
        int *more = mt_resize(m->log_reduction, (size_t)m->logs + 1, sizeof *more);
        if (!more) {
            b->status = mt_fail(b->err, MT_ENOMEM, "no memory for the equations");
            return;
        }
        m->log_reduction = more;
        m->log_reduction[m->logs++] = index;
    }
    for (int i = 0; i < e->nargs; i++) guard_logs(m, e->arg[i]);
}

static void guard_mover(mt_model *m, mt_mover *v) {
    v->mobility_reduction = v->finite_reduction = -1;
    bool driven = v->motion == MT_MOTION_CONSERVE || v->motion == MT_MOTION_RELAX;
    if (driven && !(mt_expr_uniform(v->given) || (mt_expr_contents(v->given) & MT_HAS_SPECTRAL)))
        (void)!mt_program_reduce(&m->program, v->given, MT_REDUCE_MIN, &v->mobility_reduction);
    bool seen = m->energy_known && m->energy_rest && mt_expr_contains(m->energy_rest, v->node);
    if (!seen) (void)!mt_program_reduce(&m->program, v->node, MT_REDUCE_MIN, &v->finite_reduction);
}

/* --- params
 * -------------------------------------------------------------------------------------------------------------
 */

static void find_params(mt_model *m, const mt_expr *e) {
    if (!e || status(m) != MT_OK) return;
    if (e->op == MT_PARAM_OP) {
        for (int i = 0; i < m->params; i++)
            if (m->param[i] == e->symbol) return;
        mt_symbol **more = mt_resize(m->param, (size_t)m->params + 1, sizeof *more);
        if (!more) {
            builder(m)->status = mt_fail(builder(m)->err, MT_ENOMEM, "no memory for the equations");
            return;
        }
        m->param = more;
        m->param[m->params++] = e->symbol;
    }
    for (int i = 0; i < e->nargs; i++) find_params(m, e->arg[i]);
}

/* --- putting together
 * --------------------------------------------------------------------------------------------------- */

static int wanted_factor(mt_model *m, const mt_expr *e) {
    if (!e || mt_expr_is_const(e, 0)) return ZERO_FACTOR;
    return mt_program_factor(&m->program, m->program.stages - 1, e);
}

static mt_status make_program(mt_model *m) {
    mt_program *p = &m->program;
    mt_sum *sums = mt_alloc(2 * (size_t)m->n + 1, sizeof *sums);
    if (!sums) return mt_fail(builder(m)->err, MT_ENOMEM, "no memory for the equations");
    for (int i = 0; i < m->n; i++) sums[i] = m->mover[i].sum, sums[m->n + i] = m->mover[i].noise_sum;
    mt_status st = mt_program_finish(p, 2 * m->n, sums);
    mt_free(sums);
    if (st) return st;
    m->linear_factors.e = mt_alloc((size_t)m->n + 1, sizeof *m->linear_factors.e);
    if (!m->linear_factors.e) return mt_fail(builder(m)->err, MT_ENOMEM, "no memory for the equations");
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        v->linear_factor = wanted_factor(m, v->linear);
        v->implicit_factor = wanted_factor(m, v->implicit);
        v->cross_factor = wanted_factor(m, v->cross);
        v->stabilising_factor = wanted_factor(m, v->stabilising);
        m->linear_factors.e[m->linear_factors.n++] = v->linear;
    }
    for (int i = 0; i < m->quadratics; i++) m->quadratic[i].factor = wanted_factor(m, m->quadratic[i].q);
    if (status(m)) return status(m);
    st = mt_program_compile(p);
    if (!st) st = mt_program_compile_factors(p, &m->linear_factors);
    if (st) return st;
    m->column_doubles = mt_column_doubles(m);
    return MT_OK;
}

static mt_status derive(mt_model *m) {
    mt_split *s = &m->program.split;
    m->noisy = false;
    for (int i = 0; i < m->n; i++) derive_potential(m, &m->mover[i]);
    for (int i = 0; i < m->n; i++) derive_rhs(m, &m->mover[i]);
    derive_energy(m);
    for (int i = 0; i < m->n && status(m) == MT_OK; i++) {
        mt_mover *v = &m->mover[i];
        if (mt_split_sum(s, v->rhs, &v->sum) != MT_OK)
            return mt_context(builder(m)->err, status(m), "equation of field '%s'", v->field->symbol->name);
        if (v->sum.parity)
            return builder(m)->status =
                       mt_fail(builder(m)->err, MT_EPARITY,
                               "equation of field '%s': its right-hand side is odd about a mirror wall, the "
                               "field even; "
                               "first derivatives have to come in pairs there (or make that axis periodic)",
                               v->field->symbol->name);
        v->linear = mt_build_collect(builder(m), linear_in(m, i, i));
        v->partner = -1, v->cross = NULL, v->theta = needed_theta(v);
        derive_implicit(m, v);
        derive_noise(m, v);
        guard_mover(m, v);
        guard_logs(m, v->rhs);
        find_params(m, v->rhs);
        for (int j = 0; j < v->noises; j++) find_params(m, v->noise[j].amplitude);
    }
    pair_up(m);
    guard_logs(m, m->energy);
    find_params(m, m->energy);
    return status(m) ? status(m) : make_program(m);
}

mt_status mt_model_derive(mt_model *m, mt_error *err) {
    if (m->derived) return MT_OK;
    bool moving = false;
    for (int i = 0; i < m->n; i++) moving = moving || m->mover[i].motion != MT_MOTION_STILL;
    if (!moving)
        return mt_fail(err, MT_EINPUT,
                       "the model has no equation: say how a field moves with conserve, relax or evolve");
    mt_status st = mt_new(&m->symbol, (size_t)m->n, sizeof *m->symbol, "the equations", err);
    if (st) return st;
    for (int i = 0; i < m->n; i++) m->symbol[i] = m->mover[i].field->symbol;
    st = mt_program_begin(&m->program, m->forms, m->sweeper, m->n, m->symbol, err);
    if (!st) st = derive(m);
    if (st) mt_model_forget(m);
    m->derived = st == MT_OK;
    m->program.split.build.err = NULL; /* the caller's record may not outlive this call */
    return st;
}

void mt_model_forget(mt_model *m) {
    for (int i = 0; i < m->n; i++) {
        mt_mover *v = &m->mover[i];
        mt_sum_end(&v->sum), mt_sum_end(&v->noise_sum);
        for (int j = 0; j < v->dominates; j++) mt_symbol_unref(&v->dominate[j].scale);
        mt_free(v->dominate), mt_free(v->u);
        for (int j = 0; j < 2; j++) mt_free(v->past_u[j]), mt_free(v->past_r[j]);
        v->dominate = NULL, v->dominates = 0;
        v->u = v->past_u[0] = v->past_u[1] = v->past_r[0] = v->past_r[1] = NULL;
        v->node = v->potential = v->rhs = v->linear = v->implicit = NULL;
    }
    mt_factors_end(&m->linear_factors);
    mt_program_end(&m->program);
    mt_free(m->quadratic), mt_free(m->log_reduction), mt_free(m->param), mt_free(m->symbol);
    mt_free(m->column_tally), mt_free(m->totals), mt_free(m->next);
    m->quadratic = NULL, m->log_reduction = NULL, m->param = NULL, m->symbol = NULL;
    m->column_tally = m->totals = NULL, m->next = NULL;
    m->quadratics = m->logs = m->params = 0;
    m->energy_rest = NULL;
    m->energy_known = m->derived = m->started = false;
    m->depth = 0;
}
