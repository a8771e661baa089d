#include "core/files/picture.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/files/glyphs.h"
#include "core/files/number.h"
#include "core/files/png.h"

mt_picture mt_picture_default(void) {
    return (mt_picture){.map = MT_MAP_SLATE, .low = NAN, .high = NAN, .axis = 2, .index = -1, .metres = true};
}

/* ---- the section: a 2-D view of the values ---- */

typedef struct section {
    const double *first;
    int nx, ny;
    size_t step_x, step_y; /* in values */
} section;

static mt_status take_section(section *s, const mt_picture *p, int dim, const int n[], const double *values,
                              mt_error *err) {
    size_t step[3] = {1, (size_t)n[0], dim > 1 ? (size_t)n[0] * (size_t)n[1] : 0};
    if (dim < 3) {
        *s = (section){values, n[0], dim > 1 ? n[1] : 1, 1, step[1]};
        return MT_OK;
    }
    if (p->axis < 0 || p->axis > 2)
        return mt_fail(err, MT_EINPUT, "a section is taken across axis 0 (x), 1 (y) or 2 (z), not %d",
                       p->axis);
    int a = p->axis == 0 ? 1 : 0, b = p->axis == 2 ? 1 : 2,
        index = p->index == -1 ? n[p->axis] / 2 : p->index;
    if (index < 0 || index >= n[p->axis])
        return mt_fail(err, MT_EINPUT, "there is no section at cell %d: the axis has cells 0 to %d", index,
                       n[p->axis] - 1);
    *s = (section){.first = values + (size_t)index * step[p->axis],
                   .nx = n[a],
                   .ny = n[b],
                   .step_x = step[a],
                   .step_y = step[b]};
    return MT_OK;
}

static double value_at(const section *s, int x, int y) {
    return s->first[(size_t)x * s->step_x + (size_t)y * s->step_y];
}

/* Limits asked for, or found; a section without finite values gives 0 and 1. */
static void find_limits(const section *s, const mt_picture *p, double *low, double *high) {
    double least = INFINITY, most = -INFINITY;
    for (int y = 0; y < s->ny; y++)
        for (int x = 0; x < s->nx; x++) {
            double v = value_at(s, x, y);
            if (!isfinite(v)) continue;
            if (v < least) least = v;
            if (v > most) most = v;
        }
    if (least > most) least = 0, most = 1;
    *low = isnan(p->low) ? (isnan(p->high) || least <= p->high ? least : p->high) : p->low;
    *high = isnan(p->high) ? (most >= *low ? most : *low) : p->high;
}

/* ---- the canvas ---- */

typedef struct canvas {
    int width, height;
    uint8_t *rgb;
} canvas;

static const uint8_t ink[3] = {38, 38, 42}, paper[3] = {255, 255, 255}, hole[3] = {255, 0, 255};

static void fill(canvas *c, int x, int y, int w, int h, const uint8_t colour[3]) {
    int x1 = x + w < c->width ? x + w : c->width, y1 = y + h < c->height ? y + h : c->height;
    for (int j = y < 0 ? 0 : y; j < y1; j++)
        for (int i = x < 0 ? 0 : x; i < x1; i++)
            memcpy(c->rgb + 3 * ((size_t)j * (size_t)c->width + (size_t)i), colour, 3);
}

static void frame(canvas *c, int x, int y, int w, int h, int line) {
    fill(c, x - line, y - line, w + 2 * line, line, ink);
    fill(c, x - line, y + h, w + 2 * line, line, ink);
    fill(c, x - line, y, line, h, ink);
    fill(c, x + w, y, line, h, ink);
}

/* Letters with their base line 7 dots below y, each dot a square of `dot` pixels. */
static void letters(canvas *c, int x, int y, int dot, const char *text) {
    while (*text) {
        const uint8_t *rows = mt_glyph_rows(mt_glyph_next(&text));
        for (int j = 0; j < MT_GLYPH_HIGH; j++)
            for (int i = 0; i < MT_GLYPH_WIDE; i++)
                if (rows[j] >> (MT_GLYPH_WIDE - 1 - i) & 1) fill(c, x + i * dot, y + j * dot, dot, dot, ink);
        x += MT_GLYPH_PITCH * dot;
    }
}

