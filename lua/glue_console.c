/* What the console needs of the terminal: lines from the keyboard (readline) or from a pipe, the terminal's
 * size, the environment's wishes about colour, colours and sketches of fields. */
#include "lua/glue.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/ioctl.h>
#include <sys/select.h>
#include <unistd.h>

#include <readline/history.h>
#include <readline/readline.h>

#include "core/base/memory.h"
#include "core/files/colour.h"
#include "core/files/sketch.h"

/* --- a line from a pipe
 * --------------------------------------------------------------------------------------------------------
 */

typedef struct line {
    char *text;
    size_t length;
    enum { LINE_READ, LINE_END, LINE_STOPPED } how;
} line;

static line from_pipe(void) {
    line l = {NULL, 0, LINE_READ};
    size_t room = 0;
    ssize_t n = glue_stop ? -1 : getline(&l.text, &room, stdin);
    if (n > 0 && l.text[n - 1] == '\n') n--;
    if (n < 0) l.how = glue_stop ? LINE_STOPPED : LINE_END;
    l.length = n < 0 ? 0 : (size_t)n;
    return l;
}

/* --- a line from the keyboard
 * ---------------------------------------------------------------------------------------------------
 */

/* readline hands its line to a function without context. */
static line typed;
static bool complete;

static void take(char *text) {
    typed = (line){text, text ? strlen(text) : 0, text ? LINE_READ : LINE_END};
    complete = true;
    rl_callback_handler_remove(); /* before it prompts anew */
}

/* Signals are let in while nothing is being read only, so the terminal is never left half set. */
static line from_keyboard(const char *prompt) {
    sigset_t ours, before;
    glue_signals(&ours);
    pthread_sigmask(SIG_BLOCK, &ours, &before);
    complete = false;
    glue_waiting = 1;
    rl_callback_handler_install(prompt, take);
    while (!complete && !glue_stop) {
        fd_set keyboard;
        FD_ZERO(&keyboard);
        FD_SET(STDIN_FILENO, &keyboard);
        int n = pselect(STDIN_FILENO + 1, &keyboard, NULL, NULL, NULL, &before);
        if (n > 0)
            rl_callback_read_char();
        else if (n < 0 && errno != EINTR)
            take(NULL);
    }
    if (!complete) {
        rl_callback_handler_remove();
        typed = (line){NULL, 0, LINE_STOPPED};
    }
    glue_waiting = 0;
    pthread_sigmask(SIG_SETMASK, &before, NULL);
    return typed;
}

/* Names that can be completed, '\n' after each; borrowed while a line is read. */
static const char *names;

static char *next_name(const char *begin, int again) {
    static const char *at;
    if (!again) at = names;
    size_t n = strlen(begin);
    for (const char *end; at && (end = strchr(at, '\n')) != NULL;) {
        const char *name = at;
        at = end + 1;
        if (strncmp(name, begin, n) == 0) return strndup(name, (size_t)(end - name));
    }
    return NULL;
}

static char **complete_name(const char *text, int start, int end) {
    (void)end;
    rl_attempted_completion_over = 1; /* never names of files */
    rl_completion_append_character = '\0';
    if (start > 0 && strchr(".:", rl_line_buffer[start - 1])) return NULL;
    return rl_completion_matches(text, next_name);
}

static void set_up_keyboard(void) {
    rl_readline_name = "mottle";
    rl_catch_signals = 0; /* ours are caught already */
    rl_outstream = isatty(STDOUT_FILENO) ? stdout : stderr;
    rl_attempted_completion_function = complete_name;
    rl_completer_word_break_characters = " \t\n\"'`~!@#$%^&*()-+={}[]|\\;:,.<>/?";
    stifle_history(1000);
    using_history();
}

/* read_line(prompt or nil, names) -> text; or nil and "end" or "stopped". With a prompt the line is read from
 * the keyboard with editing and memory, without one plainly. */
static int read_line(lua_State *L) {
    static bool ready;
    const char *prompt = luaL_optstring(L, 1, NULL);
    names = luaL_optstring(L, 2, "");
    if (prompt && !ready) {
        set_up_keyboard();
        ready = true;
    }
    line l = prompt ? from_keyboard(prompt) : from_pipe();
    names = NULL;
    if (prompt && l.length > 0) add_history(l.text);
    lua_settop(L, 0);
    if (l.how == LINE_READ)
        lua_pushlstring(L, l.text, l.length); /* a memory error here leaks the line once */
    else
        lua_pushnil(L), lua_pushstring(L, l.how == LINE_END ? "end" : "stopped");
    free(l.text);
    return lua_gettop(L);
}

/* forget_stop() -> whether the program is to end all the same; a run or line was stopped, the console goes on
 */
static int forget_stop(lua_State *L) {
    glue_stop = 0;
    lua_pushboolean(L, glue_end);
    return 1;
}

/* --- what can be shown
 * ---------------------------------------------------------------------------------------------------------
 */

/* terminal_size() -> columns, rows of standard output; nothing where it is no terminal or does not tell */
static int terminal_size(lua_State *L) {
    struct winsize w;
    if (ioctl(STDOUT_FILENO, TIOCGWINSZ, &w) != 0 || w.ws_col == 0 || w.ws_row == 0) return 0;
    lua_pushinteger(L, w.ws_col);
    lua_pushinteger(L, w.ws_row);
    return 2;
}

static int environment(lua_State *L) {
    lua_pushstring(L, getenv(luaL_checkstring(L, 1)));
    return 1;
}

/* map_colours(name) -> 768 bytes: red, green, blue of 256 colours, lowest value first */
static int map_colours(lua_State *L) {
    mt_error err = {0};
    mt_map map;
    uint8_t rgb[256][3];
    glue_check(L, mt_map_find(luaL_checkstring(L, 1), &map, &err), &err);
    mt_map_colours(map, rgb);
    lua_pushlstring(L, (const char *)rgb, sizeof rgb);
    return 1;
}

/* sketch(field, width, height) -> list of width * height means, the top row first */
static int sketch(lua_State *L) {
    mt_error err = {0};
    mt_field *f = glue_field(L, 1);
    lua_Integer width = luaL_checkinteger(L, 2), height = luaL_checkinteger(L, 3);
    luaL_argcheck(L, width >= 1 && width <= 10000, 2, "1 to 10000");
    luaL_argcheck(L, height >= 1 && height <= 10000, 3, "1 to 10000");
    double *v = lua_newuserdatauv(L, (size_t)(width * height) * sizeof *v, 0);
    mt_status st = mt_sketch(f->grid->dim, f->grid->n, f->values, (int)width, (int)height, v, &err);
    glue_check(L, st, &err);
    lua_createtable(L, (int)(width * height), 0);
    for (lua_Integer i = 0; i < width * height; i++) {
        lua_pushnumber(L, v[i]);
        lua_rawseti(L, -2, i + 1);
    }
    return 1;
}

void glue_open_console(lua_State *L) {
    static const luaL_Reg functions[] = {
        {"read_line", read_line},
        {"forget_stop", forget_stop},
        {"terminal_size", terminal_size},
        {"environment", environment},
        {"map_colours", map_colours},
        {"sketch", sketch},
        {NULL, NULL},
    };
    luaL_setfuncs(L, functions, 0);
}
