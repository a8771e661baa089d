/* Proved: arrays come back bit for bit with shape (z, y, x); the header is the published layout, byte by
 * byte; other kinds are converted; files cut anywhere, damaged anywhere or made up are refused without harm.
 */
#include "scratch.h"

#include <math.h>

#include "core/files/npy.h"

static const double values[24] = {0.1, -0.0, 1e300, 5e-324, 3,  4,  5,  6,  7,  8,  9,  10,
                                  11,  12,   13,    14,     15, 16, 17, 18, 19, 20, 21, INFINITY};

static void test_round_trip(void **state) {
    (void)state;
    const int n[3] = {2, 3, 4}, cells[] = {0, 2, 6, 24};
    for (int dim = 1; dim <= 3; dim++) {
        mt_error err = {0};
        mt_npy a;
        check_ok(mt_npy_write(NULL, "a.npy", dim, n, values, &err), &err);
        check_ok(mt_npy_look(&a, NULL, "a.npy", &err), &err);
        assert_null(a.values);
        check_ok(mt_npy_read(&a, NULL, "a.npy", 0, &err), &err);
        assert_int_equal(a.dim, dim);
        assert_int_equal(a.count, cells[dim]);
        for (int i = 0; i < dim; i++) assert_int_equal(a.n[i], n[i]);
        assert_memory_equal(a.values, values, a.count * 8);
        mt_npy_free(&a);
        assert_int_equal(mt_npy_read(&a, NULL, "a.npy", (size_t)cells[dim] * 8 - 1, &err), MT_EINPUT);
    }
}

/* Layout after the specification in NumPy's numpy/lib/format.py (version 1.0). */
static void test_header(void **state) {
    (void)state;
    const int n[3] = {2, 3, 4};
    const char *shape[] = {"(2,)", "(3, 2)", "(4, 3, 2)"};
    for (int dim = 1; dim <= 3; dim++) {
        size_t size;
        char want[100];
        assert_int_equal(mt_npy_write(NULL, "h.npy", dim, n, values, NULL), MT_OK);
        char *b = slurp("h.npy", &size);
        snprintf(want, sizeof want, "{'descr': '<f8', 'fortran_order': False, 'shape': %s, }",
                 shape[dim - 1]);
        assert_memory_equal(b, "\x93NUMPY\x01\x00", 8);
        size_t length = (unsigned char)b[8] + 256u * (unsigned char)b[9];
        assert_int_equal((length + 10) % 64, 0);
        assert_int_equal(b[9 + length], '\n');
        assert_memory_equal(b + 10, want, strlen(want));
        free(b);
    }
}

static size_t compose(char *b, const char *dict, const void *data, size_t n) {
    size_t length = strlen(dict);
    memcpy(b, "\x93NUMPY\x01\x00", 8);
    b[8] = (char)(length & 255);
    b[9] = (char)(length >> 8);
    memcpy(b + 10, dict, length);
    memcpy(b + 10 + length, data, n);
    return 10 + length + n;
}

static mt_status read_composed(const char *dict, const void *data, size_t n, mt_npy *a, mt_error *err) {
    char b[600];
    spill("c.npy", b, compose(b, dict, data, n));
    return mt_npy_read(a, NULL, "c.npy", 0, err);
}

static void test_kinds(void **state) {
    (void)state;
    const float f[3] = {1.5f, -2.25f, 1e30f};
    const uint8_t u1[3] = {0, 128, 255};
    const uint16_t u2[3] = {0, 256, 65535};
    const int32_t i4[3] = {-5, 0, INT32_MAX};
    const struct {
        const char *kind;
        const void *data;
        size_t n;
        double want[3];
    } cases[] = {{"<f4", f, 12, {1.5, -2.25, 1e30f}},
                 {"|u1", u1, 3, {0, 128, 255}},
                 {"<u2", u2, 6, {0, 256, 65535}},
                 {"<i4", i4, 12, {-5, 0, INT32_MAX}}};
    for (size_t k = 0; k < 4; k++) {
        char dict[100];
        mt_npy a;
        mt_error err = {0};
        snprintf(dict, sizeof dict, "{\"shape\":(1,3),'fortran_order':False, 'descr' : '%s'}\n",
                 cases[k].kind);
        check_ok(read_composed(dict, cases[k].data, cases[k].n, &a, &err), &err);
        assert_int_equal(a.n[0], 3);
        for (int i = 0; i < 3; i++) check_close(a.values[i], cases[k].want[i], 0, 0);
        mt_npy_free(&a);
    }
}

static void test_made_up_headers(void **state) {
    (void)state;
    const char *bad[] = {
        "{'descr': '<f8', 'fortran_order': True, 'shape': (2,), }",
        "{'descr': '>f8', 'fortran_order': False, 'shape': (2,), }",
        "{'descr': '<c16', 'fortran_order': False, 'shape': (1,), }",
        "{'descr': '|O', 'fortran_order': False, 'shape': (2,), }",
        "{'descr': [('a', '<f8')], 'fortran_order': False, 'shape': (2,), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (0, 2), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (-2,), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (1, 1, 1, 2), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (2147483647, 2147483647, 2147483647), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (4294967298,), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (99999999999999999999999999999,), }",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (2",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (2, }",
        "{'descr': '<f8', 'fortran_order': False}",
        "{'descr': '<f8', 'descr': '<f8', 'fortran_order': False, 'shape': (2,)}",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (2,), 'more': 1}",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (2,)} x",
        "{'descr': '<f8",
        "",
        "[]",
    };
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        mt_npy a;
        mt_error err = {0};
        mt_memory_reset_peak();
        size_t before = mt_memory_peak();
        assert_int_equal(read_composed(bad[i], values, 16, &a, &err), MT_EFORMAT);
        assert_null(a.values);
        assert_true(mt_memory_peak() - before < 70000);
        assert_non_null(strstr(err.text, "c.npy"));
    }
}

