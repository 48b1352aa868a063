#include "log/sql.h"

#include <stdio.h>
#include <string.h>

static const char *file_of(sqlite3 *db)
{
    const char *name = sqlite3_db_filename(db, "main");
    return name == NULL || name[0] == '\0' ? "the log" : name;
}

bool sql_fail(sqlite3 *db, struct error *err)
{
    const char *name = file_of(db);
    switch (sqlite3_errcode(db) & 0xff) {
    case SQLITE_FULL:
        return error_set(err, ERROR_STORAGE, "%s: the disk is full: free some space", name);
    case SQLITE_IOERR:
        return error_set(err, ERROR_STORAGE,
                         "%s: the disk does not read or write (%s): check its space, limits and "
                         "health",
                         name, sqlite3_errstr(sqlite3_extended_errcode(db)));
    case SQLITE_READONLY:
    case SQLITE_PERM:
        return error_set(err, ERROR_STORAGE, "%s: cannot be written: check who owns it", name);
    case SQLITE_CANTOPEN:
        return error_set(err, ERROR_STORAGE,
                         "%s: cannot be opened: check that the folder exists and is yours", name);
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
        return error_set(err, ERROR_STORAGE, "%s: another program keeps it locked", name);
    case SQLITE_NOTADB:
        return error_set(err, ERROR_DATA, "%s: is not a log, or its beginning is damaged", name);
    case SQLITE_CORRUPT:
        return error_set(err, ERROR_DATA, "%s: damaged (%s)", name, sqlite3_errmsg(db));
    case SQLITE_TOOBIG:
        return error_set(err, ERROR_LIMIT, "%s: a strike is too long to be stored", name);
    case SQLITE_NOMEM:
        return error_set(err, ERROR_MEMORY, "%s: memory ran out", name);
    case SQLITE_INTERRUPT:
        return error_set(err, ERROR_LIMIT, "%s: the question took too long and was stopped", name);
    default:
        return error_set(err, ERROR_INTERNAL, "%s: %s", name, sqlite3_errmsg(db));
    }
}

bool sql_exec(sqlite3 *db, const char *sql, struct error *err)
{
    return sqlite3_exec(db, sql, NULL, NULL, NULL) == SQLITE_OK || sql_fail(db, err);
}

sqlite3_stmt *sql_prepare(sqlite3 *db, const char *sql, struct error *err)
{
    sqlite3_stmt *statement = NULL;
    if (sqlite3_prepare_v2(db, sql, -1, &statement, NULL) != SQLITE_OK) {
        sql_fail(db, err);
        return NULL;
    }
    return statement;
}

enum sql_row sql_next(sqlite3_stmt *statement, struct error *err)
{
    switch (sqlite3_step(statement)) {
    case SQLITE_ROW:
        return SQL_ROW;
    case SQLITE_DONE:
        return SQL_END;
    default:
        sql_fail(sqlite3_db_handle(statement), err);
        return SQL_FAILED;
    }
}

bool sql_run(sqlite3_stmt *statement, struct error *err)
{
    enum sql_row row = SQL_ROW;
    while (row == SQL_ROW)
        row = sql_next(statement, err);
    sqlite3_reset(statement);
    return row == SQL_END;
}

bool sql_integer(sqlite3 *db, const char *sql, int64_t parameter, int64_t if_none,
                 int64_t *out_value, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, sql, err);
    if (statement == NULL)
        return false;
    if (sqlite3_bind_parameter_count(statement) > 0)
        sqlite3_bind_int64(statement, 1, parameter);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW && sqlite3_column_type(statement, 0) != SQLITE_NULL)
        *out_value = sqlite3_column_int64(statement, 0);
    else if (row != SQL_FAILED)
        *out_value = if_none;
    sqlite3_finalize(statement);
    return row != SQL_FAILED;
}

void sql_bind_text(sqlite3_stmt *statement, int parameter, const char *text)
{
    sqlite3_bind_text(statement, parameter, text, -1, SQLITE_STATIC);
}

void sql_bind_text_or_null(sqlite3_stmt *statement, int parameter, const char *text)
{
    if (text == NULL || text[0] == '\0')
        sqlite3_bind_null(statement, parameter);
    else
        sql_bind_text(statement, parameter, text);
}

void sql_bind_bytes(sqlite3_stmt *statement, int parameter, const struct text *bytes)
{
    sqlite3_bind_blob64(statement, parameter, bytes->length > 0 ? bytes->data : "", bytes->length,
                        SQLITE_STATIC);
}

const char *sql_text(sqlite3_stmt *statement, int column)
{
    const unsigned char *text = sqlite3_column_text(statement, column);
    return text == NULL ? "" : (const char *)text;
}

void sql_copy_text(sqlite3_stmt *statement, int column, char *out, size_t out_size)
{
    snprintf(out, out_size, "%s", sql_text(statement, column));
}

bool sql_begin(sqlite3 *db, struct error *err)
{
    return sql_exec(db, "BEGIN IMMEDIATE", err);
}

bool sql_begin_read(sqlite3 *db, struct error *err)
{
    return sql_exec(db, "BEGIN DEFERRED", err);
}

bool sql_end(sqlite3 *db, bool is_good, struct error *err)
{
    if (is_good && sql_exec(db, "COMMIT", err))
        return true;
    /* After SQLITE_FULL or SQLITE_IOERR the transaction may be gone already. */
    if (!sqlite3_get_autocommit(db))
        sqlite3_exec(db, "ROLLBACK", NULL, NULL, NULL);
    return false;
}

void sql_end_read(sqlite3 *db)
{
    if (!sqlite3_get_autocommit(db))
        sqlite3_exec(db, "COMMIT", NULL, NULL, NULL);
}
