/* Proved here: curvatures of circles, ellipses, balls, cylinders and tori; Gauss and Bonnet; signs of the two
 * phases; directions of stripes and of balls; walls by reflection; nothing where there is no interface. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/curvature.h"

static mt_error err;
static const double pi = 3.14159265358979323846;

static mt_grid *box(int dim, int n, const double h[3], mt_wall wall) {
    mt_grid *g;
    int cells[3] = {n, n, n};
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, cells, h, walls, &err), &err);
    return g;
}

typedef double (*shape)(
    const double r[3]); /* distance into the body, from the middle of the box (or a corner) */

static double *image(const mt_grid *g, shape f, bool corner) {
    double *a = mt_alloc(g->cells, sizeof *a), r[3];
    for (size_t i = 0; i < g->cells; i++) {
        size_t at[3] = {i % (size_t)g->n[0], i / (size_t)g->n[0] % (size_t)g->n[1],
                        i / (size_t)g->n[0] / (size_t)g->n[1]};
        for (int k = 0; k < 3; k++)
            r[k] = k < g->dim ? ((double)at[k] + 0.5 - (corner ? 0 : 0.5 * g->n[k] + 0.1 * k)) * g->h[k] : 0;
        a[i] = 0.5 + 0.4 * tanh(f(r) / 1.8); /* 8 cells of 0.5 from end to end */
    }
    return a;
}

static double ball(const double r[3]) {
    return 8 - sqrt(r[0] * r[0] + r[1] * r[1] + r[2] * r[2]);
}
static double torus(const double r[3]) {
    return 5 - hypot(hypot(r[0], r[1]) - 10, r[2]);
}
static double rod(const double r[3]) {
    return 6 - hypot(r[0], r[1]);
}
static double tilted(const double r[3]) { /* stripes across (3, 4), of period 24 each way */
    return 24 / (10 * pi) * sin(2 * pi * (3 * r[0] + 4 * r[1]) / 24);
}
static double ellipse(const double r[3]) {
    return 5 * (1 - hypot(r[0] / 10, r[1] / 5));
}

static mt_curvature curvature(const mt_grid *g, const double *a, bool above) {
    mt_curvature c;
    check_ok(mt_curvature_of(g, a, 0.5, above, 20, &c, &err), &err);
    double sums[3] = {0, 0, 0};
    for (int i = 0; i < 20; i++) sums[0] += c.mean.share[i], sums[1] += c.gauss.share[i];
    for (int i = 0; i < c.polar * c.azimuth; i++) sums[2] += c.facing[i];
    check_close(sums[0], 1, 1e-9, 0);
    check_close(sums[1], g->dim == 3, 1e-9, 0);
    check_close(sums[2], 1, 1e-9, 0);
    check_close(c.mean.low + 20 * c.mean.width, c.mean.mean + 4 * c.mean.deviation, 1e-12, 1e-14);
    check_close(c.lost, 0, 0, 0);
    return c;
}

static void balls(void **state) {
    (void)state;
    static const double spacings[2][3] = {{0.5, 0.5, 0.5}, {0.5, 0.4, 0.6}};
    for (int dim = 2; dim <= 3; dim++)
        for (int s = 0; s < 2; s++) {
            mt_grid *g = box(dim, 60, spacings[s], MT_PERIODIC);
            double *a = image(g, ball, false);
            for (int above = 0; above < 2; above++) {
                mt_curvature c = curvature(g, a, above);
                double sign = above ? 1 : -1;
                check_close(c.size, dim == 2 ? 2 * pi * 8 : 4 * pi * 64, 0.005, 0);
                check_close(c.mean.mean, sign / 8, 0.003, 0);
                check_close(c.mean.deviation, 0, 0, 0.003);
                check_close(c.gauss.mean, dim == 3 ? 1.0 / 64 : NAN, 0.005, 0);
                check_close(c.gauss.integral, dim == 3 ? 4 * pi : NAN, 0.01, 0);
                check_close(c.tensor[0], 1.0 / dim, 0.005, 0);
                check_close(c.tensor[3], 0, 0, 0.002);
                check_close(c.anisotropy, 0, 0, 0.01);
                for (int i = 0; i < c.polar * c.azimuth; i++)
                    check_close(c.facing[i] * c.polar * c.azimuth, 1, 0, dim == 2 ? 0.35 : 0.75);
                mt_curvature_free(&c);
            }
            mt_free(a);
            mt_grid_unref(&g);
        }
}

/* Curvature of an ellipse: integral 2 pi, extremes a / b^2 and b / a^2; the torus: integral of K 0, of H 2
 * pi^2 R, K from -1 / (r (R - r)) to 1 / (r (R + r)). */
