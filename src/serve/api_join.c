/* The way in: an invitation's code becomes a cookie. */
#include "serve/door.h"
#include "serve/exchange.h"

#include <stdio.h>
#include <string.h>

#define YEAR_S 31536000

void join_cookie_name(const struct server *server, char *out, size_t out_size)
{
    /* Cookies know no ports: two benches on one machine must not take each other's. The prefix
     * binds it to this host and to TLS (RFC 6265bis, section 4.1.3.2). */
    snprintf(out, out_size, "__Host-wane-%u", server->port);
}

/* A page that goes on to the bench by itself. A redirect would not do: after a link in a mail page
 * it still counts as the mail's, and a SameSite=Strict cookie stays behind. */
void api_get_join(struct exchange *exchange)
{
    static const char *const words[] = {"code", NULL};
    struct server *server = exchange->server;
    char token[DOOR_SECRET_MAX], cookie[64];
    struct error err;
    if (!query_check(exchange, words))
        return;
    const char *code = query_text(exchange, "code");
    if (server->door == NULL || code == NULL || exchange->is_head) {
        answer_problem(exchange, 404, "there is no invitation in this address");
        return;
    }
    if (!guard_tries(exchange))
        return;
    if (!door_redeem(door_folder(server->door), code, token, &err)) {
        if (err.kind == ERROR_DENIED)
            guard_note_wrong(exchange, "invitation");
        answer_error(exchange, &err);
        return;
    }
    join_cookie_name(server, cookie, sizeof cookie);
    answer_header(exchange, "Set-Cookie",
                  "%s=%s; Path=/; Max-Age=%d; HttpOnly; Secure; SameSite=Strict", cookie, token,
                  YEAR_S);
    text_append(&exchange->answer.body,
                "<!doctype html><html lang=\"en\"><meta charset=\"utf-8\"><title>Wane</title>"
                "<meta http-equiv=\"refresh\" content=\"0;url=/\">"
                "<p>You are in. <a href=\"/\">To the bench</a></p></html>\n");
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/html; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}
