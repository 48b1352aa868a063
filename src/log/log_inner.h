/* What the files of src/log share. */
#ifndef WANE_LOG_INNER_H
#define WANE_LOG_INNER_H

#include "log/sql.h"
#include "wane/log.h"

struct log_writer {
    sqlite3 *db;
    int lock_fd; /* of PATH.lock: one writer; -1 when not taken */
    int rejected_waves_per_hour;
    char token[LOG_TOKEN_MAX];
    struct log_judge judge;
};

struct log_reader {
    sqlite3 *db;
    char token[LOG_TOKEN_MAX];
};

/* ERROR_LIMIT when `text` has `size` bytes or more with its NUL; `what` names it. */
bool log_text_fits(const char *text, size_t size, const char *what, struct error *err);

/* The ETag of a part sheet's version, with its quotes. */
void log_part_etag(const char *token, int64_t version, char out_etag[LOG_ETAG_MAX]);

#endif
