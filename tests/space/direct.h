/* The transforms of spectrum.h as direct sums in long double, O(n) per value and axis: the oracle of the
 * room. Also the scene that most tests of the room need. */
#ifndef MT_TESTS_SPACE_DIRECT_H
#define MT_TESTS_SPACE_DIRECT_H

#include "core/space/sweep.h"
#include "tests/support.h"

typedef struct box {
    mt_grid *grid;
    mt_pool *pool; /* NULL for one thread */
    mt_sweeper *sweeper;
    const mt_spectrum *s;
    mt_error err;
} box;

/* walls: bit a set means mirror along axis a. */
void box_open(box *b, int dim, const int n[3], unsigned walls, int threads);
void box_close(box *b);

/* Zeroed arrays, to be freed with mt_free. */
double *box_field(const box *b);
double *box_spectral(const box *b);
double *box_work(const box *b);

void box_forward(box *b, const double *field, mt_parities parity, double *spectral);
void box_inverse(box *b, const double *spectral, mt_parities parity, double *field);

/* n values in [-1, 1) that depend on seed only. */
void scatter_values(double *a, size_t n, unsigned seed);

/* Where in a spectral array the value of mode m[] is stored: its first double. */
size_t mode_offset(const mt_spectrum *s, const int m[3]);

/* True where a mode is stored as 0: Nyquist of a periodic axis, mode 0 of an odd one. */
bool mode_dropped(const mt_spectrum *s, mt_parities parity, const int m[3]);

/* Visits all stored modes: m is set to the next one; start with first_mode. */
void first_mode(int m[3]);
bool next_mode(const mt_spectrum *s, int m[3]);

void direct_forward(const mt_spectrum *s, const double *field, mt_parities parity, double *spectral);
void direct_inverse(const mt_spectrum *s, const double *spectral, mt_parities parity, double *field);

/* Both spectral arrays agree at every stored mode within atol; padding is not looked at. */
void check_same_modes(const mt_spectrum *s, const double *found, const double *expected, double atol);
void check_same_values(size_t n, const double *found, const double *expected, double atol);

#endif
