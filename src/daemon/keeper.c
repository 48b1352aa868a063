/* The keeper: the one writer of the log. One transaction for whatever has queued up; a strike is
 * announced once it is committed, never before. */
#include "keeper.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define WAITING_MAX    32 /* strikes that may wait for a log that takes nothing */
#define WAITING_NS     (5 * CLOCK_NS_PER_S)
#define RETRY_NS       CLOCK_NS_PER_S
#define PRUNE_NS       (60 * CLOCK_NS_PER_S)
#define MS_PER_DAY     86400e3
#define BYTES_PER_MEGA 1e6

/* --- opening --- */

bool keeper_path(const struct pipeline *pipeline, bool is_simulated, char *out, size_t out_size,
                 struct error *err)
{
    if (!pipeline->log_is_given)
        return log_default_path(is_simulated, out, out_size, err);
    snprintf(out, out_size, "%s", pipeline->options.log_path);
    return true;
}

static struct log_writer *open_writer(struct pipeline *pipeline, const char *path,
                                      struct log_opening *out_opening, struct error *err)
{
    const struct log_options options = {.rejected_waves_per_hour =
                                            pipeline->options.rejected_waves_per_hour >= 1
                                                ? (int)pipeline->options.rejected_waves_per_hour
                                                : -1};
    return log_writer_open(path, &options, clock_utc_ms(), out_opening, err);
}

static void set_log(struct pipeline *pipeline, const char *path, const struct log_counts *counts)
{
    snprintf(pipeline->log_path, sizeof pipeline->log_path, "%s", path);
    pipeline->counts = *counts;
    pipeline->spilled = (uint64_t)counts->spilled;
    pipeline->series = 0;
}

static void set_judge(struct keeper *keeper)
{
    const struct log_judge judge = {keeper_write_judgement, keeper};
    log_writer_set_judge(keeper->writer, &judge);
}

bool keeper_open(struct pipeline *pipeline, const char *path, struct error *err)
{
    struct log_opening opening = {0};
    struct log_counts counts = {0};
    struct keeper *keeper = calloc(1, sizeof *keeper);
    if (keeper == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    keeper->pipeline = pipeline;
    pipeline->keeper = keeper;
    keeper->writer = open_writer(pipeline, path, &opening, err);
    if (keeper->writer == NULL)
        return false;
    set_judge(keeper);
    memcpy(pipeline->notice, opening.notice, sizeof pipeline->notice);
    keeper->reader = log_reader_open(path, err);
    if (keeper->reader == NULL || !log_counts(keeper->reader, &counts, err))
        return false;
    set_log(pipeline, path, &counts);
    return true;
}

void keeper_close(struct keeper *keeper)
{
    if (keeper == NULL)
        return;
    tally_done(&keeper->tally);
    log_reader_close(keeper->reader);
    log_writer_close(keeper->writer);
    free(keeper);
}

/* --- telling --- */

void keeper_refresh_counts(struct keeper *keeper)
{
    struct log_counts counts;
    struct error err;
    if (!log_counts(keeper->reader, &counts, &err))
        return;
    pthread_mutex_lock(&keeper->pipeline->mutex);
    keeper->pipeline->counts = counts;
    pthread_mutex_unlock(&keeper->pipeline->mutex);
}

static void publish_strike(struct keeper *keeper, int64_t id, bool is_new)
{
    struct text text = {0};
    struct error err;
    if (log_read_strike_json(keeper->reader, id, &text, NULL, &err) && !text.failed) {
        if (is_new)
            serve_publish_strike(keeper->pipeline->server, id, text.data);
        else
            serve_publish(keeper->pipeline->server, "changed", text.data);
    }
    text_done(&text);
}

static void set_failing(struct keeper *keeper, bool is_failing, const char *why)
{
    struct pipeline *pipeline = keeper->pipeline;
    bool is_news = keeper->is_failing != is_failing;
    keeper->is_failing = is_failing;
    pthread_mutex_lock(&pipeline->mutex);
    pipeline->is_log_full = is_failing;
    snprintf(pipeline->log_text, sizeof pipeline->log_text, "%s", why);
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_news && is_failing)
        pipeline_tell(pipeline, "log", "The log takes nothing: %s", why);
    else if (is_news)
        pipeline_tell(pipeline, "log", "The log keeps strikes again");
}

