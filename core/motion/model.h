/* A model: an energy density, fields and how each of them moves. It derives the equations, splits them into
 * du/dt = L(k) u + sum_j D_j(k) FT[N_j], and advances them in time with steps it chooses itself.
 *
 * Order of use: new, energy, one of conserve / relax / evolve per field, (potential, describe, growth),
 * start, advance ...
 */
#ifndef MT_MOTION_MODEL_H
#define MT_MOTION_MODEL_H

#include "core/motion/field.h"

typedef struct mt_model mt_model;

typedef enum mt_stepper {
    MT_STEPPER_SBDF2, /* variable-step second-order semi-implicit backward differentiation (Wang & Ruuth, J.
                         Comput. Math. 26 (2008) 838) with linear stabilisation */
    MT_STEPPER_EULER  /* first-order semi-implicit Euler with the same stabilisation */
} mt_stepper;

typedef struct mt_step_options {
    mt_stepper stepper;
    double accuracy; /* error of a step as a fraction of the change over the step (norm of the field minus its
                        mean); 0: the default MT_ACCURACY */
    double fixed; /* > 0: every step has this length (shortened only to land on times); no error control, s */
    double longest;   /* > 0: no step longer than this, s */
    double shortest;  /* > 0: a step that would have to be shorter ends the run with ESTEP, s; 0: chosen from
                         time */
    bool free_energy; /* false: the guard against rising energy is off (it is always off for `evolve`,
                         time-dependent params and densities that contain time) */
} mt_step_options;

#define MT_ACCURACY 1e-2

/* What the run knows about itself; all are sums or extremes since mt_model_start. */
typedef struct mt_run_state {
    double time;    /* s */
    double step;    /* last accepted step, s */
    double energy;  /* energy of the present state, J (or dimensionless); NaN if the model has none */
    uint64_t steps; /* accepted */
    uint64_t rejected;
    uint64_t evaluations; /* right-hand sides */
    double step_min, step_max;
    double error; /* last error estimate / allowed */
    double
        energy_rise; /* largest rise of the energy over an accepted step in which it should fall, relative */
    double mean_drift;  /* largest |mean - mean at start| of a conserved field */
    double log_lowest;  /* lowest argument of a logarithm in an accepted state; +inf if there are none */
    size_t log_cell;    /* and its cell */
    uint64_t log_steps; /* accepted steps that used the logarithm's extension (see expr.h) */
    bool finished;      /* reached the time asked for */
} mt_run_state;

/* Called after every accepted step, from the thread that called mt_model_advance, outside any parallel
 * region. Return true to stop: mt_model_advance then returns ESTOPPED with the state at the end of that step.
 */
typedef bool (*mt_tick)(void *ctx, const mt_run_state *state);

/* --- making
 * -------------------------------------------------------------------------------------------------------- */

/* pool (NULL: serial) and forms must outlive the model. */
MT_API mt_status mt_model_new(mt_model **out, mt_forms *forms, mt_grid *grid, mt_pool *pool,
                              mt_error *err) MT_MUST_USE;
MT_API void mt_model_free(mt_model **model);

/* Energy density (scalar; J/m^3). EINPUT if it has NOISE or WAVE or fields of another grid. */
MT_API mt_status mt_model_energy(mt_model *m, const mt_expr *density, mt_error *err) MT_MUST_USE;

/* du/dt = div(mobility grad(dF/du)) ; = -rate dF/du ; = rhs. The model keeps a reference to the field. A
 * field is declared once. conserve and relax need an energy that contains the field. Negative uniform
 * mobility: EMOBILITY at once. */
MT_API mt_status mt_model_conserve(mt_model *m, mt_field *field, const mt_expr *mobility,
                                   mt_error *err) MT_MUST_USE;
MT_API mt_status mt_model_relax(mt_model *m, mt_field *field, const mt_expr *rate, mt_error *err) MT_MUST_USE;
MT_API mt_status mt_model_evolve(mt_model *m, mt_field *field, const mt_expr *rhs, mt_error *err) MT_MUST_USE;

/* A field that stands in the formulas but does not move (every field of the formulas has to be declared
 * somehow). */
MT_API mt_status mt_model_still(mt_model *m, mt_field *field, mt_error *err) MT_MUST_USE;

/* dF/du, a new reference. */
MT_API mt_status mt_model_potential(mt_model *m, const mt_field *field, const mt_expr **out,
                                    mt_error *err) MT_MUST_USE;

MT_API int mt_model_fields(const mt_model *m);
MT_API mt_field *mt_model_field(const mt_model *m, int i); /* borrowed */

/* --- looking
 * ------------------------------------------------------------------------------------------------------- */

/* The derived equations and the split as text: potentials, implicit part, kernels, stages, transforms per
 * step, bytes per cell. Allocates a text to be freed with mt_free. Works before start. */
MT_API mt_status mt_model_describe(mt_model *m, char **text, mt_error *err) MT_MUST_USE;

/* Bytes that the model will hold when started (arrays and buffers), predicted. */
MT_API mt_status mt_model_bytes(mt_model *m, size_t *bytes, mt_error *err) MT_MUST_USE;

/* Linear growth of a wave exp(i k x + rate t) about the homogeneous state u_i = mean[i]: the largest real
 * part of the eigenvalues of the linearised equations at wave vector k (rad/m), 1/s. Works for one or two
 * fields; more: EUNSUPPORTED. Params at their values at `time`. */
MT_API mt_status mt_model_growth(mt_model *m, const double mean[], const double k[3], double time,
                                 double *rate, mt_error *err) MT_MUST_USE;

/* --- running
 * ------------------------------------------------------------------------------------------------------- */

/* Freezes the model: splits, compiles, allocates, takes the fields' values as the state at `time`, checks the
 * start (logarithms in their domain, mobilities not negative, values finite). May be called again to restart
 * with other options. */
MT_API mt_status mt_model_start(mt_model *m, const mt_step_options *options, double time,
                                mt_error *err) MT_MUST_USE;

/* Advances to exactly `until`, landing on every knot of a param's history on the way. On return (also on
 * ESTOPPED) the fields' values hold the state at mt_model_state()->time. tick may be NULL. Any failure leaves
 * the last good state in the fields' values. */
MT_API mt_status mt_model_advance(mt_model *m, double until, mt_tick tick, void *ctx,
                                  mt_error *err) MT_MUST_USE;

MT_API const mt_run_state *mt_model_state(const mt_model *m);

#endif
