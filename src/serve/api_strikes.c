#include "serve/exchange.h"
#include "wane/log.h"

#include <stdlib.h>
#include <string.h>

static const char *const no_words[] = {NULL};
static const char *const selection_words[] = {"before",        "limit",   "series", "part",
                                              "specimen",      "verdict", "from",   "to",
                                              "changed_since", NULL};

static bool read_selection(struct exchange *exchange, struct log_selection *out_selection)
{
    struct error err;
    if (!query_check(exchange, selection_words))
        return false;
    for (size_t i = 0; selection_words[i] != NULL; i++) {
        const char *value = query_text(exchange, selection_words[i]);
        if (value != NULL && !log_selection_set(out_selection, selection_words[i], value, &err)) {
            answer_error(exchange, &err);
            return false;
        }
    }
    return true;
}

/* RFC 3986, section 2.3: all but unreserved characters are written as %XX. */
static void append_encoded(struct text *out, const char *value)
{
    static const char unreserved[] =
        "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-._~";
    for (; *value != '\0'; value++) {
        if (strchr(unreserved, *value) != NULL)
            text_append_bytes(out, value, 1);
        else
            text_appendf(out, "%%%02X", (unsigned)(unsigned char)*value);
    }
}

/* The same question for the page after this one. */
static void write_next(struct exchange *exchange, struct json_writer *json, int64_t next_before)
{
    struct text next = {0};
    text_appendf(&next, "/api/v1/strikes?before=%lld", (long long)next_before);
    for (size_t i = 1; selection_words[i] != NULL; i++) {
        const char *value = query_text(exchange, selection_words[i]);
        if (value == NULL)
            continue;
        text_appendf(&next, "&%s=", selection_words[i]);
        append_encoded(&next, value);
    }
    json_string(json, "next", next.data);
    text_done(&next);
}

void api_list_strikes(struct exchange *exchange)
{
    struct log_selection selection = {0};
    struct log_page page;
    struct error err;
    if (!read_selection(exchange, &selection))
        return;
    struct text *body = &exchange->answer.body;
    struct text objects = {0};
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL || !log_read_page(log, &selection, &objects, &page, &err)) {
        text_done(&objects);
        answer_error(exchange, &err);
        return;
    }
    struct json_writer json = {.text = body};
    json_open_object(&json, NULL);
    json_open_array(&json, "strikes");
    if (page.count > 0)
        json_raw(&json, NULL, objects.data);
    json_close_array(&json);
    if (page.next_before > 0)
        write_next(exchange, &json, page.next_before);
    json_integer(&json, "revision", page.revision);
    json_close_object(&json);
    body->failed |= objects.failed;
    text_done(&objects);
    answer_json(exchange, 200);
}

void api_get_strike(struct exchange *exchange)
{
    struct error err;
    int64_t revision = 0;
    if (!query_check(exchange, no_words))
        return;
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL ||
        !log_read_strike_json(log, exchange->id, &exchange->answer.body, &revision, &err)) {
        answer_error(exchange, &err);
        return;
    }
    answer_header(exchange, "ETag", "\"%lld\"", (long long)revision);
    answer_json(exchange, 200);
}

void api_get_wave(struct exchange *exchange)
{
    if (!query_check(exchange, no_words))
        return;
    exchange->job.id = exchange->id;
    answer_header(exchange, "Content-Disposition", "attachment; filename=\"strike-%lld.wav\"",
                  (long long)exchange->id);
    exchange_submit(exchange, SERVE_WAVE);
}

void api_get_plot(struct exchange *exchange)
{
    static const char *const words[] = {"width", "from", "to", NULL};
    struct serve_job *job = &exchange->job;
    int64_t width = 800;
    job->id = exchange->id;
    job->from_s = -1e9;
    job->to_s = 1e9;
    if (!query_check(exchange, words) || !query_integer(exchange, "width", 50, 4000, &width) ||
        !query_number(exchange, "from", &job->from_s) || !query_number(exchange, "to", &job->to_s))
        return;
    if (!(job->from_s < job->to_s)) {
        answer_problem(exchange, 400, "from must be before to");
        return;
    }
    job->width = (unsigned)width;
    exchange_submit(exchange, SERVE_PLOT);
}

