/* Proved here: mobility matrices (against the eigenvalues of the linearised equations and at large steps),
 * what is said of matrices that are not Onsager's; sources, imposed velocities and kept means against closed
 * forms; filters in equations; anisotropic gradient energy; growth with several fields and directions. */
#include "tests/motion/scene.h"

#include <math.h>
#include <string.h>

#include "core/base/random.h"
#include "core/formula/filter.h"

static const mt_wall periodic[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};

static int nx = 32;
static double cosine(double x, double y, double z) {
    (void)y, (void)z;
    return 0.3 + 1e-3 * cos(2 * M_PI * 3 * x / nx);
}
static double sine(double x, double y, double z) {
    (void)y, (void)z;
    return 0.3 - 2e-3 * cos(2 * M_PI * 3 * x / nx);
}
static double rough(double x, double y, double z) {
    double v;
    (void)z;
    mt_random_fill(MT_RANDOM_UNIFORM, 9, (uint64_t)(x * 13 + 1000 * y), 1, 0, 0, &v);
    return 0.33 + 0.05 * v;
}
static double rough_e(double x, double y, double z) {
    return 0.66 - rough(y, x, z);
}

static double mean_of(const mt_field *f) {
    double sum = 0;
    for (size_t i = 0; i < f->grid->cells; i++) sum += f->values[i];
    return sum / (double)f->grid->cells;
}

/* amplitude of cos(2 pi 3 x / nx) */
static double amplitude(const mt_field *f) {
    double sum = 0;
    for (size_t i = 0; i < f->grid->cells; i++)
        sum += 2 * f->values[i] * cos(2 * M_PI * 3 * ((double)(i % (size_t)nx) + 0.5) / nx);
    return sum / (double)f->grid->cells;
}

/* c^2 + e^2 + c e + gradient terms: a stable quadratic energy of two fields. */
static const mt_expr *quadratic(scene *s) {
    const mt_expr *f = add(s, add(s, pw(s, s->nc, 2), pw(s, s->ne, 2)), mul(s, s->nc, s->ne));
    f = add(s, f, mul(s, num(s, 0.5), fun(s, MT_GRADSQ_OP, s->nc)));
    return add(s, f, mul(s, num(s, 0.9), fun(s, MT_GRADSQ_OP, s->ne)));
}

static void open_two(scene *s, double off_diagonal, double other) {
    int n[2] = {nx, 4};
    double h[2] = {1, 1};
    scene_open(s, 2, n, h, periodic, 1);
    fill(s->c, cosine), fill(s->e, sine);
    check_ok(mt_model_energy(s->m, quadratic(s), &s->err), &s->err);
    check_ok(mt_model_conserve(s->m, s->c, num(s, 1), &s->err), &s->err);
    check_ok(mt_model_conserve(s->m, s->e, num(s, 1), &s->err), &s->err);
    check_ok(mt_model_couple(s->m, s->c, s->e, num(s, off_diagonal), &s->err), &s->err);
    check_ok(mt_model_couple(s->m, s->e, s->c, num(s, other), &s->err), &s->err);
}

/* d/dt (c, e) = -k^2 M H (c, e), solved by the matrix exponential's series. */
static void matrix_decay(double m12, double k, double t, double v[2]) {
    double h[2][2] = {{2 + k * k, 1}, {1, 2 + 1.8 * k * k}}, m[2][2] = {{1, m12}, {m12, 1}}, a[2][2],
           term[2] = {v[0], v[1]};
    for (int i = 0; i < 2; i++)
        for (int j = 0; j < 2; j++) a[i][j] = -k * k * t * (m[i][0] * h[0][j] + m[i][1] * h[1][j]);
    for (int n = 1; n < 60; n++) {
        double next[2] = {a[0][0] * term[0] + a[0][1] * term[1], a[1][0] * term[0] + a[1][1] * term[1]};
        for (int i = 0; i < 2; i++) term[i] = next[i] / n, v[i] += term[i];
    }
}

