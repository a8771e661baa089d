/* Fields and models. */
#include "lua/glue.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

void glue_operators(lua_State *L, const char *class);

/* --- fields
 * ----------------------------------------------------------------------------------------------------------------------
 */

mt_field *glue_field(lua_State *L, int index) {
    return *(mt_field **)luaL_checkudata(L, index, GLUE_FIELD);
}

static int new_field(lua_State *L) {
    mt_error err = {0};
    glue_grid *g = glue_grid_at(L, 1);
    const char *name = luaL_checkstring(L, 2);
    mt_field **f = glue_object(L, sizeof *f, GLUE_FIELD);
    glue_check(L, mt_field_new(f, glue_of(L)->forms, g->grid, name, &err), &err);
    return 1;
}

static int free_field(lua_State *L) {
    mt_field_unref(luaL_checkudata(L, 1, GLUE_FIELD));
    return 0;
}

static int field_name(lua_State *L) {
    lua_pushstring(L, glue_field(L, 1)->symbol->name);
    return 1;
}

/* List of fields at index -> array in a userdata on the stack. */
static mt_field **fields_at(lua_State *L, int index, int *n) {
    *n = (int)lua_rawlen(L, index);
    mt_field **list = lua_newuserdatauv(L, ((size_t)*n + 1) * sizeof *list, 0);
    for (int i = 0; i < *n; i++) {
        lua_rawgeti(L, index, i + 1);
        list[i] = glue_field(L, -1);
        lua_pop(L, 1);
    }
    return list;
}

/* field_set(field, grid, expression, fields, time) */
static int field_set(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    glue_grid *g = glue_grid_at(L, 2);
    lua_settop(L, 5);
    const mt_expr *e = glue_expr(L, 3, "start");
    int n;
    mt_field **fields = fields_at(L, 4, &n);
    if (!g->sweeper) glue_check(L, mt_sweeper_new(&g->sweeper, g->grid, glue_of(L)->pool, &err), &err);
    glue_check(L, mt_field_set(f, g->sweeper, e, n, fields, luaL_optnumber(L, 5, 0), &err), &err);
    return 0;
}

/* resample(to, its grid, from, its grid) */
static int resample(lua_State *L) {
    mt_error err = {0};
    mt_field *to = glue_field(L, 1), *from = glue_field(L, 3);
    glue_grid *g[2] = {glue_grid_at(L, 2), glue_grid_at(L, 4)};
    for (int i = 0; i < 2; i++)
        if (!g[i]->sweeper)
            glue_check(L, mt_sweeper_new(&g[i]->sweeper, g[i]->grid, glue_of(L)->pool, &err), &err);
    glue_check(L, mt_field_resample(to, g[0]->sweeper, from, g[1]->sweeper, &err), &err);
    return 0;
}

/* add_discs(field, centres, radius, width, amount): centres one after the other */
static int add_discs(lua_State *L) {
    mt_field *f = glue_field(L, 1);
    size_t n;
    double *centres = glue_numbers(L, 2, &n);
    mt_field_add_discs(f, (int)(n / (size_t)f->grid->dim), centres, luaL_checknumber(L, 3),
                       luaL_checknumber(L, 4), luaL_checknumber(L, 5));
    return 0;
}

/* random(seed, stream) -> a number in [0, 1) that depends on nothing else */
static int random_one(lua_State *L) {
    double v;
    mt_random_fill(MT_RANDOM_UNIFORM, (uint64_t)luaL_checkinteger(L, 1), (uint64_t)luaL_checkinteger(L, 2), 1,
                   0, 1, &v);
    lua_pushnumber(L, 0.5 * (v + 1));
    return 1;
}

/* evaluate(into, grid, expression, fields, time): values of the expression in the field `into` (not touched)
 */
