/* What the one writer does to strikes. */
#include "log/log_inner.h"
#include "log/pack.h"
#include "log/wave_pack.h"
#include "wane/json.h"

#include <math.h>
#include <string.h>

#define MS_AN_HOUR INT64_C(3600000)

/* Packed forms of the entry at hand; the memory is kept from entry to entry. */
struct packed {
    struct text head, fit, reading, wave;
    enum wave_packing packing;
};

static void packed_done(struct packed *packed)
{
    text_done(&packed->head);
    text_done(&packed->fit);
    text_done(&packed->reading);
    text_done(&packed->wave);
}

void log_writer_set_judge(struct log_writer *writer, const struct log_judge *judge)
{
    writer->judge = *judge;
}

static bool pack_fit(const struct log_judge *judge, const struct strike *strike,
                     const struct reading *reading, struct packed *packed, struct error *err)
{
    text_clear(&packed->fit);
    text_clear(&packed->reading);
    pack_reading(reading, &packed->fit);
    struct json_writer json = {.text = &packed->reading};
    json_open_object(&json, NULL);
    json_reading(&json, strike, reading);
    if (judge->write != NULL)
        judge->write(judge->user, &json, reading);
    json_close_object(&json);
    if (packed->fit.failed || packed->reading.failed)
        return error_set(err, ERROR_MEMORY, "no memory to store a reading");
    return true;
}

static bool pack_head(const struct strike *strike, struct packed *packed, struct error *err)
{
    text_clear(&packed->head);
    pack_strike(strike, &packed->head);
    if (packed->head.failed)
        return error_set(err, ERROR_MEMORY, "no memory to store a strike");
    return true;
}

/* ---- small questions ---- */

static bool next_revision(sqlite3 *db, int64_t *out_revision, struct error *err)
{
    return sql_exec(db, "UPDATE state SET revision = revision + 1", err) &&
           sql_integer(db, "SELECT revision FROM state", 0, 0, out_revision, err);
}

static bool recipe_id(sqlite3 *db, const char *settings, const char *version, int64_t *out_id,
                      struct error *err)
{
    static const char *const texts[] = {
        "INSERT OR IGNORE INTO recipe (settings, version) VALUES (?1, ?2)",
        "SELECT id FROM recipe WHERE settings = ?1 AND version = ?2",
    };
    bool is_good = true;
    for (int i = 0; is_good && i < 2; i++) {
        sqlite3_stmt *statement = sql_prepare(db, texts[i], err);
        if (statement == NULL)
            return false;
        sql_bind_text(statement, 1, settings);
        sql_bind_text(statement, 2, version);
        enum sql_row row = sql_next(statement, err);
        is_good = row != SQL_FAILED;
        if (row == SQL_ROW)
            *out_id = sqlite3_column_int64(statement, 0);
        sqlite3_finalize(statement);
    }
    return is_good;
}

/* Whether the samples of this strike go into the log. A day of speech in the room gives thousands
 * of rejected strikes: their readings are kept, but only some of their samples. */
static bool wants_samples(struct log_writer *writer, const struct log_entry *entry, bool *out_wants,
                          struct error *err)
{
    *out_wants = entry->context.keep_samples && entry->strike->frame_count <= WAVE_FRAMES_MAX;
    if (!*out_wants || entry->reading->verdict != VERDICT_REJECTED)
        return true;
    sqlite3_stmt *statement =
        sql_prepare(writer->db,
                    "SELECT count(*) FROM strike WHERE verdict = 2 AND has_samples = 1"
                    " AND time_ms > ?1 AND time_ms <= ?2",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, entry->context.time_ms - MS_AN_HOUR);
    sqlite3_bind_int64(statement, 2, entry->context.time_ms);
    bool is_good = sql_next(statement, err) == SQL_ROW;
    if (is_good)
        *out_wants = sqlite3_column_int64(statement, 0) < writer->rejected_waves_per_hour;
    sqlite3_finalize(statement);
    return is_good;
}

/* ---- appending ---- */

