/* What pays: the row transform goes straight between work array and unit buffer, no copy; columns are copied
 * MT_BLOCK at a time to contiguous lines (128 bytes a row, two cache lines), with the scale 1/n folded into
 * the copy, and transformed out of place; work rows are padded to an odd number of cache lines. Row sweep
 * plus column sweep with a body that only copies, 1 thread, against the two bare whole-array transforms
 * planned with FFTW_MEASURE: 1024^2 about the same, 128^3 about the same. */
#include "core/space/sweep.h"

#include <string.h>

#include "core/base/memory.h"
#include "core/space/line.h"

typedef struct buffers {
    size_t room; /* doubles */
    double *at;
} buffers;

struct mt_sweeper {
    mt_grid *grid;
    mt_pool *pool;
    mt_spectrum s;
    int workers;
    mt_line axis[3];
    bool inner_complex; /* mixed data are complex */
    size_t inner_cells; /* cells of a slab: all inner axes at one place of the outer one */
    size_t ld;          /* doubles from slab to slab of a work array */
    size_t plane_ld;    /* doubles from row to row of a 3-D plane buffer; 0 without a y pass */
    size_t work_doubles;
    int rows_per_unit;
    size_t units, blocks;
    double scale;    /* 1/n of all periodic axes */
    buffers *buffer; /* [workers] */
};

const mt_spectrum *mt_sweeper_spectrum(const mt_sweeper *s) {
    return &s->s;
}
mt_grid *mt_sweeper_grid(const mt_sweeper *s) {
    return s->grid;
}
mt_pool *mt_sweeper_pool(const mt_sweeper *s) {
    return s->pool;
}
size_t mt_sweeper_units(const mt_sweeper *s) {
    return s->units;
}
size_t mt_sweeper_work_doubles(const mt_sweeper *s) {
    return s->work_doubles;
}
size_t mt_sweeper_unit_cells(const mt_sweeper *s) {
    return (size_t)s->rows_per_unit * s->inner_cells;
}

/* --- making --- */

static int find_outer(const mt_grid *g) {
    for (int a = g->dim - 1; a > 0; a--)
        if (g->n[a] > 1) return a;
    return 0;
}

static int find_half(const mt_grid *g) {
    for (int a = 0; a < g->dim; a++)
        if (g->wall[a] == MT_PERIODIC && g->n[a] > 1) return a;
    return -1;
}

static mt_line_kind kind_of(const mt_grid *g, int axis, int half) {
    if (g->n[axis] == 1) return MT_LINE_NONE;
    if (g->wall[axis] == MT_MIRROR) return MT_LINE_MIRROR;
    return axis == half ? MT_LINE_HALF : MT_LINE_FULL;
}

static mt_status fill_tables(mt_sweeper *w, int axis, mt_error *err) {
    mt_spectrum *s = &w->s;
    const mt_grid *g = w->grid;
    int n = s->modes[axis];
    mt_status st = mt_new(&s->k[axis], (size_t)n, sizeof(double), "wavenumbers", err);
    if (!st) st = mt_new(&s->weight[axis], (size_t)n, sizeof(double), "weights", err);
    for (int m = 0; m < n && !st; m++) {
        s->k[axis][m] = w->axis[axis].kind == MT_LINE_NONE ? 0 : mt_grid_wavenumber(g, axis, m);
        double w0 = axis == s->half ? 2 : w->axis[axis].kind == MT_LINE_MIRROR ? 0.5 : 1;
        s->weight[axis][m] = m == 0 ? 1 : w0;
    }
    return st;
}

/* Rows of odd length start at odd doubles of a unit's buffer. */
static bool is_aligned(const mt_grid *g, int axis, int outer) {
    return axis == outer || axis > 0 || g->n[0] % 2 == 0;
}

