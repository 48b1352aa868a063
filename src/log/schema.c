#include "log/schema.h"

#include <stdio.h>

/* Steps never change once released: a log made by any version has run the same ones. Step n leads
 * to version n + 1.
 *
 * "None" is NULL. Times are milliseconds of UTC. `head` and `fit` are packed by pack.c, `data` by
 * wave_pack.c; `reading` is the JSON that was announced. Samples lie in a table of their own, so
 * that a page of strikes never walks through them. */
static const char *const steps[] = {
    "CREATE TABLE state ("
    " id INTEGER PRIMARY KEY CHECK (id = 1),"
    " token TEXT NOT NULL,"
    " begun_ms INTEGER NOT NULL,"
    " revision INTEGER NOT NULL,"
    " strikes INTEGER NOT NULL,"
    " is_open INTEGER NOT NULL"
    ") STRICT;"

    /* Settings and version of a reading: few different ones, so each is stored once. */
    "CREATE TABLE recipe ("
    " id INTEGER PRIMARY KEY,"
    " settings TEXT NOT NULL,"
    " version TEXT NOT NULL,"
    " UNIQUE (settings, version)"
    ") STRICT;"

    "CREATE TABLE series ("
    " id INTEGER PRIMARY KEY AUTOINCREMENT,"
    " name TEXT NOT NULL,"
    " input TEXT,"
    " part TEXT,"
    " specimen TEXT,"
    " opened_ms INTEGER NOT NULL,"
    " closed_ms INTEGER"
    ") STRICT;"
    "CREATE INDEX series_open ON series (input) WHERE closed_ms IS NULL;"

    "CREATE TABLE strike ("
    " id INTEGER PRIMARY KEY AUTOINCREMENT,"
    " revision INTEGER NOT NULL,"
    " time_ms INTEGER NOT NULL,"
    " closed_ms INTEGER NOT NULL,"
    " clock_synced INTEGER NOT NULL,"
    " verdict INTEGER NOT NULL,"
    " series INTEGER REFERENCES series (id),"
    " part TEXT,"
    " specimen TEXT,"
    " input TEXT,"
    " source TEXT,"
    " strike_number INTEGER,"
    " frame_count INTEGER NOT NULL,"
    " has_samples INTEGER NOT NULL,"
    " note TEXT,"
    " set_aside TEXT,"
    " odd INTEGER NOT NULL DEFAULT 0,"
    " recipe INTEGER NOT NULL REFERENCES recipe (id),"
    " head BLOB NOT NULL,"
    " fit BLOB NOT NULL,"
    " reading TEXT NOT NULL"
    ") STRICT;"
    "CREATE UNIQUE INDEX strike_revision ON strike (revision);"
    "CREATE INDEX strike_time ON strike (time_ms);"
    "CREATE INDEX strike_verdict ON strike (verdict);"
    "CREATE INDEX strike_series ON strike (series) WHERE series IS NOT NULL;"
    "CREATE INDEX strike_part ON strike (part) WHERE part IS NOT NULL;"
    "CREATE INDEX strike_specimen ON strike (specimen) WHERE specimen IS NOT NULL;"
    "CREATE INDEX strike_samples ON strike (time_ms) WHERE has_samples = 1;"
    "CREATE INDEX strike_rejected_kept ON strike (time_ms) WHERE verdict = 2 AND has_samples = 1;"

    "CREATE TABLE wave ("
    " strike INTEGER PRIMARY KEY REFERENCES strike (id) ON DELETE CASCADE,"
    " packing INTEGER NOT NULL,"
    " data BLOB NOT NULL"
    ") STRICT;"

    "CREATE TABLE history ("
    " strike INTEGER NOT NULL REFERENCES strike (id) ON DELETE CASCADE,"
    " number INTEGER NOT NULL,"
    " replaced_ms INTEGER NOT NULL,"
    " recipe INTEGER NOT NULL REFERENCES recipe (id),"
    " fit BLOB NOT NULL,"
    " reading TEXT NOT NULL,"
    " PRIMARY KEY (strike, number)"
    ") STRICT, WITHOUT ROWID;"

    "CREATE TABLE spill ("
    " key INTEGER PRIMARY KEY AUTOINCREMENT,"
    " time_ms INTEGER NOT NULL,"
    " closed_ms INTEGER NOT NULL,"
    " clock_synced INTEGER NOT NULL,"
    " series INTEGER,"
    " part TEXT,"
    " specimen TEXT,"
    " input TEXT,"
    " source TEXT,"
    " strike_number INTEGER,"
    " keep_samples INTEGER NOT NULL,"
    " settings TEXT NOT NULL,"
    " version TEXT NOT NULL,"
    " head BLOB NOT NULL,"
    " packing INTEGER NOT NULL,"
    " data BLOB NOT NULL"
    ") STRICT;"

    "CREATE TABLE part ("
    " name TEXT NOT NULL,"
    " version INTEGER NOT NULL,"
    " changed_ms INTEGER NOT NULL,"
    " sheet TEXT NOT NULL,"
    " PRIMARY KEY (name, version)"
    ") STRICT, WITHOUT ROWID;"

    "CREATE TABLE measurement ("
    " id INTEGER PRIMARY KEY AUTOINCREMENT,"
    " time_ms INTEGER NOT NULL,"
    " name TEXT NOT NULL,"
    " value REAL NOT NULL,"
    " unit TEXT"
    ") STRICT;"
    "CREATE INDEX measurement_time ON measurement (time_ms);"

    /* kind "input": text is the state, about is the input, gap_ms how long it was away. Any other
     * kind: a notice. */
    "CREATE TABLE event ("
    " id INTEGER PRIMARY KEY AUTOINCREMENT,"
    " time_ms INTEGER NOT NULL,"
    " kind TEXT NOT NULL,"
    " text TEXT NOT NULL,"
    " about TEXT,"
    " gap_ms INTEGER"
    ") STRICT;"
    "CREATE INDEX event_time ON event (time_ms);"

    /* For people who open the file with SQLite itself. */
    "CREATE VIEW mode AS SELECT strike.id AS strike, m.key + 1 AS rank,"
    " m.value ->> '$.label' AS label,"
    " m.value ->> '$.f_hz' AS f_hz, m.value ->> '$.f_u_hz' AS f_u_hz,"
    " m.value ->> '$.decay_per_s' AS decay_per_s,"
    " m.value ->> '$.decay_u_per_s' AS decay_u_per_s,"
    " m.value ->> '$.q' AS q, m.value ->> '$.q_u' AS q_u,"
    " m.value ->> '$.t60_s' AS t60_s, m.value ->> '$.level_dbfs' AS level_dbfs"
    " FROM strike, json_each(strike.reading, '$.modes') AS m;"

    "INSERT INTO state VALUES (1, lower(hex(randomblob(16))), 0, 0, 0, 0);",

    /* Which strikes lie out of their order in time (the clock was set back): behind the last of
     * them times grow with ids, and a time is found without reading all (log_select.c). */
    "ALTER TABLE state ADD COLUMN latest_ms INTEGER NOT NULL DEFAULT 0;"
    "ALTER TABLE state ADD COLUMN disordered INTEGER NOT NULL DEFAULT 0;"
    "UPDATE state SET latest_ms = (SELECT coalesce(max(time_ms), 0) FROM strike),"
    " disordered = (SELECT coalesce(max(id), 0) FROM strike);",
};

