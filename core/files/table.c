#include "core/files/table.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "core/base/memory.h"
#include "core/files/calls.h"
#include "core/files/number.h"

/* ---- a line being put together ---- */

typedef struct line {
    char *text;
    size_t n, room;
    bool no_memory;
} line;

static void add(line *l, const char *text, size_t n) {
    if (l->n + n > l->room) {
        size_t room = 2 * l->room + n + 64;
        char *more = mt_resize(l->text, room, 1);
        if (!more) {
            l->no_memory = true;
            return;
        }
        l->text = more;
        l->room = room;
    }
    memcpy(l->text + l->n, text, n);
    l->n += n;
}

/* Quoted where RFC 4180 asks for it: commas, quotes, line ends; also blanks at the ends, which readers may
 * strip, and a leading '#', which would read back as a comment. */
static void add_text(line *l, const char *text) {
    size_t n = strlen(text);
    bool quote = strpbrk(text, ",\"\r\n") || (n && (text[0] == ' ' || text[n - 1] == ' ' || text[0] == '#'));
    if (!quote) {
        add(l, text, n);
        return;
    }
    add(l, "\"", 1);
    for (; *text; text++) add(l, *text == '"' ? "\"\"" : text, *text == '"' ? 2 : 1);
    add(l, "\"", 1);
}

static void add_number(line *l, double x) {
    char text[MT_NUMBER_ROOM];
    if (!isnan(x)) add(l, text, (size_t)mt_number_exact(x, text));
}

static void add_header(line *l, int columns, const mt_table_column column[]) {
    for (int i = 0; i < columns; i++) {
        line title = {0};
        const char *unit = column[i].unit ? column[i].unit : "";
        add(&title, column[i].name, strlen(column[i].name));
        if (*unit) {
            add(&title, " [", 2);
            add(&title, unit, strlen(unit));
            add(&title, "]", 1);
        }
        add(&title, "", 1);
        if (i) add(l, ",", 1);
        if (title.no_memory)
            l->no_memory = true;
        else
            add_text(l, title.text);
        mt_free(title.text);
    }
    add(l, "\n", 1);
}

/* ---- writing ---- */

struct mt_table {
    int fd, columns;
    bool *text; /* of each column */
    uint64_t size;
    line row; /* kept between rows, so that appending takes no memory in the long run */
    char path[600];
};

static mt_status begin(mt_table **out, const mt_folder *folder, const char *name, int columns,
                       const mt_table_column column[], mt_error *err) {
    *out = NULL;
    mt_table *t;
    mt_status status = mt_new(&t, 1, sizeof *t, "a table", err);
    if (status) return status;
    t->fd = -1;
    t->columns = columns;
    mt_folder_describe(folder, name, t->path, sizeof t->path);
    status = mt_new(&t->text, (size_t)columns, sizeof *t->text, "a table", err);
    if (!status) {
        for (int i = 0; i < columns; i++) t->text[i] = column[i].text;
        add_header(&t->row, columns, column);
        if (t->row.no_memory) status = mt_fail(err, MT_ENOMEM, "no memory for the header of %s", t->path);
    }
    *out = t;
    return status;
}

static void discard(mt_table **table) {
    if (!*table) return;
    if ((*table)->fd >= 0) close((*table)->fd);
    mt_free((*table)->row.text);
    mt_free((*table)->text);
    mt_free(*table);
    *table = NULL;
}

static mt_status open_table(mt_table *t, const mt_folder *folder, const char *name, int flags,
                            mt_error *err) {
    int parent;
    const char *leaf;
    mt_status status = mt_folder_parent(folder, name, &parent, &leaf, err);
    if (status) return status;
    t->fd = mt_call_open(parent, leaf, flags | O_APPEND | O_NOFOLLOW | O_NONBLOCK, 0666);
    if (t->fd < 0 && errno == EEXIST)
        status =
            mt_fail(err, MT_EEXISTS, "%s exists already: choose another name or remove it first", t->path);
    else if (t->fd < 0)
        status = mt_call_failed(err, "opened for writing", t->path);
    int code = errno;
    close(parent);
    errno = code;
    return status;
}

