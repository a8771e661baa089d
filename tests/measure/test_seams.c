/* Proved here: interfaces do not notice where the box is cut: rolled across periodic walls the measure stays,
 * and a mirror box has half of what the box doubled by reflection has; peaks are not made by noise or by
 * outliers, and small phases are found; the sum rule holds on odd grids for every mixture of walls; a wave is
 * read at its own wavelength in an unequal box; widths refuse what is no interface. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/interface.h"
#include "core/measure/statistics.h"
#include "core/measure/structure.h"

static mt_error err;
static const double pi = 3.14159265358979323846;
static const double spacing[3] = {0.5, 1, 0.75};

static mt_grid *box(int dim, const int n[3], const mt_wall wall[3]) {
    mt_grid *g;
    check_ok(mt_grid_new(&g, dim, n, spacing, wall, &err), &err);
    return g;
}

static double *noise(const mt_grid *g, mt_random_kind kind, int seed) {
    double *a = mt_alloc(g->cells, sizeof *a);
    mt_random_fill(kind, (uint64_t)seed, 0, g->cells, 0, 0, a);
    return a;
}

/* b(cell) = a(cell moved by d, around the box) */
static double *rolled(const mt_grid *g, const double *a, const int d[3]) {
    double *b = mt_alloc(g->cells, sizeof *b);
    for (int i = 0; i < (int)g->cells; i++) {
        int x = i % g->n[0], y = i / g->n[0] % g->n[1], z = i / g->n[0] / g->n[1];
        x = (x + d[0]) % g->n[0], y = (y + d[1]) % g->n[1], z = (z + d[2]) % g->n[2];
        b[i] = a[(z * g->n[1] + y) * g->n[0] + x];
    }
    return b;
}

static void rolling_changes_nothing(void **state) {
    (void)state;
    static const int n[3] = {9, 7, 5}, d[3] = {4, 3, 2};
    static const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    for (int dim = 1; dim <= 3; dim++) {
        mt_grid *g = box(dim, n, wall);
        double *a = noise(g, MT_RANDOM_UNIFORM, dim), *b = rolled(g, a, d);
        double seen = mt_interface_measure(g, a, 0.1);
        assert_true(seen > 0);
        check_close(mt_interface_measure(g, b, 0.1), seen, 1e-12, 0);
        check_close(mt_interface_spacing(g, seen) * seen, g->volume, 1e-14, 0);
        mt_free(a), mt_free(b);
        mt_grid_unref(&g);
    }
}

/* 2-D only: six tetrahedra to a cube are not their own mirror image, so areas agree to their accuracy only.
 */
