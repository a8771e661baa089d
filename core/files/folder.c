#include "core/files/folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/file.h>
#include <unistd.h>

#include "core/base/memory.h"
#include "core/files/calls.h"

static const char marker[] = ".mottle";
static const char marker_text[] = "mottle run folder, form 1\n";

struct mt_folder {
    int fd;
    int lock; /* the marker, held locked; -1 when unlocked */
    char *path;
};

/* ---- names ---- */

static bool part_is_dots(const char *part, size_t n) {
    return (n == 1 && part[0] == '.') || (n == 2 && part[0] == '.' && part[1] == '.');
}

mt_status mt_folder_check_name(const char *name, mt_error *err) {
    MT_REQUIRE(name, err);
    size_t len = strlen(name);
    if (len == 0 || len > 255)
        return mt_fail(err, MT_EINPUT, "a file name of 1 to 255 bytes is expected, this one has %zu: '%.60s'",
                       len, name);
    for (const char *p = name; *p; p++)
        if ((unsigned char)*p < 32 || *p == 127)
            return mt_fail(err, MT_EINPUT, "a file name may hold no control character (byte %d of it is one)",
                           (int)(p - name) + 1);
    for (const char *part = name; part; part = strchr(part, '/')) {
        part += *part == '/' && part != name;
        size_t n = strcspn(part, "/");
        if (n == 0 || part_is_dots(part, n))
            return mt_fail(err, MT_EINPUT,
                           "'%s' leads or may lead outside the folder: expected a name like 'fields/x.npy', "
                           "relative and "
                           "without '.', '..' or '//'",
                           name);
    }
    return MT_OK;
}

void mt_folder_describe(const mt_folder *folder, const char *name, char *text, size_t room) {
    if (folder)
        snprintf(text, room, "%s/%s", folder->path, name);
    else
        snprintf(text, room, "%s", name);
}

const char *mt_folder_path(const mt_folder *folder) {
    return folder ? folder->path : "";
}

/* ---- reaching a name ---- */

static int open_folder_at(int fd, const char *name, int more) {
    return openat(fd, name, O_RDONLY | O_DIRECTORY | O_CLOEXEC | more);
}

/* Descriptor of the folder before the last '/' of a free path. */
static int parent_of_path(const char *path, const char **leaf) {
    const char *slash = strrchr(path, '/');
    *leaf = slash ? slash + 1 : path;
    if (!slash) return open_folder_at(AT_FDCWD, ".", 0);
    if (slash == path) return open_folder_at(AT_FDCWD, "/", 0);
    char *front = mt_copy_text(path);
    if (!front) {
        errno = ENOMEM;
        return -1;
    }
    front[slash - path] = 0;
    int fd = open_folder_at(AT_FDCWD, front, 0);
    mt_free(front);
    return fd;
}

/* The same below a folder, part by part, following no link. */
static int parent_of_name(const mt_folder *folder, const char *name, const char **leaf) {
    int fd = open_folder_at(folder->fd, ".", 0);
    const char *part = name, *slash;
    while (fd >= 0 && (slash = strchr(part, '/'))) {
        char text[256];
        memcpy(text, part, (size_t)(slash - part));
        text[slash - part] = 0;
        int next = open_folder_at(fd, text, O_NOFOLLOW);
        int code = errno;
        close(fd);
        errno = code;
        fd = next;
        part = slash + 1;
    }
    *leaf = part;
    return fd;
}

mt_status mt_folder_parent(const mt_folder *folder, const char *name, int *fd, const char **leaf,
                           mt_error *err) {
    MT_REQUIRE(name, err);
    if (folder) {
        mt_status status = mt_folder_check_name(name, err);
        if (status) return status;
    }
    *fd = folder ? parent_of_name(folder, name, leaf) : parent_of_path(name, leaf);
    char path[600];
    mt_folder_describe(folder, name, path, sizeof path);
    if (*fd < 0 && errno == ENOMEM) return mt_fail(err, MT_ENOMEM, "no memory to open %s", path);
    if (*fd < 0) return mt_call_failed(err, "reached", path);
    if (**leaf && !part_is_dots(*leaf, strlen(*leaf))) return MT_OK;
    close(*fd);
    return mt_fail(err, MT_EINPUT, "'%s' names a folder: expected the name of a file", path);
}

