/* Tests the invariants that log.h lists. Samples and readings are looked at in short statements, so
 * that a long check of a log in use does not keep its WAL from being emptied. */
#include "log/log_inner.h"
#include "log/pack.h"
#include "log/wave_pack.h"

#include <inttypes.h>
#include <stdlib.h>
#include <string.h>

#define LISTED_MAX    100
#define PIECE_STRIKES 200

struct findings {
    struct text *text;
    size_t count;
};

static void add_finding(struct findings *findings, unsigned invariant, const char *what,
                        const char *about)
{
    if (findings->count++ < LISTED_MAX)
        text_appendf(findings->text, "(%u) %s%s%s\n", invariant, what, about[0] == '\0' ? "" : ": ",
                     about);
}

/* Every row is a violation; its first column says where. */
static const struct {
    unsigned invariant;
    const char *what;
    const char *sql;
} questions[] = {
    {1, "an id lies above the highest ever given",
     "SELECT 'strike ' || id FROM strike WHERE id > coalesce("
     "(SELECT seq FROM sqlite_sequence WHERE name = 'strike'), 0)"},
    {2, "a revision lies outside the log's",
     "SELECT 'strike ' || id FROM strike WHERE revision < 1"
     " OR revision > (SELECT revision FROM state)"},
    {3, "the count beside the strikes is wrong",
     "SELECT strikes || ' kept, ' || n || ' counted' FROM"
     " (SELECT strikes, (SELECT count(*) FROM strike) AS n FROM state) WHERE strikes <> n"},
    {3, "the latest time beside the strikes is too early",
     "SELECT 'strike ' || id FROM strike WHERE time_ms > (SELECT latest_ms FROM state)"},
    {3, "a strike out of its order in time is not known as one",
     "SELECT 'strike ' || id FROM (SELECT id, time_ms, max(time_ms) OVER (ORDER BY id) AS latest"
     " FROM strike WHERE id > (SELECT disordered FROM state)) WHERE time_ms < latest"},
    {4, "samples are missing",
     "SELECT 'strike ' || id FROM strike WHERE has_samples = 1"
     " AND NOT EXISTS (SELECT 1 FROM wave WHERE wave.strike = strike.id)"},
    {4, "samples are there but not said to be kept",
     "SELECT 'strike ' || wave.strike FROM wave LEFT JOIN strike ON strike.id = wave.strike"
     " WHERE strike.has_samples IS NOT 1"},
    {6, "a row names what does not exist",
     "SELECT \"table\" || ' ' || coalesce(rowid, '') || ' names ' || parent"
     " FROM pragma_foreign_key_check"},
    {7, "an older reading is missing",
     "SELECT 'strike ' || strike FROM history GROUP BY strike"
     " HAVING min(number) <> 1 OR max(number) <> count(*)"},
    {9, "SQLite finds damage",
     "SELECT integrity_check FROM pragma_integrity_check(20) WHERE integrity_check <> 'ok'"},
};

static bool ask(sqlite3 *db, size_t i, struct findings *findings, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, questions[i].sql, err);
    if (statement == NULL)
        return false;
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW)
        add_finding(findings, questions[i].invariant, questions[i].what, sql_text(statement, 0));
    sqlite3_finalize(statement);
    return row == SQL_END;
}

