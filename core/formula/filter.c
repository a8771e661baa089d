#include "core/formula/filter.h"

#include <math.h>
#include <stdio.h>

#include "core/base/memory.h"

#define MOST_CHECKED 20000

typedef struct tabulation {
    const mt_grid *grid;
    const mt_filter_function *function;
    const char *name;
    mt_error *err;
} tabulation;

static void vector_text(const mt_grid *g, const double k[3], char *buf, size_t size) {
    const char *form = g->dim == 1 ? "(%.6g)" : g->dim == 2 ? "(%.6g, %.6g)" : "(%.6g, %.6g, %.6g)";
    snprintf(buf, size, form, k[0], k[1], k[2]);
}

static mt_status value_at(const tabulation *t, const double k[3], double *value) {
    char where[100];
    mt_status st = t->function->at(t->function->ctx, k, value, t->err);
    if (st || isfinite(*value)) return st;
    vector_text(t->grid, k, where, sizeof where);
    return mt_fail(t->err, MT_EINPUT,
                   "filter '%s' is %g at wave vector %s; it has to be a finite number there too (say what it "
                   "is, for instance with k == 0 and 0 or ...)",
                   t->name, *value, where);
}

/* One change of signs under which the values have to agree. */
static mt_status agree(const tabulation *t, const double k[3], const double other[3], double value) {
    char here[100], there[100];
    double reflected = 0;
    mt_status st = value_at(t, other, &reflected);
    if (st || fabs(reflected - value) <= 1e-9 * (fabs(value) + fabs(reflected))) return st;
    vector_text(t->grid, k, here, sizeof here), vector_text(t->grid, other, there, sizeof there);
    return mt_fail(t->err, MT_EINPUT,
                   "filter '%s' is %.6g at wave vector %s and %.6g at %s; it has to be even, or a real field "
                   "would become complex",
                   t->name, value, here, reflected, there);
}

static mt_status check_even(const tabulation *t, const double k[3], double value) {
    double other[3] = {k[0], k[1], k[2]};
    bool turned = false;
    mt_status st = MT_OK;
    for (int a = 0; a < t->grid->dim; a++)
        if (t->grid->wall[a] == MT_PERIODIC && k[a] != 0) other[a] = -k[a], turned = true;
    if (turned) st = agree(t, k, other, value);
    for (int a = 0; a < t->grid->dim && !st; a++) {
        double one[3] = {k[0], k[1], k[2]};
        if (t->grid->wall[a] == MT_PERIODIC || k[a] == 0) continue;
        one[a] = -k[a];
        st = agree(t, k, one, value);
    }
    return st;
}

static mt_status fill(const tabulation *t, const mt_spectrum *s, double *table) {
    size_t modes = s->columns * (size_t)s->length, every = modes / MOST_CHECKED + 1, i = 0;
    mt_status st = MT_OK;
    for (size_t j = 0; j < s->columns && !st; j++) {
        int mode[3];
        mt_spectrum_column(s, j, mode);
        for (int m = 0; m < s->length && !st; m++, i++) {
            double k[3] = {0, 0, 0};
            mode[s->outer] = m;
            for (int a = 0; a < t->grid->dim; a++) k[a] = s->k[a][mode[a]];
            st = value_at(t, k, &table[i]);
            if (!st && i % every == 0) st = check_even(t, k, table[i]);
        }
    }
    return st;
}

mt_status mt_filter_new(mt_symbol **out, mt_forms *forms, const mt_spectrum *spectrum, const char *name,
                        mt_filter_function function, mt_error *err) {
    tabulation t = {spectrum->grid, &function, name, err};
    mt_symbol *s;
    *out = NULL;
    mt_status st =
        mt_symbol_new(&s, forms, MT_SYMBOL_FILTER, name, (mt_grid *)(uintptr_t)spectrum->grid, err);
    if (st) {
        if (function.release) function.release(function.ctx);
        return st;
    }
    s->at = function.at, s->release = function.release, s->ctx = function.ctx;
    st = mt_new(&s->table, spectrum->columns * (size_t)spectrum->length, sizeof(double), "a filter", err);
    if (!st) st = fill(&t, spectrum, s->table);
    if (st) {
        mt_symbol_unref(&s);
        return st;
    }
    *out = s;
    return MT_OK;
}

mt_status mt_filter_at(const mt_symbol *filter, const double k[3], double *value, mt_error *err) {
    mt_filter_function function = {filter->at, NULL, filter->ctx};
    tabulation t = {filter->grid, &function, filter->name, err};
    return value_at(&t, k, value);
}
