/* A selection as one CSV or JSON document, piece by piece. */
#include "log/log_inner.h"
#include "log/log_read.h"
#include "log/log_select.h"
#include "wane/clock.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PIECE_STRIKES 256

struct log_export {
    struct log_reader *reader;
    struct log_selection selection;
    struct log_ids ids;
    enum log_export_format format;
    bool is_begun, has_strike;
    struct text cells; /* of a strike, for the rows of its modes */
};

/* One row a mode; a strike without modes has one row with `mode` and what follows empty. The unit
 * is in the name, as everywhere; *_u_* is the standard uncertainty of the column before it. */
#define CSV_HEADER                                                                                 \
    "id,time_utc,input,source,strike,channel,rate_hz,part,specimen,series,verdict,reasons,remarks" \
    ",set_aside,odd,note,onset_s,window_begin_s,window_end_s,peak_dbfs,noise_dbfs,snr_db"          \
    ",mode,f_hz,f_u_hz,decay_per_s,decay_u_per_s,q,q_u,zeta,zeta_u,natural_f_hz,t60_s,t60_u_s"     \
    ",level_dbfs,phase_rad,settings_digest,version\n"

enum csv_column {
    CSV_ID,
    CSV_TIME,
    CSV_INPUT,
    CSV_SOURCE,
    CSV_NUMBER,
    CSV_PART,
    CSV_SPECIMEN,
    CSV_SERIES,
    CSV_SET_ASIDE,
    CSV_IS_SET_ASIDE,
    CSV_ODD,
    CSV_NOTE,
    CSV_READING,
    CSV_SETTINGS,
    CSV_VERSION
};

#define SELECT_CSV                                                                                 \
    "SELECT s.id, s.time_ms, s.input, s.source, s.strike_number, s.part, s.specimen, s.series,"    \
    " s.set_aside, s.set_aside IS NOT NULL, s.odd, s.note, s.reading, r.settings, r.version"       \
    " FROM strike AS s CROSS JOIN recipe AS r ON r.id = s.recipe "

/* A text cell (RFC 4180). A text that a spreadsheet would take for a formula is led by an
 * apostrophe: notes and names come from people, and a formula can send data away. */
static void csv_text(struct text *out, const char *value)
{
    if (value[0] == '\0')
        return;
    bool is_formula = strchr("=+-@\t\r", value[0]) != NULL;
    if (!is_formula && strpbrk(value, ",\"\r\n") == NULL) {
        text_append(out, value);
        return;
    }
    text_append(out, is_formula ? "\"'" : "\"");
    for (const char *at = value; *at != '\0';) {
        size_t length = strcspn(at, "\"");
        text_append_bytes(out, at, length);
        at += length;
        if (*at == '"') {
            text_append(out, "\"\"");
            at++;
        }
    }
    text_append(out, "\"");
}

static void csv_next_text(struct text *out, sqlite3_stmt *row, int column)
{
    text_append_bytes(out, ",", 1);
    csv_text(out, sql_text(row, column));
}

/* ---- the stored reading: its numbers go over digit by digit, neither parsed nor rounded ---- */

/* A piece of a JSON text. */
struct slice {
    const char *at;
    size_t length;
};

/* The length of the JSON value at `at` (valid JSON without blanks, as log_write.c makes it). */
static size_t value_length(const char *at)
{
    size_t depth = 0;
    bool in_string = false;
    for (const char *c = at; *c != '\0'; c++) {
        if (in_string) {
            c += *c == '\\' && c[1] != '\0';
            in_string = *c != '"';
        } else if (*c == '"') {
            in_string = true;
        } else if (*c == '{' || *c == '[') {
            depth++;
        } else if (*c == '}' || *c == ']' || *c == ',') {
            if (depth == 0)
                return (size_t)(c - at);
            depth -= *c != ',';
        }
    }
    return strlen(at);
}

/* Moves *at (behind the bracket, at first) over the next member of an object. */
static bool next_member(const char **at, struct slice *out_key, struct slice *out_value)
{
    *at += **at == ',';
    if (**at != '"')
        return false;
    out_key->at = *at + 1;
    out_key->length = strcspn(out_key->at, "\"");
    const char *colon = out_key->at + out_key->length + 1;
    if (colon[-1] != '"' || *colon != ':')
        return false;
    out_value->at = colon + 1;
    out_value->length = value_length(out_value->at);
    *at = out_value->at + out_value->length;
    return out_value->length > 0;
}

/* Moves *at over the next item of an array. */
static bool next_item(const char **at, struct slice *out_value)
{
    *at += **at == ',';
    out_value->at = *at;
    out_value->length = **at == ']' || **at == '\0' ? 0 : value_length(*at);
    *at += out_value->length;
    return out_value->length > 0;
}

/* Looks up keys [count] in the object at `object`; values [count] stay empty where there is none.
 */
