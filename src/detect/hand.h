/* The strike at hand: its samples as they arrive, and the decision where its
 * window ends. */
#ifndef WANE_DETECT_HAND_H
#define WANE_DETECT_HAND_H

#include "detect/bank.h"
#include "detect/fade.h"
#include "wane/strike.h"

#define GUARD_S     3e-3 /* after an onset its blow is over */
#define BANKS       2    /* about 10 ms and 40 ms */
#define BANK_QUICK  0
#define BANK_STEADY 1

struct hand {
    struct strike *strike; /* NULL: nothing rings */
    float *samples;        /* [capacity] grows as a ring goes on, and is kept for the
                              next */
    size_t capacity;
    int64_t start;       /* index of samples[0] */
    int64_t onset;       /* index of the trigger */
    int64_t window_max;  /* samples from the onset */
    bool is_noise_known; /* false: the input began with the blow */
    struct fade fades[BANKS];
};

/* What a strike begins with. */
struct hand_opening {
    double rate_hz;
    int channel;
    int64_t start, onset; /* indices */
    uint64_t first_frame; /* of start */
    int64_t window_max;
    bool is_noise_known;  /* the banks' floors are what was there before */
    bool follows_closely; /* they still hold the last strike: keep what was known
                             before it */
};

bool hand_init(struct hand *hand, const struct bank banks[BANKS]);
void hand_done(struct hand *hand);

/* Begins a strike, without samples yet. False: no memory, nothing changed. */
bool hand_open(struct hand *hand, const struct bank banks[BANKS],
               const struct hand_opening *opening);

/* Appends samples [count]. False: no memory, nothing changed. */
bool hand_append(struct hand *hand, const float *samples, size_t count);

/* Shows the frames in [from, newest] of one bank to the decision; those that
 * end after index `until` are passed over. */
void hand_follow(struct hand *hand, const struct bank *bank, int which, int64_t from,
                 int64_t until);

/* Index at which the window should end, by what was followed up to index `now`;
 * INT64_MAX: not yet known. */
int64_t hand_end(const struct hand *hand, int64_t now);

/* Amplitude's fall from the onset to index `at`, by the rate of the strongest
 * bin; 0: not known. */
double hand_fallen_db(const struct hand *hand, int64_t at);

/* Frames are missing before index `at`. */
void hand_note_lost(struct hand *hand, int64_t at, uint64_t frames);

/* Cuts at index `end` and hands the strike on, with its own samples. Where
 * there is no memory for a copy it takes the hand's: cannot fail. */
struct strike *hand_close(struct hand *hand, int64_t end, enum strike_end reason);

#endif
