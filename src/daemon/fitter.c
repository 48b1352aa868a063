/* The fitter: reads strikes in the order of their onsets, tells each what still rings of the one
 * before, and in between reads what is still forming. */
#include "inner.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define WORKSPACE_FRAMES ((size_t)10 * 48000) /* it grows by itself for longer strikes */
#define LOOK_NS          (CLOCK_NS_PER_S / 10)

struct fitter {
    struct pipeline *pipeline;
    struct fit_workspace *workspace;
    struct log_reader *log;
    uint64_t log_number;
    int64_t spill_key; /* the last spilled strike that was read */
    /* The strike before, of each channel: its samples are not needed to carry its modes on. */
    struct {
        bool is_known;
        uint64_t epoch;
        struct strike strike;
        struct reading reading;
    } before[INPUT_CHANNELS_MAX];
};

/* The log may hold anything. */
static size_t slot_of(const struct strike *strike)
{
    bool is_right = strike->channel >= 1 && strike->channel <= INPUT_CHANNELS_MAX;
    return is_right ? (size_t)strike->channel - 1 : 0;
}

static void carry(const struct fitter *fitter, struct strike *strike, const struct origin *origin)
{
    size_t at = slot_of(strike);
    if (fitter->before[at].is_known && fitter->before[at].epoch == origin->epoch)
        fit_carry(&fitter->before[at].strike, &fitter->before[at].reading, strike);
}

/* A strike that cannot be read is told of, never dropped. */
static void fit(struct fitter *fitter, const struct strike *strike, struct reading *out)
{
    struct error err;
    int64_t begin_ns = clock_monotonic_ns();
    if (!fit_strike(fitter->workspace, strike, &fitter->pipeline->options.fit, out, &err)) {
        reading_init(out);
        pipeline_tell(fitter->pipeline, "fit", "A strike could not be read: %s", err.text);
    }
    out->fit_ms = (double)(clock_monotonic_ns() - begin_ns) / 1e6;
}

static void read_strike(struct fitter *fitter, struct message *message)
{
    struct pipeline *pipeline = fitter->pipeline;
    struct strike *strike = message->strike;
    size_t at = slot_of(strike);
    carry(fitter, strike, &message->origin);
    fit(fitter, strike, &message->reading);
    fitter->before[at].is_known = true;
    fitter->before[at].epoch = message->origin.epoch;
    fitter->before[at].strike = *strike;
    fitter->before[at].strike.samples = NULL;
    fitter->before[at].reading = message->reading;
    fit_settings_describe(&pipeline->options.fit, message->settings, sizeof message->settings);
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->strikes_read++;
    pipeline->last_fit_ms = message->reading.fit_ms;
    pthread_mutex_unlock(&pipeline->mutex);
}

static void send_to_keeper(struct fitter *fitter, struct message *message)
{
    if (!queue_put(fitter->pipeline->writes, message))
        message_refuse(message, ERROR_DEVICE, "Wane is closing down: try again in a moment");
}

static bool is_too_late(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    bool is_late = pipeline->is_stopping && clock_monotonic_ns() > pipeline->stop_fits_ns;
    pthread_mutex_unlock(&pipeline->mutex);
    return is_late;
}

static void take_strike(struct fitter *fitter, struct message *message)
{
    struct pipeline *pipeline = fitter->pipeline;
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->queued_bytes -= message->strike->frame_count * sizeof *message->strike->samples;
    pthread_mutex_unlock(&pipeline->mutex);
    /* Closing down and still much to read: the next start does it. */
    if (is_too_late(pipeline)) {
        message->kind = MESSAGE_SPILL;
        pthread_mutex_lock(&pipeline->mutex);
        pipeline->spilled++;
        pthread_mutex_unlock(&pipeline->mutex);
    } else {
        read_strike(fitter, message);
    }
    send_to_keeper(fitter, message);
}

/* --- what is forming --- */

static void take_forming(struct fitter *fitter)
{
    struct pipeline *pipeline = fitter->pipeline;
    struct reading reading;
    struct text text = {0};
    pthread_mutex_lock(&pipeline->mutex);
    struct strike *strike = pipeline->forming;
    struct origin origin = pipeline->forming_origin;
    uint64_t number = pipeline->forming_number;
    pipeline->forming = NULL;
    pipeline->is_forming_queued = false;
    pthread_mutex_unlock(&pipeline->mutex);
    if (strike == NULL)
        return;
    int64_t begin_ns = clock_monotonic_ns();
    carry(fitter, strike, &origin);
    fit(fitter, strike, &reading);
    double rang_s = ((double)strike->frame_count - (double)strike->trigger) / strike->rate_hz;
    view_write_strike(&text, strike, &reading, &origin, rang_s);
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->forming_cost_ns = clock_monotonic_ns() - begin_ns;
    if (number == pipeline->forming_number && text.data != NULL && !text.failed)
        serve_publish_forming(pipeline->server, text.data);
    pthread_mutex_unlock(&pipeline->mutex);
    text_done(&text);
    strike_destroy(strike);
}

/* --- strikes that were put aside unread --- */