/* Unpacks a wave of `frame_count` frames and throws it away. */
static bool check_wave(sqlite3_stmt *row, int packing_column, size_t frame_count, struct error *err)
{
    float *samples =
        frame_count <= WAVE_FRAMES_MAX ? malloc((frame_count + 1) * sizeof *samples) : NULL;
    if (samples == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for %zu samples", frame_count);
    bool is_good = wave_unpack(sqlite3_column_blob(row, packing_column + 1),
                               (size_t)sqlite3_column_bytes(row, packing_column + 1),
                               sqlite3_column_int(row, packing_column), frame_count, samples, err);
    free(samples);
    return is_good;
}

/* Columns: id, 'strike ' || id, verdict, json_valid(reading), fit, head, frame_count, has_samples,
 * packing, data. */
static void check_strike(sqlite3_stmt *row, struct findings *findings)
{
    struct strike strike = {0};
    struct reading reading;
    const char *about = sql_text(row, 1);
    if (!unpack_reading(sqlite3_column_blob(row, 4), (size_t)sqlite3_column_bytes(row, 4), &reading,
                        NULL))
        add_finding(findings, 5, "the reading does not unpack", about);
    else if ((int)reading.verdict != sqlite3_column_int(row, 2))
        add_finding(findings, 5, "the verdict is not the reading's", about);
    if (sqlite3_column_int(row, 3) == 0)
        add_finding(findings, 5, "the reading's JSON is not valid", about);
    if (!unpack_strike(sqlite3_column_blob(row, 5), (size_t)sqlite3_column_bytes(row, 5), &strike,
                       NULL) ||
        (int64_t)strike.frame_count != sqlite3_column_int64(row, 6))
        add_finding(findings, 4, "the strike's head is damaged", about);
    else if (sqlite3_column_int(row, 7) != 0 && sqlite3_column_type(row, 8) != SQLITE_NULL &&
             !check_wave(row, 8, strike.frame_count, NULL))
        add_finding(findings, 4, "the samples do not unpack", about);
}

/* key, 'spilled strike ' || key, head, packing, data. */
static void check_spilled(sqlite3_stmt *row, struct findings *findings)
{
    struct strike strike = {0};
    if (!unpack_strike(sqlite3_column_blob(row, 2), (size_t)sqlite3_column_bytes(row, 2), &strike,
                       NULL) ||
        !check_wave(row, 3, strike.frame_count, NULL))
        add_finding(findings, 8, "does not unpack", sql_text(row, 1));
}

/* Runs `sql` (?1 after which key, ?2 how many; column 0 is the key) until nothing is left. */
static bool walk(sqlite3 *db, const char *sql, void (*check)(sqlite3_stmt *, struct findings *),
                 struct findings *findings, struct error *err)
{
    int64_t after = 0;
    int count = PIECE_STRIKES;
    while (count == PIECE_STRIKES) {
        sqlite3_stmt *statement = sql_prepare(db, sql, err);
        if (statement == NULL)
            return false;
        sqlite3_bind_int64(statement, 1, after);
        sqlite3_bind_int(statement, 2, PIECE_STRIKES);
        enum sql_row row = SQL_END;
        for (count = 0; (row = sql_next(statement, err)) == SQL_ROW; count++) {
            after = sqlite3_column_int64(statement, 0);
            check(statement, findings);
        }
        sqlite3_finalize(statement);
        if (row == SQL_FAILED)
            return false;
    }
    return true;
}

bool log_check(struct log_reader *reader, struct text *out_findings, size_t *out_violations,
               struct error *err)
{
    struct findings findings = {.text = out_findings};
    sqlite3 *db = reader->db;
    for (size_t i = 0; i < sizeof questions / sizeof questions[0]; i++) {
        if (!ask(db, i, &findings, err))
            return false;
    }
    if (!walk(db,
              "SELECT s.id, 'strike ' || s.id, s.verdict, json_valid(s.reading), s.fit, s.head,"
              " s.frame_count, s.has_samples, w.packing, w.data FROM strike AS s"
              " LEFT JOIN wave AS w ON w.strike = s.id WHERE s.id > ?1 ORDER BY s.id LIMIT ?2",
              check_strike, &findings, err) ||
        !walk(db,
              "SELECT key, 'spilled strike ' || key, head, packing, data FROM spill"
              " WHERE key > ?1 ORDER BY key LIMIT ?2",
              check_spilled, &findings, err))
        return false;
    if (out_findings->failed)
        return error_set(err, ERROR_MEMORY, "no memory for the findings");
    *out_violations = findings.count;
    return true;
}
