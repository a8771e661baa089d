/* The inside of a model, shared by model.c (declaring), equations.c (deriving and splitting), step.c (one
 * step), advance.c (the driver), describe.c and growth.c. */
#ifndef MT_MOTION_MODEL_INSIDE_H
#define MT_MOTION_MODEL_INSIDE_H

#include "core/motion/model.h"
#include "core/motion/program.h"
#include "core/motion/stiff.h"

typedef enum mt_motion {
    MT_MOTION_STILL, /* occurs in the formulas, does not move */
    MT_MOTION_CONSERVE,
    MT_MOTION_RELAX,
    MT_MOTION_EVOLVE
} mt_motion;

/* A coefficient that varies over the cells, dominated in the implicit part by scale * o(k). */
typedef struct mt_dominate {
    mt_symbol *scale; /* private param: theta * max over cells of a */
    int reduction;    /* max of a */
    const mt_expr *o;
} mt_dominate;

/* An off-diagonal element of the mobility or rate matrix. */
typedef struct mt_coupling {
    int other;            /* number of the mover whose potential drives */
    const mt_expr *given; /* owned */
} mt_coupling;

typedef struct mt_thermal {
    uint64_t seed;
    int stream;
    const mt_expr *amplitude; /* owned */
} mt_thermal;

typedef struct mt_mover {
    mt_field *field;
    mt_motion motion;
    const mt_expr *given; /* mobility, rate or right-hand side; owned */
    int couplings;
    mt_coupling *coupling;
    const mt_expr *source, *velocity[3]; /* owned, or NULL */
    bool keeps_mean;
    int noises;
    mt_thermal *noise;
    /* derived (kept by the program's builder) */
    const mt_expr *node, *potential, *rhs;
    mt_sum sum;
    const mt_expr *linear;      /* L(k): own linear terms */
    const mt_expr *implicit;    /* Lambda(k) <= 0: the part taken implicitly */
    const mt_expr *stabilising; /* what varying coefficients add to -Lambda, or NULL */
    int stabilising_factor;
    int linear_factor, implicit_factor; /* in the last column sweep; -1: constant 1, -2: constant 0 */
    int partner;                        /* mover solved in one block with this one, or -1 */
    const mt_expr *cross;               /* what the partner's spectrum is multiplied by, implicitly */
    int cross_factor;
    mt_sum noise_sum; /* of the thermal noise, before the root of the step */
    double theta;     /* by how much more than needed for one field the varying coefficients are dominated */
    bool mean_held;   /* mode 0 is copied, not computed */
    int dominates;
    mt_dominate *dominate;
    int mobility_reduction; /* min of the mobility or rate; -1 if it is uniform */
    int finite_reduction;   /* min of the field, to see NaN; -1 if the energy shows it */
    /* running */
    /* Spectra: present, one and two steps back, and the explicit parts R of these two. An attempt writes u+
     * and R(u) over the oldest of each (mt_next_u, mt_next_r). */
    double *u, *past_u[2], *past_r[2];
    unsigned version;
    double mean_start;
} mt_mover;

/* volume * sum over modes of weight q(k) |u^|^2 */
typedef struct mt_quadratic {
    int mover;
    const mt_expr *q;
    int factor;
} mt_quadratic;

