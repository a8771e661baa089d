#include "core/motion/model_inside.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

mt_status mt_model_new(mt_model **out, mt_forms *forms, mt_grid *grid, mt_pool *pool, mt_error *err) {
    mt_model *m;
    *out = NULL;
    mt_status st = mt_new(&m, 1, sizeof *m, "a model", err);
    if (st) return st;
    m->forms = forms;
    m->grid = mt_grid_ref(grid);
    m->pool = pool;
    st = mt_sweeper_new(&m->sweeper, grid, pool, err);
    if (st) mt_model_free(&m);
    *out = m;
    return st;
}

static void free_mover(mt_mover *v) {
    mt_expr_unref(&v->given), mt_expr_unref(&v->source);
    for (int a = 0; a < 3; a++) mt_expr_unref(&v->velocity[a]);
    for (int i = 0; i < v->couplings; i++) mt_expr_unref(&v->coupling[i].given);
    for (int i = 0; i < v->noises; i++) mt_expr_unref(&v->noise[i].amplitude);
    mt_free(v->coupling), mt_free(v->noise);
    mt_field_unref(&v->field);
}

void mt_model_free(mt_model **model) {
    mt_model *m = *model;
    *model = NULL;
    if (!m) return;
    mt_model_forget(m);
    for (int i = 0; i < m->n; i++) free_mover(&m->mover[i]);
    mt_free(m->mover);
    mt_expr_unref(&m->energy);
    mt_sweeper_free(&m->sweeper);
    mt_grid_unref(&m->grid);
    mt_free(m);
}

static mt_status check_formula(const mt_model *m, const mt_expr *e, mt_error *err) {
    mt_grid *grid = NULL;
    if (e->forms != m->forms) return mt_fail(err, MT_EINPUT, "the formula belongs to another script");
    unsigned has = mt_expr_contents(e);
    if (has & MT_HAS_NOISE)
        return mt_fail(err, MT_EINPUT,
                       "noise makes starting states; it cannot stand in an equation (each step would "
                       "use the same numbers)");
    if (has & MT_HAS_WAVE) return mt_fail(err, MT_EINPUT, "a wavenumber cannot stand in an equation");
    mt_status st = mt_expr_grid(e, &grid, err);
    if (st) return st;
    if (grid && !mt_grid_equal(grid, m->grid))
        return mt_fail(err, MT_EINPUT, "the formula's fields live on another grid than the model");
    return MT_OK;
}

mt_status mt_model_energy(mt_model *m, const mt_expr *density, mt_error *err) {
    mt_status st = check_formula(m, density, err);
    if (st) return mt_context(err, st, "energy");
    mt_model_forget(m);
    mt_expr_unref(&m->energy);
    m->energy = mt_expr_ref(density);
    return MT_OK;
}

static mt_status declare(mt_model *m, mt_field *field, mt_motion motion, const mt_expr *given,
                         mt_error *err) {
    if (field->grid != m->grid && !mt_grid_equal(field->grid, m->grid))
        return mt_fail(err, MT_EINPUT, "the field lives on another grid than the model");
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].field == field)
            return mt_fail(err, MT_EINPUT, "how the field moves was said already");
    mt_status st = given ? check_formula(m, given, err) : MT_OK;
    if (st) return st;
    if (m->n == m->room) {
        int room = m->room ? 2 * m->room : 4;
        mt_mover *more = mt_resize(m->mover, (size_t)room, sizeof *more);
        if (!more) return mt_fail(err, MT_ENOMEM, "no memory for another field");
        m->mover = more;
        m->room = room;
    }
    mt_model_forget(m);
    mt_mover *v = &m->mover[m->n++];
    memset(v, 0, sizeof *v);
    v->field = mt_field_ref(field);
    v->motion = motion;
    v->given = given ? mt_expr_ref(given) : NULL;
    return MT_OK;
}

