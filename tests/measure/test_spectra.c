/* Proved here: moments, peak and width of spectra made by hand; sectors add up to the shells and find the
 * direction of a wave, for all walls; the correlation of a wave is cos, J0 or sin(x)/x, its zeros theirs. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/correlation.h"
#include "core/measure/structure.h"

static mt_error err;
static const double pi = 3.14159265358979323846;

typedef struct scene {
    mt_grid *g;
    mt_sweeper *w;
    double *a;
} scene;

static scene open_scene(int dim, const int n[3], const double h[3], const mt_wall wall[3]) {
    scene s;
    check_ok(mt_grid_new(&s.g, dim, n, h, wall, &err), &err);
    check_ok(mt_sweeper_new(&s.w, s.g, NULL, &err), &err);
    s.a = mt_alloc(s.g->cells, sizeof *s.a);
    return s;
}

static void close_scene(scene *s) {
    mt_sweeper_free(&s->w);
    mt_grid_unref(&s->g);
    mt_free(s->a);
}

/* adds amplitude * cos(k . r), k in modes of 2 pi / L along each axis */
static void add_wave(scene *s, double amplitude, int mx, int my, int mz) {
    const mt_grid *g = s->g;
    for (size_t i = 0; i < g->cells; i++) {
        double x = (double)(i % (size_t)g->n[0]) + 0.5,
               y = (double)(i / (size_t)g->n[0] % (size_t)g->n[1]) + 0.5;
        double z = (double)(i / (size_t)g->n[0] / (size_t)g->n[1]) + 0.5;
        s->a[i] += amplitude * cos(2 * pi * (mx * x / g->n[0] + my * y / g->n[1] + mz * z / g->n[2]));
    }
}

