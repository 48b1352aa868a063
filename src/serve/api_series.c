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
    struct server *server = exchange->server;
    struct log_reader *log = server_log(server, &err);
    if (log != NULL &&
        tally_update(&server->tally, log, server->settings.shelf, exchange->id, &err) &&
        tally_read_json(&server->tally, log, &exchange->answer.body, &err))
        answer_json(exchange, 200);
    else
        answer_error(exchange, &err);
}

static void get_report(struct exchange *exchange, enum serve_call call)
{
    if (!query_check(exchange, no_words))
        return;
    /* One file with its style in it, and nothing that runs. */
    answer_header(exchange, "Content-Security-Policy",
                  "default-src 'none'; style-src 'unsafe-inline'; base-uri 'none'; "
                  "form-action 'none'; frame-ancestors 'none'");
    exchange->job.id = exchange->id;
    exchange_submit(exchange, call);
}

void api_get_series_report(struct exchange *exchange)
{
    get_report(exchange, SERVE_REPORT);
}

void api_get_strike_report(struct exchange *exchange)
{
    get_report(exchange, SERVE_REPORT_STRIKE);
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
    static const char *const keys[] = {"name", "close", "specimen", "next_specimen", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "name", SERVE_NAME_MAX, &is_there, &job->name) ||
        !body_text(exchange, "specimen", SERVE_NAME_MAX, &is_there, &job->specimen) ||
        !body_bool(exchange, "next_specimen", &job->next_specimen) ||
        !body_bool(exchange, "close", &job->close))
        return;
    bool is_next = job->specimen != NULL || job->next_specimen;
    if (job->name == NULL && !job->close && !is_next) {
        answer_problem(exchange, 400,
                       "nothing to change: give name (a text), close (true), specimen (a text) or "
                       "next_specimen (true)");
        return;
    }
    if (is_next &&
        (job->close || job->name != NULL || (job->specimen != NULL && job->next_specimen))) {
        answer_problem(exchange, 400,
                       "the next specimen closes this series and opens another: send specimen, or "
                       "next_specimen, alone");
        return;
    }
    job->id = exchange->id;
    exchange_submit(exchange, SERVE_PATCH_SERIES);
}
