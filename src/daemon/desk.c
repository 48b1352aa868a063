/* Answers that take longer than the HTTP thread may wait: plots, wave files, the last minute
 * (plotter), listing of cards and recordings that were sent (errands). They only read. */
#include "inner.h"
#include "plot.h"
#include "recent.h"

#include "cli/read_recording.h"
#include "wane/json.h"
#include "wane/report.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct desk {
    struct pipeline *pipeline;
    struct log_reader *log;
    uint64_t log_number;
};

static bool follow_log(struct desk *desk, struct error *err)
{
    struct pipeline *pipeline = desk->pipeline;
    char path[LOG_PATH_MAX];
    pthread_mutex_lock(&pipeline->mutex);
    uint64_t number = pipeline->log_number;
    memcpy(path, pipeline->log_path, sizeof path);
    pthread_mutex_unlock(&pipeline->mutex);
    if (desk->log != NULL && number == desk->log_number)
        return true;
    log_reader_close(desk->log);
    desk->log = log_reader_open(path, err);
    desk->log_number = number;
    return desk->log != NULL;
}

static bool answer_plot(struct desk *desk, struct serve_job *job, struct error *err)
{
    struct log_stored stored = {0};
    struct text text = {0};
    if (!follow_log(desk, err) || !log_read_strike(desk->log, job->id, &stored, err))
        return false;
    const struct plot_choice choice = {
        .id = job->id, .width = job->width, .from_s = job->from_s, .to_s = job->to_s};
    bool is_drawn = stored.has_samples
                        ? plot_write(stored.strike, &stored.reading, &choice, &text, err)
                        : error_set(err, ERROR_NOT_FOUND,
                                    "the samples of strike %lld were not kept", (long long)job->id);
    log_stored_done(&stored);
    if (is_drawn)
        serve_answer(job, 200, NULL, NULL, &text);
    text_done(&text);
    return is_drawn;
}

static bool answer_report(struct desk *desk, struct serve_job *job, struct error *err)
{
    const struct report_choice choice = {
        .series = job->call == SERVE_REPORT ? job->id : 0,
        .strike = job->id,
        .version = WANE_VERSION,
        .now_ms = clock_utc_ms(),
    };
    struct text page = {0};
    if (!follow_log(desk, err) ||
        !report_write(desk->log, &desk->pipeline->shelf, &choice, &page, err)) {
        text_done(&page);
        return false;
    }
    serve_answer(job, 200, "text/html; charset=utf-8", NULL, &page);
    return true;
}

/* Takes malloc's bytes over as a text. */
static struct text text_of_bytes(unsigned char *bytes, size_t size)
{
    return (struct text){.data = (char *)bytes, .length = size, .capacity = size};
}

static bool answer_wave(struct desk *desk, struct serve_job *job, struct error *err)
{
    unsigned char *bytes = NULL;
    size_t size = 0;
    if (!follow_log(desk, err) || !log_read_wav(desk->log, job->id, &bytes, &size, err))
        return false;
    struct text text = text_of_bytes(bytes, size);
    serve_answer(job, 200, "audio/wav", NULL, &text);
    return true;
}

static void put_little(unsigned char *at, uint32_t value, unsigned bytes)
{
    for (unsigned i = 0; i < bytes; i++)
        at[i] = (unsigned char)(value >> (8 * i));
}

#define WAV_HEAD_BYTES 58

/* WAVE_FORMAT_IEEE_FLOAT, 32 bits, with its fact chunk (Microsoft, "Multimedia Data Standards
 * Update", 1994: formats other than PCM carry cbSize and a fact chunk). */
