/* Kernels: expressions compiled to a program of three-address instructions over tiles of MT_TILE values that
 * stay in cache, with vector code for each instruction (AVX2 or AVX-512 chosen at run time, plain C
 * otherwise; all give the same bits for + - * / sqrt min max, and every path the same bits for exp, log, pow
 * and the like because they run the same algorithm). Compile once, prepare before each sweep, run from any
 * number of threads at once. */
#ifndef MT_FORMULA_KERNEL_H
#define MT_FORMULA_KERNEL_H

#include "core/formula/expr.h"

typedef struct mt_kernel mt_kernel;

typedef enum mt_reduce { MT_REDUCE_SUM, MT_REDUCE_MIN, MT_REDUCE_MAX } mt_reduce;

/* What a kernel computes. Input arrays are named by the expression they hold: in[i] is a FIELD or SPECTRAL
 * node (or any node), taken as given wherever it occurs in out and reduced. Everything else must be POINT or
 * LEAF; a FIELD or SPECTRAL node that is not among the inputs is EINPUT, named. */
typedef struct mt_kernel_spec {
    int nin, nout, nreduced;
    const mt_expr *const *in;
    const mt_expr *const *out;
    const mt_expr *const *reduced;
    const mt_reduce *reduce;
    bool literal; /* polynomials term by term as written, not by Horner's rule: the oracle's bits */
} mt_kernel_spec;

/* A reduction's result over one call of mt_kernel_run. */
typedef struct mt_reduced {
    double value; /* SUM: in the order of the cells, per tile, then tiles in order; MIN, MAX: NaN if any value
                     was NaN */
    size_t
        cell; /* MIN, MAX: first place (in cells, place->first counted in) where it was reached; first NaN */
} mt_reduced;

/* Where the values of a call lie. */
typedef struct mt_place {
    const mt_grid *grid;   /* for COORD; NULL if there is none */
    size_t first;          /* row-major number of the first cell: COORD and NOISE depend on it */
    const double *wave[3]; /* for WAVE: n wavenumbers along this axis, or NULL: wave_fixed */
    double wave_fixed[3];
    uint32_t step; /* of the run, for NOISE: 0 in starting states */
} mt_place;

/* Passes: fold, share, order, reuse registers, emit, verify. */
MT_API mt_status mt_kernel_new(mt_kernel **out, const mt_kernel_spec *spec, mt_error *err) MT_MUST_USE;
MT_API void mt_kernel_free(mt_kernel **kernel);

/* Evaluates the uniform part (params, time and everything made of them alone) once. Call before each sweep.
 */
MT_API mt_status mt_kernel_prepare(mt_kernel *kernel, double time, mt_error *err) MT_MUST_USE;

/* Doubles of scratch one concurrent call needs (aligned to MT_ALIGN; multiple of 8). */
MT_API size_t mt_kernel_scratch(const mt_kernel *kernel);

/* Computes n values: out[j][0..n-1] from in[i][0..n-1]. out[j] may be in[j'] (same start) for any j, j';
 * arrays need no alignment. reduced: nreduced results, set by the call (not accumulated). */
MT_API void mt_kernel_run(const mt_kernel *kernel, const mt_place *place, size_t n, const double *const in[],
                          double *const out[], mt_reduced reduced[], double *scratch);

MT_API int mt_kernel_instructions(const mt_kernel *kernel); /* per cell, the uniform part not counted */
MT_API int mt_kernel_registers(const mt_kernel *kernel);    /* tiles of scratch */

/* The program as text, one instruction a line; as mt_expr_print. */
MT_API size_t mt_kernel_print(const mt_kernel *kernel, char *buf, size_t size);

/* Vector functions behind the kernels, within 2 ulp of the exact value: y[i] = f(x[i]). Public for tests and
 * bench. */
MT_API void mt_vector_exp(size_t n, const double *x, double *y);
MT_API void mt_vector_log(size_t n, const double *x, double *y); /* with the extension of expr.h */

#endif
