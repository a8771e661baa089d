/* Status codes and the error record.
 *
 * Every function that can fail returns an mt_status that must be used and takes an mt_error* last (NULL is
 * allowed: the text is then lost). The innermost function fills the record with mt_fail; callers on the way
 * up put what they know in front with mt_context ("field c: ..."). Core never prints and never exits. */
#ifndef MT_BASE_ERROR_H
#define MT_BASE_ERROR_H

#include "core/base/base.h"

typedef enum mt_status {
#define MT_STATUS(name, exit_code, text) MT_##name,
#include "core/base/status.def"
#undef MT_STATUS
    MT_STATUS_COUNT
} mt_status;

typedef struct mt_error {
    mt_status status;
    char text[1000]; /* complete sentence: what was expected, what was found, what to do */
} mt_error;

/* Short text of a status, for example "out of memory". */
MT_API const char *mt_status_text(mt_status status);

/* Exit code of the program for a status (see status.def). */
MT_API int mt_status_exit_code(mt_status status);

/* Fills the record (if there is one) and returns status. A text that does not fit is cut. */
MT_API mt_status mt_fail(mt_error *err, mt_status status, const char *format, ...) MT_PRINTF(3, 4);

/* Puts "<formatted text>: " in front of the record's text and returns status unchanged. */
MT_API mt_status mt_context(mt_error *err, mt_status status, const char *format, ...) MT_PRINTF(3, 4);

/* A check for a caller's misuse that stays in release builds: fails with EINPUT naming the condition. */
#define MT_REQUIRE(condition, err)                                                                           \
    do {                                                                                                     \
        if (!(condition))                                                                                    \
            return mt_fail((err), MT_EINPUT, "%s: wrong call, needs %s", __func__, #condition);              \
    } while (0)

#endif
