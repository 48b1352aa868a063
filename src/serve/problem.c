#include "serve/exchange.h"

const char *problem_title(unsigned status)
{
    static const struct {
        unsigned status;
        const char *title;
    } titles[] = {
        {400, "Bad Request"},
        {401, "Unauthorized"},
        {403, "Forbidden"},
        {404, "Not Found"},
        {405, "Method Not Allowed"},
        {411, "Length Required"},
        {412, "Precondition Failed"},
        {413, "Content Too Large"},
        {415, "Unsupported Media Type"},
        {421, "Misdirected Request"},
        {422, "Unprocessable Content"},
        {428, "Precondition Required"},
        {429, "Too Many Requests"},
        {500, "Internal Server Error"},
        {503, "Service Unavailable"},
    };
    for (size_t i = 0; i < sizeof titles / sizeof titles[0]; i++) {
        if (titles[i].status == status)
            return titles[i].title;
    }
    return "Error";
}

/* RFC 9457, section 3.1. type about:blank: the title is the status's own (section 4.2.1). */
void problem_write(struct text *out, unsigned status, const char *detail)
{
    struct json_writer json = {.text = out};
    json_open_object(&json, NULL);
    json_string(&json, "type", "about:blank");
    json_string(&json, "title", problem_title(status));
    json_integer(&json, "status", status);
    if (detail != NULL)
        json_string(&json, "detail", detail);
    json_close_object(&json);
}
