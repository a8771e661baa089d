/* Proved: units tile the grid and columns are described rightly, whatever the number of threads; sweeps with
 * several inputs and outputs, in place or not, compute what they should, bit for bit the same for 1, 2 and 3
 * threads; the lowest failing unit is the one reported; too many arrays are refused; failed allocations are
 * reported and leave nothing behind, also when buffers grow. The transforms themselves are proved in
 * test_spectrum.c. */
#include "core/space/sweep.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "tests/space/direct.h"

#define COUNT(a) (sizeof(a) / sizeof *(a))

/* More than one unit and more than one block also with the limits of a normal build. */
static const struct {
    int dim, n[3];
} shapes[] = {{1, {9001, 1, 1}}, {1, {12, 1, 1}},  {2, {30, 150, 1}}, {2, {101, 83, 1}}, {2, {1, 40, 1}},
              {2, {40, 1, 1}},   {3, {12, 10, 9}}, {3, {7, 1, 20}},   {3, {20, 22, 24}}};

typedef void (*visit)(int dim, const int n[3], unsigned walls);

static void each_shape(visit f) {
    for (size_t i = 0; i < COUNT(shapes); i++)
        for (unsigned walls = 0; walls < 1u << shapes[i].dim; walls++) f(shapes[i].dim, shapes[i].n, walls);
}

/* --- places --- */

typedef struct seen {
    const box *b;
    int *units, *cells; /* how often each was visited */
} seen;

static mt_status see_unit(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                          mt_error *err) {
    const seen *s = ctx;
    (void)in, (void)out;
    bool sane = u->index < mt_sweeper_units(s->b->sweeper) && u->n <= mt_sweeper_unit_cells(s->b->sweeper) &&
                u->n > 0 && u->first + u->n <= s->b->grid->cells && worker >= 0 && worker < 3 &&
                u->first == u->index * mt_sweeper_unit_cells(s->b->sweeper);
    if (!sane) return mt_fail(err, MT_EINPUT, "unit %zu", u->index);
    s->units[u->index]++;
    for (size_t i = 0; i < u->n; i++) s->cells[u->first + i]++;
    return MT_OK;
}

static void tiled(int dim, const int n[3], unsigned walls) {
    size_t units = 0;
    for (int threads = 1; threads <= 3; threads++) {
        box b;
        box_open(&b, dim, n, walls, threads);
        if (threads == 1) units = mt_sweeper_units(b.sweeper);
        assert_int_equal(mt_sweeper_units(b.sweeper), units);
        assert_int_equal(mt_sweeper_unit_cells(b.sweeper) % (b.grid->cells / (size_t)n[b.s->outer]), 0);
        seen s = {&b, mt_alloc(units, sizeof(int)), mt_alloc(b.grid->cells, sizeof(int))};
        check_ok(mt_sweep_rows(b.sweeper, 0, NULL, NULL, 0, NULL, NULL, see_unit, &s, &b.err), &b.err);
        for (size_t i = 0; i < units; i++) assert_int_equal(s.units[i], 1);
        for (size_t i = 0; i < b.grid->cells; i++) assert_int_equal(s.cells[i], 1);
        mt_free(s.units), mt_free(s.cells);
        box_close(&b);
    }
}

static void units_tile_the_grid(void **state) {
    (void)state;
    each_shape(tiled);
}

static mt_status see_column(void *ctx, const mt_column *c, double *const in[], double *const out[],
                            int worker, mt_error *err) {
    const seen *x = ctx;
    const mt_spectrum *s = x->b->s;
    double weight = 1;
    int m[3];
    (void)in, (void)out, (void)worker;
    mt_spectrum_column(s, c->index, m);
    bool sane = c->offset == c->index * s->stride && c->length == s->length && c->mode[s->outer] == 0;
    for (int a = 0; a < 3; a++) {
        if (a != s->outer) weight *= s->weight[a][m[a]];
        sane = sane && c->mode[a] == m[a] && c->k[a] == (a == s->outer ? 0 : s->k[a][m[a]]);
    }
    if (!sane || c->weight != weight) return mt_fail(err, MT_EINPUT, "column %zu", c->index);
    x->units[c->index]++;
    return MT_OK;
}

