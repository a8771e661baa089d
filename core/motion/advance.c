/* The driver: start, choice of the step, guards, landing on times. */
#include "core/motion/model_inside.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/base/memory.h"

#define GROWTH_MOST 2.0 /* variable-step BDF2 is zero-stable below 1 + sqrt 2 (Grigorieff 1983) */
#define GROWTH_THIRD                                                                                         \
    1.4 /* the third-order formula below 1.534 (Calvo, Grande & Grigorieff 1990; from memory) */
#define STEADY_LEAST 0.87 /* smaller changes of the step are not made: each upsets the method's memory */
#define STEADY_MOST 1.25
#define LANDING 20 /* steps ahead in which a time to land on is seen */
#define REJECTIONS_MOST 60
#define ENERGY_ROUNDING 1e-11 /* rise of the energy, relative to its size, that is laid to rounding */
#define LOG_FAR -0.02         /* an argument of a logarithm this far out of its domain rejects the step */

/* --- start
 * ---------------------------------------------------------------------------------------------------------------
 */

static mt_status allocate(mt_model *m, mt_error *err) {
    mt_program *p = &m->program;
    size_t doubles = p->spectrum->doubles, width = MT_TALLY * (size_t)m->n + 1;
    p->split.build.err = err;
    mt_status st = mt_program_allocate(p, m->column_doubles);
    p->split.build.err = NULL;
    for (int i = 0; i < m->n && !st; i++) {
        mt_mover *v = &m->mover[i];
        st = mt_new(&v->u, doubles, sizeof(double), "the spectrum of a field", err);
    }
    if (!st) st = mt_new(&m->column_tally, p->spectrum->columns * width, sizeof(double), "sums", err);
    if (!st) st = mt_new(&m->totals, width, sizeof(double), "sums", err);
    if (!st) st = mt_new(&m->next, (size_t)m->n, sizeof *m->next, "sums", err);
    return st;
}

static int depth_of(mt_stepper stepper) {
    return stepper == MT_STEPPER_SBDF3 ? 2 : 1;
}

/* The past that the stepper needs; another stepper keeps what there is of it. */
static mt_status remember(mt_model *m, mt_stepper stepper, mt_error *err) {
    size_t doubles = m->program.spectrum->doubles;
    mt_status st = MT_OK;
    int depth = depth_of(stepper);
    for (int i = 0; i < m->n; i++)
        for (int j = 0; j < depth && m->mover[i].motion != MT_MOTION_STILL && !st; j++) {
            mt_mover *v = &m->mover[i];
            if (!v->past_u[j])
                st = mt_new(&v->past_u[j], doubles, sizeof(double), "the spectrum of a field", err);
            if (!st && !v->past_r[j])
                st = mt_new(&v->past_r[j], doubles, sizeof(double), "the right-hand side of a field", err);
        }
    if (st) return mt_context(err, st, "this run");
    if (m->stored && depth != m->depth)
        m->levels = 0; /* R of the present state is not where it is looked for */
    if (m->stored && depth != m->depth) m->stored = false, m->stale = true;
    m->depth = depth;
    if (m->levels > depth) m->levels = depth;
    return MT_OK;
}

mt_status mt_model_bytes(mt_model *m, size_t *bytes, mt_error *err) {
    mt_status st = mt_model_derive(m, err);
    if (st) return st;
    size_t one = m->program.spectrum->doubles * sizeof(double), width = MT_TALLY * (size_t)m->n + 1;
    *bytes = mt_program_bytes(&m->program, m->column_doubles);
    size_t past = 1 + 2 * (size_t)(m->depth ? m->depth : depth_of(MT_STEPPER_DEFAULT));
    for (int i = 0; i < m->n; i++) {
        *bytes += m->mover[i].motion == MT_MOTION_STILL ? one : past * one;
        *bytes += m->grid->cells * sizeof(double); /* the field's values in real space */
    }
    *bytes += m->program.spectrum->columns * width * sizeof(double);
    return MT_OK;
}

static mt_status take_values(mt_model *m, mt_error *err) {
    mt_status st = MT_OK;
    for (int i = 0; i < m->n && !st; i++) {
        mt_mover *v = &m->mover[i];
        st = mt_transform_forward(m->sweeper, v->field->values, 0, v->u, m->program.work[0], err);
        m->program.u[i] = v->u;
        v->version = v->field->version;
        v->mean_start = v->u[0];
    }
    m->levels = 0, m->stored = m->stale = false;
    m->most_levels = 2, m->limit_at = 0;
    m->dt_next = 0;
    return st ? st : mt_step_refresh(m, true, err);
}

