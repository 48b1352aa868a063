#include "inner.h"

#include <stdlib.h>

struct message *message_create(enum message_kind kind)
{
    struct message *message = calloc(1, sizeof *message);
    if (message != NULL) {
        message->kind = kind;
        message->queued_ns = clock_monotonic_ns();
    }
    return message;
}

void message_destroy(void *user)
{
    struct message *message = user;
    if (message == NULL)
        return;
    strike_destroy(message->strike);
    free(message->view);
    free(message->path);
    free(message);
}

void message_refuse(struct message *message, enum error_kind kind, const char *text)
{
    struct error err;
    if (message->job != NULL) {
        error_set(&err, kind, "%s", text);
        serve_refuse(message->job, &err);
        message->job = NULL;
    }
    message_destroy(message);
}
