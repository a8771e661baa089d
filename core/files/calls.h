/* The system calls that writing needs, counted, with a switch that makes the k-th one fail: tests sweep k and
 * show that no half-written file is left at any point. Also the texts that explain an errno to a person. */
#ifndef MT_FILES_CALLS_H
#define MT_FILES_CALLS_H

#include <sys/stat.h>
#include <sys/types.h>

#include "core/base/error.h"

/* The k-th writing call (open for writing, write, fsync, ftruncate, close, rename, mkdir) from now on fails
 * with ENOSPC, counted from 0, once; -1 switches this off. */
MT_API void mt_files_fail_at(long k);

/* True when a failure asked for by mt_files_fail_at has happened since it was asked for. */
MT_API bool mt_files_did_fail(void);

/* As the system calls; each retries EINTR where that is right. The descriptor is gone after mt_call_close
 * either way. */
int mt_call_open(int folder, const char *name, int flags, mode_t mode);
int mt_call_write(int fd, const void *bytes, size_t n); /* all n bytes, or -1 */
int mt_call_sync(int fd);
int mt_call_truncate(int fd, off_t size);
int mt_call_close(int fd);
int mt_call_rename(int folder, const char *from, const char *to);
int mt_call_mkdir(int folder, const char *name, mode_t mode);

/* EFILE with "<path> could not be <what>: <errno text>; <what to do>" from the present errno. */
mt_status mt_call_failed(mt_error *err, const char *what, const char *path);

#endif
