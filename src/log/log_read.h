/* Small writers that the reading files share. */
#ifndef WANE_LOG_READ_H
#define WANE_LOG_READ_H

#include "log/sql.h"
#include "wane/text.h"

/* Rows of strikes from which objects are written. CROSS JOIN: the strikes lead, whatever SQLite
 * would guess. */
#define LOG_SELECT_OBJECT                                                                          \
    "SELECT s.id, s.revision, s.time_ms, s.closed_ms, s.clock_synced, s.series, s.part,"           \
    " s.specimen, s.input, s.source, s.strike_number, s.note, s.set_aside, s.odd, s.has_samples,"  \
    " r.settings, r.version, s.reading"                                                            \
    " FROM strike AS s CROSS JOIN recipe AS r ON r.id = s.recipe "

/* The object of GET /strikes/ID, from a row of LOG_SELECT_OBJECT. */
void log_write_object(struct text *out, sqlite3_stmt *row);

void log_write_time(struct json_writer *json, const char *key, int64_t time_ms);
/* null where the column is NULL. */
void log_write_text(struct json_writer *json, const char *key, sqlite3_stmt *statement, int column);
void log_write_integer(struct json_writer *json, const char *key, sqlite3_stmt *statement,
                       int column);

#endif
