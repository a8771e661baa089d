/* Proved here: equal expressions are one node; simplification keeps values; text reads as intended; parities
 * and grids are found and refused with reasons; every operator's derivative agrees with finite differences,
 * every variational derivative with finite differences of the discrete energy (1-D to 3-D, both walls), also
 * for thousands of random formulas, on which kernels agree with the oracle too; histories; no leaks. */
#include "tests/support.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/formula/build.h"
#include "core/formula/filter.h"
#include "core/formula/kernel.h"
#include "core/space/sweep.h"

typedef struct stage {
    mt_error err;
    mt_forms *forms;
    mt_grid *grid;
    mt_symbol *c, *e, *T, *filter;
    mt_builder b;
    const mt_expr *nc, *ne, *nT;
} stage;

static const mt_wall walls_of[2][3] = {{MT_PERIODIC, MT_PERIODIC, MT_PERIODIC},
                                       {MT_MIRROR, MT_MIRROR, MT_MIRROR}};

static void open_stage(stage *s, int dim, const int n[], const mt_wall wall[]) {
    double h[3] = {0.8, 1.1, 0.9};
    memset(s, 0, sizeof *s);
    check_ok(mt_forms_new(&s->forms, &s->err), &s->err);
    check_ok(mt_grid_new(&s->grid, dim, n, h, wall, &s->err), &s->err);
    check_ok(mt_symbol_new(&s->c, s->forms, MT_SYMBOL_FIELD, "c", s->grid, &s->err), &s->err);
    check_ok(mt_symbol_new(&s->e, s->forms, MT_SYMBOL_FIELD, "eta", s->grid, &s->err), &s->err);
    check_ok(mt_symbol_new(&s->T, s->forms, MT_SYMBOL_PARAM, "T", NULL, &s->err), &s->err);
    s->T->value = 1.3;
    s->b.forms = s->forms;
    s->b.err = &s->err;
    s->nc = mt_build_symbol(&s->b, s->c);
    s->ne = mt_build_symbol(&s->b, s->e);
    s->nT = mt_build_symbol(&s->b, s->T);
}

static void close_stage(stage *s) {
    mt_build_end(&s->b);
    mt_symbol_unref(&s->c), mt_symbol_unref(&s->e), mt_symbol_unref(&s->T), mt_symbol_unref(&s->filter);
    mt_grid_unref(&s->grid);
    mt_forms_free(&s->forms);
}

static const mt_expr *un(stage *s, mt_op op, const mt_expr *a) {
    return mt_build_unary(&s->b, op, a);
}
static const mt_expr *bin(stage *s, mt_op op, const mt_expr *a, const mt_expr *b) {
    return mt_build_binary(&s->b, op, a, b);
}
static const mt_expr *num(stage *s, double v) {
    return mt_build_number(&s->b, v);
}
static const mt_expr *where(stage *s, const mt_expr *a, const mt_expr *b, const mt_expr *c) {
    const mt_expr *x[3] = {a, b, c}, *out = NULL;
    mt_status st = mt_expr_make(&out, MT_WHERE_OP, 3, x, 0, NULL, &s->err);
    return mt_build_keep(&s->b, st, out);
}

/* Even in k, different along each axis, and not in closed form of the other operators. */
static mt_status bump(void *ctx, const double k[3], double *value, mt_error *err) {
    (void)ctx, (void)err;
    *value = 1 / (0.3 + k[0] * k[0] + 0.5 * k[1] * k[1] + 0.7 * k[2] * k[2]) - 0.2;
    return MT_OK;
}

static mt_status skew(void *ctx, const double k[3], double *value, mt_error *err) {
    (void)ctx, (void)err;
    *value = 1 + k[0];
    return MT_OK;
}

static mt_status pole(void *ctx, const double k[3], double *value, mt_error *err) {
    (void)ctx, (void)err;
    *value = 1 / (k[0] * k[0] + k[1] * k[1]);
    return MT_OK;
}

static mt_status make_filter(stage *s, mt_filter_value at, mt_symbol **out) {
    mt_sweeper *sweeper;
    check_ok(mt_sweeper_new(&sweeper, s->grid, NULL, &s->err), &s->err);
    mt_status st = mt_filter_new(out, s->forms, mt_sweeper_spectrum(sweeper), "bump",
                                 (mt_filter_function){at, NULL, NULL}, &s->err);
    mt_sweeper_free(&sweeper);
    return st;
}

