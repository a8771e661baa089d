#include "core/formula/build.h"

#include <string.h>

#include "core/base/memory.h"

void mt_build_end(mt_builder *b) {
    for (int i = b->n - 1; i >= 0; i--) mt_expr_unref(&b->kept[i]);
    mt_free(b->kept);
    b->kept = NULL;
    b->n = b->room = 0;
}

bool mt_build_grow(mt_builder *b, void *array, int n, int *room, size_t size) {
    if (b->status != MT_OK) return false;
    if (n < *room) return true;
    int more = *room ? 2 * *room : 8;
    void *old, *fresh;
    memcpy(&old, array, sizeof old);
    fresh = mt_resize(old, (size_t)more, size);
    if (!fresh) {
        b->status = mt_fail(b->err, MT_ENOMEM, "no memory for the equations");
        return false;
    }
    memcpy(array, &fresh, sizeof fresh);
    *room = more;
    return true;
}

const mt_expr *mt_build_keep(mt_builder *b, mt_status status, const mt_expr *fresh) {
    if (status != MT_OK) {
        if (b->status == MT_OK) b->status = status;
        return NULL;
    }
    if (!mt_build_grow(b, &b->kept, b->n, &b->room, sizeof *b->kept)) {
        mt_expr_unref(&fresh);
        return NULL;
    }
    return b->kept[b->n++] = fresh;
}

const mt_expr *mt_build_number(mt_builder *b, double value) {
    if (b->status != MT_OK) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_const(&e, b->forms, value, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_wave(mt_builder *b, int axis) {
    if (b->status != MT_OK) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_wave(&e, b->forms, axis, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_symbol(mt_builder *b, mt_symbol *symbol) {
    if (b->status != MT_OK) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_symbol(&e, b->forms, symbol, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_unary(mt_builder *b, mt_op op, const mt_expr *x) {
    if (b->status != MT_OK || !x) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_unary(&e, op, x, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_binary(mt_builder *b, mt_op op, const mt_expr *x, const mt_expr *y) {
    if (b->status != MT_OK || !x || !y) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_binary(&e, op, x, y, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_deriv(mt_builder *b, int axis, const mt_expr *x) {
    if (b->status != MT_OK || !x) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_deriv(&e, axis, x, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_expand(mt_builder *b, const mt_expr *x, int dim) {
    if (b->status != MT_OK || !x) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_expand(&e, x, dim, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_collect(mt_builder *b, const mt_expr *x) {
    if (b->status != MT_OK || !x) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_collect(&e, x, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_partial(mt_builder *b, const mt_expr *x, const mt_expr *wrt) {
    if (b->status != MT_OK || !x || !wrt) return NULL;
    const mt_expr *e = NULL;
    mt_status s = mt_expr_partial(&e, x, wrt, b->err);
    return mt_build_keep(b, s, e);
}

const mt_expr *mt_build_wave_squared(mt_builder *b, int dim) {
    const mt_expr *sum = mt_build_number(b, 0);
    for (int a = 0; a < dim; a++) {
        const mt_expr *k = mt_build_wave(b, a);
        sum = mt_build_add(b, sum, mt_build_mul(b, k, k));
    }
    return sum;
}
