/* The structure factor and the lengths read from it.
 *
 * S(k) = h^d |FT(c - mean)|^2 / N for each mode, FT the plain sum over the N cells: a volume (area, length)
 * times c^2, such that (1/V) times the sum over all modes is the variance of c (Parseval). On mirror axes the
 * modes are cosines of k = pi m / L; each counts once with S = V w |a|^2, a its coefficient, w = 1/2
 * per mirror axis with m > 0. That keeps the sum rule, and a shell holds as many modes as in a periodic box
 * of the same side, so S means the same. Modes that the core projects out (Nyquist modes of even periodic
 * axes) are neither summed nor counted.
 *
 * Averages are over shells of width 2 pi / L, L the longest side of the box among axes of more than one cell;
 * shell i (from 1) holds k from (i - 1/2) to (i + 1/2) widths, the lower bound included, and its k is the
 * mean k of its modes. Shells that reach beyond the smallest Nyquist wavenumber pi / h of the axes are left
 * out (corners of the spectrum are sampled unevenly), and so is the mean k = 0. The axes of an unequal box
 * weigh in with the modes they have.
 *
 * Sources: the definition of S and of the first moment k1 = sum k S / sum S is common practice in work on
 * spinodal decomposition (Lebowitz, Marro & Kalos, Acta Metall. 30 (1982) 297; from memory). The moment is of
 * the *shell-averaged* S; the mode-weighted one hangs on the Porod tail k^-(d+1) and so on the grid. */
#ifndef MT_MEASURE_STRUCTURE_H
#define MT_MEASURE_STRUCTURE_H

#include "core/space/sweep.h"

typedef struct mt_structure {
    int shells;
    double *k, *s; /* [shells]: mean wavenumber (rad/m), mean S (m^d); k = 0 is left out */
    double *modes; /* [shells]: modes in the shell */
    double width;  /* of a shell, rad/m */
    double
        first; /* k1 = sum k S / sum S over shells, both shell-averaged: first moment; NaN without variance */
    double wavelength; /* 2 pi / k1, a characteristic length; NaN for a field without variance */
    double second;     /* mean of k^2 over shells, weighted alike: second moment, rad^2/m^2; NaN likewise */
    double deviation;  /* sqrt(second - first^2): how far S spreads in k, rad/m; NaN likewise */
    double peak_k;     /* wavenumber of the peak: see peak */
    double half_width; /* full width of the peak at half the height of the highest shell, by straight lines
                          between shells, rad/m; NaN where S does not fall to the half on both sides */
    double peak; /* wavelength of the peak: parabola in log S through the highest shell and its neighbours;
                    NaN likewise */
    double variance; /* (1/V) times the sum over all modes, also those beyond the last shell */
} mt_structure;

/* S by directions. In an area: `count` sectors, sector i around the angle i pi / count from the x axis, to
 * half of pi / count either way; k and -k are one direction. In a volume: 3 sectors, the directions nearest
 * to x, y and z. A mode on the bound of sectors is shared between them, and a cosine along a mirror axis
 * between the directions of both signs. Shells as above. */
typedef struct mt_sectors {
    int sectors, shells;
    double *k, *s, *modes; /* [sectors * shells] as in mt_structure, sector by sector; S 0 where no mode is */
    double *angle;         /* [sectors] in an area, rad; 0 in a volume */
    double *wavelength;    /* [sectors] 2 pi over the first moment of S over its shells that hold modes; NaN
                              without */
    double *share;     /* [sectors] share of the variance, over all modes; NaN for a field without variance */
    double anisotropy; /* (largest share - smallest) / (largest + smallest): 0 none, 1 one direction only */
    double width;
    double *block;
} mt_sectors;

/* count: of sectors in an area, from 2 to 1000; ignored in a volume. EINPUT in 1-D. ENOMEM as below. */
MT_API mt_status mt_sectors_of(mt_sweeper *sweeper, const double *a, int count, mt_sectors *out,
                               mt_error *err) MT_MUST_USE;
MT_API void mt_sectors_free(mt_sectors *s);

/* a: the field on the sweeper's grid. ENOMEM (one spectral and one work array, about 16 bytes per cell, while
 * it works; 24 bytes per shell stay until freed). */
MT_API mt_status mt_structure_of(mt_sweeper *sweeper, const double *a, mt_structure *out,
                                 mt_error *err) MT_MUST_USE;
MT_API void mt_structure_free(mt_structure *s);

#endif
