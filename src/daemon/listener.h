/* The listener's own files: listener.c (the loop, blocks, levels, forming readings),
 * listener_strikes.c (strikes on their way to the fitter), listener_input.c (opening, closing and
 * changing the input). All on the listener's thread. */
#ifndef WANE_DAEMON_LISTENER_H
#define WANE_DAEMON_LISTENER_H

#include "inner.h"

#define HELD_MAX 256 /* closed strikes of several channels that wait for older ones */

struct listener {
    struct pipeline *pipeline;
    struct input *input;
    struct input_choice choice;
    char name[INPUT_NAME_MAX]; /* that choice.name points to */
    unsigned channels_heard;
    bool is_live;
    double rate_hz;
    int channels;
    struct detector *detectors[OPTIONS_CHANNELS_MAX];
    int channel_of[OPTIONS_CHANNELS_MAX];
    unsigned count;
    float *mono; /* [BLOCK_FRAMES_MAX] */
    uint64_t epoch;
    int64_t strike_number;
    int64_t opened_ns, anchor_ns, arrived_ns;
    bool has_anchor;
    int64_t level_due_ns, forming_due_ns;
    unsigned warning_count;
    /* Several channels only: closed strikes in the order of their triggers, and of each channel the
     * frame before which no later strike of it will trigger. */
    struct strike *held[HELD_MAX];
    size_t held_count;
    uint64_t horizons[OPTIONS_CHANNELS_MAX];
};

/* --- listener_strikes.c --- */

void listener_fill_origin(const struct listener *listener, const struct strike *strike,
                          struct origin *out);
/* Nothing rings any more: what is forming is out of date. */
void listener_clear_forming(struct pipeline *pipeline);
/* Sends what the detectors have closed, in the order of the triggers; of several channels only what
 * no other channel can come before any more. */
void listener_send_strikes(struct listener *listener);
/* The input ends or is lost: closes the strikes at hand and sends all. */
void listener_finish(struct listener *listener);
void listener_tell_failure(struct listener *listener, const struct error *err);

/* --- listener_input.c --- */

/* The view as it is now; announced and logged in the order of the strikes when `announces`, else
 * announced at once and logged in their order. */
void listener_tell_input(struct listener *listener, bool announces, int64_t gap_ms);
void listener_set_state(struct listener *listener, enum input_state state, const char *text);
void listener_close_input(struct listener *listener, bool has_ended);
/* SERVE_PUT_INPUT, SERVE_PUT_TRIGGER. */
void listener_do_job(struct listener *listener, struct serve_job *job);

#endif
