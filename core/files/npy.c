#include "core/files/npy.h"

#include <errno.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "core/base/memory.h"
#include "core/files/atomic.h"
#include "core/files/calls.h"

_Static_assert(__BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__, "arrays are written as they lie in memory");

static const char magic[6] = {'\x93', 'N', 'U', 'M', 'P', 'Y'};
enum { HEADER_MOST = 65536 };

/* ---- writing ---- */

/* Magic, version, length and dictionary, padded with blanks and ended by a line feed. Returns its size. */
static size_t make_header(char text[256], int dim, const int n[]) {
    int at = 10;
    memcpy(text, magic, 6);
    text[6] = 1;
    text[7] = 0;
    at += sprintf(text + at, "{'descr': '<f8', 'fortran_order': False, 'shape': (");
    for (int axis = dim - 1; axis >= 0; axis--)
        at += sprintf(text + at, axis || dim == 1 ? "%d, " : "%d", n[axis]);
    if (dim == 1) at -= 1; /* "(5,)" */
    at += sprintf(text + at, "), }");
    size_t size = mt_round_up((size_t)at + 1, 64);
    memset(text + at, ' ', size - (size_t)at);
    text[size - 1] = '\n';
    text[8] = (char)((size - 10) & 255);
    text[9] = (char)((size - 10) >> 8);
    return size;
}

mt_status mt_npy_write(const mt_folder *folder, const char *name, int dim, const int n[],
                       const double *values, mt_error *err) {
    MT_REQUIRE(dim >= 1 && dim <= 3 && n && values, err);
    size_t count = 1;
    for (int axis = 0; axis < dim; axis++) {
        MT_REQUIRE(n[axis] >= 1, err);
        count *= (size_t)n[axis];
    }
    mt_atomic *file;
    char text[256];
    mt_status status = mt_atomic_open(&file, folder, name, err);
    if (status) return status;
    status = mt_atomic_write(file, text, make_header(text, dim, n), err);
    if (!status) status = mt_atomic_write(file, values, count * sizeof *values, err);
    if (!status) return mt_atomic_commit(&file, err);
    mt_atomic_drop(&file);
    return status;
}

/* ---- the dictionary: a literal of the form {'key': value, ...} ---- */

typedef struct reader {
    const char *at, *end;
    const char *path;
    mt_error *err;
} reader;

static mt_status wrong(reader *r, const char *format, ...) MT_PRINTF(2, 3);
static mt_status wrong(reader *r, const char *format, ...) {
    char text[300];
    va_list args;
    va_start(args, format);
    vsnprintf(text, sizeof text, format, args);
    va_end(args);
    return mt_fail(r->err, MT_EFORMAT, "%s: %s; expected an array file (.npy) of 1 to 3 axes", r->path, text);
}

static void skip(reader *r) {
    while (r->at < r->end && (*r->at == ' ' || *r->at == '\t' || *r->at == '\n')) r->at++;
}

static bool take(reader *r, char c) {
    skip(r);
    if (r->at == r->end || *r->at != c) return false;
    r->at++;
    return true;
}

static bool take_word(reader *r, const char *word) {
    size_t n = strlen(word);
    skip(r);
    if ((size_t)(r->end - r->at) < n || memcmp(r->at, word, n)) return false;
    r->at += n;
    return true;
}

/* A quoted text of at most room - 1 bytes. */
static bool take_text(reader *r, char *text, size_t room) {
    skip(r);
    if (r->at == r->end || (*r->at != '\'' && *r->at != '"')) return false;
    char quote = *r->at++;
    size_t n = 0;
    while (r->at < r->end && *r->at != quote && n + 1 < room) text[n++] = *r->at++;
    text[n] = 0;
    return r->at < r->end && *r->at++ == quote;
}

/* An extent of 1 .. 2^31 - 1. */
static bool take_extent(reader *r, int *n) {
    int64_t value = 0;
    skip(r);
    const char *from = r->at;
    while (r->at < r->end && *r->at >= '0' && *r->at <= '9' && value <= INT32_MAX)
        value = value * 10 + (*r->at++ - '0');
    *n = (int)(value <= INT32_MAX ? value : 0);
    return r->at > from && *n >= 1;
}

