/* Proved here: thermal noise gives Cook's structure factor at any step where the linear part is exact, and
 * keeps equipartition with any mobility (chi-squared over all modes; 3 standard deviations, seeds fixed),
 * with all walls; the mean of a conserved field does not move; the same bits for one and two threads;
 * equilibrium fluctuations have their covariance, for two fields too. */
#include "tests/motion/scene.h"

#include <math.h>
#include <string.h>

static const mt_wall walls_of[3][2] = {
    {MT_PERIODIC, MT_PERIODIC}, {MT_MIRROR, MT_MIRROR}, {MT_MIRROR, MT_PERIODIC}};

enum { NX = 48, NY = 40 };
#define A 0.5
#define KAPPA 1.2
#define KT 0.01

static void open_linear(scene *s, const mt_wall *walls, int threads) {
    int n[2] = {NX, NY};
    double h[2] = {1, 1};
    scene_open(s, 2, n, h, walls, threads);
    const mt_expr *f = mul(s, num(s, A / 2), pw(s, s->nc, 2));
    f = add(s, f, mul(s, num(s, KAPPA / 2), fun(s, MT_GRADSQ_OP, s->nc)));
    check_ok(mt_model_energy(s->m, f, &s->err), &s->err);
}

/* Sum over independent modes of the square over its expectation; dof: of the chi-squared distribution. */
static double chi_squared(scene *s, double (*expected)(double k2), double *dof) {
    mt_sweeper *w;
    check_ok(mt_sweeper_new(&w, s->grid, NULL, &s->err), &s->err);
    const mt_spectrum *p = mt_sweeper_spectrum(w);
    double *u = mt_alloc(p->doubles, 8), *work = mt_alloc(mt_sweeper_work_doubles(w), 8), sum = 0;
    check_ok(mt_transform_forward(w, s->c->values, 0, u, work, &s->err), &s->err);
    *dof = 0;
    for (size_t j = 0; j < p->columns; j++)
        for (int i = 0; i < p->length; i++) {
            int mode[3];
            mt_spectrum_column(p, j, mode);
            mode[p->outer] = i;
            double k2 = 0, weight = 1, *v = u + j * p->stride + (size_t)i * (p->complex ? 2 : 1);
            for (int a = 0; a < 2; a++) k2 += pow(p->k[a][mode[a]], 2), weight *= p->weight[a][mode[a]];
            double square = v[0] * v[0] + (p->complex ? v[1] * v[1] : 0);
            if (k2 == 0 || square == 0) continue; /* mode 0, Nyquist */
            /* weight times |u^|^2 is this mode's part of the variance; half of a pair k, -k where both are
             * stored */
            double degrees = !p->complex ? 1 : p->half >= 0 && mode[p->half] == 0 ? 1 : 2;
            double share = degrees * expected(k2) / (double)s->grid->cells;
            sum += degrees * weight * square / share;
            *dof += degrees;
        }
    mt_sweeper_free(&w);
    mt_free(u), mt_free(work);
    return sum;
}

static void check_chi(scene *s, double (*expected)(double k2), const char *what) {
    double dof, chi = chi_squared(s, expected, &dof);
    double deviation = (chi / dof - 1) / sqrt(2 / dof);
    print_message("%s: chi^2/dof %.4f of %g, %+.2f standard deviations\n", what, chi / dof, dof, deviation);
    assert_true(fabs(deviation) < 3);
}

/* Cook, Acta Metall. 18 (1970) 297: from a uniform start, S(k, t) = S_eq (1 - exp(2 R t)), per cell volume 1
 */
static double until;
static double cook(double k2) {
    double g = A + KAPPA * k2;
    return KT / g * (1 - exp(-2 * k2 * g * until));
}
static double equipartition(double k2) {
    return KT / (A + KAPPA * k2);
}

static double half(double x, double y, double z) {
    (void)x, (void)y, (void)z;
    return 0.25;
}

static void cooks_structure_factor(void **state) {
    (void)state;
    for (int w = 0; w < 3; w++)
        for (int step = 0; step < 2; step++) { /* the step does not matter: 40 of them or 4 */
            scene s;
            open_linear(&s, walls_of[w], 1);
            fill(s.c, half);
            check_ok(mt_model_conserve(s.m, s.c, num(&s, 1), &s.err), &s.err);
            check_ok(mt_model_noise(s.m, s.c, 11 + (uint64_t)w, 1, num(&s, sqrt(2 * KT)), &s.err), &s.err);
            mt_step_options o = {.fixed = step ? 0.05 : 0.5};
            until = 2;
            check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
            check_ok(mt_model_advance(s.m, until, NULL, NULL, &s.err), &s.err);
            check_close(mt_model_state(s.m)->mean_drift, 0, 0, 0);
            check_chi(&s, cook, "Cook");
            scene_close(&s);
        }
}

