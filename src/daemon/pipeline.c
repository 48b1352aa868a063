/* Every thread and queue of the daemon.
 *
 *            commands (8)                                 [pages, programs]
 *      .--<-- choose input, trigger -----------<---------------.  ^
 *      v                                                       |  | HTTP, events
 *  LISTENER --> fits (64) --> FITTER --> writes (128) --> KEEPER  |
 *  input,        strikes,      reads     readings,        log  |  |
 *  detectors     forming,      strikes   spilled strikes,   |  |  |
 *      |         rereads --<---in order  changes ---<-------|--'  |
 *      |                         |                          |     |
 *      | level                   | forming                  v     |
 *      '-------------------------'-----------------------> SERVE (MHD's own thread)
 *      |                                                    ^  |
 *      '- writes: strikes that fits are behind with         |  v
 *         (unread, to the log's spill table; the         plots (32) --> PLOTTER
 *         fitter takes them from there in turn)          errands (8) --> ERRANDS
 *
 * - The listener never waits while its input is live: a full queue means spilling. Recordings that
 *   are played fast wait instead.
 * - A strike is announced by the keeper once it is committed. Ids are given there, in the order of
 *   the queue, which is the order of the onsets.
 * - Level and forming readings keep only the newest.
 * - What has to be in order goes through the same queues: a change of input, a change of log.
 * - Shutdown runs in the order of the data: the listener closes the strike at hand and `fits`, the
 *   fitter drains it and closes `writes`, the keeper commits and ends; then log, then server.
 * - One mutex guards what /state tells. It is held for copies only, and never while waiting for a
 *   queue. Taken before the server's own mutexes, never after. */
#include "pipeline.h"
#include "inner.h"
#include "recent.h"
#include "serve/door.h"

#include <fftw3.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define COMMANDS_MAX 8
#define FITS_MAX     64
#define WRITES_MAX   128
#define PLOTS_MAX    32
#define ERRANDS_MAX  8
#define STOP_NS      (CLOCK_NS_PER_S * 14 / 10)
/* No fit begins after STOP_FITS_NS, so fitter and keeper end soon after; on a machine so slow that
 * they do not, the strike at hand is worth more than two seconds. */
#define STOP_DATA_NS (8 * CLOCK_NS_PER_S)

bool pipeline_is_stopping(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    bool is_stopping = pipeline->is_stopping;
    pthread_mutex_unlock(&pipeline->mutex);
    return is_stopping;
}

void pipeline_tell(struct pipeline *pipeline, const char *kind, const char *format, ...)
{
    char sentence[400];
    struct text text = {0};
    struct json_writer json = {.text = &text};
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(sentence, sizeof sentence, format, arguments);
    va_end(arguments);
    json_open_object(&json, NULL);
    json_string(&json, "kind", kind);
    json_string(&json, "text", sentence);
    json_close_object(&json);
    if (text.data != NULL && !text.failed && pipeline->server != NULL)
        serve_publish(pipeline->server, "notice", text.data);
    text_done(&text);
    (void)fprintf(stderr, "waned: %s\n", sentence);
}

static bool send_job(struct queue *queue, struct serve_job *job)
{
    struct error busy = {ERROR_DEVICE, "Wane is busy with earlier requests: try again in a moment"};
    struct message *message = message_create(MESSAGE_JOB);
    if (message != NULL) {
        message->job = job;
        if (queue_try_put(queue, message))
            return true;
        message->job = NULL;
        message_destroy(message);
    }
    serve_refuse(job, &busy);
    return true;
}

