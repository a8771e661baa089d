#include "core/files/png.h"

#include <png.h>
#include <stdio.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/files/atomic.h"

/* libpng reports an error by a jump to where setjmp was called. Each function here that calls setjmp
 * therefore keeps all its state in a struct of the caller, changes no local variable after setjmp, and does
 * nothing else; what libpng calls back only notes failures in the struct. */

enum { FILE_MOST = 1 << 28 }; /* bytes of a PNG file that are read */
#define IMAGE_MOST ((size_t)1 << 31)

typedef struct work {
    png_structp png;
    png_infop info;
    bool no_memory;
    char trouble[120]; /* libpng's own words */
    const char *path;
    mt_error *err;
    mt_status status; /* of our own calls; MT_OK when the trouble is libpng's */
    /* writing */
    mt_atomic *file;
    int width, height;
    const uint8_t *rgb;
    const char *comment;
    /* reading */
    const char *at;
    size_t left, most, file_size;
    mt_image *image;
} work;

static void on_error(png_structp png, png_const_charp text) {
    work *w = png_get_error_ptr(png);
    snprintf(w->trouble, sizeof w->trouble, "%s", text);
    png_longjmp(png, 1);
}

static void on_warning(png_structp png, png_const_charp text) {
    (void)png;
    (void)text;
}

static png_voidp on_alloc(png_structp png, png_alloc_size_t n) {
    work *w = png_get_mem_ptr(png);
    void *block = mt_alloc(n, 1);
    if (!block) w->no_memory = true;
    return block;
}

static void on_free(png_structp png, png_voidp block) {
    (void)png;
    mt_free(block);
}

/* The status of a failed run, whoever failed. */
static mt_status outcome(work *w, mt_status otherwise, const char *advice) {
    if (w->status) return w->status;
    if (w->no_memory) return mt_fail(w->err, MT_ENOMEM, "no memory for the picture %s", w->path);
    return mt_fail(w->err, otherwise, "%s: %s%s%s", w->path, advice, *w->trouble ? ": " : "", w->trouble);
}

/* ---- writing ---- */

static void on_write(png_structp png, png_bytep bytes, png_size_t n) {
    work *w = png_get_io_ptr(png);
    w->status = mt_atomic_write(w->file, bytes, n, w->err);
    if (w->status) png_error(png, "write");
}

static void on_flush(png_structp png) {
    (void)png;
}

static void set_comment(work *w) {
    char key[] = "Description";
    png_text entry;
    memset(&entry, 0, sizeof entry);
    entry.compression = PNG_ITXT_COMPRESSION_NONE;
    entry.key = key;
    entry.text = (char *)(uintptr_t)w->comment; /* libpng copies it */
    entry.itxt_length = strlen(w->comment);
    png_set_text(w->png, w->info, &entry, 1);
}

static bool write_all(work *w) {
    if (setjmp(png_jmpbuf(w->png))) return false;
    png_set_write_fn(w->png, w, on_write, on_flush);
    png_set_IHDR(w->png, w->info, (png_uint_32)w->width, (png_uint_32)w->height, 8, PNG_COLOR_TYPE_RGB,
                 PNG_INTERLACE_NONE, PNG_COMPRESSION_TYPE_DEFAULT, PNG_FILTER_TYPE_DEFAULT);
    png_set_sRGB(w->png, w->info, PNG_sRGB_INTENT_PERCEPTUAL);
    if (w->comment) set_comment(w);
    png_write_info(w->png, w->info);
    for (int y = 0; y < w->height; y++) png_write_row(w->png, w->rgb + (size_t)y * 3 * (size_t)w->width);
    png_write_end(w->png, w->info);
    return true;
}

static mt_status encode(work *w) {
    w->png = png_create_write_struct_2(PNG_LIBPNG_VER_STRING, w, on_error, on_warning, w, on_alloc, on_free);
    if (w->png) w->info = png_create_info_struct(w->png);
    bool good = w->info && write_all(w);
    png_destroy_write_struct(&w->png, &w->info);
    return good && !w->no_memory ? MT_OK : outcome(w, MT_EFILE, "the picture could not be encoded");
}

mt_status mt_png_write(const mt_folder *folder, const char *name, int width, int height, const uint8_t *rgb,
                       const char *comment, mt_error *err) {
    MT_REQUIRE(name && rgb && width >= 1 && width <= MT_PNG_MOST && height >= 1 && height <= MT_PNG_MOST,
               err);
    char path[600];
    mt_folder_describe(folder, name, path, sizeof path);
    work w = {.path = path, .err = err, .width = width, .height = height, .rgb = rgb, .comment = comment};
    mt_status status = mt_atomic_open(&w.file, folder, name, err);
    if (status) return status;
    status = encode(&w);
    if (!status) return mt_atomic_commit(&w.file, err);
    mt_atomic_drop(&w.file);
    return status;
}

/* ---- reading ---- */

static void on_read(png_structp png, png_bytep bytes, png_size_t n) {
    work *w = png_get_io_ptr(png);
    if (n > w->left) png_error(png, "the file ends too early");
    memcpy(bytes, w->at, n);
    w->at += n;
    w->left -= n;
}

/* Bytes of a pixel after the transformations asked for in read_info. */
static size_t pixel_size(const mt_image *image) {
    return (image->bits == 16 ? 2u : 1u) * (image->colour ? 3u : 1u);
}

