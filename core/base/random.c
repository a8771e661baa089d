#include "core/base/random.h"

#include <math.h>

static void multiply(uint32_t a, uint32_t b, uint32_t *high, uint32_t *low) {
    uint64_t p = (uint64_t)a * b;
    *high = (uint32_t)(p >> 32);
    *low = (uint32_t)p;
}

/* Constants of Salmon et al. 2011, table 1 and section 3: round multipliers and Weyl increments of the key.
 */
void mt_philox(const uint32_t counter[4], const uint32_t key[2], uint32_t out[4]) {
    uint32_t c0 = counter[0], c1 = counter[1], c2 = counter[2], c3 = counter[3], k0 = key[0], k1 = key[1];
    for (int round = 0; round < 10; round++) {
        uint32_t h0, l0, h1, l1;
        multiply(0xD2511F53u, c0, &h0, &l0);
        multiply(0xCD9E8D57u, c2, &h1, &l1);
        c0 = h1 ^ c1 ^ k0;
        c1 = l1;
        c2 = h0 ^ c3 ^ k1;
        c3 = l0;
        k0 += 0x9E3779B9u;
        k1 += 0xBB67AE85u;
    }
    out[0] = c0, out[1] = c1, out[2] = c2, out[3] = c3;
}

/* The upper 53 bits, 0 .. 2^53 - 1: all that a double holds without rounding. */
static uint64_t bits53(uint32_t high, uint32_t low) {
    return ((uint64_t)high << 21) ^ (low >> 11);
}

/* Uniform values are exact, so they are the same everywhere. Normal ones (Box & Muller 1958, both uniforms
 * from one block) are as good as the C library's log and cos, which may differ in the last place from one
 * library to the next. Adding 1 before scaling keeps the argument of the logarithm in (0, 1]; adding 1/2
 * would round. */
static double one(mt_random_kind kind, const uint32_t r[4]) {
    double a = (double)bits53(r[0], r[1]), b = (double)bits53(r[2], r[3]);
    if (kind == MT_RANDOM_UNIFORM) return a * 0x1p-52 - 1;
    return sqrt(-2 * log((a + 1) * 0x1p-53)) * cos(2 * 3.14159265358979323846 * (b * 0x1p-53));
}

void mt_random_fill(mt_random_kind kind, uint64_t seed, uint64_t first, size_t n, uint32_t step,
                    uint32_t stream, double *out) {
    const uint32_t key[2] = {(uint32_t)seed, (uint32_t)(seed >> 32)};
    for (size_t i = 0; i < n; i++) {
        uint64_t cell = first + i;
        uint32_t r[4];
        mt_philox((uint32_t[4]){(uint32_t)cell, step, stream, (uint32_t)(cell >> 32)}, key, r);
        out[i] = one(kind, r);
    }
}