/* The last dot of pitch is no part of the text. */
static int text_width(const char *text, int dot) {
    int n = mt_glyph_count(text);
    return n ? (n * MT_GLYPH_PITCH - 1) * dot : 0;
}

/* As many letters as the room takes, with "..." in place of the rest. */
static void letters_within(canvas *c, int x, int y, int dot, const char *text, int room) {
    char cut[512];
    int fits = (room + dot) / (MT_GLYPH_PITCH * dot);
    if (text_width(text, dot) > room) {
        const char *end = text;
        for (int i = 0; i < fits - 3 && end - text < (int)sizeof cut - 8; i++) mt_glyph_next(&end);
        snprintf(cut, sizeof cut, "%.*s%s", (int)(end - text), text, fits >= 3 ? "..." : "");
        text = cut;
    }
    letters(c, x, y, dot, text);
}

/* ---- where everything goes ---- */

enum { TICKS_MOST = 24, TITLE_WHOLE = 60 }; /* TITLE_WHOLE: letters of a title that are never cut */

static int larger(int a, int b) {
    return a > b ? a : b;
}

typedef struct layout {
    section s;
    double low, high;
    int scale, dot, line;
    int x, y, w, h;                 /* the cells, pixels of the canvas */
    int key_x, key_y, key_w, key_h; /* the key's colours */
    double tick, step;
    int ticks;
    double bar; /* length of the bar; 0: none */
    int bar_w;
    char bar_text[MT_NUMBER_ROOM];
    int title_y, title_w;
    int width, height;
} layout;

static int choose_scale(const mt_picture *p, const section *s) {
    int longer = s->nx > s->ny ? s->nx : s->ny;
    if (p->scale) return p->scale;
    int scale = longer >= 512 ? 1 : (511 + longer) / longer;
    return scale > 64 ? 64 : scale;
}

static mt_status size_cells(layout *l, const mt_picture *p, int dim, mt_error *err) {
    l->scale = choose_scale(p, &l->s);
    if (l->s.nx > MT_PNG_MOST / l->scale || l->s.ny > MT_PNG_MOST / l->scale)
        return mt_fail(
            err, MT_EINPUT,
            "a picture of %d x %d cells at %d pixels each is over %d pixels: choose a smaller scale", l->s.nx,
            l->s.ny, l->scale, MT_PNG_MOST);
    l->w = l->s.nx * l->scale;
    l->h = l->s.ny * l->scale;
    if (dim == 1) l->h = l->w / 8 > 40 ? l->w / 8 : 40;
    int longer = l->w > l->h ? l->w : l->h;
    l->dot = longer < 256 ? 1 : (longer + 192) / 384 < 2 ? 2 : (longer + 192) / 384;
    l->line = l->dot > 1 ? l->dot / 2 : 1;
    return MT_OK;
}

/* The bar: a 1-2-5 length of about a fifth of the width (an eighth to a quarter). */
static void size_bar(layout *l, const mt_picture *p) {
    if (!(p->spacing > 0) || !isfinite(p->spacing)) return;
    l->bar = mt_number_round_down(p->spacing * l->s.nx / 4);
    l->bar_w = (int)lrint(l->bar / p->spacing * l->scale);
    if (p->metres)
        mt_number_length(l->bar, l->bar_text);
    else
        mt_number_tick(l->bar, l->bar, l->bar_text);
}

static void key_number(const layout *l, int i, char text[MT_NUMBER_ROOM]) {
    if (l->ticks)
        mt_number_tick(l->tick + i * l->step, l->step, text);
    else
        snprintf(text, MT_NUMBER_ROOM, "%.6g", l->low);
}

static int key_labels_width(const layout *l) {
    char text[MT_NUMBER_ROOM];
    int most = 0, n = l->ticks ? l->ticks : 1;
    for (int i = 0; i < n; i++) {
        key_number(l, i, text);
        int w = text_width(text, l->dot);
        if (w > most) most = w;
    }
    return most;
}

