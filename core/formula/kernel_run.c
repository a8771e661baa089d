/* The kernel machine: one tile at a time through all instructions, so that registers stay in the first-level
 * cache. */
#include "core/formula/kernel_inside.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/base/vector.h"
#include "core/formula/vector_math.h"

#define LANES 8

mt_status mt_kernel_prepare(mt_kernel *k, double time, mt_error *err) {
    for (int i = 0; i < k->scalars; i++) {
        k->value[i] = k->scalar[i].sign;
        if (!k->scalar[i].e) continue; /* a bare +-1, or 0 for a missing power */
        mt_status st = mt_expr_number(k->scalar[i].e, time, &k->value[i], err);
        if (st) return st;
        k->value[i] *= k->scalar[i].sign;
    }
    return MT_OK;
}

size_t mt_kernel_scratch(const mt_kernel *k) {
    size_t tile = mt_round_up(MT_TILE, 8);
    return tile * (size_t)k->registers +
           3 * tile; /* three tiles for scalars spread out where no form of their own exists */
}

int mt_kernel_instructions(const mt_kernel *k) {
    return k->n;
}
int mt_kernel_registers(const mt_kernel *k) {
    return k->registers;
}

/* --- loops: the length is at most MT_TILE
 * ------------------------------------------------------------------------------------------- */

#define EACH(expression)                                                                                     \
    for (size_t i = 0; i < n; i++) y[i] = (expression);                                                      \
    break

/* Dispatch over operators; every case is one loop. Long because it is the table. */
MT_VECTOR_CLONES static void unary(int op, size_t n, const double *a, double *y) {
    switch (op) {
    case MT_NEG_OP: EACH(-a[i]);
    case MT_EXP_OP: EACH(mt_exp_one(a[i]));
    case MT_LOG_OP: EACH(mt_log_one(a[i]));
    case MT_DLOG_OP: EACH(mt_dlog_one(a[i]));
    case MT_DDLOG_OP: EACH(mt_ddlog_one(a[i]));
    case MT_SQRT_OP: EACH(sqrt(a[i]));
    case MT_SIN_OP: EACH(sin(a[i]));
    case MT_COS_OP: EACH(cos(a[i]));
    case MT_TANH_OP: EACH(tanh(a[i]));
    case MT_ABS_OP: EACH(fabs(a[i]));
    case MT_SIGN_OP: EACH((double)(a[i] > 0) - (double)(a[i] < 0));
    default: break;
    }
}

MT_VECTOR_CLONES static void binary(int op, size_t n, const double *a, const double *b, double *y) {
    switch (op) {
    case MT_ADD_OP: EACH(a[i] + b[i]);
    case MT_SUB_OP: EACH(a[i] - b[i]);
    case MT_MUL_OP: EACH(a[i] * b[i]);
    case MT_DIV_OP: EACH(a[i] / b[i]);
    case MT_POW_OP: EACH(pow(a[i], b[i]));
    case MT_MIN_OP: EACH(a[i] <= b[i] ? a[i] : b[i]);
    case MT_MAX_OP: EACH(a[i] >= b[i] ? a[i] : b[i]);
    case MT_ABOVE_OP: EACH(a[i] > b[i] ? 1.0 : 0.0);
    default: break;
    }
}

MT_VECTOR_CLONES static void binary_scalar(int op, size_t n, const double *a, double b, double *y) {
    switch (op) {
    case MT_ADD_OP: EACH(a[i] + b);
    case MT_SUB_OP: EACH(a[i] - b);
    case MT_MUL_OP: EACH(a[i] * b);
    case MT_DIV_OP: EACH(a[i] / b);
    case MT_POW_OP: EACH(pow(a[i], b));
    case MT_MIN_OP: EACH(a[i] <= b ? a[i] : b);
    case MT_MAX_OP: EACH(a[i] >= b ? a[i] : b);
    case MT_ABOVE_OP: EACH(a[i] > b ? 1.0 : 0.0);
    default: break;
    }
}

MT_VECTOR_CLONES static void scalar_binary(int op, size_t n, double a, const double *b, double *y) {
    switch (op) {
    case MT_ADD_OP: EACH(a + b[i]);
    case MT_SUB_OP: EACH(a - b[i]);
    case MT_MUL_OP: EACH(a * b[i]);
    case MT_DIV_OP: EACH(a / b[i]);
    case MT_POW_OP: EACH(pow(a, b[i]));
    case MT_MIN_OP: EACH(a <= b[i] ? a : b[i]);
    case MT_MAX_OP: EACH(a >= b[i] ? a : b[i]);
    case MT_ABOVE_OP: EACH(a > b[i] ? 1.0 : 0.0);
    default: break;
    }
}

