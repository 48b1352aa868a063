/* Who may ask, from where, and how much: everything that is checked before a handler is called. The
 * place for a token and its two rights, once the daemon listens off the loopback. */
#include "serve/exchange.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct header_count {
    const char *name;
    unsigned count;
};

static enum MHD_Result count_header(void *user, enum MHD_ValueKind kind, const char *key,
                                    const char *value)
{
    (void)kind;
    (void)value;
    struct header_count *wanted = user;
    size_t length = strlen(wanted->name);
    bool is_equal = strlen(key) == length;
    for (size_t i = 0; is_equal && i < length; i++)
        is_equal = (key[i] | 0x20) == (wanted->name[i] | 0x20);
    wanted->count += is_equal;
    return MHD_YES;
}

static unsigned count_headers(struct exchange *exchange, const char *name)
{
    struct header_count wanted = {.name = name};
    MHD_get_connection_values(exchange->connection, MHD_HEADER_KIND, count_header, &wanted);
    return wanted.count;
}

const char *exchange_header(struct exchange *exchange, const char *name)
{
    return MHD_lookup_connection_value(exchange->connection, MHD_HEADER_KIND, name);
}

/* "127.0.0.1:9263" and the like: a page of a foreign name that points here (DNS rebinding) has
 * another Host. */
static bool is_own_authority(const struct server *server, const char *authority)
{
    char address[sizeof server->address + 2];
    const char *const names[] = {"127.0.0.1", "localhost", "[::1]", address};
    snprintf(address, sizeof address, strchr(server->address, ':') != NULL ? "[%s]" : "%s",
             server->address);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        char own[96];
        snprintf(own, sizeof own, "%s:%u", names[i], server->port);
        if (strcmp(authority, own) == 0 || (server->port == 80 && strcmp(authority, names[i]) == 0))
            return true;
    }
    return false;
}

bool guard_host(struct exchange *exchange)
{
    if (count_headers(exchange, "Host") != 1) {
        answer_problem(exchange, 400, "exactly one Host header is wanted");
        return false;
    }
    if (count_headers(exchange, "Content-Length") > 1 ||
        (count_headers(exchange, "Content-Length") == 1 &&
         count_headers(exchange, "Transfer-Encoding") > 0)) {
        answer_problem(exchange, 400, "the body's length is given in two ways");
        return false;
    }
    if (!is_own_authority(exchange->server, exchange_header(exchange, "Host"))) {
        answer_problem(exchange, 421, "this bench answers to 127.0.0.1:%u and localhost:%u only",
                       exchange->server->port, exchange->server->port);
        return false;
    }
    return true;
}

/* A page from elsewhere can make a browser send requests here (CSRF). Browsers say where a request
 * comes from; programs without a page send neither header. Following a link from elsewhere to look
 * is allowed. */
bool guard_origin(struct exchange *exchange, unsigned method)
{
    const char *site = exchange_header(exchange, "Sec-Fetch-Site");
    const char *mode = exchange_header(exchange, "Sec-Fetch-Mode");
    const char *origin = exchange_header(exchange, "Origin");
    bool is_look = method == METHOD_GET && mode != NULL && strcmp(mode, "navigate") == 0;
    bool is_foreign_site =
        site != NULL && strcmp(site, "same-origin") != 0 && strcmp(site, "none") != 0;
    bool is_foreign_origin = false;
    if (origin != NULL)
        is_foreign_origin =
            strncmp(origin, "http://", 7) != 0 || !is_own_authority(exchange->server, origin + 7);
    if ((is_foreign_site && !is_look) || is_foreign_origin) {
        answer_problem(exchange, 403, "requests from other sites are refused");
        return false;
    }
    return true;
}

static bool has_media_type(const char *value, const char *type)
{
    size_t length = strlen(type);
    return value != NULL && strncmp(value, type, length) == 0 &&
           (value[length] == '\0' || value[length] == ';' || value[length] == ' ');
}

/* Types that a form can send without a preflight are refused for recordings, any but JSON for
 * the rest. */
bool guard_content_type(struct exchange *exchange)
{
    const char *type = exchange_header(exchange, "Content-Type");
    if (exchange->route->body == BODY_JSON && !has_media_type(type, "application/json")) {
        answer_problem(exchange, 415, "the body must be application/json");
        return false;
    }
    if (exchange->route->body == BODY_FILE &&
        (type == NULL || has_media_type(type, "text/plain") ||
         has_media_type(type, "multipart/form-data") ||
         has_media_type(type, "application/x-www-form-urlencoded"))) {
        answer_problem(exchange, 415,
                       "send the recording's bytes themselves, as audio/wav, audio/flac or "
                       "application/octet-stream");
        return false;
    }
    return true;
}

uint64_t guard_body_limit(const struct exchange *exchange)
{
    return exchange->route->body == BODY_FILE   ? SERVE_RECORDING_MAX
           : exchange->route->body == BODY_JSON ? SERVE_BODY_MAX
                                                : 0;
}

void guard_answer_too_large(struct exchange *exchange)
{
    answer_problem(exchange, 413, "the body is over the limit of %llu bytes",
                   (unsigned long long)guard_body_limit(exchange));
}

bool guard_length(struct exchange *exchange)
{
    const char *length = exchange_header(exchange, "Content-Length");
    if (length == NULL)
        return true;
    if (strlen(length) > 15 || strtoull(length, NULL, 10) > guard_body_limit(exchange)) {
        guard_answer_too_large(exchange);
        return false;
    }
    return true;
}