static void find_members(const char *object, const char *const keys[], size_t count,
                         struct slice *values)
{
    memset(values, 0, count * sizeof *values);
    const char *at = object + (*object == '{');
    struct slice key;
    struct slice value;
    while (next_member(&at, &key, &value)) {
        for (size_t i = 0; i < count; i++) {
            if (strlen(keys[i]) == key.length && memcmp(keys[i], key.at, key.length) == 0)
                values[i] = value;
        }
    }
}

/* A number or a word of our own (no escapes); empty where it is null. */
static void csv_next_value(struct text *out, struct slice value)
{
    text_append_bytes(out, ",", 1);
    if (value.length > 0 && value.at[0] == '"')
        text_append_bytes(out, value.at + 1, value.length - 2);
    else if (value.length > 0 && value.at[0] != 'n')
        text_append_bytes(out, value.at, value.length);
}

/* ["noisy","too-short"] as: noisy too-short */
static void csv_next_words(struct text *out, struct slice array)
{
    const char *at = array.length > 0 ? array.at + 1 : "";
    const char *between = "";
    struct slice word;
    text_append_bytes(out, ",", 1);
    while (next_item(&at, &word)) {
        text_append(out, between);
        text_append_bytes(out, word.at + 1, word.length - 2);
        between = " ";
    }
}

static const char *const strike_keys[] = {
    "channel",  "rate_hz",   "verdict",    "reasons", "remarks", "onset_s",
    "window_s", "peak_dbfs", "noise_dbfs", "snr_db",  "modes",
};
enum strike_key {
    KEY_CHANNEL,
    KEY_RATE,
    KEY_VERDICT,
    KEY_REASONS,
    KEY_REMARKS,
    KEY_ONSET,
    KEY_WINDOW,
    KEY_PEAK,
    KEY_NOISE,
    KEY_SNR,
    KEY_MODES,
    KEY_COUNT
};
_Static_assert(sizeof strike_keys / sizeof strike_keys[0] == KEY_COUNT, "a name for each key");

/* In the order of the columns. */
static const char *const mode_keys[] = {
    "label", "f_hz",   "f_u_hz",       "decay_per_s", "decay_u_per_s", "q",          "q_u",
    "zeta",  "zeta_u", "natural_f_hz", "t60_s",       "t60_u_s",       "level_dbfs", "phase_rad",
};
#define MODE_KEYS (sizeof mode_keys / sizeof mode_keys[0])

/* FNV-1a, 64 bit (Fowler, Noll and Vo): tells settings apart in a column. */
static uint64_t digest_of(const char *text)
{
    uint64_t hash = UINT64_C(0xcbf29ce484222325);
    for (const char *at = text; *at != '\0'; at++)
        hash = (hash ^ (unsigned char)*at) * UINT64_C(0x100000001b3);
    return hash;
}

/* The cells before the modes. */
static void csv_strike(struct text *out, sqlite3_stmt *row, const struct slice values[KEY_COUNT])
{
    char time[CLOCK_TEXT_MAX];
    clock_format_utc(sqlite3_column_int64(row, CSV_TIME), time, sizeof time);
    text_append(out, sql_text(row, CSV_ID));
    text_append(out, ",");
    text_append(out, time);
    csv_next_text(out, row, CSV_INPUT);
    csv_next_text(out, row, CSV_SOURCE);
    csv_next_text(out, row, CSV_NUMBER);
    csv_next_value(out, values[KEY_CHANNEL]);
    csv_next_value(out, values[KEY_RATE]);
    csv_next_text(out, row, CSV_PART);
    csv_next_text(out, row, CSV_SPECIMEN);
    csv_next_text(out, row, CSV_SERIES);
    csv_next_value(out, values[KEY_VERDICT]);
    csv_next_words(out, values[KEY_REASONS]);
    csv_next_words(out, values[KEY_REMARKS]);
    /* Set aside without a reason must still show. */
    const char *reason = sql_text(row, CSV_SET_ASIDE);
    text_append(out, ",");
    if (sqlite3_column_int(row, CSV_IS_SET_ASIDE) != 0)
        csv_text(out, reason[0] == '\0' ? "(no reason given)" : reason);
    csv_next_text(out, row, CSV_ODD);
    csv_next_text(out, row, CSV_NOTE);
    csv_next_value(out, values[KEY_ONSET]);
    const char *at = values[KEY_WINDOW].length > 0 ? values[KEY_WINDOW].at + 1 : "";
    for (int i = 0; i < 2; i++) {
        struct slice edge = {0};
        (void)next_item(&at, &edge);
        csv_next_value(out, edge);
    }
    csv_next_value(out, values[KEY_PEAK]);
    csv_next_value(out, values[KEY_NOISE]);
    csv_next_value(out, values[KEY_SNR]);
}

