/* A series of the log with its statistics in memory. */
#include "wane/tally.h"
#include "log/log_inner.h"
#include "log/pack.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void tally_done(struct tally *tally)
{
    series_destroy(tally->series);
    double clock_u_ppm = tally->clock_u_ppm;
    memset(tally, 0, sizeof *tally);
    tally->clock_u_ppm = clock_u_ppm;
}

/* --- the sheet --- */

/* A sheet that is missing or wrong must not keep strikes from being counted: the series then has
 * none, and says why. */
static void read_sheet(struct tally *tally, const char *sheet, size_t size)
{
    struct error err;
    tally->has_part = part_read(tally->about.part, sheet, size, &tally->part, NULL, &err);
    if (!tally->has_part)
        snprintf(tally->part_problem, sizeof tally->part_problem, "%.250s", err.text);
}

static bool start(struct tally *tally, struct log_reader *reader, const struct shelf *shelf,
                  struct error *err)
{
    struct text sheet = {0};
    struct error missing = {0};
    if (tally->about.part[0] != '\0') {
        if (shelf_read(reader, shelf, tally->about.part, &sheet, tally->part_etag, NULL, &missing))
            read_sheet(tally, sheet.data != NULL ? sheet.data : "", sheet.length);
        else
            snprintf(tally->part_problem, sizeof tally->part_problem, "%.250s", missing.text);
        text_done(&sheet);
    }
    tally->series = series_create(tally->has_part ? &tally->part : NULL, tally->clock_u_ppm, err);
    return tally->series != NULL;
}

static bool is_sheet_changed(const struct tally *tally, struct log_reader *reader,
                             const struct shelf *shelf)
{
    struct text sheet = {0};
    struct error err;
    char etag[LOG_ETAG_MAX] = "";
    if (tally->about.part[0] == '\0')
        return false;
    (void)shelf_read(reader, shelf, tally->about.part, &sheet, etag, NULL, &err);
    text_done(&sheet);
    return strcmp(etag, tally->part_etag) != 0;
}

static bool read_about(struct tally *tally, struct log_reader *reader, int64_t id,
                       struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        reader->db, "SELECT name, input, part, specimen FROM series WHERE id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW) {
        tally->id = id;
        sql_copy_text(statement, 0, tally->about.name, sizeof tally->about.name);
        sql_copy_text(statement, 1, tally->about.input, sizeof tally->about.input);
        sql_copy_text(statement, 2, tally->about.part, sizeof tally->about.part);
        sql_copy_text(statement, 3, tally->about.specimen, sizeof tally->about.specimen);
    }
    sqlite3_finalize(statement);
    if (row == SQL_END)
        return error_set(err, ERROR_NOT_FOUND, "there is no series %lld", (long long)id);
    return row == SQL_ROW;
}

/* --- strikes --- */

static void note_odd(struct tally *tally, int64_t id, bool is_odd)
{
    unsigned at = 0;
    while (at < tally->odd_in_log_count && tally->odd_in_log[at] != id)
        at++;
    bool was_odd = at < tally->odd_in_log_count;
    if (was_odd == is_odd)
        return;
    if (was_odd)
        tally->odd_in_log[at] = tally->odd_in_log[--tally->odd_in_log_count];
    else if (tally->odd_in_log_count < TALLY_ODD_MAX)
        tally->odd_in_log[tally->odd_in_log_count++] = id;
}

static void watch_strike(struct tally *tally, int64_t id, double time_s)
{
    static const enum quantity watched[2] = {QUANTITY_F_HZ, QUANTITY_Q};
    struct mode mode;
    if (!series_lead(tally->series, id, &mode))
        return;
    mode.natural_f_hz = hypot(mode.f_hz, mode.decay_per_s / (2 * WANE_PI));
    const double values[2] = {mode.f_hz, WANE_PI * mode.natural_f_hz / mode.decay_per_s};
    for (unsigned i = 0; i < 2; i++) {
        struct watch_notice notice = {WATCH_NOTHING, 0, 0, 0, 0};
        watch_add(&tally->watches[i], id, time_s, values[i], &notice);
        if ((notice.event == WATCH_STEP || notice.event == WATCH_DRIFT) &&
            tally->notice_count < TALLY_NOTICES_MAX)
            tally->notices[tally->notice_count++] = (struct tally_notice){id, watched[i], notice};
    }
}