static void described(int dim, const int n[3], unsigned walls) {
    box b;
    box_open(&b, dim, n, walls, 2);
    seen s = {&b, mt_alloc(b.s->columns, sizeof(int)), NULL};
    check_ok(mt_sweep_columns(b.sweeper, 0, NULL, NULL, 0, NULL, NULL, see_column, &s, &b.err), &b.err);
    for (size_t j = 0; j < b.s->columns; j++) assert_int_equal(s.units[j], 1);
    mt_free(s.units);
    box_close(&b);
}

static void columns_are_described(void **state) {
    (void)state;
    each_shape(described);
}

static void accessors(void **state) {
    (void)state;
    const int n[3] = {6, 5, 1};
    box b;
    box_open(&b, 2, n, 0, 2);
    assert_ptr_equal(mt_sweeper_grid(b.sweeper), b.grid);
    assert_ptr_equal(mt_sweeper_pool(b.sweeper), b.pool);
    assert_ptr_equal(b.s->grid, b.grid);
    mt_sweeper *none = NULL;
    mt_sweeper_free(&none);
    box_close(&b);
}

/* --- an evaluation: three spectra in, two out, by way of two work arrays --- */

/* in: a, b, c -> a b, c - 2 a. The inputs are overwritten, which a body may do. */
static mt_status mix_cells(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                           mt_error *err) {
    (void)ctx, (void)worker, (void)err;
    for (size_t i = 0; i < u->n; i++) {
        out[0][i] = in[0][i] * in[1][i];
        out[1][i] = in[2][i] - 2 * in[0][i];
        in[0][i] = in[1][i] = in[2][i] = NAN;
    }
    return MT_OK;
}

typedef struct pieces {
    const mt_spectrum *s;
    double *from[3], *to[2];
} pieces;

static size_t column_doubles(const mt_spectrum *s) {
    return (size_t)s->length * (s->complex ? 2 : 1);
}

static mt_status put_three(void *ctx, const mt_column *c, double *const in[], double *const out[], int worker,
                           mt_error *err) {
    const pieces *p = ctx;
    (void)in, (void)worker, (void)err;
    for (int i = 0; i < 3; i++) memcpy(out[i], p->from[i] + c->offset, column_doubles(p->s) * sizeof(double));
    return MT_OK;
}

static mt_status take_two(void *ctx, const mt_column *c, double *const in[], double *const out[], int worker,
                          mt_error *err) {
    const pieces *p = ctx;
    (void)out, (void)worker, (void)err;
    for (int i = 0; i < 2; i++) {
        memcpy(p->to[i] + c->offset, in[i], column_doubles(p->s) * sizeof(double));
        memset(in[i], 0xff, column_doubles(p->s) * sizeof(double));
    }
    return MT_OK;
}

/* a is odd along all mirror axes, b and c are even there, c - 2 a is neither: read as even, to have a rule.
 */
static void evaluate(box *b, unsigned walls, pieces *p, bool in_place) {
    double *in[3] = {box_work(b), box_work(b), box_work(b)}, *apart[2] = {box_work(b), box_work(b)};
    double *same[2] = {in[1], in[0]}; /* crosswise: output 0 over input 1 */
    double *const *out = in_place ? same : apart;
    const mt_parities in_parity[3] = {walls, 0, 0}, out_parity[2] = {walls, 0};
    mt_sweeper *w = b->sweeper;
    check_ok(mt_sweep_columns(w, 0, NULL, NULL, 3, in, in_parity, put_three, p, &b->err), &b->err);
    check_ok(mt_sweep_rows(w, 3, in, in_parity, 2, out, out_parity, mix_cells, NULL, &b->err), &b->err);
    check_ok(mt_sweep_columns(w, 2, out, out_parity, 0, NULL, NULL, take_two, p, &b->err), &b->err);
    for (int i = 0; i < 3; i++) mt_free(in[i]);
    mt_free(apart[0]), mt_free(apart[1]);
}

static void open_pieces(const box *b, pieces *p) {
    *p = (pieces){.s = b->s};
    for (unsigned i = 0; i < 3; i++) {
        p->from[i] = box_spectral(b);
        scatter_values(p->from[i], b->s->doubles, 10 + i);
    }
    for (int i = 0; i < 2; i++) p->to[i] = box_spectral(b);
}

