/* A strike as the detector hands it on: one tap or switch transient with the ring-down that
 * follows, the noise before it, and all else that a reading of it depends on. What is in here is
 * what the log stores, so that a strike can be read again. */
#ifndef WANE_STRIKE_H
#define WANE_STRIKE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define STRIKE_CARRIED_MAX 16
#define STRIKE_LOST_MAX    8

#define WANE_PI 3.14159265358979323846

/* Why the window ends where it does. */
enum strike_end {
    STRIKE_END_FADED, /* nothing that rings was left */
    STRIKE_END_NEXT,  /* the next strike began */
    STRIKE_END_LIMIT, /* the longest window was reached */
    STRIKE_END_INPUT, /* the recording ended, the input was closed or lost */
    STRIKE_END_LOST,  /* frames were lost and the ring could not be followed past them */
};

/* A mode of an earlier strike that still rings when samples[0] is taken:
 * amplitude * exp(-decay_per_s t) * cos(2 pi f_hz t + phase_rad), t from samples[0]. */
struct carried_mode {
    double f_hz, decay_per_s;
    double amplitude; /* of full scale 1 */
    double phase_rad;
};

/* Frames that the driver says are missing: `frames` of them before samples[at]. 0 frames: how many
 * is not known. */
struct lost_span {
    size_t at;
    uint64_t frames;
};

struct strike {
    double rate_hz;
    int channel;          /* 1-based */
    uint64_t first_frame; /* position of samples[0], counted from the start of the input */
    float *samples;       /* [frame_count], full scale is 1; owned, see strike_destroy */
    size_t frame_count;   /* frames, not bytes */
    size_t trigger;       /* index in samples at which the detector saw the onset; samples before it
                             that lie more than 5 ms earlier are noise (or an earlier ring) */
    enum strike_end end;
    struct lost_span lost[STRIKE_LOST_MAX];
    unsigned lost_count;
    struct carried_mode carried[STRIKE_CARRIED_MAX];
    unsigned carried_count;
};

/* Frees the samples and the strike. NULL is allowed. */
void strike_destroy(struct strike *strike);

/* An own copy, or NULL when memory ran out. Any thread. */
struct strike *strike_copy(const struct strike *strike);

/* Words for enum strike_end: "faded" "next" "limit" "input" "lost". */
const char *strike_end_name(enum strike_end end);

#endif
