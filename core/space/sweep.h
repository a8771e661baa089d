/* The two sweeps. An evaluation alternates between real space and spectrum; each sweep reads and writes every
 * work array once, line by line while the data are in cache:
 *
 *   row sweep:     for each unit of rows: inverse transform along the inner axes, body in real space, forward
 *                  transform;
 *   column sweep:  for each column: forward transform along the outer axis, body on the modes, inverse
 *                  transform.
 *
 * Work arrays hold data that are transformed along the inner axes only. What a row sweep wrote is read by a
 * column sweep and the other way round: the column sweep brings in the factor 1/n of all periodic axes. Input
 * i and output j may be one array; outputs are written after all inputs of the unit were read. A row sweep
 * spends its inputs (what they held is lost, and no array may be given twice as input), a column sweep leaves
 * them as they were. Everything is done unit by unit with one plan per line, so results do not depend on the
 * number of threads. FFTW is planned with FFTW_ESTIMATE: the same plans, and so the same bits, in every
 * process. A sweeper runs one sweep at a time. */
#ifndef MT_SPACE_SWEEP_H
#define MT_SPACE_SWEEP_H

#include "core/base/thread.h"
#include "core/space/spectrum.h"

typedef struct mt_sweeper mt_sweeper;

/* A unit of a row sweep: `n` consecutive cells from `first` on (whole rows, or whole planes in 3-D). */
typedef struct mt_unit {
    size_t index; /* 0 .. mt_sweeper_units-1; boundaries depend on the grid only */
    size_t first; /* row-major number of its first cell */
    size_t n;     /* cells */
} mt_unit;

/* A column: all outer modes at one combination of inner modes. */
typedef struct mt_column {
    size_t index;  /* 0 .. columns-1 */
    size_t offset; /* first double of this column in a spectral array: index * stride */
    int length;    /* modes along the column */
    int mode[3];   /* inner mode numbers (0 at the outer axis) */
    double k[3];   /* inner wavenumbers (0 at the outer axis); outer ones are in spectrum->k[outer] */
    double weight; /* product of the inner weights */
} mt_column;

/* in[i]: values of input i in the unit's cells (may be overwritten); out[j]: to be filled. worker picks
 * scratch. */
typedef mt_status (*mt_row_body)(void *ctx, const mt_unit *unit, double *const in[], double *const out[],
                                 int worker, mt_error *err);

/* in[i]: forward-transformed column of input i, `length` values, complex interleaved if spectrum->complex,
 * Nyquist and forbidden modes already 0 (may be overwritten); out[j]: to be filled with the column to be
 * inverse-transformed (mode values at projected-out places are ignored). */
typedef mt_status (*mt_column_body)(void *ctx, const mt_column *column, double *const in[],
                                    double *const out[], int worker, mt_error *err);

/* Plans and buffers for a grid; keeps a reference to the grid; pool may be NULL (serial) and must outlive the
 * sweeper. */
MT_API mt_status mt_sweeper_new(mt_sweeper **out, mt_grid *grid, mt_pool *pool, mt_error *err) MT_MUST_USE;
MT_API void mt_sweeper_free(mt_sweeper **sweeper);

MT_API const mt_spectrum *mt_sweeper_spectrum(const mt_sweeper *s);
MT_API mt_grid *mt_sweeper_grid(const mt_sweeper *s);
MT_API mt_pool *mt_sweeper_pool(const mt_sweeper *s);
MT_API size_t mt_sweeper_units(const mt_sweeper *s);        /* units of a row sweep */
MT_API size_t mt_sweeper_unit_cells(const mt_sweeper *s);   /* cells of the largest unit */
MT_API size_t mt_sweeper_work_doubles(const mt_sweeper *s); /* doubles of a work array */

/* in/out: nin/nout work arrays with the parity of each; either may be none (0). Fails as the lowest failing
 * unit does, with ENOMEM when buffers must grow, or with EUNSUPPORTED for more than 256 arrays in or out. */
MT_API mt_status mt_sweep_rows(mt_sweeper *s, int nin, double *const in[], const mt_parities in_parity[],
                               int nout, double *const out[], const mt_parities out_parity[],
                               mt_row_body body, void *ctx, mt_error *err) MT_MUST_USE;

MT_API mt_status mt_sweep_columns(mt_sweeper *s, int nin, double *const in[], const mt_parities in_parity[],
                                  int nout, double *const out[], const mt_parities out_parity[],
                                  mt_column_body body, void *ctx, mt_error *err) MT_MUST_USE;

/* Whole arrays, built from the two: field array (real space) to spectral array and back. `work` is one work
 * array. field and spectrum are distinct from work. */
MT_API mt_status mt_transform_forward(mt_sweeper *s, const double *field, mt_parities parity,
                                      double *spectrum, double *work, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_transform_inverse(mt_sweeper *s, const double *spectrum, mt_parities parity,
                                      double *field, double *work, mt_error *err) MT_MUST_USE;

#endif