static void close_pieces(pieces *p) {
    for (int i = 0; i < 3; i++) mt_free(p->from[i]);
    for (int i = 0; i < 2; i++) mt_free(p->to[i]);
}

/* The same by whole transforms and a loop over cells. */
static void evaluate_plainly(box *b, unsigned walls, const pieces *p, double *to[2]) {
    double *u[3];
    for (int i = 0; i < 3; i++) {
        u[i] = box_field(b);
        box_inverse(b, p->from[i], i == 0 ? walls : 0, u[i]);
    }
    for (size_t i = 0; i < b->grid->cells; i++) {
        double first = u[0][i] * u[1][i];
        u[1][i] = u[2][i] - 2 * u[0][i];
        u[0][i] = first;
    }
    box_forward(b, u[0], walls, to[0]);
    box_forward(b, u[1], 0, to[1]);
    for (int i = 0; i < 3; i++) mt_free(u[i]);
}

static void evaluated(int dim, const int n[3], unsigned walls) {
    double *plain[2] = {NULL, NULL};
    for (int threads = 1; threads <= 3; threads++)
        for (int in_place = 0; in_place < 2; in_place++) {
            box b;
            pieces p;
            box_open(&b, dim, n, walls, threads);
            open_pieces(&b, &p);
            evaluate(&b, walls, &p, in_place);
            if (threads == 1 && !in_place) {
                for (int i = 0; i < 2; i++) plain[i] = box_spectral(&b);
                evaluate_plainly(&b, walls, &p, plain);
            }
            for (int i = 0; i < 2; i++) assert_memory_equal(p.to[i], plain[i], b.s->doubles * sizeof(double));
            close_pieces(&p);
            box_close(&b);
        }
    mt_free(plain[0]), mt_free(plain[1]);
}

/* The same lines go through the same plans, so even the plain way gives the same bits. */
static void several_arrays_any_threads_same_bits(void **state) {
    (void)state;
    each_shape(evaluated);
}

static mt_status copy_column(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    (void)worker, (void)err;
    memcpy(out[0], in[0], column_doubles(ctx) * sizeof(double));
    (void)c;
    return MT_OK;
}

static mt_status copy_cells(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                            mt_error *err) {
    (void)ctx, (void)worker, (void)err;
    memcpy(out[0], in[0], u->n * sizeof(double));
    return MT_OK;
}

static void turned(int dim, const int n[3], unsigned walls) {
    box b;
    mt_parities parity = walls;
    box_open(&b, dim, n, walls, 2);
    double *u = box_field(&b), *modes = box_spectral(&b), *again = box_spectral(&b), *work = box_work(&b);
    scatter_values(u, b.grid->cells, 20);
    check_ok(mt_transform_forward(b.sweeper, u, parity, modes, work, &b.err), &b.err);
    for (int turn = 0; turn < 3; turn++) {
        check_ok(mt_sweep_columns(b.sweeper, 1, &work, &parity, 1, &work, &parity, copy_column, (void *)b.s,
                                  &b.err),
                 &b.err);
        check_ok(mt_sweep_rows(b.sweeper, 1, &work, &parity, 1, &work, &parity, copy_cells, NULL, &b.err),
                 &b.err);
    }
    pieces p = {.s = b.s, .to = {again, again}};
    double *const both[2] = {work, work};
    const mt_parities parities[2] = {parity, parity};
    check_ok(mt_sweep_columns(b.sweeper, 2, both, parities, 0, NULL, NULL, take_two, &p, &b.err), &b.err);
    check_same_modes(b.s, again, modes, 1e-14);
    mt_free(u), mt_free(modes), mt_free(again), mt_free(work);
    box_close(&b);
}

static void bodies_that_copy_change_nothing(void **state) {
    (void)state;
    each_shape(turned);
}

/* --- failures --- */

static mt_status stop_unit(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                           mt_error *err) {
    (void)in, (void)out, (void)worker;
    return u->index >= *(size_t *)ctx ? mt_fail(err, MT_ENUMERIC, "number %zu", u->index) : MT_OK;
}

static mt_status stop_column(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    (void)in, (void)out, (void)worker;
    return c->index >= *(size_t *)ctx ? mt_fail(err, MT_ENUMERIC, "number %zu", c->index) : MT_OK;
}

