/* Strikes, as JSON and whole. Every function is one read transaction that ends with it. */
#include "log/log_read.h"
#include "log/log_inner.h"
#include "log/log_select.h"
#include "log/pack.h"
#include "log/wave_pack.h"
#include "wane/clock.h"
#include "wane/json.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/statvfs.h>

/* Columns of LOG_SELECT_OBJECT. */
enum object_column {
    COLUMN_ID,
    COLUMN_REVISION,
    COLUMN_TIME,
    COLUMN_CLOSED,
    COLUMN_SYNCED,
    COLUMN_SERIES,
    COLUMN_PART,
    COLUMN_SPECIMEN,
    COLUMN_INPUT,
    COLUMN_SOURCE,
    COLUMN_NUMBER,
    COLUMN_NOTE,
    COLUMN_SET_ASIDE,
    COLUMN_ODD,
    COLUMN_HAS_SAMPLES,
    COLUMN_SETTINGS,
    COLUMN_VERSION,
    COLUMN_READING
};

static bool no_strike(int64_t id, struct error *err)
{
    return error_set(err, ERROR_NOT_FOUND, "there is no strike %" PRId64 " in the log", id);
}

static bool check_limit(unsigned limit, struct error *err)
{
    if (limit >= 1 && limit <= LOG_PAGE_MAX)
        return true;
    return error_set(err, ERROR_USAGE, "limit=%u: must be 1 ... %d", limit, LOG_PAGE_MAX);
}

static bool check_text(const struct text *text, struct error *err)
{
    return !text->failed || error_set(err, ERROR_MEMORY, "no memory for the answer");
}

void log_write_time(struct json_writer *json, const char *key, int64_t time_ms)
{
    char time[CLOCK_TEXT_MAX];
    clock_format_utc(time_ms, time, sizeof time);
    json_string(json, key, time);
}

void log_write_text(struct json_writer *json, const char *key, sqlite3_stmt *statement, int column)
{
    bool is_null = sqlite3_column_type(statement, column) == SQLITE_NULL;
    json_string(json, key, is_null ? NULL : sql_text(statement, column));
}

void log_write_integer(struct json_writer *json, const char *key, sqlite3_stmt *statement,
                       int column)
{
    if (sqlite3_column_type(statement, column) == SQLITE_NULL)
        json_null(json, key);
    else
        json_integer(json, key, sqlite3_column_int64(statement, column));
}

/* The members of a stored object, without its braces, as items of the one that is open. */
static void write_members(struct json_writer *json, sqlite3_stmt *statement, int column)
{
    const char *object = sql_text(statement, column);
    int length = sqlite3_column_bytes(statement, column);
    if (length <= 2)
        return;
    text_append_bytes(json->text, ",", 1);
    text_append_bytes(json->text, object + 1, (size_t)length - 2);
}

void log_write_object(struct text *out, sqlite3_stmt *row)
{
    struct json_writer json = {.text = out};
    json_open_object(&json, NULL);
    json_integer(&json, "id", sqlite3_column_int64(row, COLUMN_ID));
    log_write_time(&json, "time", sqlite3_column_int64(row, COLUMN_TIME));
    log_write_time(&json, "closed", sqlite3_column_int64(row, COLUMN_CLOSED));
    json_bool(&json, "clock_synced", sqlite3_column_int(row, COLUMN_SYNCED) != 0);
    log_write_text(&json, "source", row, COLUMN_SOURCE);
    log_write_text(&json, "input", row, COLUMN_INPUT);
    if (sqlite3_column_type(row, COLUMN_NUMBER) != SQLITE_NULL)
        log_write_integer(&json, "strike", row, COLUMN_NUMBER);
    log_write_text(&json, "part", row, COLUMN_PART);
    log_write_text(&json, "specimen", row, COLUMN_SPECIMEN);
    log_write_integer(&json, "series", row, COLUMN_SERIES);
    log_write_text(&json, "note", row, COLUMN_NOTE);
    log_write_text(&json, "set_aside", row, COLUMN_SET_ASIDE);
    json_bool(&json, "odd", sqlite3_column_int(row, COLUMN_ODD) != 0);
    json_integer(&json, "revision", sqlite3_column_int64(row, COLUMN_REVISION));
    json_bool(&json, "samples_kept", sqlite3_column_int(row, COLUMN_HAS_SAMPLES) != 0);
    log_write_text(&json, "settings", row, COLUMN_SETTINGS);
    log_write_text(&json, "version", row, COLUMN_VERSION);
    write_members(&json, row, COLUMN_READING);
    json_close_object(&json);
}

/* ---- counts ---- */