/* Columns: id, revision, time_ms, set aside, odd, fit. */
static bool take_row(struct tally *tally, sqlite3_stmt *row, struct reading *scratch,
                     struct error *err)
{
    int64_t id = sqlite3_column_int64(row, 0);
    int64_t revision = sqlite3_column_int64(row, 1);
    double time_s = (double)sqlite3_column_int64(row, 2) / 1e3;
    bool is_set_aside = sqlite3_column_int(row, 3) != 0;
    if (!unpack_reading(sqlite3_column_blob(row, 5), (size_t)sqlite3_column_bytes(row, 5), scratch,
                        err))
        return false;
    if (id <= tally->newest_id) {
        (void)series_change(tally->series, id, scratch, is_set_aside);
    } else if (!series_add(tally->series, id, time_s, scratch, is_set_aside, err)) {
        return false;
    } else {
        tally->newest_id = id;
        watch_strike(tally, id, time_s);
    }
    note_odd(tally, id, sqlite3_column_int(row, 4) != 0);
    tally->revision = revision > tally->revision ? revision : tally->revision;
    return true;
}

/* The first time by the series' index, then by that of the revisions: few rows are looked at. */
static bool take_strikes(struct tally *tally, struct log_reader *reader, bool *out_is_news,
                         struct error *err)
{
#define COLUMNS "SELECT id, revision, time_ms, set_aside IS NOT NULL, odd, fit FROM strike WHERE "
    const char *sql = tally->revision == 0 ? COLUMNS "series = ?1 AND +revision > ?2 ORDER BY id"
                                           : COLUMNS "+series = ?1 AND revision > ?2 ORDER BY +id";
#undef COLUMNS
    sqlite3_stmt *statement = sql_prepare(reader->db, sql, err);
    struct reading *scratch = malloc(sizeof *scratch);
    bool is_good = statement != NULL &&
                   (scratch != NULL || error_set(err, ERROR_MEMORY, "no memory for a reading"));
    if (is_good) {
        sqlite3_bind_int64(statement, 1, tally->id);
        sqlite3_bind_int64(statement, 2, tally->revision);
    }
    enum sql_row row = SQL_END;
    while (is_good && (row = sql_next(statement, err)) == SQL_ROW) {
        is_good = take_row(tally, statement, scratch, err);
        *out_is_news = true;
    }
    sqlite3_finalize(statement);
    free(scratch);
    return is_good && row == SQL_END;
}

bool tally_update(struct tally *tally, struct log_reader *reader, const struct shelf *shelf,
                  int64_t id, struct error *err)
{
    bool is_news = false;
    tally->notice_count = 0;
    if (tally->id != id || is_sheet_changed(tally, reader, shelf))
        tally_done(tally);
    bool is_good = true;
    if (tally->id == 0) {
        is_news = true;
        is_good = read_about(tally, reader, id, err) && start(tally, reader, shelf, err);
    }
    is_good = is_good && take_strikes(tally, reader, &is_news, err) &&
              (!is_news || series_summarize(tally->series, &tally->summary, err));
    if (!is_good)
        tally_done(tally);
    return is_good;
}

bool tally_read_json(const struct tally *tally, struct log_reader *reader, struct text *out_object,
                     struct error *err)
{
    struct text rest = {0};
    if (!log_read_series_json(reader, tally->id, out_object, err))
        return false;
    struct json_writer json = {.text = &rest};
    json_open_object(&json, NULL);
    json_string(&json, "part_problem", tally->part_problem[0] != '\0' ? tally->part_problem : NULL);
    series_write_json(&json, "statistics", tally->series, &tally->summary);
    json_close_object(&json);
    bool is_good = rest.data != NULL && !rest.failed && out_object->length > 1;
    if (is_good) {
        out_object->data[--out_object->length] = '\0'; /* its closing brace */
        text_append(out_object, ",");
        text_append(out_object, rest.data + 1);
    }
    text_done(&rest);
    return is_good || error_set(err, ERROR_MEMORY, "no memory for the series' statistics");
}
