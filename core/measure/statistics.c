#include "core/measure/statistics.h"

#include <math.h>

#include "core/base/memory.h"

#define CLASSES 256
#define SPREAD 3.0 /* standard deviation of the smoothing, classes */
#define REACH 9    /* where the smoothing ends */

static const double pi = 3.14159265358979323846;

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
    if (isnan(sum)) {
        out->minimum = out->maximum = NAN;
        out->minimum_cell = out->maximum_cell = 0;
    }
}

/* --- histogram --------------------------------------------------------------------------------------------
 *
 * Places are in classes from the minimum; class c holds c .. c + 1. */

typedef struct histogram {
    double count[CLASSES]; /* cells */
    double place[CLASSES]; /* mean place of the cells */
    double smooth[CLASSES];
} histogram;

static double kernel(double d) {
    return exp(-d * d / (2 * SPREAD * SPREAD));
}

static void fill(const mt_grid *g, const double *a, double from, double range, histogram *h) {
    for (size_t i = 0; i < g->cells; i++) {
        double x = (a[i] - from) / range * CLASSES;
        int c = x < CLASSES ? (int)x : CLASSES - 1;
        h->count[c]++;
        h->place[c] += x;
    }
    for (int c = 0; c < CLASSES; c++)
        if (h->count[c] > 0) h->place[c] /= h->count[c];
}

static void smooth(histogram *h) {
    double weight[REACH + 1], total = 0;
    for (int d = 0; d <= REACH; d++) {
        weight[d] = kernel(d);
        total += d ? 2 * weight[d] : weight[d];
    }
    for (int i = 0; i < CLASSES; i++)
        for (int d = -REACH; d <= REACH; d++)
            if (i + d >= 0 && i + d < CLASSES)
                h->smooth[i] += h->count[i + d] * weight[d < 0 ? -d : d] / total;
}

static bool is_peak(const double *s, int i) {
    return (i == 0 || s[i] >= s[i - 1]) && (i == CLASSES - 1 || s[i] > s[i + 1]) && s[i] > 0;
}

static double valley(const double *s, int i, int j) {
    double low = s[i];
    for (int k = i < j ? i : j; k <= (i < j ? j : i); k++) low = fmin(low, s[k]);
    return low;
}

/* A smoothed count s of independent cells has variance s / (2 sqrt(pi) SPREAD): the sum of squared weights.
 */
static bool parted(double peak, double low) {
    double deviation = sqrt((peak + low) / (2 * sqrt(pi) * SPREAD));
    return low < 0.7 * peak && peak - low > 6 * deviation;
}

static int first_peak(const double *s) {
    int best = 0;
    for (int i = 1; i < CLASSES; i++)
        if (s[i] > s[best]) best = i;
    return best;
}

static int second_peak(const double *s, int first) {
    int best = -1;
    for (int i = 0; i < CLASSES; i++) {
        if (i == first || !is_peak(s, i) || (best >= 0 && s[i] <= s[best])) continue;
        if (parted(s[i], valley(s, i, first))) best = i;
    }
    return best;
}

/* Mean shift from the middle of class i to the mode of the estimate without classes. */
static double mode_near(const histogram *h, int i) {
    double x = i + 0.5;
    for (int step = 0; step < 100; step++) {
        double sum = 0, weight = 0;
        for (int c = 0; c < CLASSES; c++) {
            double w = h->count[c] > 0 ? h->count[c] * kernel(h->place[c] - x) : 0;
            sum += w * h->place[c];
            weight += w;
        }
        double next = sum / weight;
        if (fabs(next - x) < 1e-12 * CLASSES) return next;
        x = next;
    }
    return x;
}

static void read_peaks(const histogram *h, double from, double range, mt_peaks *out) {
    int first = first_peak(h->smooth), second = second_peak(h->smooth, first);
    if (second < 0) return;
    double p = mode_near(h, first), q = mode_near(h, second);
    out->two = true;
    out->low = from + fmin(p, q) * range / CLASSES;
    out->high = from + fmax(p, q) * range / CLASSES;
    out->amplitude = out->high - out->low;
    out->level = 0.5 * (out->low + out->high);
}

mt_status mt_peaks_of(const mt_grid *g, const double *a, mt_peaks *out, mt_error *err) {
    mt_statistics st;
    histogram *h;
    mt_statistics_of(g, a, &st);
    double half = sqrt(2 * st.variance), range = st.maximum - st.minimum;
    *out = (mt_peaks){false, st.mean - half, st.mean + half, 2 * half, st.mean};
    if (range == 0) *out = (mt_peaks){false, a[0], a[0], 0, a[0]};
    if (!(range > 0) || isinf(range)) return MT_OK;
    mt_status status = mt_new(&h, 1, sizeof *h, "a histogram", err);
    if (status) return status;
    fill(g, a, st.minimum, range, h);
    smooth(h);
    read_peaks(h, st.minimum, range, out);
    mt_free(h);
    return MT_OK;
}

/* Places are in classes; the moments are those of the classes' middles. */
static double best_bound(const double count[CLASSES]) {
    double total = 0, moment = 0, below = 0, below_moment = 0, best = -1, first = 0, last = 0;
    for (int c = 0; c < CLASSES; c++) total += count[c], moment += count[c] * (c + 0.5);
    for (int c = 0; c + 1 < CLASSES; c++) {
        below += count[c], below_moment += count[c] * (c + 0.5);
        double above = total - below;
        if (!(below > 0) || !(above > 0)) continue;
        double apart = below_moment / below - (moment - below_moment) / above;
        double between = below * above * apart * apart;
        if (between > best) first = c + 1, best = between;
        if (between == best) last = c + 1;
    }
    return 0.5 * (first + last);
}

double mt_otsu_level(const mt_grid *g, const double *a) {
    mt_statistics st;
    double count[CLASSES] = {0};
    mt_statistics_of(g, a, &st);
    double range = st.maximum - st.minimum;
    if (range == 0) return a[0];
    if (!(range > 0) || isinf(range)) return NAN;
    for (size_t i = 0; i < g->cells; i++) {
        double x = (a[i] - st.minimum) / range * CLASSES;
        count[x < CLASSES ? (int)x : CLASSES - 1]++;
    }
    return st.minimum + best_bound(count) * range / CLASSES;
}

double mt_phase_fraction(const mt_grid *g, const double *a, double level, bool above) {
    size_t n = 0;
    for (size_t i = 0; i < g->cells; i++) n += a[i] > level;
    return (double)(above ? n : g->cells - n) / (double)g->cells;
}
