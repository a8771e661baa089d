/* The modes of a field one by one, as the structure factor counts them. */
#ifndef MT_MEASURE_MODES_INSIDE_H
#define MT_MEASURE_MODES_INSIDE_H

#include "core/space/sweep.h"

/* k: wavenumbers, not negative along mirror axes (where a cosine holds both signs); s: S of the mode; count:
 * 2 where the mode stands for its opposite too. */
typedef void (*mt_mode_visit)(void *ctx, const double k[3], double s, double count);

/* Calls visit for all modes but k = 0 and the Nyquist modes, in storage order. ENOMEM (16 bytes per cell
 * while it works). */
mt_status mt_modes_visit(mt_sweeper *sweeper, const double *a, mt_mode_visit visit, void *ctx,
                         mt_error *err) MT_MUST_USE;

/* Shells of width 2 pi / L below the smallest Nyquist wavenumber (structure.h), at least one. */
void mt_shells_of(const mt_grid *g, int *shells, double *width);

/* Shell of k: cosine modes lie on the bounds of shells; the small term keeps rounding from choosing sides. */
int mt_shell_of(double k, double width);

#endif
