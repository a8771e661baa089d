/* Proved here: Euler characteristics of disc, ring, ball, torus, slab and rod, around walls and in the box;
 * of random pictures by counting domains and holes; boundary and breadth of the closed forms; wherever the
 * box is cut; with unequal spacings; mirror boxes as half of their double. */
#include "tests/support.h"

#include <math.h>

#include "core/base/random.h"
#include "core/measure/domains.h"
#include "core/measure/topology.h"

static mt_error err;
static const double pi = 3.14159265358979323846;

static mt_grid *box(int dim, const int n[3], const double h[3], mt_wall wall) {
    mt_grid *g;
    mt_wall walls[3] = {wall, wall, wall};
    check_ok(mt_grid_new(&g, dim, n, h, walls, &err), &err);
    return g;
}

typedef double (*shape)(const double r[3]); /* > 0 inside; r from the middle of the box */

static double disc(const double r[3]) {
    return 10 - hypot(r[0], r[1]);
}
static double ring(const double r[3]) {
    return 3 - fabs(hypot(r[0], r[1]) - 9);
}
static double ball(const double r[3]) {
    return 10 - sqrt(r[0] * r[0] + r[1] * r[1] + r[2] * r[2]);
}
static double hollow(const double r[3]) {
    return 2 - fabs(sqrt(r[0] * r[0] + r[1] * r[1] + r[2] * r[2]) - 9);
}
static double torus(const double r[3]) {
    return 4 - hypot(hypot(r[0], r[1]) - 9, r[2]);
}
static double tilted(const double r[3]) { /* the torus turned out of the axes */
    double u[3] = {(2 * r[0] + r[1] - 2 * r[2]) / 3, (r[0] + 2 * r[1] + 2 * r[2]) / 3,
                   (2 * r[0] - 2 * r[1] + r[2]) / 3};
    return torus(u);
}
static double slab(const double r[3]) {
    return 5 - fabs(r[0]);
}
static double rod(const double r[3]) {
    return 5 - hypot(r[1], r[2]);
}

static double *image(const mt_grid *g, shape f, double off) {
    double *a = mt_alloc(g->cells, sizeof *a), r[3];
    for (size_t i = 0; i < g->cells; i++) {
        size_t at[3] = {i % (size_t)g->n[0], i / (size_t)g->n[0] % (size_t)g->n[1],
                        i / (size_t)g->n[0] / (size_t)g->n[1]};
        for (int k = 0; k < 3; k++)
            r[k] = k < g->dim ? ((double)at[k] + 0.5 - 0.5 * g->n[k]) * g->h[k] - off * (k + 1) : 0;
        a[i] = f(r);
    }
    return a;
}

typedef struct wanted {
    int dim;
    shape f;
    double euler, size, boundary, breadth;
    double tolerance; /* of boundary and breadth */
} wanted;

/* The box is 30 each way. */
static void closed_forms(void **state) {
    (void)state;
    const wanted list[] = {
        {2, disc, 1, pi * 100, 2 * pi * 10, NAN, 0.01},
        {2, ring, 0, pi * (144 - 36), 2 * pi * 18, NAN, 0.01},
        {2, slab, 0, 10 * 30, 60, NAN, 0.06},
        {3, ball, 1, 4 * pi / 3 * 1000, 4 * pi * 100, 20, 0.01},
        {3, hollow, 2, 4 * pi / 3 * (1331 - 343), 4 * pi * (121 + 49), 2 * (11 - 7), 0.01},
        {3, torus, 0, 2 * pi * pi * 9 * 16, 4 * pi * pi * 9 * 4, pi * 9, 0.03},
        {3, tilted, 0, 2 * pi * pi * 9 * 16, 4 * pi * pi * 9 * 4, pi * 9, 0.03},
        {3, slab, 0, 10 * 900, 2 * 900, 0, 0.08},
        {3, rod, 0, pi * 25 * 30, 2 * pi * 5 * 30, 15, 0.08},
    };
    static const double spacings[2][3] = {{0.5, 0.5, 0.5}, {0.5, 0.375, 0.625}};
    for (size_t i = 0; i < sizeof list / sizeof *list; i++)
        for (int s = 0; s < 2; s++) {
            const double *h = spacings[s];
            int n[3] = {(int)(30 / h[0]), (int)(30 / h[1]), (int)(30 / h[2])};
            mt_grid *g = box(list[i].dim, n, h, MT_PERIODIC);
            double *a = image(g, list[i].f, 0.03);
            mt_topology t;
            for (int full = 0; full < 2; full++) {
                mt_topology_of(g, a, 0, true, full, &t);
                check_close(t.euler, list[i].euler, 0, 1e-9);
                check_close(t.euler_share, list[i].euler, 0, 1e-9);
                check_close(t.size, list[i].size, 0.015, 0);
                check_close(t.boundary, list[i].boundary, list[i].tolerance, 0);
                check_close(t.breadth, list[i].breadth, list[i].tolerance, 0.1);
            }
            mt_topology_of(g, a, 0, false, true, &t); /* the other phase */
            double sign = list[i].dim == 2 ? -1 : 1;
            check_close(t.euler, sign * list[i].euler, 0, 1e-9);
            check_close(t.boundary, list[i].boundary, list[i].tolerance, 0);
            check_close(t.breadth, -list[i].breadth, list[i].tolerance, 0.1);
            mt_free(a);
            mt_grid_unref(&g);
        }
}

static size_t domains(const mt_grid *g, const double *a, bool above, bool full) {
    mt_domains d;
    check_ok(mt_domains_find(g, a, 0.5, above, full, NULL, &d, &err), &err);
    size_t n = d.count;
    mt_domains_free(&d);
    return n;
}

