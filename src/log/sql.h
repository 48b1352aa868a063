/* Small layer over SQLite: every failure becomes one sentence, every statement is finalized by who
 * prepared it. Used by src/log alone. */
#ifndef WANE_LOG_SQL_H
#define WANE_LOG_SQL_H

#include "wane/error.h"
#include "wane/text.h"

#include <sqlite3.h>

/* Fills *err from the connection's last error and returns false. */
bool sql_fail(sqlite3 *db, struct error *err);

bool sql_exec(sqlite3 *db, const char *sql, struct error *err);

/* NULL and *err on failure. The caller finalizes it before any wait: an open statement keeps the
 * WAL from being emptied. */
sqlite3_stmt *sql_prepare(sqlite3 *db, const char *sql, struct error *err);

/* Runs a statement that gives no rows, and resets it. */
bool sql_run(sqlite3_stmt *statement, struct error *err);

enum sql_row { SQL_ROW, SQL_END, SQL_FAILED };
enum sql_row sql_next(sqlite3_stmt *statement, struct error *err);

/* The first column of the first row of `sql`, which has at most one parameter. No row:
 * `if_none`. */
bool sql_integer(sqlite3 *db, const char *sql, int64_t parameter, int64_t if_none,
                 int64_t *out_value, struct error *err);

/* Texts and bytes are borrowed until the statement is reset. An empty text is bound as NULL by the
 * second one: "none" is NULL in the tables. */
void sql_bind_text(sqlite3_stmt *statement, int parameter, const char *text);
void sql_bind_text_or_null(sqlite3_stmt *statement, int parameter, const char *text);
void sql_bind_bytes(sqlite3_stmt *statement, int parameter, const struct text *bytes);

/* Never NULL. */
const char *sql_text(sqlite3_stmt *statement, int column);
void sql_copy_text(sqlite3_stmt *statement, int column, char *out, size_t out_size);

bool sql_begin(sqlite3 *db, struct error *err);      /* for writing: takes the lock at once */
bool sql_begin_read(sqlite3 *db, struct error *err); /* one snapshot for several statements */
/* Commits if `is_good`, else rolls back. Returns whether it was committed. *err keeps the first
 * failure. */
bool sql_end(sqlite3 *db, bool is_good, struct error *err);
void sql_end_read(sqlite3 *db);

#endif
