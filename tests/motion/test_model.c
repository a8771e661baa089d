/* Proved here: growth rates of single waves follow Cahn's amplification factor with periodic and mirror
 * walls, from mt_model_growth and from a run; steppers have their order; the energy falls, the mean stays;
 * one and two threads give the same bits; rejected input says why; coupled fields, own right-hand sides and
 * varying mobility agree with small independent computations; no allocation failure leaks. */
#include "tests/motion/scene.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/base/random.h"

static const mt_wall periodic[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
static const mt_wall mirror[3] = {MT_MIRROR, MT_MIRROR, MT_MIRROR};

static double wave_k;
static double wave(double x, double y, double z) {
    (void)y, (void)z;
    return 0.5 + 1e-6 * cos(wave_k * x);
}

static double noisy(double x, double y, double z) {
    double v;
    mt_random_fill(MT_RANDOM_UNIFORM, 7, (uint64_t)(x * 13 + 1000 * y + 100000 * z), 1, 0, 0, &v);
    return 0.5 + 0.05 * v;
}

static double variance(const mt_field *f) {
    double mean = 0, sum = 0;
    for (size_t i = 0; i < f->grid->cells; i++) mean += f->values[i];
    mean /= (double)f->grid->cells;
    for (size_t i = 0; i < f->grid->cells; i++) sum += (f->values[i] - mean) * (f->values[i] - mean);
    return sum / (double)f->grid->cells;
}

/* Cahn, Acta Metall. 9 (1961) 795: R = -M k^2 (f'' + kappa k^2); double well W = kappa = M = 1 at 1/2: f'' =
 * -1, largest rate 1/4 at k = sqrt(1/2). */
static void growth_at(const mt_wall *walls, int mode) {
    scene s;
    int n[2] = {64, 8};
    double h[2] = {1, 1}, rate, swing, mean[1] = {0.5};
    wave_k = (walls == mirror ? 1 : 2) * M_PI * mode / 64;
    scene_open(&s, 2, n, h, walls, 1);
    fill(s.c, wave);
    check_ok(mt_model_energy(s.m, double_well(&s, s.nc, 1, 1), &s.err), &s.err);
    check_ok(mt_model_conserve(s.m, s.c, num(&s, 1), &s.err), &s.err);
    double k[3] = {wave_k, 0, 0}, cahn = -wave_k * wave_k * (-1 + wave_k * wave_k);
    check_ok(mt_model_growth(s.m, mean, k, 0, &rate, &swing, &s.err), &s.err);
    check_close(rate, cahn, 1e-12, 1e-15);
    mt_step_options o = {.accuracy = 1e-5, .free_energy = true};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    double before = sqrt(variance(s.c)), duration = 2;
    check_ok(mt_model_advance(s.m, duration, NULL, NULL, &s.err), &s.err);
    double seen = log(sqrt(variance(s.c)) / before) / duration;
    check_close(seen, cahn, 0, 0.25e-4); /* 1e-4 of the largest rate */
    scene_close(&s);
}

static void waves_grow_as_cahn_says(void **state) {
    (void)state;
    int periodic_modes[] = {3, 7, 10, 12},
        mirror_modes[] = {5, 14, 20, 25}; /* below and above critical k = 1 */
    for (int i = 0; i < 4; i++) {
        growth_at(periodic, periodic_modes[i]);
        growth_at(mirror, mirror_modes[i]);
    }
}

static void start_noisy(scene *s, int threads, const mt_wall *walls, mt_step_options o) {
    int n[2] = {48, 40};
    double h[2] = {1, 1};
    scene_open(s, 2, n, h, walls, threads);
    fill(s->c, noisy);
    check_ok(mt_model_energy(s->m, double_well(s, s->nc, 1, 1), &s->err), &s->err);
    check_ok(mt_model_conserve(s->m, s->c, num(s, 1), &s->err), &s->err);
    check_ok(mt_model_start(s->m, &o, 0, &s->err), &s->err);
}

typedef struct falling {
    double last;
    uint64_t rises;
} falling;

static bool watch(void *ctx, const mt_run_state *state) {
    falling *f = ctx;
    if (state->energy > f->last * (1 + 1e-11)) f->rises++;
    f->last = state->energy;
    return false;
}

static void energy_falls_and_mean_stays(void **state) {
    (void)state;
    scene s;
    falling f = {INFINITY, 0};
    start_noisy(&s, 1, periodic, (mt_step_options){.free_energy = true});
    double mean = 0, after = 0;
    for (size_t i = 0; i < s.grid->cells; i++) mean += s.c->values[i];
    check_ok(mt_model_advance(s.m, 1000, watch, &f, &s.err), &s.err);
    for (size_t i = 0; i < s.grid->cells; i++) after += s.c->values[i];
    assert_int_equal(f.rises, 0);
    check_close(after, mean, 1e-13, 0);
    const mt_run_state *r = mt_model_state(s.m);
    assert_true(r->time == 1000);
    print_message("steps %llu rejected %llu rhs %llu dt %g..%g energy %.8g variance %.6g\n",
                  (unsigned long long)r->steps, (unsigned long long)r->rejected,
                  (unsigned long long)r->evaluations, r->step_min, r->step_max, r->energy, variance(s.c));
    assert_true(variance(s.c) > 0.1); /* unmixed */
    scene_close(&s);
}

static void run_fixed(mt_stepper stepper, double dt, double *values, size_t cells) {
    scene s;
    start_noisy(&s, 1, mirror, (mt_step_options){.free_energy = true});
    check_ok(mt_model_advance(s.m, 20, NULL, NULL, &s.err), &s.err); /* smooth by then */
    /* a past of small steps: a first-order start would show */
    mt_step_options start = {.stepper = MT_STEPPER_SBDF3, .fixed = 0.02 / 64},
                    o = {.stepper = stepper, .fixed = dt};
    check_ok(mt_model_options(s.m, &start, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 20.04, NULL, NULL, &s.err), &s.err);
    check_ok(mt_model_options(s.m, &o, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 24.04, NULL, NULL, &s.err), &s.err);
    memcpy(values, s.c->values, cells * sizeof *values);
    scene_close(&s);
}

/* A fixed step beyond the third order's limit is taken by the second: nothing grows in what is at rest. */
static void long_fixed_steps_stay_stable(void **state) {
    (void)state;
    scene s;
    start_noisy(&s, 1, periodic, (mt_step_options){.free_energy = true});
    check_ok(mt_model_advance(s.m, 3000, NULL, NULL, &s.err), &s.err);
    double before = mt_model_state(s.m)->energy;
    mt_step_options o = {.fixed = 25, .free_energy = true};
    check_ok(mt_model_options(s.m, &o, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 12000, NULL, NULL, &s.err), &s.err);
    assert_true(mt_model_state(s.m)->energy <= before);
    scene_close(&s);
}

static double distance(const double *a, const double *b, size_t n) {
    double sum = 0;
    for (size_t i = 0; i < n; i++) sum += (a[i] - b[i]) * (a[i] - b[i]);
    return sqrt(sum / (double)n);
}

static void steppers_have_their_order(void **state) {
    (void)state;
    enum { CELLS = 48 * 40 };
    static double fine[CELLS], a[CELLS], b[CELLS];
    const double dt = 0.02;
    const double promised[] = {3, 2, 1, 2};
    run_fixed(MT_STEPPER_SBDF3, dt / 8, fine, CELLS); /* its error is a five hundredth of those below */
    for (int stepper = MT_STEPPER_SBDF3; stepper <= MT_STEPPER_ETDRK2; stepper++) {
        run_fixed((mt_stepper)stepper, dt, a, CELLS);
        run_fixed((mt_stepper)stepper, dt / 2, b, CELLS);
        double ea = distance(a, fine, CELLS), eb = distance(b, fine, CELLS), order = log2(ea / eb);
        print_message("stepper %d: errors %.3g %.3g order %.3f\n", stepper, ea, eb, order);
        assert_true(fabs(order - promised[stepper]) < 0.1);
    }
}

static void threads_give_the_same_bits(void **state) {
    (void)state;
    const mt_wall mixed[2] = {MT_MIRROR, MT_PERIODIC};
    const mt_wall *walls[3] = {periodic, mirror, mixed};
    for (int w = 0; w < 3; w++) {
        scene one, two;
        start_noisy(&one, 1, walls[w], (mt_step_options){.free_energy = true});
        start_noisy(&two, 2, walls[w], (mt_step_options){.free_energy = true});
        check_ok(mt_model_advance(one.m, 60, NULL, NULL, &one.err), &one.err);
        check_ok(mt_model_advance(two.m, 60, NULL, NULL, &two.err), &two.err);
        assert_memory_equal(one.c->values, two.c->values, one.grid->cells * sizeof(double));
        assert_true(mt_model_state(one.m)->energy == mt_model_state(two.m)->energy);
        scene_close(&one);
        scene_close(&two);
    }
}

static void oracle_rates(scene *s, const mt_expr *rc, const mt_expr *re, const double *c, const double *e,
                         double *dc, double *de) {
    mt_symbol *symbols[2] = {s->c->symbol, s->e->symbol};
    const double *values[2] = {c, e};
    check_ok(mt_expr_evaluate(rc, s->grid, 2, symbols, values, 0, dc, &s->err), &s->err);
    if (re) check_ok(mt_expr_evaluate(re, s->grid, 2, symbols, values, 0, de, &s->err), &s->err);
}

/* Small independent solver: the explicit midpoint rule on the oracle's right-hand side. */
static void agrees_with_oracle(scene *s, const mt_expr *rc, const mt_expr *re, double until, int steps,
                               double tolerance) {
    enum { MOST = 200 };
    static double c[MOST], e[MOST], hc[MOST], he[MOST], dc[MOST], de[MOST];
    size_t cells = s->grid->cells;
    double dt = until / steps, change = 0;
    assert_true(cells <= MOST);
    memcpy(c, s->c->values, cells * 8);
    memcpy(e, s->e->values, cells * 8);
    for (int i = 0; i < steps; i++) {
        oracle_rates(s, rc, re, c, e, dc, de);
        for (size_t j = 0; j < cells; j++)
            hc[j] = c[j] + dt / 2 * dc[j], he[j] = e[j] + (re ? dt / 2 * de[j] : 0);
        oracle_rates(s, rc, re, hc, he, dc, de);
        for (size_t j = 0; j < cells; j++) c[j] += dt * dc[j], e[j] += re ? dt * de[j] : 0;
    }
    check_ok(mt_model_advance(s->m, until, NULL, NULL, &s->err), &s->err);
    for (size_t j = 0; j < cells; j++) change = fmax(change, fabs(c[j] - 0.5));
    for (size_t j = 0; j < cells; j++) check_close(s->c->values[j], c[j], 0, tolerance * change);
    for (size_t j = 0; j < cells && re; j++) check_close(s->e->values[j], e[j], 0, tolerance * change);
}

static double smooth(double x, double y, double z) {
    (void)z;
    return 0.5 + 0.2 * cos(2 * M_PI * x / 12) + 0.1 * cos(2 * M_PI * y / 10);
}
static double smooth_e(double x, double y, double z) {
    (void)z;
    return 0.4 + 0.2 * cos(2 * M_PI * (x / 12 + 0.0)) * cos(2 * M_PI * y / 10);
}

static void varying_mobility_and_two_fields(void **state) {
    (void)state;
    scene s;
    int n[2] = {12, 10};
    double h[2] = {1, 1};
    const mt_wall mixed[2] = {MT_MIRROR, MT_PERIODIC};
    const mt_wall *walls[2] = {periodic, mixed};
    for (int w = 0; w < 2; w++) {
        scene_open(&s, 2, n, h, walls[w], 2);
        fill(s.c, smooth);
        fill(s.e, smooth_e);
        /* coupled energy, mobility and gradient coefficient that vary */
        const mt_expr *energy = add(&s, double_well(&s, s.nc, 1, 1), mul(&s, s.nc, pw(&s, s.ne, 2)));
        energy =
            add(&s, energy,
                mul(&s, add(&s, num(&s, 0.5), mul(&s, num(&s, 0.2), s.nc)), fun(&s, MT_GRADSQ_OP, s.ne)));
        const mt_expr *mobility = sub(&s, num(&s, 1), mul(&s, num(&s, 0.8), pw(&s, s.ne, 2)));
        check_ok(mt_model_energy(s.m, energy, &s.err), &s.err);
        check_ok(mt_model_conserve(s.m, s.c, mobility, &s.err), &s.err);
        check_ok(mt_model_relax(s.m, s.e, num(&s, 0.7), &s.err), &s.err);
        mt_step_options o = {.accuracy = 1e-5, .free_energy = true};
        check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
        const mt_expr *mc, *me;
        check_ok(mt_model_potential(s.m, s.c, &mc, &s.err), &s.err);
        check_ok(mt_model_potential(s.m, s.e, &me, &s.err), &s.err);
        const mt_expr *rc = num(&s, 0);
        for (int a = 0; a < 2; a++)
            rc = add(&s, rc, mt_build_deriv(&s.b, a, mul(&s, mobility, mt_build_deriv(&s.b, a, mc))));
        agrees_with_oracle(&s, rc, mul(&s, num(&s, -0.7), me), 0.5, 150, 3e-4);
        mt_expr_unref(&mc);
        mt_expr_unref(&me);
        scene_close(&s);
    }
}

static void own_right_hand_side_with_source(void **state) {
    (void)state;
    scene s;
    int n[2] = {12, 10};
    double h[2] = {1, 1};
    scene_open(&s, 2, n, h, periodic, 1);
    fill(s.c, smooth);
    fill(s.e, smooth_e);
    /* diffusion, advection with a velocity, reaction with the other field, constant source */
    const mt_expr *rhs = mul(&s, num(&s, 0.3), fun(&s, MT_LAPLACIAN_OP, s.nc));
    rhs = sub(&s, rhs, mul(&s, num(&s, 0.5), mt_build_deriv(&s.b, 0, s.nc)));
    rhs = add(&s, rhs, sub(&s, num(&s, 0.05), mul(&s, s.nc, s.ne)));
    check_ok(mt_model_evolve(s.m, s.c, rhs, &s.err), &s.err);
    check_ok(mt_model_still(s.m, s.e, &s.err), &s.err);
    mt_step_options o = {.accuracy = 1e-5};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    agrees_with_oracle(&s, rhs, NULL, 1, 100, 3e-4);
    scene_close(&s);
}

static void exact_landing_on_kinks(void **state) {
    (void)state;
    scene s;
    int n[1] = {32};
    double h[1] = {1};
    mt_symbol *T;
    scene_open(&s, 1, n, h, periodic, 1);
    wave_k = 2 * M_PI * 2 / 32;
    fill(s.c, wave);
    check_ok(mt_symbol_new(&T, s.forms, MT_SYMBOL_PARAM, "T", NULL, &s.err), &s.err);
    /* dc/dt = -T(t) c with T ramping from 0 to 1 over 1..3, then jumping to 2: amplitude exp(-(1 + 2 * 1)) at
     * t = 5 - 4*/
    double time[] = {0, 1, 3, 3}, value[] = {0, 0, 1, 2};
    check_ok(mt_symbol_set_history(T, 4, time, value, &s.err), &s.err);
    const mt_expr *rhs = mul(&s, num(&s, -1), mul(&s, mt_build_symbol(&s.b, T), s.nc));
    check_ok(mt_model_evolve(s.m, s.c, rhs, &s.err), &s.err);
    mt_step_options o = {.accuracy = 1e-6};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 4, NULL, NULL, &s.err), &s.err);
    check_close(s.c->values[0], (0.5 + 1e-6 * cos(wave_k * 0.5)) * exp(-1 - 2), 1e-5, 0);
    mt_symbol_unref(&T);
    scene_close(&s);
}

