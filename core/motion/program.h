/* A program: a split compiled to stages that the two sweeps run. Stage s is a row sweep (quantities in,
 * points out, all cell by cell); the column sweep after it forms the quantities of the next stage. The column
 * sweep after the last stage is the stepper's own: it finds there the transformed points and ends by forming
 * the quantities of stage 0 again. Internal to core/motion. */
#ifndef MT_MOTION_PROGRAM_H
#define MT_MOTION_PROGRAM_H

#include "core/formula/kernel.h"
#include "core/motion/split.h"
#include "core/space/sweep.h"

typedef struct mt_stage {
    int nin, nout;
    int *in;  /* quantities, in work arrays 0 .. nin-1 */
    int *out; /* points, into work arrays 0 .. nout-1 */
    mt_parities *in_parity, *out_parity;
    mt_kernel *kernel;
} mt_stage;

/* Functions of the wavenumber needed in one column sweep, each once. */
typedef struct mt_factors {
    int n, room;
    const mt_expr **e;
    int tables; /* FILTER symbols among the inputs */
    const mt_expr **table;
    mt_kernel *kernel;
} mt_factors;

typedef struct mt_program {
    mt_split split;
    mt_sweeper *sweeper; /* borrowed */
    const mt_spectrum *spectrum;
    int stages;
    mt_stage *stage;
    mt_factors *factors; /* [stages]: of the column sweep after each stage; the last one is the stepper's */
    int works;
    double **work;
    double **hold; /* [points]: spectra kept beyond the sweep after their stage, or NULL */
    double **u;    /* [fields]: present spectra, set by the owner */
    int reduced;
    const mt_expr **reduced_expr; /* cell-wise, computable at stage 0 */
    mt_reduce *reduce;
    mt_reduced *tally;     /* [units * reduced] of the last stage-0 sweep */
    mt_reduced *total;     /* [reduced], merged in the order of units */
    double **capture;      /* [fields] real arrays to be filled by the next stage-0 sweep, or NULL entries */
    const mt_expr *direct; /* an expression to be written to direct_out by its stage, or NULL */
    int direct_stage;
    double *direct_out;
    int workers;
    size_t column_doubles; /* the stepper's part of a worker's scratch */
    double **scratch;      /* [workers]: the stepper's part, then factor lines, then the kernel's */
    double time;           /* of the sweep under way */
    uint32_t step;         /* of the run, for thermal noise */
} mt_program;

/* Use: begin (as mt_split_begin; the sweeper's grid), then mt_split_sum / mt_split_needs on p->split,
 * mt_program_reduce, then finish with the sums whose points are wanted in the last column sweep, then
 * mt_program_factor for what the stepper's column sweep multiplies by, then compile. */
mt_status mt_program_begin(mt_program *p, mt_forms *forms, mt_sweeper *sweeper, int fields,
                           mt_symbol **symbols, mt_error *err);
void mt_program_end(mt_program *p);

/* Adds a reduction of a cell-wise expression over stage 0. EUNSUPPORTED if it is not computable there. index:
 * its number. */
mt_status mt_program_reduce(mt_program *p, const mt_expr *e, mt_reduce how, int *index);

mt_status mt_program_finish(mt_program *p, int sums, const mt_sum sum[]);

/* Number of a factor in a column sweep, -1 for the constant 1 (which is not multiplied). */
int mt_program_factor(mt_program *p, int sweep, const mt_expr *factor);

mt_status mt_program_compile(mt_program *p);

/* A list of factors of the caller's own (e, n filled in) gets its kernel; free with mt_factors_end. */
mt_status mt_program_compile_factors(mt_program *p, mt_factors *f);
void mt_factors_end(mt_factors *f);

/* Allocates work arrays, held spectra and scratch (column_doubles: what the stepper's column body wants per
 * worker on top). */
mt_status mt_program_allocate(mt_program *p, size_t column_doubles);
size_t mt_program_bytes(const mt_program *p, size_t column_doubles); /* that mt_program_allocate takes */

/* Row sweep of a stage, and a column sweep between stages (sweep = -1: quantities of stage 0 from the fields'
 * spectra). */
mt_status mt_program_rows(mt_program *p, int stage, double time, mt_error *err);
mt_status mt_program_columns(mt_program *p, int sweep, double time, mt_error *err);

/* --- inside a column body
 * -------------------------------------------------------------------------------------------- */

double *mt_program_scratch(const mt_program *p, int worker); /* the stepper's part */

/* Factors of a sweep along this column, behind the stepper's part of the scratch: factor f at lines[f *
 * length]. The kernel must have been prepared. */
double *mt_program_factor_lines(const mt_program *p, int sweep, const mt_column *c, int worker);

/* The same with another kernel made of the same expressions, to a place of the caller's. */
void mt_program_factors_at(const mt_program *p, const mt_factors *f, const mt_kernel *kernel,
                           const mt_column *c, double *lines, double *kernel_scratch);
/* Keeps the spectra that later sweeps need. */
void mt_program_hold(const mt_program *p, int sweep, const mt_column *c, double *const in[]);
/* dst += sum (dst: one line, zeroed by the caller). in: lines of the points of stage `sweep`; u: the fields'
 * spectra. skip: a field whose own terms with even turns are left out (-1: none). */
void mt_program_add(const mt_program *p, int sweep, const mt_sum *sum, const mt_column *c, double *const in[],
                    double *const u[], const double *lines, int skip, double *dst);
/* Fills out[] with the quantities of stage 0 from the fields' spectra. */
void mt_program_quantities(const mt_program *p, int stage, int sweep, const mt_column *c, double *const in[],
                           double *const u[], const double *lines, double *const out[]);

#endif