_Static_assert(sizeof steps / sizeof steps[0] == SCHEMA_VERSION, "one step a version");

bool schema_look(sqlite3 *db, enum schema_state *out_state, int *out_version, struct error *err)
{
    int64_t id = 0;
    int64_t version = 0;
    int64_t tables = 0;
    if (!sql_integer(db, "PRAGMA application_id", 0, 0, &id, err) ||
        !sql_integer(db, "PRAGMA user_version", 0, 0, &version, err) ||
        !sql_integer(db, "SELECT count(*) FROM sqlite_schema", 0, 0, &tables, err))
        return false;
    *out_version = (int)version;
    if (id == SCHEMA_APPLICATION_ID)
        *out_state = version > SCHEMA_VERSION ? SCHEMA_NEWER : SCHEMA_OURS;
    else
        *out_state = id == 0 && tables == 0 && version == 0 ? SCHEMA_EMPTY : SCHEMA_FOREIGN;
    return true;
}

static bool run_step(sqlite3 *db, int version, int64_t now_ms, struct error *err)
{
    char marks[160];
    snprintf(marks, sizeof marks, "PRAGMA application_id = %d; PRAGMA user_version = %d",
             SCHEMA_APPLICATION_ID, version + 1);
    if (!sql_begin(db, err))
        return false;
    bool is_good = sql_exec(db, steps[version], err) && sql_exec(db, marks, err);
    if (is_good && version == 0) {
        snprintf(marks, sizeof marks, "UPDATE state SET begun_ms = %lld", (long long)now_ms);
        is_good = sql_exec(db, marks, err);
    }
    return sql_end(db, is_good, err);
}

bool schema_migrate(sqlite3 *db, int from_version, int64_t now_ms, struct error *err)
{
    for (int version = from_version; version < SCHEMA_VERSION; version++) {
        if (!run_step(db, version, now_ms, err))
            return false;
    }
    return true;
}
