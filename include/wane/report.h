/* A report: one self-contained HTML file on a series or on a strike, with figures as SVG, for A4
 * and Letter paper. Reads the log, writes a text. */
#ifndef WANE_REPORT_H
#define WANE_REPORT_H

#include "wane/tally.h"

struct report_choice {
    int64_t series; /* a series; 0: the strike below */
    int64_t strike;
    const char *version; /* of this program */
    int64_t now_ms;      /* the report's own date */
};

/* Appends the page. Every text of the log is escaped. ERROR_NOT_FOUND, ERROR_STORAGE, ERROR_MEMORY.
 * Some 50 ms for 200 strikes. */
bool report_write(struct log_reader *reader, const struct shelf *shelf,
                  const struct report_choice *choice, struct text *out, struct error *err);

#endif
