#include "core/measure/domains.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/tensor_inside.h"

static const double pi = 3.14159265358979323846;

double mt_equivalent_diameter(int dim, double size) {
    return dim == 3 ? cbrt(6 * size / pi) : dim == 2 ? 2 * sqrt(size / pi) : size;
}

/* --- pieces: components of the box cut open ---------------------------------------------------------------
 *
 * parent[cell] >= 0 leads to the first cell of the piece, -1 is outside. */

static int32_t root_of(int32_t *parent, int32_t i) {
    while (parent[i] != i) i = parent[i] = parent[parent[i]];
    return i;
}

/* The smaller root wins: roots are first cells, and parent[i] <= i always. */
static void join(int32_t *parent, int32_t i, int32_t j) {
    i = root_of(parent, i);
    j = root_of(parent, j);
    if (i < j)
        parent[j] = i;
    else
        parent[i] = j;
}

/* Runs of a row need no union: all cells lead to the first. */
static void mark(const mt_grid *g, const double *a, double level, bool above, int32_t *parent) {
    size_t nx = (size_t)g->n[0];
    for (size_t r = 0; r < g->cells; r += nx) {
        int32_t start = -1;
        for (size_t i = r; i < r + nx; i++) {
            bool in = (a[i] > level) == above;
            start = !in ? -1 : start < 0 ? (int32_t)i : start;
            parent[i] = start;
        }
    }
}

/* Cells x of a row with cells x + dx of an earlier one: once for each overlap of two runs. */
static void join_rows(int32_t *parent, int32_t row, int32_t other, int nx, int dx) {
    int from = dx < 0 ? -dx : 0, to = dx > 0 ? nx - dx : nx;
    bool before = false;
    for (int x = from; x < to; x++) {
        bool both = parent[row + x] >= 0 && parent[other + x + dx] >= 0;
        if (both && !before) join(parent, row + x, other + x + dx);
        before = both;
    }
}

static void join_with(const mt_grid *g, int y, int z, int dy, int dz, bool full, int32_t *parent) {
    int nx = g->n[0], ny = g->n[1], oy = y + dy, oz = z + dz;
    if (oy < 0 || oy >= ny || oz < 0) return;
    for (int dx = full ? -1 : 0; dx <= (full ? 1 : 0); dx++)
        join_rows(parent, (z * ny + y) * nx, (oz * ny + oy) * nx, nx, dx);
}

static void join_open(const mt_grid *g, bool full, int32_t *parent) {
    for (int z = 0; z < g->n[2]; z++)
        for (int y = 0; y < g->n[1]; y++) {
            join_with(g, y, z, -1, 0, full, parent);
            join_with(g, y, z, 0, -1, full, parent);
            if (full) join_with(g, y, z, -1, -1, full, parent);
            if (full) join_with(g, y, z, 1, -1, full, parent);
        }
}

/* Replaces parents by numbers of pieces: 0 outside, 1, 2, ... by first cell. A parent comes before its cells,
 * so one pass does. */
static size_t number(size_t cells, int32_t *label) {
    int32_t n = 0;
    for (size_t i = 0; i < cells; i++) {
        int32_t p = label[i];
        label[i] = p < 0 ? 0 : p == (int32_t)i ? ++n : label[p];
    }
    return (size_t)n;
}

/* --- pieces joined across the seams -----------------------------------------------------------------------
 */

typedef struct piece {
    int32_t parent, domain;
    int32_t winding[3]; /* boxes by which this piece lies beyond its parent */
    uint8_t walls, percolates;
    int64_t cells;
    double sum[3];    /* of cell numbers along each axis */
    double square[6]; /* of their products: xx, yy, zz, xy, yz, zx */
} piece;

static const int first_of[6] = {0, 1, 2, 0, 1, 2}, second_of[6] = {0, 1, 2, 1, 2, 0};

static void gather_pieces(const mt_grid *g, const int32_t *label, piece *p) {
    int at[3];
    for (at[2] = 0; at[2] < g->n[2]; at[2]++)
        for (at[1] = 0; at[1] < g->n[1]; at[1]++)
            for (at[0] = 0; at[0] < g->n[0]; at[0]++) {
                int32_t l = *label++;
                if (!l) continue;
                piece *q = &p[l - 1];
                q->cells++;
                for (int m = 0; m < 6; m++) q->square[m] += (double)at[first_of[m]] * at[second_of[m]];
                for (int a = 0; a < g->dim; a++) {
                    q->sum[a] += at[a];
                    if (g->wall[a] != MT_MIRROR) continue;
                    if (at[a] == 0) q->walls |= (uint8_t)(1u << 2 * a);
                    if (at[a] == g->n[a] - 1) q->walls |= (uint8_t)(2u << 2 * a);
                }
            }
}

/* Root of piece i; adds the windings on the way to w. */
static int32_t piece_root(piece *p, int32_t i, int w[3]) {
    while (p[i].parent != i) {
        piece *up = &p[p[i].parent];
        for (int a = 0; a < 3; a++) {
            p[i].winding[a] += up->winding[a]; /* zero at a root */
            w[a] += p[i].winding[a];
        }
        i = p[i].parent = up->parent;
    }
    return i;
}

