/* The language layer's C side: thin, one file per room of core, on core's public headers only.
 *
 * Errors: a status of core becomes a Lua error whose text begins with the line of the user's script that led
 * to it, found by walking up the stack to the first function of a script ("@..." chunks; the bundled modules
 * are "=..." chunks). */
#ifndef MT_LUA_GLUE_H
#define MT_LUA_GLUE_H

#include <lauxlib.h>
#include <lua.h>
#include <signal.h>
#include <stdbool.h>

#include "core/base/thread.h"
#include "core/files/folder.h"
#include "core/formula/expr.h"
#include "core/motion/model.h"

/* One per Lua state, reached with glue_of. */
typedef struct glue {
    mt_forms *forms;
    mt_pool *pool;
    mt_folder *script_folder; /* what scripts may read from, or NULL */
    mt_status status;         /* of the last error of core, for the exit code */
} glue;

glue *glue_of(lua_State *L);

/* Counts the signals that ask the script to end. */
extern volatile sig_atomic_t glue_stop;
/* Set when one of them was not Ctrl-C: then the console ends too. */
extern volatile sig_atomic_t glue_end;
/* Set while a line is being typed, when there is no step to finish. */
extern volatile sig_atomic_t glue_waiting;
/* The signals that the program catches. */
void glue_signals(sigset_t *set);
/* Whether the script is to end: asked for, and the run is not being closed already. */
bool glue_stopping(void);

/* Raises "<script>:<line>: <text>" (position left out where no script is on the stack). */
int glue_fail(lua_State *L, mt_status status, const char *format, ...) MT_PRINTF(3, 4);
/* Raises the record's text when the status is not MT_OK. */
void glue_check(lua_State *L, mt_status status, const mt_error *err);
/* Pushes "<script>:<line>: " or "". */
void glue_where(lua_State *L);

/* --- objects. Each userdata is made empty with its metatable, then filled; __gc = __close = idempotent.
 * ---------------- */

#define GLUE_EXPR "mottle.expression"
#define GLUE_GRID "mottle.grid"
#define GLUE_FILTER "mottle.filter"
#define GLUE_FIELD "mottle.field"
#define GLUE_PARAM "mottle.param"
#define GLUE_MODEL "mottle.model"
#define GLUE_FOLDER "mottle.folder"
#define GLUE_TABLE "mottle.table"

typedef struct glue_grid {
    mt_grid *grid;
    mt_sweeper *sweeper;
} glue_grid;

/* A new userdata with room for `size` zeroed bytes and this metatable. */
void *glue_object(lua_State *L, size_t size, const char *class);
/* Registers a metatable: its metamethods and, under __index, its methods. */
void glue_class(lua_State *L, const char *class, const luaL_Reg *meta, const luaL_Reg *methods);

/* Expression from a number, expression, field or param at this place of the stack; pushes it as an expression
 * object (which keeps it alive) and returns it. Raises for anything else, naming `what`. */
const mt_expr *glue_expr(lua_State *L, int index, const char *what);
/* Pushes an expression object that takes over the reference. */
void glue_push_expr(lua_State *L, const mt_expr *fresh);
/* Array of numbers at index -> block from mt_alloc owned by a new userdata pushed on the stack. */
double *glue_numbers(lua_State *L, int index, size_t *n);
mt_field *glue_field(lua_State *L, int index);
glue_grid *glue_grid_at(lua_State *L, int index);

void glue_open_formula(lua_State *L); /* each adds its functions to the table on top of the stack */
void glue_open_space(lua_State *L);
void glue_open_motion(lua_State *L);
void glue_open_measure(lua_State *L);
void glue_open_files(lua_State *L);
void glue_open_base(lua_State *L);
void glue_open_console(lua_State *L);

#endif
