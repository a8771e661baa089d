/* Proved here: every job runs once, by a worker whose number no other thread has at that time; writes of a
 * region are seen by the next; the failure of the lowest index comes back for any number of threads, with its
 * text, and all jobs below it have run; a pool sleeps and wakes; making one survives every failing
 * allocation. scripts/check runs this file under the thread sanitizer as well. */
#include "tests/support.h"

#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "core/base/thread.h"

enum { JOBS = 500, MOST = 8 };

typedef struct scene {
    atomic_int done[JOBS];
    atomic_int inside[MOST]; /* jobs under way with this worker's number: 0 or 1 */
    size_t fail_from;        /* multiples of 7 from here on fail */
    atomic_bool wrong;
} scene;

/* No assertion here: cmocka jumps out of a failed one, and must not from another thread. */
static mt_status job(void *ctx, size_t index, int worker, mt_error *err) {
    scene *s = ctx;
    if (worker < 0 || worker >= MOST || atomic_fetch_add(&s->inside[worker], 1) != 0) s->wrong = true;
    atomic_fetch_add(&s->done[index], 1);
    mt_status st = MT_OK;
    if (index >= s->fail_from && index % 7 == 0) st = mt_fail(err, MT_ENUMERIC, "job %zu", index);
    if (worker >= 0 && worker < MOST) atomic_fetch_sub(&s->inside[worker], 1);
    return st;
}

static void check_region(mt_pool *pool, size_t count, size_t fail_from) {
    scene s = {.fail_from = fail_from};
    mt_error e = {0};
    mt_status st = mt_pool_run(pool, count, job, &s, &e);
    size_t lowest = (fail_from + 6) / 7 * 7;
    assert_false(s.wrong);
    for (size_t i = 0; i < JOBS; i++) {
        if (i < count && i <= lowest) assert_int_equal(s.done[i], 1);
        if (i >= count) assert_int_equal(s.done[i], 0);
        assert_true(s.done[i] <= 1);
    }
    if (lowest >= count) {
        check_ok(st, &e);
        return;
    }
    char expected[40];
    snprintf(expected, sizeof expected, "job %zu", lowest);
    assert_int_equal(st, MT_ENUMERIC);
    assert_int_equal(e.status, MT_ENUMERIC);
    assert_string_equal(e.text, expected);
}

static void each_once_lowest_failure(void **state) {
    (void)state;
    static const size_t counts[] = {0, 1, 2, 3, 7, 64, JOBS}, froms[] = {0, 1, 5, 100, 490, 1000};
    for (int threads = 0; threads <= MOST; threads += threads < 3 ? 1 : 5) {
        mt_error e = {0};
        mt_pool *pool = NULL; /* 0 threads: no pool at all */
        if (threads) check_ok(mt_pool_new(&pool, threads, &e), &e);
        assert_int_equal(mt_pool_threads(pool), threads ? threads : 1);
        for (int repeat = 0; repeat < 20; repeat++)
            for (size_t c = 0; c < sizeof counts / sizeof *counts; c++)
                for (size_t f = 0; f < sizeof froms / sizeof *froms; f++)
                    check_region(pool, counts[c], froms[f]);
        mt_pool_free(&pool);
        assert_null(pool);
    }
}

/* The status is the failed job's where the caller does not want the text. */
static void no_record(void **state) {
    (void)state;
    mt_error e = {0};
    mt_pool *pool;
    check_ok(mt_pool_new(&pool, 2, &e), &e);
    scene s = {.fail_from = 3};
    assert_int_equal(mt_pool_run(pool, 50, job, &s, NULL), MT_ENUMERIC);
    mt_pool_free(&pool);
}

/* A serial run goes in order and stops at the failure. */
static mt_status in_order(void *ctx, size_t index, int worker, mt_error *err) {
    size_t *next = ctx;
    if (*next != index || worker != 0) return mt_fail(err, MT_EINPUT, "%zu for %zu", index, *next);
    ++*next;
    return index == 20 ? mt_fail(err, MT_EFILE, "stop") : MT_OK;
}

