/* Proved here: blocks are aligned, zeroed and counted; resizing keeps the contents and zeroes what is new,
 * and a failing resize leaves the old block alone; sizes that overflow are refused; the k-th allocation
 * fails, once; counts stay right when several threads allocate. */
#include "tests/support.h"

#include <string.h>

#include "core/base/thread.h"

static bool all_zero(const unsigned char *p, size_t n) {
    for (size_t i = 0; i < n; i++)
        if (p[i]) return false;
    return true;
}

static void zeroed_and_aligned(void **state) {
    (void)state;
    for (size_t n = 0; n < 300; n++) {
        unsigned char *a = mt_alloc(n, 1);
        assert_non_null(a);
        assert_int_equal((uintptr_t)a % MT_ALIGN, 0);
        assert_true(all_zero(a, n));
        memset(a, 255, n); /* the allocator may hand the block out again */
        mt_free(a);
    }
    mt_free(NULL);
}

static void counted(void **state) {
    (void)state;
    size_t used = mt_memory_used(), blocks = mt_memory_blocks();
    mt_memory_reset_peak();
    void *a = mt_alloc(100, 8), *b = mt_alloc(7, 3);
    assert_true(a && b);
    assert_int_equal(mt_memory_used() - used, 821);
    assert_int_equal(mt_memory_blocks() - blocks, 2);
    mt_free(a);
    assert_int_equal(mt_memory_used() - used, 21);
    assert_int_equal(mt_memory_peak() - used, 821);
    mt_memory_reset_peak();
    assert_int_equal(mt_memory_peak() - used, 21);
    mt_free(b);
    assert_int_equal(mt_memory_used(), used);
    assert_int_equal(mt_memory_blocks(), blocks);
}

static void resized(void **state) {
    (void)state;
    size_t used = mt_memory_used(), blocks = mt_memory_blocks();
    unsigned char *a = mt_resize(NULL, 10, 1);
    assert_non_null(a);
    memset(a, 7, 10);
    a = mt_resize(a, 500, 1);
    for (int i = 0; i < 10; i++) assert_int_equal(a[i], 7);
    assert_true(all_zero(a + 10, 490));
    a = mt_resize(a, 3, 1);
    assert_int_equal(a[2], 7);
    assert_int_equal(mt_memory_used() - used, 3);
    assert_null(mt_resize(a, SIZE_MAX, 2));
    mt_memory_fail_at(0);
    assert_null(mt_resize(a, 100, 1));
    mt_memory_fail_at(-1);
    assert_int_equal(a[2], 7);
    mt_free(a);
    assert_int_equal(mt_memory_blocks(), blocks);
}

static void overflow(void **state) {
    (void)state;
    size_t blocks = mt_memory_blocks();
    assert_null(mt_alloc(SIZE_MAX / 4, 8));
    assert_null(mt_alloc(SIZE_MAX, 1));
    assert_null(mt_alloc(SIZE_MAX - MT_ALIGN, 1));
    mt_error e = {0};
    void *p = &e;
    assert_int_equal(mt_new(&p, SIZE_MAX / 2, 3, "a field", &e), MT_ENOMEM);
    assert_null(p);
    assert_non_null(strstr(e.text, "a field"));
    assert_int_equal(mt_memory_blocks(), blocks);
}

static void fails_where_told(void **state) {
    (void)state;
    for (int k = 0; k < 4; k++) {
        void *p[4];
        mt_memory_fail_at(k);
        assert_false(mt_memory_did_fail());
        for (int i = 0; i < 4; i++) p[i] = mt_alloc(1, 1);
        assert_true(mt_memory_did_fail());
        for (int i = 0; i < 4; i++) {
            assert_true((p[i] == NULL) == (i == k));
            mt_free(p[i]);
        }
    }
    mt_memory_fail_at(-1);
    mt_error e = {0};
    void *p;
    mt_memory_fail_at(0);
    assert_int_equal(mt_new(&p, 1000000, 8, "a test", &e), MT_ENOMEM);
    mt_memory_fail_at(-1);
    assert_int_equal(e.status, MT_ENOMEM);
    assert_non_null(strstr(e.text, "8 MB"));
}

static void texts(void **state) {
    (void)state;
    size_t blocks = mt_memory_blocks();
    char *a = mt_copy_text("spinodal"), *b = mt_copy_text("");
    assert_string_equal(a, "spinodal");
    assert_string_equal(b, "");
    mt_free(a), mt_free(b);
    mt_memory_fail_at(0);
    assert_null(mt_copy_text("lost"));
    mt_memory_fail_at(-1);
    assert_int_equal(mt_memory_blocks(), blocks);
}

static mt_status allocate_and_free(void *ctx, size_t index, int worker, mt_error *err) {
    (void)ctx, (void)worker;
    void *p;
    mt_status st = mt_new(&p, index + 1, 16, "a block", err);
    mt_free(p);
    return st;
}

static void from_several_threads(void **state) {
    (void)state;
    mt_error e = {0};
    mt_pool *pool;
    check_ok(mt_pool_new(&pool, 4, &e), &e);
    size_t used = mt_memory_used(), blocks = mt_memory_blocks();
    check_ok(mt_pool_run(pool, 3000, allocate_and_free, NULL, &e), &e);
    assert_int_equal(mt_memory_used(), used);
    assert_int_equal(mt_memory_blocks(), blocks);
    mt_memory_fail_at(1000);
    assert_int_equal(mt_pool_run(pool, 3000, allocate_and_free, NULL, &e), MT_ENOMEM);
    mt_memory_fail_at(-1);
    assert_int_equal(mt_memory_blocks(), blocks);
    mt_pool_free(&pool);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(zeroed_and_aligned),
        cmocka_unit_test(counted),
        cmocka_unit_test(resized),
        cmocka_unit_test(overflow),
        cmocka_unit_test(fails_where_told),
        cmocka_unit_test(texts),
        cmocka_unit_test(from_several_threads),
    };
    return cmocka_run_group_tests_name("memory", tests, NULL, NULL);
}