static int evaluate(lua_State *L) {
    mt_error err = {0};
    mt_field *into = glue_field(L, 1);
    glue_grid *g = glue_grid_at(L, 2);
    lua_settop(L, 5);
    const mt_expr *e = glue_expr(L, 3, "evaluate");
    int n;
    mt_field **fields = fields_at(L, 4, &n);
    if (!g->sweeper) glue_check(L, mt_sweeper_new(&g->sweeper, g->grid, glue_of(L)->pool, &err), &err);
    glue_check(L, mt_evaluate(g->sweeper, e, n, fields, luaL_optnumber(L, 5, 0), into->values, &err), &err);
    return 0;
}

/* --- models
 * ----------------------------------------------------------------------------------------------------------------------
 */

static mt_model *model_at(lua_State *L, int index) {
    mt_model *m = *(mt_model **)luaL_checkudata(L, index, GLUE_MODEL);
    if (!m) glue_fail(L, MT_ESCRIPT, "this model was closed");
    return m;
}

static int new_model(lua_State *L) {
    mt_error err = {0};
    glue_grid *g = glue_grid_at(L, 1);
    mt_model **m = glue_object(L, sizeof *m, GLUE_MODEL);
    glue_check(L, mt_model_new(m, glue_of(L)->forms, g->grid, glue_of(L)->pool, &err), &err);
    return 1;
}

static int free_model(lua_State *L) {
    mt_model_free(luaL_checkudata(L, 1, GLUE_MODEL));
    return 0;
}

static int energy(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    glue_check(L, mt_model_energy(m, glue_expr(L, 2, "energy"), &err), &err);
    return 0;
}

static int conserve(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    glue_check(L, mt_model_conserve(m, f, glue_expr(L, 3, "mobility"), &err), &err);
    return 0;
}

static int relax(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    glue_check(L, mt_model_relax(m, f, glue_expr(L, 3, "rate"), &err), &err);
    return 0;
}

static int evolve(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    glue_check(L, mt_model_evolve(m, f, glue_expr(L, 3, "right-hand side"), &err), &err);
    return 0;
}

static int still(lua_State *L) {
    mt_error err = {0};
    glue_check(L, mt_model_still(model_at(L, 1), glue_field(L, 2), &err), &err);
    return 0;
}

/* couple(model, field, other, coefficient); source(model, field, e); keep_mean(model, field) */
static int couple(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2), *other = glue_field(L, 3);
    glue_check(L, mt_model_couple(m, f, other, glue_expr(L, 4, "mobility"), &err), &err);
    return 0;
}

static int source(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    glue_check(L, mt_model_source(m, f, glue_expr(L, 3, "source"), &err), &err);
    return 0;
}

static int keep_mean(lua_State *L) {
    mt_error err = {0};
    glue_check(L, mt_model_keep_mean(model_at(L, 1), glue_field(L, 2), &err), &err);
    return 0;
}

/* carry(model, field, {vx, vy ...}) */
static int carry(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    const mt_expr *v[3] = {NULL, NULL, NULL};
    luaL_checktype(L, 3, LUA_TTABLE);
    for (int a = 0; a < f->grid->dim; a++) {
        lua_rawgeti(L, 3, a + 1);
        v[a] = glue_expr(L, lua_gettop(L), "velocity");
    }
    glue_check(L, mt_model_carry(m, f, v, &err), &err);
    return 0;
}

/* thermal(model, field, seed, stream, amplitude) */
static int thermal(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2);
    uint64_t seed = (uint64_t)luaL_checkinteger(L, 3);
    int stream = (int)luaL_checkinteger(L, 4);
    glue_check(L, mt_model_noise(m, f, seed, stream, glue_expr(L, 5, "thermal noise"), &err), &err);
    return 0;
}

