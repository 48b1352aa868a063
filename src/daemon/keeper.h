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
};

/* keeper.c */
void keeper_refresh_counts(struct keeper *keeper);

/* keeper_change.c: each answers the job. */
void keeper_do_job(struct keeper *keeper, struct serve_job *job);
/* A reread strike: message->reading replaces the stored one; its job is answered. */
void keeper_replace_reading(struct keeper *keeper, struct message *message);
void keeper_set_series(struct keeper *keeper, int64_t id, const struct log_series *series);

#endif
