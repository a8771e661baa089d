/* A folder that files are written to and read from by name, and the run folder in particular.
 *
 * A name is relative, its parts joined by '/': "ledger.csv", "pictures/x-0004.png". Empty parts, "." and
 * "..", absolute names, control characters and names over 255 bytes are refused with EINPUT, and so is
 * (EFILE) any symbolic link on the way: each part is opened without following links, so that a name never
 * leads outside the folder.
 *
 * What a run folder holds: the marker ".mottle" (written first, by which a run folder is recognised, and
 * locked while a run is using it); ledger.csv, journal, state, report.html, summary.json, script.lua;
 * pictures/ (*.png), fields/
 * (*.npy, *.vti), tables/ (*.csv) and inputs/ (copies of what the script read, any name). */
#ifndef MT_FILES_FOLDER_H
#define MT_FILES_FOLDER_H

#include "core/base/error.h"

typedef struct mt_folder mt_folder;

/* Makes a run folder at `path` (its parent must exist) with pictures/ and fields/ in it, and locks it. A
 * folder that exists and is empty is taken. One that is not empty is refused with EEXISTS, unless `replace`
 * is given and it is a run folder: then what a run folder holds (see above) is removed and nothing else.
 * Anything else found in it is named and refused with EEXISTS before the first file is removed. ESYSTEM when
 * another run is using it. */
MT_API mt_status mt_folder_make(mt_folder **out, const char *path, bool replace, mt_error *err) MT_MUST_USE;
/* The same without pictures/ and fields/: for a plan. */
MT_API mt_status mt_folder_make_plain(mt_folder **out, const char *path, bool replace,
                                      mt_error *err) MT_MUST_USE;

/* Opens the run folder at `path` to go on with it, and locks it. Temporaries (*.part) that a killed run left
 * in it are removed. EINPUT when it has no marker, ESYSTEM when another run is using it. */
MT_API mt_status mt_folder_resume(mt_folder **out, const char *path, mt_error *err) MT_MUST_USE;

/* Opens any existing folder, unlocked: a script's own folder to read from, a run folder to report on. */
MT_API mt_status mt_folder_open(mt_folder **out, const char *path, mt_error *err) MT_MUST_USE;

/* Unlocks, frees, sets *folder to NULL. NULL inside is allowed. */
MT_API void mt_folder_close(mt_folder **folder);

MT_API const char *mt_folder_path(const mt_folder *folder); /* as given; "" for NULL */

/* True when the folder at `path` carries the marker of a run folder. */
MT_API bool mt_folder_is_run(const char *path);

/* Makes the sub folder `name` (one part); one that exists is fine. */
MT_API mt_status mt_folder_sub(mt_folder *folder, const char *name, mt_error *err) MT_MUST_USE;

/* EINPUT, saying why, when `name` is not a name as described above. */
MT_API mt_status mt_folder_check_name(const char *name, mt_error *err) MT_MUST_USE;

/* True when there is a regular file of that name. folder as in mt_folder_open_read. */
MT_API bool mt_folder_has(const mt_folder *folder, const char *name);

/* Reads a whole file of at most `most` bytes into a new block (mt_free) with a 0 byte after the end. EFILE
 * when it cannot be read, EFORMAT when it is larger. folder as in mt_folder_open_read. */
MT_API mt_status mt_folder_read(const mt_folder *folder, const char *name, size_t most, char **bytes,
                                size_t *n, mt_error *err) MT_MUST_USE;

/* For the modules of this room. A NULL folder stands for "no folder": `name` is then any path, links are
 * followed. */

/* Descriptor of the folder that the last part of `name` lies in (to be closed) and that last part, within
 * `name`. */
mt_status mt_folder_parent(const mt_folder *folder, const char *name, int *fd, const char **leaf,
                           mt_error *err) MT_MUST_USE;
/* Descriptor of a regular file opened for reading (to be closed), and its size. */
mt_status mt_folder_open_read(const mt_folder *folder, const char *name, int *fd, size_t *size,
                              mt_error *err) MT_MUST_USE;
/* "folder/name" for messages. */
void mt_folder_describe(const mt_folder *folder, const char *name, char *text, size_t room);

#endif