static void cell_text(const mt_grid *g, size_t cell, char *buf, size_t size) {
    size_t x = cell % (size_t)g->n[0], y = cell / (size_t)g->n[0] % (size_t)g->n[1],
           z = cell / ((size_t)g->n[0] * (size_t)g->n[1]);
    const char *form = g->dim == 1 ? "(%zu)" : g->dim == 2 ? "(%zu, %zu)" : "(%zu, %zu, %zu)";
    snprintf(buf, size, form, x + 1, y + 1, z + 1);
}

static mt_status check_finite(const mt_model *m, mt_error *err) {
    char where[64];
    for (int i = 0; i < m->n; i++) {
        const mt_field *f = m->mover[i].field;
        for (size_t c = 0; c < m->grid->cells; c++)
            if (!isfinite(f->values[c])) {
                cell_text(m->grid, c, where, sizeof where);
                return mt_fail(err, MT_ENUMERIC,
                               "field '%s' is %g in cell %s: every value has to be a finite number",
                               f->symbol->name, f->values[c], where);
            }
    }
    return MT_OK;
}

static mt_status check_coefficients(const mt_model *m, mt_error *err) {
    char where[64];
    for (int i = 0; i < m->n; i++) {
        const mt_mover *v = &m->mover[i];
        if (v->mobility_reduction < 0) continue;
        const mt_reduced *least = &m->program.total[v->mobility_reduction];
        if (least->value >= 0) continue;
        cell_text(m->grid, least->cell, where, sizeof where);
        return mt_fail(
            err, MT_EMOBILITY,
            "field '%s': the %s is %.6g in cell %s; it must not be negative anywhere (short waves would grow "
            "without bound)",
            v->field->symbol->name, v->motion == MT_MOTION_CONSERVE ? "mobility" : "rate", least->value,
            where);
    }
    return MT_OK;
}

static mt_status check_start(mt_model *m, mt_error *err) {
    char where[64];
    mt_status st = check_finite(m, err);
    for (int i = 0; i < m->logs && !st; i++) {
        const mt_reduced *least = &m->program.total[m->log_reduction[i]];
        if (least->value > 0) continue;
        cell_text(m->grid, least->cell, where, sizeof where);
        st = mt_fail(
            err, MT_EDOMAIN,
            "the start is outside the domain of a logarithm: its argument is %.6g in cell %s and has to be "
            "positive; lower the noise or shift the mean",
            least->value, where);
    }
    if (!st) st = check_coefficients(m, err);
    if (!st && m->energy_known && !isfinite(m->energy_now))
        st = mt_fail(err, MT_ENUMERIC,
                     "the energy of the start is %g: the energy density is not finite somewhere",
                     m->energy_now);
    return st;
}

static void note_state(mt_model *m) {
    m->state.energy = m->energy_now;
    bool used = false;
    for (int i = 0; i < m->logs; i++) {
        const mt_reduced *least = &m->program.total[m->log_reduction[i]];
        used = used || least->value < MT_LOG_CUT;
        if (least->value < m->state.log_lowest) {
            m->state.log_lowest = least->value;
            m->state.log_cell = least->cell;
        }
    }
    m->state.log_steps += used;
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].mean_held)
            m->state.mean_drift = fmax(m->state.mean_drift, fabs(m->mover[i].u[0] - m->mover[i].mean_start));
}

mt_status mt_model_options(mt_model *m, const mt_step_options *options, mt_error *err) {
    m->options = options ? *options : (mt_step_options){.stepper = MT_STEPPER_DEFAULT, .free_energy = true};
    if (m->options.accuracy <= 0) m->options.accuracy = MT_ACCURACY;
    m->ratio_old = 0;
    m->most_levels = 2;
    return remember(m, m->options.stepper, err);
}