static const mt_expr *filtered(stage *s, const mt_expr *a) {
    const mt_expr *out = NULL;
    if (!s->filter) check_ok(make_filter(s, bump, &s->filter), &s->err);
    mt_status st = mt_expr_make(&out, MT_FILTER_OP, 1, &a, 0, s->filter, &s->err);
    return mt_build_keep(&s->b, st, out);
}

/* --- random formulas, by a small linear congruential generator so that a failure can be told by its seed
 * ----------------- */

static uint64_t lcg;
static unsigned dice(unsigned n) {
    lcg = lcg * 6364136223846793005u + 1442695040888963407u;
    return (unsigned)(lcg >> 33) % n;
}

/* Smooth and finite for fields around 0.3 .. 0.7. spectral: with derivatives. */
static const mt_expr *random_formula(stage *s, int depth, bool spectral) {
    static const mt_op functions[] = {MT_EXP_OP, MT_SIN_OP, MT_COS_OP, MT_TANH_OP, MT_NEG_OP};
    static const mt_op twos[] = {MT_ADD_OP, MT_SUB_OP, MT_MUL_OP, MT_MUL_OP, MT_ADD_OP};
    if (depth == 0) {
        const mt_expr *leaves[] = {s->nc, s->ne, s->nc, s->nT, num(s, 0.25 * (1 + dice(8)))};
        return leaves[dice(5)];
    }
    const mt_expr *a = random_formula(s, depth - 1, spectral),
                  *b = random_formula(s, dice((unsigned)depth), spectral);
    switch (dice(spectral ? 11 : 8)) {
    case 0: return un(s, functions[dice(5)], bin(s, MT_MUL_OP, num(s, 0.25), a));
    case 1: return bin(s, MT_POW_OP, a, num(s, 2 + dice(2)));
    case 2: return bin(s, MT_DIV_OP, a, bin(s, MT_ADD_OP, num(s, 2), bin(s, MT_MUL_OP, b, b)));
    case 3: return un(s, MT_LOG_OP, bin(s, MT_ADD_OP, num(s, 1.5), bin(s, MT_MUL_OP, a, a)));
    case 8: return un(s, MT_GRADSQ_OP, a);
    case 10: return filtered(s, a);
    case 9: { /* derivatives in pairs, so that mirror walls are fine */
        int axis = (int)dice((unsigned)s->grid->dim);
        if (dice(2)) return un(s, MT_LAPLACIAN_OP, a);
        return bin(s, MT_MUL_OP, mt_build_deriv(&s->b, axis, a), mt_build_deriv(&s->b, axis, b));
    }
    default: return bin(s, twos[dice(5)], a, b);
    }
}

static void random_fields(const stage *s, double *c, double *e) {
    mt_random_fill(MT_RANDOM_UNIFORM, lcg, 0, s->grid->cells, 0, 0, c);
    mt_random_fill(MT_RANDOM_UNIFORM, lcg, 0, s->grid->cells, 0, 1, e);
    for (size_t i = 0; i < s->grid->cells; i++) c[i] = 0.5 + 0.2 * c[i], e[i] = 0.5 + 0.2 * e[i];
}

static void evaluate(stage *s, const mt_expr *f, const double *c, const double *e, double *out) {
    mt_symbol *symbols[2] = {s->c, s->e};
    const double *values[2] = {c, e};
    check_ok(mt_expr_evaluate(f, s->grid, 2, symbols, values, 0.5, out, &s->err), &s->err);
}

static double total(stage *s, const mt_expr *f, const double *c, const double *e, double *scratch) {
    double sum = 0;
    evaluate(s, f, c, e, scratch);
    for (size_t i = 0; i < s->grid->cells; i++) sum += scratch[i];
    return sum;
}

/* --- tests
 * --------------------------------------------------------------------------------------------------------------------
 */