static bool insert_strike(sqlite3 *db, const struct log_entry *entry, const struct packed *packed,
                          bool has_samples, int64_t recipe, int64_t revision, struct error *err)
{
    /* A series that the log does not know is left out: the strike must not be lost for it. */
    sqlite3_stmt *statement = sql_prepare(
        db,
        "INSERT INTO strike (revision, time_ms, closed_ms, clock_synced, verdict, series, part,"
        " specimen, input, source, strike_number, frame_count, has_samples, recipe, head, fit,"
        " reading) VALUES (?1, ?2, ?3, ?4, ?5, (SELECT id FROM series WHERE id = ?6), ?7, ?8, ?9,"
        " ?10, ?11, ?12, ?13, ?14, ?15, ?16, ?17)",
        err);
    if (statement == NULL)
        return false;
    const struct log_context *context = &entry->context;
    sqlite3_bind_int64(statement, 1, revision);
    sqlite3_bind_int64(statement, 2, context->time_ms);
    sqlite3_bind_int64(statement, 3, context->closed_ms);
    sqlite3_bind_int(statement, 4, context->clock_synced);
    sqlite3_bind_int(statement, 5, (int)entry->reading->verdict);
    sqlite3_bind_int64(statement, 6, context->series);
    sql_bind_text_or_null(statement, 7, context->part);
    sql_bind_text_or_null(statement, 8, context->specimen);
    sql_bind_text_or_null(statement, 9, context->input);
    sql_bind_text_or_null(statement, 10, context->source);
    if (context->strike_number > 0)
        sqlite3_bind_int64(statement, 11, context->strike_number);
    sqlite3_bind_int64(statement, 12, (sqlite3_int64)entry->strike->frame_count);
    sqlite3_bind_int(statement, 13, has_samples);
    sqlite3_bind_int64(statement, 14, recipe);
    sql_bind_bytes(statement, 15, &packed->head);
    sql_bind_bytes(statement, 16, &packed->fit);
    sql_bind_text(statement, 17, packed->reading.data);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

static bool insert_wave(sqlite3 *db, int64_t id, const struct packed *packed, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db, "INSERT INTO wave (strike, packing, data) VALUES (?1, ?2, ?3)", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int(statement, 2, (int)packed->packing);
    sql_bind_bytes(statement, 3, &packed->wave);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

static bool forget_spilled(sqlite3 *db, int64_t key, struct error *err)
{
    int64_t none = 0;
    return sql_integer(db, "DELETE FROM spill WHERE key = ?1", key, 0, &none, err);
}

/* What the log keeps beside the strikes. `disordered`: the last strike that an earlier one's time
 * lies behind. */
static bool count_strike(sqlite3 *db, int64_t id, int64_t time_ms, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    "UPDATE state SET strikes = strikes + 1,"
                    " disordered = CASE WHEN ?2 < latest_ms THEN ?1 ELSE disordered END,"
                    " latest_ms = max(latest_ms, ?2)",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int64(statement, 2, time_ms);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

static bool append_entry(struct log_writer *writer, const struct log_entry *entry,
                         struct packed *packed, int64_t *out_id, struct error *err)
{
    sqlite3 *db = writer->db;
    int64_t revision = 0;
    int64_t recipe = 0;
    bool has_samples = false;
    if (!pack_head(entry->strike, packed, err) ||
        !pack_fit(&writer->judge, entry->strike, entry->reading, packed, err) ||
        !wants_samples(writer, entry, &has_samples, err) || !next_revision(db, &revision, err) ||
        !recipe_id(db, entry->context.settings, entry->context.version, &recipe, err))
        return false;
    if (has_samples && !wave_pack(entry->strike->samples, entry->strike->frame_count, &packed->wave,
                                  &packed->packing, err))
        return false;
    if (!insert_strike(db, entry, packed, has_samples, recipe, revision, err))
        return false;
    *out_id = sqlite3_last_insert_rowid(db);
    return (!has_samples || insert_wave(db, *out_id, packed, err)) &&
           (entry->spill_key == 0 || forget_spilled(db, entry->spill_key, err)) &&
           count_strike(db, *out_id, entry->context.time_ms, err);
}

bool log_append(struct log_writer *writer, const struct log_entry *entries, size_t count,
                int64_t *out_ids, struct error *err)
{
    if (count == 0)
        return true;
    int64_t first_id = 0;
    int64_t last_id = 0;
    struct packed packed = {0};
    if (!sql_begin(writer->db, err))
        return false;
    bool is_good = true;
    for (size_t i = 0; is_good && i < count; i++) {
        is_good = append_entry(writer, &entries[i], &packed, &last_id, err);
        first_id = i == 0 ? last_id : first_id;
    }
    is_good = sql_end(writer->db, is_good, err);
    packed_done(&packed);
    /* Nobody else inserts within the transaction: the ids are consecutive. */
    for (size_t i = 0; is_good && i < count; i++)
        out_ids[i] = first_id + (int64_t)i;
    return is_good;
}

/* ---- a new reading ---- */

static bool unknown_strike(int64_t id, struct error *err)
{
    return error_set(err, ERROR_NOT_FOUND, "there is no strike %lld in the log", (long long)id);
}

/* The stored head of strike `id`. */
static bool read_head(sqlite3 *db, int64_t id, struct strike *out_strike, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, "SELECT head FROM strike WHERE id = ?1", err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    enum sql_row row = sql_next(statement, err);
    bool is_good = row == SQL_ROW &&
                   unpack_strike(sqlite3_column_blob(statement, 0),
                                 (size_t)sqlite3_column_bytes(statement, 0), out_strike, err);
    sqlite3_finalize(statement);
    return row == SQL_END ? unknown_strike(id, err) : is_good;
}

static bool keep_as_history(sqlite3 *db, int64_t id, int64_t now_ms, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    "INSERT INTO history (strike, number, replaced_ms, recipe, fit, reading)"
                    " SELECT id, 1 + (SELECT count(*) FROM history WHERE strike = ?1), ?2, recipe,"
                    " fit, reading FROM strike WHERE id = ?1",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int64(statement, 2, now_ms);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

static bool update_reading(sqlite3 *db, int64_t id, const struct reading *reading,
                           const struct packed *packed, int64_t recipe, int64_t revision,
                           struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    "UPDATE strike SET revision = ?2, verdict = ?3, recipe = ?4, fit = ?5,"
                    " reading = ?6 WHERE id = ?1",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int64(statement, 2, revision);
    sqlite3_bind_int(statement, 3, (int)reading->verdict);
    sqlite3_bind_int64(statement, 4, recipe);
    sql_bind_bytes(statement, 5, &packed->fit);
    sql_bind_text(statement, 6, packed->reading.data);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

bool log_replace_reading(struct log_writer *writer, int64_t id, const struct reading *reading,
                         const char *settings, const char *version, int64_t now_ms,
                         int64_t *out_revision, struct error *err)
{
    sqlite3 *db = writer->db;
    struct strike strike = {0};
    struct packed packed = {0};
    int64_t revision = 0;
    int64_t recipe = 0;
    if (!sql_begin(db, err))
        return false;
    bool is_good = read_head(db, id, &strike, err) &&
                   pack_fit(&writer->judge, &strike, reading, &packed, err) &&
                   keep_as_history(db, id, now_ms, err) && next_revision(db, &revision, err) &&
                   recipe_id(db, settings, version, &recipe, err) &&
                   update_reading(db, id, reading, &packed, recipe, revision, err);
    is_good = sql_end(db, is_good, err);
    packed_done(&packed);
    if (is_good && out_revision != NULL)
        *out_revision = revision;
    return is_good;
}

/* ---- changes by people ---- */

/* What a change would alter, as SQL conditions: `IS NOT` compares NULLs too. */
static bool update_strike(sqlite3 *db, int64_t id, const struct log_change *change,
                          struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    "UPDATE strike SET revision = (SELECT revision + 1 FROM state),"
                    " note = CASE WHEN ?2 THEN ?3 ELSE note END,"
                    " set_aside = CASE WHEN ?4 THEN ?5 ELSE set_aside END,"
                    " odd = CASE WHEN ?6 THEN ?7 ELSE odd END,"
                    " series = CASE WHEN ?8 THEN ?9 ELSE series END"
                    " WHERE id = ?1 AND ((?2 AND note IS NOT ?3) OR (?4 AND set_aside IS NOT ?5)"
                    " OR (?6 AND odd IS NOT ?7) OR (?8 AND series IS NOT ?9))",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, id);
    sqlite3_bind_int(statement, 2, change->note != NULL);
    sql_bind_text_or_null(statement, 3, change->note);
    sqlite3_bind_int(statement, 4, change->set_aside != LOG_LEAVE);
    if (change->set_aside == LOG_SET)
        sql_bind_text(statement, 5, change->reason == NULL ? "" : change->reason);
    sqlite3_bind_int(statement, 6, change->odd != LOG_LEAVE);
    sqlite3_bind_int(statement, 7, change->odd == LOG_SET);
    sqlite3_bind_int(statement, 8, change->series != LOG_LEAVE);
    if (change->series == LOG_SET)
        sqlite3_bind_int64(statement, 9, change->series_id);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

static bool check_change(sqlite3 *db, int64_t id, const struct log_change *change,
                         struct error *err)
{
    int64_t found = 0;
    if (!sql_integer(db, "SELECT 1 FROM strike WHERE id = ?1", id, 0, &found, err))
        return false;
    if (found == 0)
        return unknown_strike(id, err);
    if (change->series != LOG_SET)
        return true;
    if (!sql_integer(db, "SELECT 1 FROM series WHERE id = ?1", change->series_id, 0, &found, err))
        return false;
    if (found == 0)
        return error_set(err, ERROR_NOT_FOUND, "there is no series %lld",
                         (long long)change->series_id);
    return true;
}

bool log_change_strike(struct log_writer *writer, int64_t id, const struct log_change *change,
                       int64_t *out_revision, struct error *err)
{
    sqlite3 *db = writer->db;
    if ((change->note != NULL && !log_text_fits(change->note, LOG_NOTE_MAX, "the note", err)) ||
        (change->reason != NULL && !log_text_fits(change->reason, LOG_NOTE_MAX, "the reason", err)))
        return false;
    if (!sql_begin(db, err))
        return false;
    int64_t revision = 0;
    bool is_good = check_change(db, id, change, err) && update_strike(db, id, change, err);
    if (is_good && sqlite3_changes(db) > 0)
        is_good = next_revision(db, &revision, err);
    is_good = is_good &&
              sql_integer(db, "SELECT revision FROM strike WHERE id = ?1", id, 0, &revision, err);
    is_good = sql_end(db, is_good, err);
    if (is_good && out_revision != NULL)
        *out_revision = revision;
    return is_good;
}

/* ---- spilling ---- */

static bool insert_spilled(sqlite3 *db, const struct log_context *context,
                           const struct packed *packed, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(
        db,
        "INSERT INTO spill (time_ms, closed_ms, clock_synced, series, part, specimen, input,"
        " source, strike_number, keep_samples, settings, version, head, packing, data)"
        " VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8, ?9, ?10, ?11, ?12, ?13, ?14, ?15)",
        err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, context->time_ms);
    sqlite3_bind_int64(statement, 2, context->closed_ms);
    sqlite3_bind_int(statement, 3, context->clock_synced);
    if (context->series > 0)
        sqlite3_bind_int64(statement, 4, context->series);
    sql_bind_text_or_null(statement, 5, context->part);
    sql_bind_text_or_null(statement, 6, context->specimen);
    sql_bind_text_or_null(statement, 7, context->input);
    sql_bind_text_or_null(statement, 8, context->source);
    if (context->strike_number > 0)
        sqlite3_bind_int64(statement, 9, context->strike_number);
    sqlite3_bind_int(statement, 10, context->keep_samples);
    sql_bind_text(statement, 11, context->settings);
    sql_bind_text(statement, 12, context->version);
    sql_bind_bytes(statement, 13, &packed->head);
    sqlite3_bind_int(statement, 14, (int)packed->packing);
    sql_bind_bytes(statement, 15, &packed->wave);
    bool is_good = sql_run(statement, err);
    sqlite3_finalize(statement);
    return is_good;
}

bool log_spill(struct log_writer *writer, const struct strike *strike,
               const struct log_context *context, int64_t *out_key, struct error *err)
{
    sqlite3 *db = writer->db;
    struct packed packed = {0};
    if (strike->frame_count > WAVE_FRAMES_MAX)
        return error_set(err, ERROR_LIMIT, "a strike of %zu frames is too long to be set aside",
                         strike->frame_count);
    bool is_good =
        pack_head(strike, &packed, err) &&
        wave_pack(strike->samples, strike->frame_count, &packed.wave, &packed.packing, err) &&
        sql_begin(db, err);
    if (is_good) {
        is_good = sql_end(db, insert_spilled(db, context, &packed, err), err);
        if (is_good)
            *out_key = sqlite3_last_insert_rowid(db);
    }
    packed_done(&packed);
    return is_good;
}
