#include "core/space/grid.h"

#include <limits.h>
#include <math.h>

#include "core/base/memory.h"

static const char axis_name[3] = {'x', 'y', 'z'};

static mt_status check(int dim, const int n[], const double h[], const mt_wall wall[], mt_error *err) {
    double cells = 1;
    if (dim < 1 || dim > 3) return mt_fail(err, MT_EINPUT, "a grid has 1, 2 or 3 axes, not %d", dim);
    for (int a = 0; a < dim; a++) {
        if (n[a] < 1)
            return mt_fail(err, MT_EINPUT, "the grid has %d cells along %c; at least 1 is needed", n[a],
                           axis_name[a]);
        if (!(h[a] > 0) || isinf(h[a]))
            return mt_fail(err, MT_EINPUT, "the spacing along %c is %g; it has to be positive and finite",
                           axis_name[a], h[a]);
        if (wall[a] != MT_PERIODIC && wall[a] != MT_MIRROR)
            return mt_fail(err, MT_EINPUT, "unknown kind of wall along %c", axis_name[a]);
        cells *= n[a];
    }
    if (cells > INT_MAX)
        return mt_fail(
            err, MT_EINPUT,
            "the grid has %.4g cells; one field alone would take %.4g GB, and at most %d cells are possible",
            cells, cells * 8e-9, INT_MAX);
    return MT_OK;
}

mt_status mt_grid_new(mt_grid **out, int dim, const int n[], const double h[], const mt_wall wall[],
                      mt_error *err) {
    mt_grid *g;
    *out = NULL;
    mt_status st = check(dim, n, h, wall, err);
    if (!st) st = mt_new(&g, 1, sizeof *g, "a grid", err);
    if (st) return st;
    g->refs = 1;
    g->dim = dim;
    g->cells = 1;
    g->cell_volume = 1;
    for (int a = 0; a < 3; a++) {
        g->n[a] = a < dim ? n[a] : 1;
        g->h[a] = a < dim ? h[a] : 1;
        g->wall[a] = a < dim ? wall[a] : MT_PERIODIC;
        g->cells *= (size_t)g->n[a];
        g->cell_volume *= g->h[a];
    }
    g->volume = (double)g->cells * g->cell_volume;
    *out = g;
    return MT_OK;
}

mt_grid *mt_grid_ref(mt_grid *grid) {
    grid->refs++;
    return grid;
}

void mt_grid_unref(mt_grid **grid) {
    mt_grid *g = *grid;
    *grid = NULL;
    if (g && --g->refs == 0) mt_free(g);
}

bool mt_grid_equal(const mt_grid *a, const mt_grid *b) {
    if (a->dim != b->dim) return false;
    for (int i = 0; i < a->dim; i++)
        if (a->n[i] != b->n[i] || a->h[i] != b->h[i] || a->wall[i] != b->wall[i]) return false;
    return true;
}

double mt_grid_wavenumber(const mt_grid *grid, int axis, int mode) {
    const double pi = 3.14159265358979323846;
    double length = grid->n[axis] * grid->h[axis];
    if (grid->wall[axis] == MT_MIRROR) return pi * mode / length;
    int signed_mode = mode > grid->n[axis] / 2 ? mode - grid->n[axis] : mode;
    return 2 * pi * signed_mode / length;
}