mt_status mt_folder_open_read(const mt_folder *folder, const char *name, int *fd, size_t *size,
                              mt_error *err) {
    int parent;
    const char *leaf;
    mt_status status = mt_folder_parent(folder, name, &parent, &leaf, err);
    if (status) return status;
    char path[600];
    mt_folder_describe(folder, name, path, sizeof path);
    /* O_NONBLOCK: a pipe of that name must not hang us before it is seen to be one */
    *fd = openat(parent, leaf, O_RDONLY | O_CLOEXEC | O_NONBLOCK | (folder ? O_NOFOLLOW : 0));
    int code = errno;
    close(parent);
    errno = code;
    if (*fd < 0) return mt_call_failed(err, "opened", path);
    struct stat about;
    if (fstat(*fd, &about) == 0 && S_ISREG(about.st_mode)) {
        *size = (size_t)about.st_size;
        return MT_OK;
    }
    close(*fd);
    return mt_fail(err, MT_EFILE, "%s is not an ordinary file: give the name of a file", path);
}

bool mt_folder_has(const mt_folder *folder, const char *name) {
    int fd;
    size_t size;
    if (mt_folder_open_read(folder, name, &fd, &size, NULL)) return false;
    close(fd);
    return true;
}

static ssize_t read_fully(int fd, char *to, size_t n) {
    size_t done = 0;
    while (done < n) {
        ssize_t got = read(fd, to + done, n - done);
        if (got < 0 && errno == EINTR) continue;
        if (got < 0) return -1;
        if (got == 0) break;
        done += (size_t)got;
    }
    return (ssize_t)done;
}

mt_status mt_folder_read(const mt_folder *folder, const char *name, size_t most, char **bytes, size_t *n,
                         mt_error *err) {
    int fd;
    size_t size;
    char *block = NULL, path[600];
    mt_status status = mt_folder_open_read(folder, name, &fd, &size, err);
    if (status) return status;
    mt_folder_describe(folder, name, path, sizeof path);
    if (size > most) {
        status =
            mt_fail(err, MT_EFORMAT, "%s has %zu bytes, at most %zu are expected here: is it the right file?",
                    path, size, most);
        goto done;
    }
    status = mt_new(&block, size + 1, 1, path, err);
    if (status) goto done;
    ssize_t got = read_fully(fd, block, size);
    if (got < 0)
        status = mt_call_failed(err, "read", path);
    else if ((size_t)got != size)
        status = mt_fail(err, MT_EFILE, "%s became shorter while it was read: try again when it is complete",
                         path);
    if (status) goto done;
    *bytes = block;
    *n = size;
    block = NULL;
done:
    mt_free(block);
    close(fd);
    return status;
}

/* ---- what a run folder holds ---- */

static const char *const kept_files[] = {"ledger.csv",   "journal",    "state",    "report.html",
                                         "summary.json", "script.lua", "plan.txt", "growth.csv",
                                         "growth.svg",   "check.txt",  "check.csv"};
static const struct {
    const char *name;
    const char *endings[2]; /* "" stands for any */
} kept_folders[] = {{"pictures", {".png", NULL}},
                    {"fields", {".npy", ".vti"}},
                    {"tables", {".csv", NULL}},
                    {"inputs", {"", NULL}}};
enum {
    KEPT_FILES = sizeof kept_files / sizeof *kept_files,
    KEPT_FOLDERS = sizeof kept_folders / sizeof *kept_folders
};

static bool ends_with(const char *name, const char *ending) {
    size_t n = strlen(name), m = strlen(ending);
    return n >= m && !strcmp(name + n - m, ending);
}

static bool is_temporary(const char *name) {
    return name[0] == '.' && ends_with(name, ".part");
}

static bool is_kept_file(const char *name, int folder) {
    if (is_temporary(name)) return true;
    if (folder >= 0) {
        for (int i = 0; i < 2; i++)
            if (kept_folders[folder].endings[i] && ends_with(name, kept_folders[folder].endings[i]))
                return true;
        return false;
    }
    for (int i = 0; i < KEPT_FILES; i++)
        if (!strcmp(name, kept_files[i])) return true;
    return !strcmp(name, marker);
}

static int kept_folder(const char *name) {
    for (int i = 0; i < KEPT_FOLDERS; i++)
        if (!strcmp(name, kept_folders[i].name)) return i;
    return -1;
}

/* What is done to each entry of a folder: fd is the folder it lies in; `inside` the index of the kept folder,
 * -1 at the top. */
typedef struct entry {
    int fd, inside;
    const char *name;
    bool is_folder, is_file;
} entry;
typedef mt_status (*visitor)(const mt_folder *folder, const entry *e, mt_error *err);