/* The waiting line with one write; what a failed write left behind is cut off again. */
static mt_status put_line(mt_table *t, mt_error *err) {
    if (t->row.no_memory) return mt_fail(err, MT_ENOMEM, "no memory for a row of %s", t->path);
    if (mt_call_write(t->fd, t->row.text, t->row.n)) {
        mt_status status = mt_call_failed(err, "written", t->path);
        if (ftruncate(t->fd, (off_t)t->size)) mt_context(err, status, "its last line may be incomplete");
        return status;
    }
    t->size += t->row.n;
    return MT_OK;
}

static void remove_new(const mt_folder *folder, const char *name) {
    int parent;
    const char *leaf;
    if (mt_folder_parent(folder, name, &parent, &leaf, NULL)) return;
    unlinkat(parent, leaf, 0);
    close(parent);
}

mt_status mt_table_create(mt_table **out, const mt_folder *folder, const char *name, int columns,
                          const mt_table_column column[], mt_error *err) {
    MT_REQUIRE(out && name && columns >= 1 && column, err);
    mt_status status = begin(out, folder, name, columns, column, err);
    if (!status) status = open_table(*out, folder, name, O_RDWR | O_CREAT | O_EXCL, err);
    if (!status) {
        status = put_line(*out, err);
        if (status) remove_new(folder, name);
    }
    if (status) discard(out);
    return status;
}

static bool same_bytes(int fd, off_t at, const char *bytes, size_t n) {
    char have[256];
    while (n) {
        size_t part = n < sizeof have ? n : sizeof have;
        if (pread(fd, have, part, at) != (ssize_t)part || memcmp(have, bytes, part)) return false;
        at += (off_t)part;
        bytes += part;
        n -= part;
    }
    return true;
}

static mt_status check_table(mt_table *t, uint64_t size, mt_error *err) {
    struct stat about;
    if (fstat(t->fd, &about)) return mt_call_failed(err, "looked at", t->path);
    if (!S_ISREG(about.st_mode)) return mt_fail(err, MT_EFILE, "%s is not an ordinary file", t->path);
    if (!same_bytes(t->fd, 0, t->row.text, t->row.n))
        return mt_fail(err, MT_EFORMAT,
                       "%s starts with other columns than this run records (%.*s): it belongs to another run",
                       t->path, (int)(t->row.n < 200 ? t->row.n - 1 : 200), t->row.text);
    if (size < t->row.n || (uint64_t)about.st_size < size)
        return mt_fail(err, MT_EFORMAT,
                       "%s has %llu bytes where the checkpoint says %llu: it was cut off since", t->path,
                       (unsigned long long)about.st_size, (unsigned long long)size);
    if (!same_bytes(t->fd, (off_t)size - 1, "\n", 1))
        return mt_fail(err, MT_EFORMAT, "%s was changed since the checkpoint: no line ends at byte %llu",
                       t->path, (unsigned long long)size);
    return MT_OK;
}

mt_status mt_table_resume(mt_table **out, const mt_folder *folder, const char *name, int columns,
                          const mt_table_column column[], uint64_t size, mt_error *err) {
    MT_REQUIRE(out && name && columns >= 1 && column, err);
    mt_status status = begin(out, folder, name, columns, column, err);
    if (!status) status = open_table(*out, folder, name, O_RDWR, err);
    if (!status) status = check_table(*out, size, err);
    if (!status && mt_call_truncate((*out)->fd, (off_t)size))
        status = mt_call_failed(err, "cut back to the checkpoint", (*out)->path);
    if (!status) (*out)->size = size;
    if (status) discard(out);
    return status;
}

mt_status mt_table_row(mt_table *t, const mt_cell cell[], mt_error *err) {
    MT_REQUIRE(t && cell, err);
    t->row.n = 0;
    t->row.no_memory = false;
    for (int i = 0; i < t->columns; i++) {
        if (i) add(&t->row, ",", 1);
        if (!t->text[i])
            add_number(&t->row, cell[i].value);
        else if (cell[i].text)
            add_text(&t->row, cell[i].text);
    }
    if (t->row.n == 0) add(&t->row, "\"\"", 2); /* one empty cell: an empty line would be no row */
    add(&t->row, "\n", 1);
    return put_line(t, err);
}

uint64_t mt_table_size(const mt_table *t) {
    return t ? t->size : 0;
}

