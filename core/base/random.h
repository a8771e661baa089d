/* Counter-based random numbers: Philox4x32-10 (Salmon, Moraes, Dror & Shaw, Proc. SC11 (2011), article 16).
 * A value depends only on (seed, cell, step, stream), never on order or threads. */
#ifndef MT_BASE_RANDOM_H
#define MT_BASE_RANDOM_H

#include "core/base/base.h"

typedef enum mt_random_kind {
    MT_RANDOM_UNIFORM, /* uniform in [-1, 1) with 53 bits */
    MT_RANDOM_NORMAL   /* mean 0, variance 1 (Box & Muller 1958) */
} mt_random_kind;

/* The bare generator: out = Philox4x32-10(counter, key). */
MT_API void mt_philox(const uint32_t counter[4], const uint32_t key[2], uint32_t out[4]);

/* out[i] for cells first .. first+n-1. step: time step (0 for starts); stream: which field and purpose.
 * Counter words: cell (low half), step, stream, cell (high half); key: seed. Uniform values are the same on
 * every machine, normal ones as far as the C library's log and cos are. */
MT_API void mt_random_fill(mt_random_kind kind, uint64_t seed, uint64_t first, size_t n, uint32_t step,
                           uint32_t stream, double *out);

#endif
