/* The log: one SQLite file with every strike, its samples, its reading, and what people said of it.
 *
 * One writer (one thread, one process) and any number of readers (one a thread, read-only, also
 * from other programs). What is committed survives kill -9 and power cuts (WAL, synchronous=FULL).
 * The log never looks at a clock: every time comes from the caller, in milliseconds of UTC.
 *
 * Invariants, tested by log_check:
 *  (1) ids grow in the order of commit and are never given twice, not even after a deletion
 *  (2) every strike has a revision of its own, at most the log's; a change gives it the next one
 *  (3) what the log keeps beside the strikes (their number, the latest time, which is the last out
 *      of order in time) is true of them
 *  (4) a strike that says its samples are kept has them, they unpack to the number of frames it
 *      says, and no samples are without a strike
 *  (5) every stored reading unpacks, its JSON is valid, and its verdict is the one in the column
 *  (6) a series that a strike names exists
 *  (7) a strike whose reading was replaced has the older ones, numbered 1, 2, ... without a hole
 *  (8) every spilled strike unpacks
 *  (9) SQLite's own check of pages and indexes finds nothing
 *
 * Texts that a function appends to hold an unfinished piece after a failure: clear them.
 * Texts are UTF-8; every JSON here is one line without a newline, ready for a `data:` line.
 * Errors: ERROR_STORAGE (disk, file, another writer), ERROR_NOT_FOUND (no such id), ERROR_USAGE
 * (wrong words), ERROR_CONFLICT (an older version was changed), ERROR_LIMIT, ERROR_MEMORY. A failed
 * change changes nothing, and the writer stays usable. */
#ifndef WANE_LOG_H
#define WANE_LOG_H

#include "wane/error.h"
#include "wane/reading.h"
#include "wane/strike.h"
#include "wane/text.h"

#define LOG_NAME_MAX     200  /* bytes with the NUL: input, part, specimen, series, unit */
#define LOG_SOURCE_MAX   1024 /* a recording's name or path */
#define LOG_SETTINGS_MAX 512  /* fit_settings_describe */
#define LOG_VERSION_MAX  40
#define LOG_NOTE_MAX     4000  /* note, reason for setting aside, notice */
#define LOG_SHEET_MAX    65536 /* a part sheet */
#define LOG_TOKEN_MAX    33    /* 32 hexadecimal digits */
#define LOG_ETAG_MAX     64    /* with its quotes */
#define LOG_PATH_MAX     4096
#define LOG_PAGE_MAX     1000
#define LOG_PAGE_DEFAULT 50

/* ---- where ---- */

/* The default log: $STATE_DIRECTORY (systemd sets it to /var/lib/wane), else
 * $XDG_STATE_HOME/wane, else $HOME/.local/state/wane; log.sqlite, or demo.sqlite for the simulated
 * bench. The one place of this rule: waned and wane both call it. Fails when none is set. */
bool log_default_path(bool is_simulated, char *out_path, size_t out_size, struct error *err);

/* ---- the writer ---- */

struct log_writer;

/* = {0}: automatic. */
struct log_options {
    int rejected_waves_per_hour; /* samples of rejected strikes kept; 0: 60; negative: none */
};

/* What a caller must tell people after opening. Empty texts: nothing to tell. */
struct log_opening {
    bool is_new;
    bool was_unclean;  /* the last writer did not close; the file was checked if it is under 256
                          MiB, else call log_verify on a reader thread */
    bool was_verified; /* the check was done and found nothing */
    char notice[512];  /* a sentence: a corrupt file was renamed, the disk is nearly full, ... */
};

/* Opens or makes the log at `path` (missing folders are made). now_ms names the file that a corrupt
 * log is renamed to, and dates a new log. Refuses (ERROR_STORAGE, one sentence): another program's
 * database, a log from a newer version, a folder that cannot be written, a file system without WAL,
 * another process that writes it. (A second writer in the same process is not noticed: do not.)
 * out_opening may be NULL. */
struct log_writer *log_writer_open(const char *path, const struct log_options *options,
                                   int64_t now_ms, struct log_opening *out_opening,
                                   struct error *err);
/* Checkpoints, marks the log as closed in order and frees all. NULL is allowed. */
void log_writer_close(struct log_writer *writer);

/* Random, made with the log and kept in it: a page that sees another token must forget its ids. */
const char *log_writer_token(const struct log_writer *writer);

