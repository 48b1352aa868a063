/* From a selection to SQL. */
#ifndef WANE_LOG_SELECT_H
#define WANE_LOG_SELECT_H

#include "log/log_inner.h"

/* The ids of a selection: a statement text for use after `id IN (`, and what to bind to it.
 * Parameters are ?1 ... ?10, always the same ones: see log_ids_bind. */
struct log_ids {
    char sql[640];
    const struct log_selection *selection; /* borrowed */
    int64_t before, after;
};

enum log_order { LOG_NEWEST_FIRST, LOG_OLDEST_FIRST };

/* Looks how wide the selection's limits are and picks the index to walk. Inside a read
 * transaction. LOG_OLDEST_FIRST is made for walking all of it piece by piece: move `after` on. */
bool log_ids_build(sqlite3 *db, const struct log_selection *selection, enum log_order order,
                   struct log_ids *out_ids, struct error *err);
/* count: rows at most. */
void log_ids_bind(sqlite3_stmt *statement, const struct log_ids *ids, int64_t count);

#endif
