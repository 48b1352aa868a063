/* Series, part sheets, measurements and events: writing. */
#include "log/log_inner.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#define PART_NAME_MAX 64

/* Runs a bound INSERT or UPDATE as a transaction of its own and finalizes it. */
static bool finish_change(sqlite3 *db, sqlite3_stmt *statement, int64_t *out_id, struct error *err)
{
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    if (is_good && out_id != NULL)
        *out_id = sqlite3_last_insert_rowid(db);
    return is_good;
}

static bool require_text(const char *text, size_t size, const char *what, struct error *err)
{
    if (text == NULL || text[0] == '\0')
        return error_set(err, ERROR_USAGE, "%s is missing", what);
    return log_text_fits(text, size, what, err);
}

bool log_series_create(struct log_writer *writer, const struct log_series *series, int64_t now_ms,
                       int64_t *out_id, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(writer->db,
                    "INSERT INTO series (name, input, part, specimen, opened_ms)"
                    " VALUES (?1, ?2, ?3, ?4, ?5)",
                    err);
    if (statement == NULL)
        return false;
    sql_bind_text(statement, 1, series->name);
    sql_bind_text_or_null(statement, 2, series->input);
    sql_bind_text_or_null(statement, 3, series->part);
    sql_bind_text_or_null(statement, 4, series->specimen);
    sqlite3_bind_int64(statement, 5, now_ms);
    return finish_change(writer->db, statement, out_id, err);
}

static bool finish_series_change(sqlite3 *db, sqlite3_stmt *statement, int64_t id,
                                 struct error *err)
{
    if (!finish_change(db, statement, NULL, err))
        return false;
    if (sqlite3_changes(db) == 0)
        return error_set(err, ERROR_NOT_FOUND, "there is no series %" PRId64, id);
    return true;
}

bool log_series_rename(struct log_writer *writer, int64_t id, const char *name, struct error *err)
{
    if (!log_text_fits(name, LOG_NAME_MAX, "the series' name", err))
        return false;
    sqlite3_stmt *statement =
        sql_prepare(writer->db, "UPDATE series SET name = ?2 WHERE id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sql_bind_text(statement, 2, name);
    return finish_series_change(writer->db, statement, id, err);
}

bool log_series_close(struct log_writer *writer, int64_t id, int64_t now_ms, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        writer->db, "UPDATE series SET closed_ms = coalesce(closed_ms, ?2) WHERE id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int64(statement, 2, now_ms);
    return finish_series_change(writer->db, statement, id, err);
}

/* ---- part sheets ---- */

static bool check_part_name(const char *name, struct error *err)
{
    size_t length = strlen(name);
    size_t good = strspn(name, "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-_.");
    if (length == 0 || length > PART_NAME_MAX || good != length || name[0] == '.')
        return error_set(err, ERROR_USAGE,
                         "\"%.80s\" is no name for a part: use up to %d letters, digits, '-', '_' "
                         "or '.'",
                         name, PART_NAME_MAX);
    return true;
}

void log_part_etag(const char *token, int64_t version, char out_etag[LOG_ETAG_MAX])
{
    /* The log's token makes tags of different logs differ. */
    snprintf(out_etag, LOG_ETAG_MAX, "\"%.12s-%" PRId64 "\"", token, version);
}

static bool newest_version(sqlite3 *db, const char *name, int64_t *out_version, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db, "SELECT coalesce(max(version), 0) FROM part WHERE name = ?1", err);
    if (statement == NULL)
        return false;
    sql_bind_text(statement, 1, name);
    bool is_good = sql_next(statement, err) == SQL_ROW;
    if (is_good)
        *out_version = sqlite3_column_int64(statement, 0);
    sqlite3_finalize(statement);
    return is_good;
}

