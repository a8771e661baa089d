/* Measurements on raw doubles for cross-checks: probe_measure FILE nx ny nz walls level, walls as "ppm"
 * (periodic, mirror). Prints lines "name value". */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/chords.h"
#include "core/measure/correlation.h"
#include "core/measure/curvature.h"
#include "core/measure/domains.h"
#include "core/measure/interface.h"
#include "core/measure/profile.h"
#include "core/measure/statistics.h"
#include "core/measure/structure.h"
#include "core/measure/topology.h"

static mt_error err;

static int must(mt_status status) {
    if (status == MT_OK) return 0;
    fprintf(stderr, "%s\n", err.text);
    exit(1);
}

static void domains(const mt_grid *g, const double *a, double level, bool full) {
    mt_domains d;
    must(mt_domains_find(g, a, level, true, full, NULL, &d, &err));
    printf("%s %zu\n%s_largest %.17g\n", full ? "full" : "faces", d.count, full ? "full" : "faces",
           d.largest);
    mt_domains_free(&d);
}

static void shapes(const mt_grid *g, const double *a, double level) {
    mt_domains d;
    must(mt_domains_find(g, a, level, true, false, NULL, &d, &err));
    for (size_t i = 0; i < d.count; i++)
        printf("shape %.17g %.17g %.17g %.17g %.17g\n", d.size[i], d.axis[i][0], d.axis[i][g->dim - 1],
               d.direction[i][0], d.direction[i][1]);
    mt_domains_free(&d);
}

static void chords(const mt_grid *g, const double *a, double level) {
    mt_chords c;
    must(mt_chords_find(g, a, level, true, &c, &err));
    for (int i = 0; i < g->dim; i++)
        for (int l = 1; l <= c.axis[i].longest; l++) printf("chord %d %d %.17g\n", i, l, c.axis[i].number[l]);
    mt_chords_free(&c);
}

static void topology(const mt_grid *g, const double *a, double level, bool full) {
    mt_topology t;
    mt_topology_of(g, a, level, true, full, &t);
    printf("euler_%s %.17g\nboundary_%s %.17g\n", full ? "full" : "faces", t.euler, full ? "full" : "faces",
           t.boundary);
}

static void curvature(const mt_grid *g, const double *a, double level) {
    mt_curvature c;
    must(mt_curvature_of(g, a, level, true, 8, &c, &err));
    printf("curvature %.17g\ncurvature_deviation %.17g\ncurvature_integral %.17g\ngauss_integral %.17g\n",
           c.mean.mean, c.mean.deviation, c.mean.integral, c.gauss.integral);
    printf("tensor_xx %.17g\ntensor_xy %.17g\n", c.tensor[0], c.tensor[3]);
    mt_curvature_free(&c);
}

/* From the first corner of the box to 1.5 times its size. */
static void profile(const mt_grid *g, const double *a) {
    double v[20], from[3] = {0, 0, 0}, to[3];
    for (int i = 0; i < 3; i++) to[i] = 1.5 * g->n[i] * g->h[i];
    mt_profile_between(g, a, from, to, 20, v);
    for (int i = 0; i < 20; i++) printf("profile %.17g\n", v[i]);
}

static void correlation(mt_sweeper *w, const double *a) {
    mt_correlation c;
    must(mt_correlation_of(w, a, &c, &err));
    printf("zero %.17g\n", c.zero);
    for (int i = 0; i < c.count; i++) printf("correlation %.17g %.17g\n", c.r[i], c.c[i]);
    mt_correlation_free(&c);
}

static void sectors(mt_sweeper *w, const double *a) {
    mt_sectors s;
    must(mt_sectors_of(w, a, 6, &s, &err));
    for (int i = 0; i < s.sectors; i++) printf("sector %.17g %.17g\n", s.share[i], s.wavelength[i]);
    mt_sectors_free(&s);
}

static void structure(mt_grid *g, const double *a) {
    mt_sweeper *w;
    mt_structure s;
    must(mt_sweeper_new(&w, g, NULL, &err));
    must(mt_structure_of(w, a, &s, &err));
    printf("wavelength %.17g\nsum_rule %.17g\n", s.wavelength, s.variance);
    for (int i = 0; i < s.shells; i++) printf("shell %.17g %.17g %.17g\n", s.k[i], s.s[i], s.modes[i]);
    printf("second %.17g\n", s.second);
    mt_structure_free(&s);
    correlation(w, a);
    if (g->dim > 1) sectors(w, a);
    mt_sweeper_free(&w);
}

int main(int argc, char **argv) {
    if (argc != 7) return 2;
    int n[3] = {atoi(argv[2]), atoi(argv[3]), atoi(argv[4])}, dim = n[2] > 1 ? 3 : n[1] > 1 ? 2 : 1;
    double h[3] = {1, 1, 1}, level = atof(argv[6]);
    mt_wall wall[3];
    mt_grid *g;
    for (int i = 0; i < 3; i++) wall[i] = argv[5][i] == 'm' ? MT_MIRROR : MT_PERIODIC;
    must(mt_grid_new(&g, dim, n, h, wall, &err));
    double *a = mt_alloc(g->cells, sizeof *a);
    FILE *f = fopen(argv[1], "rb");
    if (!a || !f || fread(a, sizeof *a, g->cells, f) != g->cells) return 1;
    fclose(f);
    mt_statistics s;
    mt_statistics_of(g, a, &s);
    printf("mean %.17g\nvariance %.17g\nfraction %.17g\ninterface %.17g\n", s.mean, s.variance,
           mt_phase_fraction(g, a, level, true), mt_interface_measure(g, a, level));
    domains(g, a, level, false);
    domains(g, a, level, true);
    topology(g, a, level, false);
    topology(g, a, level, true);
    printf("otsu %.17g\n", mt_otsu_level(g, a));
    shapes(g, a, level);
    chords(g, a, level);
    if (dim > 1) curvature(g, a, level);
    profile(g, a);
    structure(g, a);
    mt_free(a);
    mt_grid_unref(&g);
    return 0;
}
