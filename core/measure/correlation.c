#include "core/measure/correlation.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/modes_inside.h"

#define FINER 16 /* steps of k to a shell */

static const double pi = 3.14159265358979323846;

typedef struct steps {
    int dim, n;
    double width, total;
    double *k, *s; /* k: sum of s k while gathering, then the mean */
} steps;

static void add_mode(void *ctx, const double kv[3], double s, double count) {
    steps *x = ctx;
    double k = sqrt(kv[0] * kv[0] + kv[1] * kv[1] + kv[2] * kv[2]);
    int i = (int)(k / x->width);
    if (i >= x->n) i = x->n - 1;
    x->k[i] += count * s * k;
    x->s[i] += count * s;
    x->total += count * s;
}

static mt_status make_steps(const mt_grid *g, steps *x, mt_error *err) {
    double corner = 0;
    int shells;
    mt_shells_of(g, &shells, &x->width);
    for (int a = 0; a < g->dim; a++) corner += pi / g->h[a] * (pi / g->h[a]);
    x->dim = g->dim;
    x->width /= FINER;
    x->n = (int)(sqrt(corner) / x->width) + 1;
    mt_status st = mt_new(&x->k, (size_t)x->n, sizeof(double), "the correlation", err);
    return st ? st : mt_new(&x->s, (size_t)x->n, sizeof(double), "the correlation", err);
}

static double phi(int dim, double x) {
    if (dim == 1) return cos(x);
    return dim == 2 ? j0(x) : x > 1e-8 ? sin(x) / x : 1;
}

static double at(const steps *x, double r) {
    double sum = 0;
    for (int i = 0; i < x->n; i++)
        if (x->s[i] > 0) sum += x->s[i] * phi(x->dim, x->k[i] * r);
    return sum / x->total;
}

static double zero_between(const steps *x, double low, double high) {
    for (int i = 0; i < 50; i++) {
        double mid = 0.5 * (low + high);
        if (at(x, mid) > 0)
            low = mid;
        else
            high = mid;
    }
    return 0.5 * (low + high);
}

/* Highest point of the parabola through three evenly spaced values. */
static double top(const double *c, double r, double h) {
    double curve = c[-1] - 2 * c[0] + c[1];
    return curve < 0 ? r + 0.5 * h * (c[-1] - c[1]) / curve : r;
}

static void read_lengths(const steps *x, mt_correlation *out) {
    int i = 1;
    out->zero = out->spacing = NAN;
    while (i < out->count && !(out->c[i] <= 0)) i++;
    if (i >= out->count) return;
    out->zero = zero_between(x, out->r[i - 1], out->r[i]);
    for (i++; i + 1 < out->count; i++) {
        if (!(out->c[i] > out->c[i - 1] && out->c[i] >= out->c[i + 1])) continue;
        out->spacing = top(out->c + i, out->r[i], out->r[1]);
        return;
    }
}

static mt_status make_places(const mt_grid *g, mt_correlation *out, mt_error *err) {
    double h = INFINITY, reach = INFINITY;
    for (int a = 0; a < g->dim; a++) {
        if (g->n[a] < 2) continue;
        h = fmin(h, g->h[a]);
        reach = fmin(reach, g->n[a] * g->h[a] * (g->wall[a] == MT_MIRROR ? 1 : 0.5));
    }
    out->count = isfinite(h) ? (int)(reach / h * (1 + 1e-12)) + 1 : 1;
    mt_status st = mt_new(&out->block, 2 * (size_t)out->count, sizeof *out->block, "the correlation", err);
    if (st) return st;
    out->r = out->block, out->c = out->r + out->count;
    for (int i = 0; i < out->count; i++) out->r[i] = i ? i * h : 0;
    return MT_OK;
}

mt_status mt_correlation_of(mt_sweeper *sweeper, const double *a, mt_correlation *out, mt_error *err) {
    const mt_grid *g = mt_sweeper_grid(sweeper);
    steps x = {0};
    memset(out, 0, sizeof *out);
    mt_status st = make_places(g, out, err);
    if (!st) st = make_steps(g, &x, err);
    if (!st) st = mt_modes_visit(sweeper, a, add_mode, &x, err);
    if (!st) {
        for (int i = 0; i < x.n; i++)
            if (x.s[i] > 0) x.k[i] /= x.s[i];
        for (int i = 0; i < out->count; i++) out->c[i] = x.total > 0 ? at(&x, out->r[i]) : NAN;
        read_lengths(&x, out);
    }
    mt_free(x.k), mt_free(x.s);
    if (st) mt_correlation_free(out);
    return st;
}

void mt_correlation_free(mt_correlation *c) {
    mt_free(c->block);
    memset(c, 0, sizeof *c);
}
