/* Keeping the file small: checkpoints, free pages, pruning, copies. */
#include "log/log_inner.h"

#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

/* Free pages below this stay for the next strikes: giving them back and taking them again would
 * write twice. */
#define FREE_PAGES_KEPT  1024
#define VACUUM_PAGES     256
#define PRUNE_STRIKES    50
#define BUSY_TIMEOUT_MS  5000
#define NO_LIMIT_IN_TIME INT64_MAX

bool log_idle_step(struct log_writer *writer)
{
    sqlite3 *db = writer->db;
    int log_frames = 0;
    int moved_frames = 0;
    int64_t free_pages = 0;
    /* Nobody is waited for: a reader that holds a snapshot is met again at the next step. */
    sqlite3_busy_timeout(db, 0);
    bool is_done = true;
    if (!sql_integer(db, "PRAGMA freelist_count", 0, 0, &free_pages, NULL))
        free_pages = 0;
    if (free_pages > FREE_PAGES_KEPT) {
        char sql[64];
        snprintf(sql, sizeof sql, "PRAGMA incremental_vacuum(%d)", VACUUM_PAGES);
        sqlite3_exec(db, sql, NULL, NULL, NULL);
        is_done = free_pages - VACUUM_PAGES <= FREE_PAGES_KEPT;
    }
    int code =
        sqlite3_wal_checkpoint_v2(db, NULL, SQLITE_CHECKPOINT_PASSIVE, &log_frames, &moved_frames);
    if (code == SQLITE_OK && log_frames > 0 && log_frames == moved_frames)
        sqlite3_wal_checkpoint_v2(db, NULL, SQLITE_CHECKPOINT_TRUNCATE, NULL, NULL);
    sqlite3_busy_timeout(db, BUSY_TIMEOUT_MS);
    return is_done && log_frames <= moved_frames;
}

/* ---- pruning ---- */

/* Ids of the oldest strikes before a time: with samples, or all. */
static bool oldest(sqlite3 *db, bool with_samples, int64_t before_ms, int64_t *out_ids,
                   size_t *out_count, struct error *err)
{
    sqlite3_stmt *statement =
        sql_prepare(db,
                    with_samples ? "SELECT id FROM strike WHERE has_samples = 1 AND time_ms < ?1"
                                   " ORDER BY time_ms LIMIT ?2"
                                 : "SELECT id FROM strike WHERE time_ms < ?1"
                                   " ORDER BY time_ms LIMIT ?2",
                    err);
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, before_ms);
    sqlite3_bind_int(statement, 2, PRUNE_STRIKES);
    size_t count = 0;
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW)
        out_ids[count++] = sqlite3_column_int64(statement, 0);
    sqlite3_finalize(statement);
    *out_count = count;
    return row == SQL_END;
}

static bool run_each(sqlite3 *db, const char *sql, const int64_t *ids, size_t count,
                     struct error *err)
{
    int64_t none = 0;
    for (size_t i = 0; i < count; i++) {
        if (!sql_integer(db, sql, ids[i], 0, &none, err))
            return false;
    }
    return true;
}

static bool drop_samples(sqlite3 *db, const int64_t *ids, size_t count, struct error *err)
{
    for (size_t i = 0; i < count; i++) {
        if (!sql_exec(db, "UPDATE state SET revision = revision + 1", err) ||
            !run_each(db,
                      "UPDATE strike SET has_samples = 0,"
                      " revision = (SELECT revision FROM state) WHERE id = ?1",
                      &ids[i], 1, err) ||
            !run_each(db, "DELETE FROM wave WHERE strike = ?1", &ids[i], 1, err))
            return false;
    }
    return true;
}

static bool drop_strikes(sqlite3 *db, const int64_t *ids, size_t count, struct error *err)
{
    char sql[80];
    snprintf(sql, sizeof sql, "UPDATE state SET strikes = strikes - %zu", count);
    return run_each(db, "DELETE FROM strike WHERE id = ?1", ids, count, err) &&
           sql_exec(db, sql, err);
}

static bool prune(sqlite3 *db, bool samples_alone, int64_t before_ms, size_t *out_count,
                  struct error *err)
{
    int64_t ids[PRUNE_STRIKES];
    size_t count = 0;
    if (!oldest(db, samples_alone, before_ms, ids, &count, err))
        return false;
    *out_count = count;
    return count == 0 ||
           (samples_alone ? drop_samples(db, ids, count, err) : drop_strikes(db, ids, count, err));
}

/* Bytes that hold something: free pages will be used again. */
static bool used_bytes(sqlite3 *db, int64_t *out_bytes, struct error *err)
{
    int64_t pages = 0;
    int64_t free_pages = 0;
    int64_t page_size = 0;
    if (!sql_integer(db, "PRAGMA page_count", 0, 0, &pages, err) ||
        !sql_integer(db, "PRAGMA freelist_count", 0, 0, &free_pages, err) ||
        !sql_integer(db, "PRAGMA page_size", 0, 0, &page_size, err))
        return false;
    *out_bytes = (pages - free_pages) * page_size;
    return true;
}

bool log_prune_step(struct log_writer *writer, const struct log_pruning *pruning, bool *out_more,
                    struct error *err)
{
    sqlite3 *db = writer->db;
    size_t count = 0;
    int64_t bytes = 0;
    if (!sql_begin(db, err))
        return false;
    bool is_good = true;
    if (pruning->samples_before_ms > 0)
        is_good = prune(db, true, pruning->samples_before_ms, &count, err);
    if (is_good && count == 0 && pruning->strikes_before_ms > 0)
        is_good = prune(db, false, pruning->strikes_before_ms, &count, err);
    if (is_good && count == 0 && pruning->bytes_max > 0) {
        is_good = used_bytes(db, &bytes, err);
        if (is_good && bytes > pruning->bytes_max)
            is_good = prune(db, true, NO_LIMIT_IN_TIME, &count, err) &&
                      (count > 0 || prune(db, false, NO_LIMIT_IN_TIME, &count, err));
    }
    if (!sql_end(db, is_good, err))
        return false;
    *out_more = count > 0;
    return true;
}

/* ---- copies ---- */

bool log_backup(struct log_reader *reader, const char *to_path, struct error *err)
{
    if (access(to_path, F_OK) == 0)
        return error_set(err, ERROR_USAGE, "%s: exists already: name a new file", to_path);
    struct error first = {0};
    /* The new file is written by the same connection; the log itself stays opened read-only. */
    if (!sql_exec(reader->db, "PRAGMA query_only = OFF", err))
        return false;
    sqlite3_stmt *statement = sql_prepare(reader->db, "VACUUM INTO ?1", &first);
    if (statement != NULL)
        sql_bind_text(statement, 1, to_path);
    bool is_good = statement != NULL && sql_run(statement, &first);
    sqlite3_finalize(statement);
    sqlite3_exec(reader->db, "PRAGMA query_only = ON", NULL, NULL, NULL);
    if (is_good)
        return true;
    (void)unlink(to_path); /* an unfinished copy would look like a whole one */
    return error_set(err, ERROR_STORAGE, "%s: the copy failed: %.150s", to_path, first.text);
}
