#include "serve/exchange.h"

#include <assert.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void answer_header(struct exchange *exchange, const char *name, const char *format, ...)
{
    struct answer *answer = &exchange->answer;
    assert(answer->header_count < ANSWER_HEADERS_MAX);
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(answer->headers[answer->header_count].value, sizeof answer->headers[0].value, format,
              arguments);
    va_end(arguments);
    answer->headers[answer->header_count++].name = name;
}

void answer_json(struct exchange *exchange, unsigned status)
{
    exchange->answer.status = status;
    exchange->answer.content_type = "application/json";
    exchange->state = EXCHANGE_READY;
}

void answer_problem(struct exchange *exchange, unsigned status, const char *format, ...)
{
    char detail[512];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(detail, sizeof detail, format, arguments);
    va_end(arguments);
    struct answer *answer = &exchange->answer;
    text_clear(&answer->body);
    problem_write(&answer->body, status, detail);
    answer->status = status;
    answer->content_type = "application/problem+json";
    exchange->state = EXCHANGE_READY;
}

void answer_error(struct exchange *exchange, const struct error *err)
{
    answer_problem(exchange, error_http_status(err->kind), "%s", err->text);
}

/* The connection sleeps before the daemon hears of the job: an answer that comes at once then finds
 * a connection that can be woken. */
void exchange_submit(struct exchange *exchange, enum serve_call call)
{
    struct server *server = exchange->server;
    exchange->job.call = call;
    exchange->job.serve = exchange;
    exchange->state = EXCHANGE_WAITING;
    pthread_mutex_lock(&server->jobs_mutex);
    bool is_quiet = server->is_quiet;
    if (!is_quiet)
        server->jobs_out++;
    pthread_mutex_unlock(&server->jobs_mutex);
    if (is_quiet) {
        answer_problem(exchange, 503, "Wane is closing down: try again in a moment");
        return;
    }
    exchange->is_submitted = true;
    MHD_suspend_connection(exchange->connection);
    if (!server->daemon.take_job(server->daemon.user, &exchange->job)) {
        const struct error closing = {ERROR_DEVICE, "Wane is closing down: try again in a moment"};
        serve_refuse(&exchange->job, &closing);
    }
}

/* Any thread. The exchange may be gone as soon as the mutex is free again. */
static void wake(struct exchange *exchange)
{
    struct server *server = exchange->server;
    pthread_mutex_lock(&server->jobs_mutex);
    assert(exchange->state == EXCHANGE_WAITING);
    exchange->state = EXCHANGE_READY;
    MHD_resume_connection(exchange->connection);
    server->jobs_out--;
    pthread_cond_broadcast(&server->jobs_done);
    pthread_mutex_unlock(&server->jobs_mutex);
}

void serve_answer(struct serve_job *job, unsigned http_status, const char *content_type,
                  const char *etag, struct text *body)
{
    struct exchange *exchange = job->serve;
    struct answer *answer = &exchange->answer;
    text_done(&answer->body);
    answer->body = *body;
    *body = (struct text){0};
    answer->status = http_status;
    answer->content_type = content_type != NULL ? content_type : "application/json";
    if (etag != NULL)
        answer_header(exchange, "ETag", "%s", etag);
    wake(exchange);
}

void serve_refuse(struct serve_job *job, const struct error *err)
{
    struct exchange *exchange = job->serve;
    struct answer *answer = &exchange->answer;
    text_clear(&answer->body);
    answer->header_count = 0; /* those of the answer that was hoped for */
    answer->status = error_http_status(err->kind);
    problem_write(&answer->body, answer->status, err->text);
    answer->content_type = "application/problem+json";
    if (answer->status == 503)
        answer_header(exchange, "Retry-After", "2");
    wake(exchange);
}