static void mobility_matrices(void **state) {
    (void)state;
    scene s;
    const double k = 2 * M_PI * 3 / 32, wave[3] = {k, 0, 0}, mean[2] = {0.3, 0.3};
    double v[2] = {1e-3, -2e-3}, rate, swing;
    open_two(&s, 0.9, 0.9);
    mt_step_options o = {.accuracy = 1e-5, .free_energy = true};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    check_close(mt_model_state(s.m)->matrix_lowest, 0.1, 1e-12, 0);
    check_ok(mt_model_advance(s.m, 2, NULL, NULL, &s.err), &s.err);
    matrix_decay(0.9, k, 2, v);
    check_close(amplitude(s.c), v[0], 0, 1e-7);
    check_close(amplitude(s.e), v[1], 0, 1e-7);
    /* the slower eigenvalue of k^2 M H, by hand */
    double h11 = 2 + k * k, h22 = 2 + 1.8 * k * k, a = h11 + 0.9, b = 1 + 0.9 * h22, c = 1 + 0.9 * h11,
           d = h22 + 0.9;
    double slow = -k * k * ((a + d) / 2 - sqrt((a - d) * (a - d) / 4 + b * c));
    check_ok(mt_model_growth(s.m, mean, wave, 0, &rate, &swing, &s.err), &s.err);
    check_close(rate, slow, 1e-12, 0);
    check_close(swing, 0, 0, 1e-14);
    scene_close(&s);
}

/* Short waves of coupled fields decay at rates of 10^3 here; the block takes them at steps of 10. Without it
 * the off-diagonal elements above a third of the diagonal would make the scheme unstable. */
static void coupled_blocks_allow_large_steps(void **state) {
    (void)state;
    scene s;
    open_two(&s, 0.9, 0.9);
    fill(s.c, rough), fill(s.e, rough_e);
    mt_step_options o = {.fixed = 10, .free_energy = true};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    double before = mt_model_state(s.m)->energy, mean = mean_of(s.c);
    check_ok(mt_model_advance(s.m, 3000, NULL, NULL, &s.err), &s.err);
    check_close(mean_of(s.c), mean, 1e-13, 0);
    assert_true(mt_model_state(s.m)->energy < before);
    for (size_t i = 0; i < s.grid->cells; i++) check_close(s.c->values[i], mean, 0, 1e-6);
    scene_close(&s);
}

static void matrices_are_judged(void **state) {
    (void)state;
    scene s;
    mt_step_options o = {.free_energy = false};
    open_two(&s, 0.5, 0.2);
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    check_close(mt_model_state(s.m)->matrix_skew, 0.3, 1e-12, 0);
    scene_close(&s);
    open_two(&s, 1.5, 1.5); /* short waves would grow without bound */
    assert_int_equal(mt_model_start(s.m, &o, 0, &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "-0.333"));
    scene_close(&s);
    /* positive about the means, not in every cell */
    open_two(&s, 0, 0);
    fill(s.c, rough);
    const mt_expr *steep = mul(&s, num(&s, 20), sub(&s, s.nc, num(&s, 0.33)));
    check_ok(mt_model_couple(s.m, s.c, s.e, steep, &s.err), &s.err);
    check_ok(mt_model_couple(s.m, s.e, s.c, steep, &s.err), &s.err);
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    size_t cell = mt_model_state(s.m)->matrix_cell;
    double off = fabs(20 * (s.c->values[cell] - 0.33));
    check_close(mt_model_state(s.m)->matrix_lowest, (1 - off) / fmax(1, off), 1e-6, 1e-6);
    assert_true(off > 1);
    scene_close(&s);
    int n[2] = {nx, 4};
    double h[2] = {1, 1};
    scene_open(&s, 2, n, h, periodic, 1);
    check_ok(mt_model_energy(s.m, quadratic(&s), &s.err), &s.err);
    check_ok(mt_model_conserve(s.m, s.c, num(&s, 1), &s.err), &s.err);
    assert_int_equal(mt_model_couple(s.m, s.c, s.e, num(&s, 1), &s.err), MT_EINPUT);
    check_ok(mt_model_relax(s.m, s.e, num(&s, 1), &s.err), &s.err);
    assert_int_equal(mt_model_couple(s.m, s.c, s.e, num(&s, 1), &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "both conserved"));
    scene_close(&s);
}

