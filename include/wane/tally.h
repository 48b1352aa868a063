/* A series of the log with its statistics, kept in memory and brought up to date from the log: only
 * what changed since the last time is read. And part sheets, wherever they lie: in the log (put
 * there through the API), else as NAME.ini in a folder. One tally belongs to one thread. */
#ifndef WANE_TALLY_H
#define WANE_TALLY_H

#include "wane/log.h"
#include "wane/series.h"
#include "wane/watch.h"

#define SHELF_FOLDERS_MAX 3
#define TALLY_ODD_MAX     256
#define TALLY_NOTICES_MAX 8

/* --- part sheets --- */

/* Folders of sheets, first come first; "": none. = {0}: the log alone. */
struct shelf {
    char folders[SHELF_FOLDERS_MAX][LOG_PATH_MAX];
};

/* The sheet's text and ETag. *out_is_file (may be NULL): it lies in a folder, not in the log.
 * ERROR_NOT_FOUND. */
bool shelf_read(struct log_reader *reader, const struct shelf *shelf, const char *name,
                struct text *out_sheet, char out_etag[LOG_ETAG_MAX], bool *out_is_file,
                struct error *err);

/* {"name","version","changed","etag"} of the log's, then {"name","file","etag"} of the folders'
 * that the log has no sheet for; with commas, no brackets. */
bool shelf_list_json(struct log_reader *reader, const struct shelf *shelf, struct text *out_objects,
                     struct error *err);

/* --- a series --- */

/* What a fixture's watch said of the strike `id`. */
struct tally_notice {
    int64_t id;
    enum quantity quantity;
    struct watch_notice notice;
};

struct tally {
    int64_t id; /* 0: empty */
    struct log_series about;
    struct series *series;
    struct series_summary summary;
    bool has_part;
    struct part part;
    char part_problem[256]; /* why the sheet that the series names is not used; "" */
    char part_etag[LOG_ETAG_MAX];
    double clock_u_ppm;
    int64_t revision, newest_id;
    int64_t odd_in_log[TALLY_ODD_MAX]; /* strikes that the log says are odd */
    unsigned odd_in_log_count;
    /* f and Q of the lead mode, for steps and drifts; notices of the last update. */
    struct watch watches[2];
    struct tally_notice notices[TALLY_NOTICES_MAX];
    unsigned notice_count;
};

/* Brings the tally (= {0} at first) to what the log says of series `id`, whatever it held before.
 * ERROR_NOT_FOUND, ERROR_STORAGE, ERROR_MEMORY. After a failure the tally is empty. Some 3 ms for
 * one more strike in a series of 1000. */
bool tally_update(struct tally *tally, struct log_reader *reader, const struct shelf *shelf,
                  int64_t id, struct error *err);
void tally_done(struct tally *tally);

/* The object of log_read_series_json with `statistics` (series.h) and `part_problem`. */
bool tally_read_json(const struct tally *tally, struct log_reader *reader, struct text *out_object,
                     struct error *err);

#endif
