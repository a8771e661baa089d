/* Arrays as .npy, version 1.0 (the array format of NumPy, an open specification: numpy.lib.format): written
 * as little-endian '<f8', C order, shape (z, y, x), (y, x) or (x,), header padded so that the data start at a
 * multiple of 64 bytes. Read: versions 1.0, 2.0 and 3.0, '<f8' '<f4' '|u1' '<u2' '<i4', converted to double;
 * C order only. */
#ifndef MT_FILES_NPY_H
#define MT_FILES_NPY_H

#include "core/files/folder.h"

typedef struct mt_npy {
    int dim;        /* 1, 2 or 3 */
    int n[3];       /* cells along x, y, z; 1 beyond dim */
    size_t count;   /* n[0] n[1] n[2] */
    char kind[4];   /* as stored: "<f8", ... */
    double *values; /* row-major, x fastest; NULL after mt_npy_look */
} mt_npy;

/* n: dim entries along x, y, z; values: their product, row-major, x fastest. Written whole or not at all. */
MT_API mt_status mt_npy_write(const mt_folder *folder, const char *name, int dim, const int n[],
                              const double *values, mt_error *err) MT_MUST_USE;

/* Header only: shape and kind, and that the file is as long as they say; values stay NULL. Memory that
 * mt_npy_read will take: 8 * count bytes. */
MT_API mt_status mt_npy_look(mt_npy *out, const mt_folder *folder, const char *name,
                             mt_error *err) MT_MUST_USE;

/* EFORMAT, saying what is wrong, for anything that is not such a file: magic, header length, dictionary,
 * kind, order, shape (1 to 3 axes, at least 1 cell, at most 2^31 - 1), length of the file (too short or too
 * long). EINPUT when the values would take more than `most` bytes (0: no limit). The length of the file is
 * compared before memory is taken. */
MT_API mt_status mt_npy_read(mt_npy *out, const mt_folder *folder, const char *name, size_t most,
                             mt_error *err) MT_MUST_USE;

MT_API void mt_npy_free(mt_npy *array); /* the values; the struct is the caller's */

#endif
