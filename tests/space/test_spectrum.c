/* Proved: the layout of a spectrum; that whole transforms agree with direct sums for every mixture of walls
 * and parities in 1, 2 and 3 dimensions with even, odd, prime and single-cell sizes, both ways; linearity,
 * impulse, shift, round trip after projection, Parseval with the weights, derivatives of known waves, and
 * that what is projected out is stored as 0 and not listened to. */
#include "core/space/spectrum.h"

#include <math.h>
#include <string.h>

#include "tests/space/direct.h"

static const double pi = 3.14159265358979323846;

typedef void (*visit)(box *b, mt_parities parity);

/* Calls f for every mixture of walls and every parity they allow. */
static void each_wall_and_parity(int dim, const int n[3], visit f) {
    for (unsigned walls = 0; walls < 1u << dim; walls++) {
        box b;
        box_open(&b, dim, n, walls, 1);
        for (mt_parities parity = 0; parity <= walls; parity++)
            if ((parity & ~walls) == 0) f(&b, parity);
        box_close(&b);
    }
}

static const int lines[][3] = {{1}, {2}, {3}, {4}, {5}, {6}, {7}, {8}, {13}, {16}, {30}, {64}, {101}};
static const int planes[][3] = {{1, 1}, {1, 6}, {6, 1},  {2, 2},  {2, 5},   {3, 4},  {4, 3},
                                {5, 7}, {8, 8}, {7, 16}, {12, 9}, {16, 10}, {90, 97}};
static const int boxes[][3] = {{1, 1, 1}, {1, 1, 4}, {1, 4, 1}, {5, 1, 1}, {1, 4, 5}, {4, 1, 5},   {4, 5, 1},
                               {2, 2, 2}, {3, 5, 7}, {4, 6, 8}, {5, 4, 6}, {6, 7, 4}, {18, 20, 22}};

#define COUNT(a) (sizeof(a) / sizeof *(a))

static void each_size(visit f) {
    for (size_t i = 0; i < COUNT(lines); i++) each_wall_and_parity(1, lines[i], f);
    for (size_t i = 0; i < COUNT(planes); i++) each_wall_and_parity(2, planes[i], f);
    for (size_t i = 0; i < COUNT(boxes); i++) each_wall_and_parity(3, boxes[i], f);
}

static void forward_agrees(box *b, mt_parities parity) {
    double *u = box_field(b), *found = box_spectral(b), *expected = box_spectral(b);
    scatter_values(u, b->grid->cells, 1 + parity);
    scatter_values(found, b->s->doubles, 99); /* what was there before must not matter */
    box_forward(b, u, parity, found);
    direct_forward(b->s, u, parity, expected);
    check_same_modes(b->s, found, expected, 2e-15);
    mt_free(u), mt_free(found), mt_free(expected);
}

static void forward_is_the_direct_sum(void **state) {
    (void)state;
    each_size(forward_agrees);
}

/* Values at projected-out places are random too: they must not be listened to. */
static void inverse_agrees(box *b, mt_parities parity) {
    double *u = box_spectral(b), *found = box_field(b), *expected = box_field(b);
    scatter_values(u, b->s->doubles, 2 + parity);
    scatter_values(found, b->grid->cells, 99);
    box_inverse(b, u, parity, found);
    direct_inverse(b->s, u, parity, expected);
    check_same_values(b->grid->cells, found, expected, 2e-15 * (1 + 10 * sqrt((double)b->grid->cells)));
    mt_free(u), mt_free(found), mt_free(expected);
}

static void inverse_is_the_direct_sum(void **state) {
    (void)state;
    each_size(inverse_agrees);
}

static void zero_where_dropped(box *b, mt_parities parity) {
    double *u = box_field(b), *modes = box_spectral(b);
    int m[3];
    scatter_values(u, b->grid->cells, 3);
    box_forward(b, u, parity, modes);
    first_mode(m);
    do {
        if (!mode_dropped(b->s, parity, m)) continue;
        const double *at = modes + mode_offset(b->s, m);
        check_close(at[0], 0, 0, 0);
        if (b->s->complex) check_close(at[1], 0, 0, 0);
    } while (next_mode(b->s, m));
    mt_free(u), mt_free(modes);
}

static void dropped_modes_are_exactly_zero(void **state) {
    (void)state;
    each_size(zero_where_dropped);
}

/* The first pass projects; after that nothing may change. Where nothing is to be projected out, nothing may
 * change at once. */
