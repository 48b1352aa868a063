#include "serve/exchange.h"
#include "wane/log.h"

static const char *const no_words[] = {NULL};

void api_list_series(struct exchange *exchange)
{
    static const char *const words[] = {"before", "limit", NULL};
    int64_t before = 0, limit = LOG_PAGE_DEFAULT, next_before = 0;
    struct error err;
    if (!query_check(exchange, words) ||
        !query_integer(exchange, "before", 1, INT64_MAX / 2, &before) ||
        !query_integer(exchange, "limit", 1, LOG_PAGE_MAX, &limit))
        return;
    struct text objects = {0};
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL ||
        !log_list_series_json(log, before, (unsigned)limit, &objects, &next_before, &err)) {
        text_done(&objects);
        answer_error(exchange, &err);
        return;
    }
    struct json_writer json = {.text = &exchange->answer.body};
    json_open_object(&json, NULL);
    json_open_array(&json, "series");
    if (objects.length > 0)
        json_raw(&json, NULL, objects.data);
    json_close_array(&json);
    if (next_before > 0) {
        struct text next = {0};
        text_appendf(&next, "/api/v1/series?before=%lld&limit=%lld", (long long)next_before,
                     (long long)limit);
        json_string(&json, "next", next.data);
        text_done(&next);
    }
    json_close_object(&json);
    text_done(&objects);
    answer_json(exchange, 200);
}

void api_get_series(struct exchange *exchange)
{
    struct error err;
    if (!query_check(exchange, no_words))
        return;
    struct log_reader *log = server_log(exchange->server, &err);
    if (log != NULL && log_read_series_json(log, exchange->id, &exchange->answer.body, &err))
        answer_json(exchange, 200);
    else
        answer_error(exchange, &err);
}

void api_open_series(struct exchange *exchange)
{
    static const char *const keys[] = {"name", "part", "specimen", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    if (query_check(exchange, no_words) && body_check(exchange, keys) &&
        body_text(exchange, "name", SERVE_NAME_MAX, &is_there, &job->name) &&
        body_text(exchange, "part", SERVE_NAME_MAX, &is_there, &job->part) &&
        body_text(exchange, "specimen", SERVE_NAME_MAX, &is_there, &job->specimen))
        exchange_submit(exchange, SERVE_OPEN_SERIES);
}

void api_patch_series(struct exchange *exchange)
{
    static const char *const keys[] = {"name", "close", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "name", SERVE_NAME_MAX, &is_there, &job->name) ||
        !body_bool(exchange, "close", &job->close))
        return;
    if (job->name == NULL && !job->close) {
        answer_problem(exchange, 400, "nothing to change: give name (a text) or close (true)");
        return;
    }
    job->id = exchange->id;
    exchange_submit(exchange, SERVE_PATCH_SERIES);
}
