#include "core/measure/profile.h"

#include <math.h>

/* Sum over the cells of plane i across the axis of (a - shift), or of its square. */
static double plane_sum(const mt_grid *g, const double *a, int axis, int i, double shift, bool squared) {
    size_t stride = 1, n = (size_t)g->n[axis];
    double sum = 0;
    for (int k = 0; k < axis; k++) stride *= (size_t)g->n[k];
    for (size_t outer = (size_t)i * stride; outer < g->cells; outer += stride * n) {
        double row = 0;
        for (size_t j = outer; j < outer + stride; j++)
            row += squared ? (a[j] - shift) * (a[j] - shift) : a[j] - shift;
        sum += row;
    }
    return sum;
}

void mt_profile_along(const mt_grid *g, const double *a, int axis, double *mean, double *deviation) {
    double cells = (double)(g->cells / (size_t)g->n[axis]);
    for (int i = 0; i < g->n[axis]; i++) {
        mean[i] = plane_sum(g, a, axis, i, 0, false) / cells;
        if (deviation) deviation[i] = sqrt(plane_sum(g, a, axis, i, mean[i], true) / cells);
    }
}

static size_t cell_along(const mt_grid *g, int axis, double i) {
    double n = g->n[axis], period = g->wall[axis] == MT_MIRROR ? 2 * n : n;
    i -= period * floor(i / period);
    if (i >= n) i = 2 * n - 1 - i;
    return i > 0 ? (size_t)i : 0;
}

static double at(const mt_grid *g, const double *a, const double r[3]) {
    size_t low[3] = {0, 0, 0}, high[3] = {0, 0, 0};
    double w[3] = {0, 0, 0}, sum = 0;
    for (int k = 0; k < g->dim; k++) {
        double place = r[k] / g->h[k] - 0.5, first = floor(place);
        low[k] = cell_along(g, k, first), high[k] = cell_along(g, k, first + 1);
        w[k] = place - first;
    }
    for (int c = 0; c < 1 << g->dim; c++) {
        size_t i[3];
        double weight = 1;
        for (int k = 0; k < 3; k++) {
            i[k] = c >> k & 1 ? high[k] : low[k];
            weight *= c >> k & 1 ? w[k] : 1 - w[k];
        }
        if (weight != 0) sum += weight * a[(i[2] * (size_t)g->n[1] + i[1]) * (size_t)g->n[0] + i[0]];
    }
    return sum;
}

void mt_profile_between(const mt_grid *g, const double *a, const double from[], const double to[], int count,
                        double *value) {
    for (int i = 0; i < count; i++) {
        double r[3] = {0, 0, 0}, t = count > 1 ? (double)i / (count - 1) : 0;
        for (int k = 0; k < g->dim; k++) r[k] = from[k] + t * (to[k] - from[k]);
        value[i] = at(g, a, r);
    }
}