static mt_status lay_out(mt_sweeper *w, mt_error *err) {
    mt_spectrum *s = &w->s;
    const mt_grid *g = w->grid;
    bool complex = false; /* data so far */
    mt_status st = MT_OK;
    s->grid = g;
    s->outer = find_outer(g);
    s->half = find_half(g);
    s->complex = s->half >= 0;
    s->columns = 1;
    w->inner_cells = 1;
    w->scale = 1;
    for (int a = 0; a < 3 && !st; a++) {
        if (a == s->outer) w->inner_complex = complex;
        st = mt_line_plan(&w->axis[a], kind_of(g, a, s->half), g->n[a], complex, is_aligned(g, a, s->outer),
                          err);
        complex = complex || a == s->half;
        s->modes[a] = w->axis[a].modes;
        if (g->wall[a] == MT_PERIODIC) w->scale /= g->n[a];
        if (a != s->outer) s->columns *= (size_t)s->modes[a], w->inner_cells *= (size_t)g->n[a];
        if (!st) st = fill_tables(w, a, err);
    }
    s->length = s->modes[s->outer];
    s->stride = mt_round_up((size_t)s->length * (s->complex ? 2 : 1), 8);
    s->doubles = s->columns * s->stride;
    return st;
}

/* An odd number of cache lines: then the rows that a block of columns touches spread over all sets of the
 * caches. */
static size_t pad_row(size_t doubles) {
    return (mt_round_up(doubles, 8) / 8 | 1) * 8;
}

static void size_work(mt_sweeper *w) {
    const mt_spectrum *s = &w->s;
    size_t slab = s->columns * (w->inner_complex ? 2 : 1);
    w->ld = w->inner_cells == 1 ? 1 : pad_row(slab);
    w->work_doubles = w->ld * (size_t)w->grid->n[s->outer];
    if (s->outer == 2 && w->axis[1].kind != MT_LINE_NONE) {
        size_t row = (size_t)s->modes[0] * (w->axis[0].kind == MT_LINE_HALF ? 2 : 1);
        w->plane_ld = pad_row(row);
    }
    size_t rows = MT_UNIT_CELLS / w->inner_cells;
    w->rows_per_unit = rows < 1 ? 1 : rows > (size_t)w->grid->n[s->outer] ? w->grid->n[s->outer] : (int)rows;
    w->units = ((size_t)w->grid->n[s->outer] + (size_t)w->rows_per_unit - 1) / (size_t)w->rows_per_unit;
    w->blocks = (s->columns + MT_BLOCK - 1) / MT_BLOCK;
}

mt_status mt_sweeper_new(mt_sweeper **out, mt_grid *grid, mt_pool *pool, mt_error *err) {
    mt_sweeper *w;
    *out = NULL;
    mt_status st = mt_new(&w, 1, sizeof *w, "transforms", err);
    if (st) return st;
    w->grid = mt_grid_ref(grid);
    w->pool = pool;
    w->workers = mt_pool_threads(pool);
    st = lay_out(w, err);
    if (!st) size_work(w);
    if (!st) st = mt_new(&w->buffer, (size_t)w->workers, sizeof *w->buffer, "transforms", err);
    if (st) mt_sweeper_free(&w);
    *out = w;
    return st;
}

void mt_sweeper_free(mt_sweeper **sweeper) {
    mt_sweeper *w = *sweeper;
    *sweeper = NULL;
    if (!w) return;
    for (int i = 0; i < w->workers && w->buffer; i++) mt_free(w->buffer[i].at);
    mt_free(w->buffer);
    for (int a = 0; a < 3; a++) {
        mt_line_free(&w->axis[a]);
        mt_free(w->s.k[a]);
        mt_free(w->s.weight[a]);
    }
    mt_grid_unref(&w->grid);
    mt_free(w);
}

/* Outside the parallel region, so that a failure is one failure. */
static mt_status reserve(mt_sweeper *w, size_t doubles, mt_error *err) {
    for (int i = 0; i < w->workers; i++) {
        if (w->buffer[i].room >= doubles) continue;
        mt_free(w->buffer[i].at);
        w->buffer[i].room = 0;
        mt_status st = mt_new(&w->buffer[i].at, doubles, sizeof(double), "transform buffers", err);
        if (st) return st;
        w->buffer[i].room = doubles;
    }
    return MT_OK;
}

/* --- lines of a block --- */

/* count lines of n elements (re or re, im): element i of line l at from[i * step + l * width] <-> buf[l *
 * room + i * width] */
typedef struct block {
    size_t n, count, width, step, room;
} block;

/* Rows this far ahead are asked for: in 3-D every row lies on a page of its own, where the processor does not
 * look ahead by itself. */
#define AHEAD 8

static inline void ask_for(const double *from) {
    __builtin_prefetch(from);
    __builtin_prefetch(from + 8);
}