static void lowest_failure_is_reported(void **state) {
    (void)state;
    const int n[3] = {64, 900, 1};
    for (int threads = 1; threads <= 3; threads++) {
        box b;
        char text[40];
        box_open(&b, 2, n, 0, threads);
        size_t unit = mt_sweeper_units(b.sweeper) / 2, column = b.s->columns / 2 + 1;
        snprintf(text, sizeof text, "number %zu", unit);
        assert_int_equal(mt_sweep_rows(b.sweeper, 0, NULL, NULL, 0, NULL, NULL, stop_unit, &unit, &b.err),
                         MT_ENUMERIC);
        assert_string_equal(b.err.text, text);
        snprintf(text, sizeof text, "number %zu", column);
        assert_int_equal(
            mt_sweep_columns(b.sweeper, 0, NULL, NULL, 0, NULL, NULL, stop_column, &column, &b.err),
            MT_ENUMERIC);
        assert_string_equal(b.err.text, text);
        box_close(&b);
    }
}

static void too_many_arrays(void **state) {
    (void)state;
    const int n[3] = {6, 5, 1};
    size_t never = SIZE_MAX;
    double *arrays[257];
    mt_parities even[257] = {0};
    box b;
    box_open(&b, 2, n, 0, 1);
    for (int i = 0; i < 257; i++) arrays[i] = NULL;
    assert_int_equal(mt_sweep_rows(b.sweeper, 257, arrays, even, 0, NULL, NULL, stop_unit, &never, &b.err),
                     MT_EUNSUPPORTED);
    assert_int_equal(
        mt_sweep_columns(b.sweeper, 0, NULL, NULL, 257, arrays, even, stop_column, &never, &b.err),
        MT_EUNSUPPORTED);
    box_close(&b);
}

typedef struct making {
    mt_grid *grid;
    mt_pool *pool;
} making;

/* Makes a sweeper, transforms, then sweeps with more arrays, so that buffers grow. */
static mt_status make_and_sweep(void *ctx, mt_error *err) {
    const making *m = ctx;
    const mt_parities even[2] = {0, 0};
    mt_sweeper *w = NULL;
    double *u = NULL, *modes = NULL, *work[2] = {NULL, NULL};
    size_t never = SIZE_MAX;
    mt_status st = mt_sweeper_new(&w, m->grid, m->pool, err);
    if (!st) st = mt_new(&u, m->grid->cells, sizeof *u, "a field", err);
    if (!st) st = mt_new(&modes, mt_sweeper_spectrum(w)->doubles, sizeof *modes, "a spectrum", err);
    for (int i = 0; i < 2 && !st; i++)
        st = mt_new(&work[i], mt_sweeper_work_doubles(w), sizeof *u, "work", err);
    if (!st) st = mt_transform_forward(w, u, 0, modes, work[0], err);
    if (!st) st = mt_transform_inverse(w, modes, 0, u, work[0], err);
    if (!st) st = mt_sweep_rows(w, 2, work, even, 2, work, even, stop_unit, &never, err);
    if (!st) st = mt_sweep_columns(w, 2, work, even, 2, work, even, stop_column, &never, err);
    mt_free(u), mt_free(modes), mt_free(work[0]), mt_free(work[1]);
    mt_sweeper_free(&w);
    return st;
}

static void allocation(void **state) {
    (void)state;
    const int n[3] = {4, 3, 5};
    for (unsigned walls = 0; walls < 8; walls += 3) {
        box b;
        box_open(&b, 3, n, walls, 2);
        making m = {b.grid, b.pool};
        check_allocation_sweep(make_and_sweep, &m);
        assert_int_equal(b.grid->refs, 2); /* the box and its sweeper */
        box_close(&b);
    }
}

int main(void) {
    const struct CMUnitTest tests[] = {cmocka_unit_test(units_tile_the_grid),
                                       cmocka_unit_test(columns_are_described),
                                       cmocka_unit_test(accessors),
                                       cmocka_unit_test(several_arrays_any_threads_same_bits),
                                       cmocka_unit_test(bodies_that_copy_change_nothing),
                                       cmocka_unit_test(lowest_failure_is_reported),
                                       cmocka_unit_test(too_many_arrays),
                                       cmocka_unit_test(allocation)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