static mt_status visit(const mt_folder *folder, int at, int inside, visitor visitor_of, mt_error *err) {
    int fd = open_folder_at(at, inside < 0 ? "." : kept_folders[inside].name, O_NOFOLLOW);
    DIR *list = fd < 0 ? NULL : fdopendir(fd);
    if (!list) {
        mt_status status = mt_call_failed(err, "listed", folder->path);
        if (fd >= 0) close(fd);
        return status;
    }
    mt_status status = MT_OK;
    struct dirent *d;
    while (!status && (d = readdir(list))) {
        struct stat about;
        if (part_is_dots(d->d_name, strlen(d->d_name)) || fstatat(fd, d->d_name, &about, AT_SYMLINK_NOFOLLOW))
            continue;
        entry e = {fd, inside, d->d_name, S_ISDIR(about.st_mode), S_ISREG(about.st_mode)};
        status = visitor_of(folder, &e, err);
    }
    closedir(list);
    return status;
}

static mt_status check_entry(const mt_folder *folder, const entry *e, mt_error *err) {
    int sub = kept_folder(e->name);
    if (e->is_folder && e->inside < 0 && sub >= 0) return visit(folder, e->fd, sub, check_entry, err);
    if (e->is_file && is_kept_file(e->name, e->inside)) return MT_OK;
    return mt_fail(
        err, MT_EEXISTS,
        "%s holds '%s%s%s', which no run made: nothing was removed; move it away or choose another folder",
        folder->path, e->inside < 0 ? "" : kept_folders[e->inside].name, e->inside < 0 ? "" : "/", e->name);
}

static mt_status remove_entry(const mt_folder *folder, const entry *e, mt_error *err) {
    int sub = kept_folder(e->name), rc;
    if (e->is_folder && e->inside < 0 && sub >= 0) {
        mt_status status = visit(folder, e->fd, sub, remove_entry, err);
        if (status) return status;
        rc = unlinkat(e->fd, e->name, AT_REMOVEDIR);
    } else {
        bool ours =
            e->is_file && is_kept_file(e->name, e->inside) && (e->inside >= 0 || strcmp(e->name, marker));
        rc = ours ? unlinkat(e->fd, e->name, 0) : 0;
    }
    return rc ? mt_call_failed(err, "removed", e->name) : MT_OK;
}

static mt_status remove_temporary(const mt_folder *folder, const entry *e, mt_error *err) {
    int sub = kept_folder(e->name);
    if (e->is_folder && e->inside < 0 && sub >= 0) return visit(folder, e->fd, sub, remove_temporary, err);
    if (e->is_file && is_temporary(e->name) && unlinkat(e->fd, e->name, 0))
        return mt_call_failed(err, "removed", e->name);
    return MT_OK;
}

static mt_status refuse_entry(const mt_folder *folder, const entry *e, mt_error *err) {
    return mt_fail(
        err, MT_EEXISTS,
        "%s exists and is not empty (it holds '%s'): choose another folder, or say that it is to be replaced",
        folder->path, e->name);
}

/* ---- opening and making ---- */

