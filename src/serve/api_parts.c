#include "serve/exchange.h"
#include "wane/log.h"

#include <stdlib.h>
#include <string.h>

static const char *const no_words[] = {NULL};

void api_list_parts(struct exchange *exchange)
{
    struct error err;
    struct text objects = {0};
    if (!query_check(exchange, no_words))
        return;
    struct log_reader *log = server_log(exchange->server, &err);
    if (log == NULL || !shelf_list_json(log, exchange->server->settings.shelf, &objects, &err)) {
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
    if (log == NULL || !shelf_read(log, exchange->server->settings.shelf, exchange->name,
                                   &exchange->answer.body, etag, NULL, &err)) {
        answer_error(exchange, &err);
        return;
    }
    answer_header(exchange, "ETag", "%s", etag);
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/plain; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}

/* All that is wrong with the sheet, each complaint with its line: RFC 9457 allows further members.
 */
static void answer_complaints(struct exchange *exchange, const struct error *err,
                              const char *complaints)
{
    struct text *body = &exchange->answer.body;
    answer_problem(exchange, 422, "%s", err->text);
    if (complaints == NULL || body->length < 2)
        return;
    struct text list = {0};
    struct json_writer json = {.text = &list};
    json_open_array(&json, NULL);
    while (*complaints != '\0') {
        size_t length = strcspn(complaints, "\n");
        struct text line = {0};
        text_append_bytes(&line, complaints, length);
        if (length > 0 && line.data != NULL)
            json_string(&json, NULL, line.data);
        text_done(&line);
        complaints += length + (complaints[length] == '\n');
    }
    json_close_array(&json);
    body->data[--body->length] = '\0'; /* its closing brace */
    text_append(body, ",\"complaints\":");
    text_append(body, list.data != NULL ? list.data : "[]");
    text_append(body, "}");
    text_done(&list);
}

static bool check_sheet(struct exchange *exchange, const char *sheet)
{
    struct text complaints = {0};
    struct error err;
    struct part *part = calloc(1, sizeof *part);
    bool is_good =
        part != NULL && part_read(exchange->name, sheet, strlen(sheet), part, &complaints, &err);
    if (part == NULL)
        answer_problem(exchange, 503, "out of memory");
    else if (!is_good)
        answer_complaints(exchange, &err, complaints.data);
    text_done(&complaints);
    free(part);
    return is_good;
}

/* A sheet in a folder is never written: its change becomes the first version in the log. */
static bool is_of_file(struct exchange *exchange)
{
    struct text sheet = {0};
    struct error err;
    char etag[LOG_ETAG_MAX];
    bool is_file = false;
    struct log_reader *log = server_log(exchange->server, &err);
    bool is_there = log != NULL && shelf_read(log, exchange->server->settings.shelf, exchange->name,
                                              &sheet, etag, &is_file, &err);
    text_done(&sheet);
    return is_there && is_file && strcmp(etag, exchange->if_match) == 0;
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
    if (!check_sheet(exchange, job->sheet))
        return;
    is_new = is_new || is_of_file(exchange);
    job->name = exchange->name;
    job->if_match = is_new ? NULL : exchange->if_match;
    exchange_submit(exchange, SERVE_PUT_PART);
}
