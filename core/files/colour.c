#include "core/files/colour.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Five control points at 0, 1/4, ... 1: hue (degrees) and chroma in OKLab; and the lightness L* at the ends,
 * or at the ends and in the middle of a diverging map. Chosen inside the sRGB gamut by looking at them. */
typedef struct recipe {
    const char *name;
    double hue[5], chroma[5];
    double dark, light;
    bool diverging;
} recipe;

static const recipe recipes[MT_MAP_COUNT] = {
    [MT_MAP_SLATE] = {"slate", {265, 250, 215, 130, 92}, {0.060, 0.085, 0.055, 0.050, 0.075}, 14, 94, false},
    [MT_MAP_EMBER] = {"ember", {12, 22, 38, 68, 100}, {0.060, 0.150, 0.180, 0.150, 0.070}, 8, 96, false},
    [MT_MAP_FERN] = {"fern", {175, 158, 145, 130, 112}, {0.040, 0.085, 0.125, 0.140, 0.070}, 14, 95, false},
    [MT_MAP_TIDE] = {"tide", {255, 250, 0, 62, 48}, {0.120, 0.085, 0.000, 0.085, 0.120}, 36, 95, true},
    [MT_MAP_GREY] = {"grey", {0, 0, 0, 0, 0}, {0, 0, 0, 0, 0}, 5, 97, false},
};

const char *mt_map_name(mt_map map) {
    return (unsigned)map < MT_MAP_COUNT ? recipes[map].name : "?";
}

mt_status mt_map_find(const char *name, mt_map *map, mt_error *err) {
    MT_REQUIRE(name && map, err);
    char names[80] = "";
    for (int i = 0; i < MT_MAP_COUNT; i++) {
        if (!strcmp(recipes[i].name, name)) {
            *map = (mt_map)i;
            return MT_OK;
        }
        size_t n = strlen(names);
        snprintf(names + n, sizeof names - n, "%s%s", n ? ", " : "", recipes[i].name);
    }
    return mt_fail(err, MT_EINPUT, "there is no colour map '%.40s': choose one of %s", name, names);
}

/* OKLab to linear sRGB: Ottosson 2020 (bottosson.github.io/posts/oklab). */
static void linear_of(double L, double a, double b, double rgb[3]) {
    double l = pow(L + 0.3963377774 * a + 0.2158037573 * b, 3),
           m = pow(L - 0.1055613458 * a - 0.0638541728 * b, 3),
           s = pow(L - 0.0894841775 * a - 1.2914855480 * b, 3);
    rgb[0] = 4.0767416621 * l - 3.3077115913 * m + 0.2309699292 * s;
    rgb[1] = -1.2684380046 * l + 2.6097574011 * m - 0.3413193965 * s;
    rgb[2] = -0.0041960863 * l - 0.7034186147 * m + 1.7076147010 * s;
}

/* CIELAB lightness from linear sRGB; weights of IEC 61966-2-1 (D65). */
static double lightness(const double rgb[3]) {
    double y = 0.2126729 * rgb[0] + 0.7151522 * rgb[1] + 0.0721750 * rgb[2];
    return y > 216.0 / 24389 ? 116 * cbrt(y) - 16 : y * 24389.0 / 27;
}

static bool in_gamut(const double rgb[3]) {
    for (int i = 0; i < 3; i++)
        if (rgb[i] < -1e-4 || rgb[i] > 1 + 1e-4) return false;
    return true;
}

/* The colour of lightness `target` with these a, b: bisection for OKLab's L, since L* grows with it. */
static void with_lightness(double target, double a, double b, double rgb[3]) {
    double low = 0, high = 1.1;
    for (int i = 0; i < 40; i++) {
        double mid = 0.5 * (low + high);
        linear_of(mid, a, b, rgb);
        if (lightness(rgb) < target)
            low = mid;
        else
            high = mid;
    }
}

/* Cubic through the control points (Catmull & Rom 1974), ends doubled. */
static double along(const double p[5], double t) {
    int i = t >= 1 ? 3 : (int)(4 * t);
    double u = 4 * t - i, p0 = p[i ? i - 1 : 0], p1 = p[i], p2 = p[i + 1], p3 = p[i < 3 ? i + 2 : 4];
    return p1 + 0.5 * u * (p2 - p0 + u * (2 * p0 - 5 * p1 + 4 * p2 - p3 + u * (3 * (p1 - p2) + p3 - p0)));
}

/* Diverging, s = 0 at an end, 1 in the middle. Hue: to its second point half way, then constant. Chroma: the
 * parabola through both points that vanishes in the middle. */
static double half_hue(double end, double half, double s) {
    return s < 0.5 ? end + (half - end) * 2 * s : half;
}
static double half_chroma(double end, double half, double s) {
    return (1 - s) * (end + s * (4 * half - 2 * end));
}

static uint8_t to_byte(double x) {
    if (x < 0) x = 0;
    if (x > 1) x = 1;
    double v = x <= 0.0031308 ? 12.92 * x : 1.055 * pow(x, 1 / 2.4) - 0.055;
    return (uint8_t)lrint(255 * v);
}

static void colour_at(const recipe *r, double t, uint8_t out[3]) {
    int end = t < 0.5 ? 0 : 4, half = t < 0.5 ? 1 : 3;
    double up = r->diverging ? 1 - fabs(2 * t - 1) : t, rgb[3];
    double hue = r->diverging ? half_hue(r->hue[end], r->hue[half], up) : along(r->hue, t);
    double chroma = r->diverging ? half_chroma(r->chroma[end], r->chroma[half], up) : along(r->chroma, t);
    hue *= acos(-1) / 180;
    for (int i = 0; i < 60;
         i++, chroma *= 0.97) { /* a last resort: the points are chosen so that it hardly acts */
        with_lightness(r->dark + (r->light - r->dark) * up, chroma * cos(hue), chroma * sin(hue), rgb);
        if (in_gamut(rgb)) break;
    }
    for (int i = 0; i < 3; i++) out[i] = to_byte(rgb[i]);
}

void mt_map_colours(mt_map map, uint8_t rgb[256][3]) {
    const recipe *r = &recipes[(unsigned)map < MT_MAP_COUNT ? map : MT_MAP_GREY];
    for (int i = 0; i < 256; i++) colour_at(r, i / 255.0, rgb[i]);
}
