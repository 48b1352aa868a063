/* What `wane read` prints of a strike, in three forms. */
#ifndef WANE_CLI_READ_ROWS_H
#define WANE_CLI_READ_ROWS_H

#include "cli/read_part.h"
#include "cli/read_recording.h"
#include "wane/text.h"

enum rows_form {
    ROWS_TABLE, /* for people */
    ROWS_JSON,  /* one object a line: source, strike, and the keys of json.h */
    ROWS_CSV,   /* one row a mode, RFC 4180, names with units in the first row */
};

/* Before the first file; nothing but for CSV. */
void rows_append_head(struct text *text, enum rows_form form);

/* One strike. has_channels: the table names the strike's channel. judgement: NULL without a part
 * sheet; JSON then has the keys part, decision and limits besides. */
void rows_append(struct text *text, enum rows_form form, const char *source, bool has_channels,
                 const struct read_row *row, const struct judgement *judgement);

/* Only for the table: a recording's heading, and how many strikes of each verdict it had. */
void rows_append_title(struct text *text, const char *source, const struct input_info *info,
                       int channel);
void rows_append_total(struct text *text, const uint64_t counts[3]);

#endif