static void equal_means_same(void **state) {
    (void)state;
    stage s;
    int n[1] = {4};
    open_stage(&s, 1, n, walls_of[0]);
    const mt_expr *a = bin(&s, MT_MUL_OP, s.nc, bin(&s, MT_ADD_OP, s.ne, num(&s, 2)));
    const mt_expr *b = bin(&s, MT_MUL_OP, bin(&s, MT_ADD_OP, num(&s, 2), s.ne), s.nc);
    assert_ptr_equal(a, b);
    assert_ptr_equal(bin(&s, MT_SUB_OP, a, b), num(&s, 0));
    assert_ptr_equal(
        bin(&s, MT_ADD_OP, bin(&s, MT_MUL_OP, num(&s, 2), s.nc), bin(&s, MT_MUL_OP, num(&s, 3), s.nc)),
        bin(&s, MT_MUL_OP, num(&s, 5), s.nc));
    assert_ptr_equal(un(&s, MT_LAPLACIAN_OP, s.nT), num(&s, 0));
    assert_true(mt_expr_contains(a, s.ne) && !mt_expr_contains(a, s.nT));
    close_stage(&s);
}

static void text_reads_well(void **state) {
    (void)state;
    stage s;
    int n[2] = {4, 4};
    char text[200];
    open_stage(&s, 2, n, walls_of[0]);
    const mt_expr *one = num(&s, 1),
                  *well = bin(&s, MT_MUL_OP, bin(&s, MT_POW_OP, s.nc, num(&s, 2)),
                              bin(&s, MT_POW_OP, bin(&s, MT_SUB_OP, one, s.nc), num(&s, 2)));
    const mt_expr *energy =
        bin(&s, MT_ADD_OP, well, bin(&s, MT_MUL_OP, num(&s, 0.5), un(&s, MT_GRADSQ_OP, s.nc)));
    const mt_expr *mu = NULL;
    check_ok(mt_expr_variation(&mu, energy, s.nc, 2, &s.err), &s.err);
    const struct {
        const mt_expr *e;
        const char *text;
    } table[] = {
        {mu, "2*c - 6*c^2 + 4*c^3 - laplacian(c)"},
        {energy, "c^2*(1 - c)^2 + 0.5*gradsq(c)"},
        {bin(&s, MT_DIV_OP, s.nc, bin(&s, MT_MUL_OP, s.ne, s.nT)), "c/(T*eta)"},
        {bin(&s, MT_POW_OP, bin(&s, MT_ADD_OP, s.nc, one), num(&s, -1)), "(1 + c)^(-1)"},
        {un(&s, MT_NEG_OP, bin(&s, MT_ADD_OP, s.nc, s.ne)), "-(c + eta)"},
        {mt_build_deriv(&s.b, 1, bin(&s, MT_MUL_OP, s.nc, s.ne)), "dy(c*eta)"},
        {un(&s, MT_LOG_OP, bin(&s, MT_SUB_OP, one, s.nc)), "log(1 - c)"},
        {num(&s, 0.1), "0.1"},
        {where(&s, bin(&s, MT_ABOVE_OP, s.nc, num(&s, 0.5)), s.nc, s.ne), "where(above(c, 0.5), c, eta)"},
    };
    for (size_t i = 0; i < sizeof table / sizeof *table; i++) {
        mt_expr_print(table[i].e, text, sizeof text);
        assert_string_equal(text, table[i].text);
    }
    assert_int_equal(mt_expr_print(mu, text, 10), strlen(table[0].text));
    assert_string_equal(text, "2*c - ...");
    mt_expr_unref(&mu);
    close_stage(&s);
}