static bool read_info(work *w) {
    if (setjmp(png_jmpbuf(w->png))) return false;
    png_set_read_fn(w->png, w, on_read);
    png_set_user_limits(w->png, MT_PNG_MOST, MT_PNG_MOST);
    png_set_chunk_malloc_max(w->png, 1 << 22);
    png_set_keep_unknown_chunks(w->png, PNG_HANDLE_CHUNK_NEVER, NULL,
                                -1); /* nothing beside size, palette, pixels */
    png_read_info(w->png, w->info);
    int kind = png_get_color_type(w->png, w->info);
    w->image->width = (int)png_get_image_width(w->png, w->info);
    w->image->height = (int)png_get_image_height(w->png, w->info);
    w->image->bits = png_get_bit_depth(w->png, w->info);
    w->image->colour = kind & PNG_COLOR_MASK_COLOR;
    if (kind == PNG_COLOR_TYPE_PALETTE) png_set_palette_to_rgb(w->png);
    if (kind == PNG_COLOR_TYPE_GRAY && w->image->bits < 8) png_set_expand_gray_1_2_4_to_8(w->png);
    if (kind & PNG_COLOR_MASK_ALPHA) png_set_strip_alpha(w->png);
    png_set_interlace_handling(w->png);
    png_read_update_info(w->png, w->info);
    return true;
}

/* Refuses a size before memory is taken: deflate packs at most 1032 to 1 (RFC 1951 allows no more), so a file
 * that claims more pixels than that is a forgery or cut off. */
static mt_status check_size(work *w) {
    mt_image *m = w->image;
    size_t row = png_get_rowbytes(w->png, w->info), pixels = (size_t)m->width * (size_t)m->height;
    if (row != pixel_size(m) * (size_t)m->width)
        return mt_fail(w->err, MT_EFORMAT,
                       "%s: a kind of PNG picture that is not read: save it as grey or RGB", w->path);
    size_t bits = m->colour && m->bits < 8 ? (size_t)m->bits
                                           : 8 * pixel_size(m) / (m->bits < 8 ? 8 / (size_t)m->bits : 1);
    if (pixels / 8 * bits / 1040 > w->file_size)
        return mt_fail(w->err, MT_EFORMAT,
                       "%s claims %d x %d pixels but is far too short for them: it is cut off", w->path,
                       m->width, m->height);
    size_t most = w->most ? w->most : IMAGE_MOST;
    if (pixels <= most / sizeof(double)) return MT_OK;
    return mt_fail(w->err, MT_EINPUT,
                   "%s: its %d x %d pixels need %.4g MB of memory, allowed are %.4g MB: make it smaller",
                   w->path, m->width, m->height, 8e-6 * (double)pixels, 1e-6 * (double)most);
}

/* The pixels go into the end of the block, the bottom row first, and are widened in place (see npy.c). */
static unsigned char *stored(const mt_image *m) {
    return (unsigned char *)m->grey + (sizeof(double) - pixel_size(m)) * (size_t)m->width * (size_t)m->height;
}

static bool read_rows(work *w, int passes) {
    if (setjmp(png_jmpbuf(w->png))) return false;
    const mt_image *m = w->image;
    size_t row = pixel_size(m) * (size_t)m->width;
    for (int pass = 0; pass < passes; pass++)
        for (int y = m->height - 1; y >= 0; y--) png_read_row(w->png, stored(m) + (size_t)y * row, NULL);
    png_read_end(w->png, NULL);
    return true;
}

static double sample(const unsigned char *p, int bits) {
    return bits == 16 ? (p[0] * 256 + p[1]) / 65535.0 : p[0] / 255.0;
}

static void widen(mt_image *m) {
    size_t size = pixel_size(m), one = m->bits == 16 ? 2 : 1, count = (size_t)m->width * (size_t)m->height;
    const unsigned char *from = stored(m);
    unsigned char *to = (unsigned char *)m->grey;
    for (size_t k = 0; k < count; k++, from += size) {
        double x = sample(from, m->bits);
        if (m->colour)
            x = 0.2126 * x + 0.7152 * sample(from + one, m->bits) + 0.0722 * sample(from + 2 * one, m->bits);
        memcpy(to + k * sizeof x, &x, sizeof x);
    }
}

static const char not_read[] = "not a readable PNG picture, or a damaged one";

static mt_status decode(work *w) {
    if (!w->info || !read_info(w)) return outcome(w, MT_EFORMAT, not_read);
    mt_status status = check_size(w);
    if (status) return status;
    size_t pixels = (size_t)w->image->width * (size_t)w->image->height;
    status = mt_new(&w->image->grey, pixels, sizeof(double), w->path, w->err);
    if (status) return status;
    if (!read_rows(w, png_get_interlace_type(w->png, w->info) == PNG_INTERLACE_ADAM7 ? 7 : 1))
        return outcome(w, MT_EFORMAT, not_read);
    widen(w->image);
    return MT_OK;
}

mt_status mt_png_read(mt_image *out, const mt_folder *folder, const char *name, size_t most, mt_error *err) {
    MT_REQUIRE(out && name, err);
    char path[600], *bytes = NULL;
    size_t n;
    *out = (mt_image){0};
    mt_status status = mt_folder_read(folder, name, FILE_MOST, &bytes, &n, err);
    if (status) return status;
    mt_folder_describe(folder, name, path, sizeof path);
    work w = {.path = path, .err = err, .at = bytes, .left = n, .file_size = n, .most = most, .image = out};
    w.png = png_create_read_struct_2(PNG_LIBPNG_VER_STRING, &w, on_error, on_warning, &w, on_alloc, on_free);
    if (w.png) w.info = png_create_info_struct(w.png);
    status = decode(&w);
    png_destroy_read_struct(&w.png, &w.info, NULL);
    mt_free(bytes);
    if (status) mt_image_free(out);
    return status;
}

void mt_image_free(mt_image *image) {
    if (!image) return;
    mt_free(image->grey);
    *image = (mt_image){0};
}
