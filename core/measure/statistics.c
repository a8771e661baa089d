#include "core/measure/statistics.h"

#include <math.h>

#include "core/base/memory.h"

#define CLASSES 256
#define REACH 9 /* three standard deviations of the smoothing */

static void extremes(const mt_grid *g, const double *a, mt_statistics *out) {
    out->minimum = out->maximum = a[0];
    out->minimum_cell = out->maximum_cell = 0;
    for (size_t i = 1; i < g->cells; i++) {
        if (a[i] < out->minimum) out->minimum = a[i], out->minimum_cell = i;
        if (a[i] > out->maximum) out->maximum = a[i], out->maximum_cell = i;
    }
}

static double sum_of_rows(const mt_grid *g, const double *a, double shift, bool squared) {
    size_t nx = (size_t)g->n[0];
    double sum = 0;
    for (size_t r = 0; r < g->cells; r += nx) {
        double row = 0;
        for (size_t i = r; i < r + nx; i++) row += squared ? (a[i] - shift) * (a[i] - shift) : a[i];
        sum += row;
    }
    return sum;
}

void mt_statistics_of(const mt_grid *g, const double *a, mt_statistics *out) {
    double sum = sum_of_rows(g, a, 0, false);
    out->mean = sum / (double)g->cells;
    out->integral = sum * g->cell_volume;
    out->variance = sum_of_rows(g, a, out->mean, true) / (double)g->cells;
    extremes(g, a, out);
    if (isnan(sum)) out->minimum = out->maximum = NAN;
}

/* --- histogram
 * -----------------------------------------------------------------------------------------------------------------
 */

static void smooth(const double *count, double *s) {
    double weight[REACH + 1], total = 0;
    for (int d = 0; d <= REACH; d++) {
        weight[d] = exp(-d * d / 18.0);
        total += d ? 2 * weight[d] : weight[d];
    }
    for (int i = 0; i < CLASSES; i++) {
        s[i] = 0;
        for (int d = -REACH; d <= REACH; d++)
            if (i + d >= 0 && i + d < CLASSES) s[i] += count[i + d] * weight[d < 0 ? -d : d] / total;
    }
}

static bool is_peak(const double *s, int i) {
    return (i == 0 || s[i] >= s[i - 1]) && (i == CLASSES - 1 || s[i] > s[i + 1]) && s[i] > 0;
}

static double valley(const double *s, int i, int j) {
    double low = s[i];
    for (int k = i < j ? i : j; k <= (i < j ? j : i); k++) low = fmin(low, s[k]);
    return low;
}

/* Place of the maximum in classes, by a parabola through three smoothed counts. */
static double refined(const double *s, int i) {
    if (i == 0 || i == CLASSES - 1) return i + 0.5;
    double bend = s[i - 1] - 2 * s[i] + s[i + 1];
    return i + 0.5 + (bend < 0 ? 0.5 * (s[i - 1] - s[i + 1]) / bend : 0);
}

static int second_peak(const double *s, int first) {
    int best = -1;
    for (int i = 0; i < CLASSES; i++) {
        if (i == first || !is_peak(s, i) || (best >= 0 && s[i] <= s[best])) continue;
        if (valley(s, i, first) < 0.7 * s[i]) best = i;
    }
    return best;
}

mt_status mt_peaks_of(const mt_grid *g, const double *a, mt_peaks *out, mt_error *err) {
    mt_statistics st;
    double *count;
    int first = 0;
    mt_statistics_of(g, a, &st);
    double half = sqrt(2 * st.variance), range = st.maximum - st.minimum;
    *out = (mt_peaks){false, st.mean - half, st.mean + half, 2 * half, st.mean};
    if (!(range > 0) || isinf(range)) return MT_OK;
    mt_status status = mt_new(&count, 2 * CLASSES, sizeof *count, "a histogram", err);
    if (status) return status;
    double *s = count + CLASSES;
    for (size_t i = 0; i < g->cells; i++) {
        int c = (int)((a[i] - st.minimum) / range * CLASSES);
        count[c < CLASSES ? c : CLASSES - 1]++;
    }
    smooth(count, s);
    for (int i = 0; i < CLASSES; i++)
        if (s[i] > s[first]) first = i;
    int second = second_peak(s, first);
    if (second >= 0) {
        int lower = first < second ? first : second, upper = first < second ? second : first;
        out->two = true;
        out->low = st.minimum + refined(s, lower) * range / CLASSES;
        out->high = st.minimum + refined(s, upper) * range / CLASSES;
        out->amplitude = out->high - out->low;
        out->level = 0.5 * (out->low + out->high);
    }
    mt_free(count);
    return MT_OK;
}

double mt_phase_fraction(const mt_grid *g, const double *a, double level, bool above) {
    size_t n = 0;
    for (size_t i = 0; i < g->cells; i++) n += a[i] > level;
    return (double)(above ? n : g->cells - n) / (double)g->cells;
}
