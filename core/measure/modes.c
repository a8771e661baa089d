#include "core/measure/modes_inside.h"

#include <math.h>

#include "core/base/memory.h"

static const double pi = 3.14159265358979323846;

void mt_shells_of(const mt_grid *g, int *shells, double *width) {
    double nyquist = INFINITY, longest = 0;
    for (int a = 0; a < g->dim; a++) {
        if (g->n[a] < 2) continue;
        nyquist = fmin(nyquist, pi / g->h[a]);
        longest = fmax(longest, g->n[a] * g->h[a]);
    }
    if (!(longest > 0)) longest = g->h[0]; /* a single cell: no modes */
    *width = 2 * pi / longest;
    *shells = isfinite(nyquist) ? (int)(nyquist / *width - 0.5 + 1e-9) : 0;
    if (*shells < 1) *shells = 1;
}

int mt_shell_of(double k, double width) {
    return (int)(k / width + 0.5 + 1e-9);
}

static void visit_column(const mt_spectrum *s, const double *column, const int mode[3], mt_mode_visit visit,
                         void *ctx) {
    const mt_grid *g = s->grid;
    int m[3] = {mode[0], mode[1], mode[2]}, width = s->complex ? 2 : 1;
    for (int i = 0; i < s->length; i++) {
        m[s->outer] = i;
        double k[3] = {0, 0, 0}, w = 1, count = 1;
        bool dropped = false;
        for (int a = 0; a < g->dim; a++) {
            k[a] = s->k[a][m[a]];
            if (a == s->half)
                count = s->weight[a][m[a]];
            else
                w *= s->weight[a][m[a]];
            dropped = dropped || (g->wall[a] == MT_PERIODIC && g->n[a] > 1 && 2 * m[a] == g->n[a]);
        }
        const double *u = column + i * width;
        double square = u[0] * u[0] + (width == 2 ? u[1] * u[1] : 0);
        bool mean = k[0] == 0 && k[1] == 0 && k[2] == 0;
        if (!mean && !dropped) visit(ctx, k, g->volume * w * square, count);
    }
}

mt_status mt_modes_visit(mt_sweeper *sweeper, const double *a, mt_mode_visit visit, void *ctx,
                         mt_error *err) {
    const mt_spectrum *s = mt_sweeper_spectrum(sweeper);
    double *u = NULL, *work = NULL;
    int mode[3];
    mt_status st = mt_new(&u, s->doubles, sizeof *u, "a spectrum", err);
    if (!st) st = mt_new(&work, mt_sweeper_work_doubles(sweeper), sizeof *work, "a spectrum", err);
    if (!st) st = mt_transform_forward(sweeper, a, 0, u, work, err);
    for (size_t j = 0; j < s->columns && !st; j++) {
        mt_spectrum_column(s, j, mode);
        visit_column(s, u + j * s->stride, mode, visit, ctx);
    }
    mt_free(u), mt_free(work);
    return st;
}
