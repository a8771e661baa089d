/* A small bitmap font of our own for the lettering of pictures: ASCII, and the few signs that units need
 * (micro, degree, multiplication sign, middle dot, minus, superscript minus and digits). A glyph is 5 dots
 * wide and 9 high: 7 above the base line, 2 below; the pitch is 6 dots. */
#ifndef MT_FILES_GLYPHS_H
#define MT_FILES_GLYPHS_H

#include "core/base/base.h"

#define MT_GLYPH_WIDE 5
#define MT_GLYPH_HIGH 9
#define MT_GLYPH_PITCH 6

/* Takes the next character off a UTF-8 text; a byte that is no UTF-8 counts as one unknown character
 * (0xFFFD). */
uint32_t mt_glyph_next(const char **text);

/* Nine rows, the top first, bit 4 being the leftmost dot. A hollow box for a character the font lacks. */
const uint8_t *mt_glyph_rows(uint32_t code);

/* Characters in a UTF-8 text. */
int mt_glyph_count(const char *text);

#endif
