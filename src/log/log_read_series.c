/* Series, part sheets, measurements and events: reading. */
#include "log/log_inner.h"
#include "log/log_read.h"
#include "wane/json.h"

#include <inttypes.h>

#define SELECT_SERIES                                                                              \
    "SELECT id, name, input, part, specimen, opened_ms, closed_ms,"                                \
    " (SELECT count(*) FROM strike WHERE strike.series = series.id) FROM series "

static bool check_answer(const struct text *text, enum sql_row row, struct error *err)
{
    if (row == SQL_FAILED)
        return false;
    return !text->failed || error_set(err, ERROR_MEMORY, "no memory for the answer");
}

static bool check_list_limit(unsigned limit, struct error *err)
{
    if (limit >= 1 && limit <= LOG_PAGE_MAX)
        return true;
    return error_set(err, ERROR_USAGE, "limit=%u: must be 1 ... %d", limit, LOG_PAGE_MAX);
}

static void write_series(struct text *out, sqlite3_stmt *row)
{
    struct json_writer json = {.text = out};
    json_open_object(&json, NULL);
    json_integer(&json, "id", sqlite3_column_int64(row, 0));
    log_write_text(&json, "name", row, 1);
    log_write_text(&json, "input", row, 2);
    log_write_text(&json, "part", row, 3);
    log_write_text(&json, "specimen", row, 4);
    log_write_time(&json, "opened", sqlite3_column_int64(row, 5));
    if (sqlite3_column_type(row, 6) == SQLITE_NULL)
        json_null(&json, "closed");
    else
        log_write_time(&json, "closed", sqlite3_column_int64(row, 6));
    json_integer(&json, "strikes", sqlite3_column_int64(row, 7));
    json_close_object(&json);
}

bool log_read_series_json(struct log_reader *reader, int64_t id, struct text *out_object,
                          struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(reader->db, SELECT_SERIES "WHERE id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW)
        write_series(out_object, statement);
    sqlite3_finalize(statement);
    if (row == SQL_END)
        return error_set(err, ERROR_NOT_FOUND, "there is no series %" PRId64, id);
    return check_answer(out_object, row, err);
}

bool log_list_series_json(struct log_reader *reader, int64_t before, unsigned limit,
                          struct text *out_objects, int64_t *out_next_before, struct error *err)
{
    if (!check_list_limit(limit, err))
        return false;
    sqlite3_stmt *statement =
        sql_prepare(reader->db, SELECT_SERIES "WHERE id < ?1 ORDER BY id DESC LIMIT ?2", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, before > 0 ? before : INT64_MAX);
    sqlite3_bind_int64(statement, 2, (int64_t)limit + 1);
    unsigned count = 0;
    int64_t last_id = 0;
    int64_t next_before = 0;
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        if (count == limit) {
            next_before = last_id;
            break;
        }
        if (count++ > 0)
            text_append(out_objects, ",");
        last_id = sqlite3_column_int64(statement, 0);
        write_series(out_objects, statement);
    }
    sqlite3_finalize(statement);
    if (!check_answer(out_objects, row, err))
        return false;
    *out_next_before = next_before;
    return true;
}

bool log_read_open_series(struct log_reader *reader, const char *input, int64_t *out_id,
                          struct log_series *out_series, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(reader->db,
                    "SELECT id, name, input, part, specimen FROM series"
                    " WHERE closed_ms IS NULL AND input IS ?1 ORDER BY id DESC LIMIT 1",
                    err);
    if (statement == NULL)
        return false;
    sql_bind_text_or_null(statement, 1, input);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_END)
        *out_id = 0;
    if (row == SQL_ROW) {
        *out_id = sqlite3_column_int64(statement, 0);
        sql_copy_text(statement, 1, out_series->name, sizeof out_series->name);
        sql_copy_text(statement, 2, out_series->input, sizeof out_series->input);
        sql_copy_text(statement, 3, out_series->part, sizeof out_series->part);
        sql_copy_text(statement, 4, out_series->specimen, sizeof out_series->specimen);
    }
    sqlite3_finalize(statement);
    return row != SQL_FAILED;
}

/* ---- part sheets ---- */

bool log_read_part(struct log_reader *reader, const char *name, int64_t version,
                   struct text *out_sheet, char out_etag[LOG_ETAG_MAX], struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(reader->db,
                    "SELECT sheet, version FROM part WHERE name = ?1 AND (?2 = 0 OR version = ?2)"
                    " ORDER BY version DESC LIMIT 1",
                    err);
    if (statement == NULL)
        return false;
    sql_bind_text(statement, 1, name);
    sqlite3_bind_int64(statement, 2, version);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW) {
        text_append(out_sheet, sql_text(statement, 0));
        log_part_etag(reader->token, sqlite3_column_int64(statement, 1), out_etag);
    }
    sqlite3_finalize(statement);
    if (row == SQL_END)
        return error_set(err, ERROR_NOT_FOUND, "there is no part \"%.80s\"%s", name,
                         version > 0 ? " of that version" : "");
    return check_answer(out_sheet, row, err);
}