static void parities_and_grids(void **state) {
    (void)state;
    stage s;
    int n[2] = {4, 4};
    mt_parities p;
    mt_wall wall[2] = {MT_MIRROR, MT_PERIODIC};
    open_stage(&s, 2, n, wall);
    const mt_expr *dx = mt_build_deriv(&s.b, 0, s.nc), *dy = mt_build_deriv(&s.b, 1, s.nc);
    check_ok(mt_expr_parity(bin(&s, MT_MUL_OP, dx, s.ne), s.grid, &p, &s.err), &s.err);
    assert_int_equal(p, 1);
    check_ok(mt_expr_parity(bin(&s, MT_MUL_OP, dx, dx), s.grid, &p, &s.err), &s.err);
    assert_int_equal(p, 0);
    check_ok(mt_expr_parity(un(&s, MT_EXP_OP, dy), s.grid, &p, &s.err), &s.err);
    assert_int_equal(p, 0);
    assert_int_equal(mt_expr_parity(bin(&s, MT_ADD_OP, dx, s.nc), s.grid, &p, &s.err), MT_EPARITY);
    assert_non_null(strstr(s.err.text, "dx(c)"));
    assert_int_equal(mt_expr_parity(un(&s, MT_EXP_OP, dx), s.grid, &p, &s.err), MT_EPARITY);
    mt_grid *g, *other;
    mt_symbol *f;
    double h[2] = {1, 1};
    check_ok(mt_expr_grid(bin(&s, MT_ADD_OP, dx, s.nT), &g, &s.err), &s.err);
    assert_ptr_equal(g, s.grid);
    check_ok(mt_grid_new(&other, 2, n, h, wall, &s.err), &s.err);
    check_ok(mt_symbol_new(&f, s.forms, MT_SYMBOL_FIELD, "far", other, &s.err), &s.err);
    assert_int_equal(mt_expr_grid(bin(&s, MT_ADD_OP, s.nc, mt_build_symbol(&s.b, f)), &g, &s.err), MT_EINPUT);
    assert_non_null(strstr(s.err.text, "'far'"));
    mt_symbol_unref(&f);
    mt_grid_unref(&other);
    close_stage(&s);
}

static void partial_of(stage *s, const mt_expr *f, const mt_expr *wrt, bool first) {
    enum { N = 7 };
    double c[N], e[N], up[N], down[N], d[N], h = 1e-6;
    const mt_expr *g = NULL;
    check_ok(mt_expr_partial(&g, f, wrt, &s->err), &s->err);
    random_fields(s, c, e);
    evaluate(s, g, c, e, d);
    double *moved = first ? c : e;
    for (int i = 0; i < N; i++) moved[i] += h;
    evaluate(s, f, c, e, up);
    for (int i = 0; i < N; i++) moved[i] -= 2 * h;
    evaluate(s, f, c, e, down);
    for (int i = 0; i < N; i++) {
        double size = fabs(up[i]) + fabs(down[i]);
        check_close(d[i], (up[i] - down[i]) / (2 * h), 1e-6, 1e-9 * (1 + size));
    }
    mt_expr_unref(&g);
}

static void every_operator_has_its_derivative(void **state) {
    (void)state;
    stage s;
    int n[1] = {7};
    open_stage(&s, 1, n, walls_of[0]);
    lcg = 77;
    for (int op = 0; op < MT_OP_COUNT; op++) {
        const mt_expr *f = NULL;
        if (mt_op_args((mt_op)op) == 0 || mt_op_spectral((mt_op)op) || op == MT_GRADSQ_OP) continue;
        const mt_expr *low = bin(&s, MT_SUB_OP, s.nc, num(&s, 0.5)); /* both signs for ABS, MIN, MAX ... */
        bool signed_one =
            op == MT_ABS_OP || op == MT_SIGN_OP || op == MT_MIN_OP || op == MT_MAX_OP || op == MT_ABOVE_OP;
        if (mt_op_args((mt_op)op) == 1)
            f = un(&s, (mt_op)op, signed_one ? low : s.nc);
        else if (mt_op_args((mt_op)op) == 2)
            f = bin(&s, (mt_op)op, s.nc, s.ne);
        else
            f = where(&s, bin(&s, MT_ABOVE_OP, s.nc, s.ne), bin(&s, MT_MUL_OP, s.nc, s.nc),
                      un(&s, MT_EXP_OP, s.nc));
        for (int i = 0; i < 20; i++) {
            partial_of(&s, f, s.nc, true);
            if (mt_op_args((mt_op)op) == 2) partial_of(&s, f, s.ne, false);
        }
    }
    close_stage(&s);
}

static void random_partials(void **state) {
    (void)state;
    int n[1] = {7};
    for (unsigned seed = 1; seed <= 3000; seed++) {
        stage s;
        open_stage(&s, 1, n, walls_of[0]);
        lcg = seed;
        const mt_expr *f = random_formula(&s, 1 + (int)dice(4), false);
        check_ok(s.b.status, &s.err);
        partial_of(&s, f, s.nc, true);
        close_stage(&s);
    }
}

