/* The structure factor and the lengths read from it.
 *
 * S(k) = h^d |FT(c - mean)|^2 / N for each mode, a volume: (1/V) times the sum over all modes is the variance
 * of c. On mirror axes the modes are cosines of k = pi m / L; each counts once with S = V w |a|^2, w = 1/2
 * for m > 0, which keeps that sum rule and the density of modes in k. Averages over shells of width 2 pi / L,
 * L the longest side of the box; shell i holds (i - 1/2) to (i + 1/2) widths and its k is the mean k of its
 * modes. Shells beyond the shortest Nyquist wavenumber are left out (corners of the spectrum are sampled
 * unevenly). */
#ifndef MT_MEASURE_STRUCTURE_H
#define MT_MEASURE_STRUCTURE_H

#include "core/space/sweep.h"

typedef struct mt_structure {
    int shells;
    double *k, *s;     /* [shells]: mean wavenumber (rad/m), mean S (m^d); k = 0 is left out */
    double *modes;     /* [shells]: modes in the shell; shells without any have S = 0 */
    double first;      /* k1 = sum k S / sum S over shells, both shell-averaged: first moment */
    double wavelength; /* 2 pi / k1, a characteristic length; NaN for a field without variance */
    double peak; /* wavelength of the peak: parabola in log S through the highest shell and its neighbours */
    double variance; /* from the sum over all modes */
} mt_structure;

/* a: the field on the sweeper's grid. Takes two spectral arrays of memory while it works. */
MT_API mt_status mt_structure_of(mt_sweeper *sweeper, const double *a, mt_structure *out,
                                 mt_error *err) MT_MUST_USE;
MT_API void mt_structure_free(mt_structure *s);

#endif