/* Pairs move as one 16-byte register. */
typedef double pair __attribute__((vector_size(16)));

static inline void move_pair(double *to, const double *from, double scale) {
    pair p;
    memcpy(&p, from, sizeof p);
    p *= scale;
    memcpy(to, &p, sizeof p);
}

/* Called with a constant count wherever a block is full, so that the inner loop is unrolled. */
static inline void gather_rows(const block *b, size_t count, const double *from, double scale, double *buf) {
    for (size_t i = 0; i < b->n; i++) {
        const double *row = from + i * b->step;
        if (i + AHEAD < b->n) ask_for(row + AHEAD * b->step);
        for (size_t l = 0; l < count; l++) {
            if (b->width == 2)
                move_pair(buf + l * b->room + 2 * i, row + 2 * l, scale);
            else
                buf[l * b->room + i] = scale * row[l];
        }
    }
}

static inline void scatter_rows(const block *b, size_t count, const double *buf, double *to) {
    for (size_t i = 0; i < b->n; i++) {
        double *row = to + i * b->step;
        for (size_t l = 0; l < count; l++) {
            if (b->width == 2)
                move_pair(row + 2 * l, buf + l * b->room + 2 * i, 1);
            else
                row[l] = buf[l * b->room + i];
        }
    }
}

static void gather(const block *b, const double *from, double scale, double *buf) {
    if (b->count == MT_BLOCK)
        gather_rows(b, MT_BLOCK, from, scale, buf);
    else
        gather_rows(b, b->count, from, scale, buf);
}

static void scatter(const block *b, const double *buf, double *to) {
    if (b->count == MT_BLOCK)
        scatter_rows(b, MT_BLOCK, buf, to);
    else
        scatter_rows(b, b->count, buf, to);
}

/* --- slabs: the inner axes at one place of the outer one --- */

static bool is_odd(mt_parities p, int axis) {
    return (p >> axis) & 1;
}

/* y lines of a plane, MT_BLOCK at a time; the plane holds x modes in rows of plane_ld, the slab y modes in
 * rows of x modes. lines: room for two blocks. */
static void plane_pass(const mt_sweeper *w, bool forward, mt_parities p, double *plane, double *slab,
                       double *lines) {
    const mt_line *y = &w->axis[1];
    size_t columns = (size_t)w->s.modes[0], room = mt_line_room(y), in_width = y->complex ? 2 : 1;
    size_t out_width = y->complex || y->kind == MT_LINE_HALF ? 2 : 1;
    double *to = lines + MT_BLOCK * room;
    for (size_t c = 0; c < columns; c += MT_BLOCK) {
        size_t count = columns - c < MT_BLOCK ? columns - c : MT_BLOCK;
        block in = {(size_t)y->n, count, in_width, w->plane_ld, room};
        block out = {(size_t)y->modes, count, out_width, columns * out_width, room};
        if (forward) {
            gather(&in, plane + c * in_width, 1, lines);
            for (size_t l = 0; l < count; l++)
                mt_line_forward(y, is_odd(p, 1), lines + l * room, to + l * room);
            scatter(&out, to, slab + c * out_width);
        } else {
            gather(&out, slab + c * out_width, 1, lines);
            for (size_t l = 0; l < count; l++)
                mt_line_inverse(y, is_odd(p, 1), lines + l * room, to + l * room);
            scatter(&in, to, plane + c * in_width);
        }
    }
}

static void slab_inverse(const mt_sweeper *w, mt_parities p, double *slab, double *cells, double *scratch) {
    size_t nx = (size_t)w->grid->n[0];
    if (!w->plane_ld) {
        mt_line_inverse(&w->axis[0], is_odd(p, 0), slab, cells);
        return;
    }
    double *plane = scratch, *buf = scratch + w->plane_ld * (size_t)w->grid->n[1];
    plane_pass(w, false, p, plane, slab, buf);
    for (size_t y = 0; y < (size_t)w->grid->n[1]; y++)
        mt_line_inverse(&w->axis[0], is_odd(p, 0), plane + y * w->plane_ld, cells + y * nx);
}