static void bad_models_say_why(void **state) {
    (void)state;
    scene s;
    int n[2] = {8, 8}, n2[2] = {9, 8};
    double h[2] = {1, 1};
    scene_open(&s, 2, n, h, periodic, 1);
    assert_int_equal(mt_model_start(s.m, NULL, 0, &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "no equation"));
    assert_int_equal(mt_model_conserve(s.m, s.c, num(&s, 1), &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "no energy"));
    check_ok(mt_model_energy(s.m, double_well(&s, s.nc, 1, 1), &s.err), &s.err);
    assert_int_equal(mt_model_relax(s.m, s.e, num(&s, 1), &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "does not occur"));
    assert_int_equal(mt_model_conserve(s.m, s.c, num(&s, -2), &s.err), MT_EMOBILITY);
    assert_non_null(strstr(s.err.text, "-2"));
    check_ok(mt_model_conserve(s.m, s.c, sub(&s, s.nc, num(&s, 0.5)), &s.err), &s.err);
    fill(s.c, noisy);
    assert_int_equal(mt_model_start(s.m, NULL, 0, &s.err), MT_EMOBILITY);
    assert_non_null(strstr(s.err.text, "cell ("));
    mt_grid *other;
    mt_field *f;
    check_ok(mt_grid_new(&other, 2, n2, h, periodic, &s.err), &s.err);
    check_ok(mt_field_new(&f, s.forms, other, "d", &s.err), &s.err);
    assert_int_equal(mt_model_evolve(s.m, f, num(&s, 1), &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "another grid"));
    mt_field_unref(&f);
    mt_grid_unref(&other);
    scene_close(&s);
}