MT_VECTOR_CLONES static void choose(size_t n, const double *a, const double *b, const double *c, double *y) {
    for (size_t i = 0; i < n; i++) y[i] = a[i] != 0 ? b[i] : c[i];
}

/* The same products in the same order as repeated squaring on one number (mt_op_apply). */
MT_VECTOR_CLONES static void whole_power(size_t n, int power, const double *a, double *y) {
    unsigned m = (unsigned)(power < 0 ? -power : power);
    switch (power) {
    case 2:
        for (size_t i = 0; i < n; i++) y[i] = a[i] * a[i];
        return;
    case 3:
        for (size_t i = 0; i < n; i++) y[i] = a[i] * (a[i] * a[i]);
        return;
    case 4:
        for (size_t i = 0; i < n; i++) y[i] = (a[i] * a[i]) * (a[i] * a[i]);
        return;
    default: break;
    }
    for (size_t i = 0; i < n; i++) {
        double p = 1, x = a[i];
        for (unsigned j = m; j; j >>= 1, x *= x)
            if (j & 1) p *= x;
        y[i] = power < 0 ? 1 / p : p;
    }
}

/* Horner's rule with the degree known to the compiler for the common cases. */
MT_VECTOR_CLONES static void polynomial(size_t n, int degree, const double *c, const double *a, double *y) {
    switch (degree) {
    case 2: EACH(c[0] + a[i] * (c[1] + a[i] * c[2]));
    case 3: EACH(c[0] + a[i] * (c[1] + a[i] * (c[2] + a[i] * c[3])));
    case 4: EACH(c[0] + a[i] * (c[1] + a[i] * (c[2] + a[i] * (c[3] + a[i] * c[4]))));
    default:
        for (size_t i = 0; i < n; i++) {
            double p = c[degree];
            for (int d = degree; d-- > 0;) p = c[d] + a[i] * p;
            y[i] = p;
        }
    }
}

/* --- reductions: LANES interleaved parts, joined in fixed order
 * --------------------------------------------------------------------- */

MT_VECTOR_CLONES static double sum_of(size_t n, const double *a) {
    double s[LANES] = {0};
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) s[j] += a[i + j];
    for (size_t j = 0; i < n; i++, j++) s[j] += a[i];
    return ((s[0] + s[4]) + (s[2] + s[6])) + ((s[1] + s[5]) + (s[3] + s[7]));
}

/* Comparison only in the loop; the place is looked for when a tile holds a new extreme. nans: how many values
 * were NaN. */
MT_VECTOR_CLONES static double least_of(size_t n, const double *a, double sign, double *nans) {
    double s[LANES], bad[LANES] = {0}, t = INFINITY;
    for (int j = 0; j < LANES; j++) s[j] = INFINITY;
    size_t i = 0;
    *nans = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) {
            double x = sign * a[i + j];
            s[j] = x < s[j] ? x : s[j];
            bad[j] += x != x ? 1.0 : 0.0;
        }
    for (; i < n; i++) {
        t = sign * a[i] < t ? sign * a[i] : t;
        *nans += a[i] != a[i] ? 1.0 : 0.0;
    }
    for (int j = 0; j < LANES; j++) t = s[j] < t ? s[j] : t, *nans += bad[j];
    return t;
}

static void extreme(mt_reduced *r, bool max, size_t n, const double *a, size_t first) {
    double sign = max ? -1 : 1, nans, t = least_of(n, a, sign, &nans);
    if (isnan(r->value) || (nans == 0 && !(t < sign * r->value))) return;
    for (size_t i = 0; i < n; i++)
        if (nans > 0 ? isnan(a[i]) : sign * a[i] == t) {
            r->value = a[i];
            r->cell = first + i;
            return;
        }
}

/* --- one tile
 * ------------------------------------------------------------------------------------------------------------------------
 */

typedef struct tile {
    const mt_kernel *k;
    const mt_place *place;
    size_t start, n; /* within the call */
    const double *const *in;
    double *registers, *spread;
} tile;

static size_t tile_room(void) {
    return mt_round_up(MT_TILE, 8);
}

static double *reg(const tile *t, int number) {
    return t->registers + (size_t)number * tile_room();
}

/* An operand as an array; scalars are written out into the spare tile of that argument. */
static const double *array_of(const tile *t, mt_operand a, int argument) {
    if (a.where == MT_IN_REGISTER) return reg(t, a.number);
    if (a.where == MT_IN_INPUT) return t->in[a.number] + t->start;
    double *s = t->spread + (size_t)argument * tile_room();
    for (size_t i = 0; i < t->n; i++) s[i] = t->k->value[a.number];
    return s;
}

