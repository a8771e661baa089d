#include "core/measure/growth.h"

#include <math.h>

typedef struct moments {
    int n;
    double x, y, xx, xy, yy;
} moments;

static void add(moments *m, double x, double y) {
    m->n++;
    m->x += x, m->y += y;
    m->xx += x * x, m->xy += x * y, m->yy += y * y;
}

static mt_status solve(const moments *m, mt_line_fit *fit, mt_error *err) {
    double n = m->n, sxx = m->xx - m->x * m->x / n, sxy = m->xy - m->x * m->y / n,
           syy = m->yy - m->y * m->y / n;
    if (m->n < 2 || !(sxx > 0))
        return mt_fail(err, MT_EINPUT,
                       "a growth law needs at least two points at different times; there are %d", m->n);
    fit->points = m->n;
    fit->slope = sxy / sxx;
    fit->intercept = (m->y - fit->slope * m->x) / n;
    fit->slope_error = m->n > 2 ? sqrt(fmax(0, syy - fit->slope * sxy) / (n - 2) / sxx) : NAN;
    return MT_OK;
}

mt_status mt_fit_power(int n, const double *x, const double *y, double from, double to, mt_line_fit *fit,
                       mt_error *err) {
    moments m = {0};
    for (int i = 0; i < n; i++)
        if (x[i] >= from && x[i] <= to && x[i] > 0 && y[i] > 0) add(&m, log(x[i]), log(y[i]));
    return solve(&m, fit, err);
}

mt_status mt_fit_cubic(int n, const double *t, const double *length, mt_line_fit *fit, mt_error *err) {
    moments m = {0};
    double shift = n > 0 ? t[0] : 0; /* keeps digits when t is large against the stage */
    for (int i = 0; i < n; i++)
        if (isfinite(length[i])) add(&m, t[i] - shift, length[i] * length[i] * length[i]);
    mt_status st = solve(&m, fit, err);
    if (!st) fit->intercept -= fit->slope * shift;
    return st;
}