/* What the caller adds to the JSON of each reading that is stored from now on: keys into an open
 * object. write NULL (the default): nothing. */
struct log_judge {
    void (*write)(void *user, struct json_writer *json, const struct reading *reading);
    void *user;
};
void log_writer_set_judge(struct log_writer *writer, const struct log_judge *judge);

/* What the caller knows of a strike beside its samples and its reading. */
struct log_context {
    int64_t time_ms;   /* of the onset */
    bool clock_synced; /* the time of day was known to be right */
    int64_t closed_ms; /* arrival of the sample that closed the window */
    char input[LOG_NAME_MAX];
    char part[LOG_NAME_MAX];     /* "": none */
    char specimen[LOG_NAME_MAX]; /* "": none */
    char source[LOG_SOURCE_MAX]; /* a recording's name; "": live */
    int64_t strike_number;       /* n-th strike of the recording or the input; 0: not counted */
    int64_t series;              /* 0, or one that the log does not know: none */
    char settings[LOG_SETTINGS_MAX];
    char version[LOG_VERSION_MAX]; /* of the program that read it */
    bool keep_samples;             /* false: store the reading without samples, whatever it is */
};

struct log_entry {
    const struct strike *strike; /* borrowed for the call */
    const struct reading *reading;
    struct log_context context;
    int64_t
        spill_key; /* not 0: this strike was spilled; its spilled copy goes in the same commit */
};

/* Commits `count` strikes in one transaction, in this order, which is the order of their ids.
 * out_ids [count]: untouched on failure. All or nothing: on failure the caller keeps the batch and
 * tries again later. Two syncs of the disk at most, so 1 ... 100s of ms. */
bool log_append(struct log_writer *writer, const struct log_entry *entries, size_t count,
                int64_t *out_ids, struct error *err);

/* Replaces the reading of a strike; the older one stays as history. The samples do not change. */
bool log_replace_reading(struct log_writer *writer, int64_t id, const struct reading *reading,
                         const char *settings, const char *version, int64_t now_ms,
                         int64_t *out_revision, struct error *err);

/* Changes a person makes. Zero in a field: leave it. */
enum log_change_kind { LOG_LEAVE, LOG_SET, LOG_CLEAR };
struct log_change {
    const char *note;               /* NULL: leave; "": remove */
    enum log_change_kind set_aside; /* LOG_SET with reason; LOG_CLEAR: back into the statistics */
    const char *reason;             /* may be "" */
    enum log_change_kind odd;
    enum log_change_kind series; /* LOG_SET: to series_id; LOG_CLEAR: to none */
    int64_t series_id;
};
/* out_revision may be NULL. A change that alters nothing gives no new revision. */
bool log_change_strike(struct log_writer *writer, int64_t id, const struct log_change *change,
                       int64_t *out_revision, struct error *err);

/* ---- spilled strikes: fits are behind, the samples wait on disk ---- */

/* Stores a strike unread; keys grow. context.settings and .version may be empty. */
bool log_spill(struct log_writer *writer, const struct strike *strike,
               const struct log_context *context, int64_t *out_key, struct error *err);

/* ---- series, parts, measurements, events ---- */

struct log_series {
    char name[LOG_NAME_MAX];
    char input[LOG_NAME_MAX];
    char part[LOG_NAME_MAX];
    char specimen[LOG_NAME_MAX];
};
bool log_series_create(struct log_writer *writer, const struct log_series *series, int64_t now_ms,
                       int64_t *out_id, struct error *err);
bool log_series_rename(struct log_writer *writer, int64_t id, const char *name, struct error *err);
/* Closing a closed series keeps its first closing time. */
bool log_series_close(struct log_writer *writer, int64_t id, int64_t now_ms, struct error *err);

/* Stores a new version of a sheet. if_match: the ETag that the change is based on; NULL for a new
 * sheet. ERROR_CONFLICT when the stored one is another (or exists already). The text is not judged
 * here. name: 1 ... 64 letters, digits, '-', '_' or '.', not beginning with '.'. */
bool log_part_put(struct log_writer *writer, const char *name, const char *sheet,
                  const char *if_match, int64_t now_ms, char out_etag[LOG_ETAG_MAX],
                  struct error *err);

bool log_measurement_add(struct log_writer *writer, int64_t now_ms, const char *name, double value,
                         const char *unit, int64_t *out_id, struct error *err);