static void coordinate(const tile *t, int axis, double *y) {
    const mt_grid *g = t->place->grid;
    size_t nx = (size_t)g->n[0], ny = (size_t)g->n[1];
    for (size_t i = 0; i < t->n; i++) {
        size_t cell = t->place->first + t->start + i;
        size_t p = axis == 0 ? cell % nx : axis == 1 ? cell / nx % ny : cell / (nx * ny);
        y[i] = ((double)p + 0.5) * g->h[axis];
    }
}

static void wave(const tile *t, int axis, double *y) {
    const double *k = t->place->wave[axis];
    if (k)
        memcpy(y, k + t->start, t->n * sizeof *y);
    else
        for (size_t i = 0; i < t->n; i++) y[i] = t->place->wave_fixed[axis];
}

static void two_operands(const tile *t, const mt_instruction *x, double *y) {
    if (x->a[1].where == MT_IN_SCALAR && x->a[0].where != MT_IN_SCALAR)
        binary_scalar(x->code, t->n, array_of(t, x->a[0], 0), t->k->value[x->a[1].number], y);
    else if (x->a[0].where == MT_IN_SCALAR && x->a[1].where != MT_IN_SCALAR)
        scalar_binary(x->code, t->n, t->k->value[x->a[0].number], array_of(t, x->a[1], 1), y);
    else
        binary(x->code, t->n, array_of(t, x->a[0], 0), array_of(t, x->a[1], 1), y);
}

static void execute(const tile *t, const mt_instruction *x) {
    double *y = reg(t, x->to);
    switch (x->code) {
    case MT_CODE_POLY:
        polynomial(t->n, x->degree, t->k->value + x->coefficients, array_of(t, x->a[0], 0), y);
        return;
    case MT_CODE_COPY: memcpy(y, array_of(t, x->a[0], 0), t->n * sizeof *y); return;
    case MT_COORD_OP: coordinate(t, x->axis, y); return;
    case MT_WAVE_OP: wave(t, x->axis, y); return;
    case MT_NOISE_OP:
        mt_random_fill(x->random, x->seed, t->place->first + t->start, t->n, t->place->step,
                       (uint32_t)x->axis, y);
        return;
    case MT_WHERE_OP:
        choose(t->n, array_of(t, x->a[0], 0), array_of(t, x->a[1], 1), array_of(t, x->a[2], 2), y);
        return;
    default: break;
    }
    if (x->power)
        whole_power(t->n, x->power, array_of(t, x->a[0], 0), y);
    else if (mt_op_args((mt_op)x->code) == 1)
        unary(x->code, t->n, array_of(t, x->a[0], 0), y);
    else
        two_operands(t, x, y);
}

static void finish_tile(const tile *t, double *const out[], mt_reduced reduced[]) {
    const mt_kernel *k = t->k;
    for (int i = 0; i < k->nreduced; i++) { /* before the stores: an output may be an input */
        const double *a = array_of(t, k->reduced[i], 0);
        if (k->reduce[i] == MT_REDUCE_SUM)
            reduced[i].value += sum_of(t->n, a);
        else
            extreme(&reduced[i], k->reduce[i] == MT_REDUCE_MAX, t->n, a, t->place->first + t->start);
    }
    for (int i = 0; i < k->nout;
         i++) { /* first those that read inputs as they are, into the spare tiles where they are few */
        const double *a = array_of(t, k->out[i], i % 3);
        memmove(out[i] + t->start, a, t->n * sizeof *a);
    }
}

void mt_kernel_run(const mt_kernel *k, const mt_place *place, size_t n, const double *const in[],
                   double *const out[], mt_reduced reduced[], double *scratch) {
    tile t = {.k = k, .place = place, .in = in, .registers = scratch};
    t.spread = scratch + (size_t)k->registers * tile_room();
    for (int i = 0; i < k->nreduced; i++) {
        reduced[i].cell = place->first;
        reduced[i].value = k->reduce[i] == MT_REDUCE_SUM   ? 0
                           : k->reduce[i] == MT_REDUCE_MIN ? INFINITY
                                                           : -INFINITY;
    }
    for (t.start = 0; t.start < n; t.start += MT_TILE) {
        t.n = n - t.start < MT_TILE ? n - t.start : MT_TILE;
        for (int i = 0; i < k->n; i++) execute(&t, &k->code[i]);
        finish_tile(&t, out, reduced);
    }
}

MT_VECTOR_CLONES static void exp_loop(size_t n, const double *x, double *y) {
    for (size_t i = 0; i < n; i++) y[i] = mt_exp_one(x[i]);
}
MT_VECTOR_CLONES static void log_loop(size_t n, const double *x, double *y) {
    for (size_t i = 0; i < n; i++) y[i] = mt_log_one(x[i]);
}
void mt_vector_exp(size_t n, const double *x, double *y) {
    exp_loop(n, x, y);
}
void mt_vector_log(size_t n, const double *x, double *y) {
    log_loop(n, x, y);
}
