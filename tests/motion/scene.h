/* A small stage for tests of core/motion: grid, fields, formulas with few words. */
#ifndef MT_TESTS_MOTION_SCENE_H
#define MT_TESTS_MOTION_SCENE_H

#include "core/formula/build.h"
#include "core/motion/model.h"
#include "tests/support.h"

typedef struct scene {
    mt_error err;
    mt_forms *forms;
    mt_grid *grid;
    mt_pool *pool;
    mt_field *c, *e; /* two fields */
    mt_builder b;
    const mt_expr *nc, *ne; /* their nodes */
    mt_model *m;
} scene;

void scene_open(scene *s, int dim, const int n[], const double h[], const mt_wall wall[], int threads);
void scene_close(scene *s);

const mt_expr *num(scene *s, double v);
const mt_expr *add(scene *s, const mt_expr *a, const mt_expr *b);
const mt_expr *sub(scene *s, const mt_expr *a, const mt_expr *b);
const mt_expr *mul(scene *s, const mt_expr *a, const mt_expr *b);
const mt_expr *pw(scene *s, const mt_expr *a, double n);
const mt_expr *fun(scene *s, mt_op op, const mt_expr *a);

/* w c^2 (1 - c)^2 + kappa/2 |grad c|^2 */
const mt_expr *double_well(scene *s, const mt_expr *c, double w, double kappa);

/* values from a function of the cell centre */
void fill(mt_field *f, double (*value)(double x, double y, double z));

#endif
