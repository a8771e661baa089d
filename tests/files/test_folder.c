/* Proved: a run folder is made once, never over something else; replacing removes what a run left and nothing
 * besides; names and links do not lead outside; a running run's folder is locked; failures leave no half-made
 * folder. */
#include "scratch.h"

#include "core/files/atomic.h"

static mt_status make(const char *path, bool replace, mt_error *err) {
    mt_folder *folder;
    mt_status status = mt_folder_make(&folder, path, replace, err);
    mt_folder_close(&folder);
    return status;
}

static bool there(const char *path) {
    return access(path, F_OK) == 0;
}

static void test_make_and_refuse(void **state) {
    (void)state;
    mt_error err = {0};
    check_ok(make("a", false, &err), &err);
    assert_true(there("a/pictures") && there("a/fields") && mt_folder_is_run("a"));
    assert_int_equal(make("a", false, &err), MT_EEXISTS);
    assert_int_equal(mkdir("empty", 0777), 0);
    assert_false(mt_folder_is_run("empty"));
    check_ok(make("empty", false, &err), &err);
    assert_int_equal(make("no/parent", false, &err), MT_EFILE);
    spill("plain", "x", 1);
    assert_int_equal(make("plain", true, &err), MT_EFILE);
    assert_true(file_is("plain", "x"));
}

static void test_replace(void **state) {
    (void)state;
    mt_error err = {0};
    check_ok(make("r", false, &err), &err);
    spill("r/ledger.csv", "1", 1);
    spill("r/pictures/x-0001.png", "1", 1);
    spill("r/fields/x.npy", "1", 1);
    spill("r/.12-3.part", "1", 1);
    check_ok(make("r", true, &err), &err);
    assert_false(there("r/ledger.csv") || there("r/pictures/x-0001.png") || there("r/fields/x.npy"));
    assert_false(there("r/.12-3.part"));
    assert_true(mt_folder_is_run("r") && there("r/pictures"));
}

static void test_replace_spares_the_rest(void **state) {
    (void)state;
    mt_error err = {0};
    check_ok(make("s", false, &err), &err);
    spill("s/ledger.csv", "1", 1);
    const char *foreign[] = {"s/notes.txt", "s/pictures/notes.txt", "s/fields/more.doc"};
    for (int i = 0; i < 3; i++) {
        spill(foreign[i], "mine", 4);
        assert_int_equal(make("s", true, &err), MT_EEXISTS);
        assert_non_null(strstr(err.text, strchr(foreign[i], '/') + 1));
        assert_true(file_is(foreign[i], "mine") && file_is("s/ledger.csv", "1"));
        assert_int_equal(unlink(foreign[i]), 0);
    }
    assert_int_equal(symlink("/tmp", "s/fields/link.npy"), 0);
    assert_int_equal(make("s", true, &err), MT_EEXISTS);
    assert_int_equal(unlink("s/fields/link.npy"), 0);
    assert_int_equal(mkdir("foreign", 0777), 0);
    spill("foreign/ledger.csv", "mine", 4);
    assert_int_equal(make("foreign", true, &err), MT_EEXISTS);
    spill("foreign/.mottle", "something else", 14);
    assert_int_equal(make("foreign", true, &err), MT_EEXISTS);
    assert_true(file_is("foreign/ledger.csv", "mine"));
}

static void test_lock(void **state) {
    (void)state;
    mt_error err = {0};
    mt_folder *one, *two;
    check_ok(mt_folder_make(&one, "l", false, &err), &err);
    assert_int_equal(mt_folder_make(&two, "l", true, &err), MT_ESYSTEM);
    assert_int_equal(mt_folder_resume(&two, "l", &err), MT_ESYSTEM);
    assert_null(two);
    mt_folder_close(&one);
    spill("l/fields/.99-1.part", "half", 4);
    check_ok(mt_folder_resume(&two, "l", &err), &err);
    assert_false(there("l/fields/.99-1.part"));
    mt_folder_close(&two);
    assert_int_equal(mt_folder_resume(&two, ".", &err), MT_EINPUT);
}