static bool read_counts(sqlite3 *db, struct log_counts *counts, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    "SELECT revision, strikes, begun_ms, (SELECT coalesce(max(id), 0) FROM strike),"
                    " (SELECT count(*) FROM spill) FROM state",
                    err);
    if (statement == NULL)
        return false;
    bool is_good = sql_next(statement, err) == SQL_ROW;
    if (is_good) {
        counts->revision = sqlite3_column_int64(statement, 0);
        counts->strikes = sqlite3_column_int64(statement, 1);
        counts->since_ms = sqlite3_column_int64(statement, 2);
        counts->newest_id = sqlite3_column_int64(statement, 3);
        counts->spilled = sqlite3_column_int64(statement, 4);
    }
    sqlite3_finalize(statement);
    int64_t pages = 0;
    int64_t page_size = 0;
    if (!is_good || !sql_integer(db, "PRAGMA page_count", 0, 0, &pages, err) ||
        !sql_integer(db, "PRAGMA page_size", 0, 0, &page_size, err))
        return false;
    counts->bytes = pages * page_size;
    return true;
}

bool log_counts(struct log_reader *reader, struct log_counts *out_counts, struct error *err)
{
    struct log_counts counts = {0};
    if (!sql_begin_read(reader->db, err))
        return false;
    bool is_good = read_counts(reader->db, &counts, err);
    sql_end_read(reader->db);
    if (!is_good)
        return false;
    snprintf(counts.token, sizeof counts.token, "%s", reader->token);
    struct statvfs disk;
    if (statvfs(sqlite3_db_filename(reader->db, "main"), &disk) == 0)
        counts.free_bytes_on_disk = (int64_t)disk.f_bavail * (int64_t)disk.f_frsize;
    *out_counts = counts;
    return true;
}

/* ---- pages ---- */

/* `columns` with the rows of a selection, one more than the limit to know whether there is more. */
static sqlite3_stmt *select_page(sqlite3 *db, const char *columns,
                                 const struct log_selection *selection, unsigned limit,
                                 struct error *err)
{
    struct log_ids ids;
    char sql[2048];
    if (!log_ids_build(db, selection, LOG_NEWEST_FIRST, &ids, err))
        return NULL;
    snprintf(sql, sizeof sql, "%sWHERE s.id IN (%s) ORDER BY s.id DESC", columns, ids.sql);
    sqlite3_stmt *statement = sql_prepare(db, sql, err);
    if (statement != NULL)
        log_ids_bind(statement, &ids, (int64_t)limit + 1);
    return statement;
}

static bool page_limit(const struct log_selection *selection, unsigned *out_limit,
                       struct error *err)
{
    *out_limit = selection->limit == 0 ? LOG_PAGE_DEFAULT : selection->limit;
    return check_limit(*out_limit, err);
}

bool log_read_page(struct log_reader *reader, const struct log_selection *selection,
                   struct text *out_objects, struct log_page *out_page, struct error *err)
{
    unsigned limit = 0;
    struct log_page page = {0};
    if (!page_limit(selection, &limit, err) || !sql_begin_read(reader->db, err))
        return false;
    enum sql_row row = SQL_FAILED;
    sqlite3_stmt *statement = NULL;
    int64_t last_id = 0;
    if (sql_integer(reader->db, "SELECT revision FROM state", 0, 0, &page.revision, err))
        statement = select_page(reader->db, LOG_SELECT_OBJECT, selection, limit, err);
    while (statement != NULL && (row = sql_next(statement, err)) == SQL_ROW) {
        if (page.count == limit) {
            page.next_before = last_id;
            row = SQL_END;
            break;
        }
        if (page.count++ > 0)
            text_append(out_objects, ",\n");
        last_id = sqlite3_column_int64(statement, COLUMN_ID);
        log_write_object(out_objects, statement);
    }
    sqlite3_finalize(statement);
    sql_end_read(reader->db);
    if (row != SQL_END || !check_text(out_objects, err))
        return false;
    *out_page = page;
    return true;
}

bool log_read_after(struct log_reader *reader, int64_t after_id, unsigned limit,
                    struct text *out_lines, int64_t *out_ids, size_t *out_count, struct error *err)
{
    if (!check_limit(limit, err))
        return false;
    sqlite3_stmt *statement =
        sql_prepare(reader->db, LOG_SELECT_OBJECT "WHERE s.id > ?1 ORDER BY s.id LIMIT ?2", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, after_id);
    sqlite3_bind_int64(statement, 2, limit);
    size_t count = 0;
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        out_ids[count++] = sqlite3_column_int64(statement, COLUMN_ID);
        log_write_object(out_lines, statement);
        text_append(out_lines, "\n");
    }
    sqlite3_finalize(statement);
    if (row == SQL_FAILED || !check_text(out_lines, err))
        return false;
    *out_count = count;
    return true;
}

