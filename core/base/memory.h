/* All memory of core comes from here: sizes checked against overflow, aligned to MT_ALIGN, zero-filled,
 * counted, and with a switch that makes the k-th allocation fail (tests sweep k over every public entry).
 * Thread-safe. */
#ifndef MT_BASE_MEMORY_H
#define MT_BASE_MEMORY_H

#include "core/base/error.h"

/* count * size zeroed bytes, aligned to MT_ALIGN; NULL when they cannot be had (or count * size overflows).
 * count == 0 gives a valid block of no use. */
MT_API void *mt_alloc(size_t count, size_t size);

/* As mt_alloc, but writes the block to *out or fails with ENOMEM, naming `what` and the size wanted. */
MT_API mt_status mt_new(void *out, size_t count, size_t size, const char *what, mt_error *err) MT_MUST_USE;

/* Gives the block a new size, keeping the smaller of both contents; new bytes are zero. The old block stays
 * valid on failure (NULL returned). NULL is allowed. */
MT_API void *mt_resize(void *block, size_t count, size_t size);

/* Frees; NULL is allowed. */
MT_API void mt_free(void *block);

MT_API char *mt_copy_text(const char *text); /* a copy to be freed with mt_free, or NULL */

MT_API size_t mt_memory_used(void); /* bytes held now */
MT_API size_t mt_memory_peak(void); /* most bytes held at once since the start or the last reset */
MT_API void mt_memory_reset_peak(void);

/* Blocks held now: a test that ends with more than it began with leaks. */
MT_API size_t mt_memory_blocks(void);

/* The k-th allocation from now on fails, counted from 0, once; -1 switches this off. */
MT_API void mt_memory_fail_at(long k);

/* True when a failure asked for by mt_memory_fail_at has happened since it was asked for. */
MT_API bool mt_memory_did_fail(void);

#endif
