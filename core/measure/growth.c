#include "core/measure/growth.h"

#include <math.h>

/* Points by number; false leaves one out. */
typedef struct series {
    int n;
    const double *x, *y;
    double from, to;
} series;

typedef bool (*point)(const series *s, int i, double *x, double *y);

static bool power(const series *s, int i, double *x, double *y) {
    *x = log(s->x[i]), *y = log(s->y[i]);
    return s->x[i] >= s->from && s->x[i] <= s->to && isfinite(*x) && isfinite(*y);
}

static bool cubic(const series *s, int i, double *x, double *y) {
    *x = s->x[i], *y = s->y[i] * s->y[i] * s->y[i];
    return isfinite(*x) && isfinite(*y);
}

/* Sums about the means, in a second pass: times far from zero and lengths in metres keep their digits. */
static mt_status fit_line(const series *s, point get, mt_line_fit *fit, mt_error *err) {
    double x, y, mx = 0, my = 0, sxx = 0, sxy = 0, rss = 0;
    int n = 0;
    for (int i = 0; i < s->n; i++)
        if (get(s, i, &x, &y)) n++, mx += x, my += y;
    mx /= n, my /= n;
    for (int i = 0; i < s->n; i++)
        if (get(s, i, &x, &y)) sxx += (x - mx) * (x - mx), sxy += (x - mx) * (y - my);
    *fit = (mt_line_fit){NAN, NAN, NAN, n};
    if (n < 2 || !(sxx > 0))
        return mt_fail(err, MT_EINPUT,
                       "a growth law needs at least two points at different times; %d can be used", n);
    fit->slope = sxy / sxx;
    fit->intercept = my - fit->slope * mx;
    for (int i = 0; i < s->n; i++) {
        if (!get(s, i, &x, &y)) continue;
        double r = y - my - fit->slope * (x - mx);
        rss += r * r;
    }
    if (n > 2) fit->slope_error = sqrt(rss / (n - 2) / sxx);
    return MT_OK;
}

mt_status mt_fit_power(int n, const double *x, const double *y, double from, double to, mt_line_fit *fit,
                       mt_error *err) {
    series s = {n, x, y, from, to};
    return fit_line(&s, power, fit, err);
}

mt_status mt_fit_cubic(int n, const double *t, const double *length, mt_line_fit *fit, mt_error *err) {
    series s = {n, t, length, 0, 0};
    return fit_line(&s, cubic, fit, err);
}