static void bodies(void **state) {
    (void)state;
    static const double h[3] = {0.5, 0.5, 0.5};
    mt_grid *g = box(2, 64, h, MT_PERIODIC);
    double *a = image(g, ellipse, false);
    mt_curvature c = curvature(g, a, true);
    check_close(c.mean.integral, 2 * pi, 0.005, 0);
    assert_true(c.tensor[1] > c.tensor[0]); /* long sides face y */
    check_close(c.preferred[1], 1, 0, 1e-3);
    mt_curvature_free(&c);
    mt_free(a);
    mt_grid_unref(&g);
    g = box(3, 68, h, MT_PERIODIC);
    a = image(g, torus, false);
    c = curvature(g, a, true);
    check_close(c.mean.integral, 2 * pi * pi * 10, 0.01, 0);
    check_close(c.gauss.integral, 0, 0, 0.1);
    /* <K^2> = (R / sqrt(R^2 - r^2) - 1) / r^4, by integrating over the torus */
    check_close(c.gauss.deviation, sqrt((10 / sqrt(100 - 25) - 1) / 625), 0.005, 0);
    mt_curvature_free(&c);
    mt_free(a);
    a = image(g, rod, false);
    c = curvature(g, a, true);
    check_close(c.mean.mean, 1.0 / 12, 0.003, 0);
    check_close(c.gauss.mean, 0, 0, 1e-4);
    check_close(c.tensor[2], 0, 0, 1e-12);
    check_close(c.anisotropy, 0.5, 0, 0.005);
    mt_curvature_free(&c);
    mt_free(a);
    mt_grid_unref(&g);
}

static void stripes(void **state) {
    (void)state;
    static const double h[3] = {0.5, 0.5, 0.5};
    mt_grid *g = box(2, 48, h, MT_PERIODIC);
    double *a = image(g, tilted, false);
    mt_curvature c = curvature(g, a, true);
    check_close(c.mean.mean, 0, 0, 1e-3);
    check_close(c.preferred[0], 0.6, 0, 2e-3);
    check_close(c.preferred[1], 0.8, 0, 2e-3);
    check_close(c.anisotropy, 1, 0, 2e-3);
    double facing = c.facing[5] + c.facing[23]; /* 53.1 and 233.1 degrees */
    check_close(facing, 1, 0, 0.01);
    check_close(c.facing[5], 0.5, 0, 0.01);
    mt_curvature_free(&c);
    mt_free(a);
    mt_grid_unref(&g);
}

static void walls_and_nothing(void **state) {
    (void)state;
    static const double h[3] = {0.5, 0.5, 0.5};
    mt_grid *g = box(3, 30, h, MT_MIRROR);
    double *a = image(g, ball, true);
    mt_curvature c = curvature(g, a, true);
    check_close(c.size, 4 * pi * 64 / 8, 0.005, 0);
    check_close(c.mean.mean, 1.0 / 8, 0.003, 0);
    check_close(c.mean.deviation, 0, 0, 0.003);
    check_close(c.gauss.integral, pi / 2, 0.01, 0);
    mt_curvature_free(&c);
    for (size_t i = 0; i < g->cells; i++) a[i] = 0.3;
    check_ok(mt_curvature_of(g, a, 0.5, true, 4, &c, &err), &err);
    assert_true(c.size == 0 && isnan(c.mean.mean) && isnan(c.mean.deviation) && isnan(c.anisotropy) &&
                isnan(c.preferred[0]) && c.mean.integral == 0);
    mt_curvature_free(&c);
    assert_int_equal(mt_curvature_of(g, a, 0.5, true, 0, &c, &err), MT_EINPUT);
    mt_free(a);
    mt_grid_unref(&g);
    g = box(1, 30, h, MT_MIRROR);
    assert_int_equal(mt_curvature_of(g, NULL, 0.5, true, 4, &c, &err), MT_EINPUT);
    mt_grid_unref(&g);
}

static mt_status one(void *ctx, mt_error *e) {
    mt_grid *g = NULL;
    mt_curvature c = {0};
    int n[2] = {6, 5};
    double h[2] = {1, 1}, a[30];
    mt_wall wall[2] = {MT_PERIODIC, MT_MIRROR};
    (void)ctx;
    for (int i = 0; i < 30; i++) a[i] = (i * 7) % 5;
    mt_status st = mt_grid_new(&g, 2, n, h, wall, e);
    if (!st) st = mt_curvature_of(g, a, 1.5, true, 8, &c, e);
    mt_curvature_free(&c);
    mt_grid_unref(&g);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    check_allocation_sweep(one, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(balls),    cmocka_unit_test(bodies),
        cmocka_unit_test(stripes),  cmocka_unit_test(walls_and_nothing),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("measure_curvature", tests, NULL, NULL);
}