/* To whom each call goes. HTTP thread. */
static bool take_job(void *user, struct serve_job *job)
{
    struct pipeline *pipeline = user;
    switch (job->call) {
    case SERVE_PUT_INPUT:
    case SERVE_PUT_TRIGGER:
        return send_job(pipeline->commands, job);
    case SERVE_REREAD:
        return send_job(pipeline->fits, job);
    case SERVE_PATCH_STRIKE:
    case SERVE_OPEN_SERIES:
    case SERVE_PATCH_SERIES:
    case SERVE_PUT_PART:
    case SERVE_ADD_MEASUREMENT:
        return send_job(pipeline->writes, job);
    case SERVE_PLOT:
    case SERVE_WAVE:
    case SERVE_RECENT:
    case SERVE_REPORT:
    case SERVE_REPORT_STRIKE:
        return send_job(pipeline->plots, job);
    case SERVE_LIST_INPUTS:
    case SERVE_READ_RECORDING:
        return send_job(pipeline->errands, job);
    }
    return false;
}

/* --- starting --- */

static bool create_queues(struct pipeline *pipeline, struct error *err)
{
    pipeline->commands = queue_create(COMMANDS_MAX, message_destroy);
    pipeline->fits = queue_create(FITS_MAX, message_destroy);
    pipeline->writes = queue_create(WRITES_MAX, message_destroy);
    pipeline->plots = queue_create(PLOTS_MAX, message_destroy);
    pipeline->errands = queue_create(ERRANDS_MAX, message_destroy);
    if (pipeline->commands == NULL || pipeline->fits == NULL || pipeline->writes == NULL ||
        pipeline->plots == NULL || pipeline->errands == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    return true;
}

/* Sheets beside the log come before those that came with the program. */
static void set_shelf(struct pipeline *pipeline, const struct pipeline_places *places)
{
    char(*folders)[LOG_PATH_MAX] = pipeline->shelf.folders;
    const char *slash = strrchr(pipeline->log_path, '/');
    int length = slash != NULL ? (int)(slash - pipeline->log_path) : 0;
    if (length < LOG_PATH_MAX - 8)
        snprintf(folders[0], LOG_PATH_MAX, "%.*s/parts", slash != NULL ? length : 1,
                 slash != NULL ? pipeline->log_path : ".");
    if (places->parts_dir != NULL)
        snprintf(folders[1], LOG_PATH_MAX, "%s", places->parts_dir);
}

static void tell_journal(void *user, const char *sentence)
{
    (void)user;
    (void)fprintf(stderr, "waned: %s\n", sentence);
}

static bool start_server(struct pipeline *pipeline, const struct pipeline_places *places,
                         struct error *err)
{
    const struct options *options = &pipeline->options;
    char state_dir[LOG_PATH_MAX];
    bool has_state = door_default_folder(state_dir, sizeof state_dir, NULL);
    set_shelf(pipeline, places);
    const struct serve_settings settings = {
        .address = pipeline->options.address,
        .port = pipeline->options.port,
        .web_dir = places->web_dir,
        .vendor_dir = places->vendor_dir,
        .log_path = pipeline->log_path,
        .shelf = &pipeline->shelf,
        .version = WANE_VERSION,
        .watchers_max = (unsigned)options->watchers_max,
        .state_dir = has_state ? state_dir : NULL,
        .names = options->names,
        .tls_key = options->tls_key,
        .tls_certificate = options->tls_certificate,
        .code_valid_s = options->invite_valid_s,
    };
    const struct serve_daemon daemon = {
        .user = pipeline,
        .write_state = view_write_state,
        .write_trigger = view_write_trigger,
        .take_job = take_job,
        .write_metrics = view_write_metrics,
        .tell = tell_journal,
    };
    pipeline->server = serve_start(&settings, &daemon, err);
    return pipeline->server != NULL;
}

struct thread_start {
    struct pipeline *pipeline;
    enum pipeline_thread number;
    void *(*run)(void *);
};

/* Says when the thread is finished, so that whoever stops can wait with a deadline. */
static void *run_thread(void *user)
{
    struct thread_start start = *(struct thread_start *)user;
    free(user);
    start.run(start.pipeline);
    pthread_mutex_lock(&start.pipeline->mutex);
    start.pipeline->is_finished[start.number] = true;
    pthread_cond_broadcast(&start.pipeline->changed);
    pthread_mutex_unlock(&start.pipeline->mutex);
    return NULL;
}

static bool start_thread(struct pipeline *pipeline, enum pipeline_thread number,
                         void *(*run)(void *), struct error *err)
{
    struct thread_start *start = malloc(sizeof *start);
    if (start == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    *start = (struct thread_start){pipeline, number, run};
    if (pthread_create(&pipeline->threads[number], NULL, run_thread, start) != 0) {
        free(start);
        return error_set(err, ERROR_MEMORY, "no thread could be started");
    }
    pipeline->has_thread[number] = true;
    return true;
}

static bool start_threads(struct pipeline *pipeline, struct error *err)
{
    return start_thread(pipeline, THREAD_KEEPER, keeper_run, err) &&
           start_thread(pipeline, THREAD_FITTER, fitter_run, err) &&
           start_thread(pipeline, THREAD_PLOTTER, plotter_run, err) &&
           start_thread(pipeline, THREAD_ERRANDS, errands_run, err) &&
           start_thread(pipeline, THREAD_LISTENER, listener_run, err);
}

static bool start_parts(struct pipeline *pipeline, const struct pipeline_places *places,
                        struct error *err)
{
    char path[LOG_PATH_MAX];
    bool is_simulated = strcmp(pipeline->options.input, "simulated") == 0;
    if (!create_queues(pipeline, err) ||
        !keeper_path(pipeline, is_simulated, path, sizeof path, err) ||
        !keeper_open(pipeline, path, err) || !start_server(pipeline, places, err))
        return false;
    pipeline->fitter = fitter_create(pipeline, err);
    if (pipeline->fitter == NULL)
        return false;
    pipeline->listener = listener_create(pipeline, err);
    return pipeline->listener != NULL && start_threads(pipeline, err);
}

struct pipeline *pipeline_start(const struct options *options, const struct pipeline_places *places,
                                struct error *err)
{
    struct pipeline *pipeline = calloc(1, sizeof *pipeline);
    if (pipeline == NULL) {
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    /* Detectors and plots are made while the fitter may plan too. */
    fftw_make_planner_thread_safe();
    fftwf_make_planner_thread_safe();
    pipeline->options = *options;
    pipeline->trigger = options->trigger;
    pipeline->log_is_given = options->log_path[0] != '\0';
    pthread_mutex_init(&pipeline->mutex, NULL);
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&pipeline->changed, &attributes);
    pthread_condattr_destroy(&attributes);
    if (start_parts(pipeline, places, err))
        return pipeline;
    pipeline_stop(pipeline);
    return NULL;
}

/* --- running --- */

const char *pipeline_url(const struct pipeline *pipeline)
{
    return serve_url(pipeline->server);
}

const char *pipeline_fingerprint(const struct pipeline *pipeline)
{
    return serve_fingerprint(pipeline->server);
}

const char *pipeline_notice(const struct pipeline *pipeline)
{
    return pipeline->notice[0] != '\0' ? pipeline->notice : NULL;
}

void pipeline_status(struct pipeline *pipeline, char *out, size_t out_size)
{
    pthread_mutex_lock(&pipeline->mutex);
    const struct input_view *view = &pipeline->input;
    snprintf(out, out_size, "%s: %.200s",
             input_state_name(view->is_open ? view->info.state : INPUT_NONE),
             view->info.name[0] != '\0' ? view->info.name : "no input");
    pthread_mutex_unlock(&pipeline->mutex);
}

uint64_t pipeline_progress(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    uint64_t progress = pipeline->progress;
    pthread_mutex_unlock(&pipeline->mutex);
    return progress;
}

void pipeline_tick(struct pipeline *pipeline)
{
    pthread_mutex_lock(&pipeline->mutex);
    bool has_level = pipeline->level_count > 0;
    pthread_mutex_unlock(&pipeline->mutex);
    if (!has_level) {
        struct text text = {0};
        view_write_level(&text, NULL, NULL, 0);
        if (text.data != NULL && !text.failed)
            serve_publish_level(pipeline->server, text.data);
        text_done(&text);
    }
    serve_tick(pipeline->server);
}

/* --- stopping --- */

/* Joins it if it ends before the deadline. */
static bool end_thread(struct pipeline *pipeline, enum pipeline_thread number, int64_t deadline_ns)
{
    struct timespec deadline = {.tv_sec = (time_t)(deadline_ns / CLOCK_NS_PER_S),
                                .tv_nsec = (long)(deadline_ns % CLOCK_NS_PER_S)};
    if (!pipeline->has_thread[number])
        return true;
    pthread_mutex_lock(&pipeline->mutex);
    while (!pipeline->is_finished[number]) {
        if (pthread_cond_timedwait(&pipeline->changed, &pipeline->mutex, &deadline) != 0)
            break;
    }
    bool is_finished = pipeline->is_finished[number];
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_finished)
        pthread_join(pipeline->threads[number], NULL);
    return is_finished;
}

static void close_queue(struct queue *queue)
{
    if (queue != NULL)
        queue_close(queue);
}

/* Jobs that nobody will see to any more are refused, so that their connections wake. */
static void refuse_left(struct queue *queue)
{
    if (queue == NULL)
        return;
    queue_close(queue);
    for (struct message *message = queue_take(queue, 0); message != NULL;
         message = queue_take(queue, 0))
        message_refuse(message, ERROR_DEVICE, "Wane is closing down: try again in a moment");
}

static void free_pipeline(struct pipeline *pipeline)
{
    listener_destroy(pipeline->listener);
    fitter_destroy(pipeline->fitter);
    queue_destroy(pipeline->commands);
    queue_destroy(pipeline->fits);
    queue_destroy(pipeline->writes);
    queue_destroy(pipeline->plots);
    queue_destroy(pipeline->errands);
    strike_destroy(pipeline->forming);
    recent_done(&pipeline->recent);
    pthread_cond_destroy(&pipeline->changed);
    pthread_mutex_destroy(&pipeline->mutex);
    free(pipeline);
}

void pipeline_stop(struct pipeline *pipeline)
{
    int64_t now_ns = clock_monotonic_ns();
    int64_t deadline_ns = now_ns + STOP_NS, data_deadline_ns = now_ns + STOP_DATA_NS;
    if (pipeline->server != NULL)
        serve_quiet(pipeline->server);
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->is_stopping = true;
    pipeline->stop_fits_ns = now_ns + STOP_FITS_NS;
    pthread_cond_broadcast(&pipeline->changed);
    pthread_mutex_unlock(&pipeline->mutex);
    close_queue(pipeline->plots);
    close_queue(pipeline->errands);
    /* Data order. Each thread closes the queue of the next; one that never started, or that hangs
     * in a driver, cannot. */
    bool are_ended = end_thread(pipeline, THREAD_LISTENER, deadline_ns);
    close_queue(pipeline->fits);
    are_ended = end_thread(pipeline, THREAD_FITTER, data_deadline_ns) && are_ended;
    close_queue(pipeline->writes);
    bool is_kept = end_thread(pipeline, THREAD_KEEPER, data_deadline_ns);
    if (is_kept)
        keeper_close(pipeline->keeper);
    are_ended = end_thread(pipeline, THREAD_PLOTTER, deadline_ns) && are_ended && is_kept;
    are_ended = end_thread(pipeline, THREAD_ERRANDS, deadline_ns) && are_ended;
    refuse_left(pipeline->commands);
    refuse_left(pipeline->fits);
    refuse_left(pipeline->writes);
    refuse_left(pipeline->plots);
    refuse_left(pipeline->errands);
    are_ended = serve_stop(pipeline->server) && are_ended;
    /* A thread that hangs in a driver or in a slow read goes with the process. */
    if (are_ended)
        free_pipeline(pipeline);
}