static bool insert_part(sqlite3 *db, const char *name, int64_t version, const char *sheet,
                        int64_t now_ms, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        db, "INSERT INTO part (name, version, changed_ms, sheet) VALUES (?1, ?2, ?3, ?4)", err);
    if (statement == NULL)
        return false;
    sql_bind_text(statement, 1, name);
    sqlite3_bind_int64(statement, 2, version);
    sqlite3_bind_int64(statement, 3, now_ms);
    sql_bind_text(statement, 4, sheet);
    return finish_change(db, statement, NULL, err);
}

bool log_part_put(struct log_writer *writer, const char *name, const char *sheet,
                  const char *if_match, int64_t now_ms, char out_etag[LOG_ETAG_MAX],
                  struct error *err)
{
    if (!check_part_name(name, err) || !log_text_fits(sheet, LOG_SHEET_MAX, "the sheet", err) ||
        !sql_begin(writer->db, err))
        return false;
    int64_t version = 0;
    char etag[LOG_ETAG_MAX];
    bool is_good = newest_version(writer->db, name, &version, err);
    log_part_etag(writer->token, version, etag);
    if (is_good && version > 0 && (if_match == NULL || strcmp(if_match, etag) != 0))
        is_good = error_set(err, ERROR_CONFLICT,
                            "part %s was changed by somebody else (it is now %s): fetch it again",
                            name, etag);
    else if (is_good && version == 0 && if_match != NULL)
        is_good = error_set(err, ERROR_CONFLICT, "part %s does not exist (any more)", name);
    is_good = is_good && insert_part(writer->db, name, version + 1, sheet, now_ms, err);
    is_good = sql_end(writer->db, is_good, err);
    if (is_good)
        log_part_etag(writer->token, version + 1, out_etag);
    return is_good;
}

/* ---- measurements and events ---- */

bool log_measurement_add(struct log_writer *writer, int64_t now_ms, const char *name, double value,
                         const char *unit, int64_t *out_id, struct error *err)
{
    if (!require_text(name, LOG_NAME_MAX, "the measurement's name", err) ||
        !log_text_fits(unit, LOG_NAME_MAX, "the unit", err))
        return false;
    if (!isfinite(value))
        return error_set(err, ERROR_USAGE, "%.80s: the value is no number", name);
    sqlite3_stmt *statement = sql_prepare(
        writer->db, "INSERT INTO measurement (time_ms, name, value, unit) VALUES (?1, ?2, ?3, ?4)",
        err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, now_ms);
    sql_bind_text(statement, 2, name);
    sqlite3_bind_double(statement, 3, value);
    sql_bind_text_or_null(statement, 4, unit);
    return finish_change(writer->db, statement, out_id, err);
}

static bool add_event(struct log_writer *writer, int64_t now_ms, const char *kind, const char *text,
                      const char *about, int64_t gap_ms, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(writer->db,
                                          "INSERT INTO event (time_ms, kind, text, about, gap_ms)"
                                          " VALUES (?1, ?2, ?3, ?4, ?5)",
                                          err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, now_ms);
    sql_bind_text(statement, 2, kind);
    sql_bind_text(statement, 3, text);
    sql_bind_text_or_null(statement, 4, about);
    if (gap_ms > 0)
        sqlite3_bind_int64(statement, 5, gap_ms);
    return finish_change(writer->db, statement, NULL, err);
}

bool log_input_event(struct log_writer *writer, int64_t now_ms, const char *input,
                     const char *state, int64_t gap_ms, struct error *err)
{
    return require_text(state, LOG_NAME_MAX, "the input's state", err) &&
           log_text_fits(input, LOG_SOURCE_MAX, "the input's name", err) &&
           add_event(writer, now_ms, "input", state, input, gap_ms, err);
}

bool log_notice(struct log_writer *writer, int64_t now_ms, const char *kind, const char *text,
                struct error *err)
{
    return require_text(kind, LOG_NAME_MAX, "the notice's kind", err) &&
           log_text_fits(text, LOG_NOTE_MAX, "the notice", err) &&
           add_event(writer, now_ms, kind, text, NULL, 0, err);
}
