/* The inside of a kernel, shared by kernel_compile.c, kernel_run.c and kernel_print.c. */
#ifndef MT_FORMULA_KERNEL_INSIDE_H
#define MT_FORMULA_KERNEL_INSIDE_H

#include "core/formula/kernel.h"

/* Where an operand of an instruction lives. */
typedef enum mt_where { MT_IN_NOWHERE, MT_IN_REGISTER, MT_IN_INPUT, MT_IN_SCALAR } mt_where;

typedef struct mt_operand {
    mt_where where;
    int number;
} mt_operand;

/* Beyond the operators of ops.def: a polynomial in one operand by Horner's rule. */
#define MT_CODE_POLY MT_OP_COUNT
#define MT_CODE_COPY (MT_OP_COUNT + 1) /* of an input that is an output as it is: others may overwrite it */

typedef struct mt_instruction {
    int code; /* an mt_op, or MT_CODE_POLY */
    int to;   /* register */
    mt_operand a[3];
    int axis;              /* COORD, WAVE */
    mt_random_kind random; /* NOISE */
    uint64_t seed;
    int degree, coefficients; /* POLY: scalars coefficients .. coefficients + degree, ascending */
    int power;                /* POW with a whole constant exponent; 0: general */
} mt_instruction;

/* sign * expression, or a constant 0 where there is none: evaluated by prepare */
typedef struct mt_scalar {
    const mt_expr *e;
    double sign;
} mt_scalar;

struct mt_kernel {
    int nin, nout, nreduced;
    int n, room;
    mt_instruction *code;
    int registers;
    int scalars, scalar_room;
    mt_scalar *scalar;
    double *value;             /* [scalars] */
    mt_operand *out, *reduced; /* what is stored and reduced at the end of a tile */
    mt_reduce *reduce;
    char **in_name;
};

#endif
