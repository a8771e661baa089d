#include "core/measure/topology.h"

#include <math.h>
#include <stdlib.h>

static const double pi = 3.14159265358979323846;

/* --- configurations ---------------------------------------------------------------------------------------
 *
 * Blocks of 2 x 2 x 2 cells (2 x 2, 2): bit c of a configuration is corner c, whose bits are the steps along
 * x, y, z. Blocks stand at all places around periodic axes, and from one cell before the first to the last
 * cell along the others, where the cells outside are reflected or empty. */

typedef struct counts {
    double reflected[256]; /* blocks, those across a mirror wall counting one half for each wall crossed */
    double empty[256];     /* blocks, nothing beyond walls */
} counts;

static bool wraps(const mt_grid *g, int axis) {
    return g->wall[axis] == MT_PERIODIC && g->n[axis] > 1;
}

typedef struct corner {
    size_t at; /* offset of the cell, or of the one it is reflected to */
    bool out;
} corner;

static corner corner_along(const mt_grid *g, int axis, int i) {
    int n = g->n[axis];
    bool out = i < 0 || i >= n;
    if (!out) return (corner){(size_t)i, false};
    if (wraps(g, axis)) return (corner){(size_t)((i + n) % n), false};
    return (corner){(size_t)(i < 0 ? 0 : n - 1), true};
}

static double share_of(const mt_grid *g, int axis, int i) {
    return wraps(g, axis) || (i >= 0 && i < g->n[axis] - 1) ? 1 : 0.5;
}

/* One row of blocks: four rows of cells (two in 2-D, one in 1-D) meet in it. */
typedef struct block_row {
    const double *row[4]; /* of corners 0, 2, 4, 6 */
    bool out[4];
    int rows;
    double share, level;
    bool above;
} block_row;

/* Bits of the corners at cell x: reflected in the low byte, empty in the next; corner bit x is 0. */
static unsigned column_bits(const block_row *b, size_t x, bool x_out) {
    unsigned bits = 0;
    for (int r = 0; r < b->rows; r++) {
        if ((b->row[r][x] > b->level) != b->above) continue;
        bits |= 1u << 2 * r;
        if (!b->out[r] && !x_out) bits |= 256u << 2 * r;
    }
    return bits;
}

static void count_row(const mt_grid *g, const block_row *b, counts *n) {
    int first = wraps(g, 0) ? 0 : -1;
    corner c = corner_along(g, 0, first);
    unsigned left = column_bits(b, c.at, c.out);
    for (int x = first; x < g->n[0]; x++) {
        c = corner_along(g, 0, x + 1);
        unsigned right = column_bits(b, c.at, c.out), both = left | right << 1;
        n->reflected[both & 255] += b->share * share_of(g, 0, x);
        n->empty[both >> 8 & 255]++;
        left = right;
    }
}

static void count(const mt_grid *g, const double *a, double level, bool above, counts *n) {
    *n = (counts){{0}, {0}};
    size_t nx = (size_t)g->n[0], ny = (size_t)g->n[1];
    block_row b = {.rows = 1 << (g->dim - 1), .level = level, .above = above};
    for (int z = g->dim > 2 && !wraps(g, 2) ? -1 : 0; z < g->n[2]; z++)
        for (int y = g->dim > 1 && !wraps(g, 1) ? -1 : 0; y < g->n[1]; y++) {
            for (int r = 0; r < b.rows; r++) {
                corner cy = corner_along(g, 1, y + (r & 1)), cz = corner_along(g, 2, z + (r >> 1));
                b.row[r] = a + (cz.at * ny + cy.at) * nx;
                b.out[r] = cy.out || cz.out;
            }
            b.share = (g->dim > 1 ? share_of(g, 1, y) : 1) * (g->dim > 2 ? share_of(g, 2, z) : 1);
            count_row(g, &b, n);
        }
}

/* Number of placings of a set of corners that lies in the phase with all of it. Summed over the places of the
 * set in the block and divided by their number, each placing counts once. */
static double whole(const double *n, int dim, unsigned set) {
    double sum = 0;
    for (unsigned c = 0; c < 1u << (1 << dim); c++)
        if ((c & set) == set) sum += n[c];
    return sum;
}

/* --- elements of the block --------------------------------------------------------------------------------
 */

static unsigned bit(int c) {
    return 1u << c;
}

/* Sum over all faces of the block that stretch along the axes in `along`: cells (0), pairs, squares, cubes.
 */
static double faces(const double *n, int dim, int along) {
    int corners = 1 << dim, places = 0;
    double sum = 0;
    for (int base = 0; base < corners; base++) {
        unsigned set = 0;
        if (base & along) continue;
        for (int c = 0; c < corners; c++)
            if ((c & ~along) == base) set |= bit(c);
        sum += whole(n, dim, set);
        places++;
    }
    return sum / places;
}

