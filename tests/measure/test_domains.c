/* Proved here: labels, sizes, walls, percolation and centroids of random images in 1-D to 3-D, all mixtures
 * of walls and both kinds of neighbours, agree exactly with a flood fill in unwrapped coordinates; stripes
 * around and across the box percolate, a disc over the seams does not and has its centre there. */
#include "tests/support.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/random.h"
#include "core/measure/domains.h"

static mt_error err;

/* --- the oracle: one flood fill after another -------------------------------------------------------------
 */

typedef struct flood {
    const mt_grid *g;
    bool full;
    const int32_t *in; /* 1 inside */
    int32_t *label, *queue;
    int (*at)[3]; /* unwrapped */
    size_t count, head, tail;
    double sum[3];
    unsigned percolates, walls;
} flood;

static void visit(flood *f, const int at[3]) {
    const mt_grid *g = f->g;
    int p[3];
    for (int a = 0; a < 3; a++) {
        p[a] = at[a] - (int)floor((double)at[a] / g->n[a]) * g->n[a];
        if (p[a] != at[a] && (g->wall[a] != MT_PERIODIC || g->n[a] == 1)) return;
    }
    int32_t cell = (p[2] * g->n[1] + p[1]) * g->n[0] + p[0];
    if (!f->in[cell]) return;
    if (f->label[cell]) {
        for (int a = 0; a < 3; a++)
            if (f->at[cell][a] != at[a]) f->percolates |= 1u << a;
        return;
    }
    f->label[cell] = (int32_t)f->count;
    f->queue[f->tail++] = cell;
    for (int a = 0; a < 3; a++) {
        f->at[cell][a] = at[a];
        f->sum[a] += at[a];
        if (a >= g->dim || g->wall[a] != MT_MIRROR) continue;
        if (p[a] == 0) f->walls |= 1u << 2 * a;
        if (p[a] == g->n[a] - 1) f->walls |= 2u << 2 * a;
    }
}

static void neighbours(flood *f, int32_t cell) {
    for (int d = 0; d < 27; d++) {
        int x = d % 3 - 1, y = d / 3 % 3 - 1, z = d / 9 - 1, faces = abs(x) + abs(y) + abs(z);
        if (faces == 0 || (faces > 1 && !f->full)) continue;
        int at[3] = {f->at[cell][0] + x, f->at[cell][1] + y, f->at[cell][2] + z};
        visit(f, at);
    }
}

static void fill_from(flood *f, size_t i) {
    const mt_grid *g = f->g;
    int x = (int)i % g->n[0], y = (int)i / g->n[0] % g->n[1], z = (int)i / (g->n[0] * g->n[1]);
    int at[3] = {x, y, z};
    memset(f->sum, 0, sizeof f->sum);
    f->percolates = f->walls = 0;
    f->head = f->tail = 0;
    f->count++;
    visit(f, at);
    while (f->head < f->tail) neighbours(f, f->queue[f->head++]);
}

static void compare_domain(const flood *f, const mt_domains *d) {
    const mt_grid *g = f->g;
    size_t i = f->count - 1;
    unsigned percolates = f->percolates;
    for (int a = 0; a < g->dim; a++)
        if (g->n[a] > 1 && (f->walls >> 2 * a & 3) == 3) percolates |= 1u << a;
    assert_int_equal(d->percolates[i], percolates);
    assert_int_equal(d->walls[i], f->walls);
    check_close(d->size[i], (double)f->tail * g->cell_volume, 1e-15, 0);
    for (int a = 0; a < g->dim; a++) {
        double length = g->n[a] * g->h[a], x = (f->sum[a] / (double)f->tail + 0.5) * g->h[a];
        bool around = g->wall[a] == MT_PERIODIC && (f->percolates >> a & 1);
        assert_true(isnan(d->centroid[i][a]) == around);
        if (!around) check_close(remainder(d->centroid[i][a] - x, length), 0, 0, 1e-10);
        if (!around) assert_true(d->centroid[i][a] >= 0 && d->centroid[i][a] <= length);
    }
}

static void compare(const mt_grid *g, const double *a, double level, bool above, bool full) {
    flood f = {.g = g, .full = full};
    int32_t *in = mt_alloc(g->cells, 4), *labels = mt_alloc(g->cells, 4);
    mt_domains d;
    f.in = in, f.label = mt_alloc(g->cells, 4), f.queue = mt_alloc(g->cells, 4);
    f.at = mt_alloc(g->cells, sizeof *f.at);
    for (size_t i = 0; i < g->cells; i++) in[i] = (a[i] > level) == above;
    check_ok(mt_domains_find(g, a, level, above, full, labels, &d, &err), &err);
    for (size_t i = 0; i < g->cells; i++) {
        if (!in[i] || f.label[i]) continue;
        fill_from(&f, i);
        assert_true(f.count <= d.count);
        compare_domain(&f, &d);
    }
    assert_int_equal(d.count, f.count);
    assert_memory_equal(labels, f.label, g->cells * 4);
    mt_domains_free(&d);
    mt_free(in), mt_free(labels), mt_free(f.label), mt_free(f.queue), mt_free(f.at);
}

