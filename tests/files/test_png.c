/* Proved: what is written is read back by libpng's own simplified reader and by ours; every kind of grey, RGB
 * and palette picture is read with the right levels; cut or damaged files and absurd sizes are refused
 * without harm. */
#include "scratch.h"

#include <png.h>

#include "core/files/png.h"

enum { W = 7, H = 5 };

static void make_rgb(uint8_t *rgb) {
    for (int i = 0; i < W * H * 3; i++) rgb[i] = (uint8_t)(i * 37 + 11);
}

static void test_written_pixels(void **state) {
    (void)state;
    mt_error err = {0};
    uint8_t rgb[W * H * 3], back[W * H * 3];
    make_rgb(rgb);
    check_ok(mt_png_write(NULL, "a.png", W, H, rgb, "stage 1, 2 \xC2\xB5s", &err), &err);
    png_image image = {.version = PNG_IMAGE_VERSION};
    assert_true(png_image_begin_read_from_file(&image, "a.png"));
    assert_int_equal(image.width, W);
    assert_int_equal(image.height, H);
    image.format = PNG_FORMAT_RGB;
    assert_true(png_image_finish_read(&image, NULL, back, 0, NULL));
    assert_memory_equal(back, rgb, sizeof rgb);
    size_t n = 0;
    char *b = slurp("a.png", &n);
    assert_non_null(memmem(b, n, "Description", 11));
    assert_non_null(memmem(b, n, "stage 1, 2 \xC2\xB5s", 13));
    free(b);
}

/* Weights of ITU-R BT.709; our rows start at the bottom. */
static void test_luminance(void **state) {
    (void)state;
    mt_error err = {0};
    mt_image m;
    uint8_t rgb[W * H * 3];
    make_rgb(rgb);
    check_ok(mt_png_write(NULL, "l.png", W, H, rgb, NULL, &err), &err);
    check_ok(mt_png_read(&m, NULL, "l.png", 0, &err), &err);
    assert_true(m.width == W && m.height == H && m.bits == 8 && m.colour);
    for (int y = 0; y < H; y++)
        for (int x = 0; x < W; x++) {
            const uint8_t *p = rgb + 3 * (y * W + x);
            check_close(m.grey[(H - 1 - y) * W + x], (0.2126 * p[0] + 0.7152 * p[1] + 0.0722 * p[2]) / 255,
                        1e-14, 0);
        }
    mt_image_free(&m);
    assert_int_equal(mt_png_read(&m, NULL, "l.png", W * H * 8 - 1, &err), MT_EINPUT);
    assert_null(m.grey);
}

/* A file straight from libpng: sample k of the picture has the level k modulo 2^bits, packed as PNG packs. */
static void write_kind(const char *name, int kind, int bits, int interlace) {
    FILE *f = fopen(name, "wb");
    png_structp png = png_create_write_struct(PNG_LIBPNG_VER_STRING, NULL, NULL, NULL);
    png_infop info = png_create_info_struct(png);
    png_color palette[256];
    uint8_t rows[H][W * 8] = {{0}};
    int channels = kind == PNG_COLOR_TYPE_GRAY_ALPHA ? 2 : kind == PNG_COLOR_TYPE_RGB_ALPHA ? 4 : 1;
    for (int i = 0; i < 256; i++)
        palette[i] = (png_color){(png_byte)i, (png_byte)(255 - i), (png_byte)(i / 2)};
    for (int k = 0; k < W * H * channels; k++) {
        int y = k / (W * channels), x = k % (W * channels), level = (k * 41) & ((1 << bits) - 1),
            at = x * bits;
        if (bits == 16) rows[y][at / 8] = (uint8_t)(level >> 8), rows[y][at / 8 + 1] = (uint8_t)level;
        if (bits <= 8) rows[y][at / 8] |= (uint8_t)(level << (8 - bits - at % 8));
    }
    png_init_io(png, f);
    png_set_IHDR(png, info, W, H, bits, kind, interlace, 0, 0);
    if (kind == PNG_COLOR_TYPE_PALETTE) png_set_PLTE(png, info, palette, 1 << bits);
    png_bytep row[H];
    for (int y = 0; y < H; y++) row[y] = rows[y];
    png_set_rows(png, info, row);
    png_write_png(png, info, PNG_TRANSFORM_IDENTITY, NULL);
    png_destroy_write_struct(&png, &info);
    fclose(f);
}

