/* Measurements of a field's present values. */
#include "lua/glue.h"

#include "core/base/memory.h"
#include "core/measure/chords.h"
#include "core/measure/correlation.h"
#include "core/measure/curvature.h"
#include "core/measure/domains.h"
#include "core/measure/growth.h"
#include "core/measure/interface.h"
#include "core/measure/profile.h"
#include "core/measure/statistics.h"
#include "core/measure/structure.h"
#include "core/measure/topology.h"

static void set(lua_State *L, const char *name, double value) {
    lua_pushnumber(L, value);
    lua_setfield(L, -2, name);
}

static void set_list(lua_State *L, const char *name, size_t n, const double *v) {
    lua_createtable(L, (int)n, 0);
    for (size_t i = 0; i < n; i++) {
        lua_pushnumber(L, v[i]);
        lua_rawseti(L, -2, (lua_Integer)i + 1);
    }
    lua_setfield(L, -2, name);
}

static int statistics(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    mt_statistics s;
    mt_statistics_of(f->grid, f->values, &s);
    lua_newtable(L);
    set(L, "mean", s.mean);
    set(L, "integral", s.integral);
    set(L, "variance", s.variance);
    set(L, "minimum", s.minimum);
    set(L, "maximum", s.maximum);
    return 1;
}

static int peaks(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_peaks p;
    glue_check(L, mt_peaks_of(f->grid, f->values, &p, &err), &err);
    lua_newtable(L);
    set(L, "low", p.low);
    set(L, "high", p.high);
    set(L, "amplitude", p.amplitude);
    set(L, "level", p.level);
    lua_pushboolean(L, p.two);
    lua_setfield(L, -2, "two");
    return 1;
}

static int otsu(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    lua_pushnumber(L, mt_otsu_level(f->grid, f->values));
    return 1;
}

static int phase_fraction(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    lua_pushnumber(L, mt_phase_fraction(f->grid, f->values, luaL_checknumber(L, 2), lua_toboolean(L, 3)));
    return 1;
}

static void push_domains(lua_State *L, const mt_domains *d) {
    lua_newtable(L);
    set(L, "count", (double)d->count);
    set(L, "largest", d->largest);
    set(L, "mean", d->mean);
    set(L, "total", d->total);
    set(L, "mean_diameter", d->mean_diameter);
    set(L, "mean_aspect", d->mean_aspect);
    set(L, "density", d->density);
    set_list(L, "sizes", d->count, d->size);
    set_list(L, "diameters", d->count, d->diameter);
    set_list(L, "aspects", d->count, d->aspect);
    set_list(L, "centroids", 3 * d->count, d->count ? d->centroid[0] : NULL);
    set_list(L, "axes", 3 * d->count, d->count ? d->axis[0] : NULL);
    set_list(L, "directions", 3 * d->count, d->count ? d->direction[0] : NULL);
    lua_pushinteger(L, d->any_percolates);
    lua_setfield(L, -2, "percolates");
    lua_createtable(L, (int)d->count, 0);
    for (size_t i = 0; i < d->count; i++) {
        lua_pushinteger(L, d->percolates[i]);
        lua_rawseti(L, -2, (lua_Integer)i + 1);
    }
    lua_setfield(L, -2, "around");
}

/* domains(field, level, above, full) -> sizes etc. by domain; centroids, axes and directions three numbers a
 * domain; percolates and around bits of axes */
static int domains(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_domains d;
    mt_status st = mt_domains_find(f->grid, f->values, luaL_checknumber(L, 2), lua_toboolean(L, 3),
                                   lua_toboolean(L, 4), NULL, &d, &err);
    glue_check(L, st, &err);
    push_domains(L, &d);
    mt_domains_free(&d);
    return 1;
}

/* chords(field, level, above) -> { mean, axes = { { mean, deviation, endless, chords, number = {...} }, ... }
 * }
 */
static int chords(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_chords c;
    mt_status st = mt_chords_find(f->grid, f->values, luaL_checknumber(L, 2), lua_toboolean(L, 3), &c, &err);
    glue_check(L, st, &err);
    lua_newtable(L);
    set(L, "mean", c.mean);
    lua_createtable(L, c.dim, 0);
    for (int a = 0; a < c.dim; a++) {
        lua_newtable(L);
        set(L, "mean", c.axis[a].mean);
        set(L, "deviation", c.axis[a].deviation);
        set(L, "endless", c.axis[a].endless);
        set(L, "chords", c.axis[a].chords);
        set_list(L, "number", (size_t)c.axis[a].longest, c.axis[a].number + 1);
        lua_rawseti(L, -2, a + 1);
    }
    lua_setfield(L, -2, "axes");
    mt_chords_free(&c);
    return 1;
}

