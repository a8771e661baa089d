/* Expressions: immutable, shared nodes ("hash-consed": equal expressions made from one table are one node, so
 * comparing pointers compares expressions). Constructors simplify locally and order the operands of
 * commutative operators by structural hash, never by address or age, so that the same script always gives the
 * same nodes, bits and text. Not thread-safe; kernels compiled from expressions are.
 *
 * Logarithm (op LOG): log a for a >= d = MT_LOG_CUT, below it the second-order Taylor continuation
 *   log d + (a - d)/d - (a - d)^2/(2 d^2),
 * which is twice continuously differentiable and keeps a log a convex, so that a spectral overshoot beyond a
 * pure component is driven back rather than fatal. */
#ifndef MT_FORMULA_EXPR_H
#define MT_FORMULA_EXPR_H

#include "core/base/random.h"
#include "core/space/spectrum.h"

#define MT_LOG_CUT 1e-6

/* Deeper expressions are refused (EINPUT), so that walks may recurse. */
#define MT_MOST_DEPTH 2000

typedef enum mt_op {
#define MT_OP(name, text, nargs, kind) MT_##name##_OP,
#include "core/formula/ops.def"
#undef MT_OP
    MT_OP_COUNT
} mt_op;

typedef enum mt_symbol_kind { MT_SYMBOL_FIELD, MT_SYMBOL_PARAM, MT_SYMBOL_FILTER } mt_symbol_kind;

/* A name that expressions refer to. Two symbols are always different, even with the same name. */
typedef struct mt_symbol {
    int refs;
    mt_symbol_kind kind;
    unsigned number; /* order of creation in its table: enters hashes */
    char *name;
    mt_grid *grid; /* FIELD: its grid; FILTER: its grid; PARAM: NULL */
    double value;  /* PARAM: present value (the stepper sets it from the history) */
    /* PARAM history: piecewise linear between knots, constant before the first and after the last; two knots
     * at one time are a jump, the later value holds at that time. No knots: constant. */
    int knots;
    double *knot_time, *knot_value;
    /* FILTER (filter.h): multiplier in the layout of a spectral array of one double per mode, table[j*length
     * + m], and the function it was tabulated from. */
    double *table;
    mt_status (*at)(void *ctx, const double k[3], double *value, mt_error *err);
    void (*release)(void *ctx);
    void *ctx;
} mt_symbol;

typedef struct mt_forms mt_forms; /* the table of shared nodes and of symbols */

typedef struct mt_expr {
    mt_op op;
    int nargs;
    unsigned refs;
    unsigned contents; /* bits below */
    int depth;         /* longest way down to a leaf; at most MT_MOST_DEPTH */
    uint64_t hash;     /* structural */
    mt_forms *forms;
    struct mt_expr *next; /* chain in the table */
    const struct mt_expr *arg[3];
    double value;          /* CONST */
    mt_symbol *symbol;     /* FIELD, PARAM, FILTER */
    int axis;              /* COORD, WAVE, DERIV; NOISE: its stream */
    mt_random_kind random; /* NOISE */
    uint64_t seed;         /* NOISE */
} mt_expr;

/* --- tables and symbols
 * ------------------------------------------------------------------------------------------- */

MT_API mt_status mt_forms_new(mt_forms **out, mt_error *err) MT_MUST_USE;
/* Drops the owner's hold; nodes and symbols still referenced stay valid, the table goes with the last of
 * them. */
MT_API void mt_forms_free(mt_forms **forms);

MT_API mt_status mt_symbol_new(mt_symbol **out, mt_forms *forms, mt_symbol_kind kind, const char *name,
                               mt_grid *grid, mt_error *err) MT_MUST_USE;
MT_API mt_symbol *mt_symbol_ref(mt_symbol *symbol);
MT_API void mt_symbol_unref(mt_symbol **symbol);

/* Replaces the history of a param by n knots (copied; times must not fall, at most two knots at one time). */
MT_API mt_status mt_symbol_set_history(mt_symbol *param, int n, const double time[], const double value[],
                                       mt_error *err) MT_MUST_USE;

