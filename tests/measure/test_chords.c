/* Proved here: chords of lines known by hand, for both walls; periodic chords do not notice where the box is
 * cut; a mirror box has half the chords of its double; chords and endless lines make up the phase; means of
 * discs and balls are those of Cauchy. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/chords.h"
#include "core/measure/statistics.h"

static mt_error err;
static const double pi = 3.14159265358979323846;

static mt_grid *box(int dim, const int n[3], const double h[3], mt_wall wall) {
    mt_grid *g;
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, n, h, walls, &err), &err);
    return g;
}

static void by_hand(void **state) {
    (void)state;
    static const int n[3] = {10, 1, 1};
    static const double h[3] = {0.5, 1, 1}, a[10] = {1, 1, 0, 0, 0, 1, 0, 1, 1, 1};
    mt_grid *p = box(1, n, h, MT_PERIODIC), *m = box(1, n, h, MT_MIRROR);
    mt_chords c;
    check_ok(mt_chords_find(p, a, 0.5, true, &c, &err), &err);
    assert_int_equal(c.axis[0].longest, 9);
    assert_true(c.axis[0].number[5] == 1 && c.axis[0].number[1] == 1 && c.axis[0].chords == 2);
    check_close(c.mean, 1.5, 1e-15, 0);
    check_close(c.axis[0].deviation, 1, 1e-15, 0);
    mt_chords_free(&c);
    check_ok(mt_chords_find(p, a, 0.5, false, &c, &err), &err);
    assert_true(c.axis[0].number[3] == 1 && c.axis[0].number[1] == 1 && c.axis[0].chords == 2);
    mt_chords_free(&c);
    check_ok(mt_chords_find(m, a, 0.5, true, &c, &err), &err);
    assert_true(c.axis[0].number[4] == 0.5 && c.axis[0].number[1] == 1 && c.axis[0].number[6] == 0.5);
    check_close(c.mean, 0.5 * 6 / 2, 1e-15, 0);
    mt_chords_free(&c);
    check_ok(mt_chords_find(m, a, 2, false, &c, &err), &err);
    assert_true(c.axis[0].chords == 0 && c.axis[0].endless == 1 && isnan(c.mean) &&
                isnan(c.axis[0].deviation));
    mt_chords_free(&c);
    mt_chords_free(&c);
    mt_grid_unref(&p), mt_grid_unref(&m);
}

/* sum of lengths and endless lines = volume of the phase, for each axis */
static void make_up_the_phase(const mt_grid *g, const double *a, const mt_chords *c) {
    double cells = mt_phase_fraction(g, a, 0.3, true) * (double)g->cells;
    for (int i = 0; i < g->dim; i++) {
        double sum = 0;
        for (int l = 1; l <= c->axis[i].longest; l++) sum += l * c->axis[i].number[l];
        check_close(sum / (1 - c->axis[i].endless), cells, 1e-12, 0);
    }
}

static void rolled_and_doubled(void **state) {
    (void)state;
    static const int n[3] = {6, 5, 7}, twice[3] = {12, 10, 14};
    static const double h[3] = {0.5, 1, 2};
    mt_grid *p = box(3, n, h, MT_PERIODIC), *m = box(3, n, h, MT_MIRROR), *d = box(3, twice, h, MT_PERIODIC);
    double a[210], rolled[210], doubled[1680];
    mt_random_fill(MT_RANDOM_UNIFORM, 4, 0, 210, 0, 0, a);
    for (int i = 0; i < 210; i++) {
        int x = (i % 6 + 4) % 6, y = (i / 6 % 5 + 2) % 5, z = (i / 30 + 5) % 7;
        rolled[i] = a[(z * 5 + y) * 6 + x];
    }
    for (int i = 0; i < 1680; i++) {
        int x = i % 12, y = i / 12 % 10, z = i / 120;
        x = x < 6 ? x : 11 - x, y = y < 5 ? y : 9 - y, z = z < 7 ? z : 13 - z;
        doubled[i] = a[(z * 5 + y) * 6 + x];
    }
    mt_chords c[4];
    check_ok(mt_chords_find(p, a, 0.3, true, &c[0], &err), &err);
    check_ok(mt_chords_find(p, rolled, 0.3, true, &c[1], &err), &err);
    check_ok(mt_chords_find(m, a, 0.3, true, &c[2], &err), &err);
    check_ok(mt_chords_find(d, doubled, 0.3, true, &c[3], &err), &err);
    make_up_the_phase(p, a, &c[0]), make_up_the_phase(m, a, &c[2]);
    for (int i = 0; i < 3; i++) {
        for (int l = 1; l < n[i]; l++) assert_true(c[0].axis[i].number[l] == c[1].axis[i].number[l]);
        for (int l = 1; l <= c[2].axis[i].longest; l++)
            check_close(8 * c[2].axis[i].number[l], c[3].axis[i].number[l], 0, 0);
        check_close(c[2].axis[i].endless, c[3].axis[i].endless, 1e-14, 0);
        check_close(c[2].axis[i].mean, c[3].axis[i].mean, 1e-14, 0);
    }
    for (int i = 0; i < 4; i++) mt_chords_free(&c[i]);
    mt_grid_unref(&p), mt_grid_unref(&m), mt_grid_unref(&d);
}

/* pi A / L = pi R / 2 and 4 V / S = 4 R / 3, less the short chords between two lines of cells */
static void discs_and_balls(void **state) {
    (void)state;
    static const int n[3] = {100, 100, 100};
    static const double h[3] = {0.5, 0.5, 0.5}, radius = 20;
    for (int dim = 2; dim <= 3; dim++) {
        mt_grid *g = box(dim, n, h, MT_PERIODIC);
        double *a = mt_alloc(g->cells, sizeof *a);
        for (size_t i = 0; i < g->cells; i++) {
            double x = (double)(i % 100) * 0.5 - 24.6, y = (double)(i / 100 % 100) * 0.5 - 24.7;
            double z = dim == 3 ? (double)(i / 10000) * 0.5 - 24.8 : 0;
            a[i] = radius - sqrt(x * x + y * y + z * z);
        }
        mt_chords c;
        check_ok(mt_chords_find(g, a, 0, true, &c, &err), &err);
        for (int i = 0; i < dim; i++)
            check_close(c.axis[i].mean, dim == 2 ? pi * radius / 2 : 4 * radius / 3, 0.01, 0);
        check_close(c.mean, dim == 2 ? pi * radius / 2 : 4 * radius / 3, 0.01, 0);
        mt_chords_free(&c);
        mt_free(a);
        mt_grid_unref(&g);
    }
}

static mt_status one(void *ctx, mt_error *e) {
    mt_grid *g = NULL;
    mt_chords c = {0};
    int n[2] = {6, 5};
    double h[2] = {1, 1}, a[30];
    mt_wall wall[2] = {MT_PERIODIC, MT_MIRROR};
    (void)ctx;
    for (int i = 0; i < 30; i++) a[i] = (i * 7) % 5;
    mt_status st = mt_grid_new(&g, 2, n, h, wall, e);
    if (!st) st = mt_chords_find(g, a, 1.5, true, &c, e);
    mt_chords_free(&c);
    mt_grid_unref(&g);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    check_allocation_sweep(one, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(by_hand),
        cmocka_unit_test(rolled_and_doubled),
        cmocka_unit_test(discs_and_balls),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("measure_chords", tests, NULL, NULL);
}
