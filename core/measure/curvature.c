#include "core/measure/curvature.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/interface_inside.h"
#include "core/measure/tensor_inside.h"

static const double pi = 3.14159265358979323846;

#define REACH 4 /* standard deviations either way that classes cover */

/* --- derivatives of the field at a cell -------------------------------------------------------------------
 *
 * xx, yy, zz, xy, yz, zx as in the moments of domains. */

typedef struct jet {
    double d[3], dd[6];
} jet;

static const int first_of[6] = {0, 1, 2, 0, 1, 2}, second_of[6] = {0, 1, 2, 1, 2, 0};
static const double slope[4] = {1.0 / 12, -8.0 / 12, 8.0 / 12, -1.0 / 12}; /* at -2, -1, 1, 2 */
static const double bend[4] = {-1.0 / 12, 16.0 / 12, 16.0 / 12, -1.0 / 12};
#define BEND_HERE (-30.0 / 12)

static int cell_along(const mt_grid *g, int axis, int i) {
    int n = g->n[axis];
    if (i >= 0 && i < n) return i;
    if (g->wall[axis] == MT_PERIODIC) return ((i % n) + n) % n;
    i = ((i % (2 * n)) + 2 * n) % (2 * n);
    return i < n ? i : 2 * n - 1 - i;
}

/* Steps in the array from a cell to those two and one before and behind it along each axis. */
typedef struct place {
    const double *here;
    ptrdiff_t to[3][4];
} place;

static place place_of(const mt_grid *g, const double *c, const int cell[3]) {
    static const int off[4] = {-2, -1, 1, 2};
    place p = {.here = c};
    ptrdiff_t stride = 1;
    for (int a = 0; a < g->dim; a++) {
        int at = cell_along(g, a, cell[a]);
        p.here += at * stride;
        for (int k = 0; k < 4; k++) p.to[a][k] = (cell_along(g, a, cell[a] + off[k]) - at) * stride;
        stride *= g->n[a];
    }
    return p;
}

static double weighted(const double *here, const ptrdiff_t to[4], const double w[4]) {
    return w[0] * here[to[0]] + w[1] * here[to[1]] + w[2] * here[to[2]] + w[3] * here[to[3]];
}

static double along(const place *p, int a, const double w[4]) {
    return weighted(p->here, p->to[a], w);
}

static double mixed(const place *p, int a, int b) {
    double sum = 0;
    for (int k = 0; k < 4; k++) sum += slope[k] * weighted(p->here + p->to[a][k], p->to[b], slope);
    return sum;
}

static jet jet_at(const mt_grid *g, const double *c, const int cell[3]) {
    place p = place_of(g, c, cell);
    jet j = {{0}, {0}};
    for (int a = 0; a < g->dim; a++) j.d[a] = along(&p, a, slope) / g->h[a];
    for (int m = 0; m < 6; m++) {
        int a = first_of[m], b = second_of[m];
        if (a >= g->dim || b >= g->dim) continue;
        double sum = a == b ? along(&p, a, bend) + BEND_HERE * *p.here : mixed(&p, a, b);
        j.dd[m] = sum / (g->h[a] * g->h[b]);
    }
    return j;
}

static void add_jet(jet *sum, const jet *j, double w) {
    for (int a = 0; a < 3; a++) sum->d[a] += w * j->d[a];
    for (int m = 0; m < 6; m++) sum->dd[m] += w * j->dd[m];
}

/* Linear in each direction between the corners of a square or cube. */
static jet jet_between(const jet *corner, int corners, const double at[3]) {
    jet sum = {{0}, {0}};
    for (int c = 0; c < corners; c++) {
        double w = 1;
        for (int a = 0; a < 3; a++)
            if (1 << a < corners) w *= c >> a & 1 ? at[a] : 1 - at[a];
        add_jet(&sum, &corner[c], w);
    }
    return sum;
}

/* --- what a jet says --------------------------------------------------------------------------------------
 */

typedef struct view {
    double normal[3], mean, gauss;
} view;

static double adjoint_form(const jet *j) {
    const double *h = j->dd, *d = j->d; /* xx, yy, zz, xy, yz, zx */
    double xx = h[1] * h[2] - h[4] * h[4], yy = h[0] * h[2] - h[5] * h[5], zz = h[0] * h[1] - h[3] * h[3];
    double xy = h[4] * h[5] - h[3] * h[2], yz = h[3] * h[5] - h[4] * h[0], zx = h[3] * h[4] - h[5] * h[1];
    return d[0] * d[0] * xx + d[1] * d[1] * yy + d[2] * d[2] * zz +
           2 * (d[0] * d[1] * xy + d[1] * d[2] * yz + d[2] * d[0] * zx);
}

/* False where the field is flat. sign: -1 for the phase above. */
static bool look(int dim, const jet *j, double sign, view *v) {
    double square = 0, form = 0;
    for (int a = 0; a < 3; a++) square += j->d[a] * j->d[a];
    double size = sqrt(square);
    if (!(size > 0) || !isfinite(size)) return false;
    for (int a = 0; a < 3; a++) v->normal[a] = sign * j->d[a] / size;
    for (int m = 0; m < 6; m++) form += (m < 3 ? 1 : 2) * j->dd[m] * j->d[first_of[m]] * j->d[second_of[m]];
    double divergence = sign * (square * (j->dd[0] + j->dd[1] + j->dd[2]) - form) / (square * size);
    v->mean = dim == 3 ? divergence / 2 : divergence;
    v->gauss = dim == 3 ? adjoint_form(j) / (square * square) : NAN;
    return isfinite(v->mean) && (dim == 2 || isfinite(v->gauss));
}