static void slab_forward(const mt_sweeper *w, mt_parities p, double *cells, double *slab, double *scratch) {
    size_t nx = (size_t)w->grid->n[0];
    if (!w->plane_ld) {
        mt_line_forward(&w->axis[0], is_odd(p, 0), cells, slab);
        return;
    }
    double *plane = scratch, *buf = scratch + w->plane_ld * (size_t)w->grid->n[1];
    for (size_t y = 0; y < (size_t)w->grid->n[1]; y++)
        mt_line_forward(&w->axis[0], is_odd(p, 0), cells + y * nx, plane + y * w->plane_ld);
    plane_pass(w, true, p, plane, slab, buf);
}

static size_t slab_scratch(const mt_sweeper *w) {
    return w->plane_ld ? w->plane_ld * (size_t)w->grid->n[1] + 2 * MT_BLOCK * mt_line_room(&w->axis[1]) : 0;
}

/* --- the row sweep --- */

typedef struct sweep {
    mt_sweeper *w;
    int nin, nout;
    double *const *in, *const *out;
    const mt_parities *in_parity, *out_parity;
    mt_row_body row;
    mt_column_body column;
    void *ctx;
} sweep;

#define MOST_ARRAYS 256

static mt_status check_arrays(int nin, int nout, mt_error *err) {
    if (nin <= MOST_ARRAYS && nout <= MOST_ARRAYS) return MT_OK;
    return mt_fail(err, MT_EUNSUPPORTED, "a step with more than %d arrays in one sweep", MOST_ARRAYS);
}

static size_t unit_room(const mt_sweeper *w) {
    return mt_round_up(mt_sweeper_unit_cells(w), 8);
}

/* Along a mirror axis of one cell the only sine is mode n, which is projected out. */
static bool vanishes(const mt_sweeper *w, mt_parities p) {
    for (int a = 0; a < 3; a++)
        if (w->axis[a].kind == MT_LINE_NONE && is_odd(p, a)) return true;
    return false;
}

/* The row after this one, while this one is transformed: its lines were last written by columns on other
 * processors. To be written, since the inverse transform spends its input. With 2 threads at 1024^2 the row
 * sweep takes 1.4 ms instead of 1.5. A plane of a 3-D box is too long to be asked for at once. */
static void ask_for_row(const mt_sweeper *w, const double *row) {
    for (size_t i = 0; i < w->ld && !w->plane_ld; i += 8) __builtin_prefetch(row + i, 1);
}

/* With one axis only (outer == 0) mixed data are the values themselves. */
static void read_unit(const sweep *x, int i, size_t r0, size_t r1, double *cells, double *scratch) {
    const mt_sweeper *w = x->w;
    mt_parities p = x->in_parity[i];
    if (vanishes(w, p))
        memset(cells, 0, (r1 - r0) * w->inner_cells * sizeof *cells);
    else if (w->s.outer == 0)
        memcpy(cells, x->in[i] + r0, (r1 - r0) * sizeof *cells);
    else
        for (size_t r = r0; r < r1; r++) {
            if (r + 1 < r1) ask_for_row(w, x->in[i] + (r + 1) * w->ld);
            slab_inverse(w, p, x->in[i] + r * w->ld, cells + (r - r0) * w->inner_cells, scratch);
        }
}

static void write_unit(const sweep *x, int i, size_t r0, size_t r1, double *cells, double *scratch) {
    const mt_sweeper *w = x->w;
    mt_parities p = x->out_parity[i];
    if (vanishes(w, p))
        memset(x->out[i] + r0 * w->ld, 0, (r1 - r0) * w->ld * sizeof *cells);
    else if (w->s.outer == 0)
        memcpy(x->out[i] + r0, cells, (r1 - r0) * sizeof *cells);
    else
        for (size_t r = r0; r < r1; r++)
            slab_forward(w, p, cells + (r - r0) * w->inner_cells, x->out[i] + r * w->ld, scratch);
}

