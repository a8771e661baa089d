/* Equilibrium fluctuations in the Gaussian approximation: the amplitudes u^ of the waves k have the
 * covariance < u^_i u^*_j > = kT / V (H(k)^-1)_ij,   H_ij = d potential_i / d u_j, equipartition of the
 * energy's second-order expansion; for one field kT / V / (f'' + kappa k^2), the limit of Cook (Acta Metall.
 * 18 (1970) 297) for long times. */
#include "core/motion/waves.h"

#include <lapacke.h>
#include <math.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct draw {
    mt_waves waves;
    int wanted;   /* row of the wanted field */
    double scale; /* root of kT / V */
    uint64_t seed;
    mt_complex *h; /* [n * n] */
    mt_complex *z; /* [n] */
} draw;

/* H = C C^*; C^-* xi has the covariance H^-1. All fields of a seed are drawn from one set of xi, so that they
 * belong together. */
static mt_status draw_mode(draw *x, const double k[3], uint64_t mode, bool complex_values, mt_complex *value,
                           mt_error *err) {
    int n = x->waves.n;
    mt_status st = mt_wave_matrix(&x->waves, k, x->h, err);
    if (st) return st;
    if (LAPACKE_zpotrf(LAPACK_ROW_MAJOR, 'L', n, x->h, n) != 0)
        return mt_fail(
            err, MT_EINPUT,
            "there are no equilibrium fluctuations about this state: it is not stable against waves "
            "of wavenumber %.6g, which would grow; choose a temperature and mean where `mottle "
            "plan` finds it stable",
            sqrt(k[0] * k[0] + k[1] * k[1] + k[2] * k[2]));
    for (int i = 0; i < n; i++) {
        double xi[2];
        mt_random_fill(MT_RANDOM_NORMAL, x->seed, 2 * mode, 2, 0, 1 + (uint32_t)i, xi);
        x->z[i] = complex_values ? (xi[0] + I * xi[1]) * sqrt(0.5) : xi[0];
    }
    LAPACKE_ztrtrs(LAPACK_ROW_MAJOR, 'L', 'C', 'N', n, 1, x->h, n, x->z, 1);
    *value = x->scale * x->z[x->wanted];
    return MT_OK;
}

/* The Nyquist mode is not there, and mode 0, the mean, is the script's own. */
static bool drawn(const mt_spectrum *s, const int mode[3]) {
    bool zero = true;
    for (int a = 0; a < 3; a++) {
        int n = s->grid->n[a];
        if (s->grid->wall[a] == MT_PERIODIC && n > 1 && n % 2 == 0 && mode[a] == n / 2) return false;
        zero = zero && mode[a] == 0;
    }
    return !zero;
}

/* A cosine of amplitude u has the mean square u^2 / 2 only. Where k and -k are both stored (mode 0 of the
 * half axis) they are averaged afterwards, which halves the variance of two independent values. */
static double mode_scale(const mt_spectrum *s, const int mode[3]) {
    double square = 1;
    for (int a = 0; a < s->grid->dim; a++)
        if (s->grid->wall[a] == MT_MIRROR && mode[a] > 0) square *= 2;
    if (s->half >= 0 && mode[s->half] == 0) square *= 2;
    return sqrt(square);
}

static mt_status fill(draw *x, const mt_spectrum *s, double *spectrum, mt_error *err) {
    mt_status st = MT_OK;
    for (size_t j = 0; j < s->columns && !st; j++) {
        int mode[3];
        mt_spectrum_column(s, j, mode);
        for (int i = 0; i < s->length && !st; i++) {
            double k[3] = {0, 0, 0}, *to = spectrum + j * s->stride + (size_t)i * (s->complex ? 2 : 1);
            mt_complex v = 0;
            mode[s->outer] = i;
            if (!drawn(s, mode)) continue;
            for (int a = 0; a < s->grid->dim; a++) k[a] = s->k[a][mode[a]];
            st = draw_mode(x, k, j * (size_t)s->length + (size_t)i, s->complex, &v, err);
            v *= mode_scale(s, mode);
            to[0] = creal(v);
            if (s->complex) to[1] = cimag(v);
        }
    }
    if (!st) mt_spectrum_symmetrise(s, spectrum);
    return st;
}

static mt_status make(draw *x, mt_model *m, double *out, mt_error *err) {
    const mt_spectrum *s = mt_sweeper_spectrum(m->sweeper);
    double *spectrum = NULL, *work = NULL;
    size_t n = (size_t)x->waves.n;
    mt_status st = mt_new(&spectrum, s->doubles, sizeof(double), "fluctuations", err);
    if (!st) st = mt_new(&work, mt_sweeper_work_doubles(m->sweeper), sizeof(double), "fluctuations", err);
    if (!st) st = mt_new(&x->h, n * n, sizeof *x->h, "fluctuations", err);
    if (!st) st = mt_new(&x->z, n, sizeof *x->z, "fluctuations", err);
    if (!st) st = fill(x, s, spectrum, err);
    if (!st) st = mt_transform_inverse(m->sweeper, spectrum, 0, out, work, err);
    mt_free(spectrum), mt_free(work), mt_free(x->h), mt_free(x->z);
    return st;
}

mt_status mt_model_fluctuations(mt_model *m, const mt_field *field, const double mean[], double kT,
                                double time, uint64_t seed, double *out, mt_error *err) {
    draw x = {.wanted = -1, .seed = seed};
    if (!(kT >= 0) || isinf(kT))
        return mt_fail(err, MT_EINPUT, "the thermal energy is %.6g; it has to be positive", kT);
    x.scale = sqrt(kT / m->grid->volume);
    mt_status st = mt_waves_begin(&x.waves, m, true, mean, time, err);
    for (int i = 0; i < x.waves.n; i++)
        if (m->mover[x.waves.field[i]].field == field) x.wanted = i;
    if (!st && x.wanted < 0)
        st = mt_fail(err, MT_EINPUT, "field '%s' has no potential in this model", field->symbol->name);
    if (!st) st = make(&x, m, out, err);
    mt_waves_end(&x.waves);
    return st;
}