/* --- gathering --------------------------------------------------------------------------------------------
 */

typedef struct gather {
    const mt_grid *g;
    const double *a;
    mt_curvature *out;
    double sign, lost, square[2]; /* square: of mean and Gaussian curvature */
    bool sort;                    /* second time round: into classes */
} gather;

static void add_moments(gather *x, const view *v, double size) {
    mt_curvature *t = x->out;
    t->size += size;
    t->mean.integral += size * v->mean;
    x->square[0] += size * v->mean * v->mean;
    t->gauss.integral += size * v->gauss;
    x->square[1] += size * v->gauss * v->gauss;
    for (int m = 0; m < 6; m++) t->tensor[m] += size * v->normal[first_of[m]] * v->normal[second_of[m]];
}

static int class_of(double x, int n) {
    return x < 0 ? 0 : x < n ? (int)x : n - 1;
}

static void sort_bend(mt_bend *b, int classes, double value_of, double share) {
    if (isnan(value_of)) return;
    b->share[b->width > 0 ? class_of((value_of - b->low) / b->width, classes) : classes / 2] += share;
}

static void sort_view(gather *x, const view *v, double size) {
    mt_curvature *t = x->out;
    double share = size / t->size, turn = atan2(v->normal[1], v->normal[0]) / (2 * pi);
    int around = (int)floor(turn * t->azimuth + 0.5 + t->azimuth) % t->azimuth; /* turn from -1/2 to 1/2 */
    int down = class_of((1 - v->normal[2]) / 2 * t->polar, t->polar);
    t->facing[(x->g->dim == 3 ? down : 0) * t->azimuth + around] += share;
    sort_bend(&t->mean, t->classes, v->mean, share);
    sort_bend(&t->gauss, t->classes, v->gauss, share);
}

static void visit(void *ctx, const mt_facets *f) {
    gather *x = ctx;
    jet corner[8];
    int corners = 1 << x->g->dim;
    for (int c = 0; c < corners; c++) {
        int cell[3] = {f->cube[0] + (c & 1), f->cube[1] + (c >> 1 & 1), f->cube[2] + (c >> 2 & 1)};
        corner[c] = jet_at(x->g, x->a, cell);
    }
    for (int i = 0; i < f->n; i++) {
        view v;
        double size = f->share * f->facet[i].size;
        jet j = jet_between(corner, corners, f->facet[i].at);
        if (!look(x->g->dim, &j, x->sign, &v))
            x->lost += size;
        else if (x->sort)
            sort_view(x, &v, size);
        else
            add_moments(x, &v, size);
    }
}

static void set_classes(mt_bend *b, double size, double square, int classes) {
    b->mean = b->integral / size;
    b->deviation = sqrt(fmax(0, square / size - b->mean * b->mean));
    if (isnan(b->mean)) b->deviation = NAN;
    b->low = b->mean - REACH * b->deviation;
    b->width = 2 * REACH * b->deviation / classes;
}

static void read_tensor(const mt_grid *g, mt_curvature *t) {
    double m[3][3], value_of[3], vector[3][3];
    for (int i = 0; i < 6; i++) {
        t->tensor[i] /= t->size;
        m[first_of[i]][second_of[i]] = m[second_of[i]][first_of[i]] = t->tensor[i];
    }
    mt_principal(m, value_of, vector);
    t->anisotropy = value_of[0] - value_of[g->dim - 1];
    for (int a = 0; a < 3; a++) t->preferred[a] = t->size > 0 ? vector[0][a] : NAN;
}

static mt_status make(const mt_grid *g, int classes, mt_curvature *t, mt_error *err) {
    t->classes = classes;
    t->polar = g->dim == 3 ? 13 : 1;
    t->azimuth = g->dim == 3 ? 24 : 36;
    size_t n = (size_t)classes;
    mt_status st = mt_new(&t->block, 2 * n + (size_t)(t->polar * t->azimuth), sizeof *t->block,
                          "classes of curvature", err);
    if (st) return st;
    t->mean.share = t->block, t->gauss.share = t->block + n, t->facing = t->block + 2 * n;
    return MT_OK;
}

mt_status mt_curvature_of(const mt_grid *g, const double *a, double level, bool above, int classes,
                          mt_curvature *out, mt_error *err) {
    memset(out, 0, sizeof *out);
    if (g->dim == 1)
        return mt_fail(err, MT_EINPUT, "on a line interfaces are points: they have no curvature");
    if (classes < 1 || classes > 10000)
        return mt_fail(err, MT_EINPUT, "%d classes of curvature; from 1 to 10000 are possible", classes);
    mt_status st = make(g, classes, out, err);
    if (st) return st;
    gather x = {.g = g, .a = a, .out = out, .sign = above ? -1 : 1};
    mt_interface_walk(g, a, level, visit, &x);
    out->lost = x.lost > 0 ? x.lost / (x.lost + out->size) : 0;
    set_classes(&out->mean, out->size, x.square[0], classes);
    set_classes(&out->gauss, out->size, x.square[1], classes);
    read_tensor(g, out);
    x.sort = true;
    mt_interface_walk(g, a, level, visit, &x);
    return MT_OK;
}

void mt_curvature_free(mt_curvature *c) {
    mt_free(c->block);
    memset(c, 0, sizeof *c);
}
