/* Folders, tables, pictures, arrays. */
#include "lua/glue.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/files/atomic.h"
#include "core/files/number.h"
#include "core/files/npy.h"
#include "core/files/picture.h"
#include "core/files/png.h"
#include "core/files/table.h"

static mt_folder *folder_at(lua_State *L, int index) {
    if (lua_isnoneornil(L, index)) return NULL;
    mt_folder *f = *(mt_folder **)luaL_checkudata(L, index, GLUE_FOLDER);
    if (!f) glue_fail(L, MT_ESCRIPT, "this folder was closed");
    return f;
}

/* folder(path, "make" | "replace" | "open" | "plain" | "replace plain") */
static int open_folder(lua_State *L) {
    mt_error err = {0};
    const char *path = luaL_checkstring(L, 1), *how = luaL_checkstring(L, 2);
    mt_folder **f = glue_object(L, sizeof *f, GLUE_FOLDER);
    if (strcmp(how, "open") == 0)
        glue_check(L, mt_folder_open(f, path, &err), &err);
    else if (strstr(how, "plain"))
        glue_check(L, mt_folder_make_plain(f, path, strncmp(how, "replace", 7) == 0, &err), &err);
    else
        glue_check(L, mt_folder_make(f, path, strcmp(how, "replace") == 0, &err), &err);
    return 1;
}

static int close_folder(lua_State *L) {
    mt_folder_close(luaL_checkudata(L, 1, GLUE_FOLDER));
    return 0;
}

static int sub_folder(lua_State *L) {
    mt_error err = {0};
    glue_check(L, mt_folder_sub(folder_at(L, 1), luaL_checkstring(L, 2), &err), &err);
    return 0;
}

static int put_file(lua_State *L) {
    mt_error err = {0};
    size_t n;
    const char *bytes = luaL_checklstring(L, 3, &n);
    glue_check(L, mt_atomic_put(folder_at(L, 1), luaL_checkstring(L, 2), bytes, n, &err), &err);
    return 0;
}

/* copy(folder, name, from, source) */
static int copy_file(lua_State *L) {
    mt_error err = {0};
    mt_folder *to = folder_at(L, 1), *from = folder_at(L, 3);
    const char *name = luaL_checkstring(L, 2), *source = luaL_checkstring(L, 4);
    glue_check(L, mt_atomic_copy(to, name, from, source, &err), &err);
    return 0;
}

/* read(folder or nil, name) -> text; raises */
static int read_file(lua_State *L) {
    mt_error err = {0};
    char *bytes = NULL;
    size_t n = 0;
    glue_check(L, mt_folder_read(folder_at(L, 1), luaL_checkstring(L, 2), (size_t)64 << 20, &bytes, &n, &err),
               &err);
    lua_pushlstring(L, bytes, n); /* a memory error here leaks the block once and ends the program */
    mt_free(bytes);
    return 1;
}

static int has_file(lua_State *L) {
    lua_pushboolean(L, mt_folder_has(folder_at(L, 1), luaL_checkstring(L, 2)));
    return 1;
}

/* --- tables
 * ----------------------------------------------------------------------------------------------------------------------
 */

#define MOST_COLUMNS 128

/* table(folder, name, {{name, unit, is_text}, ...}) */
static int new_table(lua_State *L) {
    mt_error err = {0};
    mt_table_column column[MOST_COLUMNS];
    int n = (int)lua_rawlen(L, 3);
    if (n > MOST_COLUMNS)
        return glue_fail(L, MT_EINPUT, "a table of %d columns; at most %d are possible", n, MOST_COLUMNS);
    for (int i = 0; i < n; i++) { /* the strings stay alive in the table at 3 */
        lua_rawgeti(L, 3, i + 1);
        lua_rawgeti(L, -1, 1), lua_rawgeti(L, -2, 2), lua_rawgeti(L, -3, 3);
        column[i] = (mt_table_column){lua_tostring(L, -3), lua_tostring(L, -2), lua_toboolean(L, -1)};
        lua_pop(L, 4);
    }
    mt_table **t = glue_object(L, sizeof *t, GLUE_TABLE);
    glue_check(L, mt_table_create(t, folder_at(L, 1), luaL_checkstring(L, 2), n, column, &err), &err);
    return 1;
}

