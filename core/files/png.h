/* PNG files through libpng: 8-bit RGB written, grey levels read. */
#ifndef MT_FILES_PNG_H
#define MT_FILES_PNG_H

#include "core/files/folder.h"

#define MT_PNG_MOST 32768 /* most pixels along a side that are read or written */

/* rgb: height rows of width pixels of 3 bytes, the top row first. comment: kept in the file as "Description",
 * or NULL. Written whole or not at all. */
MT_API mt_status mt_png_write(const mt_folder *folder, const char *name, int width, int height,
                              const uint8_t *rgb, const char *comment, mt_error *err) MT_MUST_USE;

typedef struct mt_image {
    int width, height; /* pixels */
    int bits;          /* per sample, as stored: 1, 2, 4, 8 or 16 */
    bool colour;       /* was RGB or palette; `grey` is then luminance */
    double *grey;      /* row-major, in [0, 1], the bottom row first (origin lower left, as everywhere) */
} mt_image;

/* Grey (1 to 16 bit), RGB and palette pictures. Grey levels are the stored numbers over their maximum,
 * without gamma; colours become 0.2126 R + 0.7152 G + 0.0722 B of the stored numbers (the weights of ITU-R
 * BT.709). Transparency is ignored. EFORMAT for what is not such a picture; EINPUT for sides over MT_PNG_MOST
 * or when the picture would take more than `most` bytes, 8 per pixel (0: no limit), before memory is taken.
 */
MT_API mt_status mt_png_read(mt_image *out, const mt_folder *folder, const char *name, size_t most,
                             mt_error *err) MT_MUST_USE;

MT_API void mt_image_free(mt_image *image); /* the pixels; the struct is the caller's */

#endif