static void there_and_back(box *b, mt_parities parity) {
    size_t cells = b->grid->cells;
    double *u = box_field(b), *v = box_field(b), *w = box_field(b), *modes = box_spectral(b);
    bool complete = parity == 0;
    for (int a = 0; a < 3; a++)
        if (b->grid->wall[a] == MT_PERIODIC && b->grid->n[a] % 2 == 0) complete = false;
    scatter_values(u, cells, 4);
    box_forward(b, u, parity, modes);
    box_inverse(b, modes, parity, v);
    box_forward(b, v, parity, modes);
    box_inverse(b, modes, parity, w);
    check_same_values(cells, w, v, 1e-14);
    if (complete) check_same_values(cells, v, u, 1e-14);
    mt_free(u), mt_free(v), mt_free(w), mt_free(modes);
}

static void round_trip(void **state) {
    (void)state;
    each_size(there_and_back);
}

static double power(const mt_spectrum *s, const double *modes) {
    double sum = 0;
    int m[3];
    first_mode(m);
    do {
        const double *u = modes + mode_offset(s, m);
        double w = s->weight[0][m[0]] * s->weight[1][m[1]] * s->weight[2][m[2]];
        sum += w * (u[0] * u[0] + (s->complex ? u[1] * u[1] : 0));
    } while (next_mode(s, m));
    return sum;
}

static void weights_give_the_mean_square(box *b, mt_parities parity) {
    double *u = box_field(b), *modes = box_spectral(b), sum = 0;
    scatter_values(u, b->grid->cells, 5);
    box_forward(b, u, parity, modes);
    box_inverse(b, modes, parity, u); /* projected */
    for (size_t i = 0; i < b->grid->cells; i++) sum += u[i] * u[i];
    check_close(power(b->s, modes), sum / (double)b->grid->cells, 1e-13, 1e-28);
    mt_free(u), mt_free(modes);
}

static void parseval(void **state) {
    (void)state;
    each_size(weights_give_the_mean_square);
}

static void sum_of_two(box *b, mt_parities parity) {
    size_t cells = b->grid->cells, doubles = b->s->doubles;
    double *u = box_field(b), *v = box_field(b), *a = box_spectral(b), *c = box_spectral(b),
           *d = box_spectral(b);
    scatter_values(u, cells, 6);
    scatter_values(v, cells, 7);
    box_forward(b, u, parity, a);
    box_forward(b, v, parity, c);
    for (size_t i = 0; i < cells; i++) u[i] = 3 * u[i] - 0.5 * v[i];
    box_forward(b, u, parity, d);
    for (size_t i = 0; i < doubles; i++) a[i] = 3 * a[i] - 0.5 * c[i];
    check_same_modes(b->s, d, a, 1e-14);
    mt_free(u), mt_free(v), mt_free(a), mt_free(c), mt_free(d);
}

static void linearity(void **state) {
    (void)state;
    each_size(sum_of_two);
}

/* A one in cell p of an all-periodic box: every mode is exp(-i k x_p) / N. */
static void impulse(void **state) {
    (void)state;
    const int n[3] = {6, 5, 7}, p[3] = {4, 2, 5};
    box b;
    int m[3];
    box_open(&b, 3, n, 0, 1);
    double *u = box_field(&b), *modes = box_spectral(&b);
    u[(p[2] * n[1] + p[1]) * n[0] + p[0]] = 1;
    box_forward(&b, u, 0, modes);
    first_mode(m);
    do {
        if (mode_dropped(b.s, 0, m)) continue;
        double angle = 0, *at = modes + mode_offset(b.s, m);
        for (int a = 0; a < 3; a++) angle += b.s->k[a][m[a]] * p[a] * b.grid->h[a];
        check_close(at[0], cos(angle) / 210, 0, 1e-16);
        check_close(at[1], -sin(angle) / 210, 0, 1e-16);
    } while (next_mode(b.s, m));
    mt_free(u), mt_free(modes);
    box_close(&b);
}