bool log_list_parts_json(struct log_reader *reader, struct text *out_objects, struct error *err)
{
    /* SQLite: beside max(), bare columns come from the row that holds the maximum. */
    sqlite3_stmt *statement = sql_prepare(
        reader->db, "SELECT name, max(version), changed_ms FROM part GROUP BY name ORDER BY name",
        err);
    if (statement == NULL)
        return false;
    struct json_writer json = {.text = out_objects};
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        char etag[LOG_ETAG_MAX];
        log_part_etag(reader->token, sqlite3_column_int64(statement, 1), etag);
        json_open_object(&json, NULL);
        log_write_text(&json, "name", statement, 0);
        log_write_integer(&json, "version", statement, 1);
        log_write_time(&json, "changed", sqlite3_column_int64(statement, 2));
        json_string(&json, "etag", etag);
        json_close_object(&json);
    }
    sqlite3_finalize(statement);
    return check_answer(out_objects, row, err);
}

/* ---- measurements and events ---- */

/* ?1 from, ?2 to, ?3 name or kind (NULL: any), ?4 limit. */
static sqlite3_stmt *prepare_list(struct log_reader *reader, const char *sql, const char *name,
                                  int64_t from_ms, int64_t to_ms, unsigned limit, struct error *err)
{
    if (!check_list_limit(limit, err))
        return NULL;
    sqlite3_stmt *statement = sql_prepare(reader->db, sql, err);
    if (statement == NULL)
        return NULL;
    sqlite3_bind_int64(statement, 1, from_ms);
    sqlite3_bind_int64(statement, 2, to_ms);
    sql_bind_text_or_null(statement, 3, name);
    sqlite3_bind_int64(statement, 4, limit);
    return statement;
}

bool log_list_measurements_json(struct log_reader *reader, const char *name, int64_t from_ms,
                                int64_t to_ms, unsigned limit, struct text *out_objects,
                                struct error *err)
{
    sqlite3_stmt *statement =
        prepare_list(reader,
                     "SELECT id, time_ms, name, value, unit FROM (SELECT * FROM measurement"
                     " WHERE time_ms >= ?1 AND time_ms < ?2 AND (?3 IS NULL OR name = ?3)"
                     " ORDER BY time_ms DESC, id DESC LIMIT ?4) ORDER BY time_ms, id",
                     name, from_ms, to_ms, limit, err);
    if (statement == NULL)
        return false;
    struct json_writer json = {.text = out_objects};
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        json_open_object(&json, NULL);
        json_integer(&json, "id", sqlite3_column_int64(statement, 0));
        log_write_time(&json, "time", sqlite3_column_int64(statement, 1));
        log_write_text(&json, "name", statement, 2);
        json_number(&json, "value", sqlite3_column_double(statement, 3), 15);
        log_write_text(&json, "unit", statement, 4);
        json_close_object(&json);
    }
    sqlite3_finalize(statement);
    return check_answer(out_objects, row, err);
}

bool log_list_events_json(struct log_reader *reader, const char *kind, int64_t from_ms,
                          int64_t to_ms, unsigned limit, struct text *out_objects,
                          struct error *err)
{
    sqlite3_stmt *statement =
        prepare_list(reader,
                     "SELECT id, time_ms, kind, text, about, gap_ms FROM (SELECT * FROM event"
                     " WHERE time_ms >= ?1 AND time_ms < ?2 AND (?3 IS NULL OR kind = ?3)"
                     " ORDER BY time_ms DESC, id DESC LIMIT ?4) ORDER BY time_ms, id",
                     kind, from_ms, to_ms, limit, err);
    if (statement == NULL)
        return false;
    struct json_writer json = {.text = out_objects};
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        json_open_object(&json, NULL);
        json_integer(&json, "id", sqlite3_column_int64(statement, 0));
        log_write_time(&json, "time", sqlite3_column_int64(statement, 1));
        log_write_text(&json, "kind", statement, 2);
        log_write_text(&json, "text", statement, 3);
        log_write_text(&json, "input", statement, 4);
        if (sqlite3_column_type(statement, 5) != SQLITE_NULL)
            json_number(&json, "gap_s", (double)sqlite3_column_int64(statement, 5) / 1e3, 12);
        json_close_object(&json);
    }
    sqlite3_finalize(statement);
    return check_answer(out_objects, row, err);
}
