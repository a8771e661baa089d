/* Proved here: kernels at every tile boundary, with unaligned and aliased arrays; reductions with places, NaN
 * and fixed order; coordinates, wavenumbers, noise; polynomials become one instruction; missing inputs are
 * named; exp and log are within 2 ulp of the exact value, the logarithm's extension is twice continuously
 * differentiable. */
#include "tests/support.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/formula/build.h"
#include "core/formula/kernel.h"
#include "core/formula/vector_math.h"

typedef struct desk {
    mt_error err;
    mt_forms *forms;
    mt_grid *grid;
    mt_symbol *sym[3];
    mt_builder b;
    const mt_expr *x[3];
} desk;

static void open_desk(desk *d) {
    int n[2] = {1000, 7};
    double h[2] = {0.5, 2};
    mt_wall wall[2] = {MT_PERIODIC, MT_PERIODIC};
    memset(d, 0, sizeof *d);
    check_ok(mt_forms_new(&d->forms, &d->err), &d->err);
    check_ok(mt_grid_new(&d->grid, 2, n, h, wall, &d->err), &d->err);
    d->b.forms = d->forms, d->b.err = &d->err;
    for (int i = 0; i < 3; i++) {
        char name[2] = {(char)('a' + i), 0};
        check_ok(mt_symbol_new(&d->sym[i], d->forms, MT_SYMBOL_FIELD, name, d->grid, &d->err), &d->err);
        d->x[i] = mt_build_symbol(&d->b, d->sym[i]);
    }
}

static void close_desk(desk *d) {
    mt_build_end(&d->b);
    for (int i = 0; i < 3; i++) mt_symbol_unref(&d->sym[i]);
    mt_grid_unref(&d->grid);
    mt_forms_free(&d->forms);
}

static const mt_expr *num(desk *d, double v) {
    return mt_build_number(&d->b, v);
}
static const mt_expr *bin(desk *d, mt_op op, const mt_expr *a, const mt_expr *b) {
    return mt_build_binary(&d->b, op, a, b);
}

static mt_kernel *compile(desk *d, mt_kernel_spec spec) {
    mt_kernel *k;
    check_ok(d->b.status, &d->err);
    check_ok(mt_kernel_new(&k, &spec, &d->err), &d->err);
    check_ok(mt_kernel_prepare(k, 2.5, &d->err), &d->err);
    return k;
}

/* Swaps two arrays through a kernel whose outputs are its inputs, and their product with a reduction. */
static void tiles_tails_and_aliases(void **state) {
    (void)state;
    desk d;
    open_desk(&d);
    const mt_expr *sum = bin(&d, MT_ADD_OP, d.x[0], bin(&d, MT_MUL_OP, num(&d, 2), d.x[1]));
    const mt_expr *in[2] = {d.x[0], d.x[1]}, *out[3] = {d.x[1], d.x[0], sum}, *red[2] = {sum, d.x[0]};
    mt_reduce how[2] = {MT_REDUCE_SUM, MT_REDUCE_MAX};
    mt_kernel *k = compile(&d, (mt_kernel_spec){2, 3, 2, in, out, red, how, false});
    double *scratch = mt_alloc(mt_kernel_scratch(k), 8);
    mt_place place = {.first = 100};
    for (size_t n = 0; n <= 3 * MT_TILE + 1; n++) {
        double *a = mt_alloc(n + 1, 8), *b = mt_alloc(n + 1, 8),
               *s = mt_alloc(n + 1, 8); /* odd start: unaligned */
        double total = 0, top = -INFINITY;
        size_t where = 100;
        for (size_t i = 0; i < n; i++) {
            a[i + 1] = (double)((i * 37) % 101), b[i + 1] = 1.0 / (double)(i + 1);
            total += a[i + 1] + 2 * b[i + 1];
            if (a[i + 1] > top) top = a[i + 1], where = 100 + i;
        }
        const double *from[2] = {a + 1, b + 1};
        double *to[3] = {a + 1, b + 1, s + 1};
        mt_reduced r[2];
        mt_kernel_run(k, &place, n, from, to, r, scratch);
        for (size_t i = 0; i < n; i++) {
            assert_true(b[i + 1] == (double)((i * 37) % 101) && a[i + 1] == 1.0 / (double)(i + 1));
            assert_true(s[i + 1] == b[i + 1] + 2 * a[i + 1]);
        }
        check_close(r[0].value, total, 1e-13, 0);
        assert_true(r[1].value == top && r[1].cell == where);
        mt_free(a), mt_free(b), mt_free(s);
    }
    mt_free(scratch);
    mt_kernel_free(&k);
    close_desk(&d);
}