/* Moving a field by s cells along y multiplies mode m by exp(-i k_y s h). */
static void shift(void **state) {
    (void)state;
    const int n[3] = {9, 8, 1}, s = 3;
    box b;
    int m[3];
    box_open(&b, 2, n, 1, 1); /* mirror along x */
    double *u = box_field(&b), *v = box_field(&b), *a = box_spectral(&b), *c = box_spectral(&b);
    scatter_values(u, b.grid->cells, 8);
    for (int y = 0; y < 8; y++)
        for (int x = 0; x < 9; x++) v[(y + s) % 8 * 9 + x] = u[y * 9 + x];
    box_forward(&b, u, 0, a);
    box_forward(&b, v, 0, c);
    first_mode(m);
    do {
        size_t at = mode_offset(b.s, m);
        double angle = -b.s->k[1][m[1]] * s * b.grid->h[1];
        check_close(c[at], a[at] * cos(angle) - a[at + 1] * sin(angle), 0, 1e-15);
        check_close(c[at + 1], a[at] * sin(angle) + a[at + 1] * cos(angle), 0, 1e-15);
    } while (next_mode(b.s, m));
    mt_free(u), mt_free(v), mt_free(a), mt_free(c);
    box_close(&b);
}

/* d/dx in the spectrum: i k on a periodic axis; on a mirror axis -k turns cosines into sines, +k sines into
 * cosines. */
static void differentiate(const mt_spectrum *s, int axis, bool was_odd, double *modes) {
    int m[3];
    first_mode(m);
    do {
        double k = s->k[axis][m[axis]], *u = modes + mode_offset(s, m);
        if (s->grid->wall[axis] == MT_MIRROR) {
            double factor = was_odd ? k : -k;
            u[0] *= factor;
            if (s->complex) u[1] *= factor;
        } else {
            double re = u[0];
            u[0] = -k * u[1];
            u[1] = k * re;
        }
    } while (next_mode(s, m));
}

/* A product of one wave per axis; with differentiated == a its derivative along a. */
static double wave(const mt_grid *g, mt_parities parity, int differentiated, const int cell[3]) {
    double value = 1;
    for (int a = 0; a < g->dim; a++) {
        bool mirror = g->wall[a] == MT_MIRROR, odd = (parity >> a) & 1;
        double length = g->n[a] * g->h[a], k = mirror ? pi * 2 / length : 2 * pi * 2 / length;
        double x = mirror ? (cell[a] + 0.5) * g->h[a] : cell[a] * g->h[a] + 0.3;
        bool d = differentiated == a;
        value *= mirror && odd ? (d ? k * cos(k * x) : sin(k * x)) : (d ? -k * sin(k * x) : cos(k * x));
    }
    return value;
}

static void fill_wave(const mt_grid *g, mt_parities parity, int differentiated, double *u) {
    for (size_t i = 0; i < g->cells; i++) {
        size_t row = i / (size_t)g->n[0];
        const int cell[3] = {(int)(i % (size_t)g->n[0]), (int)(row % (size_t)g->n[1]),
                             (int)(row / (size_t)g->n[1])};
        u[i] = wave(g, parity, differentiated, cell);
    }
}

static void slopes(box *b, mt_parities parity) {
    double *u = box_field(b), *expected = box_field(b), *modes = box_spectral(b);
    for (int a = 0; a < b->grid->dim; a++) {
        bool mirror = b->grid->wall[a] == MT_MIRROR, odd = (parity >> a) & 1;
        fill_wave(b->grid, parity, -1, u);
        fill_wave(b->grid, parity, a, expected);
        box_forward(b, u, parity, modes);
        differentiate(b->s, a, odd, modes);
        box_inverse(b, modes, mirror ? parity ^ (1u << a) : parity, u);
        check_same_values(b->grid->cells, u, expected, 2e-14);
    }
    mt_free(u), mt_free(expected), mt_free(modes);
}

static void derivative_of_a_wave(void **state) {
    (void)state;
    const int n1[3] = {12}, n2[3] = {9, 10}, n3[3] = {8, 7, 6};
    each_wall_and_parity(1, n1, slopes);
    each_wall_and_parity(2, n2, slopes);
    each_wall_and_parity(3, n3, slopes);
}

/* What symmetrising takes away is invisible in real space; it changes spectra of fields by rounding only, and
 * nothing the second time. */
