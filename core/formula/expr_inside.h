/* Shared by the files of core/formula that make nodes. */
#ifndef MT_FORMULA_EXPR_INSIDE_H
#define MT_FORMULA_EXPR_INSIDE_H

#include "core/formula/expr.h"

struct mt_forms {
    bool owned;            /* the owner has not let go */
    size_t nodes, buckets; /* buckets: a power of two */
    mt_expr **bucket;
    unsigned symbols; /* made so far */
};

/* What distinguishes a node. */
typedef struct mt_key {
    mt_op op;
    int nargs;
    const mt_expr *arg[3];
    double value;
    mt_symbol *symbol;
    int axis;
    mt_random_kind random;
    uint64_t seed;
} mt_key;

/* The node of this key, found or made, with one more reference. No simplification. */
mt_status mt_node(const mt_expr **out, mt_forms *forms, const mt_key *key, mt_error *err);

/* Value of a pointwise operator on numbers, with the extended logarithm. */
double mt_op_apply(mt_op op, const double a[3]);

#endif
