/* Proved here: statistics, peaks, domains, interface, structure factor and fits on images whose answers are
 * known. */
#include "tests/support.h"

#include <math.h>
#include <string.h>

#include "core/base/random.h"
#include "core/measure/domains.h"
#include "core/measure/growth.h"
#include "core/measure/interface.h"
#include "core/measure/statistics.h"
#include "core/measure/structure.h"

static mt_error err;
static const double pi = 3.14159265358979323846;

static mt_grid *grid(int dim, int n, double h, mt_wall wall) {
    mt_grid *g;
    int cells[3] = {n, n, n};
    double spacing[3] = {h, h, h};
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, cells, spacing, walls, &err), &err);
    return g;
}

/* values from a function of position relative to the box's middle (or corner) */
static double *image(const mt_grid *g, double (*f)(const double r[3])) {
    double *a = mt_alloc(g->cells, sizeof *a), r[3] = {0, 0, 0};
    size_t i = 0;
    for (int z = 0; z < g->n[2]; z++)
        for (int y = 0; y < g->n[1]; y++)
            for (int x = 0; x < g->n[0]; x++) {
                r[0] = (x + 0.5) * g->h[0], r[1] = (y + 0.5) * g->h[1], r[2] = (z + 0.5) * g->h[2];
                a[i++] = f(r);
            }
    return a;
}

static double centre, radius;
static double disc(const double r[3]) {
    return radius - hypot(r[0] - centre, r[1] - centre);
}
static double ball(const double r[3]) {
    double x = r[0] - centre, y = r[1] - centre, z = r[2] - centre;
    return radius - sqrt(x * x + y * y + z * z);
}
static double quarter(const double r[3]) {
    return radius - hypot(r[0], r[1]);
}
static double stripes(const double r[3]) {
    return sin(2 * pi * 4 * r[0] / 32);
}
static double checks(const double r[3]) {
    return ((int)r[0] + (int)r[1]) % 2 ? 1 : -1;
}
static double octant(const double r[3]) {
    return radius - sqrt(r[0] * r[0] + r[1] * r[1] + r[2] * r[2]);
}

static void interfaces(void **state) {
    (void)state;
    mt_grid *g = grid(2, 64, 0.5, MT_PERIODIC);
    centre = 16.1, radius = 9;
    double *a = image(g, disc);
    check_close(mt_interface_measure(g, a, 0), 2 * pi * 9, 1e-3, 0);
    check_close(mt_phase_fraction(g, a, 0, true), pi * 81 / 1024, 1e-2, 0);
    check_close(mt_phase_fraction(g, a, 0, true) + mt_phase_fraction(g, a, 0, false), 1, 1e-15, 0);
    mt_free(a), mt_grid_unref(&g);
    g = grid(2, 64, 0.5,
             MT_MIRROR); /* a quarter of a circle about a corner: the contour runs up to the walls */
    a = image(g, quarter);
    check_close(mt_interface_measure(g, a, 0), pi * 9 / 2, 1e-3, 0);
    mt_free(a), mt_grid_unref(&g);
    g = grid(3, 32, 0.5, MT_PERIODIC);
    centre = 8.1, radius = 5;
    a = image(g, ball);
    check_close(mt_interface_measure(g, a, 0), 4 * pi * 25, 5e-3, 0);
    mt_free(a), mt_grid_unref(&g);
    g = grid(3, 32, 0.5, MT_MIRROR);
    a = image(g, octant);
    check_close(mt_interface_measure(g, a, 0), 4 * pi * 25 / 8, 5e-3, 0);
    mt_free(a), mt_grid_unref(&g);
    g = grid(2, 32, 1, MT_PERIODIC);
    a = image(g, stripes);
    check_close(mt_interface_measure(g, a, 0), 8 * 32, 1e-12, 0);
    mt_free(a), mt_grid_unref(&g);
}

static size_t count(const mt_grid *g, const double *a, double level, bool above, bool full) {
    mt_domains d;
    check_ok(mt_domains_find(g, a, level, above, full, NULL, &d, &err), &err);
    size_t n = d.count;
    double sum = 0;
    for (size_t i = 0; i < n; i++) sum += d.size[i];
    check_close(sum, d.total, 1e-14, 0);
    check_close(d.total, mt_phase_fraction(g, a, level, above) * g->volume, 1e-12, 1e-300);
    mt_domains_free(&d);
    return n;
}