struct mt_model {
    mt_forms *forms;
    mt_grid *grid;
    mt_pool *pool;
    mt_sweeper *sweeper;
    const mt_expr *energy; /* owned */
    int n, room;
    mt_mover *mover;
    /* derived */
    bool derived;
    mt_symbol **symbol; /* [n] */
    mt_program program;
    int quadratics;
    mt_quadratic *quadratic;
    bool noisy;                 /* some field has thermal noise */
    const mt_expr *energy_rest; /* cell-wise part of the energy, or NULL */
    int energy_reduction;       /* -1: none */
    bool energy_known;          /* energy = reduction + quadratics */
    int logs;
    int *log_reduction; /* min of the arguments of logarithms */
    int params;
    mt_symbol **param;         /* every param in the equations (not the private ones) */
    mt_factors linear_factors; /* the L's alone, for the middle of a step while params move */
    size_t column_doubles;
    /* running */
    bool started;
    mt_step_options options;
    mt_run_state state;
    int depth;          /* steps back that are kept: 1, or 2 for SBDF3 */
    int levels;         /* of them that are usable */
    int most_levels;    /* of them that are wanted: 1 where second order takes longer steps than third */
    double third_limit; /* a step of third order may not be longer */
    uint64_t limit_at;  /* number of the step at which that was looked up; 0: not yet */
    bool
        stored; /* a step was rejected: R of the present state is in mt_next_r, the rows' outputs are spent */
    bool stale; /* the rows' outputs do not belong to the present state */
    double past_dt[2]; /* the last step and the one before */
    double dt_next;    /* suggested */
    double ratio_old;
    bool after_jump;      /* stage-0 outputs are older than a jump of the params: evaluate anew */
    double *column_tally; /* [columns * (3 n + 1)]: error, change, norm per mover; quadratic energy */
    double *totals;       /* [3 n + 1] */
    double **next;        /* [n]: spectra that an attempt writes */
    double energy_now;    /* of the state last swept */
};

/* sums over a column for each mover: error, change, norm, error of one order less (squares) */
#define MT_TALLY 4

/* times the error aimed at with which a step passes (step.c) */
#define MT_TOLERATED 4.0

static inline double *mt_next_u(const mt_model *m, const mt_mover *v) {
    return v->past_u[m->depth - 1];
}
static inline double *mt_next_r(const mt_model *m, const mt_mover *v) {
    return v->past_r[m->depth - 1];
}

/* equations.c */
mt_status mt_model_derive(mt_model *m,
                          mt_error *err); /* potentials, right-hand sides, split, program; idempotent */
void mt_model_forget(mt_model *m);        /* undoes derive and start */

/* growth.c: refuses equations whose shortest waves grow without bound */
mt_status mt_model_check_posed(mt_model *m, mt_error *err);

/* matrix.c: what state says of mobility and rate matrices, at the fields' present values */
mt_status mt_model_check_matrices(mt_model *m, mt_error *err);

/* step.c: one attempt from state.time to time_next. Leaves u+ where mt_step_accept takes it from. */
typedef struct mt_attempt {
    double time, dt, time_next;
    bool lands_before_jump; /* params at time_next take their value before a jump there */
    bool capture;           /* field values are wanted at time_next */
    /* results */
    double ratio; /* error / allowed */
    double lower; /* the same for the method of one order less */
    int order;    /* the ratio goes with this power of the step */
    bool swept;   /* stage 0 was evaluated at u+ */
} mt_attempt;
mt_status mt_step_attempt(mt_model *m, mt_attempt *a, mt_error *err);
mt_status mt_step_exponential(mt_model *m, mt_attempt *a, mt_error *err); /* exponential.c */
void mt_step_accept(mt_model *m);
mt_status mt_step_refresh(mt_model *m, bool capture,
                          mt_error *err); /* stage 0 of the present u at state.time */
double mt_step_third_order_limit(mt_model *m, double time);
double mt_step_fastest(mt_model *m, double time); /* max over modes and fields of |L|, |Lambda| */
double mt_step_energy(const mt_model *m);         /* from the last stage-0 sweep and quadratic tallies */
void mt_step_params(mt_model *m, double time, bool before_jump);

/* what both steppers are made of: the last column sweep (fresh: with what the rows left), stage 0 with the
 * fields' values if wanted, the stages after it, the size of the error, the dominance of varying coefficients
 */
mt_status mt_step_columns(mt_model *m, bool fresh, mt_column_body body, void *ctx, double time,
                          mt_error *err);
mt_status mt_step_rows(mt_model *m, double time, bool capture, mt_error *err);
mt_status mt_step_later_stages(mt_model *m, double time, mt_error *err);
double mt_step_error_ratio(const mt_model *m, double accuracy, int part);
void mt_step_dominate(mt_model *m, double theta);

#endif
