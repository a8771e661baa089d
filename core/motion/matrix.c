/* Mobility and rate matrices at the start: symmetric (Onsager, Phys. Rev. 37 (1931) 405) and positive
 * semi-definite in every cell? Otherwise the energy may rise. */
#include "core/motion/model_inside.h"

#include <lapacke.h>
#include <math.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct matrix {
    mt_model *m;
    mt_motion motion;
    int n, *mover;         /* rows */
    double **varying;      /* [n * n]: values in each cell, or NULL */
    double *element, *row; /* [n * n] of one cell */
} matrix;

static int row_of(const matrix *x, int mover) {
    for (int i = 0; i < x->n; i++)
        if (x->mover[i] == mover) return i;
    return -1;
}

static mt_status take(matrix *x, int i, int j, const mt_expr *e, mt_field *const fields[], mt_error *err) {
    int at = i * x->n + j;
    mt_model *m = x->m;
    if (mt_expr_uniform(e)) return mt_expr_number(e, m->state.time, &x->element[at], err);
    mt_status st = mt_new(&x->varying[at], m->grid->cells, sizeof(double), "a mobility matrix", err);
    if (st) return st;
    return mt_evaluate(m->sweeper, e, m->n, fields, m->state.time, x->varying[at], err);
}

static mt_status take_all(matrix *x, mt_error *err) {
    mt_model *m = x->m;
    mt_status st = MT_OK;
    mt_field **fields = mt_alloc((size_t)m->n, sizeof *fields);
    if (!fields) return mt_fail(err, MT_ENOMEM, "no memory for a mobility matrix");
    for (int i = 0; i < m->n; i++) fields[i] = m->mover[i].field;
    for (int i = 0; i < x->n && !st; i++) {
        const mt_mover *v = &m->mover[x->mover[i]];
        st = take(x, i, i, v->given, fields, err);
        for (int c = 0; c < v->couplings && !st; c++)
            st = take(x, i, row_of(x, v->coupling[c].other), v->coupling[c].given, fields, err);
    }
    mt_free(fields);
    return st;
}

static void judge(matrix *x, size_t cell) {
    mt_run_state *s = &x->m->state;
    double largest = 0, lowest = 0, skew = 0;
    int n = x->n;
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            double a = x->element[i * n + j], b = x->element[j * n + i];
            largest = fmax(largest, fabs(a));
            skew = fmax(skew, fabs(a - b));
            x->row[i * n + j] = 0.5 * (a + b);
        }
    if (!(largest > 0) || !isfinite(largest)) return;
    double *w = x->row + n * n;
    if (LAPACKE_dsyev(LAPACK_ROW_MAJOR, 'N', 'U', n, x->row, n, w) == 0) lowest = w[0] / largest;
    s->matrix_skew = fmax(s->matrix_skew, skew / largest);
    if (lowest < s->matrix_lowest) s->matrix_lowest = lowest, s->matrix_cell = cell;
}

static void judge_all(matrix *x) {
    bool varies = false;
    int n = x->n * x->n;
    for (int i = 0; i < n; i++) varies = varies || x->varying[i];
    for (size_t c = 0; c < (varies ? x->m->grid->cells : 1); c++) {
        for (int i = 0; i < n; i++)
            if (x->varying[i]) x->element[i] = x->varying[i][c];
        judge(x, c);
    }
}

static bool in_matrix(const mt_mover *v, mt_motion motion, const mt_model *m) {
    if (v->motion != motion) return false;
    if (v->couplings) return true;
    for (int i = 0; i < m->n; i++)
        for (int j = 0; j < m->mover[i].couplings; j++)
            if (&m->mover[m->mover[i].coupling[j].other] == v) return true;
    return false;
}

static mt_status check(mt_model *m, mt_motion motion, mt_error *err) {
    matrix x = {.m = m, .motion = motion};
    size_t room = (size_t)m->n * (size_t)m->n;
    x.mover = mt_alloc((size_t)m->n, sizeof *x.mover);
    x.varying = mt_alloc(room, sizeof *x.varying);
    x.element = mt_alloc(room, sizeof *x.element), x.row = mt_alloc(room + (size_t)m->n, sizeof *x.row);
    mt_status st = MT_OK;
    if (!x.mover || !x.varying || !x.element || !x.row)
        st = mt_fail(err, MT_ENOMEM, "no memory for a mobility matrix");
    for (int i = 0; i < m->n && !st; i++)
        if (in_matrix(&m->mover[i], motion, m)) x.mover[x.n++] = i;
    if (!st && x.n > 1) st = take_all(&x, err);
    if (!st && x.n > 1) judge_all(&x);
    for (size_t i = 0; i < room && x.varying; i++) mt_free(x.varying[i]);
    mt_free(x.mover), mt_free(x.varying), mt_free(x.element), mt_free(x.row);
    return st;
}

mt_status mt_model_check_matrices(mt_model *m, mt_error *err) {
    m->state.matrix_lowest = INFINITY;
    mt_status st = check(m, MT_MOTION_CONSERVE, err);
    return st ? st : check(m, MT_MOTION_RELAX, err);
}