static bool has_marker(int fd) {
    char text[sizeof marker_text] = "";
    int file = openat(fd, marker, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    if (file < 0) return false;
    ssize_t got = read_fully(file, text, sizeof text - 1);
    close(file);
    return got == sizeof text - 1 && !memcmp(text, marker_text, sizeof text - 1);
}

bool mt_folder_is_run(const char *path) {
    int fd = path ? open_folder_at(AT_FDCWD, path, 0) : -1;
    if (fd < 0) return false;
    bool is = has_marker(fd);
    close(fd);
    return is;
}

mt_status mt_folder_open(mt_folder **out, const char *path, mt_error *err) {
    MT_REQUIRE(out && path, err);
    *out = NULL;
    mt_folder *folder;
    mt_status status = mt_new(&folder, 1, sizeof *folder, "a folder", err);
    if (status) return status;
    folder->lock = folder->fd = -1;
    folder->path = mt_copy_text(path);
    if (!folder->path) {
        status = mt_fail(err, MT_ENOMEM, "no memory for the name of a folder");
        goto failed;
    }
    folder->fd = open_folder_at(AT_FDCWD, path, 0);
    if (folder->fd < 0) {
        status = mt_call_failed(err, "opened as a folder", path);
        goto failed;
    }
    *out = folder;
    return MT_OK;
failed:
    mt_folder_close(&folder);
    return status;
}

void mt_folder_close(mt_folder **folder) {
    if (!folder || !*folder) return;
    if ((*folder)->lock >= 0) close((*folder)->lock);
    if ((*folder)->fd >= 0) close((*folder)->fd);
    mt_free((*folder)->path);
    mt_free(*folder);
    *folder = NULL;
}

static mt_status lock(mt_folder *folder, mt_error *err) {
    folder->lock = openat(folder->fd, marker, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    if (folder->lock < 0) return mt_call_failed(err, "opened (the marker in it)", folder->path);
    if (!flock(folder->lock, LOCK_EX | LOCK_NB)) return MT_OK;
    if (errno != EWOULDBLOCK) return MT_OK; /* a file system without locks: go on without */
    return mt_fail(err, MT_ESYSTEM,
                   "%s is in use by another run: wait for it to end or choose another folder", folder->path);
}

static mt_status write_marker(mt_folder *folder, mt_error *err) {
    int fd = mt_call_open(folder->fd, marker, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW, 0666);
    if (fd < 0) return mt_call_failed(err, "marked as a run folder", folder->path);
    mt_status status = MT_OK;
    if (mt_call_write(fd, marker_text, sizeof marker_text - 1) || mt_call_sync(fd))
        status = mt_call_failed(err, "marked as a run folder", folder->path);
    if (mt_call_close(fd) && !status) status = mt_call_failed(err, "marked as a run folder", folder->path);
    if (status) unlinkat(folder->fd, marker, 0);
    return status;
}

/* Takes over a folder that exists: *fresh when it is empty. */
static mt_status take_over(mt_folder *folder, bool replace, bool *fresh, mt_error *err) {
    *fresh = false;
    mt_status status = visit(folder, folder->fd, -1, refuse_entry, err);
    if (!status) *fresh = true;
    if (status != MT_EEXISTS || !replace) return status;
    if (!has_marker(folder->fd))
        return mt_fail(
            err, MT_EEXISTS,
            "%s is not empty and is no run folder (it has no '%s' in it), so it is not replaced: choose "
            "another folder",
            folder->path, marker);
    status = lock(folder, err);
    if (!status) status = visit(folder, folder->fd, -1, check_entry, err);
    if (!status) status = visit(folder, folder->fd, -1, remove_entry, err);
    return status;
}

static mt_status furnish(mt_folder *folder, bool fresh, bool for_run, mt_error *err) {
    mt_status status = fresh ? lock(folder, err) : MT_OK;
    if (!status && for_run) status = mt_folder_sub(folder, "pictures", err);
    if (!status && for_run) status = mt_folder_sub(folder, "fields", err);
    if (!status && mt_call_sync(folder->fd)) status = mt_call_failed(err, "flushed to disk", folder->path);
    return status;
}

/* Takes back what was made in a folder that was empty before. */
static void clear_away(mt_folder *folder) {
    unlinkat(folder->fd, "pictures", AT_REMOVEDIR);
    unlinkat(folder->fd, "fields", AT_REMOVEDIR);
    unlinkat(folder->fd, marker, 0);
}

static mt_status make(mt_folder **out, const char *path, bool for_run, bool replace, mt_error *err) {
    MT_REQUIRE(out && path, err);
    *out = NULL;
    mt_folder *folder = NULL;
    bool made = mt_call_mkdir(AT_FDCWD, path, 0777) == 0, fresh = made;
    if (!made && errno != EEXIST) return mt_call_failed(err, "made", path);
    mt_status status = mt_folder_open(&folder, path, err);
    if (status && made) rmdir(path);
    if (status) return status;
    if (!made) status = take_over(folder, replace, &fresh, err);
    if (!status && fresh) status = write_marker(folder, err);
    if (!status) {
        status = furnish(folder, fresh, for_run, err);
        if (status && fresh) clear_away(folder);
    }
    if (status) {
        mt_folder_close(&folder);
        if (made) rmdir(path);
    }
    *out = folder;
    return status;
}

mt_status mt_folder_make(mt_folder **out, const char *path, bool replace, mt_error *err) {
    return make(out, path, true, replace, err);
}

mt_status mt_folder_make_plain(mt_folder **out, const char *path, bool replace, mt_error *err) {
    return make(out, path, false, replace, err);
}

mt_status mt_folder_resume(mt_folder **out, const char *path, mt_error *err) {
    mt_status status = mt_folder_open(out, path, err);
    if (status) return status;
    if (!has_marker((*out)->fd))
        status = mt_fail(err, MT_EINPUT,
                         "%s is no run folder (it has no '%s' in it): give the folder that a run left", path,
                         marker);
    if (!status) status = lock(*out, err);
    if (!status) status = visit(*out, (*out)->fd, -1, remove_temporary, err);
    if (status) mt_folder_close(out);
    return status;
}

mt_status mt_folder_sub(mt_folder *folder, const char *name, mt_error *err) {
    MT_REQUIRE(folder && name && !strchr(name, '/'), err);
    mt_status status = mt_folder_check_name(name, err);
    if (status) return status;
    if (mt_call_mkdir(folder->fd, name, 0777) == 0) return MT_OK;
    char path[600];
    mt_folder_describe(folder, name, path, sizeof path);
    if (errno != EEXIST) return mt_call_failed(err, "made", path);
    int fd = open_folder_at(folder->fd, name, O_NOFOLLOW);
    if (fd < 0) return mt_call_failed(err, "used as a folder", path);
    close(fd);
    return MT_OK;
}