/* (F(c + h at a cell) - F(c - h)) / 2h against the variational derivative there. */
static void variation_of(stage *s, const mt_expr *density, unsigned seed) {
    size_t cells = s->grid->cells;
    double *c = mt_alloc(cells, 8), *e = mt_alloc(cells, 8), *d = mt_alloc(cells, 8),
           *scratch = mt_alloc(cells, 8);
    const mt_expr *mu = NULL;
    check_ok(mt_expr_variation(&mu, density, s->nc, s->grid->dim, &s->err), &s->err);
    random_fields(s, c, e);
    evaluate(s, mu, c, e, d);
    double size = 0, h = 1e-5;
    for (size_t i = 0; i < cells; i++) size = fmax(size, fabs(d[i]));
    for (int i = 0; i < 2; i++) {
        size_t cell = dice((unsigned)cells);
        double keep = c[cell];
        c[cell] = keep + h;
        double up = total(s, density, c, e, scratch);
        c[cell] = keep - h;
        double down = total(s, density, c, e, scratch);
        c[cell] = keep;
        if (fabs((up - down) / (2 * h) - d[cell]) > 1e-6 * size + 1e-10 * (fabs(up) + 1) / h * 1e-3) {
            char text[500];
            mt_expr_print(density, text, sizeof text);
            fail_msg("seed %u: d/dc of %s: %.12g by differences, %.12g derived", seed, text,
                     (up - down) / (2 * h), d[cell]);
        }
    }
    mt_expr_unref(&mu);
    mt_free(c), mt_free(e), mt_free(d), mt_free(scratch);
}

static void variations_are_gradients(void **state) {
    (void)state;
    static const int sizes[3][3] = {{9, 1, 1}, {6, 5, 1}, {4, 3, 4}};
    for (unsigned seed = 1; seed <= 1800; seed++) {
        stage s;
        open_stage(&s, 1 + (int)(seed % 3), sizes[seed % 3], walls_of[seed / 3 % 2]);
        lcg = seed;
        const mt_expr *f = random_formula(&s, 1 + (int)dice(3), true);
        check_ok(s.b.status, &s.err);
        variation_of(&s, f, seed);
        close_stage(&s);
    }
}

/* The densities that people write, one by one. */
static void named_variations(void **state) {
    (void)state;
    static const int sizes[3][3] = {{9, 1, 1}, {6, 5, 1}, {4, 3, 4}};
    for (int which = 0; which < 6; which++) {
        stage s;
        open_stage(&s, 1 + which % 3, sizes[which % 3], walls_of[which / 3]);
        const mt_expr *lap = un(&s, MT_LAPLACIAN_OP, s.nc), *dx = mt_build_deriv(&s.b, 0, s.nc);
        const mt_expr *kappa = bin(&s, MT_ADD_OP, num(&s, 0.5), bin(&s, MT_MUL_OP, s.nc, s.ne));
        const mt_expr *f[] = {
            bin(&s, MT_MUL_OP, kappa, un(&s, MT_GRADSQ_OP, s.nc)),
            bin(&s, MT_POW_OP, dx, num(&s, 4)),
            bin(&s, MT_POW_OP, lap, num(&s, 2)),
            bin(&s, MT_MUL_OP, un(&s, MT_EXP_OP, s.nc), bin(&s, MT_MUL_OP, dx, dx)),
            bin(&s, MT_MUL_OP, s.nc, un(&s, MT_LAPLACIAN_OP, lap)),
            bin(&s, MT_MUL_OP, s.nc, un(&s, MT_LOG_OP, s.nc)),
            bin(&s, MT_MUL_OP, s.nc, filtered(&s, s.nc)),
            bin(&s, MT_MUL_OP, kappa, filtered(&s, bin(&s, MT_MUL_OP, s.nc, s.ne))),
            /* a gradient energy that depends on the normal of the interface */
            bin(&s, MT_DIV_OP, bin(&s, MT_POW_OP, dx, num(&s, 4)),
                bin(&s, MT_ADD_OP, num(&s, 0.1), un(&s, MT_GRADSQ_OP, s.nc))),
        };
        for (size_t i = 0; i < sizeof f / sizeof *f; i++) {
            lcg = 100 + i;
            variation_of(&s, f[i], (unsigned)i);
        }
        close_stage(&s);
    }
}

