/* Colour maps of our own, built in OKLab (Ottosson 2020, "A perceptual color space for image processing")
 * from a few control points each: hue and chroma are interpolated, lightness (CIELAB L*) is a straight line,
 * so that equal steps of the value are equal steps of lightness, in grey print and for colour-blind readers
 * too. */
#ifndef MT_FILES_COLOUR_H
#define MT_FILES_COLOUR_H

#include "core/base/error.h"

typedef enum mt_map {
    MT_MAP_SLATE, /* dark blue-grey to pale sand; the default */
    MT_MAP_EMBER, /* near black through red and orange to pale yellow */
    MT_MAP_FERN,  /* dark green to pale yellow-green */
    MT_MAP_TIDE,  /* diverging: blue, near white in the middle, brown-orange; lightness the same on both sides
                   */
    MT_MAP_GREY,
    MT_MAP_COUNT
} mt_map;

MT_API const char *mt_map_name(mt_map map); /* "slate", "ember", "fern", "tide", "grey" */

/* EINPUT, listing the names, when there is none of that name. */
MT_API mt_status mt_map_find(const char *name, mt_map *map, mt_error *err) MT_MUST_USE;

/* The map's 256 colours, sRGB bytes, lowest value first. About 50 microseconds. */
MT_API void mt_map_colours(mt_map map, uint8_t rgb[256][3]);

#endif
