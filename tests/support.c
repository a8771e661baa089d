#include "tests/support.h"

#include <math.h>
#include <stdio.h>

void check_close_at(double a, double b, double rtol, double atol, const char *what, const char *file,
                    int line) {
    if (isnan(a) && isnan(b)) return;
    if (a == b || fabs(a - b) <= atol + rtol * fabs(b)) return;
    print_error("%s = %.17g, expected %.17g (off by %.3g, allowed %.3g)\n", what, a, b, fabs(a - b),
                atol + rtol * fabs(b));
    _fail(file, line);
}

void check_ok_at(mt_status status, const mt_error *err, const char *what, const char *file, int line) {
    if (status == MT_OK) return;
    print_error("%s: %s: %s\n", what, mt_status_text(status), err ? err->text : "");
    _fail(file, line);
}

void check_allocation_sweep(mt_status (*body)(void *ctx, mt_error *err), void *ctx) {
    const long most = 1000000;
    for (long k = 0; k < most; k++) {
        size_t before = mt_memory_blocks();
        mt_error err = {0};
        mt_memory_fail_at(k);
        mt_status status = body(ctx, &err);
        bool failed = mt_memory_did_fail();
        mt_memory_fail_at(-1);
        if (mt_memory_blocks() != before) fail_msg("allocation %ld failing leaves blocks behind", k);
        if (!failed) {
            check_ok(status, &err);
            return;
        }
        if (status != MT_ENOMEM && status != MT_OK)
            fail_msg("allocation %ld failing gives '%s'", k, mt_status_text(status));
    }
    fail_msg("the sweep does not end");
}
