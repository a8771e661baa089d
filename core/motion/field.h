/* A field: a symbol for formulas with its values in real space. */
#ifndef MT_MOTION_FIELD_H
#define MT_MOTION_FIELD_H

#include "core/formula/expr.h"
#include "core/space/sweep.h"

typedef struct mt_field {
    int refs;
    mt_symbol *symbol; /* of kind MT_SYMBOL_FIELD; its name and grid are the field's */
    mt_grid *grid;     /* borrowed from the symbol */
    double *values;    /* grid->cells values, row-major, x fastest */
    unsigned version;  /* raised by every write from outside a model (mt_field_touch): a model then takes the
                          new  values as its state before the next step */
} mt_field;

/* A field of zeros with one reference. */
MT_API mt_status mt_field_new(mt_field **out, mt_forms *forms, mt_grid *grid, const char *name,
                              mt_error *err) MT_MUST_USE;
MT_API mt_field *mt_field_ref(mt_field *field);
MT_API void mt_field_unref(mt_field **field);

/* Tells models that the values were changed by hand. */
MT_API void mt_field_touch(mt_field *field);

/* Evaluates any expression over the grid: spectral operators by transforms, everything else by compiled
 * kernels. fields: n fields whose present values stand for their symbols (all that occur in e). out: cells
 * doubles, may be the values of one of the fields. The sweeper belongs to the grid. */
MT_API mt_status mt_evaluate(mt_sweeper *sweeper, const mt_expr *e, int n, mt_field *const fields[],
                             double time, double *out, mt_error *err) MT_MUST_USE;

/* field := e (coordinates, noise, params, other fields), then mt_field_touch. fields/n as in mt_evaluate. */
MT_API mt_status mt_field_set(mt_field *field, mt_sweeper *sweeper, const mt_expr *e, int n,
                              mt_field *const fields[], double time, mt_error *err) MT_MUST_USE;

/* to := the trigonometric polynomial of `from`, taken at the cells of another grid over the same box (same
 * walls and lengths): exact where the other grid is finer. Each sweeper belongs to its field's grid. Then
 * mt_field_touch. EINPUT where the boxes differ. */
MT_API mt_status mt_field_resample(mt_field *to, mt_sweeper *to_sweeper, const mt_field *from,
                                   mt_sweeper *from_sweeper, mt_error *err) MT_MUST_USE;

/* Adds smooth-edged discs (spheres, bars) to the values: amount / 2 (1 - tanh((r - radius) / width)) about
 * each centre, r the distance to its nearest image across periodic walls. centres: count * dim coordinates.
 * Then mt_field_touch. */
MT_API void mt_field_add_discs(mt_field *field, int count, const double *centres, double radius, double width,
                               double amount);

#endif
