/* The tables of the log and how an older log becomes a newer one. */
#ifndef WANE_LOG_SCHEMA_H
#define WANE_LOG_SCHEMA_H

#include "log/sql.h"

/* "WANE" in ASCII: tells our files from other programs' databases. */
#define SCHEMA_APPLICATION_ID 0x57414E45
#define SCHEMA_VERSION        2

enum schema_state {
    SCHEMA_EMPTY,   /* no table yet */
    SCHEMA_OURS,    /* a log of this version or an older one */
    SCHEMA_FOREIGN, /* another program's database */
    SCHEMA_NEWER,   /* made by a newer version of Wane */
};

/* Looks at the open file. Fails with ERROR_DATA where it is damaged. */
bool schema_look(sqlite3 *db, enum schema_state *out_state, int *out_version, struct error *err);

/* Brings an empty or older log to SCHEMA_VERSION, one transaction a step. */
bool schema_migrate(sqlite3 *db, int from_version, int64_t now_ms, struct error *err);

#endif
