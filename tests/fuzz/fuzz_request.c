/* Paths and JSON bodies of HTTP requests: the server's own code behind libmicrohttpd. */
#include "fuzz.h"

#include "serve/exchange.h"

#include <string.h>

static void try_body(struct exchange *exchange, const uint8_t *bytes, size_t size)
{
    static const char *const keys[] = {"note",           "set_aside", "value",
                                       "channels_heard", "name",      NULL};
    text_append_bytes(&exchange->body, (const char *)bytes, size);
    exchange->body_size = size;
    bool is_there = false, is_true = false;
    const char *text = NULL;
    double number = 0;
    unsigned bits = 0;
    if (body_parse(exchange) && body_check(exchange, keys)) {
        if (body_text(exchange, "note", SERVE_NOTE_MAX, &is_there, &text) && text != NULL)
            PROMISE(strlen(text) <= SERVE_NOTE_MAX);
        if (body_number(exchange, "value", -1e6, 1e6, &number))
            PROMISE(number >= -1e6 && number <= 1e6);
        (void)body_bool(exchange, "set_aside", &is_true);
        (void)body_channels(exchange, "channels_heard", &bits);
    }
    body_done(exchange);
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    if (size < 1)
        return 0;
    static struct server server;
    if (server.assets == NULL)
        server.assets = assets_create(NULL, NULL);
    struct exchange exchange;
    memset(&exchange, 0, sizeof exchange);
    exchange.server = &server;
    exchange.body_fd = -1;
    char path[512];
    if (bytes[0] % 2 == 0) {
        try_body(&exchange, bytes + 1, size - 1);
    } else {
        size_t length = size - 1 < sizeof path - 1 ? size - 1 : sizeof path - 1;
        memcpy(path, bytes + 1, length);
        path[length] = '\0';
        exchange.path = path;
        const struct route *route = route_find(&exchange, METHOD_GET);
        PROMISE(route == NULL || exchange.id >= 0);
        PROMISE(strlen(exchange.name) <= SERVE_NAME_MAX);
    }
    text_done(&exchange.body);
    text_done(&exchange.answer.body);
    return 0;
}
