/* Expressions and params. */
#include "lua/glue.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/formula/filter.h"

/* --- coercion
 * ------------------------------------------------------------------------------------------------------------------
 */

typedef struct param {
    mt_symbol *symbol;
} param;

void glue_push_expr(lua_State *L, const mt_expr *fresh) {
    const mt_expr **e = lua_newuserdatauv(L, sizeof *e, 1);
    *e = fresh; /* nothing raises between here and the metatable */
    luaL_setmetatable(L, GLUE_EXPR);
}

const mt_expr *glue_expr(lua_State *L, int index, const char *what) {
    mt_error err = {0};
    const mt_expr *e = NULL, **object;
    mt_forms *forms = glue_of(L)->forms;
    param *p;
    mt_field **f;
    mt_status st = MT_OK;
    if ((object = luaL_testudata(L, index, GLUE_EXPR)) != NULL)
        e = mt_expr_ref(*object);
    else if (lua_type(L, index) == LUA_TNUMBER)
        st = mt_expr_const(&e, forms, lua_tonumber(L, index), &err);
    else if ((f = luaL_testudata(L, index, GLUE_FIELD)) != NULL)
        st = mt_expr_symbol(&e, forms, (*f)->symbol, &err);
    else if ((p = luaL_testudata(L, index, GLUE_PARAM)) != NULL)
        st = mt_expr_symbol(&e, forms, p->symbol, &err);
    else
        glue_fail(L, MT_ESCRIPT, "%s: expected a number, field, param or expression, found %s", what,
                  luaL_typename(L, index));
    glue_check(L, st, &err);
    glue_push_expr(L, e);
    return e;
}

double *glue_numbers(lua_State *L, int index, size_t *n) {
    luaL_checktype(L, index, LUA_TTABLE);
    *n = (size_t)lua_rawlen(L, index);
    double *v = lua_newuserdatauv(L, (*n + 1) * sizeof *v, 0);
    for (size_t i = 0; i < *n; i++) {
        lua_rawgeti(L, index, (lua_Integer)i + 1);
        if (lua_type(L, -1) != LUA_TNUMBER)
            glue_fail(L, MT_ESCRIPT, "expected a list of numbers, found %s at place %d", luaL_typename(L, -1),
                      (int)i + 1);
        v[i] = lua_tonumber(L, -1);
        lua_pop(L, 1);
    }
    return v;
}

/* --- operators
 * ------------------------------------------------------------------------------------------------------------------
 */

