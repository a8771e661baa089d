/* Proved here: means and deviations of planes against plain sums; lines are exact for fields that are linear
 * in each direction, at any angle and across the walls. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/profile.h"

static mt_error err;
static const int cells[3] = {7, 6, 5};
static const double spacing[3] = {0.5, 1, 0.75};

static mt_grid *box(int dim, mt_wall wall) {
    mt_grid *g;
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, cells, spacing, walls, &err), &err);
    return g;
}

static void planes(void **state) {
    (void)state;
    for (int dim = 1; dim <= 3; dim++) {
        mt_grid *g = box(dim, MT_MIRROR);
        double *a = mt_alloc(g->cells, sizeof *a), mean[7], deviation[7];
        mt_random_fill(MT_RANDOM_NORMAL, 3, 0, g->cells, 0, 0, a);
        for (int axis = 0; axis < dim; axis++) {
            mt_profile_along(g, a, axis, mean, deviation);
            for (int i = 0; i < cells[axis]; i++) {
                double sum = 0, squares = 0, n = 0;
                for (int c = 0; c < (int)g->cells; c++) {
                    int at[3] = {c % g->n[0], c / g->n[0] % g->n[1], c / g->n[0] / g->n[1]};
                    if (at[axis] == i) sum += a[c], squares += a[c] * a[c], n++;
                }
                check_close(mean[i], sum / n, 1e-13, 1e-14);
                check_close(deviation[i], sqrt(fmax(0, squares / n - sum / n * (sum / n))), 1e-10, 1e-7);
            }
        }
        mt_free(a);
        mt_grid_unref(&g);
    }
}

static double field(const double r[3]) {
    return (1 + 2 * r[0]) * (1 - 0.3 * r[1]) * (2 + r[2]);
}

static double *linear(const mt_grid *g) {
    double *a = mt_alloc(g->cells, sizeof *a), r[3];
    for (int c = 0; c < (int)g->cells; c++) {
        int at[3] = {c % g->n[0], c / g->n[0] % g->n[1], c / g->n[0] / g->n[1]};
        for (int k = 0; k < 3; k++) r[k] = k < g->dim ? (at[k] + 0.5) * g->h[k] : 0;
        a[c] = field(r);
    }
    return a;
}

static void slanting_lines(void **state) {
    (void)state;
    static const double from[3] = {0.3, 5.2, 0.5}, to[3] = {3.1, 0.7, 3.2};
    for (int dim = 1; dim <= 3; dim++) {
        mt_grid *g = box(dim, MT_PERIODIC);
        double *a = linear(g), v[11];
        mt_profile_between(g, a, from, to, 11, v);
        for (int i = 0; i < 11; i++) {
            double r[3] = {0, 0, 0};
            for (int k = 0; k < dim; k++) r[k] = from[k] + 0.1 * i * (to[k] - from[k]);
            check_close(v[i], field(r), 1e-12, 0);
        }
        mt_profile_between(g, a, from, to, 1, v);
        check_close(v[0], field((double[3]){from[0], dim > 1 ? from[1] : 0, dim > 2 ? from[2] : 0}), 1e-12,
                    0);
        mt_free(a);
        mt_grid_unref(&g);
    }
}

/* From below the box to beyond it along x: cells 0.5, the box 3.5 long. */
static void across_walls(void **state) {
    (void)state;
    static const double from[1] = {-0.75}, to[1] = {4.25};
    static const double a[7] = {0, 1, 2, 3, 4, 5, 6}, around[11] = {5, 6, 0, 1, 2, 3, 4, 5, 6, 0, 1},
                        back[11] = {1, 0, 0, 1, 2, 3, 4, 5, 6, 6, 5};
    for (int mirror = 0; mirror < 2; mirror++) {
        mt_grid *g = box(1, mirror ? MT_MIRROR : MT_PERIODIC);
        double v[21];
        mt_profile_between(g, a, from, to, 21, v);
        for (int i = 0; i < 21; i++) {
            const double *w = mirror ? back : around;
            check_close(v[i], i % 2 ? 0.5 * (w[i / 2] + w[i / 2 + 1]) : w[i / 2], 1e-12, 1e-12);
        }
        mt_grid_unref(&g);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(planes),
        cmocka_unit_test(slanting_lines),
        cmocka_unit_test(across_walls),
    };
    return cmocka_run_group_tests_name("measure_profile", tests, NULL, NULL);
}
