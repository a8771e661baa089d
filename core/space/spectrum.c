#include "core/space/spectrum.h"

void mt_spectrum_column(const mt_spectrum *s, size_t j, int modes[3]) {
    for (int a = 0; a < 3; a++) {
        modes[a] = 0;
        if (a == s->outer) continue;
        modes[a] = (int)(j % (size_t)s->modes[a]);
        j /= (size_t)s->modes[a];
    }
}

/* Mode number of -k along an axis. */
static int opposite(const mt_spectrum *s, int axis, int mode) {
    bool full = s->grid->wall[axis] == MT_PERIODIC && axis != s->half;
    return full && mode ? s->grid->n[axis] - mode : mode;
}

static size_t column_of(const mt_spectrum *s, const int mode[3]) {
    size_t j = 0;
    for (int a = 2; a >= 0; a--)
        if (a != s->outer) j = j * (size_t)s->modes[a] + (size_t)mode[a];
    return j;
}

static void make_conjugates(double *a, double *b) {
    double re = 0.5 * (a[0] + b[0]), im = 0.5 * (a[1] - b[1]);
    a[0] = b[0] = re;
    a[1] = im;
    b[1] = -im;
}

void mt_spectrum_symmetrise(const mt_spectrum *s, double *u) {
    int mode[3], other[3];
    if (s->half < 0) return;
    int length = s->half == s->outer ? 1 : s->length; /* of the half axis only mode 0 is its own opposite */
    for (size_t j = 0; j < s->columns; j++) {
        mt_spectrum_column(s, j, mode);
        if (mode[s->half] != 0) continue;
        for (int a = 0; a < 3; a++) other[a] = opposite(s, a, mode[a]);
        size_t partner = column_of(s, other);
        if (partner < j) continue;
        for (int m = 0; m < length; m++) {
            int q = opposite(s, s->outer, m);
            if (partner == j && q < m) continue;
            make_conjugates(u + j * s->stride + 2 * (size_t)m, u + partner * s->stride + 2 * (size_t)q);
        }
    }
}