bool log_read_strike_json(struct log_reader *reader, int64_t id, struct text *out_object,
                          int64_t *out_revision, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(reader->db, LOG_SELECT_OBJECT "WHERE s.id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW) {
        log_write_object(out_object, statement);
        if (out_revision != NULL)
            *out_revision = sqlite3_column_int64(statement, COLUMN_REVISION);
    }
    sqlite3_finalize(statement);
    return row == SQL_END ? no_strike(id, err) : row == SQL_ROW && check_text(out_object, err);
}

bool log_read_history_json(struct log_reader *reader, int64_t id, struct text *out_object,
                           struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(reader->db,
                    "SELECT h.number, h.replaced_ms, r.settings, r.version, h.reading"
                    " FROM strike AS s CROSS JOIN history AS h ON h.strike = s.id"
                    " CROSS JOIN recipe AS r ON r.id = h.recipe WHERE s.id = ?1 ORDER BY h.number",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    struct json_writer json = {.text = out_object};
    json_open_object(&json, NULL);
    json_open_array(&json, "readings");
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        json_open_object(&json, NULL);
        json_integer(&json, "number", sqlite3_column_int64(statement, 0));
        log_write_time(&json, "replaced", sqlite3_column_int64(statement, 1));
        log_write_text(&json, "settings", statement, 2);
        log_write_text(&json, "version", statement, 3);
        write_members(&json, statement, 4);
        json_close_object(&json);
    }
    json_close_array(&json);
    json_close_object(&json);
    sqlite3_finalize(statement);
    int64_t found = 0;
    if (row == SQL_FAILED || !check_text(out_object, err) ||
        !sql_integer(reader->db, "SELECT 1 FROM strike WHERE id = ?1", id, 0, &found, err))
        return false;
    return found != 0 || no_strike(id, err);
}

/* ---- whole strikes ---- */

void log_stored_done(struct log_stored *stored)
{
    if (stored == NULL)
        return;
    strike_destroy(stored->strike);
    stored->strike = NULL;
}

