#include "core/measure/interface.h"

#include <math.h>

#include "core/base/memory.h"
#include "core/measure/interface_inside.h"

/* --- the net of cell centres ------------------------------------------------------------------------------
 */

/* Corner i + d of a cube along one axis: index of its cell. Squares run from centre to centre; before the
 * first and behind the last centre of a mirror axis the reflected centre stands in, and half of that square
 * lies outside. */
static int corner(const mt_grid *g, int axis, int i) {
    int n = g->n[axis];
    if (g->wall[axis] == MT_PERIODIC) return (i + n) % n;
    return i < 0 ? 0 : i >= n ? n - 1 : i;
}

/* Range of squares along an axis and the share of square i that lies in the box. */
static int first_square(const mt_grid *g, int axis) {
    return g->wall[axis] == MT_MIRROR ? -1 : 0;
}
static double share(const mt_grid *g, int axis, int i) {
    return g->wall[axis] == MT_MIRROR && (i == -1 || i == g->n[axis] - 1) ? 0.5 : 1;
}

static double value(const mt_grid *g, const double *a, int x, int y, int z) {
    size_t nx = (size_t)g->n[0], ny = (size_t)g->n[1];
    return a[((size_t)z * ny + (size_t)y) * nx + (size_t)x];
}

/* --- 1-D and 2-D ------------------------------------------------------------------------------------------
 */

static double crossings(const mt_grid *g, const double *a, double level) {
    double n = 0;
    for (int i = 0; i < g->n[0]; i++) {
        if (i == g->n[0] - 1 && g->wall[0] == MT_MIRROR) break;
        n += (a[i] > level) != (a[corner(g, 0, i + 1)] > level);
    }
    return n;
}

typedef struct point2 {
    double x, y;
} point2;

/* Places on the sides of a unit square with corners v[0] (0,0), v[1] (1,0), v[2] (1,1), v[3] (0,1), in the
 * order of sides. */
static int side_points(const double v[4], double level, point2 p[4], int side[4]) {
    static const double x0[4] = {0, 1, 1, 0}, y0[4] = {0, 0, 1, 1};
    int n = 0;
    for (int s = 0; s < 4; s++) {
        int t = (s + 1) % 4;
        if ((v[s] > level) == (v[t] > level)) continue;
        double w = (level - v[s]) / (v[t] - v[s]);
        p[n] = (point2){x0[s] + w * (x0[t] - x0[s]), y0[s] + w * (y0[t] - y0[s])};
        side[n++] = s;
    }
    return n;
}

static void add_piece(const mt_grid *g, point2 a, point2 b, mt_facets *f) {
    double size = hypot((a.x - b.x) * g->h[0], (a.y - b.y) * g->h[1]);
    f->facet[f->n++] = (mt_facet){{0.5 * (a.x + b.x), 0.5 * (a.y + b.y), 0}, size};
}

static void cut_square(const mt_grid *g, const double v[4], double level, mt_facets *f) {
    point2 p[4];
    int side[4], n = side_points(v, level, p, side);
    if (n == 2) add_piece(g, p[0], p[1], f);
    if (n < 4) return;
    /* a saddle: the corners that agree with the centre are connected through it, so the pieces cut off the
     * other two */
    int first = ((v[0] + v[1] + v[2] + v[3]) / 4 > level) == (v[0] > level) ? 0 : 3;
    add_piece(g, p[first], p[(first + 1) % 4], f);
    add_piece(g, p[(first + 2) % 4], p[(first + 3) % 4], f);
}

static void walk_squares(const mt_grid *g, const double *a, double level, mt_facet_visit visit, void *ctx) {
    for (int y = first_square(g, 1); y < g->n[1]; y++) {
        int y0 = corner(g, 1, y), y1 = corner(g, 1, y + 1);
        for (int x = first_square(g, 0); x < g->n[0]; x++) {
            int x0 = corner(g, 0, x), x1 = corner(g, 0, x + 1);
            double v[4] = {value(g, a, x0, y0, 0), value(g, a, x1, y0, 0), value(g, a, x1, y1, 0),
                           value(g, a, x0, y1, 0)};
            mt_facets f = {.cube = {x, y, 0}, .share = share(g, 0, x) * share(g, 1, y)};
            cut_square(g, v, level, &f);
            if (f.n) visit(ctx, &f);
        }
    }
}

/* --- 3-D --------------------------------------------------------------------------------------------------
 */