static void logarithm_at_the_start(void **state) {
    (void)state;
    scene s;
    int n[2] = {8, 8};
    double h[2] = {1, 1};
    scene_open(&s, 2, n, h, periodic, 1);
    const mt_expr *f = add(&s, mul(&s, s.nc, fun(&s, MT_LOG_OP, s.nc)), fun(&s, MT_GRADSQ_OP, s.nc));
    check_ok(mt_model_energy(s.m, f, &s.err), &s.err);
    check_ok(mt_model_conserve(s.m, s.c, num(&s, 1), &s.err), &s.err);
    fill(s.c, noisy);
    for (size_t i = 0; i < s.grid->cells; i++) s.c->values[i] -= 0.5;
    assert_int_equal(mt_model_start(s.m, NULL, 0, &s.err), MT_EDOMAIN);
    assert_non_null(strstr(s.err.text, "logarithm"));
    scene_close(&s);
}

static mt_status whole_run(void *ctx, mt_error *err) {
    mt_forms *forms = NULL;
    mt_grid *grid = NULL;
    mt_field *c = NULL;
    mt_model *m = NULL;
    mt_builder b = {.err = err};
    int n[2] = {8, 6};
    double h[2] = {1, 1};
    (void)ctx;
    mt_status st = mt_forms_new(&forms, err);
    if (!st) st = mt_grid_new(&grid, 2, n, h, mirror, err);
    if (!st) st = mt_field_new(&c, forms, grid, "c", err);
    if (!st) st = mt_model_new(&m, forms, grid, NULL, err);
    b.forms = forms;
    if (!st) {
        const mt_expr *x = mt_build_symbol(&b, c->symbol), *x2 = mt_build_mul(&b, x, x);
        const mt_expr *f = mt_build_add(&b, mt_build_mul(&b, x2, x2), mt_build_unary(&b, MT_GRADSQ_OP, x));
        st = b.status;
        for (size_t i = 0; i < grid->cells; i++) c->values[i] = 0.1 * (double)(i % 5);
        if (!st) st = mt_model_energy(m, f, err);
        if (!st) st = mt_model_conserve(m, c, x2, err);
    }
    char *text = NULL;
    if (!st) st = mt_model_describe(m, &text, err);
    mt_free(text);
    if (!st) st = mt_model_start(m, NULL, 0, err);
    if (!st) st = mt_model_advance(m, 1e-3, NULL, NULL, err);
    mt_build_end(&b);
    mt_model_free(&m);
    mt_field_unref(&c);
    mt_grid_unref(&grid);
    mt_forms_free(&forms);
    return st;
}

static void no_allocation_failure_leaks(void **state) {
    (void)state;
    check_allocation_sweep(whole_run, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(waves_grow_as_cahn_says),
        cmocka_unit_test(energy_falls_and_mean_stays),
        cmocka_unit_test(steppers_have_their_order),
        cmocka_unit_test(long_fixed_steps_stay_stable),
        cmocka_unit_test(threads_give_the_same_bits),
        cmocka_unit_test(varying_mobility_and_two_fields),
        cmocka_unit_test(own_right_hand_side_with_source),
        cmocka_unit_test(exact_landing_on_kinks),
        cmocka_unit_test(bad_models_say_why),
        cmocka_unit_test(logarithm_at_the_start),
        cmocka_unit_test(no_allocation_failure_leaks),
    };
    return cmocka_run_group_tests_name("model", tests, NULL, NULL);
}