void api_patch_strike(struct exchange *exchange)
{
    static const char *const keys[] = {"note", "set_aside", NULL};
    struct serve_job *job = &exchange->job;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "note", SERVE_NOTE_MAX, &job->has_note, &job->note) ||
        !body_text(exchange, "set_aside", SERVE_NOTE_MAX, &job->has_set_aside, &job->set_aside))
        return;
    if (!job->has_note && !job->has_set_aside) {
        answer_problem(exchange, 400, "nothing to change: give note or set_aside (a text or null)");
        return;
    }
    job->id = exchange->id;
    job->if_match = exchange->if_match[0] != '\0' ? exchange->if_match : NULL;
    exchange_submit(exchange, SERVE_PATCH_STRIKE);
}

void api_reread_strike(struct exchange *exchange)
{
    static const char *const keys[] = {"f_low_hz", "f_high_hz", "coupling_hz", "not_exponential",
                                       "gliding",  "modes_max", "clock_ppm",   NULL};
    struct fit_settings *fit = &exchange->job.fit;
    double modes_max = 0;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_number(exchange, "f_low_hz", 0, 400e3, &fit->f_low_hz) ||
        !body_number(exchange, "f_high_hz", 0, 400e3, &fit->f_high_hz) ||
        !body_number(exchange, "coupling_hz", 0, 1000, &fit->coupling_hz) ||
        !body_number(exchange, "not_exponential", 0, 1, &fit->not_exponential) ||
        !body_number(exchange, "gliding", 0, 1, &fit->gliding) ||
        !body_number(exchange, "modes_max", 0, READING_MODES_MAX, &modes_max) ||
        !body_number(exchange, "clock_ppm", -1000, 1000, &fit->clock_ppm))
        return;
    fit->modes_max = (unsigned)modes_max;
    exchange->job.id = exchange->id;
    exchange_submit(exchange, SERVE_REREAD);
}

/* --- exports: pieces of a document, made as the client takes them --- */

struct export_stream {
    struct log_reader *reader;
    struct log_export *export;
    struct text piece;
    size_t sent;
    bool is_done;
};

static void end_export(void *user)
{
    struct export_stream *stream = user;
    log_export_end(stream->export);
    log_reader_close(stream->reader);
    text_done(&stream->piece);
    free(stream);
}

static ssize_t read_export(void *user, uint64_t position, char *buffer, size_t buffer_size)
{
    (void)position;
    struct export_stream *stream = user;
    struct error err;
    while (stream->sent == stream->piece.length) {
        if (stream->is_done)
            return MHD_CONTENT_READER_END_OF_STREAM;
        text_clear(&stream->piece);
        stream->sent = 0;
        /* A half document must not look whole: the connection is cut in the middle of a chunk. */
        if (!log_export_next(stream->export, &stream->piece, &stream->is_done, &err) ||
            stream->piece.failed)
            return MHD_CONTENT_READER_END_WITH_ERROR;
    }
    size_t count = stream->piece.length - stream->sent;
    count = count > buffer_size ? buffer_size : count;
    memcpy(buffer, stream->piece.data + stream->sent, count);
    stream->sent += count;
    return (ssize_t)count;
}

static void answer_export(struct exchange *exchange, enum log_export_format format)
{
    struct log_selection selection = {0};
    struct error err = {ERROR_MEMORY, "out of memory"};
    if (!read_selection(exchange, &selection))
        return;
    struct export_stream *stream = calloc(1, sizeof *stream);
    if (stream == NULL) {
        answer_error(exchange, &err);
        return;
    }
    char path[sizeof exchange->server->log_path];
    pthread_mutex_lock(&exchange->server->jobs_mutex);
    memcpy(path, exchange->server->log_path, sizeof path);
    pthread_mutex_unlock(&exchange->server->jobs_mutex);
    stream->reader = log_reader_open(path, &err);
    if (stream->reader != NULL)
        stream->export = log_export_begin(stream->reader, &selection, format, &err);
    if (stream->export != NULL)
        exchange->answer.response = MHD_create_response_from_callback(
            MHD_SIZE_UNKNOWN, 65536, read_export, stream, end_export);
    if (exchange->answer.response == NULL) {
        end_export(stream);
        answer_error(exchange, &err);
        return;
    }
    bool is_csv = format == LOG_EXPORT_CSV;
    answer_header(exchange, "Content-Disposition", "attachment; filename=\"strikes.%s\"",
                  is_csv ? "csv" : "json");
    exchange->answer.status = 200;
    exchange->answer.content_type = is_csv ? "text/csv; charset=utf-8" : "application/json";
    exchange->state = EXCHANGE_READY;
}

void api_export_csv(struct exchange *exchange)
{
    answer_export(exchange, LOG_EXPORT_CSV);
}

void api_export_json(struct exchange *exchange)
{
    answer_export(exchange, LOG_EXPORT_JSON);
}
