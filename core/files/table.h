/* Tables as CSV (RFC 4180): the ledger, written row by row, and measured tables read back.
 *
 * The first row names the columns with their units, "time [h]"; lines end with a single line feed. Numbers
 * are written so that they read back exactly (mt_number_exact), an absent number as an empty cell, text
 * quoted where it must be. */
#ifndef MT_FILES_TABLE_H
#define MT_FILES_TABLE_H

#include "core/files/folder.h"

typedef struct mt_table_column {
    const char *name; /* "time" */
    const char *unit; /* "h"; NULL or "": the name stands alone */
    bool text;        /* cells are text, not numbers */
} mt_table_column;

typedef struct mt_cell {
    double value;     /* of a number column; NaN is written as an empty cell */
    const char *text; /* of a text column; NULL is an empty cell */
} mt_cell;

typedef struct mt_table mt_table;

/* A new table with its header row; a file of that name is refused with EEXISTS. */
MT_API mt_status mt_table_create(mt_table **out, const mt_folder *folder, const char *name, int columns,
                                 const mt_table_column column[], mt_error *err) MT_MUST_USE;

/* Goes on with a table: cuts it back to `size` bytes (mt_table_size at the checkpoint). EFORMAT when it is
 * shorter, its header row is not the one asked for, or byte size-1 is not the end of a line. */
MT_API mt_status mt_table_resume(mt_table **out, const mt_folder *folder, const char *name, int columns,
                                 const mt_table_column column[], uint64_t size, mt_error *err) MT_MUST_USE;

/* Appends a row (one cell for each column) with one write. When that fails part way the file is cut back to
 * whole lines. */
MT_API mt_status mt_table_row(mt_table *table, const mt_cell cell[], mt_error *err) MT_MUST_USE;

MT_API uint64_t mt_table_size(const mt_table *table); /* bytes written, whole lines */
MT_API mt_status mt_table_sync(mt_table *table,
                               mt_error *err) MT_MUST_USE; /* flushes to disk, for a checkpoint */

/* Flushes to disk, closes, frees, sets *table to NULL, whether it succeeds or not. NULL inside is allowed. */
MT_API mt_status mt_table_close(mt_table **table, mt_error *err) MT_MUST_USE;

/* A numeric table in memory. */
typedef struct mt_columns {
    int columns;
    size_t rows;
    char **name;    /* of each column, without the unit; "" when there is no header row */
    char **unit;    /* what stood in [ ] or after the name in ( ); "" when nothing */
    double *values; /* rows * columns, row by row; an empty cell is NaN */
} mt_columns;

/* Reads a CSV of numbers: separator ',' or ';' or tab (found from the first line), a header row when the
 * first line has a cell that is no number, lines starting with '#' and empty lines skipped, a byte-order mark
 * skipped. EFORMAT naming line and column for a cell that is no number or a row of another length; EINPUT
 * above `most` bytes (0: 256 MB). */
MT_API mt_status mt_table_read(mt_columns *out, const mt_folder *folder, const char *name, size_t most,
                               mt_error *err) MT_MUST_USE;

MT_API void mt_columns_free(mt_columns *columns); /* what it holds; the struct is the caller's */

#endif
