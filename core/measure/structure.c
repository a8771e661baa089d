#include "core/measure/structure.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/modes_inside.h"

static const double pi = 3.14159265358979323846;

typedef struct shells {
    double width, total;
    mt_structure *out;
} shells;

static void add_mode(void *ctx, const double kv[3], double s, double count) {
    shells *x = ctx;
    double k = sqrt(kv[0] * kv[0] + kv[1] * kv[1] + kv[2] * kv[2]);
    int shell = mt_shell_of(k, x->width);
    x->total += count * s;
    if (shell < 1 || shell > x->out->shells) return;
    x->out->k[shell - 1] += count * k;
    x->out->s[shell - 1] += count * s;
    x->out->modes[shell - 1] += count;
}

static void average(mt_structure *t) {
    for (int i = 0; i < t->shells; i++) {
        if (t->modes[i] > 0)
            t->k[i] /= t->modes[i], t->s[i] /= t->modes[i];
        else
            t->k[i] = (i + 1) * t->width;
    }
}

/* Mean of k^power, weighted by S. */
static double moment(const mt_structure *t, int power) {
    double ks = 0, sum = 0;
    for (int i = 0; i < t->shells; i++)
        ks += (power == 2 ? t->k[i] * t->k[i] : t->k[i]) * t->s[i], sum += t->s[i];
    return sum > 0 ? ks / sum : NAN;
}

static int highest(const mt_structure *t) {
    int top = 0;
    for (int i = 0; i < t->shells; i++)
        if (t->s[i] > t->s[top]) top = i;
    return top;
}

/* Where S passes half of its highest value on the way from the highest shell, one way; NaN: nowhere. */
static double half_height(const mt_structure *t, int top, int way) {
    double half = 0.5 * t->s[top];
    for (int i = top + way; i >= 0 && i < t->shells; i += way) {
        if (t->s[i] > half) continue;
        double w = (half - t->s[i]) / (t->s[i - way] - t->s[i]);
        return t->k[i] + w * (t->k[i - way] - t->k[i]);
    }
    return NAN;
}

/* Maximum of the parabola through (k, log S) of three shells, not evenly spaced (Lagrange); the highest shell
 * itself where there is none. */
static double peak_of(const mt_structure *t) {
    int top = highest(t);
    if (!(t->s[top] > 0)) return NAN;
    const double *k = t->k + top, *s = t->s + top;
    if (top == 0 || top == t->shells - 1 || !(s[-1] > 0) || !(s[1] > 0)) return k[0];
    double a = k[-1] - k[0], b = k[1] - k[0], u = log(s[-1] / s[0]), v = log(s[1] / s[0]);
    double curve = (v / b - u / a) / (b - a), slope = u / a - curve * a;
    return curve < 0 ? k[0] - 0.5 * slope / curve : k[0];
}

static mt_status make_shells(const mt_grid *g, mt_structure *out, mt_error *err) {
    mt_shells_of(g, &out->shells, &out->width);
    size_t n = (size_t)out->shells;
    mt_status st = mt_new(&out->k, n, sizeof(double), "the structure factor", err);
    if (!st) st = mt_new(&out->s, n, sizeof(double), "the structure factor", err);
    if (!st) st = mt_new(&out->modes, n, sizeof(double), "the structure factor", err);
    return st;
}

static void read_lengths(mt_structure *out) {
    int top = highest(out);
    out->first = moment(out, 1);
    out->second = moment(out, 2);
    out->deviation = sqrt(fmax(0, out->second - out->first * out->first));
    if (isnan(out->first)) out->deviation = NAN;
    out->wavelength = 2 * pi / out->first;
    out->peak_k = peak_of(out);
    out->peak = 2 * pi / out->peak_k;
    out->half_width = out->s[top] > 0 ? half_height(out, top, 1) - half_height(out, top, -1) : NAN;
}

mt_status mt_structure_of(mt_sweeper *sweeper, const double *a, mt_structure *out, mt_error *err) {
    const mt_grid *g = mt_sweeper_grid(sweeper);
    memset(out, 0, sizeof *out);
    mt_status st = make_shells(g, out, err);
    shells x = {.width = out->width, .out = out};
    if (!st) st = mt_modes_visit(sweeper, a, add_mode, &x, err);
    if (st) {
        mt_structure_free(out);
        return st;
    }
    out->variance = x.total / g->volume;
    average(out);
    read_lengths(out);
    return MT_OK;
}

void mt_structure_free(mt_structure *s) {
    mt_free(s->k), mt_free(s->s), mt_free(s->modes);
    memset(s, 0, sizeof *s);
}
