/* The detector's state, shared by detect.c (samples in, strikes out) and
 * trigger.c (which of what the banks report is a strike).
 *
 * Inside, samples are counted by `index`: those that arrived, one by one, and
 * the silence put before each input so that its first frames exist. Lost frames
 * have no index. frame of the stream = index + shift - frames lost after that
 * index
 *
 *            push                 banks report            end known, or next
 * blow, (idle) ---------> (idle) ------------------> (ringing)
 * -----------------------> queue
 */
#ifndef WANE_DETECT_DETECTOR_H
#define WANE_DETECT_DETECTOR_H

#include "detect/bank.h"
#include "detect/hand.h"
#include "detect/level.h"
#include "wane/detect.h"

#define GAPS_KEPT 32

struct gap {
    int64_t at; /* index of the first sample after it */
    uint64_t frames;
};

struct waiting {
    struct strike *strike;
};

struct detector {
    struct detect_settings settings; /* no zeros left, but for hold_off_s */
    double rate_hz;
    int channel;

    float *history; /* [capacity] samples from index `base` on */
    size_t capacity, count, keep;
    int64_t base;
    int64_t done; /* samples before this index have been through the banks */
    int64_t shift;
    struct gap gaps[GAPS_KEPT]; /* the latest, oldest first */
    unsigned gap_count;

    struct bank banks[BANKS];
    struct level level;
    float offset; /* mean of the input, followed slowly */
    float offset_share;
    bool is_offset_known;

    int64_t input_start, input_end; /* indices; INT64_MAX: it goes on */
    int64_t zeros;                  /* samples of exact silence just before `done` */
    int64_t sound_start;
    bool is_start_open; /* sound began at sound_start, and it is not known yet
                           whether with a blow */

    struct hand hand;
    int64_t last_onset;   /* of the newest event seen, strike or not */
    int64_t strike_onset; /* of the newest strike */
    int64_t strike_end;   /* where its window ended */

    double *work; /* for onset_find */
    size_t work_count;
    struct waiting *queue; /* complete strikes, oldest first */
    size_t queue_count, queue_capacity;
};

/* trigger.c: looks at what the banks show now that `done` has moved on. False:
 * no memory. */
bool trigger_look(struct detector *detector, struct error *err);

/* trigger.c: the input ends at input_end; settles whether it began with a blow.
 */
bool trigger_settle_start(struct detector *detector, struct error *err);

/* detect.c: the strike at hand goes into the queue. Cannot fail: its place was
 * made when it began. */
void detector_close(struct detector *detector, int64_t end, enum strike_end reason);

/* detect.c: a strike begins. */
bool detector_open(struct detector *detector, int64_t onset, bool is_noise_known,
                   struct error *err);

#endif