/* M = 1 + 0.8 sin(x)-like of position and, for `fields`, of the field: equipartition does not know of M. */
static void varying_mobility_keeps_equipartition(void **state) {
    (void)state;
    for (int w = 0; w < 3; w++)
        for (int relax = 0; relax < 2; relax++) {
            scene s;
            const double mean[1] = {0};
            open_linear(&s, walls_of[w], 2);
            const mt_expr *x = NULL;
            check_ok(mt_expr_coord(&x, s.forms, 0, &s.err), &s.err);
            const mt_expr *m = add(&s, num(&s, 1),
                                   mul(&s, num(&s, 0.8), fun(&s, MT_COS_OP, mul(&s, num(&s, M_PI / 24), x))));
            mt_expr_unref(&x);
            const mt_expr *amplitude = fun(&s, MT_SQRT_OP, mul(&s, num(&s, 2 * KT), m));
            if (relax)
                check_ok(mt_model_relax(s.m, s.c, m, &s.err), &s.err);
            else
                check_ok(mt_model_conserve(s.m, s.c, m, &s.err), &s.err);
            check_ok(mt_model_noise(s.m, s.c, 5, 1, amplitude, &s.err), &s.err);
            check_ok(mt_model_fluctuations(s.m, s.c, mean, KT, 0, 3, s.c->values, &s.err), &s.err);
            check_chi(&s, equipartition, "drawn");
            mt_step_options o = {.accuracy = 1e-2};
            check_ok(mt_model_start(s.m, &o, 0, &s.err), &s.err);
            check_ok(mt_model_advance(s.m, relax ? 2 : 0.3, NULL, NULL, &s.err), &s.err);
            print_message("%llu steps of up to %g\n", (unsigned long long)mt_model_state(s.m)->steps,
                          mt_model_state(s.m)->step_max);
            check_chi(&s, equipartition, relax ? "relaxing" : "conserved");
            scene_close(&s);
        }
}

static void same_noise_for_any_threads(void **state) {
    (void)state;
    scene s[2];
    for (int i = 0; i < 2; i++) {
        open_linear(&s[i], walls_of[2], 1 + i);
        const mt_expr *m = add(&s[i], num(&s[i], 1), pw(&s[i], s[i].nc, 2));
        check_ok(mt_model_conserve(s[i].m, s[i].c, m, &s[i].err), &s[i].err);
        const mt_expr *amplitude = fun(&s[i], MT_SQRT_OP, mul(&s[i], num(&s[i], 2 * KT), m));
        check_ok(mt_model_noise(s[i].m, s[i].c, 5, 1, amplitude, &s[i].err), &s[i].err);
        mt_step_options o = {.accuracy = 1e-2};
        check_ok(mt_model_start(s[i].m, &o, 0, &s[i].err), &s[i].err);
        check_ok(mt_model_advance(s[i].m, 1, NULL, NULL, &s[i].err), &s[i].err);
    }
    assert_memory_equal(s[0].c->values, s[1].c->values, s[0].grid->cells * sizeof(double));
    for (int i = 0; i < 2; i++) scene_close(&s[i]);
}

/* H = [[1, .9], [.9, 1]]: <c c> = <e e> = kT / V / det, <c e> = -.9 kT / V / det, det = 0.19, in every mode
 */
static void two_fields_fluctuate_together(void **state) {
    (void)state;
    scene s;
    int n[2] = {NX, NY};
    double h[2] = {1, 1}, mean[2] = {0, 0}, cc = 0, ee = 0, ce = 0;
    scene_open(&s, 2, n, h, walls_of[0], 1);
    const mt_expr *f = mul(&s, num(&s, 0.5), add(&s, pw(&s, s.nc, 2), pw(&s, s.ne, 2)));
    check_ok(mt_model_energy(s.m, add(&s, f, mul(&s, num(&s, 0.9), mul(&s, s.nc, s.ne))), &s.err), &s.err);
    check_ok(mt_model_relax(s.m, s.c, num(&s, 1), &s.err), &s.err);
    check_ok(mt_model_relax(s.m, s.e, num(&s, 1), &s.err), &s.err);
    check_ok(mt_model_fluctuations(s.m, s.c, mean, KT, 0, 8, s.c->values, &s.err), &s.err);
    check_ok(mt_model_fluctuations(s.m, s.e, mean, KT, 0, 8, s.e->values, &s.err), &s.err);
    for (size_t i = 0; i < s.grid->cells; i++) {
        cc += s.c->values[i] * s.c->values[i];
        ee += s.e->values[i] * s.e->values[i];
        ce += s.c->values[i] * s.e->values[i];
    }
    /* modes there are: without the Nyquist ones and mode 0 */
    double modes = (NX - 1) * (NY - 1) - 1, sigma = 3 * sqrt(2 / modes);
    check_close(cc / modes, KT / 0.19, sigma, 0);
    check_close(ee / modes, KT / 0.19, sigma, 0);
    check_close(ce / modes, -0.9 * KT / 0.19, sigma, 0);
    /* and an unstable state has none */
    const double unstable[2] = {0, 0};
    check_ok(mt_model_energy(s.m, sub(&s, f, mul(&s, num(&s, 2), mul(&s, s.nc, s.ne))), &s.err), &s.err);
    assert_int_equal(mt_model_fluctuations(s.m, s.c, unstable, KT, 0, 8, s.c->values, &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "not stable"));
    scene_close(&s);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(cooks_structure_factor),
        cmocka_unit_test(varying_mobility_keeps_equipartition),
        cmocka_unit_test(same_noise_for_any_threads),
        cmocka_unit_test(two_fields_fluctuate_together),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