/* state: "listening", "lost" or "none". gap_ms: how long the input had been away, 0: no gap. */
bool log_input_event(struct log_writer *writer, int64_t now_ms, const char *input,
                     const char *state, int64_t gap_ms, struct error *err);
bool log_notice(struct log_writer *writer, int64_t now_ms, const char *kind, const char *text,
                struct error *err);

/* ---- keeping the file small and sound ---- */

/* When nothing is queued: moves the WAL into the file and gives back free pages, in a small step
 * (tens of ms). Returns true when nothing is left to do. Never fails: a busy reader is met again
 * next time. */
bool log_idle_step(struct log_writer *writer);

/* Zero in a field: no such limit. All zero (the default) deletes nothing. */
struct log_pruning {
    int64_t samples_before_ms; /* samples of older strikes go, their readings stay */
    int64_t strikes_before_ms; /* older strikes go altogether */
    int64_t bytes_max;         /* over this size the oldest samples go, then the oldest strikes */
};
/* One small step (at most 50 strikes); *out_more: call again. Strikes are only ever deleted here.
 */
bool log_prune_step(struct log_writer *writer, const struct log_pruning *pruning, bool *out_more,
                    struct error *err);

/* ---- readers ---- */

struct log_reader;

/* The log must exist. The same refusals as the writer, less those about writing. */
struct log_reader *log_reader_open(const char *path, struct error *err);
void log_reader_close(struct log_reader *reader);

struct log_counts {
    char token[LOG_TOKEN_MAX];
    int64_t newest_id; /* 0: no strike yet */
    int64_t revision;
    int64_t strikes;  /* in the log now */
    int64_t spilled;  /* waiting unread */
    int64_t since_ms; /* when the log was begun */
    int64_t bytes;    /* of the file, its free pages counted */
    int64_t free_bytes_on_disk;
};
/* Constant cost. */
bool log_counts(struct log_reader *reader, struct log_counts *out_counts, struct error *err);

/* What GET /strikes, /export and `wane log` can ask for. = {0}: everything. */
struct log_selection {
    int64_t before; /* id, 0: from the newest */
    unsigned limit; /* 1 ... LOG_PAGE_MAX; 0: LOG_PAGE_DEFAULT (export: no limit) */
    int64_t series; /* 0: any */
    char part[LOG_NAME_MAX];
    char specimen[LOG_NAME_MAX];
    unsigned verdicts; /* bits 1u << VERDICT_x; 0: any */
    bool has_from, has_to;
    int64_t from_ms, to_ms; /* onset: from <= t < to */
    bool has_changed_since;
    int64_t changed_since; /* revision: only strikes changed or added after it */
};
/* Sets one word from its text: before limit series part specimen verdict (one, or several with
 * commas) from to changed_since. ERROR_USAGE with the word, its value and what is allowed; also for
 * a word that is none of them. */
bool log_selection_set(struct log_selection *selection, const char *word, const char *value,
                       struct error *err);

struct log_page {
    size_t count;
    int64_t next_before; /* 0: this was the last page */
    int64_t revision;    /* of the log as the page saw it */
};
/* Appends the objects of GET /strikes/ID, newest first, with a comma and a newline between and no
 * brackets. */
bool log_read_page(struct log_reader *reader, const struct log_selection *selection,
                   struct text *out_objects, struct log_page *out_page, struct error *err);

/* For the stream's replay: strikes after an id, oldest first, one object a line (each ends with
 * '\n'). limit 1 ... LOG_PAGE_MAX; out_ids [limit]. */
bool log_read_after(struct log_reader *reader, int64_t after_id, unsigned limit,
                    struct text *out_lines, int64_t *out_ids, size_t *out_count, struct error *err);

/* The object of GET /strikes/ID. out_revision (may be NULL) is the strike's own. */
bool log_read_strike_json(struct log_reader *reader, int64_t id, struct text *out_object,
                          int64_t *out_revision, struct error *err);

/* Earlier readings of a strike, oldest first: {"readings":[...]}; empty when never reread. */
bool log_read_history_json(struct log_reader *reader, int64_t id, struct text *out_object,
                           struct error *err);

