/* Opening, closing and changing the input, and what is told of it. */
#include "listener.h"
#include "recent.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define BLOCK_FRAMES_MAX 65536 /* as input.h promises */

/* --- telling of the input --- */

void listener_tell_input(struct listener *listener, bool announces, int64_t gap_ms)
{
    struct pipeline *pipeline = listener->pipeline;
    struct message *message = message_create(MESSAGE_INPUT);
    struct input_view *view = malloc(sizeof *view);
    if (message == NULL || view == NULL) {
        message_destroy(message);
        free(view);
        return;
    }
    pthread_mutex_lock(&pipeline->mutex);
    *view = pipeline->input;
    if (view->has_ended)
        pipeline->input.has_ended = false; /* the keeper says so when all strikes are kept */
    pthread_mutex_unlock(&pipeline->mutex);
    message->view = view;
    message->announces = announces;
    message->gap_ms = gap_ms;
    message->origin.epoch = listener->epoch;
    if (!announces) {
        struct text text = {0};
        struct json_writer json = {.text = &text};
        view_write_input(&json, NULL, view);
        if (text.data != NULL && !text.failed)
            serve_publish(pipeline->server, "input", text.data);
        text_done(&text);
    }
    if (!queue_put(pipeline->fits, message))
        message_destroy(message);
}

void listener_set_state(struct listener *listener, enum input_state state, const char *text)
{
    struct pipeline *pipeline = listener->pipeline;
    pthread_mutex_lock(&pipeline->mutex);
    if (listener->input != NULL)
        pipeline->input.info = *input_get_info(listener->input);
    pipeline->input.info.state = state;
    pipeline->input.is_open = listener->input != NULL;
    pipeline->input.since_ms = clock_utc_ms();
    snprintf(pipeline->input.text, sizeof pipeline->input.text, "%s", text != NULL ? text : "");
    if (state != INPUT_LISTENING)
        pipeline->level_count = 0;
    pthread_mutex_unlock(&pipeline->mutex);
}

/* --- opening and closing --- */

static void destroy_detectors(struct listener *listener)
{
    for (unsigned i = 0; i < listener->count; i++)
        detect_destroy(listener->detectors[i]);
    listener->count = 0;
}

static bool create_detectors(struct listener *listener, unsigned heard, struct error *err)
{
    const struct input_info *info = input_get_info(listener->input);
    struct detect_settings trigger = listener->pipeline->trigger; /* changed by this thread alone */
    heard = heard != 0 ? heard : 1;
    for (int channel = 1; channel <= OPTIONS_CHANNELS_MAX; channel++) {
        if (!(heard & (1u << (channel - 1))))
            continue;
        if (channel > info->channels) {
            destroy_detectors(listener);
            return error_set(err, ERROR_USAGE, "channel %d: %s has %d", channel, info->name,
                             info->channels);
        }
        struct detector *detector = detect_create(&trigger, info->rate_hz, channel, err);
        if (detector == NULL) {
            destroy_detectors(listener);
            return false;
        }
        listener->channel_of[listener->count] = channel;
        listener->detectors[listener->count++] = detector;
    }
    listener->channels_heard = heard;
    return true;
}

/* The strike at hand is closed; the last strikes go on their way. */
void listener_close_input(struct listener *listener, bool has_ended)
{
    struct pipeline *pipeline = listener->pipeline;
    if (listener->input == NULL)
        return;
    listener_finish(listener);
    destroy_detectors(listener);
    struct input_info info = *input_get_info(listener->input);
    input_close(listener->input);
    listener->input = NULL;
    listener_set_state(listener, INPUT_NONE, NULL);
    pthread_mutex_lock(&pipeline->mutex);
    info.state = INPUT_NONE;
    pipeline->input.info = info;
    pipeline->input.has_ended = has_ended;
    pthread_mutex_unlock(&pipeline->mutex);
    listener_tell_input(listener, true, 0);
}

