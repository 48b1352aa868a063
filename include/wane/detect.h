/* Finds strikes in one channel of samples and cuts each out with the noise before it and the whole
 * of its ring. It counts frames and knows no other clock, and it never drops what it has triggered
 * on. The same samples give the same strikes at any block size. One detector belongs to one thread.
 */
#ifndef WANE_DETECT_H
#define WANE_DETECT_H

#include "wane/error.h"
#include "wane/strike.h"

/* Zero in any field: automatic, the value is chosen from the rate and the signal. */
struct detect_settings {
    double trigger_db; /* over the tracked floor in some band; automatic 17; 6 ... 60 */
    double f_low_hz;   /* lowest frequency heeded; automatic 20 */
    double f_high_hz;  /* highest; automatic 0.46 x rate */
    double hold_off_s; /* shortest time between two strikes; automatic: from the ring's own decay */
    double window_max_s; /* longest window; automatic 60; 0.05 ... 600 */
};

struct detect_level {
    double dbfs;         /* peak of the last 50 ms, 20 log10 */
    double noise_dbfs;   /* tracked floor, 20 log10(sqrt 2 rms) */
    double trigger_dbfs; /* level that a tone needs now to trigger */
    bool clipped;        /* an end stop was touched in the last 50 ms */
    bool is_ringing;     /* a strike is at hand */
};

struct detector;

/* rate_hz 1000 ... 768000, channel 1-based (a label only). Returns NULL and fills *err on bad
 * settings or when memory ran out. Plans FFTs: one thread at a time (FFTW's planner). */
struct detector *detect_create(const struct detect_settings *settings, double rate_hz, int channel,
                               struct error *err);
void detect_destroy(struct detector *detector);

/* New settings from the next frame on; a strike at hand goes on under the old window limit. */
bool detect_set(struct detector *detector, const struct detect_settings *settings,
                struct error *err);

/* samples [frame_count] of this channel. Strikes that got complete wait in order for
 * detect_take_strike. Fails (ERROR_MEMORY) without losing what is at hand. */
bool detect_push_block(struct detector *detector, const float *samples, size_t frame_count,
                       struct error *err);

/* `lost_frames` frames are missing here (0: unknown how many). The frame count moves on by that
 * number; a strike at hand is told (strike.lost) and goes on where possible. */
bool detect_push_gap(struct detector *detector, uint64_t lost_frames, struct error *err);

/* The input ends: closes the strike at hand (STRIKE_END_INPUT). The next block starts a new input;
 * the frame count goes on. */
bool detect_finish(struct detector *detector, struct error *err);

/* Next complete strike or NULL. The caller owns it (strike_destroy). */
struct strike *detect_take_strike(struct detector *detector);

/* A copy of the strike at hand with what has arrived of it, or NULL when nothing rings (or memory
 * ran out). For forming readings; costs a copy of its samples, at most `frames_max` after the
 * trigger. */
struct strike *detect_copy_forming(const struct detector *detector, size_t frames_max);

void detect_level(const struct detector *detector, struct detect_level *out_level);

/* Frames seen so far, lost ones counted. */
uint64_t detect_frame_count(const struct detector *detector);

#endif