static void domains(void **state) {
    (void)state;
    mt_grid *p = grid(2, 32, 1, MT_PERIODIC), *m = grid(2, 32, 1, MT_MIRROR);
    double *a = image(p, stripes);
    assert_int_equal(count(p, a, 0, true, false), 4);
    assert_int_equal(count(m, a, 0, true, false), 4);
    mt_free(a);
    a = image(p, checks);
    assert_int_equal(count(p, a, 0, true, false), 512);
    assert_int_equal(count(p, a, 0, true, true), 1);
    mt_free(a);
    centre = 0, radius = 5; /* a disc about the corner: one domain across periodic walls, in four parts
                               between mirrors' walls */
    a = image(p, quarter);
    assert_int_equal(count(p, a, 0, true, false), 1);
    for (size_t i = 0; i < p->cells; i++) {
        double x = fmin((double)(i % 32) + 0.5, 31.5 - (double)(i % 32)),
               y = fmin((double)(i / 32) + 0.5, 31.5 - (double)(i / 32));
        a[i] = 5 - hypot(x, y);
    }
    assert_int_equal(count(p, a, 0, true, false), 1);
    assert_int_equal(count(m, a, 0, true, false), 4);
    assert_int_equal(count(m, a, 0, false, false), 1);
    assert_int_equal(count(m, a, 100, true, false), 0);
    int32_t *labels = mt_alloc(m->cells, sizeof *labels);
    mt_domains d;
    check_ok(mt_domains_find(m, a, 0, true, false, labels, &d, &err), &err);
    assert_true(labels[0] == 1 && labels[31] == 2 && labels[16] == 0 && labels[31 * 32] == 3 &&
                labels[1023] == 4);
    mt_domains_free(&d);
    mt_free(labels), mt_free(a);
    mt_grid_unref(&p), mt_grid_unref(&m);
}

static double wave_k;
static double wave(const double r[3]) {
    return 0.5 + 0.1 * cos(wave_k * r[0]);
}
static double noisy(const double r[3]) {
    double v;
    mt_random_fill(MT_RANDOM_NORMAL, 1, (uint64_t)(r[0] * 7919 + r[1] * 104729), 1, 0, 0, &v);
    return v;
}

static void structure(void **state) {
    (void)state;
    for (int w = 0; w < 2; w++) {
        mt_grid *g = grid(2, 48, 0.5, w ? MT_MIRROR : MT_PERIODIC);
        mt_sweeper *sweeper;
        mt_structure s;
        mt_statistics st;
        check_ok(mt_sweeper_new(&sweeper, g, NULL, &err), &err);
        wave_k = 2 * pi / 24 * 6;
        double *a = image(g, wave);
        check_ok(mt_structure_of(sweeper, a, &s, &err), &err);
        check_close(s.variance, 0.005, 1e-12, 0);
        check_close(s.wavelength, 4, 0.02,
                    0); /* the mean k of the wave's shell is 1.6 % off the wave's own */
        check_close(s.peak, 4, 0.02, 0);
        mt_structure_free(&s), mt_free(a);
        a = image(g, noisy);
        check_ok(mt_structure_of(sweeper, a, &s, &err), &err);
        mt_statistics_of(g, a, &st);
        double *spectrum = mt_alloc(mt_sweeper_spectrum(sweeper)->doubles, 8),
               *work = mt_alloc(mt_sweeper_work_doubles(sweeper), 8);
        check_ok(mt_transform_forward(sweeper, a, 0, spectrum, work, &err), &err);
        check_ok(mt_transform_inverse(sweeper, spectrum, 0, a, work, &err), &err);
        mt_statistics_of(g, a, &st); /* without the Nyquist mode, which no transform keeps */
        check_close(s.variance, st.variance, 1e-12, 0);
        mt_free(spectrum), mt_free(work), mt_free(a);
        mt_structure_free(&s);
        mt_sweeper_free(&sweeper);
        mt_grid_unref(&g);
    }
}

static double two_phases(const double r[3]) {
    return 0.2 + 0.6 * (r[0] < 12) + 0.01 * noisy(r);
}
static double one_phase(const double r[3]) {
    return 0.4 + 0.02 * noisy(r);
}