mt_status mt_model_start(mt_model *m, const mt_step_options *options, double time, mt_error *err) {
    mt_status st = mt_model_derive(m, err);
    if (st) return st;
    if (!m->next) st = allocate(m, err);
    if (!st) st = mt_model_options(m, options, err);
    if (st) {
        mt_model_forget(m);
        return mt_context(err, st, "this run");
    }
    memset(&m->state, 0, sizeof m->state);
    m->state.time = time;
    m->state.step_min = INFINITY;
    m->state.log_lowest = INFINITY;
    st = take_values(m, err);
    if (!st) st = check_start(m, err);
    if (!st) st = mt_model_check_matrices(m, err);
    if (!st) st = mt_model_check_posed(m, err);
    if (st) return mt_context(err, st, "start");
    note_state(m);
    m->state.log_steps = 0;
    m->started = true;
    return MT_OK;
}

/* --- guards
 * --------------------------------------------------------------------------------------------------------------
 */

/* Why an evaluated step cannot be accepted: filled into err; MT_OK if it can. */
static mt_status judge(const mt_model *m, const mt_attempt *a, bool energy_must_fall, mt_error *err) {
    double before = m->state.energy, after = m->energy_now;
    for (int i = 0; i < m->n; i++) {
        int r = m->mover[i].finite_reduction;
        if (r >= 0 && !isfinite(m->program.total[r].value))
            return mt_fail(err, MT_ENUMERIC, "field '%s' is no longer finite",
                           m->mover[i].field->symbol->name);
    }
    if (m->energy_known && !isfinite(after))
        return mt_fail(err, MT_ENUMERIC, "the energy is no longer finite");
    for (int i = 0; i < m->logs; i++)
        if (!(m->program.total[m->log_reduction[i]].value > LOG_FAR))
            return mt_fail(err, MT_EDOMAIN,
                           "the argument of a logarithm fell to %.4g: the grid is too coarse here",
                           m->program.total[m->log_reduction[i]].value);
    mt_status st = check_coefficients(m, err);
    if (st) return st;
    double allowed = ENERGY_ROUNDING * (fabs(before) + fabs(after));
    if (energy_must_fall && after - before > allowed)
        return mt_fail(
            err, MT_EENERGY,
            "the energy rose from %.10g to %.10g in the step to time %.6g, though it can only fall", before,
            after, a->time_next);
    return MT_OK;
}

/* Falling is a law where nothing drives the system: constant params, no own right-hand sides, no time in the
 * energy. */
static bool energy_must_fall(const mt_model *m, const mt_attempt *a) {
    if (!m->energy_known || !m->options.free_energy || m->noisy ||
        (mt_expr_contents(m->energy) & MT_HAS_TIME))
        return false;
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].motion == MT_MOTION_EVOLVE || m->mover[i].source || m->mover[i].velocity[0])
            return false;
    for (int i = 0; i < m->params; i++)
        if (m->param[i]->knots &&
            mt_symbol_at(m->param[i], a->time, false) != mt_symbol_at(m->param[i], a->time_next, true))
            return false;
    return true;
}

/* --- times to land on
 * ---------------------------------------------------------------------------------------------------- */

static double next_knot(const mt_model *m, double after, double until) {
    for (int i = 0; i < m->params; i++)
        for (int k = 0; k < m->param[i]->knots; k++) {
            double t = m->param[i]->knot_time[k];
            if (t > after && t < until) until = t;
        }
    return until;
}

static bool jump_at(const mt_model *m, double time) {
    for (int i = 0; i < m->params; i++)
        if (m->param[i]->knots &&
            mt_symbol_at(m->param[i], time, true) != mt_symbol_at(m->param[i], time, false))
            return true;
    return false;
}

static bool knot_at(const mt_model *m, double time) {
    for (int i = 0; i < m->params; i++)
        for (int k = 0; k < m->param[i]->knots; k++)
            if (m->param[i]->knot_time[k] == time) return true;
    return false;
}

/* --- choice of the step
 * -------------------------------------------------------------------------------------------------- */

static double first_step(mt_model *m, double until) {
    double fastest = mt_step_fastest(m, m->state.time);
    double dt = fastest > 0 ? 0.5 / fastest : INFINITY;
    return fmin(dt, until - m->state.time);
}

/* Lands exactly. The way there is divided into equal steps in good time: a short step among long ones would
 * upset the method's memory, and the estimate after it, for many steps. */
