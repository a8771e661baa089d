/* Proved: rows read back exactly, quoting follows RFC 4180, a failed write leaves whole lines, resuming cuts
 * back and refuses what does not belong, and hostile or damaged tables are refused by line and cell. */
#include "scratch.h"

#include <math.h>

#include "core/files/table.h"

static const mt_table_column two[] = {{"time", "h", false}, {"lambda", "nm", false}};
static const mt_table_column three[] = {{"time", "h", false}, {"stage, name", NULL, true}, {"x", "", false}};

static void test_exact_file(void **state) {
    (void)state;
    mt_error err = {0};
    mt_table *t;
    check_ok(mt_table_create(&t, NULL, "a.csv", 3, three, &err), &err);
    const mt_cell rows[][3] = {{{0.1, NULL}, {0, "hold \"one\", first"}, {NAN, NULL}},
                               {{-1e300, NULL}, {0, NULL}, {INFINITY, NULL}},
                               {{2, NULL}, {0, "#a\nb"}, {1.0 / 3, NULL}}};
    for (int i = 0; i < 3; i++) check_ok(mt_table_row(t, rows[i], &err), &err);
    const char *want = "time [h],\"stage, name\",x\n0.1,\"hold \"\"one\"\", first\",\n-1e+300,,inf\n"
                       "2,\"#a\nb\",0.3333333333333333\n";
    assert_true(file_is("a.csv", want));
    assert_int_equal(mt_table_size(t), strlen(want));
    check_ok(mt_table_close(&t, &err), &err);
    assert_null(t);
    check_ok(mt_table_close(&t, &err), &err);
    assert_int_equal(mt_table_create(&t, NULL, "a.csv", 3, three, &err), MT_EEXISTS);
    assert_true(file_is("a.csv", want));
}

static void test_round_trip(void **state) {
    (void)state;
    mt_error err = {0};
    mt_table *t;
    mt_columns c;
    check_ok(mt_table_create(&t, NULL, "r.csv", 2, two, &err), &err);
    for (int i = 0; i < 500; i++) {
        const mt_cell row[2] = {{i / 7.0, NULL}, {i % 50 ? exp(i * 1.3 - 300) : NAN, NULL}};
        check_ok(mt_table_row(t, row, &err), &err);
    }
    check_ok(mt_table_close(&t, &err), &err);
    check_ok(mt_table_read(&c, NULL, "r.csv", 0, &err), &err);
    assert_true(c.columns == 2 && c.rows == 500);
    assert_string_equal(c.name[1], "lambda");
    assert_string_equal(c.unit[1], "nm");
    for (int i = 0; i < 500; i++) {
        check_close(c.values[2 * i], i / 7.0, 0, 0);
        check_close(c.values[2 * i + 1], i % 50 ? exp(i * 1.3 - 300) : NAN, 0, 0);
    }
    mt_columns_free(&c);
}

static void test_resume(void **state) {
    (void)state;
    mt_error err = {0};
    mt_table *t;
    const char *text = "time [h],lambda [nm]\n1,2\n3,4\n5,";
    spill("s.csv", text, strlen(text));
    assert_int_equal(mt_table_resume(&t, NULL, "s.csv", 3, three, 25, &err), MT_EFORMAT);
    assert_int_equal(mt_table_resume(&t, NULL, "s.csv", 2, two, 24, &err), MT_EFORMAT);
    assert_int_equal(mt_table_resume(&t, NULL, "s.csv", 2, two, 99, &err), MT_EFORMAT);
    assert_int_equal(mt_table_resume(&t, NULL, "s.csv", 2, two, 0, &err), MT_EFORMAT);
    assert_int_equal(mt_table_resume(&t, NULL, "absent.csv", 2, two, 25, &err), MT_EFILE);
    assert_null(t);
    assert_true(file_is("s.csv", text));
    check_ok(mt_table_resume(&t, NULL, "s.csv", 2, two, 25, &err), &err);
    const mt_cell row[2] = {{7, NULL}, {8, NULL}};
    check_ok(mt_table_row(t, row, &err), &err);
    assert_true(file_is("s.csv", "time [h],lambda [nm]\n1,2\n7,8\n"));
    check_ok(mt_table_sync(t, &err), &err);
    check_ok(mt_table_close(&t, &err), &err);
}