static void kernels_agree_with_oracle(void **state) {
    (void)state;
    int n[1] = {7};
    mt_place place = {0};
    for (unsigned seed = 1; seed <= 3000; seed++) {
        stage s;
        mt_kernel *k;
        open_stage(&s, 1, n, walls_of[0]);
        lcg = seed;
        const mt_expr *f = random_formula(&s, 1 + (int)dice(5), false), *in[2] = {s.nc, s.ne}, *out[1] = {f};
        check_ok(s.b.status, &s.err);
        mt_kernel_spec spec = {.nin = 2, .in = in, .nout = 1, .out = out};
        double c[7], e[7], slow[7], fast[7], *to[1] = {fast};
        const double *from[2] = {c, e};
        random_fields(&s, c, e);
        evaluate(&s, f, c, e, slow);
        check_ok(mt_kernel_new(&k, &spec, &s.err), &s.err);
        check_ok(mt_kernel_prepare(k, 0.5, &s.err), &s.err);
        double *scratch = mt_alloc(mt_kernel_scratch(k), 8);
        mt_kernel_run(k, &place, 7, from, to, NULL, scratch);
        for (int i = 0; i < 7; i++)
            check_close(fast[i], slow[i], 4e-14, 4e-14); /* Horner's rule orders sums differently */
        mt_free(scratch);
        mt_kernel_free(&k);
        close_stage(&s);
    }
}

/* Arithmetic alone, also of both signs and through zero. */
static const mt_expr *random_arithmetic(stage *s, int depth) {
    if (depth == 0) {
        const mt_expr *leaves[] = {s->nc, s->ne, s->nT, num(s, 0.7 * (double)dice(5) - 1)};
        return leaves[dice(4)];
    }
    const mt_expr *a = random_arithmetic(s, depth - 1), *b = random_arithmetic(s, (int)dice((unsigned)depth));
    static const mt_op twos[] = {MT_ADD_OP, MT_SUB_OP, MT_MUL_OP,  MT_DIV_OP,
                                 MT_MIN_OP, MT_MAX_OP, MT_ABOVE_OP};
    switch (dice(12)) {
    case 0: return un(s, MT_ABS_OP, a);
    case 1: return un(s, MT_NEG_OP, a);
    case 2: return un(s, MT_SQRT_OP, un(s, MT_ABS_OP, a));
    case 3: return where(s, bin(s, MT_ABOVE_OP, a, s->nc), b, a);
    case 4: return bin(s, MT_POW_OP, a, num(s, (double)dice(9) - 2));
    default: return bin(s, twos[dice(7)], a, b);
    }
}

static void run_kernel(stage *s, const mt_expr *f, bool literal, const double *c, const double *e, size_t n,
                       double *to) {
    const mt_expr *in[2] = {s->nc, s->ne};
    const double *from[2] = {c, e};
    mt_kernel_spec spec = {.nin = 2, .in = in, .nout = 1, .out = &f, .literal = literal};
    mt_kernel *k;
    mt_place place = {0};
    check_ok(mt_kernel_new(&k, &spec, &s->err), &s->err);
    check_ok(mt_kernel_prepare(k, 0.5, &s->err), &s->err);
    double *scratch = mt_alloc(mt_kernel_scratch(k), 8);
    mt_kernel_run(k, &place, n, from, &to, NULL, scratch);
    mt_free(scratch);
    mt_kernel_free(&k);
}

static void arithmetic_bit_for_bit(void **state) {
    (void)state;
    int n[1] = {7};
    for (unsigned seed = 1; seed <= 5000; seed++) {
        stage s;
        double c[7], e[7], slow[7], fast[7];
        open_stage(&s, 1, n, walls_of[0]);
        lcg = seed;
        const mt_expr *f = random_arithmetic(&s, 1 + (int)dice(6));
        check_ok(s.b.status, &s.err);
        random_fields(&s, c, e);
        evaluate(&s, f, c, e, slow);
        run_kernel(&s, f, true, c, e, 7, fast);
        for (int i = 0; i < 7; i++)
            if (!(isnan(fast[i]) && isnan(slow[i])) && memcmp(&fast[i], &slow[i], 8) != 0 &&
                !(fast[i] == 0 && slow[i] == 0)) {
                char text[500];
                mt_expr_print(f, text, sizeof text);
                fail_msg("seed %u: %s: kernel %.17g, oracle %.17g", seed, text, fast[i], slow[i]);
            }
        close_stage(&s);
    }
}

