/* Proved here: Philox gives the published answers; the noise is a function of (seed, cell, step, stream)
 * alone, however a range is cut; it stays in its interval at the extreme blocks, which are found by running
 * the generator backwards; moments, distribution and correlations agree with theory within sampling error. */
#include "tests/support.h"

#include <math.h>
#include <string.h>

#include "core/base/random.h"

/* Known answers distributed with the generator by its authors (Salmon et al., SC11; "kat_vectors"), from
 * memory. */
static void published_answers(void **state) {
    (void)state;
    static const uint32_t known[3][10] = {{0, 0, 0, 0, 0, 0, 0x6627e8d5, 0xe169c58d, 0xbc57ac4c, 0x9b00dbd8},
                                          {0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff,
                                           0xffffffff, 0x408f276d, 0x41c83b0e, 0xa20bc7c6, 0x6d5451fd},
                                          {0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344, 0xa4093822,
                                           0x299f31d0, 0xd16cfe09, 0x94fdcceb, 0x5001e420, 0x24126ea1}};
    for (int i = 0; i < 3; i++) {
        uint32_t out[4];
        mt_philox(known[i], known[i] + 4, out);
        assert_memory_equal(out, known[i] + 6, sizeof out);
    }
}

/* Inverse of an odd number modulo 2^32 by Newton's iteration: each turn doubles the correct bits. */
static uint32_t inverse(uint32_t a) {
    uint32_t x = a;
    for (int i = 0; i < 5; i++) x *= 2 - a * x;
    return x;
}

/* The counter whose block is out: a round is undone by dividing the low products by their odd multipliers. */
static void philox_backwards(const uint32_t out[4], const uint32_t key[2], uint32_t counter[4]) {
    uint32_t c[4];
    memcpy(c, out, sizeof c);
    for (uint32_t round = 10; round-- > 0;) {
        uint32_t k0 = key[0] + round * 0x9E3779B9u, k1 = key[1] + round * 0xBB67AE85u;
        uint32_t c2 = c[1] * inverse(0xCD9E8D57u), c0 = c[3] * inverse(0xD2511F53u);
        uint32_t c1 = c[0] ^ (uint32_t)(((uint64_t)0xCD9E8D57u * c2) >> 32) ^ k0;
        uint32_t c3 = c[2] ^ (uint32_t)(((uint64_t)0xD2511F53u * c0) >> 32) ^ k1;
        c[0] = c0, c[1] = c1, c[2] = c2, c[3] = c3;
    }
    memcpy(counter, c, sizeof c);
}

/* The value made from a wanted block, through the public entry. */
static double value_of(mt_random_kind kind, const uint32_t block[4]) {
    const uint64_t seed = 0x123456789abcdef0u;
    const uint32_t key[2] = {(uint32_t)seed, (uint32_t)(seed >> 32)};
    uint32_t c[4], again[4];
    philox_backwards(block, key, c);
    mt_philox(c, key, again);
    assert_memory_equal(again, block, sizeof again);
    double x;
    mt_random_fill(kind, seed, ((uint64_t)c[3] << 32) | c[0], 1, c[1], c[2], &x);
    return x;
}

static void extreme_blocks(void **state) {
    (void)state;
    static const uint32_t zeros[4] = {0, 0, 0, 0}, ones[4] = {~0u, ~0u, ~0u, ~0u},
                          half[4] = {1u << 31, 0, 0, 0};
    assert_true(value_of(MT_RANDOM_UNIFORM, zeros) == -1);
    assert_true(value_of(MT_RANDOM_UNIFORM, half) == 0);
    assert_true(value_of(MT_RANDOM_UNIFORM, ones) == 1 - 0x1p-52);
    /* Longest radius sqrt(-2 ln 2^-53) = sqrt(106 ln 2) at angle 0, shortest 0. */
    check_close(value_of(MT_RANDOM_NORMAL, zeros), sqrt(106 * log(2)), 1e-14, 0);
    check_close(value_of(MT_RANDOM_NORMAL, ones), 0, 0, 1e-14);
    static const uint32_t quarter_turn[4] = {0, 0, 1u << 30, 0}, half_turn[4] = {0, 0, 1u << 31, 0};
    check_close(value_of(MT_RANDOM_NORMAL, quarter_turn), 0, 0, 1e-14);
    check_close(value_of(MT_RANDOM_NORMAL, half_turn), -sqrt(106 * log(2)), 1e-14, 0);
}

static void cut_anywhere(void **state) {
    (void)state;
    enum { N = 400 };
    const uint64_t starts[] = {0, 1000, 0xffffff80u, 0x7ffffffffff0u}; /* the third crosses 2^32 */
    double whole[N], part[N];
    for (int kind = 0; kind < 2; kind++) {
        for (size_t s = 0; s < sizeof starts / sizeof *starts; s++) {
            mt_random_fill((mt_random_kind)kind, 9, starts[s], N, 3, 4, whole);
            for (size_t size = 1; size <= N; size = size * 3 + 1)
                for (size_t at = 0; at < N; at += size) {
                    size_t n = at + size < N ? size : N - at;
                    mt_random_fill((mt_random_kind)kind, 9, starts[s] + at, n, 3, 4, part + at);
                }
            assert_memory_equal(part, whole, sizeof whole);
        }
    }
    part[0] = 5;
    mt_random_fill(MT_RANDOM_UNIFORM, 9, 0, 0, 0, 0, part);
    assert_true(part[0] == 5);
}