/* Takes over an input that is open: detectors, the last minute, the view. */
static bool begin_input(struct listener *listener, unsigned heard, struct error *err)
{
    struct pipeline *pipeline = listener->pipeline;
    if (!create_detectors(listener, heard, err))
        return false;
    const struct input_info *info = input_get_info(listener->input);
    listener->epoch++;
    listener->rate_hz = info->rate_hz;
    listener->channels = info->channels;
    listener->is_live = listener->choice.pace == INPUT_PACE_LIVE || info->kind == INPUT_CARD;
    listener->strike_number = 0;
    memset(listener->horizons, 0, sizeof listener->horizons);
    listener->opened_ns = clock_monotonic_ns();
    listener->arrived_ns = listener->opened_ns;
    listener->has_anchor = false;
    listener->warning_count = info->warning_count;
    pthread_mutex_lock(&pipeline->mutex);
    if (!recent_begin(&pipeline->recent, listener->count, info->rate_hz))
        snprintf(pipeline->notice, sizeof pipeline->notice, "no memory for the last minute");
    pipeline->input.opened_ms = clock_utc_ms();
    pipeline->input.channels_heard = listener->channels_heard;
    pipeline->input.has_ended = false;
    pthread_mutex_unlock(&pipeline->mutex);
    listener_set_state(listener, info->state, NULL);
    listener_tell_input(listener, true, 0);
    return true;
}

static bool open_input(struct listener *listener, unsigned heard, struct error *err)
{
    listener->input = input_open(&listener->choice, err);
    if (listener->input == NULL)
        return false;
    if (begin_input(listener, heard, err))
        return true;
    input_close(listener->input);
    listener->input = NULL;
    return false;
}

struct listener *listener_create(struct pipeline *pipeline, struct error *err)
{
    const struct options *options = &pipeline->options;
    struct listener *listener = calloc(1, sizeof *listener);
    if (listener != NULL)
        listener->mono = malloc(BLOCK_FRAMES_MAX * sizeof *listener->mono);
    if (listener == NULL || listener->mono == NULL) {
        free(listener);
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    listener->pipeline = pipeline;
    snprintf(listener->name, sizeof listener->name, "%s", options->input);
    listener->choice = (struct input_choice){
        .name = listener->name,
        .rate_hz = options->rate_hz,
        .channels = (int)options->channels,
        .pace = options->is_fast ? INPUT_PACE_FAST : INPUT_PACE_LIVE,
        .seed = (uint64_t)options->seed,
    };
    if (options->input[0] != '\0' && !open_input(listener, options->channels_heard, err)) {
        listener_destroy(listener);
        return NULL;
    }
    return listener;
}

void listener_destroy(struct listener *listener)
{
    if (listener == NULL)
        return;
    destroy_detectors(listener);
    input_close(listener->input);
    for (size_t i = 0; i < listener->held_count; i++)
        strike_destroy(listener->held[i]);
    free(listener->mono);
    free(listener);
}

/* --- what pages ask for --- */

/* The log of invented strikes is another one than that of real ones. Nothing is listened to while
 * the keeper changes over. */
static bool switch_log(struct listener *listener, bool is_simulated, struct error *err)
{
    struct pipeline *pipeline = listener->pipeline;
    char path[LOG_PATH_MAX];
    if (!keeper_path(pipeline, is_simulated, path, sizeof path, err))
        return false;
    pthread_mutex_lock(&pipeline->mutex);
    bool is_same = strcmp(path, pipeline->log_path) == 0;
    uint64_t number = pipeline->log_number;
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_same)
        return true;
    struct message *message = message_create(MESSAGE_SWITCH_LOG);
    if (message != NULL)
        message->path = strdup(path);
    if (message == NULL || message->path == NULL || !queue_put(pipeline->fits, message)) {
        message_destroy(message);
        return error_set(err, ERROR_MEMORY, "out of memory");
    }
    pthread_mutex_lock(&pipeline->mutex);
    while (pipeline->log_number == number && !pipeline->is_stopping)
        pthread_cond_wait(&pipeline->changed, &pipeline->mutex);
    struct error result = pipeline->switch_error;
    if (pipeline->log_number == number)
        error_set(&result, ERROR_STORAGE, "Wane is closing down");
    pthread_mutex_unlock(&pipeline->mutex);
    if (result.kind == ERROR_NONE)
        return true;
    *err = result;
    return false;
}