static mt_status row_job(void *ctx, size_t index, int worker, mt_error *err) {
    const sweep *x = ctx;
    const mt_sweeper *w = x->w;
    double *in[MOST_ARRAYS], *out[MOST_ARRAYS], *at = w->buffer[worker].at;
    size_t r0 = index * (size_t)w->rows_per_unit, r1 = r0 + (size_t)w->rows_per_unit;
    size_t outer = (size_t)w->grid->n[w->s.outer];
    if (r1 > outer) r1 = outer;
    for (int i = 0; i < x->nin; i++, at += unit_room(w)) in[i] = at;
    for (int i = 0; i < x->nout; i++, at += unit_room(w)) out[i] = at;
    for (int i = 0; i < x->nin; i++) read_unit(x, i, r0, r1, in[i], at);
    mt_unit unit = {index, r0 * w->inner_cells, (r1 - r0) * w->inner_cells};
    mt_status st = x->row(x->ctx, &unit, in, out, worker, err);
    for (int i = 0; i < x->nout && !st; i++) write_unit(x, i, r0, r1, out[i], at);
    return st;
}

mt_status mt_sweep_rows(mt_sweeper *w, int nin, double *const in[], const mt_parities in_parity[], int nout,
                        double *const out[], const mt_parities out_parity[], mt_row_body body, void *ctx,
                        mt_error *err) {
    sweep x = {.w = w,
               .nin = nin,
               .nout = nout,
               .in = in,
               .out = out,
               .in_parity = in_parity,
               .out_parity = out_parity};
    x.row = body;
    x.ctx = ctx;
    mt_status st = check_arrays(nin, nout, err);
    if (!st) st = reserve(w, (size_t)(nin + nout) * unit_room(w) + slab_scratch(w) + 8, err);
    return st ? st : mt_pool_run(w->pool, w->units, row_job, &x, err);
}

/* --- the column sweep --- */

/* Projected out along an inner axis: a Nyquist mode, or mode 0 of an odd array. */
static bool inner_dropped(const mt_sweeper *w, mt_parities p, const int mode[3]) {
    for (int a = 0; a < 3; a++) {
        mt_line_kind kind = w->axis[a].kind;
        bool periodic = kind == MT_LINE_HALF || kind == MT_LINE_FULL;
        if (a == w->s.outer) continue;
        if (periodic && w->grid->n[a] % 2 == 0 && mode[a] == w->grid->n[a] / 2) return true;
        if (is_odd(p, a) && mode[a] == 0) return true;
    }
    return false;
}

static mt_column describe(const mt_sweeper *w, size_t index) {
    mt_column c = {.index = index, .offset = index * w->s.stride, .length = w->s.length, .weight = 1};
    mt_spectrum_column(&w->s, index, c.mode);
    for (int a = 0; a < 3; a++) {
        if (a == w->s.outer) continue;
        c.k[a] = w->s.k[a][c.mode[a]];
        c.weight *= w->s.weight[a][c.mode[a]];
    }
    return c;
}

/* stage: room for one block, for every input and output in turn. */
static void load_block(const sweep *x, int i, size_t first, const block *b, double *stage, double *modes) {
    const mt_sweeper *w = x->w;
    const mt_line *line = &w->axis[w->s.outer];
    bool odd = is_odd(x->in_parity[i], w->s.outer);
    gather(b, x->in[i] + first * b->width, w->scale, stage);
    for (size_t l = 0; l < b->count; l++)
        mt_line_forward(line, odd, stage + l * b->room, modes + l * b->room);
}

static void store_block(const sweep *x, int i, size_t first, const block *b, double *modes, double *stage) {
    const mt_sweeper *w = x->w;
    const mt_line *line = &w->axis[w->s.outer];
    bool odd = is_odd(x->out_parity[i], w->s.outer);
    for (size_t l = 0; l < b->count; l++)
        mt_line_inverse(line, odd, modes + l * b->room, stage + l * b->room);
    scatter(b, stage, x->out[i] + first * b->width);
}

