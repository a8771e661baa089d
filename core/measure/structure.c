#include "core/measure/structure.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

static const double pi = 3.14159265358979323846;

typedef struct shells {
    const mt_spectrum *s;
    double width, total;
    mt_structure *out;
} shells;

/* Cosine modes lie on the bounds of shells; the small term keeps rounding from choosing sides. */
static void add_mode(shells *x, double k, double s, double count) {
    int shell = (int)(k / x->width + 0.5 + 1e-9);
    x->total += count * s;
    if (shell < 1 || shell > x->out->shells) return;
    x->out->k[shell - 1] += count * k;
    x->out->s[shell - 1] += count * s;
    x->out->modes[shell - 1] += count;
}

static void add_column(shells *x, const double *column, const int mode[3]) {
    const mt_spectrum *s = x->s;
    const mt_grid *g = s->grid;
    int m[3] = {mode[0], mode[1], mode[2]}, width = s->complex ? 2 : 1;
    for (int i = 0; i < s->length; i++) {
        m[s->outer] = i;
        double k2 = 0, w = 1, count = 1;
        bool dropped = false;
        for (int a = 0; a < g->dim; a++) {
            k2 += s->k[a][m[a]] * s->k[a][m[a]];
            if (a == s->half)
                count = s->weight[a][m[a]];
            else
                w *= s->weight[a][m[a]];
            dropped = dropped || (g->wall[a] == MT_PERIODIC && g->n[a] > 1 && 2 * m[a] == g->n[a]);
        }
        const double *u = column + i * width;
        double square = u[0] * u[0] + (width == 2 ? u[1] * u[1] : 0);
        if (k2 > 0 && !dropped) add_mode(x, sqrt(k2), g->volume * w * square, count);
    }
}

static void average(mt_structure *t) {
    for (int i = 0; i < t->shells; i++) {
        if (t->modes[i] > 0)
            t->k[i] /= t->modes[i], t->s[i] /= t->modes[i];
        else
            t->k[i] = (i + 1) * t->width;
    }
}

static double first_moment(const mt_structure *t) {
    double ks = 0, sum = 0;
    for (int i = 0; i < t->shells; i++) ks += t->k[i] * t->s[i], sum += t->s[i];
    return sum > 0 ? ks / sum : NAN;
}

/* Maximum of the parabola through (k, log S) of three shells, not evenly spaced (Lagrange); the highest shell
 * itself where there is none. */
static double peak_of(const mt_structure *t) {
    int top = 0;
    for (int i = 0; i < t->shells; i++)
        if (t->s[i] > t->s[top]) top = i;
    if (!(t->s[top] > 0)) return NAN;
    const double *k = t->k + top, *s = t->s + top;
    if (top == 0 || top == t->shells - 1 || !(s[-1] > 0) || !(s[1] > 0)) return k[0];
    double a = k[-1] - k[0], b = k[1] - k[0], u = log(s[-1] / s[0]), v = log(s[1] / s[0]);
    double curve = (v / b - u / a) / (b - a), slope = u / a - curve * a;
    return curve < 0 ? k[0] - 0.5 * slope / curve : k[0];
}

static mt_status make_shells(const mt_grid *g, double width, mt_structure *out, mt_error *err) {
    double nyquist = INFINITY;
    for (int a = 0; a < g->dim; a++)
        if (g->n[a] > 1) nyquist = fmin(nyquist, pi / g->h[a]);
    out->shells = isfinite(nyquist) ? (int)(nyquist / width - 0.5 + 1e-9) : 0;
    if (out->shells < 1) out->shells = 1;
    out->width = width;
    size_t n = (size_t)out->shells;
    mt_status st = mt_new(&out->k, n, sizeof(double), "the structure factor", err);
    if (!st) st = mt_new(&out->s, n, sizeof(double), "the structure factor", err);
    if (!st) st = mt_new(&out->modes, n, sizeof(double), "the structure factor", err);
    return st;
}

mt_status mt_structure_of(mt_sweeper *sweeper, const double *a, mt_structure *out, mt_error *err) {
    const mt_grid *g = mt_sweeper_grid(sweeper);
    const mt_spectrum *s = mt_sweeper_spectrum(sweeper);
    double *u = NULL, *work = NULL, longest = 0;
    int mode[3];
    memset(out, 0, sizeof *out);
    for (int i = 0; i < g->dim; i++)
        if (g->n[i] > 1) longest = fmax(longest, g->n[i] * g->h[i]);
    if (!(longest > 0)) longest = g->h[0]; /* a single cell: no modes */
    shells x = {.s = s, .width = 2 * pi / longest, .out = out};
    mt_status st = make_shells(g, x.width, out, err);
    if (!st) st = mt_new(&u, s->doubles, sizeof *u, "the structure factor", err);
    if (!st) st = mt_new(&work, mt_sweeper_work_doubles(sweeper), sizeof *work, "the structure factor", err);
    if (!st) st = mt_transform_forward(sweeper, a, 0, u, work, err);
    for (size_t j = 0; j < s->columns && !st; j++) {
        mt_spectrum_column(s, j, mode);
        add_column(&x, u + j * s->stride, mode);
    }
    mt_free(u), mt_free(work);
    if (st) {
        mt_structure_free(out);
        return st;
    }
    out->variance = x.total / g->volume;
    average(out);
    out->first = first_moment(out);
    out->wavelength = 2 * pi / out->first;
    out->peak = 2 * pi / peak_of(out);
    return MT_OK;
}

void mt_structure_free(mt_structure *s) {
    mt_free(s->k), mt_free(s->s), mt_free(s->modes);
    memset(s, 0, sizeof *s);
}