static void test_names(void **state) {
    (void)state;
    mt_error err = {0};
    char longest[300];
    memset(longest, 'a', sizeof longest);
    longest[256] = 0;
    const char *bad[] = {"",   "/etc/passwd", "..",   "../x", "a/../../x", "./x",  "a//b",
                         "a/", "a/.",         "a\nb", "a/..", "//",        "\x7f", longest};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++)
        assert_int_equal(mt_folder_check_name(bad[i], &err), MT_EINPUT);
    longest[255] = 0;
    const char *good[] = {"x", "a/b", "...", "..x", "a/.b", "\xC2\xB5.csv", longest};
    for (size_t i = 0; i < sizeof good / sizeof *good; i++)
        check_ok(mt_folder_check_name(good[i], &err), &err);
}

static void test_links_are_not_followed(void **state) {
    (void)state;
    mt_error err = {0};
    mt_folder *folder;
    char *bytes;
    size_t n;
    assert_int_equal(mkdir("outside", 0777), 0);
    spill("outside/secret", "secret", 6);
    check_ok(mt_folder_make(&folder, "k", false, &err), &err);
    assert_int_equal(symlink("../outside", "k/way"), 0);
    assert_int_equal(symlink("../outside/secret", "k/secret"), 0);
    assert_int_equal(mt_folder_read(folder, "way/secret", 99, &bytes, &n, &err), MT_EFILE);
    assert_int_equal(mt_folder_read(folder, "secret", 99, &bytes, &n, &err), MT_EFILE);
    assert_int_equal(mt_atomic_put(folder, "way/new", "x", 1, &err), MT_EFILE);
    check_ok(mt_atomic_put(folder, "secret", "own", 3, &err),
             &err); /* replaces the link, not what it leads to */
    assert_true(file_is("outside/secret", "secret"));
    assert_true(file_is("k/secret", "own"));
    assert_int_equal(mkfifo("k/pipe", 0666), 0);
    assert_int_equal(mt_folder_read(folder, "pipe", 99, &bytes, &n, &err), MT_EFILE);
    assert_int_equal(mt_folder_read(folder, "secret", 2, &bytes, &n, &err), MT_EFORMAT);
    check_ok(mt_folder_read(folder, "secret", 3, &bytes, &n, &err), &err);
    assert_string_equal(bytes, "own");
    assert_true(mt_folder_has(folder, "secret") && !mt_folder_has(folder, "pictures") &&
                !mt_folder_has(folder, "no"));
    mt_free(bytes);
    mt_folder_close(&folder);
}

static void nothing(void) {}
static mt_status make_fresh(mt_error *err) {
    return make("f", false, err);
}
static void none_or_whole(bool failed) {
    assert_int_equal(there("f"), !failed);
}

static void test_every_failing_call(void **state) {
    (void)state;
    assert_true(sweep_calls(make_fresh, nothing, none_or_whole) >= 7);
}

static mt_status body(void *ctx, mt_error *err) {
    (void)ctx;
    mt_folder *folder;
    mt_status status = mt_folder_make(&folder, "m", true, err);
    char *bytes = NULL;
    size_t n;
    if (!status) status = mt_atomic_put(folder, "state", "abc", 3, err);
    if (!status) status = mt_folder_read(folder, "state", 10, &bytes, &n, err);
    mt_free(bytes);
    mt_folder_close(&folder);
    return status;
}

static void test_allocations(void **state) {
    (void)state;
    check_allocation_sweep(body, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_make_and_refuse),
        cmocka_unit_test(test_replace),
        cmocka_unit_test(test_replace_spares_the_rest),
        cmocka_unit_test(test_lock),
        cmocka_unit_test(test_names),
        cmocka_unit_test(test_links_are_not_followed),
        cmocka_unit_test(test_every_failing_call),
        cmocka_unit_test(test_allocations),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
