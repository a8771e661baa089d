/* Proved: boxes that are whole cells, boxes that cut cells (the mean of the whole is kept), more boxes than
 * cells, the top row first, the middle plane, NaN, wrong calls. */
#include <math.h>

#include "tests/support.h"
#include "core/files/sketch.h"

static void test_whole_cells(void **state) {
    (void)state;
    mt_error err = {0};
    const int n[] = {4, 4, 1};
    double v[16], out[4];
    for (int i = 0; i < 16; i++) v[i] = i;
    check_ok(mt_sketch(2, n, v, 2, 2, out, &err), &err);
    const double expected[] = {10.5, 12.5, 2.5, 4.5}; /* rows 2 and 3 on top */
    for (int i = 0; i < 4; i++) check_close(out[i], expected[i], 1e-15, 0);
    check_ok(mt_sketch(2, n, v, 1, 1, out, &err), &err);
    check_close(out[0], 7.5, 1e-15, 0);
}

/* Whatever the boxes cut, each cell counts once in all: the mean of the boxes is that of the cells. */
static void test_cut_cells(void **state) {
    (void)state;
    mt_error err = {0};
    const int n[] = {7, 5, 1};
    double v[35], out[400], step[] = {0, 0, 1, 0, 0};
    for (int i = 0; i < 35; i++) v[i] = sin(3.0 * i) + i % 7 + 10 * (i / 7);
    double whole = 0;
    for (int i = 0; i < 35; i++) whole += v[i] / 35;
    for (int width = 1; width <= 20; width++)
        for (int height = 1; height <= 20; height += 3) {
            check_ok(mt_sketch(2, n, v, width, height, out, &err), &err);
            double sum = 0;
            for (int i = 0; i < width * height; i++) sum += out[i];
            check_close(sum / (width * height), whole, 1e-13, 0);
        }
    const int five[] = {5, 1, 1}; /* two boxes of 2.5 cells: each has half of the middle cell */
    check_ok(mt_sketch(1, five, step, 2, 1, out, &err), &err);
    check_close(out[0], 0.2, 1e-15, 0);
    check_close(out[1], 0.2, 1e-15, 0);
}

static void test_more_boxes(void **state) {
    (void)state;
    mt_error err = {0};
    const int n[] = {2, 3, 1};
    double v[] = {1, 2, 3, 4, 5, 6}, out[6 * 9];
    check_ok(mt_sketch(2, n, v, 6, 9, out, &err), &err);
    for (int j = 0; j < 9; j++)
        for (int i = 0; i < 6; i++) check_close(out[j * 6 + i], v[(2 - j / 3) * 2 + i / 3], 1e-15, 0);
}

static void test_planes_and_holes(void **state) {
    (void)state;
    mt_error err = {0};
    const int n[] = {2, 2, 5};
    double v[20], out[4];
    for (int i = 0; i < 20; i++) v[i] = i / 4;
    check_ok(mt_sketch(3, n, v, 2, 2, out, &err), &err);
    for (int i = 0; i < 4; i++) check_close(out[i], 2, 0, 0);
    v[9] = NAN; /* plane 2: y = 0, x = 1 */
    check_ok(mt_sketch(3, n, v, 2, 1, out, &err), &err);
    check_close(out[0], 2, 0, 0);
    assert_true(isnan(out[1]));
    assert_int_equal(mt_sketch(4, n, v, 2, 1, out, &err), MT_EINPUT);
    assert_int_equal(mt_sketch(3, n, v, 0, 1, out, &err), MT_EINPUT);
    assert_int_equal(mt_sketch(3, n, v, 1, 10001, out, &err), MT_EINPUT);
    assert_int_equal(mt_sketch(3, n, NULL, 1, 1, out, &err), MT_EINPUT);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_whole_cells),
        cmocka_unit_test(test_cut_cells),
        cmocka_unit_test(test_more_boxes),
        cmocka_unit_test(test_planes_and_holes),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