static void peaks(void **state) {
    (void)state;
    mt_grid *g = grid(2, 64, 0.5, MT_PERIODIC);
    mt_peaks p;
    double *a = image(g, two_phases);
    check_ok(mt_peaks_of(g, a, &p, &err), &err);
    assert_true(p.two);
    check_close(p.low, 0.2, 0, 0.005);
    check_close(p.high, 0.8, 0, 0.005);
    check_close(p.level, 0.5, 0, 0.005);
    mt_free(a);
    a = image(g, one_phase);
    check_ok(mt_peaks_of(g, a, &p, &err), &err);
    assert_false(p.two);
    check_close(p.amplitude, 2 * sqrt(2) * 0.02, 0.05, 0);
    check_close(p.level, 0.4, 0, 0.002);
    for (size_t i = 0; i < g->cells; i++) a[i] = 0.7;
    check_ok(mt_peaks_of(g, a, &p, &err), &err);
    assert_true(!p.two && p.amplitude == 0 && p.level == 0.7);
    mt_free(a);
    mt_grid_unref(&g);
}

static void statistics(void **state) {
    (void)state;
    mt_grid *g = grid(1, 5, 2, MT_MIRROR);
    double a[5] = {3, -1, 4, 1, -1};
    mt_statistics s;
    mt_statistics_of(g, a, &s);
    check_close(s.mean, 1.2, 1e-15, 0);
    check_close(s.integral, 12, 1e-15, 0);
    check_close(s.variance, 4.16, 1e-15, 0);
    assert_true(s.minimum == -1 && s.minimum_cell == 1 && s.maximum == 4 && s.maximum_cell == 2);
    check_close(mt_interface_measure(g, a, 0), 3, 0, 0);
    mt_grid_unref(&g);
}

/* tanh profile: 10-90 width 2 artanh(0.8) delta (Cahn & Hilliard, J. Chem. Phys. 28 (1958) 258, double well).
 */
static void widths(void **state) {
    (void)state;
    enum { N = 128 };
    double a[N], width;
    for (int w = 0; w < 2; w++) {
        for (int i = 0; i < N; i++) {
            double x = i + 0.5;
            a[i] = w ? 0.5 * (1 + tanh((x - 60.3) / 4)) : 0.5 * (tanh((x - 30.3) / 4) - tanh((x - 97.1) / 4));
        }
        check_ok(mt_interface_width(N, 0.5, w ? MT_MIRROR : MT_PERIODIC, a, 0, 1, &width, &err), &err);
        check_close(width, 2 * atanh(0.8) * 4 * 0.5, 1e-5, 0);
    }
    for (int i = 0; i < N; i++) a[i] = 0.1;
    assert_int_equal(mt_interface_width(N, 0.5, MT_PERIODIC, a, 0, 1, &width, &err), MT_EINPUT);
}

static void fits(void **state) {
    (void)state;
    double t[20], l[20], c[20];
    mt_line_fit f;
    for (int i = 0; i < 20; i++)
        t[i] = 10 * (i + 1), l[i] = 3 * pow(t[i], 1.0 / 3), c[i] = cbrt(50 + 0.7 * t[i]);
    check_ok(mt_fit_power(20, t, l, 0, 1e9, &f, &err), &err);
    check_close(f.slope, 1.0 / 3, 1e-12, 0);
    check_close(f.slope_error, 0, 0, 1e-9);
    check_ok(mt_fit_cubic(20, t, c, &f, &err), &err);
    check_close(f.slope, 0.7, 1e-11, 0);
    check_close(f.intercept, 50, 1e-10, 0);
    assert_int_equal(mt_fit_power(20, t, l, 15, 25, &f, &err), MT_EINPUT);
}

static mt_status everything(void *ctx, mt_error *e) {
    mt_grid *g = NULL;
    mt_sweeper *w = NULL;
    mt_structure s = {0};
    mt_domains d = {0};
    mt_peaks p;
    int n[2] = {6, 5};
    double h[2] = {1, 1}, a[30], width;
    mt_wall wall[2] = {MT_PERIODIC, MT_MIRROR};
    (void)ctx;
    for (int i = 0; i < 30; i++) a[i] = (i * 7) % 5;
    mt_status st = mt_grid_new(&g, 2, n, h, wall, e);
    if (!st) st = mt_sweeper_new(&w, g, NULL, e);
    if (!st) st = mt_structure_of(w, a, &s, e);
    if (!st) st = mt_domains_find(g, a, 1.5, true, false, NULL, &d, e);
    if (!st) st = mt_peaks_of(g, a, &p, e);
    if (!st) st = mt_interface_width(30, 1, MT_PERIODIC, a, 0, 4, &width, e);
    mt_structure_free(&s);
    mt_domains_free(&d);
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
        cmocka_unit_test(interfaces), cmocka_unit_test(domains),    cmocka_unit_test(structure),
        cmocka_unit_test(peaks),      cmocka_unit_test(statistics), cmocka_unit_test(widths),
        cmocka_unit_test(fits),       cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("measure", tests, NULL, NULL);
}