/* Cells joined by faces: cells - pairs + squares - cubes, the complex of their centres. */
static double euler_by_faces(const double *n, int dim) {
    double sum = 0;
    for (int along = 0; along < 1 << dim; along++) {
        int axes = (along & 1) + (along >> 1 & 1) + (along >> 2 & 1);
        sum += axes % 2 ? -faces(n, dim, along) : faces(n, dim, along);
    }
    return sum;
}

/* Configurations of the other phase. */
static void complement(const double *n, int dim, double out[256]) {
    unsigned all = (1u << (1 << dim)) - 1;
    for (unsigned c = 0; c < 256; c++) out[c] = c <= all ? n[c ^ all] : 0;
}

/* A phase joined across corners is what is left by the other one joined by faces. */
static double euler(const double *n, int dim, bool full) {
    double other[256];
    if (!full) return euler_by_faces(n, dim);
    complement(n, dim, other);
    return (dim % 2 ? 1 : -1) * euler_by_faces(other, dim);
}

/* --- directions -------------------------------------------------------------------------------------------
 */

typedef struct direction {
    double u[3];   /* unit vector */
    double weight; /* share of all directions nearest to this one or its opposite */
} direction;

static double scale(double u[3]) {
    double length = sqrt(u[0] * u[0] + u[1] * u[1] + u[2] * u[2]);
    for (int a = 0; a < 3; a++) u[a] /= length;
    return length;
}

/* In a plane: halfway to the neighbours on either side. */
static void weigh_plane(direction *d, int n) {
    for (int i = 0; i < n; i++) {
        double angle = atan2(d[i].u[1], d[i].u[0]), before = pi, behind = pi;
        for (int j = 0; j < n; j++) {
            double apart = atan2(d[j].u[1], d[j].u[0]) - angle;
            apart -= pi * floor(apart / pi);
            if (j == i) continue;
            behind = fmin(behind, apart);
            before = fmin(before, pi - apart);
        }
        d[i].weight = n == 1 ? 1 : (before + behind) / (2 * pi);
    }
}

#define PATCH 96 /* squares along the side of a cube around the ball; weights are good to 1e-4 */

static void weigh_patch(direction *d, int n, int axis, double s, double t, double *total) {
    double v[3], best = 0, share = pow(1 + s * s + t * t, -1.5); /* solid angle of a square of the cube */
    int nearest = 0;
    v[axis] = 1, v[(axis + 1) % 3] = s, v[(axis + 2) % 3] = t;
    for (int i = 0; i < n; i++) {
        double near = fabs(v[0] * d[i].u[0] + v[1] * d[i].u[1] + v[2] * d[i].u[2]);
        if (near > best) best = near, nearest = i;
    }
    d[nearest].weight += share;
    *total += share;
}

/* In space: by a net of squares on half the faces of a cube around the ball. */
static void weigh_space(direction *d, int n) {
    double total = 0;
    for (int i = 0; i < 3 * PATCH * PATCH; i++)
        weigh_patch(d, n, i / (PATCH * PATCH), (2 * (i / PATCH % PATCH) + 1.0) / PATCH - 1,
                    (2 * (i % PATCH) + 1.0) / PATCH - 1, &total);
    for (int i = 0; i < n; i++) d[i].weight /= total;
}

/* --- boundary by lines ------------------------------------------------------------------------------------
 *
 * A direction is the step between two corners; `set` is one such pair and `flips` the axes along which it may
 * be placed twice. */

typedef struct step {
    int s[3];
} step;

/* Half of the steps to the neighbours in a block. */
static int steps(int dim, step out[13]) {
    int n = 0;
    for (int i = 14; i < 27; i++) {
        step s = {{i % 3 - 1, i / 3 % 3 - 1, i / 9 - 1}};
        if ((dim < 3 && s.s[2]) || (dim < 2 && s.s[1])) continue;
        out[n++] = s;
    }
    return n;
}

/* Pairs of cells a step apart with both in the phase. */
static double pairs(const double *n, int dim, step s) {
    int along = 0, from = 0, places = 0;
    double sum = 0;
    for (int a = 0; a < dim; a++) {
        if (s.s[a]) along |= 1 << a;
        if (s.s[a] < 0) from |= 1 << a;
    }
    for (int base = 0; base < 1 << dim; base++) {
        if (base & along) continue;
        sum += whole(n, dim, bit(base | from) | bit(base | (along ^ from)));
        places++;
    }
    return sum / places;
}