static const mt_wall periodic[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
static const mt_wall mirror[3] = {MT_MIRROR, MT_MIRROR, MT_MIRROR};
static const double unit[3] = {1, 1, 1};

/* On a line every shell is one wave, S proportional to the square of its amplitude. */
static void moments(void **state) {
    (void)state;
    static const int n[3] = {64, 1, 1};
    scene s = open_scene(1, n, unit, periodic);
    double width = 2 * pi / 64, square[5] = {1, 4, 10, 5, 2.5};
    for (int i = 0; i < 64; i++) s.a[i] = 0;
    for (int i = 0; i < 5; i++) add_wave(&s, sqrt(square[i]), 6 + i, 0, 0);
    mt_structure t;
    check_ok(mt_structure_of(s.w, s.a, &t, &err), &err);
    double first = (6 + 4 * 7 + 80 + 45 + 25) / 22.5, second = (36 + 4 * 49 + 640 + 5 * 81 + 250) / 22.5;
    check_close(t.first, width * first, 1e-12, 0);
    check_close(t.second, width * width * second, 1e-12, 0);
    check_close(t.deviation, width * sqrt(second - first * first), 1e-10, 0);
    check_close(t.half_width, width * (9 - (7 + 1.0 / 6)), 1e-10, 0);
    check_close(t.peak_k * t.peak, 2 * pi, 1e-14, 0);
    assert_true(t.peak_k > width * 7.5 && t.peak_k < width * 8.5);
    mt_structure_free(&t);
    for (int i = 0; i < 64; i++) s.a[i] = 0.5; /* nothing to measure */
    check_ok(mt_structure_of(s.w, s.a, &t, &err), &err);
    assert_true(isnan(t.first) && isnan(t.second) && isnan(t.deviation) && isnan(t.half_width) &&
                isnan(t.peak));
    mt_structure_free(&t);
    close_scene(&s);
}

static void sectors_add_up(void **state) {
    (void)state;
    static const int n[3] = {17, 12, 10};
    static const double h[3] = {0.5, 0.75, 1};
    for (int dim = 2; dim <= 3; dim++)
        for (int w = 0; w < 1 << dim; w++) {
            mt_wall wall[3] = {(mt_wall)(w & 1), (mt_wall)(w >> 1 & 1), (mt_wall)(w >> 2 & 1)};
            scene s = open_scene(dim, n, h, wall);
            mt_random_fill(MT_RANDOM_NORMAL, (uint64_t)w, 0, s.g->cells, 0, 0, s.a);
            mt_structure t;
            mt_sectors x;
            check_ok(mt_structure_of(s.w, s.a, &t, &err), &err);
            check_ok(mt_sectors_of(s.w, s.a, 7, &x, &err), &err);
            assert_int_equal(x.sectors, dim == 2 ? 7 : 3);
            assert_int_equal(x.shells, t.shells);
            double share = 0;
            for (int j = 0; j < x.sectors; j++) share += x.share[j];
            check_close(share, 1, 1e-12, 0);
            for (int i = 0; i < t.shells; i++) {
                double modes = 0, sum = 0;
                for (int j = 0; j < x.sectors; j++) {
                    modes += x.modes[j * x.shells + i];
                    sum += x.s[j * x.shells + i] * x.modes[j * x.shells + i];
                }
                check_close(modes, t.modes[i], 1e-12, 0);
                check_close(sum, t.s[i] * t.modes[i], 1e-12, 0);
            }
            mt_structure_free(&t);
            mt_sectors_free(&x);
            close_scene(&s);
        }
}

/* A wave at 45 degrees, in a box of another shape; the sector of its direction holds all of it. */
static void direction_of_a_wave(void **state) {
    (void)state;
    static const int n[3] = {32, 48, 1}, cube[3] = {16, 16, 16};
    scene s = open_scene(2, n, unit, periodic);
    mt_sectors x;
    for (int way = 0; way < 2; way++) {
        for (size_t i = 0; i < s.g->cells; i++) s.a[i] = 0.3;
        add_wave(&s, 0.1, 4, way ? -6 : 6, 0);
        check_ok(mt_sectors_of(s.w, s.a, 12, &x, &err), &err);
        int at = way ? 9 : 3;
        check_close(x.share[at], 1, 1e-12, 0);
        check_close(x.angle[at], way ? 0.75 * pi : 0.25 * pi, 1e-15, 0);
        check_close(x.wavelength[at], 8 / sqrt(2), 0.06, 0); /* to the width of a shell */
        check_close(x.anisotropy, 1, 1e-12, 0);
        mt_sectors_free(&x);
    }
    assert_int_equal(mt_sectors_of(s.w, s.a, 1, &x, &err), MT_EINPUT);
    close_scene(&s);
    s = open_scene(2, n, unit, mirror); /* a cosine holds both signs: no side is preferred */
    for (size_t i = 0; i < s.g->cells; i++)
        s.a[i] = cos(pi * 8 * ((double)(i % 32) + 0.5) / 32) * cos(pi * 12 * ((double)(i / 32) + 0.5) / 48);
    check_ok(mt_sectors_of(s.w, s.a, 12, &x, &err), &err);
    check_close(x.share[3], 0.5, 1e-12, 0);
    check_close(x.share[9], 0.5, 1e-12, 0);
    mt_sectors_free(&x);
    close_scene(&s);
    s = open_scene(3, cube, unit, periodic);
    for (size_t i = 0; i < s.g->cells; i++) s.a[i] = 0;
    add_wave(&s, 0.1, 1, 3, 2);
    add_wave(&s, 0.1, 2, 0, 2); /* halfway between x and z */
    check_ok(mt_sectors_of(s.w, s.a, 12, &x, &err), &err);
    check_close(x.share[0], 0.25, 1e-12, 0);
    check_close(x.share[1], 0.5, 1e-12, 0);
    check_close(x.share[2], 0.25, 1e-12, 0);
    check_close(x.anisotropy, 1.0 / 3, 1e-12, 0);
    mt_sectors_free(&x);
    close_scene(&s);
}

static void correlation_of_a_wave(void **state) {
    (void)state;
    static const int n[3] = {32, 32, 32};
    static const double zero[3] = {1.5707963267948966, 2.404825557695773, 3.141592653589793};
    static const double second[3] = {6.283185307179586, 7.015586669815619, 7.725251836937707}; /* maxima */
    static const double h[3] = {0.5, 0.5, 0.5};
    for (int dim = 1; dim <= 3; dim++)
        for (int w = 0; w < 2; w++) {
            scene s = open_scene(dim, n, h, w ? mirror : periodic);
            for (size_t i = 0; i < s.g->cells; i++) s.a[i] = 0.5;
            add_wave(&s, 0.1, 4, 0, 0); /* k = pi / 2 */
            mt_correlation c;
            check_ok(mt_correlation_of(s.w, s.a, &c, &err), &err);
            assert_int_equal(c.count, w ? 33 : 17);
            check_close(c.r[3], 1.5, 1e-15, 0);
            for (int i = 0; i < c.count; i++) {
                double x = pi / 2 * c.r[i];
                check_close(c.c[i], dim == 1 ? cos(x) : dim == 2 ? j0(x) : i ? sin(x) / x : 1, 0, 1e-12);
            }
            check_close(c.zero, zero[dim - 1] / (pi / 2), 1e-10, 0);
            check_close(c.spacing, second[dim - 1] / (pi / 2), 0.005, 0);
            mt_correlation_free(&c);
            for (size_t i = 0; i < s.g->cells; i++) s.a[i] = 0.5;
            check_ok(mt_correlation_of(s.w, s.a, &c, &err), &err);
            assert_true(isnan(c.c[0]) && isnan(c.zero) && isnan(c.spacing));
            mt_correlation_free(&c);
            close_scene(&s);
        }
}

static mt_status everything(void *ctx, mt_error *e) {
    mt_grid *g = NULL;
    mt_sweeper *w = NULL;
    mt_sectors s = {0};
    mt_correlation c = {0};
    int n[2] = {6, 5};
    double a[30];
    (void)ctx;
    for (int i = 0; i < 30; i++) a[i] = (i * 7) % 5;
    mt_status st = mt_grid_new(&g, 2, n, unit, periodic, e);
    if (!st) st = mt_sweeper_new(&w, g, NULL, e);
    if (!st) st = mt_sectors_of(w, a, 4, &s, e);
    if (!st) st = mt_correlation_of(w, a, &c, e);
    mt_sectors_free(&s);
    mt_correlation_free(&c);
    mt_sweeper_free(&w);
    mt_grid_unref(&g);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    check_allocation_sweep(everything, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(moments),
        cmocka_unit_test(sectors_add_up),
        cmocka_unit_test(direction_of_a_wave),
        cmocka_unit_test(correlation_of_a_wave),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("measure_spectra", tests, NULL, NULL);
}
