/* What people change: notes, strikes set aside, rereadings, series, part sheets, measurements. */
#include "keeper.h"

#include <stdio.h>
#include <string.h>

/* --- what people change --- */

static bool check_revision(struct keeper *keeper, const struct serve_job *job, struct error *err)
{
    struct text ignored = {0};
    int64_t revision = 0;
    char etag[32];
    if (!log_read_strike_json(keeper->reader, job->id, &ignored, &revision, err)) {
        text_done(&ignored);
        return false;
    }
    text_done(&ignored);
    snprintf(etag, sizeof etag, "\"%lld\"", (long long)revision);
    if (job->if_match != NULL && strcmp(job->if_match, "*") != 0 &&
        strcmp(job->if_match, etag) != 0)
        return error_set(err, ERROR_CONFLICT,
                         "strike %lld was changed meanwhile: look at it again, then change it",
                         (long long)job->id);
    return true;
}

static bool answer_strike(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct text text = {0};
    int64_t revision = 0;
    char etag[32];
    if (!log_read_strike_json(keeper->reader, job->id, &text, &revision, err)) {
        text_done(&text);
        return false;
    }
    keeper_refresh_counts(keeper);
    serve_publish(keeper->pipeline->server, "changed", text.data);
    snprintf(etag, sizeof etag, "\"%lld\"", (long long)revision);
    serve_answer(job, 200, NULL, etag, &text);
    return true;
}

static bool patch_strike(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct log_change change = {0};
    if (job->has_note)
        change.note = job->note != NULL ? job->note : "";
    if (job->has_set_aside)
        change.set_aside = job->set_aside != NULL ? LOG_SET : LOG_CLEAR;
    change.reason = job->set_aside;
    return check_revision(keeper, job, err) &&
           log_change_strike(keeper->writer, job->id, &change, NULL, err) &&
           answer_strike(keeper, job, err);
}

static bool answer_series(struct keeper *keeper, struct serve_job *job, int64_t id, unsigned status,
                          struct error *err)
{
    struct text text = {0};
    if (!log_read_series_json(keeper->reader, id, &text, err)) {
        text_done(&text);
        return false;
    }
    serve_publish(keeper->pipeline->server, "series", text.data);
    serve_answer(job, status, NULL, NULL, &text);
    return true;
}

void keeper_set_series(struct keeper *keeper, int64_t id, const struct log_series *series)
{
    pthread_mutex_lock(&keeper->pipeline->mutex);
    keeper->pipeline->series = id;
    keeper->pipeline->series_now = *series;
    pthread_mutex_unlock(&keeper->pipeline->mutex);
}

/* A new series on an input closes the one that was open there. */
static bool open_series(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct pipeline *pipeline = keeper->pipeline;
    struct log_series series = {0};
    int64_t id = 0;
    pthread_mutex_lock(&pipeline->mutex);
    int64_t old = pipeline->series;
    snprintf(series.input, sizeof series.input, "%.*s", (int)sizeof series.input - 1,
             pipeline->input.info.name);
    pthread_mutex_unlock(&pipeline->mutex);
    snprintf(series.name, sizeof series.name, "%s", job->name != NULL ? job->name : "");
    snprintf(series.part, sizeof series.part, "%s", job->part != NULL ? job->part : "");
    snprintf(series.specimen, sizeof series.specimen, "%s",
             job->specimen != NULL ? job->specimen : "");
    if (old != 0 && !log_series_close(keeper->writer, old, clock_utc_ms(), err))
        return false;
    if (!log_series_create(keeper->writer, &series, clock_utc_ms(), &id, err))
        return false;
    keeper_set_series(keeper, id, &series);
    return answer_series(keeper, job, id, 201, err);
}

static bool patch_series(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct pipeline *pipeline = keeper->pipeline;
    const struct log_series none = {0};
    if (job->name != NULL && !log_series_rename(keeper->writer, job->id, job->name, err))
        return false;
    if (job->close && !log_series_close(keeper->writer, job->id, clock_utc_ms(), err))
        return false;
    pthread_mutex_lock(&pipeline->mutex);
    bool is_open = pipeline->series == job->id;
    if (is_open && job->name != NULL)
        snprintf(pipeline->series_now.name, sizeof pipeline->series_now.name, "%s", job->name);
    pthread_mutex_unlock(&pipeline->mutex);
    if (is_open && job->close)
        keeper_set_series(keeper, 0, &none);
    return answer_series(keeper, job, job->id, 200, err);
}

static bool put_part(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    char etag[LOG_ETAG_MAX];
    struct text text = {0};
    if (!log_part_put(keeper->writer, job->name, job->sheet, job->if_match, clock_utc_ms(), etag,
                      err))
        return false;
    struct json_writer json = {.text = &text};
    json_open_object(&json, NULL);
    json_string(&json, "name", job->name);
    json_string(&json, "etag", etag);
    json_close_object(&json);
    serve_answer(job, 200, NULL, etag, &text);
    return true;
}

static bool add_measurement(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct text text = {0};
    int64_t id = 0;
    const char *unit = job->unit != NULL ? job->unit : "";
    if (!log_measurement_add(keeper->writer, clock_utc_ms(), job->name, job->value, unit, &id, err))
        return false;
    struct json_writer json = {.text = &text};
    json_open_object(&json, NULL);
    json_integer(&json, "id", id);
    json_string(&json, "name", job->name);
    json_number(&json, "value", job->value, 15);
    json_string(&json, "unit", unit);
    json_close_object(&json);
    serve_answer(job, 201, NULL, NULL, &text);
    return true;
}

void keeper_do_job(struct keeper *keeper, struct serve_job *job)
{
    struct error err = {ERROR_INTERNAL, "no such job"};
    bool is_done = false;
    if (job->call == SERVE_PATCH_STRIKE)
        is_done = patch_strike(keeper, job, &err);
    else if (job->call == SERVE_OPEN_SERIES)
        is_done = open_series(keeper, job, &err);
    else if (job->call == SERVE_PATCH_SERIES)
        is_done = patch_series(keeper, job, &err);
    else if (job->call == SERVE_PUT_PART)
        is_done = put_part(keeper, job, &err);
    else if (job->call == SERVE_ADD_MEASUREMENT)
        is_done = add_measurement(keeper, job, &err);
    if (!is_done)
        serve_refuse(job, &err);
}

void keeper_replace_reading(struct keeper *keeper, struct message *message)
{
    struct serve_job *job = message->job;
    struct error err;
    message->job = NULL;
    if (!log_replace_reading(keeper->writer, job->id, &message->reading, message->settings,
                             WANE_VERSION, clock_utc_ms(), NULL, &err) ||
        !answer_strike(keeper, job, &err))
        serve_refuse(job, &err);
}