/* Piece j, moved by w boxes, touches piece i. */
static void join_pieces(piece *p, int32_t i, int32_t j, const int w[3]) {
    int wi[3] = {0}, wj[3] = {0};
    int32_t ri = piece_root(p, i, wi), rj = piece_root(p, j, wj);
    for (int a = 0; a < 3; a++) {
        int apart = w[a] + wi[a] - wj[a]; /* of rj from ri */
        if (ri == rj && apart) p[ri].percolates |= (uint8_t)(1u << a);
        if (ri < rj) p[rj].winding[a] = apart;
        if (ri > rj) p[ri].winding[a] = -apart;
    }
    if (ri < rj)
        p[rj].parent = ri;
    else
        p[ri].parent = rj;
    unsigned both = p[ri].percolates | p[rj].percolates;
    p[ri < rj ? ri : rj].percolates = (uint8_t)both;
}

/* Half of the neighbours: each pair of cells is looked at once. */
static int offsets(bool full, int d[13][3]) {
    int n = 0;
    for (int z = 0; z <= 1; z++)
        for (int y = z ? -1 : 0; y <= 1; y++)
            for (int x = z || y ? -1 : 1; x <= 1; x++) {
                bool face = abs(x) + abs(y) + abs(z) == 1;
                if (!face && !full) continue;
                d[n][0] = x, d[n][1] = y, d[n][2] = z;
                n++;
            }
    return n;
}

/* The neighbour at offset d and the seams crossed on the way, or -1: beyond a mirror wall, or no seam. */
static int64_t across(const mt_grid *g, const int at[3], const int d[3], int w[3]) {
    int64_t p[3];
    for (int a = 0; a < 3; a++) {
        p[a] = at[a] + d[a];
        w[a] = p[a] < 0 ? -1 : p[a] >= g->n[a];
        if (w[a] && (g->wall[a] != MT_PERIODIC || g->n[a] == 1)) return -1;
        p[a] -= (int64_t)w[a] * g->n[a];
    }
    if (!w[0] && !w[1] && !w[2]) return -1;
    return (p[2] * g->n[1] + p[1]) * g->n[0] + p[0];
}

static bool at_end(const mt_grid *g, int axis, int i) {
    return g->wall[axis] == MT_PERIODIC && (i == 0 || i == g->n[axis] - 1);
}

static void join_across(const mt_grid *g, bool full, const int32_t *label, piece *p) {
    int d[13][3], count = offsets(full, d), at[3], w[3], last = g->n[0] - 1;
    for (at[2] = 0; at[2] < g->n[2]; at[2]++)
        for (at[1] = 0; at[1] < g->n[1]; at[1]++) {
            bool all = at_end(g, 1, at[1]) || at_end(g, 2, at[2]);
            const int32_t *row = label + ((size_t)at[2] * (size_t)g->n[1] + (size_t)at[1]) * (size_t)g->n[0];
            for (at[0] = 0; at[0] <= last; at[0] += all || last < 2 ? 1 : last) {
                for (int i = 0; i < count && row[at[0]]; i++) {
                    int64_t other = across(g, at, d[i], w);
                    if (other >= 0 && label[other]) join_pieces(p, row[at[0]] - 1, label[other] - 1, w);
                }
            }
        }
}

/* --- domains ----------------------------------------------------------------------------------------------
 */

/* Adds piece q, moved by w boxes, to its root. */
static void add_moved(const mt_grid *g, const piece *q, const int w[3], piece *root) {
    double d[3], cells = (double)q->cells;
    for (int a = 0; a < 3; a++) d[a] = (double)w[a] * g->n[a];
    root->cells += q->cells;
    root->walls |= q->walls;
    for (int a = 0; a < 3; a++) root->sum[a] += q->sum[a] + cells * d[a];
    for (int m = 0; m < 6; m++) {
        int a = first_of[m], b = second_of[m];
        root->square[m] += q->square[m] + q->sum[a] * d[b] + q->sum[b] * d[a] + cells * d[a] * d[b];
    }
}

/* Numbers the roots, then adds every piece, unwound, to its root. */
static size_t gather_domains(const mt_grid *g, size_t pieces, piece *p) {
    int32_t n = 0;
    for (size_t i = 0; i < pieces; i++) {
        int w[3] = {0};
        int32_t r = piece_root(p, (int32_t)i, w); /* r <= i: its number is known */
        p[i].domain = r == (int32_t)i ? n++ : p[r].domain;
        if (r == (int32_t)i) continue;
        add_moved(g, &p[i], w, &p[r]);
    }
    return (size_t)n;
}

static double centre(const mt_grid *g, int axis, const piece *p) {
    double x = p->sum[axis] / (double)p->cells + 0.5, n = g->n[axis];
    if (axis >= g->dim) return 0;
    if (g->wall[axis] == MT_PERIODIC && (p->percolates >> axis & 1)) return NAN;
    return (x - n * floor(x / n)) * g->h[axis];
}