/* row(table, cells): numbers, strings, or false for an empty cell */
static int table_row(lua_State *L) {
    mt_error err = {0};
    mt_cell cell[MOST_COLUMNS];
    mt_table *t = *(mt_table **)luaL_checkudata(L, 1, GLUE_TABLE);
    int n = (int)lua_rawlen(L, 2);
    if (n > MOST_COLUMNS) n = MOST_COLUMNS;
    for (int i = 0; i < n; i++) {
        lua_rawgeti(L, 2, i + 1);
        cell[i] = (mt_cell){NAN, NULL};
        if (lua_type(L, -1) == LUA_TNUMBER)
            cell[i].value = lua_tonumber(L, -1);
        else if (lua_type(L, -1) == LUA_TSTRING)
            cell[i].text = lua_tostring(L, -1);
        lua_pop(L, 1);
    }
    glue_check(L, mt_table_row(t, cell, &err), &err);
    return 0;
}

static int close_table(lua_State *L) {
    mt_error err = {0};
    glue_check(L, mt_table_close(luaL_checkudata(L, 1, GLUE_TABLE), &err), &err);
    return 0;
}

static int drop_table(lua_State *L) {
    mt_error err;
    (void)!mt_table_close(luaL_checkudata(L, 1, GLUE_TABLE), &err);
    return 0;
}

/* read_table(folder or nil, name) -> { names = {...}, units = {...}, rows = {{...}, ...} } */
static int read_table(lua_State *L) {
    mt_error err = {0};
    mt_columns c;
    glue_check(L, mt_table_read(&c, folder_at(L, 1), luaL_checkstring(L, 2), 0, &err), &err);
    lua_newtable(L);
    lua_newtable(L), lua_newtable(L), lua_newtable(L);
    for (int i = 0; i < c.columns; i++) {
        lua_pushstring(L, c.name[i]), lua_rawseti(L, -4, i + 1);
        lua_pushstring(L, c.unit[i]), lua_rawseti(L, -3, i + 1);
    }
    for (size_t r = 0; r < c.rows; r++) {
        lua_createtable(L, c.columns, 0);
        for (int i = 0; i < c.columns; i++) {
            lua_pushnumber(L, c.values[r * (size_t)c.columns + (size_t)i]);
            lua_rawseti(L, -2, i + 1);
        }
        lua_rawseti(L, -2, (lua_Integer)r + 1);
    }
    lua_setfield(L, -4, "rows"), lua_setfield(L, -3, "units"), lua_setfield(L, -2, "names");
    mt_columns_free(&c);
    return 1;
}

/* --- pictures and arrays
 * -----------------------------------------------------------------------------------------------------------
 */

static double number_option(lua_State *L, int index, const char *name, double absent) {
    lua_getfield(L, index, name);
    double v = luaL_optnumber(L, -1, absent);
    lua_pop(L, 1);
    return v;
}

/* picture(folder, name, field, { low, high, map, title, quantity, spacing, metres }) */
static int write_picture(lua_State *L) {
    mt_error err = {0};
    mt_folder *folder = folder_at(L, 1);
    const char *name = luaL_checkstring(L, 2);
    mt_field *f = glue_field(L, 3);
    mt_picture p = mt_picture_default();
    p.low = number_option(L, 4, "low", NAN);
    p.high = number_option(L, 4, "high", NAN);
    p.spacing = number_option(L, 4, "spacing", 0);
    p.scale = (int)number_option(L, 4, "scale", 0);
    lua_getfield(L, 4, "metres"), p.metres = lua_toboolean(L, -1);
    lua_getfield(L, 4, "title"), p.title = lua_tostring(L, -1);
    lua_getfield(L, 4, "quantity"), p.quantity = lua_tostring(L, -1);
    lua_getfield(L, 4, "map");
    if (!lua_isnil(L, -1)) glue_check(L, mt_map_find(luaL_checkstring(L, -1), &p.map, &err), &err);
    glue_check(L, mt_picture_write(&p, folder, name, f->grid->dim, f->grid->n, f->values, &err), &err);
    return 0;
}

static int write_array(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 3);
    glue_check(
        L, mt_npy_write(folder_at(L, 1), luaL_checkstring(L, 2), f->grid->dim, f->grid->n, f->values, &err),
        &err);
    return 0;
}

/* Shape as the file states it: slowest axis first, without axes of one cell in front. */
static void shape_text(char *text, size_t room, const int n[], int dim) {
    while (dim > 1 && n[dim - 1] == 1) dim--;
    size_t at = (size_t)snprintf(text, room, "(%d", n[dim - 1]);
    for (int i = dim - 2; i >= 0; i--) at += (size_t)snprintf(text + at, room - at, ", %d", n[i]);
    snprintf(text + at, room - at, ")");
}