static int apply(lua_State *L, mt_op op, int n) {
    mt_error err = {0};
    const mt_expr *a[3], *out = NULL;
    for (int i = 0; i < n; i++) a[i] = glue_expr(L, i + 1, mt_op_text(op));
    glue_check(L, mt_expr_make(&out, op, n, a, 0, NULL, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

/* A vector or a starting state on the right knows what a formula on its left means; Lua asks the left operand
 * first. */
static int binary(lua_State *L, mt_op op, const char *event) {
    if (!lua_istable(L, 2) || luaL_getmetafield(L, 2, event) == LUA_TNIL) return apply(L, op, 2);
    lua_insert(L, 1);
    lua_call(L, 2, 1);
    return 1;
}

static int op_add(lua_State *L) {
    return binary(L, MT_ADD_OP, "__add");
}
static int op_sub(lua_State *L) {
    return binary(L, MT_SUB_OP, "__sub");
}
static int op_mul(lua_State *L) {
    return binary(L, MT_MUL_OP, "__mul");
}
static int op_div(lua_State *L) {
    return binary(L, MT_DIV_OP, "__div");
}
static int op_pow(lua_State *L) {
    return apply(L, MT_POW_OP, 2);
}
static int op_unm(lua_State *L) {
    return apply(L, MT_NEG_OP, 1);
}

static int op_compare(lua_State *L) {
    return glue_fail(L, MT_ESCRIPT,
                     "formulas cannot be compared with < or <=, since Lua makes true or false of that once "
                     "and for all; use "
                     "above(a, b) or below(a, b), which are 1 or 0 in each cell");
}

static int op_call(lua_State *L) {
    return glue_fail(L, MT_ESCRIPT, "a formula is not a function and cannot be called");
}

static int op_index(lua_State *L) {
    return glue_fail(L, MT_ESCRIPT,
                     "a formula has no '%s'; what can be named is a measurement, as mean(c):as(\"name\")",
                     luaL_tolstring(L, 2, NULL));
}

/* Name of an operator -> its number. */
static mt_op find_op(lua_State *L, const char *name) {
    for (int op = 0; op < MT_OP_COUNT; op++)
        if (strcmp(mt_op_text((mt_op)op), name) == 0 && mt_op_args((mt_op)op) > 0) return (mt_op)op;
    glue_fail(L, MT_ESCRIPT, "there is no function '%s'", name);
    return MT_CONST_OP;
}

/* apply(name, a, ...) */
static int apply_named(lua_State *L) {
    mt_op op = find_op(L, luaL_checkstring(L, 1));
    lua_remove(L, 1);
    int n = mt_op_args(op);
    for (int i = 1; i <= n; i++)
        if (lua_isnoneornil(L, i))
            return glue_fail(L, MT_ESCRIPT, "%s: argument %d is missing", mt_op_text(op), i);
    return apply(L, op, n);
}

static int deriv(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL, *e;
    int axis = (int)luaL_checkinteger(L, 1);
    e = glue_expr(L, 2, "a derivative");
    glue_check(L, mt_expr_deriv(&out, axis, e, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

static int coord(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL;
    glue_check(L, mt_expr_coord(&out, glue_of(L)->forms, (int)luaL_checkinteger(L, 1), &err), &err);
    glue_push_expr(L, out);
    return 1;
}

static int time_node(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL;
    glue_check(L, mt_expr_time(&out, glue_of(L)->forms, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

static int noise(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL;
    mt_random_kind kind = lua_toboolean(L, 1) ? MT_RANDOM_NORMAL : MT_RANDOM_UNIFORM;
    glue_check(L, mt_expr_noise(&out, glue_of(L)->forms, kind, (uint64_t)luaL_checkinteger(L, 2), &err),
               &err);
    glue_push_expr(L, out);
    return 1;
}

static int text(lua_State *L) {
    const mt_expr *e = glue_expr(L, 1, "text");
    size_t n = mt_expr_print(e, NULL, 0);
    luaL_Buffer b;
    char *buf = luaL_buffinitsize(L, &b, n + 1);
    mt_expr_print(e, buf, n + 1);
    luaL_pushresultsize(&b, n);
    return 1;
}

static int op_concat(lua_State *L) {
    for (int i = 1; i <= 2; i++) luaL_tolstring(L, i, NULL);
    lua_concat(L, 2);
    return 1;
}

static int free_expr(lua_State *L) {
    mt_expr_unref(luaL_checkudata(L, 1, GLUE_EXPR));
    return 0;
}

/* number(e, time) -> value, or nil where it varies over the cells */
static int number(lua_State *L) {
    mt_error err = {0};
    double v;
    lua_settop(L, 2);
    const mt_expr *e = glue_expr(L, 1, "a number");
    if (!mt_expr_uniform(e))
        lua_pushnil(L);
    else {
        glue_check(L, mt_expr_number(e, luaL_optnumber(L, 2, 0), &v, &err), &err);
        lua_pushnumber(L, v);
    }
    return 1;
}

static int is_expr(lua_State *L) {
    lua_pushboolean(L, luaL_testudata(L, 1, GLUE_EXPR) || luaL_testudata(L, 1, GLUE_FIELD) ||
                           luaL_testudata(L, 1, GLUE_PARAM));
    return 1;
}

static int kind(lua_State *L) {
    static const char *classes[][2] = {{GLUE_EXPR, "expression"}, {GLUE_FIELD, "field"},
                                       {GLUE_PARAM, "param"},     {GLUE_GRID, "grid"},
                                       {GLUE_MODEL, "model"},     {GLUE_FOLDER, "folder"}};
    for (size_t i = 0; i < sizeof classes / sizeof *classes; i++)
        if (luaL_testudata(L, 1, classes[i][0])) {
            lua_pushstring(L, classes[i][1]);
            return 1;
        }
    lua_pushstring(L, luaL_typename(L, 1));
    return 1;
}

static int contains(lua_State *L) {
    const mt_expr *e = glue_expr(L, 1, "contains"), *what = glue_expr(L, 2, "contains");
    lua_pushboolean(L, mt_expr_contains(e, what));
    return 1;
}

/* dim(e) -> axes of the grid its fields live on, or nil */
static int dim(lua_State *L) {
    mt_error err = {0};
    mt_grid *grid = NULL;
    const mt_expr *e = glue_expr(L, 1, "a formula");
    glue_check(L, mt_expr_grid(e, &grid, &err), &err);
    if (grid)
        lua_pushinteger(L, grid->dim);
    else
        lua_pushnil(L);
    return 1;
}

/* partial(e, wrt), variation(density, field, dim), replace(e, what, by) */
static int partial(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL, *e = glue_expr(L, 1, "derivative"), *wrt = glue_expr(L, 2, "derivative");
    char what[200];
    if (wrt->op != MT_FIELD_OP && wrt->op != MT_PARAM_OP && wrt->op != MT_COORD_OP && wrt->op != MT_TIME_OP &&
        wrt->op != MT_GRADSQ_OP && !mt_op_spectral(wrt->op)) {
        mt_expr_print(wrt, what, sizeof what);
        return glue_fail(L, MT_ESCRIPT,
                         "derivative: there is none with respect to '%s'; it is taken by a field, a param, a "
                         "coordinate, time, or a derivative such as gradsq(c), dx(c), laplacian(c)",
                         what);
    }
    glue_check(L, mt_expr_partial(&out, e, wrt, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

static int replace(lua_State *L) {
    mt_error err = {0};
    const mt_expr *out = NULL, *e = glue_expr(L, 1, "replace"), *what = glue_expr(L, 2, "replace");
    const mt_expr *by = glue_expr(L, 3, "replace");
    glue_check(L, mt_expr_replace(&out, e, what, by, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

/* --- filters
 * ---------------------------------------------------------------------------------------------------------------------
 */

/* The script's function, kept in the registry as long as core keeps the symbol. */
typedef struct multiplier {
    lua_State *L; /* main thread: outlives coroutines */
    int ref, args;
} multiplier;

typedef struct call {
    const double *k;
    int args;
    double value;
} call;

static int call_multiplier(lua_State *L) {
    call *c = lua_touserdata(L, 2);
    lua_settop(L, 1);
    if (c->args == 1)
        lua_pushnumber(L, sqrt(c->k[0] * c->k[0] + c->k[1] * c->k[1] + c->k[2] * c->k[2]));
    else
        for (int i = 0; i < c->args; i++) lua_pushnumber(L, c->k[i]);
    lua_call(L, c->args, 1);
    if (lua_type(L, -1) != LUA_TNUMBER)
        return luaL_error(
            L, "filter: its function has to give a real number, found %s at wave vector (%f, %f, %f)",
            luaL_typename(L, -1), c->k[0], c->k[1], c->k[2]);
    c->value = lua_tonumber(L, -1);
    return 0;
}

static mt_status multiply(void *ctx, const double k[3], double *value, mt_error *err) {
    multiplier *m = ctx;
    call c = {k, m->args, 0};
    lua_State *L = m->L;
    if (!lua_checkstack(L, 8)) return mt_fail(err, MT_ENOMEM, "no memory for a filter");
    lua_pushcfunction(L, call_multiplier);
    lua_rawgeti(L, LUA_REGISTRYINDEX, m->ref);
    lua_pushlightuserdata(L, &c);
    if (lua_pcall(L, 2, 0, 0) != LUA_OK) {
        const char *text = lua_tostring(L, -1);
        mt_status st = mt_fail(err, MT_ESCRIPT, "%s", text ? text : "filter: an error without a text");
        lua_pop(L, 1);
        return st;
    }
    *value = c.value;
    return MT_OK;
}

static void release_multiplier(void *ctx) {
    multiplier *m = ctx;
    luaL_unref(m->L, LUA_REGISTRYINDEX, m->ref);
    mt_free(m);
}

static int free_filter(lua_State *L) {
    mt_symbol_unref(luaL_checkudata(L, 1, GLUE_FILTER));
    return 0;
}

/* filter(grid, name, function, number of its arguments) -> multiplier, to be applied with
 * filtered(multiplier, e) */
static int new_filter(lua_State *L) {
    mt_error err = {0};
    glue_grid *g = glue_grid_at(L, 1);
    const char *name = luaL_checkstring(L, 2);
    luaL_checktype(L, 3, LUA_TFUNCTION);
    int args = (int)luaL_checkinteger(L, 4);
    if (!g->sweeper) glue_check(L, mt_sweeper_new(&g->sweeper, g->grid, glue_of(L)->pool, &err), &err);
    mt_symbol **f = glue_object(L, sizeof *f, GLUE_FILTER);
    multiplier *m = NULL;
    glue_check(L, mt_new(&m, 1, sizeof *m, "a filter", &err), &err);
    lua_rawgeti(L, LUA_REGISTRYINDEX, LUA_RIDX_MAINTHREAD);
    m->L = lua_tothread(L, -1);
    lua_pop(L, 1);
    m->args = args;
    lua_pushvalue(L, 3);
    m->ref = luaL_ref(L, LUA_REGISTRYINDEX);
    mt_status st = mt_filter_new(f, glue_of(L)->forms, mt_sweeper_spectrum(g->sweeper), name,
                                 (mt_filter_function){multiply, release_multiplier, m}, &err);
    glue_check(L, st, &err);
    return 1;
}

static int filtered(lua_State *L) {
    mt_error err = {0};
    mt_symbol **f = luaL_checkudata(L, 1, GLUE_FILTER);
    const mt_expr *out = NULL, *e = glue_expr(L, 2, "filter");
    glue_check(L, mt_expr_make(&out, MT_FILTER_OP, 1, &e, 0, *f, &err), &err);
    glue_push_expr(L, out);
    return 1;
}

/* --- params
 * ----------------------------------------------------------------------------------------------------------------------
 */

static int new_param(lua_State *L) {
    mt_error err = {0};
    const char *name = luaL_checkstring(L, 1);
    double value = luaL_checknumber(L, 2);
    param *p = glue_object(L, sizeof *p, GLUE_PARAM);
    glue_check(L, mt_symbol_new(&p->symbol, glue_of(L)->forms, MT_SYMBOL_PARAM, name, NULL, &err), &err);
    p->symbol->value = value;
    return 1;
}

static int free_param(lua_State *L) {
    mt_symbol_unref(&((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol);
    return 0;
}

static int param_name(lua_State *L) {
    lua_pushstring(L, ((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol->name);
    return 1;
}

/* param_value(p [, time [, after]]), after: the later value at a jump ; param_set(p, value) ;
 * param_history(p, times, values) */
static int param_value(lua_State *L) {
    mt_symbol *s = ((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol;
    bool before = !lua_toboolean(L, 3);
    lua_pushnumber(L, lua_isnoneornil(L, 2) ? s->value : mt_symbol_at(s, luaL_checknumber(L, 2), before));
    return 1;
}

/* param_present(p, time): formulas see the value at that time. A model does this for its own params as it
 * steps; it does it again before each step, so this never disturbs it. */
static int param_present(lua_State *L) {
    mt_symbol *s = ((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol;
    s->value = mt_symbol_at(s, luaL_checknumber(L, 2), true);
    return 0;
}

static int param_set(lua_State *L) {
    mt_error err = {0};
    mt_symbol *s = ((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol;
    glue_check(L, mt_symbol_set_history(s, 0, NULL, NULL, &err), &err);
    s->value = luaL_checknumber(L, 2);
    return 0;
}

static int param_history(lua_State *L) {
    mt_error err = {0};
    size_t n, m;
    mt_symbol *s = ((param *)luaL_checkudata(L, 1, GLUE_PARAM))->symbol;
    double *time = glue_numbers(L, 2, &n), *value = glue_numbers(L, 3, &m);
    if (n != m) return glue_fail(L, MT_ESCRIPT, "a history needs as many times as values");
    glue_check(L, mt_symbol_set_history(s, (int)n, time, value, &err), &err);
    if (n) s->value = value[0];
    return 0;
}

/* --- opening
 * -----------------------------------------------------------------------------------------------------------------------
 */

static const luaL_Reg operators[] = {
    {"__add", op_add},   {"__sub", op_sub},       {"__mul", op_mul},     {"__div", op_div},
    {"__pow", op_pow},   {"__unm", op_unm},       {"__lt", op_compare},  {"__le", op_compare},
    {"__call", op_call}, {"__concat", op_concat}, {"__index", op_index}, {"__tostring", text},
    {NULL, NULL},
};

/* Fields and params take part in formulas: glue_motion.c asks for the same operators. */
void glue_operators(lua_State *L, const char *class);
void glue_operators(lua_State *L, const char *class) {
    luaL_getmetatable(L, class);
    luaL_setfuncs(L, operators, 0);
    lua_pop(L, 1);
}

void glue_open_formula(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"apply", apply_named},
        {"deriv", deriv},
        {"coord", coord},
        {"time", time_node},
        {"noise", noise},
        {"text", text},
        {"number", number},
        {"is_expr", is_expr},
        {"kind", kind},
        {"contains", contains},
        {"dim", dim},
        {"partial", partial},
        {"replace", replace},
        {"filter", new_filter},
        {"filtered", filtered},
        {"param", new_param},
        {"param_name", param_name},
        {"param_value", param_value},
        {"param_present", param_present},
        {"param_set", param_set},
        {"param_history", param_history},
        {NULL, NULL},
    };
    static const luaL_Reg expr_meta[] = {{"__gc", free_expr}, {"__close", free_expr}, {NULL, NULL}};
    static const luaL_Reg param_meta[] = {{"__gc", free_param}, {"__close", free_param}, {NULL, NULL}};
    glue_class(L, GLUE_EXPR, expr_meta, NULL);
    static const luaL_Reg filter_meta[] = {{"__gc", free_filter}, {"__close", free_filter}, {NULL, NULL}};
    glue_class(L, GLUE_PARAM, param_meta, NULL);
    glue_class(L, GLUE_FILTER, filter_meta, NULL);
    glue_operators(L, GLUE_EXPR);
    glue_operators(L, GLUE_PARAM);
    luaL_setfuncs(L, functions, 0);
}
