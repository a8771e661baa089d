/* Proved here: axes and directions of domains are those of their second moments, wherever the box is cut;
 * what winds around the box has none; Otsu's level parts two classes and is the best of all levels. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/domains.h"
#include "core/measure/statistics.h"

static mt_error err;

static mt_grid *box(int dim, const int n[3], const double h[3], mt_wall wall) {
    mt_grid *g;
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, n, h, walls, &err), &err);
    return g;
}

/* 1 in the block of cells from `from`, `size` cells each way, around the box; 0 elsewhere */
static double *block(const mt_grid *g, const int from[3], const int size[3]) {
    double *a = mt_alloc(g->cells, sizeof *a);
    for (size_t i = 0; i < g->cells; i++) a[i] = 0;
    for (int i = 0; i < size[0] * size[1] * size[2]; i++) {
        int x = (from[0] + i % size[0]) % g->n[0], y = (from[1] + i / size[0] % size[1]) % g->n[1];
        int z = (from[2] + i / size[0] / size[1]) % g->n[2];
        a[(z * g->n[1] + y) * g->n[0] + x] = 1;
    }
    return a;
}

/* A block with sides a has the moments a^2 / 12: the ellipse axes 4 a / sqrt(12), the ellipsoid 2 a sqrt(5 /
 * 12). */
static void blocks(void **state) {
    (void)state;
    static const int n[3] = {12, 10, 9}, size[3][3] = {{5, 1, 1}, {5, 3, 1}, {4, 3, 5}};
    static const double h[3] = {0.5, 1, 2}, factor[3] = {1, 1.1547005383792515, 1.2909944487358056};
    for (int dim = 1; dim <= 3; dim++)
        for (int shift = 0; shift < 12; shift++) {
            int from[3] = {shift, dim > 1 ? shift * 7 % 10 : 0, dim > 2 ? shift * 5 % 9 : 0};
            mt_grid *g = box(dim, n, h, MT_PERIODIC);
            double *a = block(g, from, size[dim - 1]), side[3] = {0, 0, 0};
            mt_domains d;
            check_ok(mt_domains_find(g, a, 0.5, true, false, NULL, &d, &err), &err);
            assert_int_equal(d.count, 1);
            for (int i = 0; i < dim; i++) side[i] = size[dim - 1][i] * h[i] * factor[dim - 1];
            int order[3][3] = {{0, 1, 2}, {1, 0, 2}, {2, 1, 0}}; /* longest first */
            for (int i = 0; i < 3; i++) {
                check_close(d.axis[0][i], side[order[dim - 1][i]], 1e-12, 0);
                check_close(d.direction[0][i], i == order[dim - 1][0], 0, 1e-12);
            }
            check_close(d.aspect[0], side[order[dim - 1][0]] / side[order[dim - 1][dim - 1]], 1e-12, 0);
            check_close(d.mean_aspect, d.aspect[0], 0, 0);
            check_close(d.density, 1 / g->volume, 1e-15, 0);
            mt_domains_free(&d);
            mt_free(a);
            mt_grid_unref(&g);
        }
}

/* An ellipse with axes 40 and 20, its long one turned by 30 degrees, cut by both seams. */
static void ellipse(void **state) {
    (void)state;
    static const int n[3] = {80, 80, 1};
    static const double h[3] = {1, 1, 1};
    mt_grid *g = box(2, n, h, MT_PERIODIC);
    double *a = mt_alloc(g->cells, sizeof *a), c = cos(0.5235987755982988), s = 0.5;
    for (int i = 0; i < 6400; i++) {
        double x = (i % 80 + 43) % 80 - 40.2, y = (i / 80 + 37) % 80 - 39.7;
        a[i] = 1 - hypot((c * x + s * y) / 20, (c * y - s * x) / 10);
    }
    mt_domains d;
    check_ok(mt_domains_find(g, a, 0, true, false, NULL, &d, &err), &err);
    assert_int_equal(d.count, 1);
    check_close(d.axis[0][0], 40, 0.01, 0);
    check_close(d.axis[0][1], 20, 0.01, 0);
    check_close(d.aspect[0], 2, 0.01, 0);
    check_close(d.direction[0][0], c, 0, 0.01);
    check_close(d.direction[0][1], s, 0, 0.01);
    mt_domains_free(&d);
    mt_free(a);
    mt_grid_unref(&g);
}

static void wound_has_no_shape(void **state) {
    (void)state;
    static const int n[3] = {8, 8, 1}, from[3] = {0, 2, 0}, size[3] = {8, 2, 1};
    static const double h[3] = {1, 1, 1};
    mt_grid *p = box(2, n, h, MT_PERIODIC), *m = box(2, n, h, MT_MIRROR);
    double *a = block(p, from, size);
    mt_domains d;
    check_ok(mt_domains_find(p, a, 0.5, true, false, NULL, &d, &err), &err);
    assert_true(isnan(d.aspect[0]) && isnan(d.axis[0][0]) && isnan(d.direction[0][1]) &&
                isnan(d.mean_aspect));
    mt_domains_free(&d);
    check_ok(mt_domains_find(m, a, 0.5, true, false, NULL, &d, &err), &err);
    check_close(d.aspect[0], 4, 1e-12, 0);
    mt_domains_free(&d);
    mt_free(a);
    mt_grid_unref(&p), mt_grid_unref(&m);
}

/* Variance between the classes above and below a level, by its definition. */
static double between(const mt_grid *g, const double *a, double level) {
    double n[2] = {0, 0}, sum[2] = {0, 0};
    for (size_t i = 0; i < g->cells; i++) n[a[i] > level]++, sum[a[i] > level] += a[i];
    if (n[0] == 0 || n[1] == 0) return 0;
    double apart = sum[0] / n[0] - sum[1] / n[1];
    return n[0] * n[1] * apart * apart;
}

static void otsu(void **state) {
    (void)state;
    static const int n[3] = {64, 64, 1};
    static const double h[3] = {1, 1, 1};
    mt_grid *g = box(2, n, h, MT_PERIODIC);
    double *a = mt_alloc(g->cells, sizeof *a);
    for (size_t i = 0; i < g->cells; i++) a[i] = i % 5 ? 0.2 : 0.6;
    check_close(mt_otsu_level(g, a), 0.4, 0, 1e-3);
    mt_random_fill(MT_RANDOM_NORMAL, 5, 0, g->cells, 0, 0, a);
    for (size_t i = 0; i < g->cells; i++) a[i] = 0.1 * a[i] + (i % 3 ? 0.2 : 0.9);
    double best = between(g, a, mt_otsu_level(g, a));
    for (int i = -20; i < 120; i++) assert_true(between(g, a, 0.01 * i) <= best * (1 + 1e-4));
    for (size_t i = 0; i < g->cells; i++) a[i] = 0.3;
    check_close(mt_otsu_level(g, a), 0.3, 0, 0);
    a[7] = NAN;
    assert_true(isnan(mt_otsu_level(g, a)));
    mt_free(a);
    mt_grid_unref(&g);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(blocks),
        cmocka_unit_test(ellipse),
        cmocka_unit_test(wound_has_no_shape),
        cmocka_unit_test(otsu),
    };
    return cmocka_run_group_tests_name("measure_shapes", tests, NULL, NULL);
}
