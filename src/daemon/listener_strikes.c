/* Strikes on their way from the detectors to the fitter, or to the disk when fits are behind. */
#include "listener.h"

#include <stdio.h>
#include <string.h>

#define QUEUED_STRIKES_MAX 16
#define QUEUED_BYTES_MAX   (24u << 20)
#define SIGHT_S            0.25 /* a detector sees a strike at most this much after its trigger */

static int64_t frame_ns(const struct listener *listener, double frame)
{
    return listener->anchor_ns + (int64_t)(frame / listener->rate_hz * 1e9);
}

void listener_fill_origin(const struct listener *listener, const struct strike *strike,
                          struct origin *out)
{
    const struct input_info *info = input_get_info(listener->input);
    double trigger_frame = (double)strike->first_frame + (double)strike->trigger;
    *out = (struct origin){.epoch = listener->epoch,
                           .strike_number = listener->strike_number,
                           .trigger_ms = clock_utc_ms_of(frame_ns(listener, trigger_frame)),
                           .closed_ms = clock_utc_ms_of(listener->arrived_ns),
                           .clock_synced = clock_is_synced()};
    snprintf(out->input, sizeof out->input, "%.*s", (int)sizeof out->input - 1, info->name);
    if (info->kind == INPUT_RECORDING) {
        snprintf(out->source, sizeof out->source, "%s", info->name);
        const char *slash = strrchr(info->name, '/');
        if (slash != NULL)
            snprintf(out->input, sizeof out->input, "%.*s", (int)sizeof out->input - 1, slash + 1);
    }
}

/* Fits are behind: the strike goes to the disk unread, and so does every later one until all are
 * read, so that none overtakes another. */
static void spill(struct listener *listener, struct message *message)
{
    struct pipeline *pipeline = listener->pipeline;
    message->kind = MESSAGE_SPILL;
    pthread_mutex_lock(&pipeline->mutex);
    bool is_first = pipeline->spilled++ == 0;
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_first)
        pipeline_tell(pipeline, "unread",
                      "Strikes come faster than they can be read: their samples are kept and read "
                      "in turn");
    if (queue_try_put(pipeline->writes, message))
        return;
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->spilled--;
    if (pipeline->unkept++ == 0)
        pipeline->unkept_since_ms = clock_utc_ms();
    pthread_mutex_unlock(&pipeline->mutex);
    message_destroy(message);
    pipeline_tell(pipeline, "log",
                  "A strike was heard but neither read nor kept: the disk is too "
                  "slow for what comes in");
}

void listener_clear_forming(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    strike_destroy(pipeline->forming);
    pipeline->forming = NULL;
    pipeline->forming_number++;
    serve_clear_forming(pipeline->server);
    pthread_mutex_unlock(&pipeline->mutex);
}

/* Whoever can wait does: strikes that an earlier run left unread come first. */
static void wait_for_older(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    while (pipeline->spilled > 0 && !pipeline->is_stopping)
        pthread_cond_wait(&pipeline->changed, &pipeline->mutex);
    pthread_mutex_unlock(&pipeline->mutex);
}

static void send_strike(struct listener *listener, struct strike *strike)
{
    struct pipeline *pipeline = listener->pipeline;
    struct message *message = message_create(MESSAGE_STRIKE);
    if (message == NULL) {
        strike_destroy(strike);
        pipeline_tell(pipeline, "log", "A strike was lost: memory ran out");
        return;
    }
    listener->strike_number++;
    message->strike = strike;
    listener_fill_origin(listener, strike, &message->origin);
    listener_clear_forming(pipeline);
    size_t bytes = strike->frame_count * sizeof *strike->samples;
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->strikes_heard++;
    bool is_room = pipeline->spilled == 0 && (pipeline->queued_bytes == 0 ||
                                              pipeline->queued_bytes + bytes <= QUEUED_BYTES_MAX);
    if (!listener->is_live || is_room)
        pipeline->queued_bytes += bytes;
    pthread_mutex_unlock(&pipeline->mutex);
    if (!listener->is_live) {
        wait_for_older(pipeline);
        if (!queue_put(pipeline->fits, message))
            message_destroy(message);
        return;
    }
    if (is_room && queue_count(pipeline->fits) < QUEUED_STRIKES_MAX &&
        queue_try_put(pipeline->fits, message))
        return;
    if (is_room) {
        pthread_mutex_lock(&pipeline->mutex);
        pipeline->queued_bytes -= bytes;
        pthread_mutex_unlock(&pipeline->mutex);
    }
    spill(listener, message);
}

static uint64_t moment_of(const struct strike *strike)
{
    return strike->first_frame + strike->trigger;
}

/* The first `count` of those held go on their way. */
static void send_first(struct listener *listener, size_t count)
{
    for (size_t i = 0; i < count; i++)
        send_strike(listener, listener->held[i]);
    listener->held_count -= count;
    for (size_t i = 0; i < listener->held_count; i++)
        listener->held[i] = listener->held[i + count];
}

static void hold_strike(struct listener *listener, struct strike *strike)
{
    /* One channel rings on and on: better a late id than a lost strike. */
    if (listener->held_count == HELD_MAX)
        send_first(listener, 1);
    size_t at = listener->held_count++;
    for (; at > 0 && moment_of(listener->held[at - 1]) > moment_of(strike); at--)
        listener->held[at] = listener->held[at - 1];
    listener->held[at] = strike;
}

static void send_held(struct listener *listener, uint64_t before)
{
    size_t count = 0;
    while (count < listener->held_count && moment_of(listener->held[count]) < before)
        count++;
    send_first(listener, count);
}

/* A channel that rings may still bring a strike as old as where its horizon stands; one that does
 * not may bring one that its detector has not seen yet. */
static uint64_t find_horizon(struct listener *listener)
{
    uint64_t sight = (uint64_t)(SIGHT_S * listener->rate_hz);
    uint64_t horizon = UINT64_MAX;
    for (unsigned i = 0; i < listener->count; i++) {
        struct detect_level level;
        uint64_t seen = detect_frame_count(listener->detectors[i]);
        detect_level(listener->detectors[i], &level);
        if (!level.is_ringing && seen > sight)
            listener->horizons[i] = seen - sight;
        if (listener->horizons[i] < horizon)
            horizon = listener->horizons[i];
    }
    return horizon;
}

void listener_send_strikes(struct listener *listener)
{
    for (unsigned i = 0; i < listener->count; i++) {
        struct strike *strike;
        while ((strike = detect_take_strike(listener->detectors[i])) != NULL) {
            if (listener->count == 1)
                send_strike(listener, strike);
            else
                hold_strike(listener, strike);
        }
    }
    if (listener->count > 1)
        send_held(listener, find_horizon(listener));
}

void listener_tell_failure(struct listener *listener, const struct error *err)
{
    pipeline_tell(listener->pipeline, "input", "The detector stopped for a moment: %s", err->text);
}

void listener_finish(struct listener *listener)
{
    struct error err;
    for (unsigned i = 0; i < listener->count; i++) {
        if (!detect_finish(listener->detectors[i], &err))
            listener_tell_failure(listener, &err);
    }
    listener_send_strikes(listener);
    send_held(listener, UINT64_MAX);
    listener_clear_forming(listener->pipeline);
}