/* topology(field, level, above, full) */
static int topology(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    mt_topology t;
    mt_topology_of(f->grid, f->values, luaL_checknumber(L, 2), lua_toboolean(L, 3), lua_toboolean(L, 4), &t);
    lua_newtable(L);
    set(L, "size", t.size);
    set(L, "boundary", t.boundary);
    set(L, "breadth", t.breadth);
    set(L, "euler", t.euler);
    set(L, "density", t.euler_share / f->grid->volume);
    return 1;
}

static int interface(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    lua_pushnumber(L, mt_interface_measure(f->grid, f->values, luaL_checknumber(L, 2)));
    return 1;
}

static void push_bend(lua_State *L, const char *name, const mt_bend *b, int classes) {
    lua_newtable(L);
    set(L, "mean", b->mean);
    set(L, "deviation", b->deviation);
    set(L, "integral", b->integral);
    set(L, "low", b->low);
    set(L, "width", b->width);
    set_list(L, "share", (size_t)classes, b->share);
    lua_setfield(L, -2, name);
}

/* curvature(field, level, above, classes) -> { mean = {...}, gauss = {...}, size, lost, tensor, preferred,
 * anisotropy, polar, azimuth, facing } */
static int curvature(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_curvature c;
    mt_status st = mt_curvature_of(f->grid, f->values, luaL_checknumber(L, 2), lua_toboolean(L, 3),
                                   (int)luaL_checkinteger(L, 4), &c, &err);
    glue_check(L, st, &err);
    lua_newtable(L);
    push_bend(L, "mean", &c.mean, c.classes);
    push_bend(L, "gauss", &c.gauss, c.classes);
    set(L, "size", c.size);
    set(L, "lost", c.lost);
    set(L, "anisotropy", c.anisotropy);
    set(L, "polar", c.polar);
    set(L, "azimuth", c.azimuth);
    set_list(L, "tensor", 6, c.tensor);
    set_list(L, "preferred", 3, c.preferred);
    set_list(L, "facing", (size_t)(c.polar * c.azimuth), c.facing);
    mt_curvature_free(&c);
    return 1;
}

/* Room for n numbers that the collector owns, on the stack. */
static double *numbers(lua_State *L, size_t n) {
    return lua_newuserdatauv(L, (n ? n : 1) * sizeof(double), 0);
}

/* profile_along(field, axis) -> means, deviations */
static int profile_along(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    int axis = (int)luaL_checkinteger(L, 2);
    if (axis < 0 || axis >= f->grid->dim) return glue_fail(L, MT_ESCRIPT, "the grid has no such axis");
    size_t n = (size_t)f->grid->n[axis];
    double *mean = numbers(L, n), *deviation = numbers(L, n);
    mt_profile_along(f->grid, f->values, axis, mean, deviation);
    lua_newtable(L);
    set_list(L, "mean", n, mean);
    set_list(L, "deviation", n, deviation);
    return 1;
}

/* profile_between(field, from, to, count) -> values */
static int profile_between(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    size_t n = (size_t)luaL_checkinteger(L, 4), from_size, to_size, dim = (size_t)f->grid->dim;
    double *from = glue_numbers(L, 2, &from_size), *to = glue_numbers(L, 3, &to_size);
    if (from_size != dim || to_size != dim)
        return glue_fail(L, MT_ESCRIPT, "a place on this grid has %d coordinates", (int)dim);
    double *v = numbers(L, n);
    mt_profile_between(f->grid, f->values, from, to, (int)n, v);
    lua_newtable(L);
    set_list(L, "values", n, v);
    return 1;
}

/* interface_width(values, spacing, mirror, low, high) -> width, or nil where there is no interface */
static int interface_width(lua_State *L) {
    mt_error err = {0};
    size_t n;
    double *v = glue_numbers(L, 1, &n), width;
    mt_status st =
        mt_interface_width((int)n, luaL_checknumber(L, 2), lua_toboolean(L, 3) ? MT_MIRROR : MT_PERIODIC, v,
                           luaL_checknumber(L, 4), luaL_checknumber(L, 5), &width, &err);
    if (st == MT_EINPUT) {
        lua_pushnil(L);
        return 1;
    }
    glue_check(L, st, &err);
    lua_pushnumber(L, width);
    return 1;
}