/* A strike as it was stored, bit for bit: for a reread, a plot, a report. */
struct log_stored {
    struct strike *strike; /* owned; without samples (frame_count 0) when they were not kept */
    bool has_samples;
    uint64_t frame_count;   /* as it was heard, also when the samples were not kept */
    struct reading reading; /* the present one */
    struct log_context context;
    bool odd, is_set_aside;
    int64_t revision;
};
bool log_read_strike(struct log_reader *reader, int64_t id, struct log_stored *out_stored,
                     struct error *err);
void log_stored_done(struct log_stored *stored);

/* Readings without samples of a selection, for statistics: newest first, at most `limit` of the
 * selection. out_ids, out_readings, out_set_aside [limit] (out_set_aside may be NULL). */
bool log_read_readings(struct log_reader *reader, const struct log_selection *selection,
                       int64_t *out_ids, struct reading *out_readings, bool *out_set_aside,
                       struct log_page *out_page, struct error *err);

/* The samples as a WAV file: 16 or 24 bit where that is exact, else 32-bit float. *out_bytes is the
 * caller's to free. ERROR_NOT_FOUND when the samples were not kept. */
bool log_read_wav(struct log_reader *reader, int64_t id, unsigned char **out_bytes,
                  size_t *out_size, struct error *err);

/* The spilled strike with the lowest key above `after_key`, or *out_key = 0 when there is none.
 * Owned by the caller as a log_stored (its reading is empty): log_stored_done. */
bool log_read_spilled(struct log_reader *reader, int64_t after_key, int64_t *out_key,
                      struct log_stored *out_stored, struct error *err);

/* {"id":…,"name":…,"input":…,"part":…,"specimen":…,"opened":…,"closed":…,"strikes":n} */
bool log_read_series_json(struct log_reader *reader, int64_t id, struct text *out_object,
                          struct error *err);
/* Newest first, objects with commas between, no brackets. before 0: from the newest. */
bool log_list_series_json(struct log_reader *reader, int64_t before, unsigned limit,
                          struct text *out_objects, int64_t *out_next_before, struct error *err);
/* The series that is open on an input: *out_id = 0 when none. */
bool log_read_open_series(struct log_reader *reader, const char *input, int64_t *out_id,
                          struct log_series *out_series, struct error *err);

/* version 0: the newest. */
bool log_read_part(struct log_reader *reader, const char *name, int64_t version,
                   struct text *out_sheet, char out_etag[LOG_ETAG_MAX], struct error *err);
/* {"name":…,"version":…,"changed":…,"etag":…}, … by name, no brackets. */
bool log_list_parts_json(struct log_reader *reader, struct text *out_objects, struct error *err);

/* Measurements and events in a span of time, oldest first, objects with commas, no brackets; at
 * most `limit` (1 ... LOG_PAGE_MAX), the newest ones of the span. name, kind: NULL for all; kind
 * "input" or that of a notice. */
bool log_list_measurements_json(struct log_reader *reader, const char *name, int64_t from_ms,
                                int64_t to_ms, unsigned limit, struct text *out_objects,
                                struct error *err);
bool log_list_events_json(struct log_reader *reader, const char *kind, int64_t from_ms,
                          int64_t to_ms, unsigned limit, struct text *out_objects,
                          struct error *err);

/* ---- export: a selection as one document, in pieces ---- */

enum log_export_format { LOG_EXPORT_CSV, LOG_EXPORT_JSON };
struct log_export;

/* Oldest first; selection.limit: the newest so many. Strikes that come later are left out. The
 * reader must outlive it and be used on the same thread. NULL and *err on failure. */
struct log_export *log_export_begin(struct log_reader *reader,
                                    const struct log_selection *selection,
                                    enum log_export_format format, struct error *err);
/* Appends the next piece (about 256 KiB); *out_is_done: it was the last. No statement stays open
 * between calls. */
bool log_export_next(struct log_export *export, struct text *out_piece, bool *out_is_done,
                     struct error *err);
void log_export_end(struct log_export *export);

/* ---- checks and copies ---- */

/* SQLite's quick check: about 0.3 ms a MiB. ERROR_DATA with the first finding. */
bool log_verify(struct log_reader *reader, struct error *err);

/* Tests the invariants. Appends one line for each violation; *out_violations counts them (at most
 * 100 are listed). Reads everything: seconds for a large log. */
bool log_check(struct log_reader *reader, struct text *out_findings, size_t *out_violations,
               struct error *err);

/* A compact copy while the log is in use (VACUUM INTO). The file must not exist. */
bool log_backup(struct log_reader *reader, const char *to_path, struct error *err);

#endif