/* Each of seed, both halves of the cell, step and stream gives other numbers. */
static void every_argument_counts(void **state) {
    (void)state;
    enum { N = 50, SETS = 7 };
    static const struct {
        uint64_t seed, first;
        uint32_t step, stream;
    } sets[SETS] = {{1, 0, 0, 0},  {2, 0, 0, 0},          {1 + (1ull << 32), 0, 0, 0},
                    {1, 50, 0, 0}, {1, 1ull << 32, 0, 0}, {1, 0, 1, 0},
                    {1, 0, 0, 1}};
    static double v[SETS * N];
    for (int i = 0; i < SETS; i++)
        mt_random_fill(MT_RANDOM_UNIFORM, sets[i].seed, sets[i].first, N, sets[i].step, sets[i].stream,
                       v + i * N);
    for (int i = 0; i < SETS * N; i++)
        for (int j = 0; j < i; j++) assert_true(v[i] != v[j]);
}

enum { N = 1 << 18 };
static double a[N], b[N];

/* Mean of x[i] y[i + lag], in units of its standard deviation for independent values. */
static double correlation(const double *x, const double *y, size_t lag, double variance) {
    double sum = 0;
    for (size_t i = 0; i < N; i++) sum += x[i] * y[(i + lag) % N];
    return sum / (variance * sqrt(N));
}

/* Bounds are five standard deviations: one check in 1.7 million would fail by chance, and seeds are fixed. */
static void check_kind(mt_random_kind kind, double variance, double fourth, double eighth) {
    double m1 = 0, m2 = 0, m3 = 0, m4 = 0;
    mt_random_fill(kind, 42, 0, N, 0, 0, a);
    for (int i = 0; i < N; i++) {
        double s = a[i] * a[i];
        m1 += a[i] / N, m2 += s / N, m3 += s * a[i] / N, m4 += s * s / N;
    }
    double sixth = kind == MT_RANDOM_UNIFORM ? 1.0 / 7 : 15;
    check_close(m1, 0, 0, 5 * sqrt(variance / N));
    check_close(m2, variance, 0, 5 * sqrt((fourth - variance * variance) / N));
    check_close(m3, 0, 0, 5 * sqrt(sixth / N));
    check_close(m4, fourth, 0, 5 * sqrt((eighth - fourth * fourth) / N));
    for (size_t lag = 1; lag <= 1024; lag *= 2) check_close(correlation(a, a, lag, variance), 0, 0, 5);
    mt_random_fill(kind, 42, 0, N, 0, 1, b);
    check_close(correlation(a, b, 0, variance), 0, 0, 5);
    mt_random_fill(kind, 42, 0, N, 1, 0, b);
    check_close(correlation(a, b, 0, variance), 0, 0, 5);
    mt_random_fill(kind, 43, 0, N, 0, 0, b);
    check_close(correlation(a, b, 0, variance), 0, 0, 5);
}

static void moments_and_correlations(void **state) {
    (void)state;
    check_kind(MT_RANDOM_UNIFORM, 1.0 / 3, 1.0 / 5, 1.0 / 9);
    check_kind(MT_RANDOM_NORMAL, 1, 3, 105);
}

/* Pearson's chi-squared over 64 classes of equal probability; its 63 degrees of freedom have mean 63 and
 * standard deviation sqrt(126). Too even a filling would be as wrong as too uneven a one. */
static void distribution(void **state) {
    (void)state;
    for (int kind = 0; kind < 2; kind++) {
        double count[64] = {0}, chi2 = 0;
        mt_random_fill((mt_random_kind)kind, 7, 1ull << 40, N, 5, 6, a);
        for (int i = 0; i < N; i++) {
            double p = kind == MT_RANDOM_UNIFORM ? 0.5 * (a[i] + 1) : 0.5 * erfc(-a[i] / sqrt(2));
            assert_true(p >= 0 && p < 1);
            count[(int)(64 * p)]++;
        }
        for (int i = 0; i < 64; i++) chi2 += pow(count[i] - N / 64.0, 2) / (N / 64.0);
        check_close(chi2, 63, 0, 5 * sqrt(126));
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(published_answers),
        cmocka_unit_test(extreme_blocks),
        cmocka_unit_test(cut_anywhere),
        cmocka_unit_test(every_argument_counts),
        cmocka_unit_test(moments_and_correlations),
        cmocka_unit_test(distribution),
    };
    return cmocka_run_group_tests_name("random", tests, NULL, NULL);
}
