/* Grids. */
#include "lua/glue.h"

glue_grid *glue_grid_at(lua_State *L, int index) {
    return luaL_checkudata(L, index, GLUE_GRID);
}

/* grid(cells, spacing, walls): lists with one entry per axis; walls true for mirror */
static int new_grid(lua_State *L) {
    mt_error err = {0};
    size_t dim, dh;
    double *cells = glue_numbers(L, 1, &dim), *h = glue_numbers(L, 2, &dh);
    int n[3] = {1, 1, 1};
    mt_wall wall[3];
    if (dim < 1 || dim > 3 || dh != dim)
        return glue_fail(L, MT_EINPUT, "a grid has 1, 2 or 3 axes, not %d", (int)dim);
    for (size_t a = 0; a < dim; a++) {
        if (!(cells[a] >= 1 && cells[a] <= 2147483647.0))
            return glue_fail(L, MT_EINPUT,
                             "the grid has %.6g cells along axis %d; 1 to 2147483647 are possible", cells[a],
                             (int)a + 1);
        n[a] = (int)cells[a];
        lua_rawgeti(L, 3, (lua_Integer)a + 1);
        wall[a] = lua_toboolean(L, -1) ? MT_MIRROR : MT_PERIODIC;
        lua_pop(L, 1);
    }
    glue_grid *g = glue_object(L, sizeof *g, GLUE_GRID);
    glue_check(L, mt_grid_new(&g->grid, (int)dim, n, h, wall, &err), &err);
    return 1;
}

/* Plans are made when the first transform is wanted, so that a grid that is too large fails with its memory
 * stated first. */
static int ready(lua_State *L) {
    mt_error err = {0};
    glue_grid *g = glue_grid_at(L, 1);
    if (!g->sweeper) glue_check(L, mt_sweeper_new(&g->sweeper, g->grid, glue_of(L)->pool, &err), &err);
    return 0;
}

static int free_grid(lua_State *L) {
    glue_grid *g = glue_grid_at(L, 1);
    mt_sweeper_free(&g->sweeper);
    mt_grid_unref(&g->grid);
    return 0;
}

void glue_open_space(lua_State *L) {
    static const luaL_Reg functions[] = {{"grid", new_grid}, {"grid_ready", ready}, {NULL, NULL}};
    static const luaL_Reg meta[] = {{"__gc", free_grid}, {"__close", free_grid}, {NULL, NULL}};
    glue_class(L, GLUE_GRID, meta, NULL);
    luaL_setfuncs(L, functions, 0);
}