static mt_status column_job(void *ctx, size_t index, int worker, mt_error *err) {
    const sweep *x = ctx;
    const mt_sweeper *w = x->w;
    const mt_line *line = &w->axis[w->s.outer];
    double *in[MOST_ARRAYS], *out[MOST_ARRAYS], *stage = w->buffer[worker].at;
    size_t first = index * MT_BLOCK, count = w->s.columns - first, room = mt_line_room(line);
    size_t bytes = (size_t)w->s.length * (w->s.complex ? 2 : 1) * sizeof(double);
    if (count > MT_BLOCK) count = MT_BLOCK;
    block b = {(size_t)line->n, count, w->inner_complex ? 2 : 1, w->ld, room};
    double *at = stage + MT_BLOCK * room, *outs = at + (size_t)x->nin * MT_BLOCK * room;
    for (int i = 0; i < x->nin; i++) load_block(x, i, first, &b, stage, at + (size_t)i * MT_BLOCK * room);
    for (size_t l = 0; l < count; l++) {
        mt_column c = describe(w, first + l);
        for (int i = 0; i < x->nin; i++) in[i] = at + ((size_t)i * MT_BLOCK + l) * room;
        for (int i = 0; i < x->nout; i++) out[i] = outs + ((size_t)i * MT_BLOCK + l) * room;
        for (int i = 0; i < x->nin; i++)
            if (inner_dropped(w, x->in_parity[i], c.mode)) memset(in[i], 0, bytes);
        mt_status st = x->column(x->ctx, &c, in, out, worker, err);
        if (st) return st;
        for (int i = 0; i < x->nout; i++)
            if (inner_dropped(w, x->out_parity[i], c.mode)) memset(out[i], 0, bytes);
    }
    for (int i = 0; i < x->nout; i++) store_block(x, i, first, &b, outs + (size_t)i * MT_BLOCK * room, stage);
    return MT_OK;
}

mt_status mt_sweep_columns(mt_sweeper *w, int nin, double *const in[], const mt_parities in_parity[],
                           int nout, double *const out[], const mt_parities out_parity[], mt_column_body body,
                           void *ctx, mt_error *err) {
    sweep x = {.w = w,
               .nin = nin,
               .nout = nout,
               .in = in,
               .out = out,
               .in_parity = in_parity,
               .out_parity = out_parity};
    x.column = body;
    x.ctx = ctx;
    mt_status st = check_arrays(nin, nout, err);
    if (!st)
        st = reserve(w, (size_t)(nin + nout + 1) * MT_BLOCK * mt_line_room(&w->axis[w->s.outer]) + 8, err);
    return st ? st : mt_pool_run(w->pool, w->blocks, column_job, &x, err);
}

/* --- whole arrays --- */

typedef struct whole {
    const mt_spectrum *s;
    const double *from;
    double *to;
} whole;

static mt_status put_rows(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                          mt_error *err) {
    const whole *x = ctx;
    (void)in, (void)worker, (void)err;
    memcpy(out[0], x->from + u->first, u->n * sizeof(double));
    return MT_OK;
}

static mt_status take_rows(void *ctx, const mt_unit *u, double *const in[], double *const out[], int worker,
                           mt_error *err) {
    const whole *x = ctx;
    (void)out, (void)worker, (void)err;
    memcpy(x->to + u->first, in[0], u->n * sizeof(double));
    return MT_OK;
}

static size_t column_bytes(const mt_spectrum *s) {
    return (size_t)s->length * (s->complex ? 2 : 1) * sizeof(double);
}

static mt_status put_column(void *ctx, const mt_column *c, double *const in[], double *const out[],
                            int worker, mt_error *err) {
    const whole *x = ctx;
    (void)in, (void)worker, (void)err;
    memcpy(out[0], x->from + c->offset, column_bytes(x->s));
    return MT_OK;
}

static mt_status take_column(void *ctx, const mt_column *c, double *const in[], double *const out[],
                             int worker, mt_error *err) {
    const whole *x = ctx;
    (void)out, (void)worker, (void)err;
    memcpy(x->to + c->offset, in[0], column_bytes(x->s));
    return MT_OK;
}

mt_status mt_transform_forward(mt_sweeper *w, const double *field, mt_parities parity, double *spectrum,
                               double *work, mt_error *err) {
    whole x = {&w->s, field, spectrum};
    mt_status st = mt_sweep_rows(w, 0, NULL, NULL, 1, &work, &parity, put_rows, &x, err);
    return st ? st : mt_sweep_columns(w, 1, &work, &parity, 0, NULL, NULL, take_column, &x, err);
}

mt_status mt_transform_inverse(mt_sweeper *w, const double *spectrum, mt_parities parity, double *field,
                               double *work, mt_error *err) {
    whole x = {&w->s, spectrum, field};
    mt_status st = mt_sweep_columns(w, 0, NULL, NULL, 1, &work, &parity, put_column, &x, err);
    return st ? st : mt_sweep_rows(w, 1, &work, &parity, 0, NULL, NULL, take_rows, &x, err);
}
