#include "core/files/sketch.h"

/* Box i of `boxes` over n cells: first cell, one past the last, and what of those two lies within. Borders
 * are whole numbers over `boxes`, so no cell is lost to rounding. */
typedef struct span {
    int from, upto;
    double first, last; /* parts of the end cells, in cells */
} span;

static span box(int i, int boxes, int n) {
    int64_t low = (int64_t)i * n, high = low + n;
    span s = {(int)(low / boxes), (int)((high + boxes - 1) / boxes), 0, 0};
    s.first = 1 - (double)(low % boxes) / boxes;
    s.last = 1 - (double)((int64_t)s.upto * boxes - high) / boxes;
    if (s.upto - s.from == 1) s.first = s.last = (double)n / boxes;
    return s;
}

static double part(const span *s, int i) {
    return i == s->from ? s->first : i == s->upto - 1 ? s->last : 1;
}

static double mean(const double *plane, int nx, const span *x, const span *y) {
    double sum = 0, weight = 0;
    for (int j = y->from; j < y->upto; j++) {
        const double *row = plane + (size_t)j * (size_t)nx;
        for (int i = x->from; i < x->upto; i++) {
            double w = part(x, i) * part(y, j);
            sum += w * row[i];
            weight += w;
        }
    }
    return sum / weight;
}

mt_status mt_sketch(int dim, const int n[], const double *values, int width, int height, double *out,
                    mt_error *err) {
    MT_REQUIRE(dim >= 1 && dim <= 3 && n && values && out, err);
    MT_REQUIRE(width >= 1 && width <= 10000 && height >= 1 && height <= 10000, err);
    int nx = n[0], ny = dim > 1 ? n[1] : 1;
    const double *plane = values;
    if (dim == 3) plane += (size_t)(n[2] / 2) * (size_t)nx * (size_t)ny;
    for (int j = 0; j < height; j++) {
        span y = box(height - 1 - j, height, ny);
        for (int i = 0; i < width; i++) {
            span x = box(i, width, nx);
            out[(size_t)j * (size_t)width + (size_t)i] = mean(plane, nx, &x, &y);
        }
    }
    return MT_OK;
}
