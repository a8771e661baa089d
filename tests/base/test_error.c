/* Proved here: the record keeps status and text, gains context in front, cuts what does not fit and always
 * ends with a zero; every status has a text and an exit code; a misuse names the condition. */
#include "tests/support.h"

#include <string.h>

static void filled_with_context(void **state) {
    (void)state;
    mt_error e = {0};
    assert_int_equal(mt_fail(&e, MT_EINPUT, "found %d", 3), MT_EINPUT);
    assert_int_equal(mt_context(&e, MT_EINPUT, "field %s", "c"), MT_EINPUT);
    assert_int_equal(mt_context(&e, MT_EINPUT, "model"), MT_EINPUT);
    assert_int_equal(e.status, MT_EINPUT);
    assert_string_equal(e.text, "model: field c: found 3");
    mt_fail(&e, MT_EFILE, "afresh");
    assert_int_equal(e.status, MT_EFILE);
    assert_string_equal(e.text, "afresh");
}

static void no_record(void **state) {
    (void)state;
    assert_int_equal(mt_fail(NULL, MT_ENOMEM, "lost"), MT_ENOMEM);
    assert_int_equal(mt_context(NULL, MT_ENOMEM, "lost"), MT_ENOMEM);
}

/* A record with a guard behind it, which a text too long by one would break. */
typedef struct guarded {
    mt_error e;
    char guard[16];
} guarded;

static const char intact[16] = "0123456789abcde";

static void long_texts(void **state) {
    (void)state;
    char text[3000];
    for (size_t length = 980; length <= 1010; length++) {
        guarded g = {0};
        memcpy(g.guard, intact, sizeof g.guard);
        memset(text, 'x', length);
        text[length] = 0;
        mt_fail(&g.e, MT_EINPUT, "%s", text);
        size_t kept = length < sizeof g.e.text ? length : sizeof g.e.text - 1;
        assert_int_equal(strlen(g.e.text), kept);
        mt_context(&g.e, MT_EINPUT, "in front");
        assert_memory_equal(g.e.text, "in front: xxx", 13);
        kept = kept + 10 < sizeof g.e.text ? kept + 10 : sizeof g.e.text - 1;
        assert_int_equal(strlen(g.e.text), kept);
        assert_memory_equal(g.guard, intact, sizeof g.guard);
    }
}

/* A context so long that nothing of the old text fits. */
static void long_contexts(void **state) {
    (void)state;
    char text[1100];
    for (size_t length = 990; length <= 1005; length++) {
        guarded g = {0};
        memcpy(g.guard, intact, sizeof g.guard);
        memset(text, 'c', length);
        text[length] = 0;
        mt_fail(&g.e, MT_EINPUT, "old");
        mt_context(&g.e, MT_EINPUT, "%s", text);
        assert_true(strlen(g.e.text) < sizeof g.e.text);
        assert_true(strlen(g.e.text) >= 990 && g.e.text[989] == 'c');
        assert_memory_equal(g.guard, intact, sizeof g.guard);
    }
}

static void statuses(void **state) {
    (void)state;
    assert_int_equal(MT_OK, 0);
    for (int i = 0; i < MT_STATUS_COUNT; i++) {
        assert_true(strlen(mt_status_text((mt_status)i)) > 3);
        assert_true((mt_status_exit_code((mt_status)i) == 0) == (i == MT_OK));
        for (int j = 0; j < i; j++)
            assert_string_not_equal(mt_status_text((mt_status)i), mt_status_text((mt_status)j));
    }
    assert_string_equal(mt_status_text(MT_OK), "success");
    assert_int_equal(mt_status_exit_code(MT_ESTOPPED), 130);
    assert_string_equal(mt_status_text((mt_status)MT_STATUS_COUNT), "unknown status");
    assert_int_equal(mt_status_exit_code((mt_status)MT_STATUS_COUNT), 1);
}

static mt_status wants_even(int n, mt_error *err) {
    MT_REQUIRE(n % 2 == 0, err);
    return MT_OK;
}

static void misuse(void **state) {
    (void)state;
    mt_error e = {0};
    assert_int_equal(wants_even(4, &e), MT_OK);
    assert_int_equal(wants_even(3, &e), MT_EINPUT);
    assert_string_equal(e.text, "wants_even: wrong call, needs n % 2 == 0");
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(filled_with_context), cmocka_unit_test(no_record), cmocka_unit_test(long_texts),
        cmocka_unit_test(long_contexts),       cmocka_unit_test(statuses),  cmocka_unit_test(misuse),
    };
    return cmocka_run_group_tests_name("error", tests, NULL, NULL);
}