/* A page may choose a card or the bench, never a file of this machine. */
static bool check_name(const char *name, struct error *err)
{
    static const char *const ends[] = {".wav", ".wave", ".flac", ".aif", ".aiff", ".aifc",
                                       ".caf", ".w64",  ".rf64", ".raw", ".pcm"};
    size_t length = strlen(name);
    bool is_file = strchr(name, '/') != NULL || strcmp(name, "-") == 0 || access(name, F_OK) == 0;
    for (size_t i = 0; i < sizeof ends / sizeof ends[0]; i++) {
        size_t end = strlen(ends[i]);
        is_file = is_file || (length >= end && strcmp(name + length - end, ends[i]) == 0);
    }
    if (is_file)
        return error_set(err, ERROR_USAGE,
                         "name: a sound card or simulated; recordings are sent to "
                         "/api/v1/recordings, or given to waned with --input");
    return true;
}

static void answer_input(struct listener *listener, struct serve_job *job)
{
    struct text text = {0};
    struct json_writer json = {.text = &text};
    pthread_mutex_lock(&listener->pipeline->mutex);
    view_write_input(&json, NULL, &listener->pipeline->input);
    pthread_mutex_unlock(&listener->pipeline->mutex);
    serve_answer(job, 200, NULL, NULL, &text);
}

/* The old input is closed first (it may be the same card); when the new one does not open, the old
 * one is tried again. */
static void change_input(struct listener *listener, struct serve_job *job)
{
    struct error err, ignored;
    struct input_choice old_choice = listener->choice;
    char old_name[INPUT_NAME_MAX];
    unsigned old_heard = listener->channels_heard;
    bool was_open = listener->input != NULL;
    memcpy(old_name, listener->name, sizeof old_name);
    if (!check_name(job->name, &err)) {
        serve_refuse(job, &err);
        return;
    }
    listener_close_input(listener, false);
    bool is_simulated = strcmp(job->name, "simulated") == 0;
    listener->choice = (struct input_choice){.name = listener->name,
                                             .rate_hz = job->rate_hz,
                                             .pace = INPUT_PACE_LIVE,
                                             .seed = old_choice.seed};
    snprintf(listener->name, sizeof listener->name, "%s", job->name);
    if (switch_log(listener, is_simulated, &err) &&
        open_input(listener, job->channels_heard, &err)) {
        answer_input(listener, job);
        return;
    }
    memcpy(listener->name, old_name, sizeof old_name);
    listener->choice = old_choice;
    /* A recording that was going on would begin anew: it stays closed. */
    if (was_open && switch_log(listener, strcmp(old_name, "simulated") == 0, &ignored) &&
        check_name(old_name, &ignored))
        (void)open_input(listener, old_heard, &ignored);
    serve_refuse(job, &err);
}

static void change_trigger(struct listener *listener, struct serve_job *job)
{
    struct pipeline *pipeline = listener->pipeline;
    struct text text = {0};
    struct error err;
    char etag[64];
    view_write_trigger(pipeline, &text, etag, sizeof etag);
    text_clear(&text);
    if (strcmp(job->if_match, etag) != 0 && strcmp(job->if_match, "*") != 0) {
        error_set(&err, ERROR_CONFLICT,
                  "somebody else changed the trigger meanwhile: look at it again, then change it");
        serve_refuse(job, &err);
        text_done(&text);
        return;
    }
    for (unsigned i = 0; i < listener->count; i++) {
        if (!detect_set(listener->detectors[i], &job->trigger, &err)) {
            for (unsigned k = 0; k < i; k++)
                (void)detect_set(listener->detectors[k], &pipeline->trigger, &err);
            serve_refuse(job, &err);
            text_done(&text);
            return;
        }
    }
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->trigger = job->trigger;
    pthread_mutex_unlock(&pipeline->mutex);
    view_write_trigger(pipeline, &text, etag, sizeof etag);
    serve_answer(job, 200, NULL, etag, &text);
}

void listener_do_job(struct listener *listener, struct serve_job *job)
{
    if (job->call == SERVE_PUT_INPUT)
        change_input(listener, job);
    else
        change_trigger(listener, job);
}