static double ulps(double a, double b) {
    if (a == b || (isnan(a) && isnan(b))) return 0;
    double size = nextafter(fabs(b), INFINITY) - fabs(b);
    return fabs(a - b) / size;
}

/* Every function of one and two arguments against the C library's, over many sizes. */
static void functions_within_four_ulps(void **state) {
    (void)state;
    enum { N = 4000 };
    static double x[N], y[N], got[N];
    stage s;
    int n[1] = {4};
    open_stage(&s, 1, n, walls_of[0]);
    lcg = 5;
    for (int i = 0; i < N; i++) {
        x[i] = ldexp(0.5 + dice(1u << 30) * 0x1p-31, (int)dice(20) - 12);
        y[i] = (dice(2) ? 1 : -1) * ldexp(0.5 + dice(1u << 30) * 0x1p-31, (int)dice(8) - 5);
    }
    const struct {
        mt_op op;
        double (*f)(double);
    } ones[] = {{MT_EXP_OP, exp}, {MT_LOG_OP, log},   {MT_SIN_OP, sin},
                {MT_COS_OP, cos}, {MT_TANH_OP, tanh}, {MT_SQRT_OP, sqrt}};
    for (size_t j = 0; j < sizeof ones / sizeof *ones; j++) {
        double worst = 0;
        const double *argument = ones[j].op == MT_SQRT_OP || ones[j].op == MT_LOG_OP ? x : y;
        run_kernel(&s, un(&s, ones[j].op, s.nc), false, argument, y, N, got);
        for (int i = 0; i < N; i++) worst = fmax(worst, ulps(got[i], ones[j].f(argument[i])));
        print_message("%s: %.2f ulp of the C library\n", mt_op_text(ones[j].op), worst);
        assert_true(worst <= 4);
    }
    double worst = 0;
    run_kernel(&s, bin(&s, MT_POW_OP, s.nc, s.ne), false, x, y, N, got);
    for (int i = 0; i < N; i++) worst = fmax(worst, ulps(got[i], pow(x[i], y[i])));
    print_message("power: %.2f ulp of the C library\n", worst);
    assert_true(worst <= 4);
    close_stage(&s);
}

static void collected_polynomials(void **state) {
    (void)state;
    int n[1] = {7};
    for (unsigned seed = 1; seed <= 1000; seed++) {
        stage s;
        open_stage(&s, 1, n, walls_of[0]);
        lcg = seed;
        const mt_expr *f = random_formula(&s, 1 + (int)dice(5), false), *g = NULL;
        double c[7], e[7], a[7], b[7];
        random_fields(&s, c, e);
        check_ok(mt_expr_collect(&g, f, &s.err), &s.err);
        evaluate(&s, f, c, e, a);
        evaluate(&s, g, c, e, b);
        for (int i = 0; i < 7; i++) check_close(b[i], a[i], 1e-11, 1e-11);
        mt_expr_unref(&g);
        close_stage(&s);
    }
}

static void filters_are_real_and_even(void **state) {
    (void)state;
    static const int n[2] = {5, 6};
    for (int wall = 0; wall < 2; wall++) {
        stage s;
        mt_symbol *f = NULL;
        double k[3] = {0.37, -0.11, 0}, v;
        open_stage(&s, 2, n, walls_of[wall]);
        assert_int_equal(make_filter(&s, skew, &f), MT_EINPUT);
        assert_non_null(strstr(s.err.text, "has to be even"));
        assert_int_equal(make_filter(&s, pole, &f), MT_EINPUT);
        assert_non_null(strstr(s.err.text, "(0, 0)"));
        const mt_expr *e = filtered(&s, num(&s, 2)); /* a constant: the value at k = 0 times it */
        assert_true(mt_expr_is_const(e, 2 * (1 / 0.3 - 0.2)));
        check_ok(mt_filter_at(s.filter, k, &v, &s.err), &s.err);
        check_close(v, 1 / (0.3 + 0.37 * 0.37 + 0.5 * 0.11 * 0.11) - 0.2, 1e-15, 0);
        close_stage(&s);
    }
}

