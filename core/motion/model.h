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
    MT_STEPPER_SBDF3, /* variable-step third-order semi-implicit backward differentiation (Ascher, Ruuth &
                         Wetton, SIAM J. Numer. Anal. 32 (1995) 797), with the same stabilisation: two spectra
                         more a field than SBDF2 */
    MT_STEPPER_SBDF2, /* variable-step second-order semi-implicit backward differentiation (Wang & Ruuth, J.
                         Comput. Math. 26 (2008) 838) with linear stabilisation */
    MT_STEPPER_EULER, /* first-order semi-implicit Euler with the same stabilisation */
    MT_STEPPER_ETDRK2 /* second-order exponential Runge-Kutta (Cox & Matthews, J. Comput. Phys. 176 (2002)
                         430, eq. 22) with the same implicit part in the exponent. Taken whatever is asked for
                         where the model has thermal noise: see mt_model_noise */
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
#define MT_STEPPER_DEFAULT MT_STEPPER_SBDF3

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
    double mean_drift;    /* largest |mean - mean at start| of a conserved field */
    double log_lowest;    /* lowest argument of a logarithm in an accepted state; +inf if there are none */
    size_t log_cell;      /* and its cell */
    uint64_t log_steps;   /* accepted steps that used the logarithm's extension (see expr.h) */
    double matrix_lowest; /* lowest eigenvalue of a mobility or rate matrix at the start, as a fraction of its
                             largest; +inf if there is none */
    size_t matrix_cell;   /* and its cell */
    double matrix_skew;   /* largest |M_ij - M_ji|, as a fraction of the largest element */
    bool finished;        /* reached the time asked for */
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

/* --- more than one term. Each after the field was declared.
 * ------------------------------------------------------------- */

/* Off-diagonal element of a mobility or rate matrix (Onsager, Phys. Rev. 37 (1931) 405):
 *   d field/dt += div(coefficient grad(dF/d other)), or -coefficient dF/d other.
 * Both fields conserved or both relaxing. The matrix has to be symmetric and positive semi-definite for the
 * energy to fall: mt_run_state tells where it is not. Pairs of fields that are coupled by linear terms with
 * constant coefficients are solved as 2 x 2 blocks per wavenumber. */
MT_API mt_status mt_model_couple(mt_model *m, const mt_field *field, const mt_field *other,
                                 const mt_expr *coefficient, mt_error *err) MT_MUST_USE;

/* d field/dt += source: the mean of a conserved field then moves. */
MT_API mt_status mt_model_source(mt_model *m, const mt_field *field, const mt_expr *source,
                                 mt_error *err) MT_MUST_USE;

/* d field/dt -= div(velocity field): carried along by an imposed velocity (dim components, length/time). */
MT_API mt_status mt_model_carry(mt_model *m, const mt_field *field, const mt_expr *const velocity[],
                                mt_error *err) MT_MUST_USE;

/* A relaxing field whose mean stays: a Lagrange parameter, the same in every cell, is added to its potential
 * (Rubinstein & Sternberg, IMA J. Appl. Math. 48 (1992) 249). The rate has to be the same in every cell. */
MT_API mt_status mt_model_keep_mean(mt_model *m, const mt_field *field, mt_error *err) MT_MUST_USE;

/* Thermal noise (Cook, Acta Metall. 18 (1970) 297; Landau & Lifshitz). For a conserved field
 *   d field/dt += div(amplitude eta), eta a vector of independent white noises in space and time,
 * for others += amplitude eta; discretised with variance 1 / step per cell, so that the amplitude is
 *   sqrt(2 kT M / cell volume) for a mobility or rate M (kT in the units of the energy, the cell with its
 * thickness in 1-D and 2-D). May be called more than once: noises of one seed and stream are the same numbers
 * (correlated noise of a mobility matrix: one stream for each column of its Cholesky factor). Integrated by
 * ETDRK2, the noise with the exact factor of the Ornstein-Uhlenbeck process for the implicit part. Steps are
 * chosen from the past alone and none is rejected, since rejecting would prefer some noises to others. */
MT_API mt_status mt_model_noise(mt_model *m, const mt_field *field, uint64_t seed, int stream,
                                const mt_expr *amplitude, mt_error *err) MT_MUST_USE;

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
 * part among the eigenvalues of the linearised equations at wave vector k (rad/length), 1/time, and its
 * imaginary part (rad/time; not 0 where waves travel or the fields swing). Params at their values at `time`.
 * EUNSUPPORTED where the equations depend on position: there is no homogeneous state then. */
MT_API mt_status mt_model_growth(mt_model *m, const double mean[], const double k[3], double time,
                                 double *rate, double *frequency, mt_error *err) MT_MUST_USE;

/* Equilibrium fluctuations of a field about the homogeneous state u_i = mean[i] in the Gaussian
 * approximation, mean 0: out[cells]. kT: thermal energy in the units of energy density times (the grid's)
 * volume. Fields drawn with one seed belong together. EINPUT where the state is not stable. */
MT_API mt_status mt_model_fluctuations(mt_model *m, const mt_field *field, const double mean[], double kT,
                                       double time, uint64_t seed, double *out, mt_error *err) MT_MUST_USE;

/* --- running
 * ------------------------------------------------------------------------------------------------------- */

/* Freezes the model: splits, compiles, allocates, takes the fields' values as the state at `time`, checks the
 * start (logarithms in their domain, mobilities not negative, values finite). May be called again to restart
 * with other options. */
MT_API mt_status mt_model_start(mt_model *m, const mt_step_options *options, double time,
                                mt_error *err) MT_MUST_USE;

/* Other options from the present state on, which stays as it is (NULL: the defaults). ENOMEM. */
MT_API mt_status mt_model_options(mt_model *m, const mt_step_options *options, mt_error *err) MT_MUST_USE;

/* Advances to exactly `until`, landing on every knot of a param's history on the way. On return (also on
 * ESTOPPED) the fields' values hold the state at mt_model_state()->time. tick may be NULL. Any failure leaves
 * the last good state in the fields' values. */
MT_API mt_status mt_model_advance(mt_model *m, double until, mt_tick tick, void *ctx,
                                  mt_error *err) MT_MUST_USE;

MT_API const mt_run_state *mt_model_state(const mt_model *m);

#endif
