/* How the spectrum of a grid is stored.
 *
 * Definition (the scale is part of the contract):
 *   u(x) = sum over modes of  u^_m * product over axes of  exp(i k x) (periodic) | cos(k x) (mirror, even) |
 *   sin(k x) (mirror, odd),  x measured from the centre of the first cell on periodic axes and from the wall
 * on mirror axes, k = mt_grid_wavenumber(axis, m). So the mean of an even array is its mode 0. Index m of a
 * mirror axis means the same wavenumber for both parities (odd arrays have 0 at m = 0; the sine mode n is
 * projected out). The Nyquist mode m = n/2 of an even-sized periodic axis is projected out: it is always
 * stored as 0.
 *
 * Layout: the slowest axis with n > 1 (axis 0 if none) is the *outer* axis, the others are *inner*. A
 * spectral array is stored column after column: column j belongs to one combination of inner modes and holds
 * `length` consecutive values along the outer modes, complex (re, im interleaved) or real; column j starts at
 * double j * stride. Between the two sweeps data are *mixed*: transformed along the inner axes only, in "work
 * arrays" whose inside nobody but the sweeps looks at.
 *
 * If any axis of more than one cell is periodic, spectral values are complex; one such axis, the first that
 * is transformed (x before y before z), is kept half: modes 0 .. n/2. Otherwise values are real. */
#ifndef MT_SPACE_SPECTRUM_H
#define MT_SPACE_SPECTRUM_H

#include "core/space/grid.h"

/* Bit a set: the array is odd about the walls of axis a. Only bits of mirror axes may be set. */
typedef unsigned mt_parities;

typedef struct mt_spectrum {
    const mt_grid *grid; /* kept alive by the owner of the spectrum */
    bool complex;        /* spectral values are complex */
    int outer;           /* outer axis */
    int half;            /* axis kept half, -1 if all axes are mirror */
    int modes[3];        /* stored modes along each axis (n, or n/2 + 1 on the half axis) */
    size_t columns;      /* number of columns = product of modes of the inner axes */
    int length;          /* modes[outer] */
    size_t stride;       /* doubles from column to column, a multiple of 8 */
    size_t doubles;      /* doubles of a spectral array */
    double *k[3];        /* k[axis][m], m < modes[axis]: wavenumber (rad per length) */
    /* weight[axis][m]: mean(u^2) = sum of |u^_m|^2 times the product of weights: half axis 1 at m = 0 and 2
     * above; other periodic axes 1; mirror 1 at m = 0 and 1/2 above. Odd arrays have 0 at mode 0, so the
     * weights hold for them too. */
    double *weight[3];
} mt_spectrum;

/* Inner mode numbers of column j: modes[a] is set for every axis but the outer, 0 there. */
MT_API void mt_spectrum_column(const mt_spectrum *s, size_t j, int modes[3]);

/* Makes a spectrum that of a real array exactly: values at k and -k that are both stored (mode 0 of the half
 * axis) become complex conjugates. Rounding breaks that symmetry by a little; a broken part is invisible in
 * real space, so a linear growth rate would make it grow without anything to stop it. */
MT_API void mt_spectrum_symmetrise(const mt_spectrum *s, double *spectrum);

#endif