static mt_sweeper *sweeper_at(lua_State *L, int index) {
    mt_error err = {0};
    glue_grid *g = glue_grid_at(L, index);
    if (!g->sweeper) glue_check(L, mt_sweeper_new(&g->sweeper, g->grid, glue_of(L)->pool, &err), &err);
    return g->sweeper;
}

static int structure(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_sweeper *sweeper = sweeper_at(L, 2);
    mt_structure s;
    glue_check(L, mt_structure_of(sweeper, f->values, &s, &err), &err);
    lua_newtable(L);
    set(L, "wavelength", s.wavelength);
    set(L, "peak", s.peak);
    set(L, "peak_k", s.peak_k);
    set(L, "half_width", s.half_width);
    set(L, "first", s.first);
    set(L, "second", s.second);
    set(L, "deviation", s.deviation);
    set(L, "variance", s.variance);
    set_list(L, "k", (size_t)s.shells, s.k);
    set_list(L, "s", (size_t)s.shells, s.s);
    set_list(L, "modes", (size_t)s.shells, s.modes);
    mt_structure_free(&s);
    return 1;
}

/* sectors(field, grid, count): lists by sector; k, s, modes sector by sector */
static int sectors(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_sweeper *sweeper = sweeper_at(L, 2);
    mt_sectors s;
    glue_check(L, mt_sectors_of(sweeper, f->values, (int)luaL_checkinteger(L, 3), &s, &err), &err);
    size_t all = (size_t)s.sectors * (size_t)s.shells, each = (size_t)s.sectors;
    lua_newtable(L);
    set(L, "shells", s.shells);
    set(L, "anisotropy", s.anisotropy);
    set_list(L, "angle", each, s.angle);
    set_list(L, "wavelength", each, s.wavelength);
    set_list(L, "share", each, s.share);
    set_list(L, "k", all, s.k);
    set_list(L, "s", all, s.s);
    set_list(L, "modes", all, s.modes);
    mt_sectors_free(&s);
    return 1;
}

/* correlation(field, grid) -> { r, c, zero, spacing } */
static int correlation(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    mt_sweeper *sweeper = sweeper_at(L, 2);
    mt_correlation c;
    glue_check(L, mt_correlation_of(sweeper, f->values, &c, &err), &err);
    lua_newtable(L);
    set(L, "zero", c.zero);
    set(L, "spacing", c.spacing);
    set_list(L, "r", (size_t)c.count, c.r);
    set_list(L, "c", (size_t)c.count, c.c);
    mt_correlation_free(&c);
    return 1;
}

/* fit_power(x, y, from, to) and fit_cubic(t, l) -> {slope, intercept, slope_error, points}, or nil where
 * there are too few */
static int push_fit(lua_State *L, mt_status st, const mt_line_fit *fit) {
    if (st != MT_OK) {
        lua_pushnil(L);
        return 1;
    }
    lua_newtable(L);
    set(L, "slope", fit->slope);
    set(L, "intercept", fit->intercept);
    set(L, "slope_error", fit->slope_error);
    set(L, "points", fit->points);
    return 1;
}

static int fit_power(lua_State *L) {
    mt_error err = {0};
    mt_line_fit fit;
    size_t n, m;
    double *x = glue_numbers(L, 1, &n), *y = glue_numbers(L, 2, &m);
    if (n != m) return glue_fail(L, MT_ESCRIPT, "a fit needs as many x as y");
    return push_fit(L, mt_fit_power((int)n, x, y, luaL_checknumber(L, 3), luaL_checknumber(L, 4), &fit, &err),
                    &fit);
}

static int fit_cubic(lua_State *L) {
    mt_error err = {0};
    mt_line_fit fit;
    size_t n, m;
    double *x = glue_numbers(L, 1, &n), *y = glue_numbers(L, 2, &m);
    if (n != m) return glue_fail(L, MT_ESCRIPT, "a fit needs as many times as lengths");
    return push_fit(L, mt_fit_cubic((int)n, x, y, &fit, &err), &fit);
}

void glue_open_measure(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"statistics", statistics},
        {"peaks", peaks},
        {"otsu", otsu},
        {"phase_fraction", phase_fraction},
        {"domains", domains},
        {"chords", chords},
        {"topology", topology},
        {"interface", interface},
        {"structure", structure},
        {"sectors", sectors},
        {"curvature", curvature},
        {"profile_along", profile_along},
        {"profile_between", profile_between},
        {"interface_width", interface_width},
        {"correlation", correlation},
        {"fit_power", fit_power},
        {"fit_cubic", fit_cubic},
        {NULL, NULL},
    };
    luaL_setfuncs(L, functions, 0);
}
