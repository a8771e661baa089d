/* Files written whole or not at all: a temporary name (".<name>.part") in the same folder, written through a
 * small buffer, flushed to disk, renamed over the target, the folder flushed. When anything fails the
 * temporary is removed, the target stays as it was, and the record says which file, why, and what to do
 * (EFILE).
 *
 * Everywhere in this room: `folder` may be NULL, `name` is then a path. See folder.h for names. */
#ifndef MT_FILES_ATOMIC_H
#define MT_FILES_ATOMIC_H

#include "core/files/folder.h"

typedef struct mt_atomic mt_atomic;

/* Opens the temporary. End with mt_atomic_commit or mt_atomic_drop. */
MT_API mt_status mt_atomic_open(mt_atomic **out, const mt_folder *folder, const char *name,
                                mt_error *err) MT_MUST_USE;

/* Appends n bytes. After a failure only mt_atomic_drop makes sense; mt_atomic_commit then fails the same way.
 */
MT_API mt_status mt_atomic_write(mt_atomic *file, const void *bytes, size_t n, mt_error *err) MT_MUST_USE;

/* Puts the file in place. Frees and sets *file to NULL whether it succeeds or not; on failure the target is
 * untouched, except when flushing the folder after the rename fails: the new file is then in place, whole,
 * but may be lost in a power failure, and the record says so. */
MT_API mt_status mt_atomic_commit(mt_atomic **file, mt_error *err) MT_MUST_USE;

/* Gives up: removes the temporary, frees, sets *file to NULL. NULL inside is allowed. */
MT_API void mt_atomic_drop(mt_atomic **file);

/* A whole file at once. */
MT_API mt_status mt_atomic_put(const mt_folder *folder, const char *name, const void *bytes, size_t n,
                               mt_error *err) MT_MUST_USE;

/* Copies a file (from `source`, any path when `from` is NULL) to `name` in `folder`. */
MT_API mt_status mt_atomic_copy(const mt_folder *folder, const char *name, const mt_folder *from,
                                const char *source, mt_error *err) MT_MUST_USE;

#endif