/* A negative mobility makes the equation ill-posed: short waves would grow without bound. */
static mt_status check_coefficient(const mt_expr *e, const char *what, mt_error *err) {
    double value = 0;
    if (!mt_expr_uniform(e) || (mt_expr_contents(e) & MT_HAS_TIME)) return MT_OK;
    mt_status st = mt_expr_number(e, 0, &value, err);
    if (st) return st;
    if (!(value >= 0) || isinf(value))
        return mt_fail(err, MT_EMOBILITY, "%s is %.6g; it has to be zero or positive and finite", what,
                       value);
    return MT_OK;
}

static mt_status declare_driven(mt_model *m, mt_field *field, mt_motion motion, const mt_expr *given,
                                const char *what, mt_error *err) {
    const char *name = field->symbol->name;
    mt_expr const *node = NULL;
    mt_status st = mt_expr_symbol(&node, m->forms, field->symbol, err);
    if (st) return st;
    bool contained = m->energy && mt_expr_contains(m->energy, node);
    mt_expr_unref(&node);
    if (!m->energy)
        return mt_fail(err, MT_EINPUT, "field '%s': the model has no energy to derive a driving force from",
                       name);
    if (!contained)
        return mt_fail(err, MT_EINPUT, "field '%s' does not occur in the energy: nothing drives it", name);
    st = check_coefficient(given, what, err);
    if (!st) st = declare(m, field, motion, given, err);
    return st ? mt_context(err, st, "field '%s'", name) : st;
}

mt_status mt_model_conserve(mt_model *m, mt_field *field, const mt_expr *mobility, mt_error *err) {
    return declare_driven(m, field, MT_MOTION_CONSERVE, mobility, "the mobility", err);
}

mt_status mt_model_relax(mt_model *m, mt_field *field, const mt_expr *rate, mt_error *err) {
    return declare_driven(m, field, MT_MOTION_RELAX, rate, "the rate", err);
}

mt_status mt_model_evolve(mt_model *m, mt_field *field, const mt_expr *rhs, mt_error *err) {
    mt_status st = declare(m, field, MT_MOTION_EVOLVE, rhs, err);
    return st ? mt_context(err, st, "field '%s'", field->symbol->name) : st;
}

mt_status mt_model_still(mt_model *m, mt_field *field, mt_error *err) {
    mt_status st = declare(m, field, MT_MOTION_STILL, NULL, err);
    return st ? mt_context(err, st, "field '%s'", field->symbol->name) : st;
}

/* --- more terms
 * ------------------------------------------------------------------------------------------------------- */

static mt_status find_mover(mt_model *m, const mt_field *field, int *number, mt_error *err) {
    for (int i = 0; i < m->n; i++)
        if (m->mover[i].field == field && m->mover[i].motion != MT_MOTION_STILL) {
            *number = i;
            return MT_OK;
        }
    return mt_fail(err, MT_EINPUT, "field '%s': say first how it moves (conserve, relax or evolve)",
                   field->symbol->name);
}

mt_status mt_model_couple(mt_model *m, const mt_field *field, const mt_field *other,
                          const mt_expr *coefficient, mt_error *err) {
    int i = 0, j = 0;
    mt_status st = find_mover(m, field, &i, err);
    if (!st) st = find_mover(m, other, &j, err);
    if (!st) st = check_formula(m, coefficient, err);
    if (st) return mt_context(err, st, "field '%s'", field->symbol->name);
    mt_mover *v = &m->mover[i];
    MT_REQUIRE(i != j, err);
    if (v->motion != m->mover[j].motion || v->motion == MT_MOTION_EVOLVE)
        return mt_fail(err, MT_EINPUT,
                       "fields '%s' and '%s': a matrix couples fields that are both conserved "
                       "or both relaxing",
                       field->symbol->name, other->symbol->name);
    mt_coupling *more = mt_resize(v->coupling, (size_t)v->couplings + 1, sizeof *more);
    if (!more) return mt_fail(err, MT_ENOMEM, "no memory for a coupling");
    mt_model_forget(m);
    v->coupling = more;
    v->coupling[v->couplings++] = (mt_coupling){j, mt_expr_ref(coefficient)};
    return MT_OK;
}