/* Central second moments in units of length, a cell being a box. */
static void central_moments(const mt_grid *g, const piece *p, double m[3][3]) {
    double n = (double)p->cells;
    for (int i = 0; i < 6; i++) {
        int a = first_of[i], b = second_of[i];
        double cells = p->square[i] / n - p->sum[a] / n * (p->sum[b] / n) + (a == b ? 1.0 / 12 : 0);
        m[a][b] = m[b][a] = a < g->dim && b < g->dim ? cells * g->h[a] * g->h[b] : 0;
    }
}

static void shape(const mt_grid *g, const piece *p, size_t i, mt_domains *out) {
    double m[3][3], value[3], vector[3][3];
    bool wound = false;
    for (int a = 0; a < g->dim; a++) wound = wound || (p->percolates >> a & 1);
    central_moments(g, p, m);
    mt_principal(m, value, vector);
    double factor = g->dim == 3 ? 20 : g->dim == 2 ? 16 : 12;
    for (int a = 0; a < 3; a++) {
        out->axis[i][a] = a >= g->dim ? 0 : wound ? NAN : sqrt(factor * value[a]);
        out->direction[i][a] = wound ? NAN : vector[0][a];
    }
    out->aspect[i] = wound ? NAN : sqrt(value[0] / value[g->dim - 1]);
}

static unsigned wall_to_wall(const mt_grid *g, const piece *p) {
    unsigned bits = 0;
    for (int a = 0; a < g->dim; a++)
        if (g->n[a] > 1 && (p->walls >> 2 * a & 3) == 3) bits |= 1u << a;
    return bits;
}

static void fill(const mt_grid *g, const piece *p, size_t i, mt_domains *out) {
    out->size[i] = (double)p->cells * g->cell_volume;
    out->diameter[i] = mt_equivalent_diameter(g->dim, out->size[i]);
    for (int a = 0; a < 3; a++) out->centroid[i][a] = centre(g, a, p);
    shape(g, p, i, out);
    out->walls[i] = p->walls;
    out->percolates[i] = (unsigned char)(p->percolates | wall_to_wall(g, p));
    out->any_percolates |= out->percolates[i];
    out->total += out->size[i];
    out->mean_diameter += out->diameter[i];
    if (out->size[i] > out->largest) out->largest = out->size[i];
}

static mt_status make_domains(size_t count, mt_domains *out, mt_error *err) {
    size_t each = 12 * sizeof(double) + 2;
    mt_status st = mt_new(&out->block, count, each, "sizes of domains", err);
    if (st) return st;
    out->count = count;
    out->size = out->block;
    out->diameter = out->size + count;
    out->centroid = (double(*)[3])(out->diameter + count);
    out->axis = out->centroid + count;
    out->direction = out->axis + count;
    out->aspect = out->diameter + 10 * count;
    out->percolates = (unsigned char *)(out->aspect + count);
    out->walls = out->percolates + count;
    return MT_OK;
}

static double mean_known(size_t n, const double *v) {
    double sum = 0, known = 0;
    for (size_t i = 0; i < n; i++)
        if (!isnan(v[i])) sum += v[i], known++;
    return sum / known;
}

static mt_status measure(const mt_grid *g, size_t pieces, piece *p, mt_domains *out, mt_error *err) {
    mt_status st = make_domains(gather_domains(g, pieces, p), out, err);
    if (st) return st;
    for (size_t i = 0; i < pieces; i++)
        if (p[i].parent == (int32_t)i) fill(g, &p[i], (size_t)p[i].domain, out);
    out->mean = out->count ? out->total / (double)out->count : 0;
    out->mean_diameter = out->count ? out->mean_diameter / (double)out->count : 0;
    out->density = (double)out->count / g->volume;
    out->mean_aspect = mean_known(out->count, out->aspect);
    return MT_OK;
}

static mt_status find(const mt_grid *g, bool full, int32_t *label, mt_domains *out, mt_error *err) {
    piece *p;
    join_open(g, full, label);
    size_t pieces = number(g->cells, label);
    mt_status st = mt_new(&p, pieces, sizeof *p, "pieces of domains", err);
    if (st) return st;
    for (size_t i = 0; i < pieces; i++) p[i].parent = (int32_t)i;
    gather_pieces(g, label, p);
    join_across(g, full, label, p);
    st = measure(g, pieces, p, out, err);
    for (size_t i = 0; i < g->cells && !st; i++)
        if (label[i]) label[i] = p[label[i] - 1].domain + 1;
    mt_free(p);
    return st;
}

mt_status mt_domains_find(const mt_grid *g, const double *a, double level, bool above, bool full,
                          int32_t *labels, mt_domains *out, mt_error *err) {
    int32_t *own = NULL;
    mt_status st = MT_OK;
    memset(out, 0, sizeof *out);
    if (!labels) st = mt_new(&own, g->cells, sizeof *own, "domain labels", err);
    if (st) return st;
    int32_t *label = labels ? labels : own;
    mark(g, a, level, above, label);
    st = find(g, full, label, out, err);
    mt_free(own);
    return st;
}

void mt_domains_free(mt_domains *domains) {
    mt_free(domains->block);
    memset(domains, 0, sizeof *domains);
}