/* Value of the history at a time; at a jump the later value, or the earlier one if before_jump. */
MT_API double mt_symbol_at(const mt_symbol *param, double time, bool before_jump);

/* --- constructors
 * ------------------------------------------------------------------------------------------------- Each
 * writes a node with one reference for the caller to *out. Arguments are borrowed. Both from one table. */

MT_API mt_status mt_expr_const(const mt_expr **out, mt_forms *forms, double value, mt_error *err) MT_MUST_USE;
/* FIELD or PARAM node; a FILTER symbol gives a FIELD node that counts as a function of the wavenumber (in
 * multipliers). */
MT_API mt_status mt_expr_symbol(const mt_expr **out, mt_forms *forms, mt_symbol *symbol,
                                mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_time(const mt_expr **out, mt_forms *forms, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_coord(const mt_expr **out, mt_forms *forms, int axis, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_wave(const mt_expr **out, mt_forms *forms, int axis, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_noise(const mt_expr **out, mt_forms *forms, mt_random_kind kind, uint64_t seed,
                               mt_error *err) MT_MUST_USE;
/* White noise of an equation: normal numbers that are others in every step (mt_place.step) and stream. */
MT_API mt_status mt_expr_thermal(const mt_expr **out, mt_forms *forms, uint64_t seed, int stream,
                                 mt_error *err) MT_MUST_USE;
/* Any operator with arguments; `axis` only for DERIV, `filter` only for FILTER. Simplifies: constants are
 * folded (only where the result is finite), x+0, x*1, x*0, x-x, x/1, x^1, x^0, -(-x), sign and constants
 * gathered at the front of a product; sums of like terms merged (2 c + 3 c = 5 c) one level deep; DERIV,
 * LAPLACIAN, FILTER and GRADSQ of something without fields or coordinates is 0 (FILTER: times table at k =
 * 0); constants are taken out of SPECTRAL operators. */
MT_API mt_status mt_expr_make(const mt_expr **out, mt_op op, int nargs, const mt_expr *const arg[], int axis,
                              mt_symbol *filter, mt_error *err) MT_MUST_USE;
/* Shorthand for the common cases. */
MT_API mt_status mt_expr_unary(const mt_expr **out, mt_op op, const mt_expr *a, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_binary(const mt_expr **out, mt_op op, const mt_expr *a, const mt_expr *b,
                                mt_error *err) MT_MUST_USE;
MT_API mt_status mt_expr_deriv(const mt_expr **out, int axis, const mt_expr *a, mt_error *err) MT_MUST_USE;

MT_API const mt_expr *mt_expr_ref(const mt_expr *e);
MT_API void
mt_expr_unref(const mt_expr **e); /* sets *e to NULL; NULL inside is allowed; never recurses deeply */

/* --- asking
 * ------------------------------------------------------------------------------------------------------- */

MT_API const char *mt_op_name(mt_op op); /* "ADD" */
MT_API const char *mt_op_text(mt_op op); /* "+" */
MT_API int mt_op_args(mt_op op);
MT_API bool mt_op_spectral(mt_op op);

/* Bits of what an expression contains, found by a walk over the shared graph. */
enum {
    MT_HAS_FIELD = 1,
    MT_HAS_PARAM = 2,
    MT_HAS_TIME = 4,
    MT_HAS_COORD = 8,
    MT_HAS_WAVE = 16,
    MT_HAS_NOISE = 32,
    MT_HAS_SPECTRAL = 64 /* DERIV, LAPLACIAN, FILTER or GRADSQ */
};
MT_API unsigned mt_expr_contents(const mt_expr *e);
MT_API bool mt_expr_contains(const mt_expr *e, const mt_expr *what);
static inline bool mt_expr_is_const(const mt_expr *e, double v) {
    return e->op == MT_CONST_OP && e->value == v;
}
/* Same number in every cell: no field, coordinate, wavenumber or noise. */
MT_API bool mt_expr_uniform(const mt_expr *e);
/* Value of a uniform expression for the params' present values. EINPUT if it is not uniform. */
MT_API mt_status mt_expr_number(const mt_expr *e, double time, double *value, mt_error *err) MT_MUST_USE;

/* The grid of the fields in e (NULL if none). EINPUT, naming both, if fields live on different grids. */
MT_API mt_status mt_expr_grid(const mt_expr *e, mt_grid **grid, mt_error *err) MT_MUST_USE;

/* Parity about the mirror walls of `grid`: fields, and functions of position (reflected at the wall), are
 * even, DERIV flips its axis, sums need equal parity, functions need even arguments (odd functions of odd
 * arguments are odd). EPARITY names the subexpression. A constant 0 goes with either. */
MT_API mt_status mt_expr_parity(const mt_expr *e, const mt_grid *grid, mt_parities *parity,
                                mt_error *err) MT_MUST_USE;

/* --- text
 * ---------------------------------------------------------------------------------------------------------
 */

/* Readable text with the fewest brackets, "2*c*(1 - c)^2 - kappa*laplacian(c)", written to buf (always ended
 * by 0, cut with "..." at size). Returns the length the whole text has. Numbers print as the shortest text
 * that reads back exactly. */
MT_API size_t mt_expr_print(const mt_expr *e, char *buf, size_t size);

/* --- calculus
 * ----------------------------------------------------------------------------------------------------- */

/* Replaces GRADSQ(a) by the sum over the first `dim` axes of DERIV(a)^2. dim: number of axes. */
MT_API mt_status mt_expr_expand(const mt_expr **out, const mt_expr *e, int dim, mt_error *err) MT_MUST_USE;

/* Polynomials in fields with uniform coefficients multiplied out and gathered by power (degree <= 12 and at
 * most 64 terms; anything else is returned as it is), applied to the largest such subexpressions. Used for
 * short potentials and Horner kernels. */
MT_API mt_status mt_expr_collect(const mt_expr **out, const mt_expr *e, mt_error *err) MT_MUST_USE;

/* Replaces node `what` by `by` wherever it stands. */
MT_API mt_status mt_expr_replace(const mt_expr **out, const mt_expr *e, const mt_expr *what,
                                 const mt_expr *by, mt_error *err) MT_MUST_USE;

/* Cell-wise partial derivative of e with respect to node `wrt` (a FIELD, PARAM, COORD or any SPECTRAL node),
 * every other SPECTRAL node, and SPECTRAL nodes that contain wrt below them, being held fixed. */
MT_API mt_status mt_expr_partial(const mt_expr **out, const mt_expr *e, const mt_expr *wrt,
                                 mt_error *err) MT_MUST_USE;

/* Variational derivative of F = h^d * sum over cells of the density: (1/h^d) dF/d(value in a cell), the exact
 * gradient of the discrete energy, in divergence form (reverse accumulation; DERIV is antisymmetric,
 * LAPLACIAN and FILTER are symmetric under the sum):   dF/dc = f_c - div f_{grad c} + lap f_{lap c} + ...
 * dim: axes of the grid. GRADSQ gives -div(2 a grad c), printed with LAPLACIAN where a is uniform. EINPUT if
 * density has NOISE or WAVE. */
MT_API mt_status mt_expr_variation(const mt_expr **out, const mt_expr *density, const mt_expr *field, int dim,
                                   mt_error *err) MT_MUST_USE;

/* --- the oracle
 * --------------------------------------------------------------------------------------------------- */

/* Slow tree-walking evaluation over the whole grid, for tests and small jobs; SPECTRAL nodes by direct sums
 * (cells^2 work per axis line). fields[i] holds the values of symbols[i]. out: cells doubles. */
MT_API mt_status mt_expr_evaluate(const mt_expr *e, const mt_grid *grid, int n, mt_symbol *const symbols[],
                                  const double *const fields[], double time, double *out,
                                  mt_error *err) MT_MUST_USE;

#endif