typedef struct point3 {
    double r[3]; /* cells */
} point3;

static void add_triangle(const double h[3], point3 a, point3 b, point3 c, mt_facets *f) {
    double u[3], v[3];
    mt_facet *t = &f->facet[f->n++];
    for (int i = 0; i < 3; i++) {
        u[i] = (b.r[i] - a.r[i]) * h[i], v[i] = (c.r[i] - a.r[i]) * h[i];
        t->at[i] = (a.r[i] + b.r[i] + c.r[i]) / 3;
    }
    double n[3] = {u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]};
    t->size = 0.5 * sqrt(n[0] * n[0] + n[1] * n[1] + n[2] * n[2]);
}

static point3 between(const point3 *p, const double *v, int i, int j, double level) {
    double w = (level - v[i]) / (v[j] - v[i]);
    point3 q;
    for (int k = 0; k < 3; k++) q.r[k] = p[i].r[k] + w * (p[j].r[k] - p[i].r[k]);
    return q;
}

static void cut_tetrahedron(const double h[3], const point3 p[4], const double v[4], double level,
                            mt_facets *f) {
    int in[4], out[4], n = 0, m = 0;
    for (int i = 0; i < 4; i++) {
        if (v[i] > level)
            in[n++] = i;
        else
            out[m++] = i;
    }
    if (n == 0 || m == 0) return;
    if (n == 2) {
        point3 a = between(p, v, in[0], out[0], level), b = between(p, v, in[0], out[1], level);
        point3 c = between(p, v, in[1], out[1], level), d = between(p, v, in[1], out[0], level);
        add_triangle(h, a, b, c, f);
        add_triangle(h, a, c, d, f);
        return;
    }
    const int *one = n == 1 ? in : out, *three = n == 1 ? out : in;
    add_triangle(h, between(p, v, one[0], three[0], level), between(p, v, one[0], three[1], level),
                 between(p, v, one[0], three[2], level), f);
}

/* Six tetrahedra around the diagonal from corner 0 to corner 7 (corner bits: x 1, y 2, z 4). */
static void cut_cube(const mt_grid *g, const double v[8], double level, mt_facets *f) {
    static const int paths[6][4] = {{0, 1, 3, 7}, {0, 1, 5, 7}, {0, 2, 3, 7},
                                    {0, 2, 6, 7}, {0, 4, 5, 7}, {0, 4, 6, 7}};
    int above = 0;
    for (int i = 0; i < 8; i++) above += v[i] > level;
    for (int t = 0; t < 6 && above > 0 && above < 8; t++) {
        point3 p[4];
        double w[4];
        for (int i = 0; i < 4; i++) {
            int c = paths[t][i];
            w[i] = v[c];
            for (int k = 0; k < 3; k++) p[i].r[k] = c >> k & 1;
        }
        cut_tetrahedron(g->h, p, w, level, f);
    }
}

static void walk_cubes(const mt_grid *g, const double *a, double level, mt_facet_visit visit, void *ctx) {
    for (int z = first_square(g, 2); z < g->n[2]; z++)
        for (int y = first_square(g, 1); y < g->n[1]; y++)
            for (int x = first_square(g, 0); x < g->n[0]; x++) {
                double v[8];
                for (int c = 0; c < 8; c++)
                    v[c] = value(g, a, corner(g, 0, x + (c & 1)), corner(g, 1, y + (c >> 1 & 1)),
                                 corner(g, 2, z + (c >> 2 & 1)));
                mt_facets f;
                f.n = 0;
                cut_cube(g, v, level, &f);
                if (!f.n) continue;
                f.cube[0] = x, f.cube[1] = y, f.cube[2] = z;
                f.share = share(g, 0, x) * share(g, 1, y) * share(g, 2, z);
                visit(ctx, &f);
            }
}

void mt_interface_walk(const mt_grid *g, const double *a, double level, mt_facet_visit visit, void *ctx) {
    if (g->dim == 2) walk_squares(g, a, level, visit, ctx);
    if (g->dim == 3) walk_cubes(g, a, level, visit, ctx);
}

/* Sums many small numbers with the rounding of one sum kept aside (Neumaier, ZAMM 54 (1974) 39; from memory).
 */
typedef struct total {
    double sum, rest;
} total;