/* Ticks about 26 dots apart, yet three of them where 1-2-5 steps allow: fewer tell no scale. */
static void choose_ticks(layout *l) {
    int wanted = l->key_h / (26 * l->dot);
    for (int more = wanted < 2 ? 2 : wanted; more < wanted + 8; more++) {
        l->ticks = mt_number_ticks(l->low, l->high, more, &l->tick, &l->step);
        if (l->ticks >= 3) break;
    }
    if (l->ticks > TICKS_MOST) l->ticks = TICKS_MOST;
}

static void place_all(layout *l, const mt_picture *p) {
    int d = l->dot, margin = 6 * d, title = p->title ? text_width(p->title, d) : 0;
    bool two =
        title > l->w && p->quantity; /* a title too long to stand beside the quantity gets its own line */
    l->x = margin;
    l->y = margin + (p->title || p->quantity ? 17 * d : 0) + (two ? 13 * d : 0);
    l->title_y = margin + 2 * d;
    l->key_w = 8 * d;
    l->key_h = l->h > 64 * d ? l->h : 64 * d;
    l->key_x = l->x + l->w + 7 * d;
    l->key_y = l->y;
    choose_ticks(l);
    int key = l->key_w + 5 * d + key_labels_width(l), quantity = p->quantity ? text_width(p->quantity, d) : 0;
    int right = l->key_x + larger(key, quantity), bar_right = l->x + l->bar_w + 5 * d;
    if (l->bar > 0) bar_right += text_width(l->bar_text, d);
    if (bar_right > right) right = bar_right;
    int longest = TITLE_WHOLE * MT_GLYPH_PITCH * d;
    if (two || !p->quantity) right = larger(right, l->x + (title < longest ? title : longest));
    l->title_w = two || !p->quantity ? right - l->x : l->w;
    int below = l->h + (l->bar > 0 ? 13 * d : 0);
    l->width = right + margin;
    l->height = l->y + larger(below, l->key_h) + margin;
}

/* ---- drawing ---- */

/* Where v lies between the limits, 0 to 1; halved, since high - low may overflow. */
static double place_of(double v, const layout *l) {
    if (!(l->low < l->high)) return v > l->high ? 1 : v < l->low ? 0 : 0.5;
    return v <= l->low ? 0 : v >= l->high ? 1 : (v / 2 - l->low / 2) / (l->high / 2 - l->low / 2);
}

static void colour_of(double v, const layout *l, uint8_t map[256][3], uint8_t out[3]) {
    int i = isnan(v) ? 0 : (int)(256 * place_of(v, l)); /* 256 equal classes */
    memcpy(out, isnan(v) ? hole : map[i > 255 ? 255 : i], 3);
}

static void draw_cells(canvas *c, const layout *l, uint8_t map[256][3]) {
    int high = l->h / l->s.ny; /* not `scale` for a band */
    uint8_t colour[3];
    for (int y = 0; y < l->s.ny; y++)
        for (int x = 0; x < l->s.nx; x++) {
            colour_of(value_at(&l->s, x, y), l, map, colour);
            fill(c, l->x + x * l->scale, l->y + l->h - (y + 1) * high, l->scale, high, colour);
        }
}

static int key_row(const layout *l, double v) {
    return l->key_y + (int)lrint((1 - place_of(v, l)) * (l->key_h - 1));
}

static void draw_key(canvas *c, const layout *l, const mt_picture *p, uint8_t map[256][3]) {
    char text[MT_NUMBER_ROOM];
    int d = l->dot;
    for (int j = 0; j < l->key_h; j++) {
        int i = l->high > l->low ? 255 - (int)((255.999 * j) / l->key_h) : 128;
        fill(c, l->key_x, l->key_y + j, l->key_w, 1, map[i]);
    }
    frame(c, l->key_x, l->key_y, l->key_w, l->key_h, l->line);
    for (int i = 0; i < (l->ticks ? l->ticks : 1); i++) {
        int y = key_row(l, l->ticks ? l->tick + i * l->step : l->low);
        key_number(l, i, text);
        fill(c, l->key_x + l->key_w + l->line, y - (l->line - 1) / 2, 2 * d, l->line, ink);
        letters(c, l->key_x + l->key_w + 5 * d, y - 3 * d, d, text);
    }
    if (p->quantity) letters(c, l->key_x, l->y - 15 * d, d, p->quantity);
}

