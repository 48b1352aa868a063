/* The listener: reads the input, owns a detector for each channel that is heard, and hands strikes
 * on. With a live input it never waits for a fit, the disk or a page. */
#include "listener.h"
#include "recent.h"

#include <stdio.h>
#include <string.h>

#define READ_MS          20
#define LEVEL_NS         (CLOCK_NS_PER_S / 20)
#define FORMING_NS       (CLOCK_NS_PER_S / 20)
#define FORMING_SHARE    20 /* of the time, one part goes to forming readings: 5 % of a core */
#define FORMING_WINDOW_S 10.0
/* The anchor (monotonic time of frame 0) follows the earliest blocks, as they only ever come late.
 * It may rise by this share, more than any sample clock is off. */
#define ANCHOR_RISE 200e-6

/* --- blocks --- */

static void push_gap(struct listener *listener, uint64_t lost_frames)
{
    struct error err;
    for (unsigned i = 0; i < listener->count; i++) {
        if (!detect_push_gap(listener->detectors[i], lost_frames, &err))
            listener_tell_failure(listener, &err);
    }
    listener->has_anchor = false;
}

static void follow_anchor(struct listener *listener, const struct input_block *block)
{
    double end_frame = (double)(block->first_frame + block->frame_count);
    int64_t candidate_ns = block->arrived_ns - (int64_t)(end_frame / listener->rate_hz * 1e9);
    if (!listener->is_live || input_get_info(listener->input)->kind == INPUT_RECORDING) {
        listener->anchor_ns = listener->opened_ns;
        return;
    }
    double block_s = (double)block->frame_count / listener->rate_hz;
    int64_t risen_ns = listener->anchor_ns + (int64_t)(block_s * ANCHOR_RISE * 1e9);
    listener->anchor_ns = listener->has_anchor && risen_ns < candidate_ns ? risen_ns : candidate_ns;
    listener->has_anchor = true;
}

static void publish_level(struct listener *listener)
{
    struct pipeline *pipeline = listener->pipeline;
    struct detect_level levels[OPTIONS_CHANNELS_MAX];
    struct text text = {0};
    const struct input_info *info = input_get_info(listener->input);
    for (unsigned i = 0; i < listener->count; i++)
        detect_level(listener->detectors[i], &levels[i]);
    pthread_mutex_lock(&pipeline->mutex);
    memcpy(pipeline->levels, levels, listener->count * sizeof levels[0]);
    memcpy(pipeline->level_channels, listener->channel_of, sizeof listener->channel_of);
    pipeline->level_count = listener->count;
    pipeline->input.info = *info;
    pthread_mutex_unlock(&pipeline->mutex);
    view_write_level(&text, levels, listener->channel_of, listener->count);
    if (text.data != NULL && !text.failed)
        serve_publish_level(pipeline->server, text.data);
    text_done(&text);
    if (info->warning_count != listener->warning_count) {
        listener->warning_count = info->warning_count;
        listener_tell_input(listener, false, 0);
    }
}

/* Hands a copy of what rings to the fitter; returns when the next one may come. */
static int64_t offer_forming(struct listener *listener, const struct detector *detector,
                             int64_t now_ns)
{
    struct pipeline *pipeline = listener->pipeline;
    struct strike *copy =
        detect_copy_forming(detector, (size_t)(FORMING_WINDOW_S * listener->rate_hz));
    if (copy == NULL)
        return now_ns + FORMING_NS;
    pthread_mutex_lock(&pipeline->mutex);
    strike_destroy(pipeline->forming);
    pipeline->forming = copy;
    listener_fill_origin(listener, copy, &pipeline->forming_origin);
    pipeline->forming_origin.strike_number++; /* this one is not counted yet */
    bool is_queued = pipeline->is_forming_queued;
    pipeline->is_forming_queued = true;
    int64_t pause_ns = pipeline->forming_cost_ns * FORMING_SHARE;
    pthread_mutex_unlock(&pipeline->mutex);
    if (!is_queued) {
        struct message *message = message_create(MESSAGE_FORMING);
        if (message == NULL || !queue_try_put(pipeline->fits, message)) {
            message_destroy(message);
            pthread_mutex_lock(&pipeline->mutex);
            pipeline->is_forming_queued = false;
            pthread_mutex_unlock(&pipeline->mutex);
        }
    }
    return now_ns + (pause_ns > FORMING_NS ? pause_ns : FORMING_NS);
}

