#include "core/measure/chords.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct line {
    const double *a;
    size_t stride;
    int n;
    double level;
    bool above;
} line;

static bool in(const line *l, int i) {
    return (l->a[(size_t)i * l->stride] > l->level) == l->above;
}

/* First cell that differs from the one before it; n: all cells agree. */
static int first_change(const line *l) {
    int i = 1;
    while (i < l->n && in(l, i) == in(l, i - 1)) i++;
    return i;
}

/* From a change on, once around. */
static void periodic_runs(const line *l, int start, mt_chord_axis *x) {
    int run = 0;
    for (int j = 0; j < l->n; j++) {
        if (in(l, (start + j) % l->n)) {
            run++;
        } else if (run) {
            x->number[run]++;
            run = 0;
        }
    }
    if (run) x->number[run]++; /* it ends where the line began, at a change */
}

static void mirror_runs(const line *l, mt_chord_axis *x) {
    int from = 0;
    for (int i = 1; i <= l->n; i++) {
        if (i < l->n && in(l, i) == in(l, from)) continue;
        bool wall = from == 0 || i == l->n;
        if (in(l, from)) x->number[wall ? 2 * (i - from) : i - from] += wall ? 0.5 : 1;
        from = i;
    }
}

/* Adds the line's chords; returns its cells on the side asked for where it has no end, else 0. */
static int add_line(const line *l, mt_wall wall, mt_chord_axis *x) {
    int start = first_change(l);
    if (start == l->n) return in(l, 0) ? l->n : 0;
    if (wall == MT_PERIODIC)
        periodic_runs(l, start, x);
    else
        mirror_runs(l, x);
    return 0;
}

static void sum_up(mt_chord_axis *x, double h, double endless_cells) {
    double cells = 0, squares = 0;
    for (int i = 1; i <= x->longest; i++) {
        x->chords += x->number[i];
        cells += x->number[i] * i;
        squares += x->number[i] * i * i;
    }
    x->mean = x->chords > 0 ? h * cells / x->chords : NAN;
    x->deviation = h * sqrt(fmax(0, squares / x->chords - cells / x->chords * (cells / x->chords)));
    if (!(x->chords > 0)) x->deviation = NAN;
    x->endless = endless_cells > 0 ? endless_cells / (cells + endless_cells) : 0;
}

static void along(const mt_grid *g, const double *a, double level, bool above, int axis, mt_chord_axis *x) {
    size_t stride = 1, n = (size_t)g->n[axis];
    for (int i = 0; i < axis; i++) stride *= (size_t)g->n[i];
    double endless = 0;
    for (size_t outer = 0; outer < g->cells; outer += stride * n)
        for (size_t inner = 0; inner < stride; inner++) {
            line l = {a + outer + inner, stride, g->n[axis], level, above};
            endless += add_line(&l, g->wall[axis], x);
        }
    sum_up(x, g->h[axis], endless);
}

mt_status mt_chords_find(const mt_grid *g, const double *a, double level, bool above, mt_chords *out,
                         mt_error *err) {
    size_t lengths = 0;
    memset(out, 0, sizeof *out);
    out->dim = g->dim;
    for (int i = 0; i < g->dim; i++) {
        out->axis[i].longest = (g->wall[i] == MT_MIRROR ? 2 : 1) * (g->n[i] - 1);
        lengths += (size_t)out->axis[i].longest + 1;
    }
    mt_status st = mt_new(&out->block, lengths, sizeof *out->block, "chord lengths", err);
    if (st) return st;
    double *number = out->block, chords = 0, length = 0;
    for (int i = 0; i < g->dim; i++) {
        mt_chord_axis *x = &out->axis[i];
        x->number = number;
        number += x->longest + 1;
        along(g, a, level, above, i, x);
        chords += x->chords;
        if (x->chords > 0) length += x->chords * x->mean;
    }
    out->mean = chords > 0 ? length / chords : NAN;
    return MT_OK;
}

void mt_chords_free(mt_chords *chords) {
    mt_free(chords->block);
    memset(chords, 0, sizeof *chords);
}
