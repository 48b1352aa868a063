/* Finds lost samples that no driver speaks of, by holding the count of frames against the monotonic
 * clock. Callbacks only ever come late, so the earliest arrival of each second is the honest one;
 * when it moves late and stays late, samples are missing. Pure: stamps come from the caller. */
#ifndef CLOCK_CHECK_H
#define CLOCK_CHECK_H

#include <stdint.h>

#define CLOCK_CHECK_BEFORE 5 /* seconds that the newest are held against */
#define CLOCK_CHECK_AFTER  2 /* a burst of late blocks has caught up by then */
#define CLOCK_CHECK_SPAN   (CLOCK_CHECK_BEFORE + CLOCK_CHECK_AFTER)

struct clock_check {
    double rate_hz;
    uint64_t frames;                    /* since the start */
    int64_t first_ns;                   /* stamp of the first block; 0: none yet */
    int64_t window_end_ns;              /* of the second at hand */
    double earliest_s;                  /* in it: arrival minus frames / rate */
    double history_s[CLOCK_CHECK_SPAN]; /* of the seconds before, oldest first */
    unsigned history_count;
};

void clock_check_init(struct clock_check *check, double rate_hz);

/* A block of frame_count frames had arrived at stamp_ns. Returns how many frames went missing
 * without a word, as far as is known now; 0 nearly always. Tells 2 to 3 s after the loss; a loss of
 * less than 10 ms, or less than the arrivals' own unrest, is not seen. */
uint64_t clock_check_block(struct clock_check *check, uint64_t frame_count, int64_t stamp_ns);

#endif