static void look_for_forming(struct listener *listener, int64_t now_ns)
{
    struct detect_level level;
    for (unsigned i = 0; i < listener->count; i++) {
        detect_level(listener->detectors[i], &level);
        if (level.is_ringing) {
            listener->forming_due_ns = offer_forming(listener, listener->detectors[i], now_ns);
            return;
        }
    }
}

static void take_frames(struct listener *listener, const struct input_block *block)
{
    struct pipeline *pipeline = listener->pipeline;
    struct error err;
    uint64_t expected = detect_frame_count(listener->detectors[0]);
    if (block->first_frame > expected)
        push_gap(listener, block->first_frame - expected);
    listener->arrived_ns = block->arrived_ns;
    follow_anchor(listener, block);
    for (unsigned i = 0; i < listener->count; i++) {
        const float *from = block->frames + (listener->channel_of[i] - 1);
        for (size_t k = 0; k < block->frame_count; k++)
            listener->mono[k] = from[k * (size_t)listener->channels];
        if (!detect_push_block(listener->detectors[i], listener->mono, block->frame_count, &err))
            listener_tell_failure(listener, &err);
        pthread_mutex_lock(&pipeline->mutex);
        if (pipeline->recent.frames != NULL) {
            recent_write(&pipeline->recent, i, listener->mono, block->frame_count);
            if (i + 1 == listener->count)
                recent_advance(&pipeline->recent, block->frame_count);
        }
        pthread_mutex_unlock(&pipeline->mutex);
    }
    listener_send_strikes(listener);
    int64_t now_ns = clock_monotonic_ns();
    if (now_ns >= listener->level_due_ns) {
        listener->level_due_ns = now_ns + LEVEL_NS;
        publish_level(listener);
    }
    if (listener->is_live && now_ns >= listener->forming_due_ns)
        look_for_forming(listener, now_ns);
}

/* --- the loop --- */

static void take_event(struct listener *listener, const struct input_block *block)
{
    switch (block->event) {
    case INPUT_NOTHING:
        break;
    case INPUT_FRAMES:
        take_frames(listener, block);
        break;
    case INPUT_GAP:
        push_gap(listener, block->lost_frames);
        listener_set_state(listener, INPUT_LISTENING, NULL);
        listener_tell_input(listener, false,
                            (int64_t)((double)block->lost_frames / listener->rate_hz * 1e3));
        break;
    case INPUT_GONE:
        listener_finish(listener);
        listener_set_state(listener, INPUT_LOST, block->text);
        listener_tell_input(listener, false, 0);
        break;
    case INPUT_BACK:
        push_gap(listener, block->lost_frames);
        listener_set_state(listener, INPUT_LISTENING, NULL);
        listener_tell_input(listener, false,
                            (int64_t)((double)block->lost_frames / listener->rate_hz * 1e3));
        break;
    case INPUT_ENDED:
        listener_close_input(listener, true);
        break;
    }
}

static void listen_once(struct listener *listener)
{
    struct input_block block;
    struct error err;
    if (input_read(listener->input, READ_MS, &block, &err)) {
        take_event(listener, &block);
        return;
    }
    pipeline_tell(listener->pipeline, "input", "The input cannot be read further: %s", err.text);
    listener_close_input(listener, true);
    pthread_mutex_lock(&listener->pipeline->mutex);
    snprintf(listener->pipeline->input.text, sizeof listener->pipeline->input.text, "%s", err.text);
    pthread_mutex_unlock(&listener->pipeline->mutex);
}

void *listener_run(void *user)
{
    struct pipeline *pipeline = user;
    struct listener *listener = pipeline->listener;
    while (!pipeline_is_stopping(pipeline)) {
        pthread_mutex_lock(&pipeline->mutex);
        pipeline->progress++;
        pthread_mutex_unlock(&pipeline->mutex);
        int64_t deadline_ns =
            listener->input != NULL ? 0 : clock_monotonic_ns() + CLOCK_NS_PER_S / 5;
        struct message *command = queue_take(pipeline->commands, deadline_ns);
        if (command != NULL) {
            listener_do_job(listener, command->job);
            command->job = NULL;
            message_destroy(command);
        }
        if (listener->input != NULL)
            listen_once(listener);
    }
    listener_close_input(listener, false);
    queue_close(pipeline->commands);
    for (struct message *message = queue_take(pipeline->commands, 0); message != NULL;
         message = queue_take(pipeline->commands, 0))
        message_refuse(message, ERROR_DEVICE, "Wane is closing down: try again in a moment");
    queue_close(pipeline->fits);
    return NULL;
}
