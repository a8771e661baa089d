/* exp and log without branches, for loops that the compiler turns into vector code. Internal to core/formula.
 *
 * exp: x = n ln 2 + r, |r| <= ln 2 / 2 (Cody & Waite 1980, ln 2 in two parts), exp r by its Taylor series to
 * r^13 (remainder below 2^-57), times 2^n in two factors so that results near the ends of the range are
 * right. log: x = 2^k m with m in [sqrt(1/2), sqrt 2), log m = 2 atanh(f / (2 + f)), f = m - 1, by the
 * polynomial and the summation order of the freely distributed C library of Sun Microsystems (1993),
 * coefficients Lg1 .. Lg7 from memory and proved by the tests (below 1 ulp). */
#ifndef MT_FORMULA_VECTOR_MATH_H
#define MT_FORMULA_VECTOR_MATH_H

#include <string.h>

#include "core/formula/expr.h"

#define MT_INLINE static inline __attribute__((always_inline))

MT_INLINE double mt_from_bits(uint64_t u) {
    double d;
    memcpy(&d, &u, sizeof d);
    return d;
}

MT_INLINE uint64_t mt_to_bits(double d) {
    uint64_t u;
    memcpy(&u, &d, sizeof u);
    return u;
}

MT_INLINE double mt_exp_one(double x) {
    const double magic = 0x1.8p52, high = 0x1.62e42fee00000p-1, low = 0x1.a39ef35793c76p-33;
    double y = x > 800 ? 800 : x < -800 ? -800 : x;
    double t = y * 0x1.71547652b82fep0 + magic, n = t - magic;
    double r = (y - n * high) - n * low;
    double p = 1.0 / 6227020800;
    p = p * r + 1.0 / 479001600;
    p = p * r + 1.0 / 39916800;
    p = p * r + 1.0 / 3628800;
    p = p * r + 1.0 / 362880;
    p = p * r + 1.0 / 40320;
    p = p * r + 1.0 / 5040;
    p = p * r + 1.0 / 720;
    p = p * r + 1.0 / 120;
    p = p * r + 1.0 / 24;
    p = p * r + 1.0 / 6;
    p = p * r + 0.5;
    p = 1 + (r + r * r * p);
    double half = n * 0.5 + magic, n1 = half - magic, n2 = n - n1; /* 2^n1 and 2^n2 are normal numbers */
    uint64_t e1 = (mt_to_bits(n1 + 1023 + 0x1p52) & 0xFFF) << 52,
             e2 = (mt_to_bits(n2 + 1023 + 0x1p52) & 0xFFF) << 52;
    double result = p * mt_from_bits(e1) * mt_from_bits(e2);
    return x != x ? x : result;
}

MT_INLINE double mt_log_positive(double x) {
    const double high = 6.93147180369123816490e-01, low = 1.90821492927058770002e-10;
    double tiny = x < 0x1p-1022 ? 1 : 0; /* subnormal: scaled up */
    double z = tiny != 0 ? x * 0x1p54 : x;
    uint64_t u = mt_to_bits(z), shifted = u + (0x3ff0000000000000u - 0x3fe6a09e00000000u);
    double k = mt_from_bits((shifted >> 52) | 0x4330000000000000u) - 0x1p52 - 1023 - 54 * tiny;
    double m = mt_from_bits((shifted & 0x000fffffffffffffu) + 0x3fe6a09e00000000u);
    double f = m - 1, s = f / (2 + f), s2 = s * s, s4 = s2 * s2;
    double t1 =
        s4 * (3.999999999940941908e-01 + s4 * (2.222219843214978396e-01 + s4 * 1.531383769920937332e-01));
    double t2 =
        s2 *
        (6.666666666666735130e-01 +
         s4 * (2.857142874366239149e-01 + s4 * (1.818357216161805012e-01 + s4 * 1.479819860511658591e-01)));
    double half = 0.5 * f * f;
    double result = s * (half + (t1 + t2)) + k * low - half + f + k * high;
    return x == x && x < 0x1p1023 * 1.9999999999999998 ? result : x;
}

/* The extension of expr.h below the cut. */
MT_INLINE double mt_log_one(double x) {
    const double c = MT_LOG_CUT, log_c = -13.815510557964274; /* log 1e-6 */
    double t = (x - c) / c, in = mt_log_positive(x < c ? c : x);
    return x < c ? log_c + t - 0.5 * t * t : in;
}

MT_INLINE double mt_dlog_one(double x) {
    const double c = MT_LOG_CUT;
    return x < c ? 1 / c - (x - c) / c / c : 1 / x;
}

MT_INLINE double mt_ddlog_one(double x) {
    const double c = MT_LOG_CUT;
    return x < c ? -1 / (c * c) : -1 / (x * x);
}

#endif
