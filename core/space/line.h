/* Transforms of single lines along one axis, from one contiguous buffer to another, with the conventions of
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

/* Doubles of a buffer for one line, a multiple of 8. Of real data only the first n are touched, of HALF modes
 * only the first 2 modes. */
size_t mt_line_room(const mt_line *line);

/* aligned: all buffers will start at multiples of 16 bytes. FFTW's planner is not thread-safe, so planning
 * and freeing are serialised here. Fails with ENOMEM or ESYSTEM; the line may be freed then too. */
mt_status mt_line_plan(mt_line *line, mt_line_kind kind, int n, bool complex, bool aligned,
                       mt_error *err) MT_MUST_USE;
void mt_line_free(mt_line *line);

/* forward: n values -> modes values, inverse: back. `from` is spent and does not overlap `to`. The Nyquist
 * mode and the forbidden sine modes are projected out both ways. */
void mt_line_forward(const mt_line *line, bool odd, double *from, double *to);
void mt_line_inverse(const mt_line *line, bool odd, double *from, double *to);

#endif
