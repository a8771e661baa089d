#include "tests/space/direct.h"

#include <complex.h>
#include <math.h>

#undef complex /* the spectrum has a field of that name */

typedef long double _Complex value;

void box_open(box *b, int dim, const int n[3], unsigned walls, int threads) {
    const double h[3] = {0.5, 0.75, 1.25};
    mt_wall wall[3];
    *b = (box){0};
    for (int a = 0; a < 3; a++) wall[a] = (walls >> a) & 1 ? MT_MIRROR : MT_PERIODIC;
    check_ok(mt_grid_new(&b->grid, dim, n, h, wall, &b->err), &b->err);
    if (threads > 1) check_ok(mt_pool_new(&b->pool, threads, &b->err), &b->err);
    check_ok(mt_sweeper_new(&b->sweeper, b->grid, b->pool, &b->err), &b->err);
    b->s = mt_sweeper_spectrum(b->sweeper);
}

void box_close(box *b) {
    mt_sweeper_free(&b->sweeper);
    mt_pool_free(&b->pool);
    mt_grid_unref(&b->grid);
}

static double *zeros(size_t n) {
    double *a = mt_alloc(n, sizeof *a);
    assert_non_null(a);
    return a;
}
double *box_field(const box *b) {
    return zeros(b->grid->cells);
}
double *box_spectral(const box *b) {
    return zeros(b->s->doubles);
}
double *box_work(const box *b) {
    return zeros(mt_sweeper_work_doubles(b->sweeper));
}

void box_forward(box *b, const double *field, mt_parities parity, double *spectral) {
    double *work = box_work(b);
    check_ok(mt_transform_forward(b->sweeper, field, parity, spectral, work, &b->err), &b->err);
    mt_free(work);
}

void box_inverse(box *b, const double *spectral, mt_parities parity, double *field) {
    double *work = box_work(b);
    check_ok(mt_transform_inverse(b->sweeper, spectral, parity, field, work, &b->err), &b->err);
    mt_free(work);
}

void scatter_values(double *a, size_t n, unsigned seed) {
    uint64_t x = seed * UINT64_C(0x9E3779B97F4A7C15) + 1;
    for (size_t i = 0; i < n; i++) { /* the 64-bit linear congruence of Knuth, TAOCP 2, 3.3.4 table 1 */
        x = x * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        a[i] = (double)(x >> 11) * 0x1p-52 - 1;
    }
}

size_t mode_offset(const mt_spectrum *s, const int m[3]) {
    size_t column = 0;
    for (int a = 2; a >= 0; a--)
        if (a != s->outer) column = column * (size_t)s->modes[a] + (size_t)m[a];
    return column * s->stride + (size_t)m[s->outer] * (s->complex ? 2 : 1);
}

bool mode_dropped(const mt_spectrum *s, mt_parities parity, const int m[3]) {
    for (int a = 0; a < 3; a++) {
        int n = s->grid->n[a];
        if (s->grid->wall[a] == MT_MIRROR ? ((parity >> a) & 1) && m[a] == 0 : n % 2 == 0 && m[a] == n / 2)
            return true;
    }
    return false;
}

void first_mode(int m[3]) {
    m[0] = m[1] = m[2] = 0;
}

bool next_mode(const mt_spectrum *s, int m[3]) {
    for (int a = 0; a < 3; a++) {
        if (++m[a] < s->modes[a]) return true;
        m[a] = 0;
    }
    return false;
}

/* cos and sin of 2 pi i / (4 n): every angle of both kinds of axis is a multiple of that, reduced exactly in
 * integers. */
typedef struct circle {
    int n;
    long double *cos, *sin;
} circle;

static circle circle_new(int n) {
    const long double pi = 3.141592653589793238462643383279502884L;
    circle c = {n, mt_alloc((size_t)(4 * n), sizeof *c.cos), mt_alloc((size_t)(4 * n), sizeof *c.sin)};
    assert_true(c.cos && c.sin);
    for (int i = 0; i < 4 * n; i++) {
        c.cos[i] = cosl(pi * i / (2 * n));
        c.sin[i] = sinl(pi * i / (2 * n));
    }
    return c;
}

static void circle_free(circle *c) {
    mt_free(c->cos);
    mt_free(c->sin);
}

typedef struct axis {
    circle c;
    bool mirror, odd;
} axis;

/* The basis function of mode m at cell j. */
static value basis(const axis *x, int m, int j) {
    int n = x->c.n, angle = x->mirror ? m * (2 * j + 1) % (4 * n) : 4 * (m * j % n);
    if (!x->mirror) return x->c.cos[angle] + I * x->c.sin[angle];
    return x->odd ? x->c.sin[angle] : x->c.cos[angle];
}

