/* Proved here: transforms agree with direct sums in long double for every mixture of walls and parities, 1-D
 * to 3-D, odd, even, prime sizes and single cells; round trips; Parseval's theorem with the weights;
 * derivatives of known waves; sweeps with several arrays, in place; the same bits for 1, 2 and 3 threads;
 * symmetrised spectra; grid errors; no leaks. */
#include "tests/support.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/base/random.h"
#include "core/space/sweep.h"

typedef long double real;
static const real pi = 3.14159265358979323846264338327950288L;

static double noise_at(size_t i) {
    double v;
    mt_random_fill(MT_RANDOM_UNIFORM, 5, i, 1, 0, 0, &v);
    return v;
}

/* Coefficient of one mode by direct sums, separable over the axes. */
static void direct_mode(const mt_grid *g, const double *a, const int mode[3], mt_parities parity, real *re,
                        real *im) {
    *re = *im = 0;
    size_t cell = 0;
    for (int z = 0; z < g->n[2]; z++)
        for (int y = 0; y < g->n[1]; y++)
            for (int x = 0; x < g->n[0]; x++, cell++) {
                int at[3] = {x, y, z};
                real factor = a[cell], phase = 0;
                for (int d = 0; d < 3; d++) {
                    real n = g->n[d];
                    if (g->wall[d] == MT_PERIODIC)
                        phase -= 2 * pi * mode[d] * at[d] / n, factor /= n;
                    else {
                        real arg = pi * mode[d] * (at[d] + 0.5L) / n;
                        factor *= ((parity >> d & 1) ? sinl(arg) : cosl(arg)) * (mode[d] ? 2 : 1) / n;
                    }
                }
                *re += factor * cosl(phase);
                *im += factor * sinl(phase);
            }
}

static bool dropped(const mt_grid *g, const int mode[3], mt_parities parity) {
    for (int d = 0; d < 3; d++) {
        if (g->wall[d] == MT_PERIODIC && g->n[d] > 1 && 2 * mode[d] == g->n[d]) return true;
        if ((parity >> d & 1) && mode[d] == 0) return true;
    }
    return false;
}

typedef struct bench {
    mt_grid *grid;
    mt_sweeper *w;
    double *field, *back, *spectrum, *work;
    mt_error err;
} bench;

static void open_bench(bench *b, int dim, const int n[], const mt_wall wall[], mt_pool *pool) {
    double h[3] = {0.5, 0.7, 1.1};
    check_ok(mt_grid_new(&b->grid, dim, n, h, wall, &b->err), &b->err);
    check_ok(mt_sweeper_new(&b->w, b->grid, pool, &b->err), &b->err);
    b->field = mt_alloc(b->grid->cells, 8), b->back = mt_alloc(b->grid->cells, 8);
    b->spectrum = mt_alloc(mt_sweeper_spectrum(b->w)->doubles, 8);
    b->work = mt_alloc(mt_sweeper_work_doubles(b->w), 8);
    for (size_t i = 0; i < b->grid->cells; i++) b->field[i] = noise_at(i);
}

static void close_bench(bench *b) {
    mt_free(b->field), mt_free(b->back), mt_free(b->spectrum), mt_free(b->work);
    mt_sweeper_free(&b->w);
    mt_grid_unref(&b->grid);
}

static void compare(bench *b, mt_parities parity) {
    const mt_spectrum *s = mt_sweeper_spectrum(b->w);
    int mode[3], width = s->complex ? 2 : 1;
    double square = 0, sum = 0;
    check_ok(mt_transform_forward(b->w, b->field, parity, b->spectrum, b->work, &b->err), &b->err);
    for (size_t j = 0; j < s->columns; j++)
        for (int m = 0; m < s->length; m++) {
            mt_spectrum_column(s, j, mode);
            mode[s->outer] = m;
            const double *u = b->spectrum + j * s->stride + (size_t)(m * width);
            real re, im;
            direct_mode(b->grid, b->field, mode, parity, &re, &im);
            if (dropped(b->grid, mode, parity)) re = im = 0;
            check_close(u[0], (double)re, 0, 1e-14);
            if (width == 2) check_close(u[1], (double)im, 0, 1e-14);
            double w = 1;
            for (int d = 0; d < 3; d++) w *= s->weight[d][mode[d]];
            square += w * (u[0] * u[0] + (width == 2 ? u[1] * u[1] : 0));
        }
    check_ok(mt_transform_inverse(b->w, b->spectrum, parity, b->back, b->work, &b->err), &b->err);
    for (size_t i = 0; i < b->grid->cells; i++) sum += b->back[i] * b->back[i];
    check_close(square, sum / (double)b->grid->cells, 1e-12, 1e-15); /* Parseval, of the projected field */
    memcpy(b->field, b->back, b->grid->cells * 8); /* a projected field comes back as it is */
    check_ok(mt_transform_forward(b->w, b->field, parity, b->spectrum, b->work, &b->err), &b->err);
    check_ok(mt_transform_inverse(b->w, b->spectrum, parity, b->back, b->work, &b->err), &b->err);
    for (size_t i = 0; i < b->grid->cells; i++) check_close(b->back[i], b->field[i], 0, 1e-14);
}

