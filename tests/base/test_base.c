/* Proved here: errors keep status and context; memory is checked, counted, and fails where told; the pool
 * runs every job once and returns the failure of the lowest index for any number of threads; Philox gives the
 * published answers, and the noise made from it has the right moments and does not depend on how it is cut.
 */
#include "tests/support.h"

#include <math.h>
#include <stdatomic.h>
#include <string.h>

#include "core/base/random.h"
#include "core/base/thread.h"

static void errors(void **state) {
    (void)state;
    mt_error e = {0};
    assert_int_equal(mt_fail(&e, MT_EINPUT, "found %d", 3), MT_EINPUT);
    assert_int_equal(mt_context(&e, MT_EINPUT, "field %s", "c"), MT_EINPUT);
    assert_string_equal(e.text, "field c: found 3");
    assert_int_equal(mt_fail(NULL, MT_ENOMEM, "lost"), MT_ENOMEM);
    assert_int_equal(mt_status_exit_code(MT_ESTOPPED), 130);
    assert_string_equal(mt_status_text(MT_OK), "success");
    char longer[3000];
    memset(longer, 'x', sizeof longer - 1);
    longer[sizeof longer - 1] = 0;
    mt_fail(&e, MT_EINPUT, "%s", longer);
    mt_context(&e, MT_EINPUT, "in front");
    assert_int_equal(strlen(e.text), sizeof e.text - 1);
    assert_memory_equal(e.text, "in front: xxx", 13);
}

static void memory(void **state) {
    (void)state;
    size_t before = mt_memory_used(), blocks = mt_memory_blocks();
    double *a = mt_alloc(100, sizeof *a);
    assert_non_null(a);
    assert_int_equal((uintptr_t)a % MT_ALIGN, 0);
    for (int i = 0; i < 100; i++) assert_true(a[i] == 0);
    a[99] = 5;
    a = mt_resize(a, 1000, sizeof *a);
    assert_true(a[99] == 5 && a[999] == 0);
    assert_int_equal(mt_memory_used() - before, 8000);
    mt_free(a);
    mt_free(NULL);
    assert_int_equal(mt_memory_blocks(), blocks);
    assert_null(mt_alloc(SIZE_MAX / 4, 8));
    mt_memory_fail_at(1);
    void *x = mt_alloc(1, 1), *y = mt_alloc(1, 1), *z = mt_alloc(1, 1);
    assert_true(x && !y && z && mt_memory_did_fail());
    mt_memory_fail_at(-1);
    mt_free(x), mt_free(z);
    mt_error e = {0};
    void *p;
    mt_memory_fail_at(0);
    assert_int_equal(mt_new(&p, 1000000, 8, "a test", &e), MT_ENOMEM);
    mt_memory_fail_at(-1);
    assert_non_null(strstr(e.text, "8 MB"));
}

typedef struct jobs {
    atomic_int done[500];
    size_t fail_from; /* indices from here on that are multiples of 7 fail */
} jobs;

static mt_status job(void *ctx, size_t index, int worker, mt_error *err) {
    jobs *j = ctx;
    assert_true(worker >= 0 && worker < 8);
    atomic_fetch_add(&j->done[index], 1);
    if (index >= j->fail_from && index % 7 == 0) return mt_fail(err, MT_ENUMERIC, "job %zu", index);
    return MT_OK;
}

static void pool(void **state) {
    (void)state;
    mt_error e = {0};
    for (int threads = 1; threads <= 5; threads += 2) {
        mt_pool *p;
        check_ok(mt_pool_new(&p, threads, &e), &e);
        assert_int_equal(mt_pool_threads(p), threads);
        for (int repeat = 0; repeat < 200; repeat++) {
            jobs j = {.fail_from = 1000};
            check_ok(mt_pool_run(p, 500, job, &j, &e), &e);
            for (int i = 0; i < 500; i++) assert_int_equal(j.done[i], 1);
            jobs k = {.fail_from = 100};
            assert_int_equal(mt_pool_run(p, 500, job, &k, &e), MT_ENUMERIC);
            assert_string_equal(e.text, "job 105");
            for (int i = 0; i <= 105; i++) assert_int_equal(k.done[i], 1);
        }
        mt_pool_free(&p);
        assert_null(p);
    }
    mt_pool *p;
    assert_int_equal(mt_pool_new(&p, 0, &e), MT_EINPUT);
    assert_non_null(strstr(e.text, "1 to 256"));
    jobs j = {.fail_from = 1000};
    check_ok(mt_pool_run(NULL, 10, job, &j, &e), &e);
}

/* Known answers distributed with the generator by its authors (Salmon et al., SC11; "kat_vectors"), from
 * memory. */
static void philox(void **state) {
    (void)state;
    static const uint32_t known[3][10] = {{0, 0, 0, 0, 0, 0, 0x6627e8d5, 0xe169c58d, 0xbc57ac4c, 0x9b00dbd8},
                                          {0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff,
                                           0xffffffff, 0x408f276d, 0x41c83b0e, 0xa20bc7c6, 0x6d5451fd},
                                          {0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344, 0xa4093822,
                                           0x299f31d0, 0xd16cfe09, 0x94fdcceb, 0x5001e420, 0x24126ea1}};
    for (int i = 0; i < 3; i++) {
        uint32_t out[4];
        mt_philox(known[i], known[i] + 4, out);
        assert_memory_equal(out, known[i] + 6, sizeof out);
    }
}

static void noise(void **state) {
    (void)state;
    enum { N = 200000 };
    static double a[N], b[N];
    for (int kind = 0; kind < 2; kind++) {
        double sum = 0, square = 0, neighbours = 0, streams = 0, fourth = 0,
               expected = kind == 0 ? 1.0 / 3 : 1;
        mt_random_fill((mt_random_kind)kind, 42, 0, N, 0, 0, a);
        mt_random_fill((mt_random_kind)kind, 42, 0, N, 0, 1, b);
        for (int i = 0; i < N; i++) {
            sum += a[i], square += a[i] * a[i], streams += a[i] * b[i], fourth += pow(a[i], 4);
            neighbours += a[i] * a[(i + 1) % N];
            if (kind == 0) assert_true(a[i] >= -1 && a[i] < 1);
        }
        double five = 5 / sqrt(N); /* five standard deviations */
        check_close(sum / N, 0, 0, five);
        check_close(square / N, expected, 0, 2 * five);
        check_close(fourth / N, kind == 0 ? 0.2 : 3, 0, 10 * five);
        check_close(neighbours / N, 0, 0, five);
        check_close(streams / N, 0, 0, five);
        mt_random_fill((mt_random_kind)kind, 42, 1000, 77, 0, 0, b);
        assert_memory_equal(b, a + 1000, 77 * sizeof *b);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(errors), cmocka_unit_test(memory), cmocka_unit_test(pool),
        cmocka_unit_test(philox), cmocka_unit_test(noise),
    };
    return cmocka_run_group_tests_name("base", tests, NULL, NULL);
}
