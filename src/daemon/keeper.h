/* The keeper's own files: keeper.c (strikes, the loop) and keeper_change.c (what people change).
 * All on the keeper's thread. */
#ifndef WANE_DAEMON_KEEPER_H
#define WANE_DAEMON_KEEPER_H

#include "inner.h"

#define BATCH_MAX 64

struct keeper {
    struct pipeline *pipeline;
    struct log_writer *writer;
    struct log_reader *reader;        /* reads back what is announced */
    struct message *batch[BATCH_MAX]; /* MESSAGE_STRIKE and MESSAGE_SPILL, oldest first */
    size_t count;
    bool is_failing;
    int64_t retry_ns, prune_ns;
    int64_t strike_ns; /* the last strike, or the begin of listening */
    bool is_silence_told, is_disk_told;
    struct tally tally;       /* of the open series, or the one that was changed last */
    const struct part *judge; /* sheet for the readings that are being stored; NULL: none */
};

/* keeper.c */
void keeper_refresh_counts(struct keeper *keeper);

/* keeper_change.c: each answers the job. */
void keeper_do_job(struct keeper *keeper, struct serve_job *job);
/* A reread strike: message->reading replaces the stored one; its job is answered. */
void keeper_replace_reading(struct keeper *keeper, struct message *message);
/* keeper_series.c */
/* The labels of the open series on the first `count` strikes of the batch, and its sheet as the
 * judge of what is stored. */
void keeper_label_batch(struct keeper *keeper, size_t count);
/* The same for one reading of series `series` that replaces an earlier one. */
void keeper_label_reading(struct keeper *keeper, int64_t series, struct reading *reading);
/* What the log's writer asks when it stores a reading. */
void keeper_write_judgement(void *keeper, struct json_writer *json, const struct reading *reading);
/* Something about the series changed: marks what is odd now, tells the statistics and what its
 * watches say. 0: no series, nothing to do. */
void keeper_tell_series(struct keeper *keeper, int64_t series);
/* A sentence for the log, pages and stderr. */
void keeper_notice(struct keeper *keeper, const char *kind, const char *sentence,
                   struct error *err);
/* Once a second or so: tells of a long silence and of a disk that is nearly full, once each. */
void keeper_look_around(struct keeper *keeper);
/* The object of GET /series/ID. */
bool keeper_read_series(struct keeper *keeper, int64_t id, struct text *out, struct error *err);

void keeper_set_series(struct keeper *keeper, int64_t id, const struct log_series *series);

#endif
