#include "core/measure/domains.h"

#include <string.h>

#include "core/base/memory.h"

static int32_t root_of(int32_t *parent, int32_t i) {
    while (parent[i] != i) i = parent[i] = parent[parent[i]];
    return i;
}

/* The smaller root wins: roots are first cells. */
static void join(int32_t *parent, int32_t i, int32_t j) {
    i = root_of(parent, i);
    j = root_of(parent, j);
    if (i < j)
        parent[j] = i;
    else
        parent[i] = j;
}

/* The neighbour at offset d, or -1 beyond a mirror wall. */
static int64_t neighbour(const mt_grid *g, const int at[3], const int d[3]) {
    int64_t p[3];
    for (int a = 0; a < 3; a++) {
        p[a] = at[a] + d[a];
        if (p[a] >= 0 && p[a] < g->n[a]) continue;
        if (g->wall[a] != MT_PERIODIC || a >= g->dim) return -1;
        p[a] = p[a] < 0 ? g->n[a] - 1 : 0;
    }
    return (p[2] * g->n[1] + p[1]) * g->n[0] + p[0];
}

/* Half of the neighbours: each pair of cells is looked at once. */
static int offsets(bool full, int d[13][3]) {
    int n = 0;
    for (int z = 0; z <= 1; z++)
        for (int y = z ? -1 : 0; y <= 1; y++)
            for (int x = z || y ? -1 : 1; x <= 1; x++) {
                bool face = (x != 0) + (y != 0) + (z != 0) == 1;
                if (!face && !full) continue;
                d[n][0] = x, d[n][1] = y, d[n][2] = z;
                n++;
            }
    return n;
}

static void join_all(const mt_grid *g, bool full, int32_t *parent) {
    int d[13][3], count = offsets(full, d), at[3];
    int32_t cell = 0;
    for (at[2] = 0; at[2] < g->n[2]; at[2]++)
        for (at[1] = 0; at[1] < g->n[1]; at[1]++)
            for (at[0] = 0; at[0] < g->n[0]; at[0]++, cell++) {
                if (parent[cell] < 0) continue;
                for (int i = 0; i < count; i++) {
                    int64_t other = neighbour(g, at, d[i]);
                    if (other >= 0 && parent[other] >= 0) join(parent, cell, (int32_t)other);
                }
            }
}

static mt_status sizes(const mt_grid *g, int32_t *parent, mt_domains *out, mt_error *err) {
    for (size_t i = 0; i < g->cells; i++) out->count += parent[i] == (int32_t)i;
    mt_status st = mt_new(&out->size, out->count + 1, sizeof *out->size, "domain sizes", err);
    if (st) return st;
    size_t n = 0;
    for (size_t i = 0; i < g->cells;
         i++) { /* a root comes before its cells; it is replaced by -(number + 2) */
        if (parent[i] == -1) continue;
        if (parent[i] == (int32_t)i)
            parent[i] = -(int32_t)(n++) - 2;
        else {
            int32_t r = parent[i];
            while (parent[r] >= 0) r = parent[r];
            parent[i] = parent[r];
        }
        out->size[-parent[i] - 2] += g->cell_volume;
    }
    return MT_OK;
}

mt_status mt_domains_find(const mt_grid *g, const double *a, double level, bool above, bool full,
                          int32_t *labels, mt_domains *out, mt_error *err) {
    int32_t *parent;
    memset(out, 0, sizeof *out);
    mt_status st = mt_new(&parent, g->cells, sizeof *parent, "domain labels", err);
    if (st) return st;
    for (size_t i = 0; i < g->cells; i++) parent[i] = (a[i] > level) == above ? (int32_t)i : -1;
    join_all(g, full, parent);
    st = sizes(g, parent, out, err);
    for (size_t i = 0; i < g->cells && labels && !st; i++) labels[i] = parent[i] == -1 ? 0 : -parent[i] - 1;
    for (size_t i = 0; i < out->count && !st; i++) {
        out->total += out->size[i];
        if (out->size[i] > out->largest) out->largest = out->size[i];
    }
    out->mean = out->count ? out->total / (double)out->count : 0;
    mt_free(parent);
    return st;
}

void mt_domains_free(mt_domains *domains) {
    mt_free(domains->size);
    memset(domains, 0, sizeof *domains);
}
