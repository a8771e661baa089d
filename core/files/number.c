#include "core/files/number.h"

#include <locale.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* The C library prints and reads with the locale's decimal point; files always use '.'. */
static char decimal_point(void) {
    return localeconv()->decimal_point[0];
}

static void swap_point(char *text, char from, char to) {
    char *at = from == to ? NULL : strchr(text, from);
    if (at) *at = to;
}

int mt_number_exact(double x, char text[MT_NUMBER_ROOM]) {
    if (isnan(x)) return snprintf(text, MT_NUMBER_ROOM, "nan");
    if (isinf(x)) return snprintf(text, MT_NUMBER_ROOM, x < 0 ? "-inf" : "inf");
    int n = 0;
    for (int digits = 15; digits <= 17; digits++) {
        n = snprintf(text, MT_NUMBER_ROOM, "%.*g", digits, x);
        if (strtod(text, NULL) == x) break;
    }
    swap_point(text, decimal_point(), '.');
    return n;
}

static bool is_word(const char *text, double *x) {
    if (!strcmp(text, "nan"))
        *x = NAN;
    else if (!strcmp(text, "inf") || !strcmp(text, "-inf"))
        *x = text[0] == '-' ? -INFINITY : INFINITY;
    else
        return false;
    return true;
}

bool mt_number_read(const char *text, size_t n, double *x) {
    char copy[128];
    while (n && (*text == ' ' || *text == '\t')) text++, n--;
    while (n && (text[n - 1] == ' ' || text[n - 1] == '\t')) n--;
    if (n == 0 || n >= sizeof copy || memchr(text, 0, n)) return false;
    memcpy(copy, text, n);
    copy[n] = 0;
    if (is_word(copy, x)) return true;
    if (strspn(copy, "0123456789.eE+-") != n) return false; /* no hexadecimal, no "infinity" */
    swap_point(copy, '.', decimal_point());
    char *end;
    double value = strtod(copy, &end);
    if (end != copy + n || isinf(value)) return false;
    *x = value;
    return true;
}

/* 1, 2 or 5 times 10^e; powers of ten below one are divided by, which rounds correctly where multiplying does
 * not. */
static double nice(int digit, int e) {
    return e < 0 ? digit / pow(10, -e) : digit * pow(10, e);
}

double mt_number_round_down(double x) {
    static const int digits[] = {5, 2, 1};
    for (int e = (int)floor(log10(x)) + 1;; e--)
        for (int i = 0; i < 3; i++)
            if (nice(digits[i], e) <= x * (1 + 1e-12)) return nice(digits[i], e);
}

/* The 1-2-5 number at or above x: the one below 2.5 times x, which is never two steps up. */
static double step_above(double x) {
    double below = mt_number_round_down(x);
    return below >= x * (1 - 1e-12) ? below : mt_number_round_down(below * 2.5);
}

int mt_number_ticks(double low, double high, int wanted, double *first, double *step) {
    if (!(low < high) || !isfinite(high - low) || wanted < 1) return 0;
    double d = step_above((high - low) / wanted);
    if (!(d > 0) || d < 4e-16 * fmax(fabs(low), fabs(high))) return 0;
    double a = ceil(low / d - 1e-9), b = floor(high / d + 1e-9);
    *first = a * d;
    *step = d;
    return b < a ? 0 : (int)(b - a) + 1;
}

void mt_number_tick(double x, double step, char text[MT_NUMBER_ROOM]) {
    int places = step > 0 ? -(int)floor(log10(step) + 1e-9) : 0;
    if (fabs(x) < 1e-6 * step) x = 0;
    int size = x == 0 ? 0 : (int)floor(log10(fabs(x)) + 1e-12);
    if (x != 0 && (places > 5 + (size > -3) * 5 || size > 5))
        snprintf(text, MT_NUMBER_ROOM, "%.*e",
                 size + places > 0 ? (size + places < 15 ? size + places : 15) : 0, x);
    else
        snprintf(text, MT_NUMBER_ROOM, "%.*f", places > 0 ? places : 0, x);
    swap_point(text, decimal_point(), '.');
}

typedef struct prefix {
    double size;
    const char *text;
} prefix;

/* Three digits and the largest unit that the number holds at least once. */
static void with_unit(double x, const prefix unit[], int n, char text[MT_NUMBER_ROOM]) {
    int i = 0;
    while (i < n - 1 && fabs(x) * (1 + 1e-9) < unit[i].size) i++;
    snprintf(text, MT_NUMBER_ROOM, "%.3g %s", x / unit[i].size, unit[i].text);
    swap_point(text, decimal_point(), '.');
}

void mt_number_length(double metres, char text[MT_NUMBER_ROOM]) {
    static const prefix unit[] = {{1, "m"}, {1e-3, "mm"}, {1e-6, "\xC2\xB5m"}, {1e-9, "nm"}, {1e-12, "pm"}};
    with_unit(metres, unit, 5, text);
}

void mt_number_time(double seconds, char text[MT_NUMBER_ROOM]) {
    static const prefix unit[] = {{172800, NULL}, {3600, "h"},  {60, "min"},
                                  {1, "s"},       {1e-3, "ms"}, {1e-6, "\xC2\xB5s"}};
    if (seconds == 0) {
        snprintf(text, MT_NUMBER_ROOM, "0 s");
    } else if (fabs(seconds) >= unit[0].size) { /* days only from two on: "26 h" is how the trade says it */
        snprintf(text, MT_NUMBER_ROOM, "%.3g d", seconds / 86400);
        swap_point(text, decimal_point(), '.');
    } else {
        with_unit(seconds, unit + 1, 5, text);
    }
}