/* Fills stored->strike from a packed head and, where has_samples, a packed wave. */
static bool take_strike(sqlite3_stmt *row, int head_column, int packing_column, bool has_samples,
                        struct log_stored *stored, struct error *err)
{
    struct strike *strike = calloc(1, sizeof *strike);
    if (strike == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for a strike");
    stored->strike = strike;
    if (!unpack_strike(sqlite3_column_blob(row, head_column),
                       (size_t)sqlite3_column_bytes(row, head_column), strike, err)) {
        *strike = (struct strike){0};
        return false;
    }
    size_t frame_count = strike->frame_count;
    stored->frame_count = frame_count;
    stored->has_samples = has_samples;
    strike->frame_count = 0;
    if (!has_samples)
        return true;
    strike->samples =
        frame_count <= WAVE_FRAMES_MAX ? malloc((frame_count + 1) * sizeof *strike->samples) : NULL;
    if (strike->samples == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for %zu samples", frame_count);
    if (!wave_unpack(sqlite3_column_blob(row, packing_column + 1),
                     (size_t)sqlite3_column_bytes(row, packing_column + 1),
                     sqlite3_column_int(row, packing_column), frame_count, strike->samples, err))
        return false;
    strike->frame_count = frame_count;
    return true;
}

/* The context's columns, from `first` on: time_ms, closed_ms, clock_synced, series, part, specimen,
 * input, source, strike_number, settings, version. */
static void take_context(sqlite3_stmt *row, int first, struct log_context *context)
{
    context->time_ms = sqlite3_column_int64(row, first);
    context->closed_ms = sqlite3_column_int64(row, first + 1);
    context->clock_synced = sqlite3_column_int(row, first + 2) != 0;
    context->series = sqlite3_column_int64(row, first + 3);
    sql_copy_text(row, first + 4, context->part, sizeof context->part);
    sql_copy_text(row, first + 5, context->specimen, sizeof context->specimen);
    sql_copy_text(row, first + 6, context->input, sizeof context->input);
    sql_copy_text(row, first + 7, context->source, sizeof context->source);
    context->strike_number = sqlite3_column_int64(row, first + 8);
    sql_copy_text(row, first + 9, context->settings, sizeof context->settings);
    sql_copy_text(row, first + 10, context->version, sizeof context->version);
}

static bool take_stored(sqlite3_stmt *row, struct log_stored *stored, struct error *err)
{
    bool has_samples = sqlite3_column_int(row, 16) != 0;
    take_context(row, 0, &stored->context);
    stored->context.keep_samples = has_samples;
    stored->odd = sqlite3_column_int(row, 13) != 0;
    stored->is_set_aside = sqlite3_column_int(row, 14) != 0;
    stored->revision = sqlite3_column_int64(row, 15);
    return take_strike(row, 11, 17, has_samples, stored, err) &&
           unpack_reading(sqlite3_column_blob(row, 12), (size_t)sqlite3_column_bytes(row, 12),
                          &stored->reading, err);
}

bool log_read_strike(struct log_reader *reader, int64_t id, struct log_stored *out_stored,
                     struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        reader->db,
        "SELECT s.time_ms, s.closed_ms, s.clock_synced, s.series, s.part, s.specimen, s.input,"
        " s.source, s.strike_number, r.settings, r.version, s.head, s.fit, s.odd,"
        " s.set_aside IS NOT NULL, s.revision, s.has_samples, w.packing, w.data"
        " FROM strike AS s CROSS JOIN recipe AS r ON r.id = s.recipe"
        " LEFT JOIN wave AS w ON w.strike = s.id WHERE s.id = ?1",
        err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    struct log_stored stored = {0};
    enum sql_row row = sql_next(statement, err);
    bool is_good = row == SQL_ROW && take_stored(statement, &stored, err);
    sqlite3_finalize(statement);
    if (row == SQL_END)
        return no_strike(id, err);
    if (!is_good) {
        if (row == SQL_ROW)
            error_prefix(err, "strike %" PRId64, id);
        log_stored_done(&stored);
        return false;
    }
    *out_stored = stored;
    return true;
}

bool log_read_spilled(struct log_reader *reader, int64_t after_key, int64_t *out_key,
                      struct log_stored *out_stored, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        reader->db,
        "SELECT time_ms, closed_ms, clock_synced, series, part, specimen, input, source,"
        " strike_number, settings, version, head, keep_samples, packing, data, key"
        " FROM spill WHERE key > ?1 ORDER BY key LIMIT 1",
        err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, after_key);
    struct log_stored stored = {0};
    reading_init(&stored.reading);
    enum sql_row row = sql_next(statement, err);
    bool is_good = row == SQL_ROW;
    int64_t key = 0;
    if (is_good) {
        take_context(statement, 0, &stored.context);
        stored.context.keep_samples = sqlite3_column_int(statement, 12) != 0;
        key = sqlite3_column_int64(statement, 15);
        is_good = take_strike(statement, 11, 13, true, &stored, err);
    }
    sqlite3_finalize(statement);
    if (row == SQL_END) {
        *out_key = 0;
        return true;
    }
    if (!is_good) {
        log_stored_done(&stored);
        return false;
    }
    *out_key = key;
    *out_stored = stored;
    return true;
}

bool log_read_readings(struct log_reader *reader, const struct log_selection *selection,
                       int64_t *out_ids, struct reading *out_readings, bool *out_set_aside,
                       struct log_page *out_page, struct error *err)
{
    unsigned limit = 0;
    struct log_page page = {0};
    if (!page_limit(selection, &limit, err) || !sql_begin_read(reader->db, err))
        return false;
    enum sql_row row = SQL_FAILED;
    sqlite3_stmt *statement = NULL;
    if (sql_integer(reader->db, "SELECT revision FROM state", 0, 0, &page.revision, err))
        statement =
            select_page(reader->db, "SELECT s.id, s.set_aside IS NOT NULL, s.fit FROM strike AS s ",
                        selection, limit, err);
    bool is_good = statement != NULL;
    while (is_good && (row = sql_next(statement, err)) == SQL_ROW) {
        if (page.count == limit) {
            page.next_before = out_ids[page.count - 1];
            row = SQL_END;
            break;
        }
        out_ids[page.count] = sqlite3_column_int64(statement, 0);
        if (out_set_aside != NULL)
            out_set_aside[page.count] = sqlite3_column_int(statement, 1) != 0;
        is_good = unpack_reading(sqlite3_column_blob(statement, 2),
                                 (size_t)sqlite3_column_bytes(statement, 2),
                                 &out_readings[page.count], err);
        page.count++;
    }
    sqlite3_finalize(statement);
    sql_end_read(reader->db);
    if (!is_good || row != SQL_END)
        return false;
    *out_page = page;
    return true;
}

bool log_read_wav(struct log_reader *reader, int64_t id, unsigned char **out_bytes,
                  size_t *out_size, struct error *err)
{
    struct log_stored stored = {0};
    struct text wav = {0};
    if (!log_read_strike(reader, id, &stored, err))
        return false;
    bool is_good = stored.has_samples;
    if (!is_good)
        error_set(err, ERROR_NOT_FOUND, "the samples of strike %" PRId64 " were not kept", id);
    is_good = is_good && wave_write_wav(stored.strike->samples, stored.strike->frame_count,
                                        stored.strike->rate_hz, &wav, err);
    log_stored_done(&stored);
    if (!is_good) {
        text_done(&wav);
        return false;
    }
    *out_bytes = (unsigned char *)wav.data;
    *out_size = wav.length;
    return true;
}