static void all_walls(int dim, const int n[]) {
    for (int mixture = 0; mixture < 1 << dim; mixture++) {
        mt_wall wall[3];
        mt_parities mirror = 0;
        for (int d = 0; d < dim; d++) {
            wall[d] = mixture >> d & 1 ? MT_MIRROR : MT_PERIODIC;
            if (wall[d] == MT_MIRROR && n[d] > 1) mirror |= 1u << d;
        }
        for (mt_parities parity = 0; parity < 8; parity++) {
            bench b = {0};
            if (parity & ~mirror) continue;
            open_bench(&b, dim, n, wall, NULL);
            compare(&b, parity);
            close_bench(&b);
        }
    }
}

static void transforms_are_direct_sums(void **state) {
    (void)state;
    static const int sizes[][4] = {{1, 16, 1, 1}, {1, 7, 1, 1},  {1, 1, 1, 1}, {2, 8, 6, 1},   {2, 5, 9, 1},
                                   {2, 1, 6, 1},  {2, 11, 1, 1}, {2, 4, 7, 1}, {2, 12, 20, 1}, {3, 4, 3, 5},
                                   {3, 6, 4, 2},  {3, 3, 1, 4},  {3, 1, 5, 6}, {3, 4, 6, 1}};
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i++) all_walls(sizes[i][0], sizes[i] + 1);
}

/* A wave through the multiplier: i k on periodic axes, cos -> -k sin on mirror axes. */
static void derivatives_of_waves(void **state) {
    (void)state;
    const int n[2] = {16, 12};
    const mt_wall wall[2] = {MT_MIRROR, MT_PERIODIC};
    bench b = {0};
    open_bench(&b, 2, n, wall, NULL);
    const mt_spectrum *s = mt_sweeper_spectrum(b.w);
    double kx = mt_grid_wavenumber(b.grid, 0, 3), ky = mt_grid_wavenumber(b.grid, 1, 2);
    for (size_t i = 0; i < b.grid->cells; i++) {
        double x = ((double)(i % 16) + 0.5) * 0.5, y = (double)(i / 16) * 0.7;
        b.field[i] = cos(kx * x) * sin(ky * y);
    }
    check_ok(mt_transform_forward(b.w, b.field, 0, b.spectrum, b.work, &b.err), &b.err);
    for (size_t j = 0; j < s->columns; j++)
        for (int m = 0; m < 2 * s->length;
             m++) { /* outer is y, half; inner modes are those of x: -k on even data */
            int mode[3];
            mt_spectrum_column(s, j, mode);
            b.spectrum[j * s->stride + (size_t)m] *= -s->k[0][mode[0]];
        }
    check_ok(mt_transform_inverse(b.w, b.spectrum, 1, b.back, b.work, &b.err), &b.err);
    for (size_t i = 0; i < b.grid->cells; i++) {
        double x = ((double)(i % 16) + 0.5) * 0.5, y = (double)(i / 16) * 0.7;
        check_close(b.back[i], -kx * sin(kx * x) * sin(ky * y), 0, 1e-13);
    }
    close_bench(&b);
}

/* Two inputs and two outputs in the same two work arrays: a, b -> a b, a + b. */
static mt_status mix(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                     mt_error *err) {
    (void)ctx, (void)worker, (void)err;
    for (size_t i = 0; i < u->n; i++) {
        out[0][i] = in[0][i] * in[1][i];
        out[1][i] = in[0][i] + in[1][i];
    }
    return MT_OK;
}

