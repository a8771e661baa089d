/* Proved: exact numbers read back bit for bit in any locale; ticks are 1-2-5 and inside; labels are what a
 * person writes. */
#include <locale.h>
#include <math.h>
#include <string.h>

#include "tests/support.h"
#include "core/files/number.h"

static void check_round_trip(double x) {
    char text[MT_NUMBER_ROOM];
    double y = 0;
    int n = mt_number_exact(x, text);
    assert_int_equal(n, strlen(text));
    assert_true(mt_number_read(text, (size_t)n, &y));
    assert_memory_equal(&x, &y, sizeof x);
}

static void test_exact(void **state) {
    (void)state;
    uint64_t q = 88172645463325252u;
    for (int i = 0; i < 20000; i++) {
        double x;
        q ^= q << 13, q ^= q >> 7, q ^= q << 17;
        memcpy(&x, &q, sizeof x);
        if (isfinite(x)) check_round_trip(x);
        check_round_trip((double)(q >> 40) / 1000);
    }
    check_round_trip(-0.0);
    check_round_trip(5e-324);
    check_round_trip(1.7976931348623157e308);
    char text[MT_NUMBER_ROOM];
    mt_number_exact(0.1, text);
    assert_string_equal(text, "0.1");
    mt_number_exact(-INFINITY, text);
    assert_string_equal(text, "-inf");
}

static void test_locale(void **state) {
    (void)state;
    const char *comma[] = {"de_DE.UTF-8", "de_DE.utf8", "fr_FR.UTF-8"};
    for (int i = 0; i < 3; i++)
        if (setlocale(LC_NUMERIC, comma[i])) break;
    char text[MT_NUMBER_ROOM];
    mt_number_exact(2.5, text);
    assert_string_equal(text, "2.5");
    check_round_trip(2.5);
    setlocale(LC_NUMERIC, "C");
}

static void test_refused(void **state) {
    (void)state;
    const char *bad[] = {"",    " ",   "1,5", "0x10",  "1e", "1e999", "infinity",
                         "NAN", "1 2", "--1", "1.2.3", "e5", "+"};
    double x = 7;
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++)
        assert_false(mt_number_read(bad[i], strlen(bad[i]), &x));
    assert_false(mt_number_read("1\0002", 3, &x));
    assert_true(mt_number_read(" +1.5E+3\t", 9, &x));
    check_close(x, 1500, 0, 0);
}

static void test_ticks(void **state) {
    (void)state;
    const double ranges[][2] = {{0, 1},         {-3, 7},     {0.41998, 0.42003},
                                {1e-12, 9e-12}, {-2e5, 3e6}, {0.999, 1.0}};
    for (int i = 0; i < 6; i++)
        for (int wanted = 2; wanted <= 20; wanted++) {
            double low = ranges[i][0], high = ranges[i][1], first, step;
            int n = mt_number_ticks(low, high, wanted, &first, &step);
            assert_true(n >= 1 && n <= wanted + 1 && n * 3 >= wanted - 3);
            double slack = 1e-8 * step;
            assert_true(first >= low - slack && first + (n - 1) * step <= high + slack);
            assert_true(first - step < low && first + n * step > high);
            double lead = step / pow(10, floor(log10(step) + 1e-9));
            assert_true(fabs(lead - 1) < 1e-6 || fabs(lead - 2) < 1e-6 || fabs(lead - 5) < 1e-6);
        }
    double a, b;
    assert_int_equal(mt_number_ticks(1, 1, 5, &a, &b), 0);
    assert_int_equal(mt_number_ticks(2, 1, 5, &a, &b), 0);
    assert_int_equal(mt_number_ticks(NAN, 1, 5, &a, &b), 0);
    assert_int_equal(mt_number_ticks(1, nextafter(1, 2), 5, &a, &b), 0);
}

static void test_labels(void **state) {
    (void)state;
    const struct {
        void (*write)(double, char *);
        double x;
        const char *want;
    } cases[] = {{mt_number_length, 50e-9, "50 nm"},  {mt_number_length, 1e-6, "1 \xC2\xB5m"},
                 {mt_number_length, 2e-10, "200 pm"}, {mt_number_length, 0.5, "500 mm"},
                 {mt_number_time, 11520, "3.2 h"},    {mt_number_time, 0, "0 s"},
                 {mt_number_time, 90, "1.5 min"},     {mt_number_time, 259200, "3 d"},
                 {mt_number_time, 0.02, "20 ms"}};
    char text[MT_NUMBER_ROOM];
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        cases[i].write(cases[i].x, text);
        assert_string_equal(text, cases[i].want);
    }
    const struct {
        double x, step;
        const char *want;
    } ticks[] = {
        {0.25, 0.05, "0.25"},  {-3, 1, "-3"},           {1e-18, 0.1, "0.0"}, {0.3, 0.1, "0.3"},
        {2e-9, 1e-9, "2e-09"}, {1.5e7, 5e6, "1.5e+07"}, {200, 50, "200"},    {0.42001, 1e-5, "0.42001"}};
    for (size_t i = 0; i < sizeof ticks / sizeof *ticks; i++) {
        mt_number_tick(ticks[i].x, ticks[i].step, text);
        assert_string_equal(text, ticks[i].want);
    }
    check_close(mt_number_round_down(1), 1, 0, 0);
    check_close(mt_number_round_down(0.0499), 0.02, 1e-15, 0);
    check_close(mt_number_round_down(7e9), 5e9, 1e-15, 0);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_exact), cmocka_unit_test(test_locale), cmocka_unit_test(test_refused),
        cmocka_unit_test(test_ticks), cmocka_unit_test(test_labels),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