/* Random pictures with an empty rim in a mirror box: domains less holes, holes being domains of the other
 * phase but for the rim's. */
static void domains_less_holes(void **state) {
    (void)state;
    static const int n[3] = {30, 25, 1};
    static const double h[3] = {1, 1, 1};
    mt_grid *g = box(2, n, h, MT_MIRROR);
    double a[750];
    for (int seed = 0; seed < 50; seed++) {
        mt_random_fill(MT_RANDOM_UNIFORM, (uint64_t)seed, 0, 750, 0, 0, a);
        for (int i = 0; i < 750; i++) {
            a[i] = 0.9 * a[i] + 0.3;
            if (i % 30 == 0 || i % 30 == 29 || i / 30 == 0 || i / 30 == 24) a[i] = 0;
        }
        for (int full = 0; full < 2; full++) {
            mt_topology t;
            mt_topology_of(g, a, 0.5, true, full, &t);
            double holes = (double)domains(g, a, false, !full) - 1;
            check_close(t.euler, (double)domains(g, a, true, full) - holes, 0, 1e-9);
            check_close(t.euler_share, t.euler, 0, 1e-9); /* nothing touches a wall */
        }
    }
    mt_grid_unref(&g);
}

static double corner_ball(const double r[3]) {
    double x = r[0] + 15, y = r[1] + 15, z = r[2] + 15;
    return 12 - sqrt(x * x + y * y + z * z);
}

/* An eighth of a ball in a corner of mirrors: whole in the box, an eighth by its share. */
static void walls(void **state) {
    (void)state;
    static const int n[3] = {30, 30, 30};
    static const double h[3] = {1, 1, 1};
    mt_grid *g = box(3, n, h, MT_MIRROR);
    double *a = image(g, corner_ball, 0);
    mt_topology t;
    mt_topology_of(g, a, 0, true, false, &t);
    check_close(t.euler, 1, 0, 1e-9);
    check_close(t.euler_share, 0.125, 0, 1e-9);
    check_close(t.boundary, 4 * pi * 144 / 8, 0.01, 0);
    check_close(t.breadth, 3, 0.01, 0);
    mt_free(a);
    a = image(g, slab, 0); /* a plate in the box is no ring */
    mt_topology_of(g, a, 0, true, false, &t);
    check_close(t.euler, 1, 0, 1e-9);
    check_close(t.euler_share, 0, 0, 1e-9);
    mt_free(a);
    mt_grid_unref(&g);
}

static void same_topology(const mt_topology *a, const mt_topology *b, double times) {
    check_close(times * a->size, b->size, 1e-12, 0);
    check_close(times * a->boundary, b->boundary, 1e-12, 0);
    check_close(times * a->breadth, b->breadth, 1e-10, 1e-9);
    check_close(times * a->euler_share, b->euler_share, 0, 1e-9);
}

static void rolled_and_doubled(void **state) {
    (void)state;
    static const int n[3] = {6, 5, 7}, twice[3] = {12, 10, 14};
    static const double h[3] = {0.5, 1, 0.75};
    mt_grid *p = box(3, n, h, MT_PERIODIC), *m = box(3, n, h, MT_MIRROR), *d = box(3, twice, h, MT_PERIODIC);
    double a[210], rolled[210], doubled[1680];
    mt_random_fill(MT_RANDOM_UNIFORM, 4, 0, 210, 0, 0, a);
    for (int i = 0; i < 210; i++) {
        int x = (i % 6 + 4) % 6, y = (i / 6 % 5 + 2) % 5, z = (i / 30 + 5) % 7;
        rolled[i] = a[(z * 5 + y) * 6 + x];
    }
    for (int i = 0; i < 1680; i++) {
        int x = i % 12, y = i / 12 % 10, z = i / 120;
        x = x < 6 ? x : 11 - x, y = y < 5 ? y : 9 - y, z = z < 7 ? z : 13 - z;
        doubled[i] = a[(z * 5 + y) * 6 + x];
    }
    for (int full = 0; full < 2; full++) {
        mt_topology t, u, v, w;
        mt_topology_of(p, a, 0.1, true, full, &t);
        mt_topology_of(p, rolled, 0.1, true, full, &u);
        same_topology(&t, &u, 1);
        check_close(t.euler, u.euler, 0, 1e-9);
        mt_topology_of(m, a, 0.1, true, full, &v);
        mt_topology_of(d, doubled, 0.1, true, full, &w);
        same_topology(&v, &w, 8);
    }
    mt_grid_unref(&p), mt_grid_unref(&m), mt_grid_unref(&d);
}

static void lines(void **state) {
    (void)state;
    static const int n[3] = {9, 1, 1};
    static const double h[3] = {0.5, 1, 1}, a[9] = {1, 1, 0, 1, 0, 0, 1, 1, 1};
    for (int mirror = 0; mirror < 2; mirror++) {
        mt_grid *g = box(1, n, h, mirror ? MT_MIRROR : MT_PERIODIC);
        mt_topology t;
        mt_topology_of(g, a, 0.5, true, false, &t);
        check_close(t.size, 3, 1e-15, 0);
        check_close(t.boundary, 4, 1e-15, 0);
        check_close(t.euler, mirror ? 3 : 2, 0, 1e-12);
        check_close(t.euler_share, 2, 0, 1e-12);
        mt_grid_unref(&g);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(closed_forms), cmocka_unit_test(domains_less_holes),
        cmocka_unit_test(walls),        cmocka_unit_test(rolled_and_doubled),
        cmocka_unit_test(lines),
    };
    return cmocka_run_group_tests_name("measure_topology", tests, NULL, NULL);
}