/* The log of now, on a connection of our own. */
static bool follow_log(struct fitter *fitter)
{
    struct pipeline *pipeline = fitter->pipeline;
    struct error err;
    char path[LOG_PATH_MAX];
    pthread_mutex_lock(&pipeline->mutex);
    uint64_t number = pipeline->log_number;
    memcpy(path, pipeline->log_path, sizeof path);
    pthread_mutex_unlock(&pipeline->mutex);
    if (fitter->log != NULL && number == fitter->log_number)
        return true;
    log_reader_close(fitter->log);
    fitter->log = log_reader_open(path, &err);
    fitter->log_number = number;
    fitter->spill_key = 0;
    if (fitter->log == NULL)
        pipeline_tell(pipeline, "log", "The log cannot be read: %s", err.text);
    return fitter->log != NULL;
}

static void fill_from_log(const struct log_context *context, struct origin *out)
{
    *out = (struct origin){.strike_number = context->strike_number,
                           .trigger_ms = context->time_ms,
                           .closed_ms = context->closed_ms,
                           .clock_synced = context->clock_synced};
    memcpy(out->input, context->input, sizeof out->input);
    memcpy(out->source, context->source, sizeof out->source);
}

/* The oldest strike that waits on the disk; false when none is there yet. */
static bool take_spilled(struct fitter *fitter)
{
    struct pipeline *pipeline = fitter->pipeline;
    struct log_stored stored = {0};
    struct error err;
    int64_t key = 0;
    if (!follow_log(fitter) ||
        !log_read_spilled(fitter->log, fitter->spill_key, &key, &stored, &err) || key == 0)
        return false;
    struct message *message = message_create(MESSAGE_STRIKE);
    if (message == NULL) {
        log_stored_done(&stored);
        return false;
    }
    message->strike = stored.strike;
    stored.strike = NULL;
    message->spill_key = key;
    fill_from_log(&stored.context, &message->origin);
    log_stored_done(&stored);
    read_strike(fitter, message);
    send_to_keeper(fitter, message);
    fitter->spill_key = key;
    pthread_mutex_lock(&pipeline->mutex);
    if (pipeline->spilled > 0)
        pipeline->spilled--;
    bool is_last = pipeline->spilled == 0;
    pthread_cond_broadcast(&pipeline->changed);
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_last)
        pipeline_tell(pipeline, "read", "All strikes that waited are read");
    return true;
}

static bool has_spilled(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    bool has = pipeline->spilled > 0;
    pthread_mutex_unlock(&pipeline->mutex);
    return has;
}

/* --- rereading --- */

static void reread(struct fitter *fitter, struct message *message)
{
    struct log_stored stored = {0};
    struct error err = {ERROR_STORAGE, "the log cannot be read"};
    struct serve_job *job = message->job;
    bool is_read = follow_log(fitter) && log_read_strike(fitter->log, job->id, &stored, &err);
    if (is_read && !stored.has_samples) {
        error_set(&err, ERROR_NOT_FOUND, "the samples of strike %lld were not kept",
                  (long long)job->id);
        is_read = false;
    }
    if (is_read)
        is_read = fit_strike(fitter->workspace, stored.strike, &job->fit, &message->reading, &err);
    log_stored_done(&stored);
    if (!is_read) {
        message->job = NULL;
        serve_refuse(job, &err);
        message_destroy(message);
        return;
    }
    fit_settings_describe(&job->fit, message->settings, sizeof message->settings);
    message->kind = MESSAGE_REREADING;
    send_to_keeper(fitter, message);
}

/* --- the loop --- */

static void take_message(struct fitter *fitter, struct message *message)
{
    switch (message->kind) {
    case MESSAGE_STRIKE:
        take_strike(fitter, message);
        break;
    case MESSAGE_FORMING:
        message_destroy(message);
        take_forming(fitter);
        break;
    case MESSAGE_JOB:
        reread(fitter, message);
        break;
    case MESSAGE_SPILL:
    case MESSAGE_REREADING:
    case MESSAGE_INPUT:
    case MESSAGE_SWITCH_LOG:
        send_to_keeper(fitter, message);
        break;
    }
}

struct fitter *fitter_create(struct pipeline *pipeline, struct error *err)
{
    struct fitter *fitter = calloc(1, sizeof *fitter);
    if (fitter == NULL) {
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    fitter->pipeline = pipeline;
    fitter->workspace = fit_workspace_create(WORKSPACE_FRAMES, err);
    if (fitter->workspace != NULL)
        return fitter;
    free(fitter);
    return NULL;
}

void fitter_destroy(struct fitter *fitter)
{
    if (fitter == NULL)
        return;
    fit_workspace_destroy(fitter->workspace);
    log_reader_close(fitter->log);
    free(fitter);
}

void *fitter_run(void *user)
{
    struct pipeline *pipeline = user;
    struct fitter *fitter = pipeline->fitter;
    while (!queue_is_finished(pipeline->fits)) {
        bool is_behind = has_spilled(pipeline);
        struct message *message = queue_take(pipeline->fits, is_behind ? 0 : INT64_MAX);
        if (message == NULL && is_behind && !is_too_late(pipeline) && take_spilled(fitter))
            continue;
        if (message == NULL)
            message = queue_take(pipeline->fits, clock_monotonic_ns() + LOOK_NS);
        if (message != NULL)
            take_message(fitter, message);
    }
    queue_close(pipeline->writes);
    return NULL;
}