/* --- strikes --- */

static void fill_context(const struct keeper *keeper, const struct message *message,
                         struct log_context *out)
{
    struct pipeline *pipeline = keeper->pipeline;
    const struct origin *origin = &message->origin;
    *out = (struct log_context){
        .time_ms = message->kind == MESSAGE_SPILL
                       ? origin->trigger_ms
                       : view_onset_ms(message->strike, &message->reading, origin),
        .clock_synced = origin->clock_synced,
        .closed_ms = origin->closed_ms,
        .strike_number = origin->strike_number,
        .keep_samples = true,
    };
    memcpy(out->input, origin->input, sizeof out->input);
    memcpy(out->source, origin->source, sizeof out->source);
    memcpy(out->settings, message->settings, sizeof out->settings);
    snprintf(out->version, sizeof out->version, "%s", WANE_VERSION);
    pthread_mutex_lock(&pipeline->mutex);
    out->series = pipeline->series;
    if (pipeline->series != 0) {
        memcpy(out->part, pipeline->series_now.part, sizeof out->part);
        memcpy(out->specimen, pipeline->series_now.specimen, sizeof out->specimen);
    }
    pthread_mutex_unlock(&pipeline->mutex);
}

static void drop_first(struct keeper *keeper, size_t count)
{
    for (size_t i = 0; i < count; i++)
        message_destroy(keeper->batch[i]);
    keeper->count -= count;
    for (size_t i = 0; i < keeper->count; i++)
        keeper->batch[i] = keeper->batch[i + count];
}

