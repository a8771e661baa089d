#include "core/space/spectrum.h"

void mt_spectrum_column(const mt_spectrum *s, size_t j, int modes[3]) {
    for (int a = 0; a < 3; a++) {
        modes[a] = 0;
        if (a == s->outer) continue;
        modes[a] = (int)(j % (size_t)s->modes[a]);
        j /= (size_t)s->modes[a];
    }
}
