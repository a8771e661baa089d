/* Filters: real multipliers of the spectrum, even in the wave vector, tabulated once over the modes of a
 * grid. Self-adjoint under the sum over cells: they serve as kernels of long-range interaction (Ohta &
 * Kawasaki, Macromolecules 19 (1986) 2621) and of two-point correlation. */
#ifndef MT_FORMULA_FILTER_H
#define MT_FORMULA_FILTER_H

#include "core/formula/expr.h"

/* Multiplier at wave vector k (rad per length; 0 beyond the grid's axes). Called from one thread at a time.
 */
typedef mt_status (*mt_filter_value)(void *ctx, const double k[3], double *value, mt_error *err);

typedef struct mt_filter_function {
    mt_filter_value at;
    void (*release)(void *ctx); /* called once, with the symbol's end or a failure to make it; may be NULL */
    void *ctx;
} mt_filter_function;

/* A FILTER symbol with one reference, its table filled. EINPUT, naming the wave vectors, where a value is not
 * finite, or differs for k and -k (on a periodic axis all components change sign together, on a mirror axis
 * its own does alone). Checked at up to 20000 modes spread over the grid. */
MT_API mt_status mt_filter_new(mt_symbol **out, mt_forms *forms, const mt_spectrum *spectrum,
                               const char *name, mt_filter_function function, mt_error *err) MT_MUST_USE;

/* Value at any wave vector, also between the modes. */
MT_API mt_status mt_filter_at(const mt_symbol *filter, const double k[3], double *value,
                              mt_error *err) MT_MUST_USE;

#endif
