/* A folder of its own for each test program, removed at the end; files in it by plain name. */
#ifndef MT_TESTS_FILES_SCRATCH_H
#define MT_TESTS_FILES_SCRATCH_H

#define _GNU_SOURCE /* nftw */

#include <dirent.h>
#include <ftw.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/support.h"
#include "core/files/calls.h"

static inline int scratch_begin(void **state) {
    static char name[] = "/tmp/mottle-test-XXXXXX";
    if (!mkdtemp(name) || chdir(name)) return -1;
    *state = name;
    return 0;
}

static inline int scratch_remove(const char *path, const struct stat *about, int kind, struct FTW *where) {
    (void)about, (void)kind, (void)where;
    return remove(path);
}

static inline int scratch_end(void **state) {
    return chdir("/") || nftw(*state, scratch_remove, 8, FTW_DEPTH | FTW_PHYS);
}

static inline void spill(const char *name, const void *bytes, size_t n) {
    FILE *f = fopen(name, "wb");
    assert_non_null(f);
    assert_int_equal(fwrite(bytes, 1, n, f), n);
    assert_int_equal(fclose(f), 0);
}

/* The whole file, 0-terminated, from malloc; NULL when there is none. */
static inline char *slurp(const char *name, size_t *n) {
    FILE *f = fopen(name, "rb");
    if (!f) return NULL;
    char *bytes = malloc(1 << 20);
    *n = fread(bytes, 1, (1 << 20) - 1, f);
    bytes[*n] = 0;
    fclose(f);
    return bytes;
}

static inline bool file_is(const char *name, const char *text) {
    size_t n = 0;
    char *have = slurp(name, &n);
    bool same = have && n == strlen(text) && !memcmp(have, text, n);
    free(have);
    return same;
}

/* Entries of a folder, "." and ".." left out; *temporaries: those that end in .part. */
static inline int count_entries(const char *path, int *temporaries) {
    DIR *list = opendir(path);
    assert_non_null(list);
    int n = 0;
    *temporaries = 0;
    for (struct dirent *d; (d = readdir(list));) {
        if (!strcmp(d->d_name, ".") || !strcmp(d->d_name, "..")) continue;
        n++;
        size_t len = strlen(d->d_name);
        *temporaries += len > 5 && !strcmp(d->d_name + len - 5, ".part");
    }
    closedir(list);
    return n;
}

static inline int count_descriptors(void) {
    int unused;
    return count_entries("/proc/self/fd", &unused);
}

/* Runs body with the k-th writing call failing for every k until none fails; after each run `holds` is asked
 * whether what is on disk is right (failed: the call reported a failure). No temporary, block or descriptor
 * may stay. Returns the number of failures. */
static inline int sweep_calls(mt_status (*body)(mt_error *err), void (*prepare)(void),
                              void (*holds)(bool failed)) {
    for (int k = 0; k < 10000; k++) {
        prepare();
        mt_error err = {0};
        size_t blocks = mt_memory_blocks();
        int descriptors = count_descriptors(), temporaries;
        mt_files_fail_at(k);
        mt_status status = body(&err);
        bool failed = mt_files_did_fail();
        mt_files_fail_at(-1);
        assert_int_equal(mt_memory_blocks(), blocks);
        assert_int_equal(count_descriptors(), descriptors);
        count_entries(".", &temporaries);
        assert_int_equal(temporaries, 0);
        if (failed) {
            assert_int_equal(status, MT_EFILE);
            assert_non_null(strstr(err.text, "No space left"));
        } else {
            check_ok(status, &err);
        }
        holds(failed);
        if (!failed) return k;
    }
    fail_msg("the sweep does not end");
    return 0;
}

#endif