static void reductions_and_nan(void **state) {
    (void)state;
    desk d;
    open_desk(&d);
    const mt_expr *red[3] = {d.x[0], d.x[0], d.x[0]};
    mt_reduce how[3] = {MT_REDUCE_SUM, MT_REDUCE_MIN, MT_REDUCE_MAX};
    mt_kernel *k = compile(&d, (mt_kernel_spec){1, 0, 3, d.x, NULL, red, how, false});
    double *scratch = mt_alloc(mt_kernel_scratch(k), 8), a[4 * MT_TILE];
    const double *from[1] = {a};
    mt_place place = {0};
    mt_reduced r[3];
    for (size_t i = 0; i < 4 * MT_TILE; i++) a[i] = (double)(i % 3);
    a[2 * MT_TILE + 1] = -1, a[3 * MT_TILE] = 9, a[3 * MT_TILE + 1] = 9;
    mt_kernel_run(k, &place, 4 * MT_TILE, from, NULL, r, scratch);
    assert_true(r[1].value == -1 && r[1].cell == 2 * MT_TILE + 1 && r[2].value == 9 &&
                r[2].cell == 3 * MT_TILE);
    a[3 * MT_TILE + 2] = NAN, a[2 * MT_TILE] = NAN;
    mt_kernel_run(k, &place, 4 * MT_TILE, from, NULL, r, scratch);
    for (int i = 0; i < 3; i++) assert_true(isnan(r[i].value));
    assert_true(r[1].cell == 2 * MT_TILE && r[2].cell == 2 * MT_TILE);
    mt_kernel_run(k, &place, 0, from, NULL, r, scratch);
    assert_true(r[0].value == 0 && r[1].value == INFINITY && r[2].value == -INFINITY);
    mt_free(scratch);
    mt_kernel_free(&k);
    close_desk(&d);
}

static void leaves_know_their_place(void **state) {
    (void)state;
    desk d;
    open_desk(&d);
    const mt_expr *x, *y, *noise;
    mt_status st = mt_expr_coord(&x, d.forms, 0, &d.err);
    x = mt_build_keep(&d.b, st, x);
    st = mt_expr_coord(&y, d.forms, 1, &d.err);
    y = mt_build_keep(&d.b, st, y);
    st = mt_expr_noise(&noise, d.forms, MT_RANDOM_NORMAL, 9, &d.err);
    noise = mt_build_keep(&d.b, st, noise);
    const mt_expr *kx = mt_build_wave(&d.b, 0), *ky = mt_build_wave(&d.b, 1),
                  *out[4] = {x, y, noise, bin(&d, MT_ADD_OP, kx, ky)};
    mt_kernel *k = compile(&d, (mt_kernel_spec){0, 4, 0, NULL, out, NULL, NULL, false});
    enum { N = 2 * MT_TILE + 3 };
    static double v[4][N], wave[N], expected[N];
    double *scratch = mt_alloc(mt_kernel_scratch(k), 8), *to[4] = {v[0], v[1], v[2], v[3]};
    for (int i = 0; i < N; i++) wave[i] = i;
    mt_place place = {.grid = d.grid, .first = 990, .wave = {wave, NULL, NULL}, .wave_fixed = {0, 0.25, 0}};
    mt_kernel_run(k, &place, N, NULL, to, NULL, scratch);
    mt_random_fill(MT_RANDOM_NORMAL, 9, 990, N, 0, 0, expected);
    for (int i = 0; i < N; i++) {
        assert_true(v[0][i] == ((990 + i) % 1000 + 0.5) * 0.5 && v[1][i] == ((990 + i) / 1000 + 0.5) * 2);
        assert_true(v[2][i] == expected[i] && v[3][i] == i + 0.25);
    }
    mt_free(scratch);
    mt_kernel_free(&k);
    close_desk(&d);
}