mt_status mt_table_sync(mt_table *t, mt_error *err) {
    MT_REQUIRE(t, err);
    return mt_call_sync(t->fd) ? mt_call_failed(err, "flushed to disk", t->path) : MT_OK;
}

mt_status mt_table_close(mt_table **table, mt_error *err) {
    if (!table || !*table) return MT_OK;
    mt_table *t = *table;
    mt_status status = mt_table_sync(t, err);
    if (mt_call_close(t->fd) && !status) status = mt_call_failed(err, "closed", t->path);
    t->fd = -1;
    discard(table);
    return status;
}

/* ---- reading ---- */

enum { COLUMNS_MOST = 4096 };

typedef struct scan {
    const char *at, *end;
    char separator;
    int row, column; /* of the file, from 1, for messages */
    char cell[256];  /* the present cell without quotes */
    size_t n;
    bool last; /* it ends its line */
    const char *path;
    mt_error *err;
} scan;

static mt_status wrong(scan *s, const char *what) {
    return mt_fail(s->err, MT_EFORMAT, "%s, line %d, cell %d: %s", s->path, s->row, s->column, what);
}

static void skip_line(scan *s) {
    while (s->at < s->end && *s->at != '\n') s->at++;
    if (s->at < s->end) s->at++;
    s->row++;
}

/* Passes empty lines and comments; false at the end of the file. */
static bool find_line(scan *s) {
    while (s->at < s->end) {
        bool empty = *s->at == '\n' || (*s->at == '\r' && s->at + 1 < s->end && s->at[1] == '\n');
        if (!empty && *s->at != '#') return true;
        skip_line(s);
    }
    return false;
}

/* Takes the text of the present cell, quoted or not, up to what ends it. */
static mt_status take_text(scan *s) {
    bool quoted = s->at < s->end && *s->at == '"';
    for (s->at += quoted; s->at < s->end; s->at++) {
        char c = *s->at;
        if (quoted && c == '"' && s->at + 1 < s->end && s->at[1] == '"')
            s->at++;
        else if (quoted && c == '"')
            break;
        if (c == '\n' && quoted) return wrong(s, "a quoted cell goes over the end of the line");
        if (!quoted && (c == s->separator || c == '\n' || c == '\r')) return MT_OK;
        if (s->n == sizeof s->cell - 1)
            return wrong(s, "a cell is longer than 255 bytes: is this a table of numbers?");
        if (c == 0) return wrong(s, "there is a zero byte: is this a text file?");
        s->cell[s->n++] = c;
    }
    if (!quoted) return MT_OK;
    if (s->at == s->end) return wrong(s, "a quote is not closed");
    s->at++;
    return MT_OK;
}

static mt_status take_cell(scan *s) {
    s->n = 0;
    mt_status status = take_text(s);
    if (status) return status;
    s->cell[s->n] = 0;
    if (s->at < s->end && *s->at == '\r') s->at++;
    s->last = s->at == s->end || *s->at == '\n';
    if (!s->last && *s->at != s->separator)
        return wrong(s, "something follows a closed quote or a carriage return");
    if (s->at < s->end) s->at++;
    return MT_OK;
}

/* The separator that occurs in the first line, in this order of preference, outside quotes. */
static char find_separator(const scan *s) {
    int tabs = 0, semicolons = 0;
    bool quoted = false;
    for (const char *p = s->at; p < s->end && *p != '\n'; p++) {
        if (*p == '"') quoted = !quoted;
        tabs += !quoted && *p == '\t';
        semicolons += !quoted && *p == ';';
    }
    return tabs ? '\t' : semicolons ? ';' : ',';
}

/* Cuts blanks off both ends in place. */
static char *trim(char *text) {
    while (*text == ' ') text++;
    for (size_t n = strlen(text); n && text[n - 1] == ' '; n--) text[n - 1] = 0;
    return text;
}

/* Splits "time [h]" or "time (h)" in place. */
static mt_status set_title(mt_columns *out, int i, char *title, mt_error *err) {
    char none[1] = "", *unit = none;
    title = trim(title);
    size_t n = strlen(title);
    char *open = n && title[n - 1] == ']'   ? strrchr(title, '[')
                 : n && title[n - 1] == ')' ? strrchr(title, '(')
                                            : NULL;
    if (open) {
        title[n - 1] = *open = 0;
        unit = trim(open + 1);
    }
    out->name[i] = mt_copy_text(trim(title));
    out->unit[i] = mt_copy_text(unit);
    return out->name[i] && out->unit[i] ? MT_OK
                                        : mt_fail(err, MT_ENOMEM, "no memory for the columns of a table");
}