static void write_wav_head(unsigned char *head, unsigned channels, uint32_t rate_hz, size_t frames)
{
    uint32_t data_bytes = (uint32_t)(frames * channels * 4);
    memcpy(head, "RIFF....WAVEfmt ", 16);
    put_little(head + 4, WAV_HEAD_BYTES - 8 + data_bytes, 4);
    put_little(head + 16, 18, 4);
    put_little(head + 20, 3, 2);
    put_little(head + 22, channels, 2);
    put_little(head + 24, rate_hz, 4);
    put_little(head + 28, rate_hz * channels * 4, 4);
    put_little(head + 32, channels * 4, 2);
    put_little(head + 34, 32, 2);
    put_little(head + 36, 0, 2);
    memcpy(head + 38, "fact", 4);
    put_little(head + 42, 4, 4);
    put_little(head + 46, (uint32_t)frames, 4);
    memcpy(head + 50, "data", 4);
    put_little(head + 54, data_bytes, 4);
}

/* Samples as little-endian IEEE 754 binary32, in place. */
static void order_bytes(unsigned char *at, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        uint32_t bits;
        memcpy(&bits, at + 4 * i, sizeof bits);
        put_little(at + 4 * i, bits, 4);
    }
}

static bool answer_recent(struct desk *desk, struct serve_job *job, struct error *err)
{
    struct pipeline *pipeline = desk->pipeline;
    unsigned char *bytes = NULL;
    pthread_mutex_lock(&pipeline->mutex);
    const struct recent *recent = &pipeline->recent;
    unsigned channels = recent->channels;
    double rate_hz = recent->rate_hz;
    size_t frames = (size_t)(job->seconds * rate_hz);
    frames = frames < recent->count ? frames : recent->count;
    size_t size = WAV_HEAD_BYTES + frames * channels * sizeof(float);
    if (recent->frames != NULL)
        bytes = malloc(size);
    if (bytes != NULL) {
        float *samples = malloc((frames * channels + 1) * sizeof *samples);
        if (samples != NULL) {
            recent_copy(recent, frames, samples);
            memcpy(bytes + WAV_HEAD_BYTES, samples, frames * channels * sizeof *samples);
        } else {
            free(bytes);
            bytes = NULL;
        }
        free(samples);
    }
    bool was_heard = recent->frames != NULL && recent->count > 0;
    pthread_mutex_unlock(&pipeline->mutex);
    if (bytes == NULL || !was_heard) {
        free(bytes);
        return error_set(err, was_heard ? ERROR_MEMORY : ERROR_NOT_FOUND, "%s",
                         was_heard ? "out of memory" : "nothing was heard yet");
    }
    write_wav_head(bytes, channels, (uint32_t)(rate_hz + 0.5), frames);
    order_bytes(bytes + WAV_HEAD_BYTES, frames * channels);
    struct text text = text_of_bytes(bytes, size);
    serve_answer(job, 200, "audio/wav", NULL, &text);
    return true;
}

/* --- errands --- */

static void write_card(struct json_writer *json, const struct input_card *card)
{
    json_open_object(json, NULL);
    json_string(json, "name", card->words);
    json_string(json, "full_name", card->name);
    json_string(json, "kind", "card");
    json_string(json, "host", card->host);
    json_bool(json, "is_behind_server", card->is_behind_server);
    json_bool(json, "is_default", card->is_default);
    json_integer(json, "channels", card->channels);
    json_number(json, "rate_hz", card->rate_hz, 9);
    json_open_array(json, "rates_hz");
    for (unsigned i = 0; i < card->rate_count; i++)
        json_number(json, NULL, card->rates_hz[i], 9);
    json_close_array(json);
    json_open_array(json, "warnings");
    for (unsigned i = 0; i < card->warning_count; i++)
        json_string(json, NULL, card->warnings[i]);
    json_close_array(json);
    json_close_object(json);
}

static bool answer_inputs(struct serve_job *job)
{
    struct input_card *cards = NULL;
    size_t count = 0;
    struct error err;
    struct text text = {0};
    struct json_writer json = {.text = &text};
    bool is_listed = input_list_cards(&cards, &count, &err);
    json_open_object(&json, NULL);
    json_open_array(&json, "inputs");
    for (size_t i = 0; i < count; i++)
        write_card(&json, &cards[i]);
    json_open_object(&json, NULL);
    json_string(&json, "name", "simulated");
    json_string(&json, "full_name", "simulated bench");
    json_string(&json, "kind", "simulated");
    json_open_array(&json, "warnings");
    json_close_array(&json);
    json_close_object(&json);
    json_close_array(&json);
    json_string(&json, "text", is_listed ? NULL : err.text);
    json_close_object(&json);
    free(cards);
    serve_answer(job, 200, NULL, NULL, &text);
    return true;
}