static bool append_strikes(struct keeper *keeper, size_t count, struct error *err)
{
    struct log_entry *entries = calloc(count, sizeof *entries);
    int64_t ids[BATCH_MAX];
    if (entries == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    keeper_label_batch(keeper, count);
    for (size_t i = 0; i < count; i++) {
        entries[i].strike = keeper->batch[i]->strike;
        entries[i].reading = &keeper->batch[i]->reading;
        entries[i].spill_key = keeper->batch[i]->spill_key;
        fill_context(keeper, keeper->batch[i], &entries[i].context);
    }
    bool is_kept = log_append(keeper->writer, entries, count, ids, err);
    int64_t series = entries[0].context.series;
    keeper->judge = NULL;
    free(entries);
    if (!is_kept)
        return false;
    drop_first(keeper, count);
    keeper_refresh_counts(keeper);
    for (size_t i = 0; i < count; i++)
        publish_strike(keeper, ids[i], true);
    keeper->strike_ns = clock_monotonic_ns();
    keeper->is_silence_told = false;
    keeper_tell_series(keeper, series);
    return true;
}

static bool append_spilled(struct keeper *keeper, struct error *err)
{
    struct log_context context;
    int64_t key = 0;
    fill_context(keeper, keeper->batch[0], &context);
    if (!log_spill(keeper->writer, keeper->batch[0]->strike, &context, &key, err))
        return false;
    drop_first(keeper, 1);
    return true;
}

/* The oldest strike is heard but not kept; whoever taps sees it all the same. */
static void give_up_first(struct keeper *keeper)
{
    struct pipeline *pipeline = keeper->pipeline;
    const struct message *message = keeper->batch[0];
    struct text text = {0};
    pthread_mutex_lock(&pipeline->mutex);
    if (pipeline->unkept++ == 0)
        pipeline->unkept_since_ms = clock_utc_ms();
    if (message->kind == MESSAGE_SPILL && pipeline->spilled > 0)
        pipeline->spilled--;
    pthread_cond_broadcast(&pipeline->changed);
    pthread_mutex_unlock(&pipeline->mutex);
    if (message->kind == MESSAGE_STRIKE) {
        view_write_strike(&text, message->strike, &message->reading, &message->origin, (double)NAN);
        if (text.data != NULL && !text.failed)
            serve_publish(pipeline->server, "unkept", text.data);
        text_done(&text);
    }
    drop_first(keeper, 1);
}

static void give_up_old(struct keeper *keeper, int64_t now_ns)
{
    while (keeper->count > 0 &&
           (keeper->count > WAITING_MAX || now_ns - keeper->batch[0]->queued_ns > WAITING_NS))
        give_up_first(keeper);
}

/* How many strikes stand at the head of the batch, less than the next that goes to the spill
 * table. */
static size_t count_run(const struct keeper *keeper)
{
    size_t run = 0;
    while (run < keeper->count && keeper->batch[run]->kind == MESSAGE_STRIKE)
        run++;
    return run;
}

/* Commits all that waits, in order. A strike that the log refuses for what it is (not for want of
 * room) must not keep the others waiting: they go one at a time then. */
static void commit(struct keeper *keeper)
{
    struct error err;
    size_t limit = BATCH_MAX;
    while (keeper->count > 0) {
        size_t run = count_run(keeper);
        run = run < limit ? run : limit;
        bool is_kept = run > 0 ? append_strikes(keeper, run, &err) : append_spilled(keeper, &err);
        if (is_kept) {
            set_failing(keeper, false, "");
            continue;
        }
        bool is_storage = err.kind == ERROR_STORAGE || err.kind == ERROR_MEMORY;
        if (is_storage) {
            set_failing(keeper, true, err.text);
            keeper->retry_ns = clock_monotonic_ns() + RETRY_NS;
            give_up_old(keeper, clock_monotonic_ns());
            return;
        }
        if (run > 1) {
            limit = 1;
            continue;
        }
        pipeline_tell(keeper->pipeline, "log", "A strike could not be kept: %s", err.text);
        give_up_first(keeper);
    }
}

/* --- the input's changes, and another log --- */

static void take_input(struct keeper *keeper, const struct message *message)
{
    struct pipeline *pipeline = keeper->pipeline;
    const struct input_view *view = message->view;
    struct log_series series = {0};
    struct error err;
    char name[LOG_NAME_MAX];
    int64_t id = 0;
    snprintf(name, sizeof name, "%.*s", (int)sizeof name - 1, view->info.name);
    keeper->strike_ns = clock_monotonic_ns();
    keeper->is_silence_told = false;
    const char *state = input_state_name(view->is_open ? view->info.state : INPUT_NONE);
    if (!log_input_event(keeper->writer, clock_utc_ms(), name, state, message->gap_ms, &err))
        set_failing(keeper, err.kind == ERROR_STORAGE, err.text);
    if (view->info.state == INPUT_LOST && view->is_open && message->announces) {
        char sentence[500];
        snprintf(sentence, sizeof sentence, "The input %.190s is lost: %s", name, view->text);
        keeper_notice(keeper, "input-lost", sentence, &err);
    }
    if (view->is_open && log_read_open_series(keeper->reader, name, &id, &series, &err))
        keeper_set_series(keeper, id, &series);
    if (!message->announces)
        return;
    if (view->has_ended) {
        pthread_mutex_lock(&pipeline->mutex);
        if (!pipeline->input.is_open)
            pipeline->input.has_ended = true;
        pthread_mutex_unlock(&pipeline->mutex);
    }
    struct text text = {0};
    struct json_writer json = {.text = &text};
    view_write_input(&json, NULL, view);
    if (text.data != NULL && !text.failed)
        serve_publish(pipeline->server, "input", text.data);
    text_done(&text);
}

/* The new log is opened before the old one is closed: when it cannot be, nothing has changed. */
static void switch_log(struct keeper *keeper, const char *path)
{
    struct pipeline *pipeline = keeper->pipeline;
    struct log_opening opening = {0};
    struct log_counts counts = {0};
    struct error err = {0};
    struct log_writer *writer = open_writer(pipeline, path, &opening, &err);
    struct log_reader *reader = writer != NULL ? log_reader_open(path, &err) : NULL;
    bool is_open = reader != NULL && log_counts(reader, &counts, &err);
    if (is_open) {
        struct log_reader *old_reader = keeper->reader;
        struct log_writer *old_writer = keeper->writer;
        keeper->reader = reader;
        keeper->writer = writer;
        set_judge(keeper);
        tally_done(&keeper->tally);
        reader = old_reader;
        writer = old_writer;
    }
    log_reader_close(reader);
    log_writer_close(writer);
    pthread_mutex_lock(&pipeline->mutex);
    if (is_open)
        set_log(pipeline, path, &counts);
    pipeline->switch_error = is_open ? (struct error){0} : err;
    pipeline->log_number++;
    pthread_cond_broadcast(&pipeline->changed);
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_open)
        serve_change_log(pipeline->server, path);
    if (opening.notice[0] != '\0')
        pipeline_tell(pipeline, "log", "%s", opening.notice);
}