/* Diffusion while carried along: amplitude exp(-D k^2 t), phase k v t; and a source moves the mean. */
static void carried_with_a_source(void **state) {
    (void)state;
    scene s;
    int n[2] = {nx, 4};
    double h[2] = {1, 1}, k = 2 * M_PI * 3 / nx;
    scene_open(&s, 2, n, h, periodic, 1);
    fill(s.c, cosine);
    const mt_expr *velocity[2] = {num(&s, 0.7), num(&s, -0.2)};
    check_ok(mt_model_energy(s.m, mul(&s, num(&s, 0.5), pw(&s, s.nc, 2)), &s.err), &s.err);
    check_ok(mt_model_conserve(s.m, s.c, num(&s, 0.1), &s.err), &s.err);
    check_ok(mt_model_carry(s.m, s.c, velocity, &s.err), &s.err);
    mt_step_options o = {.accuracy = 1e-6};
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 5, NULL, NULL, &s.err), &s.err);
    check_close(mt_model_state(s.m)->mean_drift, 0, 0, 0);
    for (int i = 0; i < nx; i++)
        check_close(s.c->values[i], 0.3 + 1e-3 * exp(-0.1 * k * k * 5) * cos(k * (i + 0.5 - 0.7 * 5)), 0,
                    1e-7);
    check_ok(mt_model_source(s.m, s.c, num(&s, 0.25), &s.err), &s.err);
    check_ok(mt_model_start(s.m, &o, 5, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 7, NULL, NULL, &s.err), &s.err);
    check_close(mean_of(s.c), 0.3 + 0.25 * 2, 1e-9, 0);
    scene_close(&s);
}

static bool energy_falls(void *ctx, const mt_run_state *r) {
    double *last = ctx;
    assert_true(r->energy <= *last * (1 + 1e-11));
    *last = r->energy;
    return false;
}

static void kept_mean(void **state) {
    (void)state;
    scene s;
    int n[2] = {nx, 24};
    double h[2] = {1, 1}, last = INFINITY;
    scene_open(&s, 2, n, h, periodic, 2);
    fill(s.c, rough);
    check_ok(mt_model_energy(s.m, double_well(&s, s.nc, 1, 1), &s.err), &s.err);
    check_ok(mt_model_relax(s.m, s.c, num(&s, 1), &s.err), &s.err);
    check_ok(mt_model_keep_mean(s.m, s.c, &s.err), &s.err);
    mt_step_options o = {.free_energy = true};
    double mean = mean_of(s.c);
    check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
    check_ok(mt_model_advance(s.m, 400, energy_falls, &last, &s.err), &s.err);
    check_close(mean_of(s.c), mean, 1e-13, 0);
    double low = 1, high = 0;
    for (size_t i = 0; i < s.grid->cells; i++)
        low = fmin(low, s.c->values[i]), high = fmax(high, s.c->values[i]);
    assert_true(low < 0.1 && high > 0.9); /* unmixed, though the mean of 0.33 would go to 0 without it */
    scene_close(&s);
}

static mt_status screened(void *ctx, const double k[3], double *value, mt_error *err) {
    (void)ctx, (void)err;
    *value = 0.5 / (1 + k[0] * k[0] + k[1] * k[1]);
    return MT_OK;
}

/* f = r/2 c^2 + (k1 cx^2 + k2 cy^2 + 2 k12 cx cy)/2 + c (filter c)/2: growth -M k^2 (r + kappa : kk + w(k)).
 */