/* 2^64 cells wrap to none, 2^61 to no bytes: both would fit a file without data. */
static void test_shapes_that_wrap(void **state) {
    (void)state;
    const char *bad[] = {"{'descr': '<f8', 'fortran_order': False, 'shape': (2097152, 2097152, 4194304)}",
                         "{'descr': '<f8', 'fortran_order': False, 'shape': (2097152, 1048576, 1048576)}"};
    for (int i = 0; i < 2; i++) {
        mt_npy a;
        mt_error err = {0};
        assert_int_equal(read_composed(bad[i], values, 0, &a, &err), MT_EFORMAT);
        assert_non_null(strstr(err.text, "more than 2147483647 cells"));
    }
}

static void test_absurd_header_length(void **state) {
    (void)state;
    const char v1[] = "\x93NUMPY\x01\x00\xff\xff{}", v2[] = "\x93NUMPY\x02\x00\xff\xff\xff\xff{}",
               v9[] = "\x93NUMPY\x09\x00\x02\x00{}";
    mt_npy a;
    spill("v.npy", v1, sizeof v1);
    assert_int_equal(mt_npy_read(&a, NULL, "v.npy", 0, NULL), MT_EFORMAT);
    spill("v.npy", v2, sizeof v2);
    assert_int_equal(mt_npy_read(&a, NULL, "v.npy", 0, NULL), MT_EFORMAT);
    spill("v.npy", v9, sizeof v9);
    assert_int_equal(mt_npy_read(&a, NULL, "v.npy", 0, NULL), MT_EFORMAT);
}

static void test_cut_and_extended(void **state) {
    (void)state;
    const int n[] = {3, 2};
    size_t size = 0;
    mt_npy a;
    assert_int_equal(mt_npy_write(NULL, "t.npy", 2, n, values, NULL), MT_OK);
    char *b = slurp("t.npy", &size);
    for (size_t k = 0; k <= size + 1; k++) {
        spill("t.npy", b, k);
        assert_int_equal(mt_npy_read(&a, NULL, "t.npy", 0, NULL), k == size ? MT_OK : MT_EFORMAT);
        mt_npy_free(&a);
    }
    free(b);
}

static void test_every_byte_damaged(void **state) {
    (void)state;
    const int n[] = {3, 2};
    size_t size = 0;
    assert_int_equal(mt_npy_write(NULL, "d.npy", 2, n, values, NULL), MT_OK);
    char *b = slurp("d.npy", &size);
    for (size_t k = 0; k < size; k++)
        for (int bit = 0; bit < 8; bit++) {
            mt_npy a;
            b[k] = (char)(b[k] ^ 1 << bit);
            spill("d.npy", b, size);
            mt_status status = mt_npy_read(&a, NULL, "d.npy", 1 << 20, NULL);
            assert_true(status == MT_OK || status == MT_EFORMAT);
            if (k < 8) assert_int_equal(status, MT_EFORMAT);
            mt_npy_free(&a);
            b[k] = (char)(b[k] ^ 1 << bit);
        }
    free(b);
}

static mt_status body(void *ctx, mt_error *err) {
    (void)ctx;
    const int n[] = {3, 2};
    mt_npy a = {0};
    mt_status status = mt_npy_write(NULL, "b.npy", 2, n, values, err);
    if (!status) status = mt_npy_read(&a, NULL, "b.npy", 0, err);
    mt_npy_free(&a);
    return status;
}

static void test_allocations(void **state) {
    (void)state;
    check_allocation_sweep(body, NULL);
}

static void nothing(void) {}
static mt_status write_one(mt_error *err) {
    return mt_npy_write(NULL, "w.npy", 1, (const int[]){5}, values, err);
}
static void readable_or_absent(bool failed) {
    mt_npy a;
    mt_status status = mt_npy_read(&a, NULL, "w.npy", 0, NULL);
    assert_true(status == MT_OK || (failed && status == MT_EFILE));
    mt_npy_free(&a);
}

static void test_failing_calls(void **state) {
    (void)state;
    assert_true(sweep_calls(write_one, nothing, readable_or_absent) >= 5);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_round_trip),
        cmocka_unit_test(test_header),
        cmocka_unit_test(test_kinds),
        cmocka_unit_test(test_made_up_headers),
        cmocka_unit_test(test_cut_and_extended),
        cmocka_unit_test(test_absurd_header_length),
        cmocka_unit_test(test_every_byte_damaged),
        cmocka_unit_test(test_allocations),
        cmocka_unit_test(test_failing_calls),
        cmocka_unit_test(test_shapes_that_wrap),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