typedef struct store {
    double *spectrum[2];
    size_t bytes;
} store;

static mt_status keep(void *ctx, const mt_column *c, double *const in[], double *const out[], int worker,
                      mt_error *err) {
    store *s = ctx;
    (void)worker, (void)err;
    for (int i = 0; i < 2; i++) {
        memcpy(s->spectrum[i] + c->offset, in[i], s->bytes);
        memcpy(out[i], in[i], s->bytes);
    }
    return MT_OK;
}

static mt_status put(void *ctx, const mt_column *c, double *const in[], double *const out[], int worker,
                     mt_error *err) {
    store *s = ctx;
    (void)in, (void)worker, (void)err;
    memcpy(out[0], s->spectrum[0] + c->offset, s->bytes);
    return MT_OK;
}

static void run_mix(int threads, const mt_wall wall[], double *result) {
    const int n[2] = {30, 26};
    mt_error err = {0};
    mt_pool *pool;
    bench b = {0};
    check_ok(mt_pool_new(&pool, threads, &err), &err);
    open_bench(&b, 2, n, wall, pool);
    const mt_spectrum *s = mt_sweeper_spectrum(b.w);
    double *work[2] = {mt_alloc(mt_sweeper_work_doubles(b.w), 8), mt_alloc(mt_sweeper_work_doubles(b.w), 8)};
    mt_parities even[2] = {0, 0};
    store st = {{mt_alloc(s->doubles, 8), mt_alloc(s->doubles, 8)},
                (size_t)s->length * (s->complex ? 16 : 8)};
    double *other = mt_alloc(b.grid->cells, 8);
    for (size_t i = 0; i < b.grid->cells; i++) other[i] = noise_at(i + 10000);
    for (int i = 0; i < 2; i++) { /* project both, then bring them to mixed form */
        double *f = i ? other : b.field;
        check_ok(mt_transform_forward(b.w, f, 0, st.spectrum[i], b.work, &err), &err);
        check_ok(mt_transform_inverse(b.w, st.spectrum[i], 0, f, b.work, &err), &err);
        store one = {{st.spectrum[i], NULL}, st.bytes};
        check_ok(mt_sweep_columns(b.w, 0, NULL, NULL, 1, &work[i], even, put, &one, &err), &err);
    }
    check_ok(mt_sweep_rows(b.w, 2, work, even, 2, work, even, mix, NULL, &err), &err);
    check_ok(mt_sweep_columns(b.w, 2, work, even, 2, work, even, keep, &st, &err), &err);
    check_ok(mt_transform_inverse(b.w, st.spectrum[1], 0, result, b.work, &err), &err);
    for (size_t i = 0; i < b.grid->cells; i++) check_close(result[i], b.field[i] + other[i], 0, 1e-13);
    check_ok(mt_transform_inverse(b.w, st.spectrum[0], 0, result, b.work, &err), &err);
    mt_free(work[0]), mt_free(work[1]), mt_free(st.spectrum[0]), mt_free(st.spectrum[1]), mt_free(other);
    close_bench(&b);
    mt_pool_free(&pool);
}

static void sweeps_in_place_same_bits(void **state) {
    (void)state;
    static double one[780], more[780];
    const mt_wall walls[4][2] = {{MT_PERIODIC, MT_PERIODIC},
                                 {MT_MIRROR, MT_PERIODIC},
                                 {MT_PERIODIC, MT_MIRROR},
                                 {MT_MIRROR, MT_MIRROR}};
    for (int w = 0; w < 4; w++) {
        run_mix(1, walls[w], one);
        for (int threads = 2; threads <= 3; threads++) {
            run_mix(threads, walls[w], more);
            assert_memory_equal(one, more, sizeof one);
        }
    }
}