static void histories(void **state) {
    (void)state;
    stage s;
    int n[1] = {4};
    open_stage(&s, 1, n, walls_of[0]);
    double t[] = {1, 3, 3, 5}, v[] = {10, 20, 40, 40}, back[] = {1, 0}, triple[] = {1, 1, 1};
    check_ok(mt_symbol_set_history(s.T, 4, t, v, &s.err), &s.err);
    check_close(mt_symbol_at(s.T, 0, false), 10, 0, 0);
    check_close(mt_symbol_at(s.T, 2, false), 15, 1e-15, 0);
    check_close(mt_symbol_at(s.T, 3, true), 20, 0, 0);
    check_close(mt_symbol_at(s.T, 3, false), 40, 0, 0);
    check_close(mt_symbol_at(s.T, 9, false), 40, 0, 0);
    assert_int_equal(mt_symbol_set_history(s.T, 2, back, v, &s.err), MT_EINPUT);
    assert_int_equal(mt_symbol_set_history(s.T, 3, triple, v, &s.err), MT_EINPUT);
    assert_int_equal(mt_symbol_set_history(s.c, 1, t, v, &s.err), MT_EINPUT);
    close_stage(&s);
}

static void depth_is_bounded(void **state) {
    (void)state;
    stage s;
    int n[1] = {4};
    open_stage(&s, 1, n, walls_of[0]);
    const mt_expr *e = s.nc;
    for (int i = 0; i < MT_MOST_DEPTH + 10 && e; i++)
        e = un(&s, MT_EXP_OP, bin(&s, MT_MUL_OP, num(&s, 0.5), e));
    assert_null(e);
    assert_int_equal(s.b.status, MT_EINPUT);
    assert_non_null(strstr(s.err.text, "levels deep"));
    close_stage(&s);
}

static mt_status derive_and_compile(void *ctx, mt_error *err) {
    stage s = {.b = {.err = err}};
    double h[2] = {1, 1};
    int n[2] = {4, 4};
    mt_kernel *k = NULL;
    const mt_expr *mu = NULL, *e = NULL;
    (void)ctx;
    mt_status st = mt_forms_new(&s.forms, err);
    if (!st) st = mt_grid_new(&s.grid, 2, n, h, walls_of[0], err);
    if (!st) st = mt_symbol_new(&s.c, s.forms, MT_SYMBOL_FIELD, "c", s.grid, err);
    s.b.forms = s.forms;
    if (!st) {
        s.nc = mt_build_symbol(&s.b, s.c);
        const mt_expr *well =
            bin(&s, MT_MUL_OP, bin(&s, MT_MUL_OP, s.nc, s.nc), bin(&s, MT_SUB_OP, num(&s, 1), s.nc));
        e = bin(&s, MT_ADD_OP, bin(&s, MT_MUL_OP, well, un(&s, MT_LOG_OP, s.nc)), num(&s, 1));
        st = s.b.status;
    }
    if (!st) st = mt_expr_variation(&mu, e, s.nc, 2, err);
    if (!st) {
        mt_kernel_spec spec = {.nin = 1, .in = &s.nc, .nout = 1, .out = &mu};
        st = mt_kernel_new(&k, &spec, err);
    }
    mt_kernel_free(&k);
    mt_expr_unref(&mu);
    mt_build_end(&s.b);
    mt_symbol_unref(&s.c);
    mt_grid_unref(&s.grid);
    mt_forms_free(&s.forms);
    return st;
}

static void no_leaks(void **state) {
    (void)state;
    size_t before = mt_memory_blocks();
    check_allocation_sweep(derive_and_compile, NULL);
    assert_int_equal(mt_memory_blocks(), before);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(equal_means_same),
        cmocka_unit_test(text_reads_well),
        cmocka_unit_test(parities_and_grids),
        cmocka_unit_test(every_operator_has_its_derivative),
        cmocka_unit_test(random_partials),
        cmocka_unit_test(filters_are_real_and_even),
        cmocka_unit_test(arithmetic_bit_for_bit),
        cmocka_unit_test(functions_within_four_ulps),
        cmocka_unit_test(variations_are_gradients),
        cmocka_unit_test(named_variations),
        cmocka_unit_test(kernels_agree_with_oracle),
        cmocka_unit_test(collected_polynomials),
        cmocka_unit_test(histories),
        cmocka_unit_test(depth_is_bounded),
        cmocka_unit_test(no_leaks),
    };
    return cmocka_run_group_tests_name("expr", tests, NULL, NULL);
}