static void mirrors_halve(void **state) {
    (void)state;
    static const int n[3] = {9, 8, 1}, twice[3] = {18, 16, 1};
    static const mt_wall mirror[3] = {MT_MIRROR, MT_MIRROR, MT_MIRROR};
    static const mt_wall around[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    mt_grid *g = box(2, n, mirror), *p = box(2, twice, around);
    double *a = noise(g, MT_RANDOM_UNIFORM, 3), *b = mt_alloc(p->cells, sizeof *b);
    for (int y = 0; y < 16; y++)
        for (int x = 0; x < 18; x++) b[y * 18 + x] = a[(y < 8 ? y : 15 - y) * 9 + (x < 9 ? x : 17 - x)];
    check_close(4 * mt_interface_measure(g, a, 0.1), mt_interface_measure(p, b, 0.1), 1e-12, 0);
    assert_true(isnan(mt_interface_spacing(g, 0)));
    mt_free(a), mt_free(b);
    mt_grid_unref(&g), mt_grid_unref(&p);
}

static mt_peaks peaks_of(const mt_grid *g, const double *a) {
    mt_peaks p;
    check_ok(mt_peaks_of(g, a, &p, &err), &err);
    return p;
}

static void noise_has_one_peak(void **state) {
    (void)state;
    static const int sizes[3][3] = {{200, 1, 1}, {64, 64, 1}, {128, 128, 1}};
    static const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    for (int c = 0; c < 3; c++) {
        mt_grid *g = box(2, sizes[c], wall);
        for (int seed = 0; seed < 40; seed++) {
            double *a = noise(g, seed % 2 ? MT_RANDOM_NORMAL : MT_RANDOM_UNIFORM, seed);
            assert_false(peaks_of(g, a).two);
            a[17] = 9; /* an outlier */
            assert_false(peaks_of(g, a).two);
            mt_free(a);
        }
        mt_grid_unref(&g);
    }
}

static void phases_have_two_peaks(void **state) {
    (void)state;
    static const int n[3] = {128, 128, 1};
    static const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    mt_grid *g = box(2, n, wall);
    double *a = noise(g, MT_RANDOM_NORMAL, 1);
    for (int i = 0; i < 128 * 128; i++) a[i] = (i < 160 ? 0.9 : 0.1) + 0.005 * a[i]; /* 1 % of the cells */
    mt_peaks p = peaks_of(g, a);
    assert_true(p.two);
    check_close(p.low, 0.1, 0, 0.002);
    check_close(p.high, 0.9, 0, 0.002);
    for (int i = 0; i < 128 * 128; i++) a[i] = i % 3 ? 0.25 : 0.75; /* a picture of two values */
    p = peaks_of(g, a);
    assert_true(p.two);
    check_close(p.low, 0.25, 1e-12, 0);
    check_close(p.high, 0.75, 1e-12, 0);
    for (int i = 0; i < 128 * 128; i++) a[i] = 0.3 + 0.05 * sin(2 * pi * (i % 128 + 0.3) / 64);
    p = peaks_of(g, a);
    check_close(p.amplitude, 0.1, 0.03, 0);
    a[5] = NAN;
    p = peaks_of(g, a);
    assert_true(!p.two && isnan(p.amplitude));
    mt_free(a);
    mt_grid_unref(&g);
}

static void sum_rule(void **state) {
    (void)state;
    static const int n[3] = {9, 7, 5};
    for (int dim = 1; dim <= 3; dim++)
        for (int bits = 0; bits < 8; bits++) {
            mt_wall wall[3] = {bits & 1, bits >> 1 & 1, bits >> 2 & 1};
            mt_grid *g = box(dim, n, wall);
            mt_sweeper *sweeper;
            mt_structure s;
            mt_statistics st;
            double *a = noise(g, MT_RANDOM_NORMAL, bits);
            check_ok(mt_sweeper_new(&sweeper, g, NULL, &err), &err);
            check_ok(mt_structure_of(sweeper, a, &s, &err), &err);
            mt_statistics_of(g, a, &st);
            check_close(s.variance, st.variance, 1e-12, 0);
            mt_structure_free(&s), mt_free(a);
            mt_sweeper_free(&sweeper);
            mt_grid_unref(&g);
        }
}

/* 1-D, so that a shell is one mode: the wave's shell holds V var / 2 per mode (two modes of +-k) or V var. */
static void one_wave(void **state) {
    (void)state;
    for (int w = 0; w < 2; w++) {
        static const int n[3] = {64, 1, 1};
        mt_wall wall[3] = {w ? MT_MIRROR : MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
        mt_grid *g = box(2, n, wall);
        mt_sweeper *sweeper;
        mt_structure s;
        double *a = mt_alloc(g->cells, sizeof *a);
        for (int i = 0; i < 64; i++) a[i] = 0.5 + 0.2 * cos(2 * pi * 5 * (i + 0.5) / 64);
        check_ok(mt_sweeper_new(&sweeper, g, NULL, &err), &err);
        check_ok(mt_structure_of(sweeper, a, &s, &err), &err);
        check_close(s.width, 2 * pi / 32, 1e-14, 0); /* the axis of one cell does not count */
        check_close(s.modes[4], 2, 0, 0);
        check_close(s.s[4], g->volume * 0.02 / 2, 1e-12, 0);
        check_close(s.variance, 0.02, 1e-12, 0);
        if (!w) check_close(s.wavelength, 32.0 / 5, 1e-12, 0);
        mt_structure_free(&s), mt_free(a);
        mt_sweeper_free(&sweeper);
        mt_grid_unref(&g);
    }
}

static void no_width_without_plateaus(void **state) {
    (void)state;
    double a[64], width;
    for (int i = 0; i < 64; i++) a[i] = 0.5 + 0.3 * sin(2 * pi * (i + 0.5) / 32); /* 0.2 .. 0.8: never 10 % */
    assert_int_equal(mt_interface_width(64, 1, MT_PERIODIC, a, 0, 1, &width, &err), MT_EINPUT);
    assert_true(isnan(width));
    check_ok(mt_interface_width(64, 1, MT_PERIODIC, a, 0.2, 0.8, &width, &err), &err);
    check_close(width, 2 * asin(0.8) / (2 * pi / 32), 1e-10, 0);
    check_ok(mt_interface_width(64, 1, MT_PERIODIC, a, 0.8, 0.2, &width, &err), &err);
    check_close(width, 2 * asin(0.8) / (2 * pi / 32), 1e-10, 0);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(rolling_changes_nothing),
        cmocka_unit_test(mirrors_halve),
        cmocka_unit_test(noise_has_one_peak),
        cmocka_unit_test(phases_have_two_peaks),
        cmocka_unit_test(sum_rule),
        cmocka_unit_test(one_wave),
        cmocka_unit_test(no_width_without_plateaus),
    };
    return cmocka_run_group_tests_name("seams", tests, NULL, NULL);
}