static void symmetrised_spectra(void **state) {
    (void)state;
    const int n[3] = {6, 5, 4};
    const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    bench b = {0};
    open_bench(&b, 3, n, wall, NULL);
    const mt_spectrum *s = mt_sweeper_spectrum(b.w);
    check_ok(mt_transform_forward(b.w, b.field, 0, b.spectrum, b.work, &b.err), &b.err);
    double *copy = mt_alloc(s->doubles, 8);
    memcpy(copy, b.spectrum, s->doubles * 8);
    mt_spectrum_symmetrise(s, copy);
    for (size_t i = 0; i < s->doubles; i++)
        check_close(copy[i], b.spectrum[i], 0, 1e-16); /* real data: nothing but rounding */
    for (size_t i = 0; i < s->stride; i++)
        copy[i] += 0.1 * noise_at(i); /* broken: repeated symmetrising changes nothing more */
    mt_spectrum_symmetrise(s, copy);
    memcpy(b.spectrum, copy, s->doubles * 8);
    mt_spectrum_symmetrise(s, copy);
    assert_memory_equal(b.spectrum, copy, s->doubles * 8);
    check_close(copy[1], 0, 0, 0);
    mt_free(copy);
    close_bench(&b);
}

static mt_status stop_at(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                         mt_error *err) {
    (void)in, (void)out, (void)worker;
    return u->index >= *(size_t *)ctx ? mt_fail(err, MT_ENUMERIC, "unit %zu", u->index) : MT_OK;
}

static void lowest_failure_wins(void **state) {
    (void)state;
    const int n[2] = {64, 300};
    const mt_wall wall[2] = {MT_PERIODIC, MT_PERIODIC};
    mt_error err = {0};
    mt_pool *pool;
    bench b = {0};
    check_ok(mt_pool_new(&pool, 2, &err), &err);
    open_bench(&b, 2, n, wall, pool);
    size_t from = mt_sweeper_units(b.w) / 2;
    char text[40];
    snprintf(text, sizeof text, "unit %zu", from);
    assert_int_equal(mt_sweep_rows(b.w, 0, NULL, NULL, 0, NULL, NULL, stop_at, &from, &err), MT_ENUMERIC);
    assert_string_equal(err.text, text);
    close_bench(&b);
    mt_pool_free(&pool);
}

static void bad_grids(void **state) {
    (void)state;
    mt_grid *g;
    mt_error err = {0};
    const mt_wall wall[3] = {MT_PERIODIC, MT_PERIODIC, MT_PERIODIC};
    const struct {
        int dim, n[3];
        double h[3];
        const char *says;
    } bad[] = {
        {0, {1, 1, 1}, {1, 1, 1}, "1, 2 or 3 axes"},    {4, {1, 1, 1}, {1, 1, 1}, "1, 2 or 3 axes"},
        {2, {8, 0, 1}, {1, 1, 1}, "along y"},           {1, {8, 1, 1}, {-1, 1, 1}, "spacing along x"},
        {1, {8, 1, 1}, {NAN, 1, 1}, "spacing along x"}, {3, {100000, 100000, 10}, {1, 1, 1}, "800 GB"}};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        assert_int_equal(mt_grid_new(&g, bad[i].dim, bad[i].n, bad[i].h, wall, &err), MT_EINPUT);
        if (!strstr(err.text, bad[i].says)) fail_msg("'%s' does not say '%s'", err.text, bad[i].says);
        assert_null(g);
    }
}

static mt_status make_and_transform(void *ctx, mt_error *err) {
    const int n[3] = {4, 3, 5};
    const double h[3] = {1, 1, 1};
    const mt_wall wall[3] = {MT_MIRROR, MT_PERIODIC, MT_PERIODIC};
    mt_grid *g = NULL;
    mt_sweeper *w = NULL;
    double *a = NULL, *s = NULL, *work = NULL;
    (void)ctx;
    mt_status st = mt_grid_new(&g, 3, n, h, wall, err);
    if (!st) st = mt_sweeper_new(&w, g, NULL, err);
    if (!st) st = mt_new(&a, g->cells, 8, "a", err);
    if (!st) st = mt_new(&s, mt_sweeper_spectrum(w)->doubles, 8, "s", err);
    if (!st) st = mt_new(&work, mt_sweeper_work_doubles(w), 8, "w", err);
    if (!st) st = mt_transform_forward(w, a, 0, s, work, err);
    mt_free(a), mt_free(s), mt_free(work);
    mt_sweeper_free(&w);
    mt_grid_unref(&g);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    check_allocation_sweep(make_and_transform, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(transforms_are_direct_sums),
        cmocka_unit_test(derivatives_of_waves),
        cmocka_unit_test(sweeps_in_place_same_bits),
        cmocka_unit_test(symmetrised_spectra),
        cmocka_unit_test(lowest_failure_wins),
        cmocka_unit_test(bad_grids),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("sweep", tests, NULL, NULL);
}