/* What makes the sum over cells of conj(basis) the coefficient; 0 for what is projected out. */
static long double factor(const axis *x, int m) {
    int n = x->c.n;
    if (x->mirror) return m > 0 ? 2.0L / n : x->odd ? 0 : 1.0L / n;
    return 2 * m == n ? 0 : 1.0L / n;
}

static void line_forward(const axis *x, value *line, value *copy) {
    for (int j = 0; j < x->c.n; j++) copy[j] = line[j];
    for (int m = 0; m < x->c.n; m++) {
        value sum = 0;
        for (int j = 0; j < x->c.n; j++) sum += copy[j] * conjl(basis(x, m, j));
        line[m] = factor(x, m) * sum;
    }
}

static void line_inverse(const axis *x, value *line, value *copy) {
    for (int m = 0; m < x->c.n; m++) copy[m] = factor(x, m) != 0 ? line[m] : 0;
    for (int j = 0; j < x->c.n; j++) {
        value sum = 0;
        for (int m = 0; m < x->c.n; m++) sum += copy[m] * basis(x, m, j);
        line[j] = sum;
    }
}

static void along(const mt_grid *g, int a, bool odd, value *all,
                  void (*line)(const axis *, value *, value *)) {
    int n = g->n[a], step = a == 0 ? 1 : a == 1 ? g->n[0] : g->n[0] * g->n[1];
    axis x = {circle_new(n), g->wall[a] == MT_MIRROR, odd};
    value *one = mt_alloc(2 * (size_t)n, sizeof *one);
    assert_non_null(one);
    for (size_t i = 0; i < g->cells; i++) {
        if ((int)(i / (size_t)step) % n != 0) continue;
        for (int j = 0; j < n; j++) one[j] = all[i + (size_t)(j * step)];
        line(&x, one, one + n);
        for (int j = 0; j < n; j++) all[i + (size_t)(j * step)] = one[j];
    }
    mt_free(one);
    circle_free(&x.c);
}

static size_t cell_of(const mt_grid *g, const int m[3]) {
    return ((size_t)m[2] * (size_t)g->n[1] + (size_t)m[1]) * (size_t)g->n[0] + (size_t)m[0];
}

void direct_forward(const mt_spectrum *s, const double *field, mt_parities parity, double *spectral) {
    const mt_grid *g = s->grid;
    value *all = mt_alloc(g->cells, sizeof *all);
    int m[3];
    assert_non_null(all);
    for (size_t i = 0; i < g->cells; i++) all[i] = field[i];
    for (int a = 0; a < 3; a++) along(g, a, (parity >> a) & 1, all, line_forward);
    first_mode(m);
    do {
        double *to = spectral + mode_offset(s, m);
        to[0] = (double)creall(all[cell_of(g, m)]);
        if (s->complex) to[1] = (double)cimagl(all[cell_of(g, m)]);
    } while (next_mode(s, m));
    mt_free(all);
}

/* The modes that are not stored are the conjugates of stored ones, so the field is the real part of the sum
 * over the stored ones with weight 2 above mode 0 of the half axis. */
void direct_inverse(const mt_spectrum *s, const double *spectral, mt_parities parity, double *field) {
    const mt_grid *g = s->grid;
    value *all = mt_alloc(g->cells, sizeof *all);
    int m[3];
    assert_non_null(all);
    first_mode(m);
    do {
        const double *from = spectral + mode_offset(s, m);
        value u = from[0] + (s->complex ? I * from[1] : 0);
        all[cell_of(g, m)] = s->half >= 0 && m[s->half] > 0 ? 2 * u : u;
    } while (next_mode(s, m));
    for (int a = 0; a < 3; a++) along(g, a, (parity >> a) & 1, all, line_inverse);
    for (size_t i = 0; i < g->cells; i++) field[i] = (double)creall(all[i]);
    mt_free(all);
}

void check_same_modes(const mt_spectrum *s, const double *found, const double *expected, double atol) {
    int m[3];
    first_mode(m);
    do {
        size_t at = mode_offset(s, m);
        for (size_t i = at; i < at + (s->complex ? 2 : 1); i++) check_close(found[i], expected[i], 0, atol);
    } while (next_mode(s, m));
}

void check_same_values(size_t n, const double *found, const double *expected, double atol) {
    for (size_t i = 0; i < n; i++) check_close(found[i], expected[i], 0, atol);
}