static void draw_bar(canvas *c, const layout *l) {
    int d = l->dot, y = l->y + l->h + 8 * d;
    fill(c, l->x, y, l->bar_w, 2 * d, ink);
    fill(c, l->x, y - d, d, 4 * d, ink);
    fill(c, l->x + l->bar_w - d, y - d, d, 4 * d, ink);
    letters(c, l->x + l->bar_w + 5 * d, y - 3 * d, d, l->bar_text);
}

static mt_status plan(layout *l, const mt_picture *p, int dim, const int n[], const double *values,
                      mt_error *err) {
    if (p->scale < 0 || p->scale > 64)
        return mt_fail(err, MT_EINPUT,
                       "the scale of a picture is 1 to 64 pixels per cell, or 0 for automatic, not %d",
                       p->scale);
    if (p->low > p->high)
        return mt_fail(err, MT_EINPUT, "the low limit of a picture (%g) is above the high one (%g)", p->low,
                       p->high);
    if (isinf(p->low) || isinf(p->high))
        return mt_fail(err, MT_EINPUT, "the limits of a picture must be finite");
    mt_status status = take_section(&l->s, p, dim, n, values, err);
    if (!status) status = size_cells(l, p, dim, err);
    if (status) return status;
    find_limits(&l->s, p, &l->low, &l->high);
    if (p->bare) {
        l->width = l->w;
        l->height = l->h;
        return MT_OK;
    }
    size_bar(l, p);
    place_all(l, p);
    if (l->width <= MT_PNG_MOST && l->height <= MT_PNG_MOST) return MT_OK;
    return mt_fail(err, MT_EINPUT,
                   "the picture would have %d x %d pixels, at most %d a side: choose a smaller scale",
                   l->width, l->height, MT_PNG_MOST);
}

mt_status mt_picture_draw(const mt_picture *p, int dim, const int n[], const double *values, int *width,
                          int *height, uint8_t **rgb, mt_error *err) {
    MT_REQUIRE(p && dim >= 1 && dim <= 3 && n && values && width && height && rgb, err);
    for (int axis = 0; axis < dim; axis++) MT_REQUIRE(n[axis] >= 1, err);
    layout l = {0};
    uint8_t map[256][3];
    mt_status status = plan(&l, p, dim, n, values, err);
    if (status) return status;
    canvas c = {.width = l.width, .height = l.height};
    status = mt_new(&c.rgb, (size_t)l.width * (size_t)l.height, 3, "a picture", err);
    if (status) return status;
    mt_map_colours(p->map, map);
    if (!p->bare) fill(&c, 0, 0, c.width, c.height, paper);
    draw_cells(&c, &l, map);
    if (!p->bare) {
        frame(&c, l.x, l.y, l.w, l.h, l.line);
        draw_key(&c, &l, p, map);
        if (l.bar > 0) draw_bar(&c, &l);
        if (p->title) letters_within(&c, l.x, l.title_y, l.dot, p->title, l.title_w);
    }
    *width = c.width;
    *height = c.height;
    *rgb = c.rgb;
    return MT_OK;
}

mt_status mt_picture_write(const mt_picture *p, const mt_folder *folder, const char *name, int dim,
                           const int n[], const double *values, mt_error *err) {
    int width, height;
    uint8_t *rgb;
    mt_status status = mt_picture_draw(p, dim, n, values, &width, &height, &rgb, err);
    if (status) return status;
    status = mt_png_write(folder, name, width, height, rgb, p->title, err);
    mt_free(rgb);
    return status;
}