static void growth_of_filters_and_directions(void **state) {
    (void)state;
    scene s;
    int n[2] = {16, 16};
    double h[2] = {1, 1}, rate, swing, mean[2] = {0.3, 0};
    mt_symbol *w;
    mt_sweeper *sweeper;
    const mt_expr *fc = NULL;
    scene_open(&s, 2, n, h, periodic, 1);
    check_ok(mt_sweeper_new(&sweeper, s.grid, NULL, &s.err), &s.err);
    check_ok(mt_filter_new(&w, s.forms, mt_sweeper_spectrum(sweeper), "w",
                           (mt_filter_function){screened, NULL, NULL}, &s.err),
             &s.err);
    check_ok(mt_expr_make(&fc, MT_FILTER_OP, 1, &s.nc, 0, w, &s.err), &s.err);
    const mt_expr *dx = mt_build_deriv(&s.b, 0, s.nc), *dy = mt_build_deriv(&s.b, 1, s.nc);
    const mt_expr *f =
        add(&s, mul(&s, num(&s, -0.5), pw(&s, s.nc, 2)), mul(&s, num(&s, 0.5), mul(&s, s.nc, fc)));
    f = add(&s, f, add(&s, mul(&s, num(&s, 0.5), pw(&s, dx, 2)), pw(&s, dy, 2)));
    f = add(&s, f, mul(&s, num(&s, 0.6), mul(&s, dx, dy)));
    check_ok(mt_model_energy(s.m, f, &s.err), &s.err);
    check_ok(mt_model_conserve(s.m, s.c, num(&s, 0.3), &s.err), &s.err);
    for (int i = 0; i < 12; i++) {
        double k[3] = {0.4 * cos(0.5 * i), 0.4 * sin(0.5 * i), 0}, k2 = 0.16;
        double g = -1 + k[0] * k[0] + 2 * k[1] * k[1] + 1.2 * k[0] * k[1] + 0.5 / (1 + k2);
        check_ok(mt_model_growth(s.m, mean, k, 0, &rate, &swing, &s.err), &s.err);
        check_close(rate, -0.3 * k2 * g, 1e-12, 0);
    }
    mt_expr_unref(&fc);
    mt_symbol_unref(&w);
    mt_sweeper_free(&sweeper);
    scene_close(&s);
}

static double waves(double x, double y, double z) {
    return 0.4 + 0.2 * cos(2 * M_PI * 2 * x / 12 + 0.3) * cos(M_PI * 3 * y / 15) +
           0.1 * sin(2 * M_PI * x / 12) + 0.05 * cos(M_PI * 2 * z / 8);
}

/* A trigonometric polynomial goes over to a finer grid and back exactly, whatever the walls and parities. */
static void resampled_exactly(void **state) {
    (void)state;
    static const mt_wall walls[3] = {MT_PERIODIC, MT_MIRROR, MT_MIRROR};
    static const int coarse[3] = {12, 10, 8}, fine[3] = {18, 15, 13};
    for (int dim = 1; dim <= 3; dim++) {
        scene s, t;
        mt_sweeper *a, *b;
        double h[3] = {1, 1.5, 1}, hf[3] = {12.0 / 18, 1, 8.0 / 13};
        scene_open(&s, dim, coarse, h, walls, 1);
        scene_open(&t, dim, fine, hf, walls, 1);
        check_ok(mt_sweeper_new(&a, s.grid, NULL, &s.err), &s.err);
        check_ok(mt_sweeper_new(&b, t.grid, NULL, &s.err), &s.err);
        fill(s.c, waves), fill(t.e, waves), fill(s.e, waves);
        check_ok(mt_field_resample(t.c, b, s.c, a, &s.err), &s.err);
        for (size_t i = 0; i < t.grid->cells; i++) check_close(t.c->values[i], t.e->values[i], 0, 1e-14);
        check_ok(mt_field_resample(s.c, a, t.c, b, &s.err), &s.err);
        for (size_t i = 0; i < s.grid->cells; i++) check_close(s.c->values[i], s.e->values[i], 0, 1e-14);
        mt_sweeper_free(&a), mt_sweeper_free(&b);
        scene_close(&s), scene_close(&t);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(mobility_matrices),   cmocka_unit_test(coupled_blocks_allow_large_steps),
        cmocka_unit_test(matrices_are_judged), cmocka_unit_test(carried_with_a_source),
        cmocka_unit_test(kept_mean),           cmocka_unit_test(growth_of_filters_and_directions),
        cmocka_unit_test(resampled_exactly),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
