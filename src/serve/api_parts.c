#include "serve/exchange.h"
#include "wane/log.h"

#include <string.h>

static const char *const no_words[] = {NULL};

void api_list_parts(struct exchange *exchange)
{
    struct error err;
    struct text objects = {0};
    if (!query_check(exchange, no_words))
        return;
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL || !log_list_parts_json(log, &objects, &err)) {
        text_done(&objects);
        answer_error(exchange, &err);
        return;
    }
    struct json_writer json = {.text = &exchange->answer.body};
    json_open_object(&json, NULL);
    json_open_array(&json, "parts");
    if (objects.length > 0)
        json_raw(&json, NULL, objects.data);
    json_close_array(&json);
    json_close_object(&json);
    text_done(&objects);
    answer_json(exchange, 200);
}

void api_get_part(struct exchange *exchange)
{
    struct error err;
    char etag[LOG_ETAG_MAX];
    if (!query_check(exchange, no_words))
        return;
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL || !log_read_part(log, exchange->name, 0, &exchange->answer.body, etag, &err)) {
        answer_error(exchange, &err);
        return;
    }
    answer_header(exchange, "ETag", "%s", etag);
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/plain; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}

/* A new sheet is put with If-None-Match: *, a changed one with If-Match (RFC 9110, section 13.1).
 */
void api_put_part(struct exchange *exchange)
{
    static const char *const keys[] = {"sheet", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "sheet", LOG_SHEET_MAX - 1, &is_there, &job->sheet))
        return;
    const char *none_match =
        MHD_lookup_connection_value(exchange->connection, MHD_HEADER_KIND, "If-None-Match");
    bool is_new = none_match != NULL && strcmp(none_match, "*") == 0;
    if (job->sheet == NULL) {
        answer_problem(exchange, 400, "sheet: the text of the part sheet is wanted");
        return;
    }
    if (exchange->if_match[0] == '\0' && !is_new) {
        answer_problem(exchange, 428,
                       "send If-Match with the ETag of the sheet, or If-None-Match: * for a new "
                       "one, so that nobody's change is lost");
        return;
    }
    job->name = exchange->name;
    job->if_match = is_new ? NULL : exchange->if_match;
    exchange_submit(exchange, SERVE_PUT_PART);
}