/* --- the loop --- */

static void take_message(struct keeper *keeper, struct message *message)
{
    if (message->kind == MESSAGE_STRIKE || message->kind == MESSAGE_SPILL) {
        if (keeper->count == BATCH_MAX)
            give_up_first(keeper);
        keeper->batch[keeper->count++] = message;
        return;
    }
    if (!keeper->is_failing)
        commit(keeper);
    if (message->kind == MESSAGE_JOB) {
        keeper_do_job(keeper, message->job);
        message->job = NULL;
    } else if (message->kind == MESSAGE_REREADING) {
        keeper_replace_reading(keeper, message);
    } else if (message->kind == MESSAGE_INPUT) {
        take_input(keeper, message);
    } else if (message->kind == MESSAGE_SWITCH_LOG) {
        while (keeper->count > 0)
            give_up_first(keeper); /* the old log takes nothing, and is left now */
        switch_log(keeper, message->path);
    }
    message_destroy(message);
}

static void prune(struct keeper *keeper)
{
    const struct options *options = &keeper->pipeline->options;
    int64_t now_ms = clock_utc_ms();
    struct log_pruning pruning = {.bytes_max = (int64_t)(options->log_megabytes * BYTES_PER_MEGA)};
    struct error err;
    bool has_more = false;
    if (options->samples_days > 0)
        pruning.samples_before_ms = now_ms - (int64_t)(options->samples_days * MS_PER_DAY);
    if (options->strikes_days > 0)
        pruning.strikes_before_ms = now_ms - (int64_t)(options->strikes_days * MS_PER_DAY);
    if (!log_prune_step(keeper->writer, &pruning, &has_more, &err))
        pipeline_tell(keeper->pipeline, "log", "Old strikes cannot be taken out: %s", err.text);
    keeper->prune_ns = clock_monotonic_ns() + (has_more ? 0 : PRUNE_NS);
}

/* Nothing waits to be kept, but the last try failed: whether there is room again is seen by writing
 * something. */
static void probe(struct keeper *keeper)
{
    struct error err;
    if (log_notice(keeper->writer, clock_utc_ms(), "log", "The log keeps strikes again", &err))
        set_failing(keeper, false, "");
}

static void rest(struct keeper *keeper)
{
    if (keeper->is_failing)
        probe(keeper);
    if (clock_monotonic_ns() >= keeper->prune_ns)
        prune(keeper);
    else
        (void)log_idle_step(keeper->writer);
    keeper_refresh_counts(keeper);
    keeper_look_around(keeper);
}

static int64_t next_deadline(const struct keeper *keeper)
{
    if (keeper->is_failing && keeper->count > 0)
        return keeper->retry_ns;
    return keeper->count > 0 ? 0 : clock_monotonic_ns() + CLOCK_NS_PER_S;
}

static void keep(struct keeper *keeper)
{
    struct queue *writes = keeper->pipeline->writes;
    while (!queue_is_finished(writes)) {
        struct message *message = queue_take(writes, next_deadline(keeper));
        if (message != NULL)
            take_message(keeper, message);
        else if (keeper->count == 0)
            rest(keeper);
        bool is_due = !keeper->is_failing || clock_monotonic_ns() >= keeper->retry_ns;
        bool is_batch_whole = message == NULL || keeper->count == BATCH_MAX;
        if (keeper->count > 0 && is_due && (is_batch_whole || queue_count(writes) == 0))
            commit(keeper);
    }
    commit(keeper);
    while (keeper->count > 0)
        give_up_first(keeper);
}

void *keeper_run(void *user)
{
    struct pipeline *pipeline = user;
    keep(pipeline->keeper);
    return NULL;
}