static void symmetrised(box *b, mt_parities parity) {
    size_t cells = b->grid->cells, bytes = b->s->doubles * sizeof(double);
    double *u = box_field(b), *v = box_field(b), *a = box_spectral(b), *c = box_spectral(b);
    scatter_values(u, cells, 9);
    box_forward(b, u, parity, a);
    memcpy(c, a, bytes);
    mt_spectrum_symmetrise(b->s, c);
    check_same_modes(b->s, c, a, 1e-15);
    scatter_values(a, b->s->doubles, 10);
    memcpy(c, a, bytes);
    mt_spectrum_symmetrise(b->s, c);
    box_inverse(b, a, parity, u);
    box_inverse(b, c, parity, v);
    check_same_values(cells, v, u, 1e-14 * (1 + sqrt((double)cells)));
    box_forward(b, v, parity,
                a); /* and what is left is the spectrum of a field, but for what is projected out */
    int m[3];
    first_mode(m);
    do {
        size_t at = mode_offset(b->s, m);
        if (mode_dropped(b->s, parity, m)) continue;
        check_close(c[at], a[at], 0, 1e-13);
        if (b->s->complex) check_close(c[at + 1], a[at + 1], 0, 1e-13);
    } while (next_mode(b->s, m));
    memcpy(a, c, bytes);
    mt_spectrum_symmetrise(b->s, c);
    check_same_modes(b->s, c, a, 0);
    mt_free(u), mt_free(v), mt_free(a), mt_free(c);
}

static void symmetrising(void **state) {
    (void)state;
    each_size(symmetrised);
}

static void check_layout(int dim, const int n[3], unsigned walls, int outer, int half, bool complex) {
    box b;
    box_open(&b, dim, n, walls, 1);
    const mt_spectrum *s = b.s;
    size_t columns = 1;
    assert_int_equal(s->outer, outer);
    assert_int_equal(s->half, half);
    assert_int_equal(s->complex, complex);
    for (int a = 0; a < 3; a++) {
        assert_int_equal(s->modes[a], a == half ? b.grid->n[a] / 2 + 1 : b.grid->n[a]);
        if (a != outer) columns *= (size_t)s->modes[a];
        for (int m = 0; m < s->modes[a]; m++) check_close(s->k[a][m], mt_grid_wavenumber(b.grid, a, m), 0, 0);
    }
    assert_int_equal(s->columns, columns);
    assert_int_equal(s->length, s->modes[outer]);
    assert_int_equal(s->stride % 8, 0);
    assert_true(s->stride >= (size_t)s->length * (complex ? 2 : 1));
    assert_int_equal(s->doubles, columns * s->stride);
    box_close(&b);
}

static void layout(void **state) {
    (void)state;
    const int n[3] = {6, 5, 4}, flat[3] = {6, 5, 1}, line[3] = {6, 1, 1}, tall[3] = {1, 1, 6},
              one[3] = {1, 1, 1};
    check_layout(3, n, 0, 2, 0, true);
    check_layout(3, n, 1, 2, 1, true);
    check_layout(3, n, 3, 2, 2, true);
    check_layout(3, n, 7, 2, -1, false);
    check_layout(2, n, 0, 1, 0, true);
    check_layout(2, n, 1, 1, 1, true);
    check_layout(2, n, 2, 1, 0, true);
    check_layout(3, flat, 0, 1, 0, true);
    check_layout(1, n, 0, 0, 0, true);
    check_layout(1, n, 1, 0, -1, false);
    check_layout(3, line, 0, 0, 0, true);
    check_layout(3, line, 1, 0, -1, false); /* periodic axes of one cell have nothing to transform */
    check_layout(3, tall, 0, 2, 2, true);
    check_layout(3, one, 0, 0, -1, false);
}

static void columns_number_the_inner_modes(void **state) {
    (void)state;
    const int n[3] = {6, 5, 3};
    int m[3], found[3];
    box b;
    box_open(&b, 3, n, 0, 1);
    first_mode(m);
    do {
        mt_spectrum_column(b.s, mode_offset(b.s, m) / b.s->stride, found);
        assert_int_equal(found[0], m[0]);
        assert_int_equal(found[1], m[1]);
        assert_int_equal(found[2], 0);
    } while (next_mode(b.s, m));
    box_close(&b);
}

int main(void) {
    const struct CMUnitTest tests[] = {cmocka_unit_test(layout),
                                       cmocka_unit_test(columns_number_the_inner_modes),
                                       cmocka_unit_test(forward_is_the_direct_sum),
                                       cmocka_unit_test(inverse_is_the_direct_sum),
                                       cmocka_unit_test(dropped_modes_are_exactly_zero),
                                       cmocka_unit_test(round_trip),
                                       cmocka_unit_test(parseval),
                                       cmocka_unit_test(linearity),
                                       cmocka_unit_test(impulse),
                                       cmocka_unit_test(shift),
                                       cmocka_unit_test(derivative_of_a_wave),
                                       cmocka_unit_test(symmetrising)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