static mt_status take_shape(reader *r, mt_npy *out) {
    int extent[3];
    out->dim = 0;
    if (!take(r, '(')) return wrong(r, "its shape is no list of numbers");
    while (!take(r, ')')) {
        if (out->dim == 3) return wrong(r, "it has more than three axes");
        if (!take_extent(r, &extent[out->dim]))
            return wrong(r, "an axis has no cells, or more than 2147483647");
        out->dim++;
        if (!take(r, ',') && (r->at == r->end || *r->at != ')'))
            return wrong(r, "its shape is no list of numbers");
    }
    if (out->dim == 0) return wrong(r, "it is a single number without axes");
    out->count = 1;
    for (int axis = 0; axis < 3; axis++) {
        out->n[axis] = axis < out->dim ? extent[out->dim - 1 - axis] : 1;
        if (out->count > INT32_MAX / (size_t)out->n[axis])
            return wrong(r, "it has more than 2147483647 cells");
        out->count *= (size_t)out->n[axis];
    }
    return MT_OK;
}

static const struct {
    char kind[4];
    size_t size;
} kinds[] = {{"<f8", 8}, {"<f4", 4}, {"|u1", 1}, {"<u2", 2}, {"<i4", 4}};

static size_t kind_size(const char *kind) {
    for (size_t i = 0; i < sizeof kinds / sizeof *kinds; i++)
        if (!strcmp(kind, kinds[i].kind)) return kinds[i].size;
    return 0;
}

static mt_status take_kind(reader *r, mt_npy *out) {
    char text[16];
    if (!take_text(r, text, sizeof text))
        return wrong(r, "the kind of its numbers is not stated as one text");
    if (!kind_size(text))
        return wrong(
            r, "its numbers are of the kind '%s', readable are <f8, <f4, |u1, <u2, <i4: save it as doubles",
            text);
    strcpy(out->kind, text);
    return MT_OK;
}

static mt_status take_order(reader *r) {
    if (take_word(r, "False")) return MT_OK;
    if (take_word(r, "True"))
        return wrong(r, "it is stored column by column (fortran_order): save it in C order");
    return wrong(r, "its fortran_order is neither True nor False");
}

static mt_status parse(reader *r, mt_npy *out) {
    unsigned seen = 0;
    char key[20];
    if (!take(r, '{')) return wrong(r, "its header is no dictionary");
    while (!take(r, '}')) {
        if (!take_text(r, key, sizeof key) || !take(r, ':')) return wrong(r, "its header is damaged");
        unsigned which = !strcmp(key, "descr")           ? 1
                         : !strcmp(key, "fortran_order") ? 2
                         : !strcmp(key, "shape")         ? 4
                                                         : 0;
        if (!which || (seen & which)) return wrong(r, "its header has an unknown or repeated entry");
        seen |= which;
        mt_status status = which == 1 ? take_kind(r, out) : which == 2 ? take_order(r) : take_shape(r, out);
        if (status) return status;
        if (!take(r, ',') && (r->at == r->end || *r->at != '}')) return wrong(r, "its header is damaged");
    }
    skip(r);
    if (seen != 7) return wrong(r, "its header lacks descr, fortran_order or shape");
    return r->at == r->end ? MT_OK : wrong(r, "its header goes on after the dictionary");
}

/* ---- reading ---- */

/* Exactly n bytes from the file; the caller has compared with its size. */
static mt_status read_bytes(int fd, void *to, size_t n, reader *r) {
    char *at = to;
    while (n) {
        ssize_t got = read(fd, at, n);
        if (got < 0 && errno == EINTR) continue;
        if (got < 0) return mt_call_failed(r->err, "read", r->path);
        if (got == 0) return wrong(r, "it ends too early");
        at += got;
        n -= (size_t)got;
    }
    return MT_OK;
}

