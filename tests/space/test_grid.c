/* Proved: sizes, volumes and wavenumbers of grids, sharing and comparing them, every message for a grid that
 * cannot be, and that a failed allocation leaves nothing behind. */
#include "core/space/grid.h"

#include <math.h>
#include <string.h>

#include "tests/support.h"

static const mt_wall all_periodic[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};

static void sizes_and_volumes(void **state) {
    (void)state;
    mt_grid *g;
    mt_error err;
    const int n[2] = {6, 5};
    const double h[2] = {0.5, 2};
    const mt_wall wall[2] = {MT_MIRROR, MT_PERIODIC};
    check_ok(mt_grid_new(&g, 2, n, h, wall, &err), &err);
    assert_int_equal(g->n[0], 6);
    assert_int_equal(g->n[2], 1);
    check_close(g->h[2], 1, 0, 0);
    assert_int_equal(g->cells, 30);
    check_close(g->cell_volume, 1, 0, 0);
    check_close(g->volume, 30, 0, 0);
    assert_int_equal(g->wall[0], MT_MIRROR);
    mt_grid_unref(&g);
    assert_null(g);
    mt_grid_unref(&g);
}

static void wavenumbers(void **state) {
    (void)state;
    const double pi = 3.14159265358979323846, h[3] = {0.5, 2, 3};
    const int n[3] = {6, 5, 4};
    const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_MIRROR};
    const double x[6] = {0, 1, 2, 3, -2, -1}, y[5] = {0, 1, 2, -2, -1};
    mt_grid *g;
    mt_error err;
    check_ok(mt_grid_new(&g, 3, n, h, wall, &err), &err);
    for (int m = 0; m < 6; m++) check_close(mt_grid_wavenumber(g, 0, m), 2 * pi * x[m] / 3, 1e-15, 0);
    for (int m = 0; m < 5; m++) check_close(mt_grid_wavenumber(g, 1, m), 2 * pi * y[m] / 10, 1e-15, 0);
    for (int m = 0; m < 4; m++) check_close(mt_grid_wavenumber(g, 2, m), pi * m / 12, 1e-15, 0);
    mt_grid_unref(&g);
}

/* A mode number above 2^30 doubled does not fit an int. */
static void wavenumber_of_the_longest_line(void **state) {
    (void)state;
    const int n[1] = {2147483647};
    const double h[1] = {1};
    mt_grid *g;
    mt_error err;
    check_ok(mt_grid_new(&g, 1, n, h, all_periodic, &err), &err);
    check_close(mt_grid_wavenumber(g, 0, 2147483646), -2 * 3.14159265358979323846 / 2147483647.0, 1e-15, 0);
    mt_grid_unref(&g);
}

static void sharing(void **state) {
    (void)state;
    const int n[1] = {4};
    const double h[1] = {1};
    size_t before = mt_memory_blocks();
    mt_grid *g, *other;
    mt_error err;
    check_ok(mt_grid_new(&g, 1, n, h, all_periodic, &err), &err);
    other = mt_grid_ref(g);
    assert_ptr_equal(g, other);
    mt_grid_unref(&g);
    assert_int_equal(other->cells, 4);
    mt_grid_unref(&other);
    assert_int_equal(mt_memory_blocks(), before);
}

static bool equal_to_base(int dim, int nx, double hy, mt_wall wx) {
    const int base_n[2] = {4, 3}, n[3] = {nx, 3, 1};
    const double base_h[2] = {1, 2}, h[3] = {1, hy, 1};
    const mt_wall wall[3] = {wx, MT_PERIODIC, MT_PERIODIC};
    mt_grid *a, *b;
    mt_error err;
    check_ok(mt_grid_new(&a, 2, base_n, base_h, all_periodic, &err), &err);
    check_ok(mt_grid_new(&b, dim, n, h, wall, &err), &err);
    bool same = mt_grid_equal(a, b);
    assert_int_equal(same, mt_grid_equal(b, a));
    mt_grid_unref(&a);
    mt_grid_unref(&b);
    return same;
}

static void comparing(void **state) {
    (void)state;
    assert_true(equal_to_base(2, 4, 2, MT_PERIODIC));
    assert_false(equal_to_base(3, 4, 2, MT_PERIODIC));
    assert_false(equal_to_base(2, 5, 2, MT_PERIODIC));
    assert_false(equal_to_base(2, 4, 2.5, MT_PERIODIC));
    assert_false(equal_to_base(2, 4, 2, MT_MIRROR));
}

static void refused(int dim, int nx, int ny, double hy, mt_wall wall_y, const char *text) {
    const int n[3] = {nx, ny, 1};
    const double h[3] = {1, hy, 1};
    const mt_wall wall[3] = {MT_PERIODIC, wall_y, MT_PERIODIC};
    mt_grid *g = (mt_grid *)&g;
    mt_error err = {0};
    assert_int_equal(mt_grid_new(&g, dim, n, h, wall, &err), MT_EINPUT);
    assert_null(g);
    assert_int_equal(err.status, MT_EINPUT);
    if (!strstr(err.text, text)) fail_msg("'%s' does not say '%s'", err.text, text);
    assert_int_equal(mt_grid_new(&g, dim, n, h, wall, NULL), MT_EINPUT);
}

static void messages(void **state) {
    (void)state;
    const mt_wall p = MT_PERIODIC;
    refused(0, 4, 4, 1, p, "1, 2 or 3 axes, not 0");
    refused(4, 4, 4, 1, p, "1, 2 or 3 axes, not 4");
    refused(2, 0, 4, 1, p, "0 cells along x; at least 1");
    refused(2, 4, -3, 1, p, "-3 cells along y; at least 1");
    refused(2, 4, 4, 0, p, "spacing along y is 0; it has to be positive and finite");
    refused(2, 4, 4, -2, p, "spacing along y is -2");
    refused(2, 4, 4, INFINITY, p, "spacing along y is inf");
    refused(2, 4, 4, NAN, p, "spacing along y is ");
    refused(2, 4, 4, 1, (mt_wall)7, "unknown kind of wall along y");
    refused(2, 65536, 32768, 1, p,
            "2.147e+09 cells; one field alone would take 17.18 GB, and at most 2147483647");
}

static mt_status make(void *ctx, mt_error *err) {
    const int n[1] = {4};
    const double h[1] = {1};
    mt_grid *g;
    (void)ctx;
    mt_status st = mt_grid_new(&g, 1, n, h, all_periodic, err);
    mt_grid_unref(&g);
    return st;
}

static void allocation(void **state) {
    (void)state;
    check_allocation_sweep(make, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {cmocka_unit_test(sizes_and_volumes),
                                       cmocka_unit_test(wavenumbers),
                                       cmocka_unit_test(wavenumber_of_the_longest_line),
                                       cmocka_unit_test(sharing),
                                       cmocka_unit_test(comparing),
                                       cmocka_unit_test(messages),
                                       cmocka_unit_test(allocation)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