/* fluctuations(model, field, means, kT, time, seed, into field) */
static int fluctuations(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_field *f = glue_field(L, 2), *into = glue_field(L, 7);
    size_t n;
    double *mean = glue_numbers(L, 3, &n);
    if ((int)n != mt_model_fields(m) || into->grid->cells != f->grid->cells)
        return glue_fail(L, MT_ESCRIPT,
                         "fluctuations need a mean for each of the model's fields, and its grid");
    glue_check(L,
               mt_model_fluctuations(m, f, mean, luaL_checknumber(L, 4), luaL_checknumber(L, 5),
                                     (uint64_t)luaL_checkinteger(L, 6), into->values, &err),
               &err);
    return 0;
}

static int potential(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL;
    glue_check(L, mt_model_potential(model_at(L, 1), glue_field(L, 2), &out, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

static int describe(lua_State *L) {
    mt_error err = {0};
    char *text = NULL;
    glue_check(L, mt_model_describe(model_at(L, 1), &text, &err), &err);
    lua_pushstring(L, text);
    mt_free(text);
    return 1;
}

static int bytes(lua_State *L) {
    mt_error err = {0};
    size_t n = 0;
    glue_check(L, mt_model_bytes(model_at(L, 1), &n, &err), &err);
    lua_pushnumber(L, (double)n);
    return 1;
}

/* growth(model, means, {kx, ky, kz}, time) -> rate, frequency */
static int growth(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    size_t n, nk;
    double *mean = glue_numbers(L, 2, &n), *k = glue_numbers(L, 3, &nk), rate, swing;
    double wave[3] = {nk > 0 ? k[0] : 0, nk > 1 ? k[1] : 0, nk > 2 ? k[2] : 0};
    if ((int)n != mt_model_fields(m))
        return glue_fail(L, MT_ESCRIPT, "growth needs a mean for each of the model's fields");
    glue_check(L, mt_model_growth(m, mean, wave, luaL_optnumber(L, 4, 0), &rate, &swing, &err), &err);
    lua_pushnumber(L, rate);
    lua_pushnumber(L, swing);
    return 2;
}

/* --- running
 * ---------------------------------------------------------------------------------------------------------------------
 */

static double option(lua_State *L, int index, const char *name) {
    lua_getfield(L, index, name);
    double v = luaL_optnumber(L, -1, 0);
    lua_pop(L, 1);
    return v;
}

/* { accuracy, step, longest, method } at index 2 */
static mt_step_options step_options(lua_State *L) {
    static const mt_stepper steppers[] = {MT_STEPPER_SBDF3, MT_STEPPER_SBDF2, MT_STEPPER_EULER,
                                          MT_STEPPER_ETDRK2};
    luaL_checktype(L, 2, LUA_TTABLE);
    int method = (int)option(L, 2, "method");
    return (mt_step_options){.accuracy = option(L, 2, "accuracy"),
                             .fixed = option(L, 2, "step"),
                             .longest = option(L, 2, "longest"),
                             .stepper = steppers[method >= 0 && method < 4 ? method : 0],
                             .free_energy = true};
}

/* start(model, options, time), options(model, options) */
static int start(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_step_options o = step_options(L);
    glue_check(L, mt_model_start(m, &o, luaL_optnumber(L, 3, 0), &err), &err);
    return 0;
}

static int set_options(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    mt_step_options o = step_options(L);
    glue_check(L, mt_model_options(m, &o, &err), &err);
    return 0;
}

static void push_state(lua_State *L, const mt_run_state *s) {
    const struct {
        const char *name;
        double value;
    } entries[] = {
        {"time", s->time},
        {"step", s->step},
        {"energy", s->energy},
        {"steps", (double)s->steps},
        {"rejected", (double)s->rejected},
        {"evaluations", (double)s->evaluations},
        {"step_min", s->step_min},
        {"step_max", s->step_max},
        {"energy_rise", s->energy_rise},
        {"mean_drift", s->mean_drift},
        {"log_lowest", s->log_lowest},
        {"log_steps", (double)s->log_steps},
        {"matrix_lowest", s->matrix_lowest},
        {"matrix_cell", (double)s->matrix_cell},
        {"matrix_skew", s->matrix_skew},
    };
    lua_newtable(L);
    for (size_t i = 0; i < sizeof entries / sizeof *entries; i++) {
        lua_pushnumber(L, entries[i].value);
        lua_setfield(L, -2, entries[i].name);
    }
}

static int state(lua_State *L) {
    push_state(L, mt_model_state(model_at(L, 1)));
    return 1;
}

/* The tick calls the Lua function at index 3 now and then, protected: an error in it is kept and ends the
 * run. */
typedef struct tick_ctx {
    lua_State *L;
    bool failed, single;
    double enough; /* ends at the first step that reaches this time */
} tick_ctx;

/* Also the table is made in here: memory may end while it is. */
static int call_tick(lua_State *L) {
    const mt_run_state *s = lua_touserdata(L, 2);
    lua_settop(L, 1);
    push_state(L, s);
    lua_call(L, 1, 0);
    return 0;
}

static bool tick(void *ctx, const mt_run_state *s) {
    tick_ctx *t = ctx;
    lua_State *L = t->L;
    if (glue_stopping() || t->single || s->time >= t->enough) return true;
    if (s->steps % 16 || !lua_isfunction(L, 3)) return false;
    lua_pushcfunction(L, call_tick);
    lua_pushvalue(L, 3);
    lua_pushlightuserdata(L, (void *)s);
    t->failed = lua_pcall(L, 2, 0, 0) != LUA_OK; /* the message stays on the stack */
    return t->failed;
}

/* advance(model, until, tick function or nil, single, enough) -> true when `until` was reached, false when
 * stopped on the way: after one step (single), or at the first step's end at or after the time `enough` */
static int advance(lua_State *L) {
    mt_error err = {0};
    mt_model *m = model_at(L, 1);
    double until = luaL_checknumber(L, 2);
    lua_settop(L, 5);
    tick_ctx t = {L, false, lua_toboolean(L, 4), luaL_optnumber(L, 5, HUGE_VAL)};
    luaL_checkstack(L, 8, NULL);
    mt_status st = mt_model_advance(m, until, tick, &t, &err);
    if (t.failed) return lua_error(L);
    bool expected = t.single || mt_model_state(m)->time >= t.enough;
    if (st == MT_ESTOPPED && expected && !glue_stopping()) {
        lua_pushboolean(L, 0);
        return 1;
    }
    if (st == MT_ESTOPPED)
        return glue_fail(L, MT_ESTOPPED, "stopped on request at time %.6g", mt_model_state(m)->time);
    glue_check(L, st, &err);
    lua_pushboolean(L, 1);
    return 1;
}

void glue_open_motion(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"field", new_field},   {"field_name", field_name}, {"field_set", field_set},
        {"evaluate", evaluate}, {"model", new_model},       {"energy", energy},
        {"conserve", conserve}, {"relax", relax},           {"evolve", evolve},
        {"still", still},       {"potential", potential},   {"describe", describe},
        {"bytes", bytes},       {"growth", growth},         {"start", start},
        {"state", state},       {"advance", advance},       {"add_discs", add_discs},
        {"random", random_one}, {"couple", couple},         {"source", source},
        {"carry", carry},       {"keep_mean", keep_mean},   {"step_options", set_options},
        {"thermal", thermal},   {"resample", resample},     {"fluctuations", fluctuations},
        {NULL, NULL},
    };
    static const luaL_Reg field_meta[] = {{"__gc", free_field}, {"__close", free_field}, {NULL, NULL}};
    static const luaL_Reg model_meta[] = {{"__gc", free_model}, {"__close", free_model}, {NULL, NULL}};
    glue_class(L, GLUE_FIELD, field_meta, NULL);
    glue_class(L, GLUE_MODEL, model_meta, NULL);
    glue_operators(L, GLUE_FIELD);
    luaL_setfuncs(L, functions, 0);
}