static mt_status read_front(int fd, size_t size, size_t *front, size_t *length, reader *r) {
    unsigned char b[12];
    if (size < sizeof b) return wrong(r, "it has only %zu bytes", size);
    mt_status status = read_bytes(fd, b, 10, r);
    if (status) return status;
    if (memcmp(b, magic, 6)) return wrong(r, "it does not start like one");
    if (b[6] < 1 || b[6] > 3 || b[7])
        return wrong(r, "it has version %d.%d, readable are 1.0, 2.0 and 3.0", b[6], b[7]);
    *front = b[6] == 1 ? 10 : 12;
    if (*front == 12) status = read_bytes(fd, b + 10, 2, r);
    *length = b[8] + 256u * b[9];
    if (*front == 12) *length += 65536u * b[10] + 16777216u * (size_t)b[11];
    if (status) return status;
    if (*length > HEADER_MOST || *length > size - *front)
        return wrong(r, "its header claims %zu bytes", *length);
    return MT_OK;
}

/* Reads the header of an open file and compares the file's length with what it promises. */
static mt_status read_header(int fd, size_t size, mt_npy *out, reader *r) {
    size_t front = 0, length = 0;
    char *text;
    mt_status status = read_front(fd, size, &front, &length, r);
    if (status) return status;
    status = mt_new(&text, length, 1, "the header of an array", r->err);
    if (status) return status;
    status = read_bytes(fd, text, length, r);
    r->at = text;
    r->end = text + length;
    if (!status) status = parse(r, out);
    mt_free(text);
    if (status) return status;
    size_t have = size - front - length, want = out->count * kind_size(out->kind);
    if (have == want) return MT_OK;
    return wrong(r, "its data have %zu bytes where its shape needs %zu, so it is %s", have, want,
                 have < want ? "cut off" : "not one array alone");
}

static double value_at(const unsigned char *p, const char *kind) {
    float f;
    uint16_t u;
    int32_t i;
    switch (kind[1]) {
    case 'f': memcpy(&f, p, sizeof f); return f;
    case 'i': memcpy(&i, p, sizeof i); return i;
    default: break;
    }
    if (kind[2] == '1') return *p;
    memcpy(&u, p, sizeof u);
    return u;
}

/* Smaller kinds are read into the end of the block and widened in place from the front: value k ends at byte
 * 8 (k + 1), never beyond the end of stored number k, so no second block is needed. */
static void widen(double *values, size_t count, const char *kind, size_t size) {
    const unsigned char *from = (const unsigned char *)values + (sizeof(double) - size) * count;
    unsigned char *to = (unsigned char *)values;
    for (size_t k = 0; k < count; k++) {
        double x = value_at(from + k * size, kind);
        memcpy(to + k * sizeof x, &x, sizeof x);
    }
}

static mt_status read_values(int fd, mt_npy *out, reader *r) {
    size_t size = kind_size(out->kind);
    mt_status status = mt_new(&out->values, out->count, sizeof(double), "an array", r->err);
    if (status) return status;
    char *end = (char *)out->values + (sizeof(double) - size) * out->count;
    status = read_bytes(fd, end, size * out->count, r);
    if (!status && size < sizeof(double)) widen(out->values, out->count, out->kind, size);
    return status;
}

static mt_status load(mt_npy *out, const mt_folder *folder, const char *name, size_t most, bool values,
                      mt_error *err) {
    int fd;
    size_t size;
    char path[600];
    *out = (mt_npy){0};
    mt_status status = mt_folder_open_read(folder, name, &fd, &size, err);
    if (status) return status;
    mt_folder_describe(folder, name, path, sizeof path);
    reader r = {.path = path, .err = err};
    status = read_header(fd, size, out, &r);
    if (!status && values && most && out->count > most / sizeof(double))
        status = mt_fail(err, MT_EINPUT, "%s: its %zu cells need %.4g MB of memory, allowed are %.4g MB",
                         path, out->count, 8e-6 * (double)out->count, 1e-6 * (double)most);
    if (!status && values) status = read_values(fd, out, &r);
    close(fd);
    if (status) mt_npy_free(out);
    return status;
}

mt_status mt_npy_look(mt_npy *out, const mt_folder *folder, const char *name, mt_error *err) {
    MT_REQUIRE(out && name, err);
    return load(out, folder, name, 0, false, err);
}

mt_status mt_npy_read(mt_npy *out, const mt_folder *folder, const char *name, size_t most, mt_error *err) {
    MT_REQUIRE(out && name, err);
    return load(out, folder, name, most, true, err);
}

void mt_npy_free(mt_npy *array) {
    if (!array) return;
    mt_free(array->values);
    *array = (mt_npy){0};
}