/* A line every volume / |step| of cross-section; a crossing for each pair that parts. Cauchy-Crofton: mean
 * over directions of crossings times cross-section is boundary / 2 in space, 2 boundary / pi in a plane. */
static double boundary(const mt_grid *g, const double *n) {
    static const double factor[4] = {0, 1, 1.57079632679489661923, 2};
    step s[13];
    direction d[13] = {0};
    double cross[13], sum = 0;
    int count = steps(g->dim, s);
    for (int i = 0; i < count; i++) {
        for (int a = 0; a < 3; a++) d[i].u[a] = s[i].s[a] * g->h[a];
        cross[i] = g->cell_volume / scale(d[i].u);
    }
    if (g->dim < 3)
        weigh_plane(d, count);
    else
        weigh_space(d, count);
    for (int i = 0; i < count; i++)
        sum += d[i].weight * cross[i] * 2 * (faces(n, g->dim, 0) - pairs(n, g->dim, s[i]));
    return factor[g->dim] * sum;
}

/* --- mean breadth by planes -------------------------------------------------------------------------------
 */

/* Normals as steps: planes of cells across an axis (1 0 0), a diagonal of a face (1 1 0), or of the block (1
 * 1 1). Euler characteristic summed over the planes of a family. */

static double plane_across_axis(const double *n, int axis) {
    int b = 1 << (axis + 1) % 3, c = 1 << (axis + 2) % 3;
    return faces(n, 3, 0) - faces(n, 3, b) - faces(n, 3, c) + faces(n, 3, b | c);
}

/* Spanned by the remaining axis and the step that is the normal with one sign turned; rectangles. */
static double plane_across_diagonal(const double *n, step normal) {
    int along[2] = {0, 0}, free_axis = 0, k = 0;
    for (int a = 0; a < 3; a++) {
        if (normal.s[a])
            along[k++] = a;
        else
            free_axis = a;
    }
    step in = normal;
    in.s[along[1]] = -in.s[along[1]];
    int p = 0, q = 0;
    for (int i = 0; i < 2; i++) {
        if (in.s[along[i]] > 0)
            q |= 1 << along[i];
        else
            p |= 1 << along[i];
    }
    int f = 1 << free_axis;
    double rectangles = whole(n, 3, bit(p) | bit(q) | bit(p | f) | bit(q | f));
    return faces(n, 3, 0) - faces(n, 3, f) - pairs(n, 3, in) + rectangles;
}

/* Triangles: the three corners next to an end of the block's diagonal, at either end. */
static double plane_across_block(const double *n, step normal) {
    int end = 0;
    double sum = faces(n, 3, 0);
    for (int a = 0; a < 3; a++) {
        step in = normal;
        in.s[a] = 0;
        in.s[(a + 1) % 3] = -in.s[(a + 1) % 3];
        sum -= pairs(n, 3, in);
        if (normal.s[a] < 0) end |= 1 << a;
    }
    sum += whole(n, 3, bit(end ^ 1) | bit(end ^ 2) | bit(end ^ 4));
    return sum + whole(n, 3, bit(end ^ 6) | bit(end ^ 5) | bit(end ^ 3));
}

static double plane_family(const double *n, step normal) {
    int axes = abs(normal.s[0]) + abs(normal.s[1]) + abs(normal.s[2]);
    if (axes == 1) return plane_across_axis(n, normal.s[0] ? 0 : normal.s[1] ? 1 : 2);
    return axes == 2 ? plane_across_diagonal(n, normal) : plane_across_block(n, normal);
}

/* Planes with whole-number normal s stand 1 / |(s_x / h_x, ...)| apart. */
static double breadth(const mt_grid *g, const double *n) {
    step s[13];
    direction d[13] = {0};
    double apart[13], sum = 0;
    int count = steps(3, s);
    for (int i = 0; i < count; i++) {
        for (int a = 0; a < 3; a++) d[i].u[a] = s[i].s[a] / g->h[a];
        apart[i] = 1 / scale(d[i].u);
    }
    weigh_space(d, count);
    for (int i = 0; i < count; i++) sum += d[i].weight * apart[i] * plane_family(n, s[i]);
    return sum;
}

void mt_topology_of(const mt_grid *g, const double *a, double level, bool above, bool full,
                    mt_topology *out) {
    counts n;
    double other[256];
    count(g, a, level, above, &n);
    complement(n.reflected, g->dim, other);
    out->size = faces(n.reflected, g->dim, 0) * g->cell_volume;
    out->boundary = boundary(g, n.reflected);
    out->breadth = g->dim < 3 ? NAN : full ? -breadth(g, other) : breadth(g, n.reflected);
    out->euler = euler(n.empty, g->dim, full);
    out->euler_share = euler(n.reflected, g->dim, full);
}
