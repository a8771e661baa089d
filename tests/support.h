/* What every C test uses: cmocka with its prerequisites, comparison of doubles, the allocation sweep. */
#ifndef MT_TESTS_SUPPORT_H
#define MT_TESTS_SUPPORT_H

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "core/base/memory.h"

/* Passes when |a - b| <= atol + rtol |b|, or both are NaN, or both the same infinity. Prints both otherwise.
 */
#define check_close(a, b, rtol, atol) check_close_at((a), (b), (rtol), (atol), #a, __FILE__, __LINE__)
void check_close_at(double a, double b, double rtol, double atol, const char *what, const char *file,
                    int line);

/* Status must be OK; prints the record's text otherwise. */
#define check_ok(status, err) check_ok_at((status), (err), #status, __FILE__, __LINE__)
void check_ok_at(mt_status status, const mt_error *err, const char *what, const char *file, int line);

/* Runs body(ctx) with the k-th allocation failing for k = 0, 1, 2, ... until it succeeds without a failure.
 * Every failure must be reported as ENOMEM, or be harmless (a cache that stays small), and no block may be
 * left behind by any run. body must free all it makes. */
void check_allocation_sweep(mt_status (*body)(void *ctx, mt_error *err), void *ctx);

#endif