static void test_read_forms(void **state) {
    (void)state;
    const struct {
        const char *text;
        int columns;
        size_t rows;
        double last;
        const char *name, *unit; /* of the last column */
    } cases[] = {
        {"1,2\n3,4\n", 2, 2, 4, "", ""},
        {"1;2\r\n3;4\r\n", 2, 2, 4, "", ""},
        {"\xEF\xBB\xBFt (s)\tT ( degC )\n\n# a remark, with commas\n0\t20.5", 2, 1, 20.5, "T", "degC"},
        {"\"a, [x]\",\"say \"\"b\"\" [m/s]\"\n1,\" 2 \"\n", 2, 1, 2, "say \"b\"", "m/s"},
        {"only\n1\n2\n3\n", 1, 3, 3, "only", ""},
        {"a,b\n1,\n", 2, 1, NAN, "b", ""},
        {"a,]\n", 2, 0, 0, "]", ""},
        {"a,(K)\n1,2\n", 2, 1, 2, "", "K"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        mt_error err = {0};
        mt_columns c;
        spill("f.csv", cases[i].text, strlen(cases[i].text));
        check_ok(mt_table_read(&c, NULL, "f.csv", 0, &err), &err);
        assert_int_equal(c.columns, cases[i].columns);
        assert_int_equal(c.rows, cases[i].rows);
        if (c.rows) check_close(c.values[c.rows * (size_t)c.columns - 1], cases[i].last, 0, 0);
        assert_string_equal(c.name[c.columns - 1], cases[i].name);
        assert_string_equal(c.unit[c.columns - 1], cases[i].unit);
        mt_columns_free(&c);
    }
}

static void test_refused(void **state) {
    (void)state;
    const struct {
        const char *text, *place;
    } cases[] = {{"", "empty"},
                 {"\n\n# nothing\n", "empty"},
                 {"a,b\n1,2\n3\n", "line 3, cell 2"},
                 {"a,b\n1,2,3\n", "line 2, cell 3"},
                 {"a,b\n\n1,x\n", "line 3, cell 2"},
                 {"a;b\n1,5;2\n", "line 2, cell 1"},
                 {"a,\"b\n1,2\n", "line 1, cell 2"},
                 {"a,\"b\"c\n", "line 1, cell 2"},
                 {"a\n0x10\n", "line 2, cell 1"}};
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        mt_error err = {0};
        mt_columns c;
        spill("x.csv", cases[i].text, strlen(cases[i].text));
        assert_int_equal(mt_table_read(&c, NULL, "x.csv", 0, &err), MT_EFORMAT);
        if (!strstr(err.text, cases[i].place)) fail_msg("'%s' lacks '%s'", err.text, cases[i].place);
    }
    mt_columns c;
    char wide[20000];
    memset(wide, ',', sizeof wide);
    spill("x.csv", wide, sizeof wide);
    assert_int_equal(mt_table_read(&c, NULL, "x.csv", 0, NULL), MT_EFORMAT);
    memset(wide, '1', sizeof wide);
    spill("x.csv", wide, sizeof wide);
    assert_int_equal(mt_table_read(&c, NULL, "x.csv", 0, NULL), MT_EFORMAT);
    assert_int_equal(mt_table_read(&c, NULL, "x.csv", 100, NULL), MT_EFORMAT);
}

static void test_cut_and_damaged(void **state) {
    (void)state;
    char text[] = "time [h],\"T, \"\"core\"\" [K]\"\r\n0,300.5\r\n# x\r\n1.25e3,-4\r\n";
    size_t n = strlen(text);
    mt_columns c;
    for (size_t k = 0; k <= n; k++) {
        spill("d.csv", text, k);
        mt_status status = mt_table_read(&c, NULL, "d.csv", 0, NULL);
        assert_true(status == MT_OK || status == MT_EFORMAT);
        mt_columns_free(&c);
    }
    for (size_t k = 0; k < n; k++)
        for (int change = 1; change < 256; change++) {
            if (change & (change - 1) && change % 16) continue;
            text[k] = (char)(text[k] ^ change);
            spill("d.csv", text, n);
            mt_status status = mt_table_read(&c, NULL, "d.csv", 0, NULL);
            assert_true(status == MT_OK || status == MT_EFORMAT);
            mt_columns_free(&c);
            text[k] = (char)(text[k] ^ change);
        }
}

static mt_status write_three(mt_error *err) {
    mt_table *t;
    mt_status status = mt_table_create(&t, NULL, "w.csv", 2, two, err);
    if (status) return status;
    for (int i = 0; i < 2 && !status; i++) {
        const mt_cell row[2] = {{i, NULL}, {i + 0.5, NULL}};
        status = mt_table_row(t, row, err);
    }
    mt_error second;
    mt_status closing = mt_table_close(&t, status ? &second : err);
    return status ? status : closing;
}

static void remove_w(void) {
    unlink("w.csv");
}

static void whole_lines(bool failed) {
    size_t n = 0;
    char *text = slurp("w.csv", &n);
    assert_true(failed || text);
    if (text) assert_true(n > 0 && text[n - 1] == '\n');
    if (!failed) assert_string_equal(text, "time [h],lambda [nm]\n0,0.5\n1,1.5\n");
    free(text);
}

static void test_failing_calls(void **state) {
    (void)state;
    assert_int_equal(sweep_calls(write_three, remove_w, whole_lines), 6); /* open, 3 writes, fsync, close */
}

static mt_status body(void *ctx, mt_error *err) {
    (void)ctx;
    mt_table *t = NULL;
    mt_columns c = {0};
    unlink("b.csv");
    mt_status status = mt_table_create(&t, NULL, "b.csv", 3, three, err);
    const mt_cell row[3] = {
        {1, NULL},
        {0, "a long text, so that the line has to grow: ............................................"},
        {2, NULL}};
    if (!status) status = mt_table_row(t, row, err);
    mt_status closing = mt_table_close(&t, NULL);
    spill("c.csv", "a [m],b\n1,2\n", 12);
    if (!status) status = mt_table_read(&c, NULL, "c.csv", 0, err);
    mt_columns_free(&c);
    return status ? status : closing;
}

static void test_allocations(void **state) {
    (void)state;
    check_allocation_sweep(body, NULL);
}

int main(void) {
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_exact_file),    cmocka_unit_test(test_round_trip),
        cmocka_unit_test(test_resume),        cmocka_unit_test(test_read_forms),
        cmocka_unit_test(test_refused),       cmocka_unit_test(test_cut_and_damaged),
        cmocka_unit_test(test_failing_calls), cmocka_unit_test(test_allocations),
    };
    return cmocka_run_group_tests(tests, scratch_begin, scratch_end);
}
