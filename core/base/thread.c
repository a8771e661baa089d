#include "core/base/thread.h"

#include <pthread.h>
#include <sched.h>
#include <stdatomic.h>
#include <string.h>

#include "core/base/memory.h"

/* A thread that has to wait looks again this many times, about 100 microseconds, before it sleeps. That is
 * about what waking a sleeping thread costs (80 measured), so a wait costs at most twice the best choice; a
 * region that finds its workers awake costs 1 microsecond. In between it offers its processor to the others:
 * when two workers share one (more threads than processors, a busy machine), the one would otherwise spin
 * while the other waits to be let in (150 microseconds a region, 23 with the offer; offering more often
 * keeps the two on one processor where there are more). */
#define SPINS 4000
#define SPINS_TO_YIELD 512

typedef struct worker {
    mt_pool *pool;
    int number;
    pthread_t thread;
} worker;

struct mt_pool {
    int threads, started;
    worker *workers; /* [threads], 0 is the caller */
    pthread_mutex_t lock;
    pthread_cond_t wake, done;
    /* The region under way; written under the lock before `region` is raised. */
    mt_job job;
    void *ctx;
    size_t count;
    atomic_ulong region;     /* number of the region */
    atomic_size_t next;      /* index to be taken next */
    atomic_size_t failed_at; /* lowest failed index so far, count if none: a hint to skip what lies above */
    atomic_int busy;         /* workers that have not finished the region */
    bool quit;
    mt_status status; /* of failed index `failed`, under the lock */
    size_t failed;
    mt_error error;
};

static void pause_a_little(int i) {
    if (i % SPINS_TO_YIELD == SPINS_TO_YIELD - 1) sched_yield();
#if defined(__x86_64__) || defined(__i386__)
    __builtin_ia32_pause();
#endif
}

static void note_failure(mt_pool *p, size_t index, mt_status status, const mt_error *err) {
    pthread_mutex_lock(&p->lock);
    if (p->status == MT_OK || index < p->failed) {
        p->status = status;
        p->failed = index;
        p->error = *err;
        atomic_store(&p->failed_at, index);
    }
    pthread_mutex_unlock(&p->lock);
}

/* Indices are taken in ascending order, so everything below a failed index has been taken by someone, and
 * whoever draws an index above it will draw none below it. */
static void work(mt_pool *p, int number) {
    size_t index;
    mt_error err;
    while ((index = atomic_fetch_add(&p->next, 1)) < p->count) {
        if (index > atomic_load(&p->failed_at)) return;
        err.status = MT_OK;
        err.text[0] = 0;
        mt_status status = p->job(p->ctx, index, number, &err);
        if (status != MT_OK) note_failure(p, index, status, &err);
    }
}

static void wait_for_region(mt_pool *p, unsigned long seen) {
    for (int i = 0; i < SPINS; i++) {
        if (atomic_load(&p->region) != seen) return;
        pause_a_little(i);
    }
    pthread_mutex_lock(&p->lock);
    while (atomic_load(&p->region) == seen) pthread_cond_wait(&p->wake, &p->lock);
    pthread_mutex_unlock(&p->lock);
}

static void *worker_main(void *arg) {
    worker *w = arg;
    mt_pool *p = w->pool;
    unsigned long seen = 0;
    for (;;) {
        wait_for_region(p, seen);
        seen++;
        if (p->quit) return NULL;
        work(p, w->number);
        if (atomic_fetch_sub(&p->busy, 1) == 1) {
            pthread_mutex_lock(&p->lock);
            pthread_cond_signal(&p->done);
            pthread_mutex_unlock(&p->lock);
        }
    }
}

static mt_status start_workers(mt_pool *p, mt_error *err) {
    for (int i = 1; i < p->threads; i++) {
        p->workers[i] = (worker){p, i, 0};
        int failed = pthread_create(&p->workers[i].thread, NULL, worker_main, &p->workers[i]);
        if (failed)
            return mt_fail(err, MT_ESYSTEM, "thread %d of %d could not be started: %s; ask for fewer threads",
                           i + 1, p->threads, strerror(failed));
        p->started = i;
    }
    return MT_OK;
}

mt_status mt_pool_new(mt_pool **out, int threads, mt_error *err) {
    mt_pool *p;
    *out = NULL;
    if (threads < 1 || threads > 256)
        return mt_fail(err, MT_EINPUT, "the number of threads has to be 1 to 256, not %d", threads);
    mt_status st = mt_new(&p, 1, sizeof *p, "threads", err);
    if (st) return st;
    p->threads = threads;
    pthread_mutex_init(&p->lock, NULL);
    pthread_cond_init(&p->wake, NULL);
    pthread_cond_init(&p->done, NULL);
    st = mt_new(&p->workers, (size_t)threads, sizeof *p->workers, "threads", err);
    if (!st) st = start_workers(p, err);
    if (st) mt_pool_free(&p);
    *out = p;
    return st;
}

/* Fields first, then the number of the region: a worker that sees the number sees the fields. */
static void open_region(mt_pool *p, size_t count, mt_job job, void *ctx) {
    pthread_mutex_lock(&p->lock);
    p->job = job;
    p->ctx = ctx;
    p->count = count;
    p->status = MT_OK;
    atomic_store(&p->failed_at, count);
    atomic_store(&p->next, 0);
    atomic_store(&p->busy, p->started);
    atomic_fetch_add(&p->region, 1);
    pthread_cond_broadcast(&p->wake);
    pthread_mutex_unlock(&p->lock);
}

static void wait_until_done(mt_pool *p) {
    for (int i = 0; i < SPINS; i++) {
        if (atomic_load(&p->busy) == 0) return;
        pause_a_little(i);
    }
    pthread_mutex_lock(&p->lock);
    while (atomic_load(&p->busy) != 0) pthread_cond_wait(&p->done, &p->lock);
    pthread_mutex_unlock(&p->lock);
}

void mt_pool_free(mt_pool **pool) {
    mt_pool *p = *pool;
    *pool = NULL;
    if (!p) return;
    if (p->started) {
        p->quit = true;
        open_region(p, 0, NULL, NULL);
        for (int i = 1; i <= p->started; i++) pthread_join(p->workers[i].thread, NULL);
    }
    pthread_cond_destroy(&p->wake);
    pthread_cond_destroy(&p->done);
    pthread_mutex_destroy(&p->lock);
    mt_free(p->workers);
    mt_free(p);
}

int mt_pool_threads(const mt_pool *pool) {
    return pool ? pool->threads : 1;
}

static mt_status run_serial(size_t count, mt_job job, void *ctx, mt_error *err) {
    for (size_t i = 0; i < count; i++) {
        mt_status status = job(ctx, i, 0, err);
        if (status != MT_OK) return status;
    }
    return MT_OK;
}

mt_status mt_pool_run(mt_pool *pool, size_t count, mt_job job, void *ctx, mt_error *err) {
    if (!pool || pool->started == 0 || count < 2) return run_serial(count, job, ctx, err);
    open_region(pool, count, job, ctx);
    work(pool, 0);
    wait_until_done(pool);
    if (pool->status != MT_OK && err) *err = pool->error;
    return pool->status;
}
