/* FFTW's definitions (FFTW manual, "1d Real-even DFTs" and "1d Real-odd DFTs"):
 *   REDFT10  Y_k = 2 sum_j x_j cos(pi k (j+1/2) / n)          REDFT01  x_j = Y_0 + 2 sum_{k>=1} Y_k cos(pi k
 * (j+1/2)/n) RODFT10  Y_k = 2 sum_j x_j sin(pi (k+1) (j+1/2) / n)      RODFT01  x_j = (-1)^j Y_{n-1} + 2
 * sum_{k<n-1} Y_k sin(...) so cos coefficients are Y_0/(2n), Y_k/n, and the coefficient of sine mode m is
 * Y_{m-1}/n, stored at m. */
#include "core/space/line.h"

#include <pthread.h>
#include <string.h>

#include "core/base/memory.h"

static pthread_mutex_t planner = PTHREAD_MUTEX_INITIALIZER;
void mt_plan_lock(void) {
    pthread_mutex_lock(&planner);
}
void mt_plan_unlock(void) {
    pthread_mutex_unlock(&planner);
}

size_t mt_line_room(const mt_line *line) {
    size_t complex_values = mt_round_up(2 * (size_t)line->n + 4, 8);
    return line->kind == MT_LINE_MIRROR && line->complex
               ? complex_values + 2 * mt_round_up((size_t)line->n, 8)
               : complex_values;
}

static void plan_mirror(mt_line *line, double *buf) {
    static const fftw_r2r_kind to[2] = {FFTW_REDFT10, FFTW_RODFT10}, back[2] = {FFTW_REDFT01, FFTW_RODFT01};
    for (int odd = 0; odd < 2; odd++) {
        line->forward[odd] = fftw_plan_r2r_1d(line->n, buf, buf, to[odd], FFTW_ESTIMATE);
        line->inverse[odd] = fftw_plan_r2r_1d(line->n, buf, buf, back[odd], FFTW_ESTIMATE);
    }
}

mt_status mt_line_plan(mt_line *line, mt_line_kind kind, int n, bool complex, mt_error *err) {
    double *buf;
    *line =
        (mt_line){.kind = kind, .n = n, .modes = kind == MT_LINE_HALF ? n / 2 + 1 : n, .complex = complex};
    if (kind == MT_LINE_NONE) return MT_OK;
    mt_status st = mt_new(&buf, mt_line_room(line), sizeof *buf, "a line", err);
    if (st) return st;
    fftw_complex *z = (fftw_complex *)buf;
    mt_plan_lock();
    if (kind == MT_LINE_HALF) {
        line->forward[0] = fftw_plan_dft_r2c_1d(n, buf, z, FFTW_ESTIMATE);
        line->inverse[0] = fftw_plan_dft_c2r_1d(n, z, buf, FFTW_ESTIMATE);
    } else if (kind == MT_LINE_FULL) {
        line->forward[0] = fftw_plan_dft_1d(n, z, z, FFTW_FORWARD, FFTW_ESTIMATE);
        line->inverse[0] = fftw_plan_dft_1d(n, z, z, FFTW_BACKWARD, FFTW_ESTIMATE);
    } else
        plan_mirror(line, buf);
    mt_plan_unlock();
    mt_free(buf);
    bool sines = kind != MT_LINE_MIRROR || (line->forward[1] && line->inverse[1]);
    if (!line->forward[0] || !line->inverse[0] || !sines)
        return mt_fail(err, MT_ESYSTEM, "FFTW has no plan for a line of %d cells", n);
    return MT_OK;
}

void mt_line_free(mt_line *line) {
    mt_plan_lock();
    for (int odd = 0; odd < 2; odd++) {
        if (line->forward[odd]) fftw_destroy_plan(line->forward[odd]);
        if (line->inverse[odd]) fftw_destroy_plan(line->inverse[odd]);
    }
    mt_plan_unlock();
    memset(line, 0, sizeof *line);
}

void mt_mirror_to_modes(int n, bool odd, double *a) {
    double s = 1.0 / n;
    if (odd) {
        for (int m = n - 1; m > 0; m--) a[m] = s * a[m - 1];
        a[0] = 0;
        return;
    }
    a[0] *= 0.5 * s;
    for (int m = 1; m < n; m++) a[m] *= s;
}

void mt_mirror_from_modes(int n, bool odd, double *a) {
    if (odd) {
        for (int m = 1; m < n; m++) a[m - 1] = 0.5 * a[m];
        a[n - 1] = 0;
        return;
    }
    for (int m = 1; m < n; m++) a[m] *= 0.5;
}

static double *split(const mt_line *line, const double *buf, double *scratch) {
    size_t room = mt_round_up((size_t)line->n, 8);
    for (int i = 0; i < line->n; i++) {
        scratch[i] = buf[2 * i];
        scratch[room + (size_t)i] = buf[2 * i + 1];
    }
    return scratch + room;
}

static void join(const mt_line *line, double *buf, const double *re, const double *im) {
    for (int i = 0; i < line->n; i++) {
        buf[2 * i] = re[i];
        buf[2 * i + 1] = im[i];
    }
}

static void mirror_one(const mt_line *line, bool odd, bool forward, double *a) {
    if (forward) {
        fftw_execute_r2r(line->forward[odd], a, a);
        mt_mirror_to_modes(line->n, odd, a);
    } else {
        mt_mirror_from_modes(line->n, odd, a);
        fftw_execute_r2r(line->inverse[odd], a, a);
    }
}

static void mirror(const mt_line *line, bool odd, bool forward, double *buf) {
    if (!line->complex) {
        mirror_one(line, odd, forward, buf);
        return;
    }
    double *re = buf + mt_round_up(2 * (size_t)line->n + 4, 8), *im = split(line, buf, re);
    mirror_one(line, odd, forward, re);
    mirror_one(line, odd, forward, im);
    join(line, buf, re, im);
}

static void drop_nyquist(const mt_line *line, double *buf) {
    if (line->n % 2 == 0) buf[line->n] = buf[line->n + 1] = 0; /* mode n/2, complex */
}

void mt_line_forward(const mt_line *line, bool odd, double *buf) {
    fftw_complex *z = (fftw_complex *)buf;
    switch (line->kind) {
    case MT_LINE_NONE:
        if (odd) buf[0] = 0, buf[line->complex] = 0;
        return;
    case MT_LINE_HALF:
        fftw_execute_dft_r2c(line->forward[0], buf, z);
        drop_nyquist(line, buf);
        return;
    case MT_LINE_FULL:
        fftw_execute_dft(line->forward[0], z, z);
        drop_nyquist(line, buf);
        return;
    case MT_LINE_MIRROR: mirror(line, odd, true, buf); return;
    }
}

void mt_line_inverse(const mt_line *line, bool odd, double *buf) {
    fftw_complex *z = (fftw_complex *)buf;
    switch (line->kind) {
    case MT_LINE_NONE:
        if (odd) buf[0] = 0, buf[line->complex] = 0;
        return;
    case MT_LINE_HALF:
        drop_nyquist(line, buf);
        fftw_execute_dft_c2r(line->inverse[0], z, buf);
        return;
    case MT_LINE_FULL:
        drop_nyquist(line, buf);
        fftw_execute_dft(line->inverse[0], z, z);
        return;
    case MT_LINE_MIRROR: mirror(line, odd, false, buf); return;
    }
}
