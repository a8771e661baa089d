#include "core/motion/column.h"

#include <string.h>

#include "core/base/memory.h"
#include "core/base/vector.h"

#define LANES 8

static size_t line_doubles(const mt_spectrum *s) {
    return mt_round_up(2 * (size_t)s->length, 8);
}

size_t mt_column_doubles(const mt_model *m) {
    return (MT_LINES + 2 * (size_t)m->n) * line_doubles(m->program.spectrum) +
           mt_kernel_scratch(m->linear_factors.kernel);
}

static void weights(const mt_program *p, const mt_column *c, double *to) {
    const mt_spectrum *s = p->spectrum;
    const double *outer = s->weight[s->outer];
    for (int i = 0; i < c->length; i++) {
        double w = c->weight * outer[i];
        if (s->complex)
            to[2 * i] = to[2 * i + 1] = w;
        else
            to[i] = w;
    }
}

mt_lines mt_column_lines(mt_model *m, const mt_column *c, int worker) {
    mt_program *p = &m->program;
    mt_lines x = {.line = line_doubles(p->spectrum)};
    double *at = mt_program_scratch(p, worker);
    x.doubles = (size_t)c->length * (p->spectrum->complex ? 2 : 1);
    for (int i = 0; i < MT_LINES; i++) x.at[i] = at + (size_t)i * x.line;
    x.rhs = at + MT_LINES * x.line;
    x.middle = x.rhs + (size_t)m->n * x.line;
    x.middle_scratch = x.middle + (size_t)m->n * x.line;
    x.factors = mt_program_factor_lines(p, p->stages - 1, c, worker);
    weights(p, c, x.at[MT_LINE_WEIGHT]);
    return x;
}

void mt_column_spread(const mt_program *p, const double *lines, int factor, const mt_column *c, double *to) {
    size_t n = (size_t)c->length;
    const double *from = factor >= 0 ? lines + (size_t)factor * n : NULL;
    double constant = factor == -1 ? 1 : 0;
    if (!p->spectrum->complex) {
        if (from)
            memcpy(to, from, n * sizeof *to);
        else
            for (size_t i = 0; i < n; i++) to[i] = constant;
        return;
    }
    for (size_t i = 0; i < n; i++) to[2 * i] = to[2 * i + 1] = from ? from[i] : constant;
}

void mt_column_rhs(const mt_model *m, const mt_column *c, double *const in[], const mt_lines *x) {
    const mt_program *p = &m->program;
    for (int i = 0; i < m->n; i++) {
        double *r = x->rhs + (size_t)i * x->line;
        if (m->mover[i].motion == MT_MOTION_STILL) continue;
        memset(r, 0, x->doubles * sizeof(double));
        mt_program_add(p, p->stages - 1, &m->mover[i].sum, c, in, p->u, x->factors, i, r);
    }
}

MT_VECTOR_CLONES static double quadratic_line(const double *q, const double *weight, const double *u,
                                              size_t n) {
    double s[LANES] = {0}, t = 0;
    size_t i = 0;
    for (; i + LANES <= n; i += LANES)
        for (size_t j = 0; j < LANES; j++) s[j] += weight[i + j] * q[i + j] * u[i + j] * u[i + j];
    for (size_t j = 0; i < n; i++, j++) s[j] += weight[i] * q[i] * u[i] * u[i];
    for (int j = 0; j < LANES; j++) t += s[j];
    return t;
}

void mt_column_finish(const mt_model *m, const mt_column *c, double *const in[], double *const next[],
                      const mt_lines *x, double *tally, double *const out[]) {
    const mt_program *p = &m->program;
    double energy = 0;
    for (int i = 0; i < m->quadratics; i++) {
        const mt_quadratic *q = &m->quadratic[i];
        mt_column_spread(p, x->factors, q->factor, c, x->at[MT_LINE_SPARE]);
        energy += quadratic_line(x->at[MT_LINE_SPARE], x->at[MT_LINE_WEIGHT], next[q->mover] + c->offset,
                                 x->doubles);
    }
    tally[MT_TALLY * m->n] = energy;
    mt_program_quantities(p, 0, -1, c, in, next, x->factors, out);
}

double *mt_column_tally(const mt_model *m, const mt_column *c) {
    return m->column_tally + c->index * (MT_TALLY * (size_t)m->n + 1);
}

void mt_column_merge(mt_model *m) {
    size_t width = MT_TALLY * (size_t)m->n + 1;
    memset(m->totals, 0, width * sizeof(double));
    for (size_t c = 0; c < m->program.spectrum->columns; c++)
        for (size_t i = 0; i < width; i++) m->totals[i] += m->column_tally[c * width + i];
}
