#include "core/files/atomic.h"

#include <errno.h>
#include <fcntl.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "core/base/memory.h"
#include "core/files/calls.h"

#ifdef MT_TINY_LIMITS
enum { BUFFER = 7 };
#else
enum { BUFFER = 1 << 16 };
#endif

struct mt_atomic {
    int folder, fd;
    size_t used;      /* bytes waiting in the buffer */
    bool made;        /* the temporary exists */
    mt_error failure; /* the first one; status MT_OK while all is well */
    char temporary[48];
    char leaf[256];
    char path[600]; /* for messages */
    char buffer[BUFFER];
};

/* Process and a count in the name: two writers of the same target never share a temporary. */
static void name_temporary(mt_atomic *file) {
    static atomic_uint count;
    snprintf(file->temporary, sizeof file->temporary, ".%ld-%u.part", (long)getpid(),
             atomic_fetch_add(&count, 1));
}

mt_status mt_atomic_open(mt_atomic **out, const mt_folder *folder, const char *name, mt_error *err) {
    MT_REQUIRE(out && name, err);
    *out = NULL;
    mt_atomic *file;
    const char *leaf;
    mt_status status = mt_new(&file, 1, sizeof *file, "a file's buffer", err);
    if (status) return status;
    file->folder = file->fd = -1;
    mt_folder_describe(folder, name, file->path, sizeof file->path);
    status = mt_folder_parent(folder, name, &file->folder, &leaf, err);
    if (status) {
        file->folder = -1;
        goto failed;
    }
    if (strlen(leaf) >= sizeof file->leaf) {
        status = mt_fail(err, MT_EINPUT, "%s: the name is longer than 255 bytes", file->path);
        goto failed;
    }
    strcpy(file->leaf, leaf);
    name_temporary(file);
    file->fd = mt_call_open(file->folder, file->temporary, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW, 0666);
    if (file->fd < 0) {
        status = mt_call_failed(err, "written", file->path);
        goto failed;
    }
    file->made = true;
    *out = file;
    return MT_OK;
failed:
    mt_atomic_drop(&file);
    return status;
}

/* Remembers the first failure; every later call gives it again. */
static mt_status report(const mt_atomic *file, mt_error *err) {
    return file->failure.status ? mt_fail(err, file->failure.status, "%s", file->failure.text) : MT_OK;
}

static void put(mt_atomic *file, const void *bytes, size_t n) {
    if (mt_call_write(file->fd, bytes, n)) mt_call_failed(&file->failure, "written", file->path);
}

static void flush(mt_atomic *file) {
    if (file->used && !file->failure.status) put(file, file->buffer, file->used);
    file->used = 0;
}

mt_status mt_atomic_write(mt_atomic *file, const void *bytes, size_t n, mt_error *err) {
    MT_REQUIRE(file && (bytes || !n), err);
    if (n > BUFFER - file->used) flush(file);
    if (file->failure.status) return report(file, err);
    if (n >= BUFFER) {
        put(file, bytes, n);
    } else if (n) {
        memcpy(file->buffer + file->used, bytes, n);
        file->used += n;
    }
    return report(file, err);
}

static void put_in_place(mt_atomic *file) {
    int rc = mt_call_sync(file->fd);
    if (rc) mt_call_failed(&file->failure, "flushed to disk", file->path);
    if (mt_call_close(file->fd) && !rc) mt_call_failed(&file->failure, "closed", file->path);
    file->fd = -1;
    if (file->failure.status) return;
    if (mt_call_rename(file->folder, file->temporary, file->leaf)) {
        mt_call_failed(&file->failure, "put in place", file->path);
        return;
    }
    file->made = false;
    if (mt_call_sync(file->folder))
        mt_call_failed(&file->failure, "secured (it is written, but its folder could not be flushed to disk)",
                       file->path);
}

mt_status mt_atomic_commit(mt_atomic **file, mt_error *err) {
    MT_REQUIRE(file && *file, err);
    flush(*file);
    if (!(*file)->failure.status) put_in_place(*file);
    mt_status status = report(*file, err);
    mt_atomic_drop(file);
    return status;
}

void mt_atomic_drop(mt_atomic **file) {
    if (!file || !*file) return;
    if ((*file)->fd >= 0) close((*file)->fd);
    if ((*file)->made) unlinkat((*file)->folder, (*file)->temporary, 0);
    if ((*file)->folder >= 0) close((*file)->folder);
    mt_free(*file);
    *file = NULL;
}

mt_status mt_atomic_put(const mt_folder *folder, const char *name, const void *bytes, size_t n,
                        mt_error *err) {
    mt_atomic *file;
    mt_status status = mt_atomic_open(&file, folder, name, err);
    if (status) return status;
    status = mt_atomic_write(file, bytes, n, err);
    if (!status) return mt_atomic_commit(&file, err);
    mt_atomic_drop(&file);
    return status;
}

static mt_status copy_all(mt_atomic *file, int fd, const char *source, mt_error *err) {
    char block[4096];
    mt_status status = MT_OK;
    while (!status) {
        ssize_t got = read(fd, block, sizeof block);
        if (got < 0 && errno == EINTR) continue;
        if (got < 0) return mt_call_failed(err, "read", source);
        if (got == 0) return MT_OK;
        status = mt_atomic_write(file, block, (size_t)got, err);
    }
    return status;
}

mt_status mt_atomic_copy(const mt_folder *folder, const char *name, const mt_folder *from, const char *source,
                         mt_error *err) {
    int fd;
    size_t size;
    mt_atomic *file;
    mt_status status = mt_folder_open_read(from, source, &fd, &size, err);
    if (status) return status;
    status = mt_atomic_open(&file, folder, name, err);
    if (!status) {
        status = copy_all(file, fd, source, err);
        if (!status)
            status = mt_atomic_commit(&file, err);
        else
            mt_atomic_drop(&file);
    }
    close(fd);
    return status;
}