mt_status mt_model_source(mt_model *m, const mt_field *field, const mt_expr *source, mt_error *err) {
    int i = 0;
    mt_status st = find_mover(m, field, &i, err);
    if (!st) st = check_formula(m, source, err);
    if (st) return mt_context(err, st, "source of field '%s'", field->symbol->name);
    mt_model_forget(m);
    mt_expr_unref(&m->mover[i].source);
    m->mover[i].source = mt_expr_ref(source);
    return MT_OK;
}

mt_status mt_model_carry(mt_model *m, const mt_field *field, const mt_expr *const velocity[], mt_error *err) {
    int i = 0;
    mt_status st = find_mover(m, field, &i, err);
    for (int a = 0; a < m->grid->dim && !st; a++) st = check_formula(m, velocity[a], err);
    if (st) return mt_context(err, st, "velocity of field '%s'", field->symbol->name);
    mt_model_forget(m);
    for (int a = 0; a < m->grid->dim; a++) {
        mt_expr_unref(&m->mover[i].velocity[a]);
        m->mover[i].velocity[a] = mt_expr_ref(velocity[a]);
    }
    return MT_OK;
}

mt_status mt_model_keep_mean(mt_model *m, const mt_field *field, mt_error *err) {
    int i = 0;
    mt_status st = find_mover(m, field, &i, err);
    if (st) return st;
    if (m->mover[i].motion != MT_MOTION_RELAX || !mt_expr_uniform(m->mover[i].given))
        return mt_fail(
            err, MT_EINPUT,
            "field '%s': its mean can be kept where the field relaxes with a rate that is the same "
            "in every cell (a conserved field keeps its mean anyway)",
            field->symbol->name);
    mt_model_forget(m);
    m->mover[i].keeps_mean = true;
    return MT_OK;
}

mt_status mt_model_noise(mt_model *m, const mt_field *field, uint64_t seed, int stream,
                         const mt_expr *amplitude, mt_error *err) {
    int i = 0;
    mt_status st = find_mover(m, field, &i, err);
    if (!st) st = check_formula(m, amplitude, err);
    if (st) return mt_context(err, st, "thermal noise of field '%s'", field->symbol->name);
    if (mt_expr_contents(amplitude) & MT_HAS_SPECTRAL)
        return mt_fail(err, MT_EUNSUPPORTED, "thermal noise of field '%s': its mobility contains derivatives",
                       field->symbol->name);
    mt_mover *v = &m->mover[i];
    mt_thermal *more = mt_resize(v->noise, (size_t)v->noises + 1, sizeof *more);
    if (!more) return mt_fail(err, MT_ENOMEM, "no memory for thermal noise");
    mt_model_forget(m);
    v->noise = more;
    v->noise[v->noises++] = (mt_thermal){seed, stream, mt_expr_ref(amplitude)};
    return MT_OK;
}

mt_status mt_model_potential(mt_model *m, const mt_field *field, const mt_expr **out, mt_error *err) {
    const mt_expr *node = NULL;
    *out = NULL;
    if (!m->energy) return mt_fail(err, MT_EINPUT, "the model has no energy, so there is no potential");
    mt_status st = mt_expr_symbol(&node, m->forms, field->symbol, err);
    if (st) return st;
    st = mt_expr_variation(out, m->energy, node, m->grid->dim, err);
    mt_expr_unref(&node);
    return st;
}

int mt_model_fields(const mt_model *m) {
    return m->n;
}

mt_field *mt_model_field(const mt_model *m, int i) {
    return i >= 0 && i < m->n ? m->mover[i].field : NULL;
}

const mt_run_state *mt_model_state(const mt_model *m) {
    return &m->state;
}