static void polynomials_are_one_instruction(void **state) {
    (void)state;
    desk d;
    char text[300];
    open_desk(&d);
    const mt_expr *c = d.x[0], *c2 = bin(&d, MT_POW_OP, c, num(&d, 2)),
                  *c3 = bin(&d, MT_POW_OP, c, num(&d, 3));
    const mt_expr *f =
        bin(&d, MT_ADD_OP,
            bin(&d, MT_SUB_OP, bin(&d, MT_MUL_OP, num(&d, 2), c), bin(&d, MT_MUL_OP, num(&d, 6), c2)),
            bin(&d, MT_MUL_OP, num(&d, 4), c3));
    mt_kernel *k = compile(&d, (mt_kernel_spec){1, 1, 0, d.x, &f, NULL, NULL, false});
    mt_kernel_print(k, text, sizeof text);
    assert_string_equal(text, "r0 = poly3([a]; 0, 2, -6, 4)\nout0 = r0\n");
    assert_int_equal(mt_kernel_instructions(k), 1);
    mt_kernel_free(&k);
    mt_kernel_spec spec = {1, 1, 0, d.x, &d.x[1], NULL, NULL, false};
    assert_int_equal(mt_kernel_new(&k, &spec, &d.err), MT_EINPUT);
    assert_non_null(strstr(d.err.text, "'b'"));
    close_desk(&d);
}

static double ulps(double got, long double exact) {
    double e = (double)exact, gap = fabs(nextafter(e, INFINITY) - e);
    return (double)(fabsl((long double)got - exact) / (long double)gap);
}

static void exp_and_log_are_accurate(void **state) {
    (void)state;
    enum { N = 200000 };
    static double x[N], y[N];
    double worst = 0;
    mt_random_fill(MT_RANDOM_UNIFORM, 3, 0, N, 0, 0, x);
    for (int i = 0; i < N; i++) x[i] *= i % 2 ? 700 : 2;
    mt_vector_exp(N, x, y);
    for (int i = 0; i < N; i++) worst = fmax(worst, ulps(y[i], expl(x[i])));
    print_message("exp: %.3f ulp\n", worst);
    assert_true(worst < 2);
    worst = 0;
    for (int i = 0; i < N; i++)
        x[i] = i % 2 ? 1 + 1e-3 * y[i % 2] * ((double)i / N - 0.5) : exp(200 * (x[i] / 2 + 0.9) - 14);
    for (int i = 0; i < N; i++) x[i] = x[i] > MT_LOG_CUT && isfinite(x[i]) ? x[i] : 0.5 + (double)i / N;
    mt_vector_log(N, x, y);
    for (int i = 0; i < N; i++)
        if (x[i] != 1) worst = fmax(worst, ulps(y[i], logl(x[i])));
    print_message("log: %.3f ulp\n", worst);
    assert_true(worst < 2);
    double special[5] = {NAN, INFINITY, -INFINITY, 1000, -1000}, e[5];
    mt_vector_exp(5, special, e);
    assert_true(isnan(e[0]) && isinf(e[1]) && e[2] == 0 && isinf(e[3]) && e[4] == 0);
    double ones[3] = {1, INFINITY, NAN};
    mt_vector_log(3, ones, e);
    assert_true(e[0] == 0 && isinf(e[1]) && isnan(e[2]));
}

static void the_extension_is_smooth(void **state) {
    (void)state;
    double c = MT_LOG_CUT, x[3] = {c * (1 - 1e-9), c, c * (1 + 1e-9)}, y[3];
    mt_vector_log(3, x, y);
    check_close(y[0], log(c), 1e-9, 0);
    check_close(y[1], log(c), 1e-15, 0);
    check_close(mt_dlog_one(x[0]), mt_dlog_one(x[2]), 1e-8, 0);
    check_close(mt_ddlog_one(x[0]), mt_ddlog_one(x[2]), 1e-8, 0);
    for (double t = -2 * c; t < 2 * c; t += c / 7) { /* the derivatives belong together */
        double h = c * 1e-4, p = mt_log_one(t + h), m = mt_log_one(t - h);
        check_close(mt_dlog_one(t), (p - m) / (2 * h), 1e-6, 0);
        if (fabs(t - c) > 2 * h)
            check_close(mt_ddlog_one(t), (mt_dlog_one(t + h) - mt_dlog_one(t - h)) / (2 * h), 1e-6, 0);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(tiles_tails_and_aliases),  cmocka_unit_test(reductions_and_nan),
        cmocka_unit_test(leaves_know_their_place),  cmocka_unit_test(polynomials_are_one_instruction),
        cmocka_unit_test(exp_and_log_are_accurate), cmocka_unit_test(the_extension_is_smooth),
    };
    return cmocka_run_group_tests_name("kernel", tests, NULL, NULL);
}