static void plan_step(mt_model *m, double stop, mt_attempt *a) {
    double left = stop - m->state.time, dt = m->options.fixed > 0 ? m->options.fixed : m->dt_next;
    if (m->options.longest > 0) dt = fmin(dt, m->options.longest);
    a->time = m->state.time;
    double steps = ceil(left / dt * (1 - 1e-9));
    if (steps <= 1)
        dt = left;
    else if (m->options.fixed <= 0 && steps < LANDING)
        dt = left / steps;
    a->dt = dt;
    a->time_next = dt == left ? stop : a->time + dt;
    a->lands_before_jump = dt == left;
}

/* Uses the step before: not the exponential Runge-Kutta method. */
static bool multistep(const mt_model *m) {
    return !m->noisy && m->options.stepper != MT_STEPPER_ETDRK2;
}

/* The error of a step relative to the change over it goes with dt^2 (two-step) or dt. A proportional-integral
 * rule (Gustafsson, ACM Trans. Math. Softw. 17 (1991) 533) damps the see-saw of the plain one. */
static double growth(const mt_model *m, const mt_attempt *a) {
    double ratio = a->ratio, order = a->order, old = m->ratio_old > 0 ? m->ratio_old : ratio;
    double most = a->order > 2 ? GROWTH_THIRD : GROWTH_MOST;
    if (ratio <= 1e-12) return most;
    double f = 0.9 * pow(ratio, -0.8 / order) * pow(fmax(old, 1e-12), 0.3 / order);
    if (f > STEADY_LEAST && f < STEADY_MOST) f = 1;
    return fmin(most, fmax(0.3, f));
}

#define LOOK_AGAIN 32 /* steps after which the limit is looked up anew */

/* Third order up to its limit of stability; second order where that would take longer steps than the limit.
 */
static void choose_order(mt_model *m, const mt_attempt *a) {
    if (m->depth < 2 || !multistep(m)) return;
    if (m->limit_at == 0 || m->state.steps >= m->limit_at + LOOK_AGAIN) {
        m->third_limit = mt_step_third_order_limit(m, m->state.time);
        m->limit_at = m->state.steps + 1;
    }
    if (m->options.fixed > 0) {
        m->most_levels = m->options.fixed > m->third_limit ? 1 : 2;
        return;
    }
    if (a->order == 3) {
        double second = a->dt * 0.9 / sqrt(fmax(a->lower, 1e-12));
        if (m->dt_next > m->third_limit && second > m->third_limit)
            m->most_levels = 1, m->dt_next = fmin(second, GROWTH_MOST * a->dt);
        else
            m->dt_next = fmin(m->dt_next, m->third_limit);
    } else if (m->most_levels == 1 && m->dt_next < 0.7 * m->third_limit)
        m->most_levels = 2;
}

/* A method of order p makes the error e with a step in proportion to e^(1/p): how much shorter it is for
 * another order. */
static double shorter(const mt_model *m, int from, int to) {
    return to < from ? pow(m->options.accuracy, 1.0 / to - 1.0 / from) : 1;
}

static mt_status too_small(mt_model *m, mt_status why, mt_error *err) {
    mt_error ignored;
    (void)!mt_step_refresh(m, true, &ignored);
    if (why == MT_OK)
        return mt_fail(err, MT_ESTEP,
                       "the time step fell to %.3g at time %.6g without reaching the accuracy %.3g; the "
                       "equations may have no "
                       "stable implicit part, or the accuracy asks for more than rounding allows",
                       m->dt_next, m->state.time, m->options.accuracy);
    if (m->noisy)
        return mt_context(
            err, why,
            "time %.6g, in a step with thermal noise (none is taken back; a run with `longest` "
            "or `accuracy` smaller takes shorter ones, and cells that are larger see less noise)",
            m->state.time);
    if (m->options.fixed > 0)
        return mt_context(err, why, "time %.6g, in a step of the fixed length %.6g; shorten it",
                          m->state.time, m->options.fixed);
    return mt_context(err, why, "time %.6g, after %d smaller and smaller steps", m->state.time,
                      REJECTIONS_MOST);
}

static void rejected(mt_model *m, const mt_attempt *a, bool by_error) {
    double cut = by_error ? fmax(0.1, 0.8 * pow(a->ratio, -1.0 / a->order)) : 0.25;
    int levels = m->levels < m->depth ? m->levels : m->depth - 1; /* the oldest was written over */
    m->state.rejected++;
    m->stored = true;
    if (multistep(m)) cut *= shorter(m, m->levels + 1, levels + 1);
    m->levels = levels;
    m->dt_next = a->dt * cut;
    m->ratio_old = 0;
}

