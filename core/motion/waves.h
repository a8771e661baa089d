/* The response of formulas to waves about a homogeneous state. Internal to core/motion. */
#ifndef MT_MOTION_WAVES_H
#define MT_MOTION_WAVES_H

#include <complex.h>
#undef complex /* a word of mt_spectrum */

#include "core/motion/model_inside.h"

typedef double _Complex mt_complex;

typedef struct mt_waves {
    mt_model *m;
    const double *mean; /* of all the model's fields; borrowed */
    double time;
    int n;               /* moving fields that have such a formula */
    int *field;          /* their numbers */
    const mt_expr **row; /* and formulas: right-hand side, or potential */
} mt_waves;

/* Derives the model and sets its params to their values at `time`. End also after a failure. */
mt_status mt_waves_begin(mt_waves *x, mt_model *m, bool potentials, const double mean[], double time,
                         mt_error *err);
void mt_waves_end(mt_waves *x);

/* a[i * n + j]: amplitude of formula i for a wave exp(i k x) of unit amplitude in field j. */
mt_status mt_wave_matrix(const mt_waves *x, const double k[3], mt_complex *a, mt_error *err);

#endif