/* Counts the cells of the first line and whether all are numbers or empty; comes back to its start. */
static mt_status look_at_first(scan *s, int *columns, bool *header) {
    const char *start = s->at;
    double x;
    *header = false;
    for (s->column = 1, s->last = false; !s->last; s->column++) {
        if (s->column > COLUMNS_MOST) return wrong(s, "there are more than 4096 columns");
        mt_status status = take_cell(s);
        if (status) return status;
        if (s->n && !mt_number_read(s->cell, s->n, &x)) *header = true;
    }
    *columns = s->column - 1;
    s->at = start;
    return MT_OK;
}

static mt_status read_titles(scan *s, mt_columns *out, bool header) {
    char none[1] = "";
    mt_status status = MT_OK;
    for (int i = 0; i < out->columns && !status; i++) {
        s->column = i + 1;
        if (header) status = take_cell(s);
        if (!status) status = set_title(out, i, header ? s->cell : none, s->err);
    }
    s->row += header;
    return status;
}

static mt_status read_row(scan *s, double *row, int columns) {
    s->last = false;
    for (s->column = 1; s->column <= columns; s->column++) {
        if (s->last) return wrong(s, "the row is shorter than the first one");
        mt_status status = take_cell(s);
        if (status) return status;
        row[s->column - 1] = NAN;
        if (s->n && !mt_number_read(s->cell, s->n, &row[s->column - 1]))
            return wrong(s, "a number is expected, with '.' before the decimals");
    }
    if (!s->last) return wrong(s, "the row is longer than the first one");
    s->row++;
    return MT_OK;
}

static mt_status read_rows(scan *s, mt_columns *out) {
    size_t room = 0;
    while (find_line(s)) {
        if (out->rows == room) {
            room = 2 * room + 64;
            double *more = mt_resize(out->values, room * (size_t)out->columns, sizeof *more);
            if (!more) return mt_fail(s->err, MT_ENOMEM, "no memory for the rows of %s", s->path);
            out->values = more;
        }
        mt_status status = read_row(s, out->values + out->rows * (size_t)out->columns, out->columns);
        if (status) return status;
        out->rows++;
    }
    return MT_OK;
}

static mt_status parse(scan *s, mt_columns *out) {
    bool header;
    if (s->end - s->at >= 3 && !memcmp(s->at, "\xEF\xBB\xBF", 3)) s->at += 3;
    if (!find_line(s)) return mt_fail(s->err, MT_EFORMAT, "%s holds no table: it is empty", s->path);
    s->separator = find_separator(s);
    mt_status status = look_at_first(s, &out->columns, &header);
    if (!status) status = mt_new(&out->name, (size_t)out->columns, sizeof *out->name, "a table", s->err);
    if (!status) status = mt_new(&out->unit, (size_t)out->columns, sizeof *out->unit, "a table", s->err);
    if (!status) status = read_titles(s, out, header);
    if (!status) status = read_rows(s, out);
    return status;
}

mt_status mt_table_read(mt_columns *out, const mt_folder *folder, const char *name, size_t most,
                        mt_error *err) {
    MT_REQUIRE(out && name, err);
    char *bytes, path[600];
    size_t n;
    *out = (mt_columns){0};
    mt_status status = mt_folder_read(folder, name, most ? most : (size_t)1 << 28, &bytes, &n, err);
    if (status) return status;
    mt_folder_describe(folder, name, path, sizeof path);
    scan s = {.at = bytes, .end = bytes + n, .row = 1, .path = path, .err = err};
    status = parse(&s, out);
    mt_free(bytes);
    if (status) mt_columns_free(out);
    return status;
}

void mt_columns_free(mt_columns *c) {
    if (!c) return;
    for (int i = 0; i < c->columns; i++) {
        if (c->name) mt_free(c->name[i]);
        if (c->unit) mt_free(c->unit[i]);
    }
    mt_free(c->name);
    mt_free(c->unit);
    mt_free(c->values);
    *c = (mt_columns){0};
}
