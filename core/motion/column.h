/* What the steppers share inside a column sweep: places in a worker's scratch, factors along the column,
 * right-hand sides, the quadratic part of the energy. Internal to core/motion. */
#ifndef MT_MOTION_COLUMN_H
#define MT_MOTION_COLUMN_H

#include "core/motion/model_inside.h"

/* Lines of one double per double of the column (twice its length where values are complex). */
enum {
    MT_LINE_L,
    MT_LINE_LAMBDA,
    MT_LINE_MIDDLE,
    MT_LINE_CROSS,
    MT_LINE_INVERSE, /* 1 / (a0 - dt Lambda) */
    MT_LINE_FILTER,  /* of the error */
    MT_LINE_L2,      /* the partner's */
    MT_LINE_LAMBDA2,
    MT_LINE_MIDDLE2,
    MT_LINE_CROSS2,
    MT_LINE_INVERSE2,
    MT_LINE_FILTER2,
    MT_LINE_WEIGHT,
    MT_LINE_SPARE,
    MT_LINES
};

typedef struct mt_lines {
    size_t doubles; /* of the column */
    size_t line;    /* from line to line */
    double *at[MT_LINES];
    double *rhs; /* R of mover i at rhs + i * line */
    double *middle,
        *middle_scratch; /* L in the middle of the step, as factor lines; and their kernel's room */
    double *factors;     /* factor lines of the last sweep */
} mt_lines;

size_t mt_column_doubles(const mt_model *m); /* per worker: what mt_column_lines lays out */

/* Lays out the scratch of a worker, evaluates the factors and the weights of this column. */
mt_lines mt_column_lines(mt_model *m, const mt_column *c, int worker);

/* A factor (number as in mt_mover) with one double per double of the column. */
void mt_column_spread(const mt_program *p, const double *lines, int factor, const mt_column *c, double *to);

/* Right-hand sides without own linear terms, of all movers: before any spectrum of the column is written. */
void mt_column_rhs(const mt_model *m, const mt_column *c, double *const in[], const mt_lines *x);

/* The step's end in a column: the energy's quadratic part of the spectra `next` to the tally, and the
 * quantities of stage 0. */
void mt_column_finish(const mt_model *m, const mt_column *c, double *const in[], double *const next[],
                      const mt_lines *x, double *tally, double *const out[]);

/* Tally of a column: error, change and norm of each mover, then the quadratic energy. */
double *mt_column_tally(const mt_model *m, const mt_column *c);
void mt_column_merge(mt_model *m); /* m->totals, in the order of the columns */

#endif