/* read_array(folder, name, field): the shape must be the grid's, but for axes of one cell in front */
static int read_array(lua_State *L) {
    mt_error err = {0};
    mt_npy a;
    mt_field *f = glue_field(L, 3);
    size_t bytes = f->grid->cells * sizeof(double),
           most = (size_t)64 << 20; /* small ones are told by shape */
    glue_check(L, mt_npy_read(&a, folder_at(L, 1), luaL_checkstring(L, 2), bytes > most ? bytes : most, &err),
               &err);
    char expected[60], found[60];
    shape_text(expected, sizeof expected, f->grid->n, f->grid->dim);
    shape_text(found, sizeof found, a.n, a.dim);
    bool fits = strcmp(expected, found) == 0;
    if (fits) memcpy(f->values, a.values, f->grid->cells * sizeof(double));
    mt_npy_free(&a);
    if (!fits)
        return glue_fail(L, MT_EINPUT, "array '%s': expected the grid's shape, %s with x last, found %s",
                         lua_tostring(L, 2), expected, found);
    mt_field_touch(f);
    return 0;
}

/* The pixel that holds the centre of cell i: by size of a pixel, or stretched over the box when pixel is 0.
 */
static int pixel_of(int i, int n, double h, int pixels, double pixel) {
    if (pixel == 0) return (int)((2LL * i + 1) * pixels / (2LL * n));
    int p = (int)((i + 0.5) * h / pixel);
    return p < pixels ? p : pixels - 1;
}

/* Whether pixels of this size cover the box; half a cell may be missing, since only centres are asked for. */
static bool covers(const mt_grid *g, const mt_image *im, double pixel) {
    return pixel == 0 || (im->width * pixel >= (g->n[0] - 0.5) * g->h[0] &&
                          im->height * pixel >= (g->n[1] - 0.5) * g->h[1]);
}

/* read_image(folder, name, field, pixel): brightness 0 .. 1, the image's lower left at the grid's origin,
 * nearest pixel. pixel: its size, 0 to stretch the image over the box */
static int read_image(lua_State *L) {
    mt_error err = {0};
    mt_image im;
    mt_field *f = glue_field(L, 3);
    const mt_grid *g = f->grid;
    const char *name = luaL_checkstring(L, 2);
    double pixel = luaL_optnumber(L, 4, 0);
    if (g->dim != 2) return glue_fail(L, MT_EINPUT, "an image starts a field on a grid of two axes");
    glue_check(L, mt_png_read(&im, folder_at(L, 1), name, 0, &err), &err);
    if (!covers(g, &im, pixel)) {
        int width = im.width, height = im.height;
        mt_image_free(&im);
        return glue_fail(
            L, MT_EINPUT, "image '%s': %d x %d pixels of size %g make %g x %g, less than the box of %g x %g",
            name, width, height, pixel, width * pixel, height * pixel, g->n[0] * g->h[0], g->n[1] * g->h[1]);
    }
    for (int y = 0; y < g->n[1]; y++)
        for (int x = 0; x < g->n[0]; x++) {
            int px = pixel_of(x, g->n[0], g->h[0], im.width, pixel),
                py = pixel_of(y, g->n[1], g->h[1], im.height, pixel);
            f->values[(size_t)y * (size_t)g->n[0] + (size_t)x] =
                im.grey[(size_t)py * (size_t)im.width + (size_t)px];
        }
    mt_image_free(&im);
    mt_field_touch(f);
    return 0;
}

static int time_text(lua_State *L) {
    char text[MT_NUMBER_ROOM];
    mt_number_time(luaL_checknumber(L, 1), text);
    lua_pushstring(L, text);
    return 1;
}

static int length_text(lua_State *L) {
    char text[MT_NUMBER_ROOM];
    mt_number_length(luaL_checknumber(L, 1), text);
    lua_pushstring(L, text);
    return 1;
}

static int exact_text(lua_State *L) {
    char text[MT_NUMBER_ROOM];
    mt_number_exact(luaL_checknumber(L, 1), text);
    lua_pushstring(L, text);
    return 1;
}

void glue_open_files(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"folder", open_folder},
        {"close_folder", close_folder},
        {"sub_folder", sub_folder},
        {"put", put_file},
        {"read", read_file},
        {"has", has_file},
        {"table", new_table},
        {"row", table_row},
        {"close_table", close_table},
        {"read_table", read_table},
        {"picture", write_picture},
        {"write_array", write_array},
        {"read_array", read_array},
        {"read_image", read_image},
        {"time_text", time_text},
        {"length_text", length_text},
        {"exact_text", exact_text},
        {"copy", copy_file},
        {NULL, NULL},
    };
    static const luaL_Reg folder_meta[] = {{"__gc", close_folder}, {"__close", close_folder}, {NULL, NULL}};
    static const luaL_Reg table_meta[] = {{"__gc", drop_table}, {"__close", drop_table}, {NULL, NULL}};
    glue_class(L, GLUE_FOLDER, folder_meta, NULL);
    glue_class(L, GLUE_TABLE, table_meta, NULL);
    luaL_setfuncs(L, functions, 0);
}
