/* State, errors, classes, and what concerns the process: time, signals, memory. */
#include "lua/glue.h"

#include <fftw3.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <sys/utsname.h>
#include <time.h>
#include <unistd.h>

#include "core/base/memory.h"

volatile sig_atomic_t glue_stop, glue_end, glue_waiting;
static bool closing; /* ledger and report are being written: a first signal waits for them */

bool glue_stopping(void) {
    return glue_stop && !closing;
}

void glue_signals(sigset_t *set) {
    sigemptyset(set);
    sigaddset(set, SIGINT);
    sigaddset(set, SIGTERM);
}

glue *glue_of(lua_State *L) {
    return *(glue **)lua_getextraspace(L);
}

/* --- errors
 * -------------------------------------------------------------------------------------------------------------------
 */

void glue_where(lua_State *L) {
    lua_Debug ar;
    for (int level = 0; lua_getstack(L, level, &ar); level++) {
        lua_getinfo(L, "Sl", &ar);
        if (ar.source[0] == '@' && ar.currentline > 0) {
            lua_pushfstring(L, "%s:%d: ", ar.short_src, ar.currentline);
            return;
        }
    }
    lua_pushliteral(L, "");
}

int glue_fail(lua_State *L, mt_status status, const char *format, ...) {
    char text[1200];
    va_list args;
    va_start(args, format);
    vsnprintf(text, sizeof text, format, args);
    va_end(args);
    glue_of(L)->status = status;
    glue_where(L);
    lua_pushstring(L, text);
    lua_concat(L, 2);
    return lua_error(L);
}

void glue_check(lua_State *L, mt_status status, const mt_error *err) {
    if (status != MT_OK) glue_fail(L, status, "%s", err->text[0] ? err->text : mt_status_text(status));
}

/* --- classes
 * ------------------------------------------------------------------------------------------------------------------
 */

void *glue_object(lua_State *L, size_t size, const char *class) {
    void *object = lua_newuserdatauv(L, size, 1);
    memset(object, 0, size);
    luaL_setmetatable(L, class);
    return object;
}

void glue_class(lua_State *L, const char *class, const luaL_Reg *meta, const luaL_Reg *methods) {
    luaL_newmetatable(L, class);
    luaL_setfuncs(L, meta, 0);
    if (methods) {
        lua_newtable(L);
        luaL_setfuncs(L, methods, 0);
        lua_setfield(L, -2, "__index");
    }
    lua_pushboolean(L, 0);
    lua_setfield(L, -2, "__metatable"); /* scripts cannot reach it */
    lua_pop(L, 1);
}

/* --- process
 * ------------------------------------------------------------------------------------------------------------------
 */

static int fail(lua_State *L) {
    glue_fail(L, MT_ESCRIPT, "%s", luaL_checkstring(L, 1));
    return 0;
}

static int where(lua_State *L) {
    glue_where(L);
    return 1;
}

static int stopped(lua_State *L) {
    lua_pushboolean(L, glue_stopping());
    return 1;
}

static int stop_heeded(lua_State *L) {
    (void)L;
    glue_stop = 0;
    closing = true;
    return 0;
}

/* An error that a script caught is no longer the reason why it ends. */
static int forget_status(lua_State *L) {
    glue_of(L)->status = MT_OK;
    return 0;
}

static int raise_stopped(lua_State *L) {
    return glue_fail(L, MT_ESTOPPED, "stopped on request");
}

static int clock_now(lua_State *L) {
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    lua_pushnumber(L, (double)t.tv_sec + 1e-9 * (double)t.tv_nsec);
    return 1;
}

static int date_now(lua_State *L) {
    char text[40];
    time_t now = time(NULL);
    struct tm tm;
    gmtime_r(&now, &tm);
    strftime(text, sizeof text, "%Y-%m-%d %H:%M UTC", &tm);
    lua_pushstring(L, text);
    return 1;
}

static int write_to(lua_State *L) {
    size_t n;
    const char *text = luaL_checklstring(L, 2, &n);
    FILE *f = luaL_checkinteger(L, 1) == 1 ? stdout : stderr;
    fwrite(text, 1, n, f);
    fflush(f);
    return 0;
}

static int is_terminal(lua_State *L) {
    lua_pushboolean(L, isatty((int)luaL_checkinteger(L, 1)));
    return 1;
}

/* The pool's threads start with these signals blocked and keep them so: they have to reach the main thread,
 * which may be waiting for the keyboard. */
static int set_threads(lua_State *L) {
    glue *g = glue_of(L);
    mt_error err = {0};
    mt_pool *pool;
    int n = (int)luaL_checkinteger(L, 1);
    sigset_t ours, before;
    glue_signals(&ours);
    pthread_sigmask(SIG_BLOCK, &ours, &before);
    mt_status st = mt_pool_new(&pool, n, &err);
    pthread_sigmask(SIG_SETMASK, &before, NULL);
    glue_check(L, st, &err);
    mt_pool_free(&g->pool); /* before any grid is made */
    g->pool = pool;
    return 0;
}

static int memory(lua_State *L) {
    lua_pushnumber(L, (double)mt_memory_used());
    lua_pushnumber(L, (double)mt_memory_peak());
    lua_pushnumber(L, (double)sysconf(_SC_PHYS_PAGES) * (double)sysconf(_SC_PAGESIZE));
    return 3;
}

static int machine(lua_State *L) {
    struct utsname u;
    uname(&u);
    lua_newtable(L);
    lua_pushfstring(L, "%s %s", u.sysname, u.machine);
    lua_setfield(L, -2, "system");
    lua_pushinteger(L, (lua_Integer)sysconf(_SC_NPROCESSORS_ONLN));
    lua_setfield(L, -2, "cores");
    lua_pushstring(L, fftw_version);
    lua_setfield(L, -2, "fftw");
    lua_pushliteral(L, MT_VERSION);
    lua_setfield(L, -2, "version");
    lua_pushliteral(L, LUA_RELEASE);
    lua_setfield(L, -2, "lua");
    return 1;
}

static int last_status(lua_State *L) {
    lua_pushinteger(L, mt_status_exit_code(glue_of(L)->status));
    return 1;
}

/* load_text(text, chunkname, environment): text chunks only */
static int load_text(lua_State *L) {
    size_t n;
    const char *text = luaL_checklstring(L, 1, &n);
    const char *name = luaL_checkstring(L, 2);
    if (luaL_loadbufferx(L, text, n, name, "t") != LUA_OK) {
        lua_pushnil(L);
        lua_insert(L, -2);
        return 2;
    }
    lua_pushvalue(L, 3);
    lua_setupvalue(L, -2, 1);
    return 1;
}

void glue_open_base(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"fail", fail},
        {"where", where},
        {"stopped", stopped},
        {"stop_heeded", stop_heeded},
        {"raise_stopped", raise_stopped},
        {"forget_status", forget_status},
        {"clock", clock_now},
        {"date", date_now},
        {"write", write_to},
        {"is_terminal", is_terminal},
        {"threads", set_threads},
        {"memory", memory},
        {"machine", machine},
        {"exit_code", last_status},
        {"load_text", load_text},
        {NULL, NULL},
    };
    luaL_setfuncs(L, functions, 0);
}