static double expected(int kind, int bits, int k, int channels) {
    int most = (1 << bits) - 1, a = (k * channels * 41) & most;
    if (kind == PNG_COLOR_TYPE_PALETTE) return (0.2126 * a + 0.7152 * (255 - a) + 0.0722 * (a / 2)) / 255;
    if (kind == PNG_COLOR_TYPE_GRAY || kind == PNG_COLOR_TYPE_GRAY_ALPHA) return (double)a / most;
    int b = ((k * channels + 1) * 41) & most, c = ((k * channels + 2) * 41) & most;
    return (0.2126 * a + 0.7152 * b + 0.0722 * c) / most;
}

static void test_kinds(void **state) {
    (void)state;
    const struct {
        int kind, bits, channels;
    } cases[] = {{PNG_COLOR_TYPE_GRAY, 1, 1},        {PNG_COLOR_TYPE_GRAY, 2, 1},
                 {PNG_COLOR_TYPE_GRAY, 4, 1},        {PNG_COLOR_TYPE_GRAY, 8, 1},
                 {PNG_COLOR_TYPE_GRAY, 16, 1},       {PNG_COLOR_TYPE_GRAY_ALPHA, 8, 2},
                 {PNG_COLOR_TYPE_GRAY_ALPHA, 16, 2}, {PNG_COLOR_TYPE_RGB_ALPHA, 8, 4},
                 {PNG_COLOR_TYPE_RGB_ALPHA, 16, 4},  {PNG_COLOR_TYPE_PALETTE, 1, 1},
                 {PNG_COLOR_TYPE_PALETTE, 4, 1},     {PNG_COLOR_TYPE_PALETTE, 8, 1}};
    for (size_t i = 0; i < 2 * sizeof cases / sizeof *cases; i++) {
        int kind = cases[i / 2].kind, bits = cases[i / 2].bits, channels = cases[i / 2].channels;
        mt_error err = {0};
        mt_image m;
        write_kind("k.png", kind, bits, i % 2 ? PNG_INTERLACE_ADAM7 : PNG_INTERLACE_NONE);
        check_ok(mt_png_read(&m, NULL, "k.png", 0, &err), &err);
        assert_true(m.width == W && m.height == H && m.bits == bits);
        for (int k = 0; k < W * H; k++)
            check_close(m.grey[(H - 1 - k / W) * W + k % W], expected(kind, bits, k, channels), 1e-14, 0);
        mt_image_free(&m);
    }
}

static void test_cut_anywhere(void **state) {
    (void)state;
    size_t n = 0;
    write_kind("c.png", PNG_COLOR_TYPE_GRAY, 16, PNG_INTERLACE_NONE);
    char *b = slurp("c.png", &n);
    for (size_t k = 0; k < n; k++) {
        mt_image m;
        mt_error err = {0};
        spill("c.png", b, k);
        assert_int_equal(mt_png_read(&m, NULL, "c.png", 0, &err), MT_EFORMAT);
        assert_null(m.grey);
        assert_non_null(strstr(err.text, "c.png"));
    }
    free(b);
}