static void accepted(mt_model *m, const mt_attempt *a) {
    double f = growth(m, a);
    bool cut_short = a->dt < 0.99 * m->dt_next; /* by a landing: the suggestion for after it stays */
    double suggestion = a->dt * f;
    if (energy_must_fall(m, a))
        m->state.energy_rise =
            fmax(m->state.energy_rise, (m->energy_now - m->state.energy) / (fabs(m->state.energy) + 1e-300));
    mt_step_accept(m);
    m->ratio_old = a->ratio;
    m->dt_next = cut_short && f >= 1 ? fmin(m->dt_next, (a->order > 2 ? GROWTH_THIRD : GROWTH_MOST) * a->dt)
                                     : suggestion;
    m->past_dt[1] = m->past_dt[0];
    m->past_dt[0] = a->dt;
    m->levels = m->levels < m->depth ? m->levels + 1 : m->depth;
    m->stored = false;
    m->state.time = a->time_next;
    m->state.step = a->dt;
    m->state.error = a->ratio;
    m->state.steps++;
    m->state.step_min = fmin(m->state.step_min, a->dt);
    m->state.step_max = fmax(m->state.step_max, a->dt);
    note_state(m);
    choose_order(m, a);
}

/* One accepted step towards stop. */
static mt_status step(mt_model *m, double stop, double until, mt_error *err) {
    mt_error why = {0};
    for (int tries = 0; tries < REJECTIONS_MOST; tries++) {
        mt_attempt a = {0};
        plan_step(m, stop, &a);
        a.capture = a.time_next == until;
        double shortest = fmax(m->options.shortest, 4e-16 * fabs(m->state.time));
        if (a.dt <= shortest && a.time_next != stop) break;
        mt_status st = mt_step_attempt(m, &a, err);
        if (st) return st;
        why.status = MT_OK;
        if (a.swept) why.status = judge(m, &a, energy_must_fall(m, &a), &why);
        if (a.swept && why.status == MT_OK) {
            accepted(m, &a);
            return MT_OK;
        }
        if (m->options.fixed > 0 || m->noisy) break;
        rejected(m, &a, !a.swept);
    }
    if (err) *err = why;
    return too_small(m, why.status, err);
}

static bool values_changed(const mt_model *m) {
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].version != m->mover[i].field->version) return true;
    return false;
}

/* At a kink of a param the history no longer describes the future; at a jump the stage-0 outputs are old too.
 */
static mt_status pass_knot(mt_model *m, mt_error *err) {
    if (!knot_at(m, m->state.time) || m->levels == 0) return MT_OK;
    if (multistep(m)) m->dt_next *= shorter(m, m->levels + 1, 1);
    m->levels = 0;
    m->ratio_old = 0;
    if (!jump_at(m, m->state.time)) return MT_OK;
    mt_status st = mt_step_refresh(m, false, err);
    m->state.energy = m->energy_now;
    m->dt_next = fmin(m->dt_next, first_step(m, INFINITY));
    return st;
}

mt_status mt_model_advance(mt_model *m, double until, mt_tick tick, void *ctx, mt_error *err) {
    mt_status st = MT_OK;
    if (!m->started) return mt_fail(err, MT_EINPUT, "the model was not started");
    if (isnan(until)) return mt_fail(err, MT_EINPUT, "the time to run to is not a number");
    if (values_changed(m)) {
        st = take_values(m, err);
        if (!st) st = check_start(m, err);
        if (st) return mt_context(err, st, "values set at time %.6g", m->state.time);
        m->state.energy = m->energy_now;
    }
    if (m->stale) st = mt_step_refresh(m, false, err);
    m->stale = false;
    m->state.finished = false;
    if (m->dt_next <= 0 && until > m->state.time) m->dt_next = first_step(m, until);
    while (m->state.time < until && !st) {
        st = pass_knot(m, err);
        if (!st) st = step(m, next_knot(m, m->state.time, until), until, err);
        if (!st && tick && tick(ctx, &m->state) && m->state.time < until) {
            st = mt_step_refresh(m, true, err);
            if (!st) st = mt_fail(err, MT_ESTOPPED, "stopped at time %.6g", m->state.time);
            return st;
        }
    }
    m->state.finished = st == MT_OK;
    return st;
}
