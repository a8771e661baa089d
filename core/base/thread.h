/* A small pool of threads (pthreads) that runs numbered jobs. Which thread runs which job is not fixed, so a
 * job must write only to places of its own number; results then do not depend on the number of threads. */
#ifndef MT_BASE_THREAD_H
#define MT_BASE_THREAD_H

#include "core/base/error.h"

typedef struct mt_pool mt_pool;

/* One job. index: 0 .. count-1; worker: 0 .. threads-1, to pick scratch memory by. */
typedef mt_status (*mt_job)(void *ctx, size_t index, int worker, mt_error *err);

/* A pool of `threads` workers, the calling thread being one of them (1 .. 256). Free with mt_pool_free. */
MT_API mt_status mt_pool_new(mt_pool **out, int threads, mt_error *err) MT_MUST_USE;

/* Ends the threads, frees, sets *pool to NULL. NULL inside is allowed. */
MT_API void mt_pool_free(mt_pool **pool);

/* Number of workers; 1 for NULL. */
MT_API int mt_pool_threads(const mt_pool *pool);

/* Runs job(ctx, 0 .. count-1) and returns when all are done; a NULL pool runs them in order in the caller.
 * Where jobs fail, the failure of the lowest index is returned, whatever the number of threads; jobs above a
 * failed index may be skipped. Not to be called from within a job. */
MT_API mt_status mt_pool_run(mt_pool *pool, size_t count, mt_job job, void *ctx, mt_error *err) MT_MUST_USE;

#endif