static void serial(void **state) {
    (void)state;
    mt_error e = {0};
    mt_pool *one;
    check_ok(mt_pool_new(&one, 1, &e), &e);
    mt_pool *pools[] = {NULL, one};
    for (int i = 0; i < 2; i++) {
        size_t next = 0;
        assert_int_equal(mt_pool_run(pools[i], 100, in_order, &next, &e), MT_EFILE);
        assert_int_equal(next, 21);
    }
    mt_pool_free(&one);
}

/* Plain memory handed from region to region: each cell takes its right neighbour's value. */
typedef struct relay {
    int from[JOBS], to[JOBS];
} relay;

static mt_status shift(void *ctx, size_t index, int worker, mt_error *err) {
    (void)worker, (void)err;
    relay *r = ctx;
    r->to[index] = r->from[(index + 1) % JOBS];
    return MT_OK;
}

static mt_status back(void *ctx, size_t index, int worker, mt_error *err) {
    (void)worker, (void)err;
    relay *r = ctx;
    r->from[index] = r->to[index];
    return MT_OK;
}

static void regions_follow_each_other(void **state) {
    (void)state;
    mt_error e = {0};
    mt_pool *pool;
    check_ok(mt_pool_new(&pool, 3, &e), &e);
    relay r = {0};
    for (int i = 0; i < JOBS; i++) r.from[i] = i;
    for (int round = 1; round <= 300; round++) {
        check_ok(mt_pool_run(pool, JOBS, shift, &r, &e), &e);
        check_ok(mt_pool_run(pool, JOBS, back, &r, &e), &e);
    }
    for (int i = 0; i < JOBS; i++) assert_int_equal(r.from[i], (i + 300) % JOBS);
    mt_pool_free(&pool);
}

/* Pauses longer than any spinning: the workers sleep and have to be woken. */
static void sleeps_and_wakes(void **state) {
    (void)state;
    mt_error e = {0};
    mt_pool *pool;
    check_ok(mt_pool_new(&pool, 4, &e), &e);
    for (int i = 0; i < 30; i++) {
        nanosleep(&(struct timespec){.tv_nsec = 3000000}, NULL);
        check_region(pool, 64, i % 2 ? 30 : 1000);
    }
    mt_pool_free(&pool);
}

/* Workers that never had a job, and pools freed while workers still wake up. */
static void made_and_freed(void **state) {
    (void)state;
    mt_error e = {0};
    for (int i = 0; i < 200; i++) {
        mt_pool *pool;
        check_ok(mt_pool_new(&pool, 1 + i % 5, &e), &e);
        if (i % 3 == 0) check_region(pool, 10, 1000);
        mt_pool_free(&pool);
        mt_pool_free(&pool);
    }
}

static void refused(void **state) {
    (void)state;
    static const int wrong[] = {0, -1, 257};
    for (int i = 0; i < 3; i++) {
        mt_error e = {0};
        mt_pool *pool = (mt_pool *)&e;
        assert_int_equal(mt_pool_new(&pool, wrong[i], &e), MT_EINPUT);
        assert_null(pool);
        assert_non_null(strstr(e.text, "1 to 256"));
    }
}

static mt_status make_one(void *ctx, mt_error *err) {
    (void)ctx;
    mt_pool *pool;
    mt_status st = mt_pool_new(&pool, 3, err);
    mt_pool_free(&pool);
    return st;
}

static void allocations(void **state) {
    (void)state;
    check_allocation_sweep(make_one, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(each_once_lowest_failure),
        cmocka_unit_test(no_record),
        cmocka_unit_test(serial),
        cmocka_unit_test(regions_follow_each_other),
        cmocka_unit_test(sleeps_and_wakes),
        cmocka_unit_test(made_and_freed),
        cmocka_unit_test(refused),
        cmocka_unit_test(allocations),
    };
    return cmocka_run_group_tests_name("thread", tests, NULL, NULL);
}