/* One row a mode. out->data may move: the strike's cells are copied from `cells`. */
static void csv_rows(struct text *out, struct text *cells, sqlite3_stmt *row)
{
    struct slice values[KEY_COUNT];
    struct slice mode[MODE_KEYS] = {{0}};
    char tail[LOG_VERSION_MAX + 32];
    struct slice item;
    find_members(sql_text(row, CSV_READING), strike_keys, KEY_COUNT, values);
    text_clear(cells);
    csv_strike(cells, row, values);
    (void)snprintf(tail, sizeof tail, ",%016" PRIx64 ",%.*s\n",
                   digest_of(sql_text(row, CSV_SETTINGS)), LOG_VERSION_MAX,
                   sql_text(row, CSV_VERSION));
    const char *at = values[KEY_MODES].length > 0 ? values[KEY_MODES].at + 1 : "";
    bool has_mode = next_item(&at, &item);
    do {
        if (has_mode)
            find_members(item.at, mode_keys, MODE_KEYS, mode);
        text_append_bytes(out, cells->data == NULL ? "" : cells->data, cells->length);
        for (size_t i = 0; i < MODE_KEYS; i++)
            csv_next_value(out, mode[i]);
        text_append(out, tail);
    } while (has_mode && next_item(&at, &item));
    out->failed = out->failed || cells->failed;
}

/* ---- pieces ---- */

/* The newest so many of a selection: where the walk begins. */
static bool find_beginning(struct log_export *export, struct error *err)
{
    struct log_ids newest;
    char sql[800];
    sqlite3 *db = export->reader->db;
    if (!log_ids_build(db, &export->selection, LOG_NEWEST_FIRST, &newest, err))
        return false;
    snprintf(sql, sizeof sql, "SELECT coalesce(min(id), 1) FROM (%s)", newest.sql);
    sqlite3_stmt *statement = sql_prepare(db, sql, err);
    if (statement == NULL)
        return false;
    log_ids_bind(statement, &newest, export->selection.limit);
    bool is_good = sql_next(statement, err) == SQL_ROW;
    int64_t first = is_good ? sqlite3_column_int64(statement, 0) : 0;
    sqlite3_finalize(statement);
    if (first - 1 > export->ids.after)
        export->ids.after = first - 1;
    return is_good;
}

static bool prepare_walk(struct log_export *export, struct error *err)
{
    sqlite3 *db = export->reader->db;
    int64_t newest = 0;
    if (!sql_integer(db, "SELECT coalesce(max(id), 0) FROM strike", 0, 0, &newest, err) ||
        !log_ids_build(db, &export->selection, LOG_OLDEST_FIRST, &export->ids, err))
        return false;
    if (export->ids.before > newest + 1)
        export->ids.before = newest + 1;
    return export->selection.limit == 0 || find_beginning(export, err);
}

struct log_export *log_export_begin(struct log_reader *reader,
                                    const struct log_selection *selection,
                                    enum log_export_format format, struct error *err)
{
    struct log_export *export = calloc(1, sizeof *export);
    if (export == NULL) {
        error_set(err, ERROR_MEMORY, "no memory for an export");
        return NULL;
    }
    export->reader = reader;
    export->selection = *selection;
    export->format = format;
    bool is_good = sql_begin_read(reader->db, err);
    if (is_good) {
        is_good = prepare_walk(export, err);
        sql_end_read(reader->db);
    }
    if (!is_good) {
        free(export);
        return NULL;
    }
    return export;
}

void log_export_end(struct log_export *export)
{
    if (export == NULL)
        return;
    text_done(&export->cells);
    free(export);
}

static void write_strike(struct log_export *export, struct text *out, sqlite3_stmt *row)
{
    if (export->format == LOG_EXPORT_CSV) {
        csv_rows(out, &export->cells, row);
        return;
    }
    text_append(out, export->has_strike ? ",\n" : "\n");
    log_write_object(out, row);
}

bool log_export_next(struct log_export *export, struct text *out_piece, bool *out_is_done,
                     struct error *err)
{
    bool is_csv = export->format == LOG_EXPORT_CSV;
    char sql[2048];
    snprintf(sql, sizeof sql, "%sWHERE s.id IN (%s) ORDER BY s.id",
             is_csv ? SELECT_CSV : LOG_SELECT_OBJECT, export->ids.sql);
    sqlite3_stmt *statement = sql_prepare(export->reader->db, sql, err);
    if (statement == NULL)
        return false;
    log_ids_bind(statement, &export->ids, PIECE_STRIKES);
    if (!export->is_begun)
        text_append(out_piece, is_csv ? CSV_HEADER : "{\"strikes\":[");
    export->is_begun = true;
    unsigned count = 0;
    enum sql_row row = SQL_END;
    while ((row = sql_next(statement, err)) == SQL_ROW) {
        write_strike(export, out_piece, statement);
        export->ids.after = sqlite3_column_int64(statement, 0);
        export->has_strike = true;
        count++;
    }
    sqlite3_finalize(statement);
    if (row == SQL_FAILED)
        return false;
    *out_is_done = count < PIECE_STRIKES;
    if (*out_is_done && !is_csv)
        text_append(out_piece, "\n]}\n");
    return !out_piece->failed || error_set(err, ERROR_MEMORY, "no memory for an export");
}
