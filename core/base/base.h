/* Included first everywhere: standard headers every module needs, attributes, limits. */
#ifndef MT_BASE_BASE_H
#define MT_BASE_BASE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define MT_VERSION "0.1.0"

#define MT_API __attribute__((visibility("default")))
#define MT_MUST_USE __attribute__((warn_unused_result))
#define MT_PRINTF(fmt, args) __attribute__((format(printf, fmt, args)))

/* Bytes to which arrays are aligned: one cache line, one AVX-512 register. */
#define MT_ALIGN 64

/* Limits. The test build (MT_TINY_LIMITS) makes them small and odd, so that tails and growth always run. */
#ifdef MT_TINY_LIMITS
#define MT_TILE 5        /* values a kernel works on at a time */
#define MT_UNIT_CELLS 37 /* cells aimed at in one unit of a row sweep */
#define MT_BLOCK 3       /* columns in one unit of a column sweep */
#else
#define MT_TILE 512
#define MT_UNIT_CELLS 4096
#define MT_BLOCK 8
#endif

static inline size_t mt_max_size(size_t a, size_t b) {
    return a > b ? a : b;
}
static inline size_t mt_round_up(size_t n, size_t to) {
    return (n + to - 1) / to * to;
}

#endif
