/* What people change: notes, strikes set aside, rereadings, series, part sheets, measurements. */
#include "keeper.h"

#include <stdio.h>
#include <stdlib.h>
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

static int64_t series_of(struct keeper *keeper, int64_t id)
{
    struct log_stored stored = {0};
    struct error err;
    if (!log_read_strike(keeper->reader, id, &stored, &err))
        return 0;
    log_stored_done(&stored);
    return stored.context.series;
}

static bool tell_series_of(struct keeper *keeper, int64_t id)
{
    keeper_tell_series(keeper, series_of(keeper, id));
    return true;
}

static bool patch_strike(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct log_change change = {0};
    const int64_t id = job->id; /* the job is gone once it is answered */
    if (job->has_note)
        change.note = job->note != NULL ? job->note : "";
    if (job->has_set_aside)
        change.set_aside = job->set_aside != NULL ? LOG_SET : LOG_CLEAR;
    change.reason = job->set_aside;
    return check_revision(keeper, job, err) &&
           log_change_strike(keeper->writer, job->id, &change, NULL, err) &&
           answer_strike(keeper, job, err) && tell_series_of(keeper, id);
}

static bool answer_series(struct keeper *keeper, struct serve_job *job, int64_t id, unsigned status,
                          struct error *err)
{
    struct text text = {0};
    if (!keeper_read_series(keeper, id, &text, err)) {
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

/* The number at the end of a specimen's name, counted up, as wide as it was. */
static void count_up(const char *name, char out[LOG_NAME_MAX])
{
    size_t length = strlen(name), at = length;
    while (at > 0 && length - at < 9 && name[at - 1] >= '0' && name[at - 1] <= '9')
        at--;
    if (at < length)
        snprintf(out, LOG_NAME_MAX, "%.*s%0*lu", (int)at, name, (int)(length - at),
                 strtoul(name + at, NULL, 10) + 1);
    else
        snprintf(out, LOG_NAME_MAX, "%.*s%s2", LOG_NAME_MAX - 4, name, length > 0 ? " " : "");
}

/* Closes the series and opens another one for the same part and the next specimen. */
static bool next_specimen(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    int64_t id = 0;
    if (!tally_update(&keeper->tally, keeper->reader, &keeper->pipeline->shelf, job->id, err))
        return false;
    pthread_mutex_lock(&keeper->pipeline->mutex);
    bool is_open = keeper->pipeline->series == job->id;
    pthread_mutex_unlock(&keeper->pipeline->mutex);
    if (!is_open)
        return error_set(err, ERROR_CONFLICT,
                         "series %lld is closed: open a new one for the next specimen",
                         (long long)job->id);
    struct log_series series = keeper->tally.about;
    if (job->specimen != NULL)
        snprintf(series.specimen, sizeof series.specimen, "%s", job->specimen);
    else
        count_up(keeper->tally.about.specimen, series.specimen);
    if (!log_series_close(keeper->writer, job->id, clock_utc_ms(), err) ||
        !log_series_create(keeper->writer, &series, clock_utc_ms(), &id, err))
        return false;
    keeper_set_series(keeper, id, &series);
    return answer_series(keeper, job, id, 200, err);
}

static bool patch_series(struct keeper *keeper, struct serve_job *job, struct error *err)
{
    struct pipeline *pipeline = keeper->pipeline;
    const struct log_series none = {0};
    if (job->specimen != NULL || job->next_specimen)
        return next_specimen(keeper, job, err);
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
    const int64_t id = job->id, series = series_of(keeper, id);
    message->job = NULL;
    keeper_label_reading(keeper, series, &message->reading);
    if (!log_replace_reading(keeper->writer, job->id, &message->reading, message->settings,
                             WANE_VERSION, clock_utc_ms(), NULL, &err) ||
        !answer_strike(keeper, job, &err))
        serve_refuse(job, &err);
    keeper->judge = NULL;
    keeper_tell_series(keeper, series);
}