static void random_images(void **state) {
    (void)state;
    static const int sizes[9][4] = {{1, 1, 1, 1}, {1, 2, 1, 1},  {1, 17, 1, 1}, {2, 13, 9, 1}, {2, 2, 7, 1},
                                    {2, 1, 8, 1}, {2, 12, 2, 1}, {3, 5, 6, 7},  {3, 4, 1, 5}};
    double h[3] = {0.5, 2, 1.25};
    for (int c = 0; c < 9 * 8 * 12; c++) {
        const int *n = sizes[c % 9];
        int bits = c / 9 % 8, seed = c / 72;
        mt_wall wall[3] = {bits & 1, bits >> 1 & 1, bits >> 2 & 1};
        mt_grid *g;
        check_ok(mt_grid_new(&g, n[0], n + 1, h, wall, &err), &err);
        double *a = mt_alloc(g->cells, sizeof *a);
        mt_random_fill(MT_RANDOM_UNIFORM, (uint64_t)seed, 0, g->cells, 0, 0, a);
        double level = -0.4 + 0.08 * seed; /* through both thresholds of percolation */
        for (int k = 0; k < 4; k++) compare(g, a, level, k & 1, k & 2);
        mt_free(a);
        mt_grid_unref(&g);
    }
}

/* --- images made by hand ----------------------------------------------------------------------------------
 */

static void find(const mt_grid *g, const double *a, mt_domains *d) {
    check_ok(mt_domains_find(g, a, 0, true, false, NULL, d, &err), &err);
}

static mt_grid *square(int n, mt_wall x, mt_wall y) {
    mt_grid *g;
    int cells[2] = {n, n};
    double h[2] = {0.5, 0.5};
    mt_wall wall[2] = {x, y};
    check_ok(mt_grid_new(&g, 2, cells, h, wall, &err), &err);
    return g;
}

static void disc_over_the_corner(void **state) {
    (void)state;
    mt_grid *g = square(40, MT_PERIODIC, MT_PERIODIC);
    double *a = mt_alloc(g->cells, sizeof *a), x0 = 19.75, y0 = 0.75, r = 4;
    mt_domains d;
    for (size_t i = 0; i < g->cells; i++) {
        double x = remainder((double)(i % 40) * 0.5 + 0.25 - x0, 20);
        double y = remainder((double)(i / 40) * 0.5 + 0.25 - y0, 20);
        a[i] = r - hypot(x, y);
    }
    find(g, a, &d);
    assert_int_equal(d.count, 1);
    assert_int_equal(d.any_percolates, 0);
    check_close(d.centroid[0][0], x0, 1e-12, 0);
    check_close(d.centroid[0][1], y0, 1e-12, 0);
    /* Gauss's circle: 197 lattice points with x^2 + y^2 <= 64, four of them on the circle and so at the level
     */
    check_close(d.size[0], 193 * 0.25, 1e-14, 0);
    check_close(d.diameter[0], 2 * sqrt(193 * 0.25 / 3.14159265358979323846), 1e-14, 0);
    check_close(d.mean_diameter, d.diameter[0], 0, 0);
    check_close(mt_equivalent_diameter(3, 4.0 / 3 * 3.14159265358979323846 * 8), 4, 1e-14, 0);
    mt_domains_free(&d);
    mt_free(a);
    mt_grid_unref(&g);
}

/* A stripe with slope k / 1 winds k times around y for once around x; a wall in x cuts it. */
static void stripes_percolate(void **state) {
    (void)state;
    for (int k = 0; k <= 2; k++)
        for (int w = 0; w < 2; w++) {
            mt_grid *g = square(24, w ? MT_MIRROR : MT_PERIODIC, MT_PERIODIC);
            double *a = mt_alloc(g->cells, sizeof *a);
            mt_domains d;
            for (int i = 0; i < 24 * 24; i++) a[i] = (i / 24 + k * (i % 24) + 24 - 4) % 24 < 6 ? 1 : -1;
            find(g, a, &d);
            assert_int_equal(d.count, 1);
            assert_int_equal(d.percolates[0], w ? 1 : k ? 3 : 1); /* cut open it winds around no more */
            assert_int_equal(d.walls[0], w ? 3 : 0);
            assert_true(isnan(d.centroid[0][0]) == !w);
            if (k == 0) check_close(d.centroid[0][1], 3.5, 1e-14, 0);
            mt_domains_free(&d);
            mt_free(a);
            mt_grid_unref(&g);
        }
}

static mt_status with_labels(void *ctx, mt_error *e) {
    const mt_grid *g = ctx;
    double a[25];
    int32_t labels[25];
    mt_domains d;
    for (int i = 0; i < 25; i++) a[i] = i % 3 - 0.5;
    mt_status st = mt_domains_find(g, a, 0, true, true, labels, &d, e);
    mt_domains_free(&d);
    mt_domains_free(&d);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    mt_grid *g = square(5, MT_PERIODIC, MT_MIRROR);
    check_allocation_sweep(with_labels, g);
    mt_grid_unref(&g);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(random_images),
        cmocka_unit_test(disc_over_the_corner),
        cmocka_unit_test(stripes_percolate),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("domains", tests, NULL, NULL);
}
