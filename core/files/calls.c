#include "core/files/calls.h"

#include <errno.h>
#include <fcntl.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

static atomic_long countdown = -1;
static atomic_bool failed;

void mt_files_fail_at(long k) {
    atomic_store(&failed, false);
    atomic_store(&countdown, k);
}

bool mt_files_did_fail(void) {
    return atomic_load(&failed);
}

static bool must_fail(void) {
    if (atomic_load(&countdown) < 0) return false;
    if (atomic_fetch_sub(&countdown, 1) != 0) return false;
    atomic_store(&failed, true);
    errno = ENOSPC;
    return true;
}

int mt_call_open(int folder, const char *name, int flags, mode_t mode) {
    if (must_fail()) return -1;
    int fd;
    do fd = openat(folder, name, flags | O_CLOEXEC, mode);
    while (fd < 0 && errno == EINTR);
    return fd;
}

int mt_call_write(int fd, const void *bytes, size_t n) {
    bool fail = must_fail();
    const char *at = bytes;
    for (size_t end = fail ? n - n / 2 : 0; n > end;) { /* a disk fills up in the middle of a write */
        ssize_t done = write(fd, at, n - end);
        if (done < 0 && errno == EINTR) continue;
        if (done < 0) return -1;
        at += done;
        n -= (size_t)done;
    }
    if (fail) errno = ENOSPC;
    return fail ? -1 : 0;
}

int mt_call_sync(int fd) {
    if (must_fail()) return -1;
    int rc;
    do rc = fsync(fd);
    while (rc && errno == EINTR);
    return rc && errno == EINVAL ? 0 : rc; /* EINVAL: a file system that cannot flush this kind of file */
}

int mt_call_truncate(int fd, off_t size) {
    if (must_fail()) return -1;
    int rc;
    do rc = ftruncate(fd, size);
    while (rc && errno == EINTR);
    return rc;
}

int mt_call_close(int fd) {
    bool fail = must_fail();
    int rc = close(fd);
    if (fail) errno = ENOSPC;
    return fail || (rc && errno != EINTR) ? -1 : 0; /* Linux frees the descriptor even when it says EINTR */
}

int mt_call_rename(int folder, const char *from, const char *to) {
    return must_fail() ? -1 : renameat(folder, from, folder, to);
}

int mt_call_mkdir(int folder, const char *name, mode_t mode) {
    return must_fail() ? -1 : mkdirat(folder, name, mode);
}

static const struct {
    int code;
    const char *advice;
} advices[] = {
    {ENOSPC, "free some space on that disk or choose another folder"},
    {EDQUOT, "your share of that disk is used up: free some space or choose another folder"},
    {EROFS, "that disk is read-only: choose another folder"},
    {EACCES, "you have no right to it: change its rights or choose another folder"},
    {EPERM, "you have no right to it: change its rights or choose another folder"},
    {ENOENT, "check the spelling; folders are not made on the way"},
    {ENOTDIR, "a part of that path is a file, or a link where none may be: check the path"},
    {EISDIR, "there is a folder of that name: choose another name"},
    {ELOOP, "symbolic links are not followed here: use the file itself"},
    {EFBIG, "the file is larger than that disk or your limits allow"},
    {EIO, "the disk reports a fault: check it before trusting anything on it"},
    {EMFILE, "too many files are open: close some"},
    {ENFILE, "too many files are open on this machine"},
};

mt_status mt_call_failed(mt_error *err, const char *what, const char *path) {
    int code = errno;
    const char *advice = "check the path and the disk";
    for (size_t i = 0; i < sizeof advices / sizeof *advices; i++)
        if (advices[i].code == code) advice = advices[i].advice;
    return mt_fail(err, MT_EFILE, "%s could not be %s: %s; %s", path, what, strerror(code), advice);
}
