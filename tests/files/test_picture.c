/* Proved: sizes follow the scale, the origin is at the lower left, sections of 3-D fields are the right
 * cells, holes and limits have the stated colours, the bar has its length, odd inputs stay inside the canvas,
 * glyphs are sound. */
#include "scratch.h"

#include <math.h>

#include "core/files/glyphs.h"
#include "core/files/picture.h"
#include "core/files/png.h"

typedef struct drawn {
    int width, height;
    uint8_t *rgb;
} drawn;

static drawn draw(const mt_picture *p, int dim, const int n[], const double *values) {
    drawn d;
    mt_error err = {0};
    check_ok(mt_picture_draw(p, dim, n, values, &d.width, &d.height, &d.rgb, &err), &err);
    return d;
}

static const uint8_t *pixel(const drawn *d, int x, int y) {
    return d->rgb + 3 * (y * d->width + x);
}

static void test_bare_cells(void **state) {
    (void)state;
    const double v[6] = {0, 0.25, NAN, 0.75, 1, 7};
    const int n[2] = {3, 2};
    mt_picture p = mt_picture_default();
    uint8_t map[256][3];
    const uint8_t hole[3] = {255, 0, 255};
    mt_map_colours(MT_MAP_SLATE, map);
    p.bare = true, p.scale = 4, p.low = 0, p.high = 1;
    drawn d = draw(&p, 2, n, v);
    assert_true(d.width == 12 && d.height == 8);
    for (int y = 0; y < 8; y++)
        for (int x = 0; x < 12; x++) {
            double value = v[(1 - y / 4) * 3 + x / 4];
            int i = !(value < 1) ? 255 : (int)(256 * value);
            assert_memory_equal(pixel(&d, x, y), isnan(value) ? hole : map[i], 3);
        }
    mt_free(d.rgb);
}

static void test_sections(void **state) {
    (void)state;
    const int n[3] = {2, 3, 4};
    double v[24];
    uint8_t map[256][3];
    mt_map_colours(MT_MAP_GREY, map);
    for (int i = 0; i < 24; i++) v[i] = i;
    for (int axis = 0; axis < 3; axis++)
        for (int index = -1; index < n[axis]; index++) {
            mt_picture p = mt_picture_default();
            p.bare = true, p.scale = 1, p.low = 0, p.high = 24, p.axis = axis, p.index = index,
            p.map = MT_MAP_GREY;
            int at = index < 0 ? n[axis] / 2 : index, a = axis == 0, b = axis == 2 ? 1 : 2;
            drawn d = draw(&p, 3, n, v);
            assert_true(d.width == n[a] && d.height == n[b]);
            for (int y = 0; y < n[b]; y++)
                for (int x = 0; x < n[a]; x++) {
                    int cell[3] = {at, at, at};
                    cell[a] = x, cell[b] = y;
                    int k = (cell[2] * 3 + cell[1]) * 2 + cell[0];
                    assert_memory_equal(pixel(&d, x, n[b] - 1 - y), map[256 * k / 24], 3);
                }
            mt_free(d.rgb);
        }
}

static void test_automatic_scale(void **state) {
    (void)state;
    static double v[1024 * 4];
    const struct {
        int n[2], width;
    } cases[] = {{{512, 2}, 512}, {{511, 2}, 1022}, {{100, 4}, 600}, {{4, 4}, 256}, {{1024, 4}, 1024}};
    for (int i = 0; i < 5; i++) {
        mt_picture p = mt_picture_default();
        p.bare = true;
        drawn d = draw(&p, 2, cases[i].n, v);
        assert_int_equal(d.width, cases[i].width);
        mt_free(d.rgb);
    }
}

static bool dark(const uint8_t *p) {
    return p[0] < 60 && p[1] < 60 && p[2] < 60;
}

/* A white field on white paper, lettered: below it, the longest dark run is the bar, which must be 20 nm = 50
 * cells of 0.4 nm = 100 pixels. */
static void test_bar_length(void **state) {
    (void)state;
    static double v[256 * 256];
    const int n[2] = {256, 256};
    mt_picture p = mt_picture_default();
    p.low = -1, p.high = 0, p.spacing = 0.4e-9;
    drawn d = draw(&p, 2, n, v);
    int longest = 0, bottom = 12 + 512 + 4;
    for (int y = bottom; y < d.height; y++)
        for (int x = 0, run = 0; x < d.width - 80; x++) {
            run = dark(pixel(&d, x, y)) ? run + 1 : 0;
            longest = run > longest ? run : longest;
        }
    assert_int_equal(longest, 100);
    mt_free(d.rgb);
}

