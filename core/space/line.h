/* Transforms of single lines along one axis, in place in a contiguous buffer, with the conventions of
 * spectrum.h except that the factor 1/n of periodic axes is left to the caller. Internal to core/space. */
#ifndef MT_SPACE_LINE_H
#define MT_SPACE_LINE_H

#include <fftw3.h>

#include "core/space/spectrum.h"

typedef enum mt_line_kind {
    MT_LINE_NONE,  /* one cell: its value is mode 0 */
    MT_LINE_HALF,  /* periodic, real <-> modes 0 .. n/2 */
    MT_LINE_FULL,  /* periodic, complex <-> complex */
    MT_LINE_MIRROR /* cosines or sines; complex data: real and imaginary part one after the other */
} mt_line_kind;

typedef struct mt_line {
    mt_line_kind kind;
    int n, modes;
    bool complex;                     /* data before the forward transform are complex */
    fftw_plan forward[2], inverse[2]; /* [1]: odd, mirror only */
} mt_line;

/* Doubles of a buffer for one line (multiple of 8; complex MIRROR lines use half of it as scratch). */
size_t mt_line_room(const mt_line *line);

mt_status mt_line_plan(mt_line *line, mt_line_kind kind, int n, bool complex, mt_error *err);
void mt_line_free(mt_line *line);

/* buf: n values -> modes values, and back. Projects the Nyquist mode and the forbidden sine modes out, both
 * ways. */
void mt_line_forward(const mt_line *line, bool odd, double *buf);
void mt_line_inverse(const mt_line *line, bool odd, double *buf);

/* FFTW's planner is not thread-safe: everything that plans holds this lock. */
void mt_plan_lock(void);
void mt_plan_unlock(void);

/* Scale and order of FFTW's cosine and sine lines <-> coefficients, in place (see line.c). */
void mt_mirror_to_modes(int n, bool odd, double *a);
void mt_mirror_from_modes(int n, bool odd, double *a);

#endif
