#include <math.h>
#include <string.h>

#include "core/base/memory.h"
#include "core/measure/modes_inside.h"
#include "core/measure/structure.h"

static const double pi = 3.14159265358979323846;

#define TIE 1e-9 /* bounds of sectors are where rounding must not choose sides */

typedef struct context {
    const mt_grid *g;
    mt_sectors *out;
} context;

static void add(mt_sectors *t, int sector, int shell, double k, double s, double count) {
    t->share[sector] += count * s;
    if (shell < 1 || shell > t->shells) return;
    int i = sector * t->shells + shell - 1;
    t->k[i] += count * k;
    t->s[i] += count * s;
    t->modes[i] += count;
}

static void add_at_angle(mt_sectors *t, double angle, double k, double s, double count) {
    double place = angle / pi * t->sectors;
    int below = (int)floor(place), shell = mt_shell_of(k, t->width);
    double above = place - below; /* of the way to the next sector's middle */
    double upper = fabs(above - 0.5) < TIE ? 0.5 : above > 0.5;
    int n = t->sectors, low = ((below % n) + n) % n;
    if (upper < 1) add(t, low, shell, k, s, (1 - upper) * count);
    if (upper > 0) add(t, (low + 1) % n, shell, k, s, upper * count);
}

static void add_in_area(context *x, const double k[3], double size, double s, double count) {
    double angle = atan2(k[1], k[0]);
    bool both = x->g->wall[0] == MT_MIRROR || x->g->wall[1] == MT_MIRROR;
    add_at_angle(x->out, angle, size, s, both ? 0.5 * count : count);
    if (both) add_at_angle(x->out, -angle, size, s, 0.5 * count);
}

static void add_in_volume(context *x, const double k[3], double size, double s, double count) {
    double most = fmax(fabs(k[0]), fmax(fabs(k[1]), fabs(k[2])));
    int n = 0;
    for (int a = 0; a < 3; a++) n += fabs(k[a]) > most * (1 - TIE);
    for (int a = 0; a < 3; a++)
        if (fabs(k[a]) > most * (1 - TIE))
            add(x->out, a, mt_shell_of(size, x->out->width), size, s, count / n);
}

static void add_mode(void *ctx, const double k[3], double s, double count) {
    context *x = ctx;
    double size = sqrt(k[0] * k[0] + k[1] * k[1] + k[2] * k[2]);
    if (x->g->dim == 2)
        add_in_area(x, k, size, s, count);
    else
        add_in_volume(x, k, size, s, count);
}

/* Means of the shells of a sector; its first moment. */
static double average(mt_sectors *t, int sector) {
    double ks = 0, sum = 0;
    for (int i = 0; i < t->shells; i++) {
        int j = sector * t->shells + i;
        if (t->modes[j] > 0) {
            t->k[j] /= t->modes[j], t->s[j] /= t->modes[j];
            ks += t->k[j] * t->s[j], sum += t->s[j];
        } else {
            t->k[j] = (i + 1) * t->width;
        }
    }
    return sum > 0 ? 2 * pi * sum / ks : NAN;
}

static void finish(const mt_grid *g, mt_sectors *t) {
    double total = 0, most = 0, least = INFINITY;
    for (int i = 0; i < t->sectors; i++) total += t->share[i];
    for (int i = 0; i < t->sectors; i++) {
        t->angle[i] = g->dim == 2 ? i * pi / t->sectors : 0;
        t->wavelength[i] = average(t, i);
        t->share[i] = total > 0 ? t->share[i] / total : NAN;
        most = fmax(most, t->share[i]), least = fmin(least, t->share[i]);
    }
    t->anisotropy = total > 0 ? (most - least) / (most + least) : NAN;
}

static mt_status make(const mt_grid *g, int count, mt_sectors *t, mt_error *err) {
    t->sectors = g->dim == 2 ? count : 3;
    mt_shells_of(g, &t->shells, &t->width);
    size_t n = (size_t)t->sectors * (size_t)t->shells, each = (size_t)t->sectors;
    mt_status st =
        mt_new(&t->block, 3 * n + 3 * each, sizeof *t->block, "the structure factor by directions", err);
    if (st) return st;
    t->k = t->block, t->s = t->k + n, t->modes = t->s + n;
    t->angle = t->modes + n, t->wavelength = t->angle + each, t->share = t->wavelength + each;
    return MT_OK;
}

mt_status mt_sectors_of(mt_sweeper *sweeper, const double *a, int count, mt_sectors *out, mt_error *err) {
    const mt_grid *g = mt_sweeper_grid(sweeper);
    memset(out, 0, sizeof *out);
    if (g->dim == 1)
        return mt_fail(err, MT_EINPUT, "a line has one direction only: sectors need 2 or 3 axes");
    if (g->dim == 2 && (count < 2 || count > 1000))
        return mt_fail(err, MT_EINPUT, "%d sectors; from 2 to 1000 are possible", count);
    context x = {g, out};
    mt_status st = make(g, count, out, err);
    if (!st) st = mt_modes_visit(sweeper, a, add_mode, &x, err);
    if (!st) finish(g, out);
    if (st) mt_sectors_free(out);
    return st;
}

void mt_sectors_free(mt_sectors *s) {
    mt_free(s->block);
    memset(s, 0, sizeof *s);
}
