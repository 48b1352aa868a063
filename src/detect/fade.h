/* When is a ring over? Follows the bins of one bank after an onset. Its decay
 * rates only decide where the window ends; the fit measures. */
#ifndef WANE_DETECT_FADE_H
#define WANE_DETECT_FADE_H

#include "detect/bank.h"

#define FADE_SHOTS 20 /* rows kept, each taken 6 % later after the onset than the one before */

struct fade {
    double rate_hz;
    size_t lanes;
    int16_t *shots;            /* [FADE_SHOTS x lanes] */
    double shot_s[FADE_SHOTS]; /* time after the onset of each */
    unsigned shot_count;       /* all taken so far; the last FADE_SHOTS are kept */
    int16_t *noise;            /* [lanes] level of each bin when nothing rings, mean of logs */
    float *hold_s;             /* [lanes] how long each bin asks to go on, from the onset */
    double onset;              /* index of the onset */
    double hold_max_s;         /* largest of hold_s */
    double strongest_per_s;    /* decay rate of the strongest bin followed; 0: not
                                  known */
    int top;                   /* highest level seen */
};

bool fade_init(struct fade *fade, const struct bank *bank);
void fade_done(struct fade *fade);

/* A strike begins at index `onset`; fade->noise has been filled. */
void fade_start(struct fade *fade, double onset);

/* Frame `frame` of the bank (the newest, or one of the last BANK_ROWS). Frames
 * that begin less than guard_s after the onset are passed over: they hold the
 * blow. */
void fade_push(struct fade *fade, const struct bank *bank, int64_t frame, double guard_s);

#endif