/* Every odd request either draws or is refused; the sanitizer watches the canvas. */
static void test_odd_requests(void **state) {
    (void)state;
    const int shapes[][2] = {{1, 1}, {1, 9}, {9, 1}, {3, 700}, {40, 40}};
    static double v[3000];
    const char *titles[] = {NULL, "", "t", "\xFF\xC2",
                            "a title that is far longer than any picture of forty cells is wide, and longer"};
    const double limits[] = {NAN, 0, 1e-300, 1.7e308, -1.7e308};
    for (int s = 0; s < 5; s++)
        for (int t = 0; t < 5; t++)
            for (int l = 0; l < 25; l++) {
                mt_picture p = mt_picture_default();
                mt_error err = {0};
                drawn d;
                for (int i = 0; i < 3000; i++)
                    v[i] = t == 1            ? 0.3
                           : t == 2          ? NAN
                           : t == 3 && i % 2 ? INFINITY
                                             : sin(i) * (t == 4 ? 1.7e308 : 1);
                p.low = limits[l % 5], p.high = limits[l / 5], p.title = titles[t],
                p.quantity = titles[(t + l) % 5];
                p.spacing = l % 2 ? 3e-10 : 1e-320, p.scale = l % 4, p.metres = l % 3,
                p.map = (mt_map)(l % MT_MAP_COUNT);
                mt_status status = mt_picture_draw(&p, 2 - (shapes[s][1] == 1), shapes[s], v, &d.width,
                                                   &d.height, &d.rgb, &err);
                if (p.low > p.high)
                    assert_int_equal(status, MT_EINPUT);
                else
                    check_ok(status, &err);
                if (!status) mt_free(d.rgb);
            }
}

static void test_refused(void **state) {
    (void)state;
    const double v[8] = {0};
    const int n[3] = {2, 2, 2}, wide[2] = {40000, 1};
    drawn d;
    mt_error err;
    for (int i = 0; i < 5; i++) {
        mt_picture p = mt_picture_default();
        if (i == 0) p.scale = -1;
        if (i == 1) p.scale = 65;
        if (i == 2) p.axis = 3;
        if (i == 3) p.index = 2;
        if (i == 4) p.low = INFINITY;
        assert_int_equal(mt_picture_draw(&p, 3, n, v, &d.width, &d.height, &d.rgb, &err), MT_EINPUT);
    }
    mt_picture p = mt_picture_default();
    assert_int_equal(mt_picture_draw(&p, 2, wide, v, &d.width, &d.height, &d.rgb, &err), MT_EINPUT);
}

static mt_status body(void *ctx, mt_error *err) {
    (void)ctx;
    const double v[6] = {1, 2, 3, 4, 5, 6};
    const int n[2] = {3, 2};
    mt_picture p = mt_picture_default();
    p.title = "stage", p.quantity = "x", p.spacing = 1e-9, p.scale = 9;
    mt_image m = {0};
    mt_status status = mt_picture_write(&p, NULL, "p.png", 2, n, v, err);
    if (!status) status = mt_png_read(&m, NULL, "p.png", 0, err);
    mt_image_free(&m);
    return status;
}

static void test_allocations(void **state) {
    (void)state;
    check_allocation_sweep(body, NULL);
}

/* All printable ASCII and the signs are there and differ from one another; broken UTF-8 is taken byte by
 * byte. */
static void test_glyphs(void **state) {
    (void)state;
    const uint8_t *none = mt_glyph_rows(0xFFFD);
    for (uint32_t a = 33; a < 127; a++) {
        assert_memory_not_equal(mt_glyph_rows(a), none, MT_GLYPH_HIGH);
        for (uint32_t b = 32; b < a; b++)
            if (!((a == 'O' && b == '0')))
                assert_memory_not_equal(mt_glyph_rows(a), mt_glyph_rows(b), MT_GLYPH_HIGH);
    }
    const uint32_t signs[] = {0xB0, 0xB1,  0xB2,  0xB3,  0xB5,   0xB7,   0xB9,
                              0xD7, 0x3BB, 0x3BC, 0x3C6, 0x2013, 0x207B, 0x2212};
    for (size_t i = 0; i < sizeof signs / sizeof *signs; i++)
        assert_memory_not_equal(mt_glyph_rows(signs[i]), none, MT_GLYPH_HIGH);
    const char *text = "a\xC2\xB5\xE2\x88\x92\xF0\x9F\x98\x80\xC2z\xE2\x88";
    const uint32_t want[] = {'a', 0xB5, 0x2212, 0x1F600, 0xFFFD, 'z', 0xFFFD, 0xFFFD};
    assert_int_equal(mt_glyph_count(text), 8);
    for (int i = 0; i < 8; i++) assert_int_equal(mt_glyph_next(&text), want[i]);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_bare_cells),      cmocka_unit_test(test_sections),
        cmocka_unit_test(test_automatic_scale), cmocka_unit_test(test_bar_length),
        cmocka_unit_test(test_odd_requests),    cmocka_unit_test(test_refused),
        cmocka_unit_test(test_allocations),     cmocka_unit_test(test_glyphs),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