static void add_facets(void *ctx, const mt_facets *f) {
    total *t = ctx;
    double size = 0;
    for (int i = 0; i < f->n; i++) size += f->facet[i].size;
    size *= f->share;
    double next = t->sum + size;
    t->rest += t->sum >= size ? (t->sum - next) + size : (size - next) + t->sum;
    t->sum = next;
}

double mt_interface_measure(const mt_grid *g, const double *a, double level) {
    total t = {0, 0};
    if (g->dim == 1) return crossings(g, a, level);
    mt_interface_walk(g, a, level, add_facets, &t);
    return t.sum + t.rest;
}

double mt_interface_spacing(const mt_grid *g, double measured) {
    return measured > 0 ? g->volume / measured : NAN;
}

/* --- width ------------------------------------------------------------------------------------------------
 */

#define STEP 0.25 /* cells, of a walk along the line: the interpolant does not turn twice within it */

typedef struct series {
    int modes, steps; /* of a walk along the whole line */
    double step;      /* wavenumber of mode 1, per cell */
    double *a, *b;
} series;

static const double pi = 3.14159265358979323846;

/* Coefficients by direct sums; the centre of cell j lies at j + 1/2. */
static void analyse(series *s, int n, mt_wall wall, const double *v) {
    s->modes = wall == MT_PERIODIC ? (n + 1) / 2 : n;
    s->step = (wall == MT_PERIODIC ? 2 : 1) * pi / n;
    for (int m = 0; m < s->modes; m++) {
        double scale = (m ? 2.0 : 1.0) / n;
        s->a[m] = s->b[m] = 0;
        for (int j = 0; j < n; j++) {
            s->a[m] += scale * v[j] * cos(s->step * m * (j + 0.5));
            if (wall == MT_PERIODIC) s->b[m] += scale * v[j] * sin(s->step * m * (j + 0.5));
        }
    }
}

static double at(const series *s, double x) {
    double v = 0;
    for (int m = 0; m < s->modes; m++) v += s->a[m] * cos(s->step * m * x) + s->b[m] * sin(s->step * m * x);
    return v;
}

static double bisect(const series *s, double low, double high, double level) {
    bool side = at(s, low) > level;
    for (int k = 0; k < 60; k++) {
        double mid = 0.5 * (low + high);
        if ((at(s, mid) > level) == side)
            low = mid;
        else
            high = mid;
    }
    return 0.5 * (low + high);
}

/* Walks from x in steps d until the line passes `level`, in at most one length of the line; gives up where it
 * passes `barrier` first (NaN: none). */
static bool passes(const series *s, double x, double d, double level, double barrier, double *where) {
    double before = at(s, x);
    for (int i = 0; i < s->steps; i++, x += d) {
        double next = at(s, x + d);
        if ((next > level) != (before > level)) {
            *where = bisect(s, x, x + d, level);
            return true;
        }
        if ((next > barrier) != (before > barrier) && i > 0) return false;
        before = next;
    }
    return false;
}

static bool width_of(const series *s, double low, double high, double *width) {
    double middle, p, q, half = 0.5 * (low + high);
    if (!passes(s, 0.5, STEP, half, NAN, &middle)) return false;
    double before = low + 0.1 * (high - low), behind = low + 0.9 * (high - low);
    if ((at(s, middle + 0.01) > half) != (behind > before)) { /* falling */
        double swap = before;
        before = behind;
        behind = swap;
    }
    if (!passes(s, middle, -STEP, before, half, &p)) return false;
    if (!passes(s, middle, STEP, behind, half, &q)) return false;
    *width = q - p;
    return true;
}

mt_status mt_interface_width(int n, double h, mt_wall wall, const double *a, double low, double high,
                             double *width, mt_error *err) {
    series s = {.steps = (int)(n / STEP)};
    *width = NAN;
    MT_REQUIRE(n > 0 && h > 0, err);
    mt_status st = mt_new(&s.a, (size_t)n, sizeof(double), "a line", err);
    if (!st) st = mt_new(&s.b, (size_t)n, sizeof(double), "a line", err);
    if (!st) {
        analyse(&s, n, wall, a);
        if (width_of(&s, low, high, width))
            *width *= h;
        else
            st = mt_fail(err, MT_EINPUT,
                         "the line does not pass from 10 %% to 90 %% between %.4g and %.4g around its first "
                         "middle: there is no interface to measure the width of; give the two plateaus",
                         low, high);
    }
    mt_free(s.a), mt_free(s.b);
    return st;
}