static void test_every_byte_damaged(void **state) {
    (void)state;
    const int kinds[] = {PNG_COLOR_TYPE_GRAY, PNG_COLOR_TYPE_PALETTE, PNG_COLOR_TYPE_RGB_ALPHA};
    for (int i = 0; i < 3; i++) {
        size_t n = 0, blocks = mt_memory_blocks();
        write_kind("d.png", kinds[i], i == 1 ? 4 : 8, i == 2 ? PNG_INTERLACE_ADAM7 : PNG_INTERLACE_NONE);
        char *b = slurp("d.png", &n);
        for (size_t k = 0; k < n; k++)
            for (int bit = 0; bit < 8; bit += 3) {
                mt_image m;
                b[k] = (char)(b[k] ^ 1 << bit);
                spill("d.png", b, n);
                mt_status status = mt_png_read(&m, NULL, "d.png", 1 << 20, NULL);
                assert_true(status == MT_OK || status == MT_EFORMAT || status == MT_EINPUT);
                mt_image_free(&m);
                b[k] = (char)(b[k] ^ 1 << bit);
            }
        free(b);
        assert_int_equal(mt_memory_blocks(), blocks);
    }
}

static void put32(uint8_t *p, uint32_t x) {
    for (int i = 0; i < 4; i++) p[i] = (uint8_t)(x >> (24 - 8 * i));
}

/* CRC-32 as in the PNG specification, annex D. */
static uint32_t crc(const uint8_t *p, size_t n) {
    uint32_t c = 0xFFFFFFFFu;
    for (; n--; p++) {
        c ^= *p;
        for (int i = 0; i < 8; i++) c = c & 1 ? 0xEDB88320u ^ c >> 1 : c >> 1;
    }
    return ~c;
}

static void test_absurd_size(void **state) {
    (void)state;
    const uint32_t sides[][2] = {
        {30000, 30000}, {0x7fffffff, 0x7fffffff}, {40000, 1}, {0, 5}, {0xffffffff, 1}};
    size_t n = 0;
    write_kind("s.png", PNG_COLOR_TYPE_GRAY, 8, PNG_INTERLACE_NONE);
    uint8_t *b = (uint8_t *)slurp("s.png", &n);
    for (int i = 0; i < 5; i++) {
        mt_image m;
        put32(b + 16, sides[i][0]);
        put32(b + 20, sides[i][1]);
        put32(b + 29, crc(b + 12, 17));
        spill("s.png", b, n);
        mt_memory_reset_peak();
        size_t before = mt_memory_peak();
        assert_int_equal(mt_png_read(&m, NULL, "s.png", 0, NULL), MT_EFORMAT);
        assert_true(mt_memory_peak() - before < 1 << 20);
    }
    free(b);
}

static mt_status body(void *ctx, mt_error *err) {
    mt_image m = {0};
    mt_status status = mt_png_write(NULL, "b.png", W, H, ctx, "words", err);
    if (!status) status = mt_png_read(&m, NULL, "b.png", 0, err);
    mt_image_free(&m);
    return status;
}

static void test_allocations(void **state) {
    (void)state;
    uint8_t rgb[W * H * 3];
    make_rgb(rgb);
    check_allocation_sweep(body, rgb);
}

static uint8_t big[300 * 300 * 3];
static void remove_w(void) {
    unlink("w.png");
}
static mt_status write_big(mt_error *err) {
    return mt_png_write(NULL, "w.png", 300, 300, big, NULL, err);
}
static void readable_or_absent(bool failed) {
    mt_image m;
    mt_status status = mt_png_read(&m, NULL, "w.png", 0, NULL);
    assert_true(status == MT_OK || (failed && status == MT_EFILE));
    mt_image_free(&m);
}

static void test_failing_calls(void **state) {
    (void)state;
#ifdef MT_TINY_LIMITS
    const int side = 300 * 3; /* a seven-byte buffer makes thousands of calls: one row's worth will do */
#else
    const int side = 300 * 300 * 3;
#endif
    uint32_t q = 1;
    for (int i = 0; i < side; i++) big[i] = (uint8_t)((q = q * 1664525u + 1013904223u) >> 24);
    assert_true(sweep_calls(write_big, remove_w, readable_or_absent) >= 6);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_written_pixels),
        cmocka_unit_test(test_luminance),
        cmocka_unit_test(test_kinds),
        cmocka_unit_test(test_cut_anywhere),
        cmocka_unit_test(test_every_byte_damaged),
        cmocka_unit_test(test_absurd_size),
        cmocka_unit_test(test_allocations),
        cmocka_unit_test(test_failing_calls),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
