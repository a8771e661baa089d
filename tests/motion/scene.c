#include "tests/motion/scene.h"

#include <string.h>

void scene_open(scene *s, int dim, const int n[], const double h[], const mt_wall wall[], int threads) {
    memset(s, 0, sizeof *s);
    check_ok(mt_forms_new(&s->forms, &s->err), &s->err);
    check_ok(mt_grid_new(&s->grid, dim, n, h, wall, &s->err), &s->err);
    check_ok(mt_pool_new(&s->pool, threads, &s->err), &s->err);
    check_ok(mt_field_new(&s->c, s->forms, s->grid, "c", &s->err), &s->err);
    check_ok(mt_field_new(&s->e, s->forms, s->grid, "eta", &s->err), &s->err);
    s->b.forms = s->forms;
    s->b.err = &s->err;
    s->nc = mt_build_symbol(&s->b, s->c->symbol);
    s->ne = mt_build_symbol(&s->b, s->e->symbol);
    check_ok(mt_model_new(&s->m, s->forms, s->grid, s->pool, &s->err), &s->err);
}

void scene_close(scene *s) {
    mt_model_free(&s->m);
    mt_build_end(&s->b);
    mt_field_unref(&s->c);
    mt_field_unref(&s->e);
    mt_pool_free(&s->pool);
    mt_grid_unref(&s->grid);
    mt_forms_free(&s->forms);
}

static const mt_expr *checked(scene *s, const mt_expr *e) {
    check_ok(s->b.status, &s->err);
    return e;
}

const mt_expr *num(scene *s, double v) {
    return checked(s, mt_build_number(&s->b, v));
}
const mt_expr *add(scene *s, const mt_expr *a, const mt_expr *b) {
    return checked(s, mt_build_add(&s->b, a, b));
}
const mt_expr *sub(scene *s, const mt_expr *a, const mt_expr *b) {
    return checked(s, mt_build_sub(&s->b, a, b));
}
const mt_expr *mul(scene *s, const mt_expr *a, const mt_expr *b) {
    return checked(s, mt_build_mul(&s->b, a, b));
}
const mt_expr *pw(scene *s, const mt_expr *a, double n) {
    return checked(s, mt_build_binary(&s->b, MT_POW_OP, a, num(s, n)));
}
const mt_expr *fun(scene *s, mt_op op, const mt_expr *a) {
    return checked(s, mt_build_unary(&s->b, op, a));
}

const mt_expr *double_well(scene *s, const mt_expr *c, double w, double kappa) {
    const mt_expr *well = mul(s, num(s, w), mul(s, pw(s, c, 2), pw(s, sub(s, num(s, 1), c), 2)));
    return add(s, well, mul(s, num(s, kappa / 2), fun(s, MT_GRADSQ_OP, c)));
}

void fill(mt_field *f, double (*value)(double x, double y, double z)) {
    const mt_grid *g = f->grid;
    size_t i = 0;
    for (int z = 0; z < g->n[2]; z++)
        for (int y = 0; y < g->n[1]; y++)
            for (int x = 0; x < g->n[0]; x++)
                f->values[i++] = value((x + 0.5) * g->h[0], (y + 0.5) * g->h[1], (z + 0.5) * g->h[2]);
    mt_field_touch(f);
}
