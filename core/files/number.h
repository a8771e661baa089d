/* Numbers as text, for files (exact) and for people (short). */
#ifndef MT_FILES_NUMBER_H
#define MT_FILES_NUMBER_H

#include "core/base/base.h"

#define MT_NUMBER_ROOM 40

/* The fewest digits (15, 16 or 17) that read back as the same double; "nan", "inf", "-inf". Always with a '.'
 * for the decimal point, whatever the locale. Returns the length. */
MT_API int mt_number_exact(double x, char text[MT_NUMBER_ROOM]);

/* Reads one number as mt_number_exact writes it: decimal, the whole of text[0 .. n-1] apart from blanks
 * around. False when it is none. Independent of the locale. */
MT_API bool mt_number_read(const char *text, size_t n, double *x);

/* Largest of 1, 2, 5 times a power of ten that is not above x (x > 0). */
MT_API double mt_number_round_down(double x);

/* Ticks at 1-2-5 steps within [low, high], about `wanted` of them: the first, the step; returns their number
 * (0 when low < high does not hold or the step is below the spacing of doubles there). */
MT_API int mt_number_ticks(double low, double high, int wanted, double *first, double *step);

/* A tick with the digits its step needs: "0.25", "-3", "1.5e-05". */
MT_API void mt_number_tick(double x, double step, char text[MT_NUMBER_ROOM]);

/* A length with pm, nm, um (as the micro sign), mm, m: "50 nm". */
MT_API void mt_number_length(double metres, char text[MT_NUMBER_ROOM]);

/* A time with s, min, h, d, or us and ms below: "3.2 h". */
MT_API void mt_number_time(double seconds, char text[MT_NUMBER_ROOM]);

#endif