struct rows {
    const char *name;
    struct text text;
};

static void begin_rows(void *to, const struct input_info *info)
{
    (void)to;
    (void)info;
}

static void put_row(void *to, const struct read_row *row)
{
    struct rows *rows = to;
    struct json_writer json = {.text = &rows->text};
    json_open_object(&json, NULL);
    json_string(&json, "source", rows->name);
    json_integer(&json, "strike", (int64_t)row->number);
    json_reading(&json, row->strike, row->reading);
    json_close_object(&json);
    text_append(&rows->text, "\n");
}

/* The path by which the recording was opened is no name for a person. */
static void name_error(struct error *err, const char *path, const char *name)
{
    size_t length = strlen(path);
    if (strncmp(err->text, path, length) != 0)
        return;
    struct error named = {.kind = err->kind};
    snprintf(named.text, sizeof named.text, "%.80s%.170s", name, err->text + length);
    *err = named;
}

static bool answer_recording(struct desk *desk, struct serve_job *job, struct error *err)
{
    static pthread_mutex_t planning = PTHREAD_MUTEX_INITIALIZER;
    char path[64];
    struct rows rows = {.name = job->name != NULL ? job->name : "recording"};
    struct input_info info;
    const struct read_sink sink = {.to = &rows, .begin = begin_rows, .put = put_row};
    struct read_settings settings = {
        .channel = job->channel, .fit = desk->pipeline->options.fit, .planning = &planning};
    pthread_mutex_lock(&desk->pipeline->mutex);
    settings.detect = desk->pipeline->trigger;
    pthread_mutex_unlock(&desk->pipeline->mutex);
    snprintf(path, sizeof path, "/proc/self/fd/%d", job->recording_fd);
    if (!read_recording(path, &settings, &sink, &info, err)) {
        name_error(err, path, rows.name);
        text_done(&rows.text);
        return false;
    }
    serve_answer(job, 200, "application/x-ndjson", NULL, &rows.text);
    return true;
}

/* --- the loops --- */

static void do_job(struct desk *desk, struct message *message)
{
    struct serve_job *job = message->job;
    struct error err = {ERROR_INTERNAL, "no such job"};
    bool is_answered = false;
    message->job = NULL;
    message_destroy(message);
    if (job->call == SERVE_PLOT)
        is_answered = answer_plot(desk, job, &err);
    else if (job->call == SERVE_WAVE)
        is_answered = answer_wave(desk, job, &err);
    else if (job->call == SERVE_REPORT || job->call == SERVE_REPORT_STRIKE)
        is_answered = answer_report(desk, job, &err);
    else if (job->call == SERVE_RECENT)
        is_answered = answer_recent(desk, job, &err);
    else if (job->call == SERVE_LIST_INPUTS)
        is_answered = answer_inputs(job);
    else if (job->call == SERVE_READ_RECORDING)
        is_answered = answer_recording(desk, job, &err);
    if (!is_answered)
        serve_refuse(job, &err);
}

static void work(struct pipeline *pipeline, struct queue *queue)
{
    struct desk desk = {.pipeline = pipeline};
    while (!queue_is_finished(queue)) {
        struct message *message = queue_take(queue, INT64_MAX);
        if (message == NULL)
            continue;
        if (pipeline_is_stopping(pipeline))
            message_refuse(message, ERROR_DEVICE, "Wane is closing down: try again in a moment");
        else
            do_job(&desk, message);
    }
    log_reader_close(desk.log);
}

void *plotter_run(void *user)
{
    struct pipeline *pipeline = user;
    work(pipeline, pipeline->plots);
    return NULL;
}

void *errands_run(void *user)
{
    struct pipeline *pipeline = user;
    work(pipeline, pipeline->errands);
    return NULL;
}
