/* A picture of a field: coloured cells with a frame, a title line, a length bar and a colour key, as PNG.
 *
 * The origin is at the lower left as in a graph: x to the right, y upwards (row 0 at the bottom). A field on
 * one axis is drawn as a band. Of a 3-D field a section is drawn: across z, x to the right and y upwards;
 * across y, x to the right and z upwards; across x, y to the right and z upwards. Cells become squares of
 * `scale` pixels. Values that are NaN are magenta, which no map contains; values beyond the limits take the
 * end colours. */
#ifndef MT_FILES_PICTURE_H
#define MT_FILES_PICTURE_H

#include "core/files/colour.h"
#include "core/files/folder.h"

typedef struct mt_picture {
    mt_map map;
    double low, high; /* limits of the colours; NaN: least and greatest finite value of the section */
    int scale;        /* pixels per cell, 1 .. 64; 0: such that the longer side has at least 512 */
    int axis;         /* 3-D: axis the section is taken across, 0, 1 or 2 */
    int index;        /* 3-D: cell along that axis, from 0; -1: the middle */
    bool bare;        /* the cells alone, no frame, title, bar or key */
    double spacing;   /* length of a cell for the bar, m when `metres`, else a plain number; 0: no bar. The
                         section   must have the same spacing along both its axes for a bar to be true */
    bool metres;
    const char *title; /* UTF-8, for example "first ageing, 3.2 h"; NULL: none. Over 60 letters it may be cut
                          with "..." */
    const char *quantity; /* above the key, for example "x" or "c [1]"; NULL: none */
} mt_picture;

/* Defaults: slate, automatic limits and scale, middle section across z, no bar, no title. */
MT_API mt_picture mt_picture_default(void);

/* The canvas: rgb is width * height * 3 bytes, the top row first, to be freed with mt_free. dim, n: cells
 * along x, y, z; values row-major, x fastest. EINPUT for options out of range or a picture over MT_PNG_MOST
 * pixels a side. */
MT_API mt_status mt_picture_draw(const mt_picture *picture, int dim, const int n[], const double *values,
                                 int *width, int *height, uint8_t **rgb, mt_error *err) MT_MUST_USE;

/* mt_picture_draw, written as PNG; the title goes into the file as its description. */
MT_API mt_status mt_picture_write(const mt_picture *picture, const mt_folder *folder, const char *name,
                                  int dim, const int n[], const double *values, mt_error *err) MT_MUST_USE;

#endif
