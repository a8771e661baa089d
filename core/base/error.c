#include "core/base/error.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

static const struct {
    int exit_code;
    const char *text;
} statuses[MT_STATUS_COUNT] = {
#define MT_STATUS(name, exit_code, text) {exit_code, text},
#include "core/base/status.def"
#undef MT_STATUS
};

const char *mt_status_text(mt_status status) {
    return (unsigned)status < MT_STATUS_COUNT ? statuses[status].text : "unknown status";
}

int mt_status_exit_code(mt_status status) {
    return (unsigned)status < MT_STATUS_COUNT ? statuses[status].exit_code : 1;
}

mt_status mt_fail(mt_error *err, mt_status status, const char *format, ...) {
    if (!err) return status;
    err->status = status;
    va_list args;
    va_start(args, format);
    vsnprintf(err->text, sizeof err->text, format, args);
    va_end(args);
    return status;
}

mt_status mt_context(mt_error *err, mt_status status, const char *format, ...) {
    if (!err) return status;
    char old[sizeof err->text];
    memcpy(old, err->text, sizeof old);
    va_list args;
    va_start(args, format);
    int n = vsnprintf(err->text, sizeof err->text, format, args);
    va_end(args);
    if (n >= 0 && (size_t)n + 2 < sizeof err->text) {
        memcpy(err->text + n, ": ", 3);
        size_t room = sizeof err->text - (size_t)n - 3, len = strlen(old);
        if (len > room) len = room;
        memcpy(err->text + n + 2, old, len);
        err->text[(size_t)n + 2 + len] = 0;
    }
    return status;
}
