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

/* In (0, 1): 53 bits and half a step, so that a logarithm is always finite. */
static double unit(uint32_t high, uint32_t low) {
    uint64_t bits = ((uint64_t)high << 21) ^ (low >> 11);
    return ((double)bits + 0.5) * 0x1p-53;
}

static double one(mt_random_kind kind, const uint32_t r[4]) {
    if (kind == MT_RANDOM_UNIFORM) return 2 * unit(r[0], r[1]) - 1;
    return sqrt(-2 * log(unit(r[0], r[1]))) * cos(2 * 3.14159265358979323846 * unit(r[2], r[3]));
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
