/* Proved: a file is written whole or not at all, whichever system call or allocation fails; failures name
 * file, reason and remedy; dropping leaves nothing; copies are exact; names stay inside the folder. */
#include "scratch.h"

#include "core/files/atomic.h"

static void prepare_old(void) {
    spill("target", "old", 3);
}

static mt_status write_new(mt_error *err) {
    return mt_atomic_put(NULL, "target", "something new", 13, err);
}

/* After the rename only flushing the folder can fail: then the new file is there, whole. */
static void old_or_new(bool failed) {
    if (failed)
        assert_true(file_is("target", "old") || file_is("target", "something new"));
    else
        assert_true(file_is("target", "something new"));
}

static void test_every_failing_call(void **state) {
    (void)state;
    assert_true(sweep_calls(write_new, prepare_old, old_or_new) >=
                5); /* open, write, fsync, close, rename, fsync */
}

static mt_status in_many_pieces(mt_error *err) {
    mt_atomic *file;
    mt_status status = mt_atomic_open(&file, NULL, "target", err);
    if (status) return status;
    for (int i = 0; i < 200000 && !status; i++) status = mt_atomic_write(file, "abcdefg", i % 8, err);
    if (!status) return mt_atomic_commit(&file, err);
    mt_atomic_drop(&file);
    return status;
}

static void long_or_old(bool failed) {
    struct stat about;
    assert_int_equal(stat("target", &about), 0);
    assert_true(about.st_size == 700000 || (failed && about.st_size == 3));
}

static void test_failure_in_the_middle(void **state) {
    (void)state;
#ifdef MT_TINY_LIMITS
    prepare_old();
    check_ok(in_many_pieces(NULL), NULL);
    long_or_old(false);
#else
    assert_true(sweep_calls(in_many_pieces, prepare_old, long_or_old) > 10);
#endif
}

static mt_status body(void *ctx, mt_error *err) {
    (void)ctx;
    return write_new(err);
}

static void test_allocations(void **state) {
    (void)state;
    check_allocation_sweep(body, NULL);
}

static void test_drop(void **state) {
    (void)state;
    mt_atomic *file;
    mt_error err = {0};
    int temporaries;
    prepare_old();
    check_ok(mt_atomic_open(&file, NULL, "target", &err), &err);
    check_ok(mt_atomic_write(file, "half", 4, &err), &err);
    mt_atomic_drop(&file);
    assert_null(file);
    count_entries(".", &temporaries);
    assert_int_equal(temporaries, 0);
    assert_true(file_is("target", "old"));
    mt_atomic_drop(&file);
}

static void test_messages(void **state) {
    (void)state;
    mt_error err = {0};
    assert_int_equal(mt_atomic_put(NULL, "nowhere/x", "", 0, &err), MT_EFILE);
    assert_non_null(strstr(err.text, "nowhere/x"));
    assert_non_null(strstr(err.text, "No such file"));
    assert_int_equal(mkdir("folder", 0777), 0);
    assert_int_equal(mt_atomic_put(NULL, "folder", "a", 1, &err), MT_EFILE);
    assert_non_null(strstr(err.text, "choose another name"));
    assert_int_equal(mt_atomic_put(NULL, "folder/", "a", 1, &err), MT_EINPUT);
}

static void test_copy(void **state) {
    (void)state;
    mt_error err = {0};
    mt_folder *folder;
    char text[20000];
    for (size_t i = 0; i < sizeof text - 1; i++) text[i] = (char)('a' + i % 23);
    text[sizeof text - 1] = 0;
    spill("source", text, sizeof text - 1);
    check_ok(mt_folder_make(&folder, "run", false, &err), &err);
    check_ok(mt_folder_sub(folder, "inputs", &err), &err);
    check_ok(mt_atomic_copy(folder, "inputs/source", NULL, "source", &err), &err);
    assert_true(file_is("run/inputs/source", text));
    assert_int_equal(mt_atomic_copy(folder, "../out", NULL, "source", &err), MT_EINPUT);
    assert_int_equal(mt_atomic_copy(folder, "x", NULL, "absent", &err), MT_EFILE);
    mt_folder_close(&folder);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_every_failing_call), cmocka_unit_test(test_failure_in_the_middle),
        cmocka_unit_test(test_allocations),        cmocka_unit_test(test_drop),
        cmocka_unit_test(test_messages),           cmocka_unit_test(test_copy),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
