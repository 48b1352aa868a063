/* Who may ask, from where, and how much: everything that is checked before a handler is called. Off
 * the loopback that is a token too, with its two rights. */
#include "serve/door.h"
#include "serve/exchange.h"

#include <arpa/inet.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>

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
static bool is_own_name(const struct server *server, const char *authority)
{
    char address[sizeof server->address + 2];
    const char *const names[] = {"127.0.0.1", "localhost", "[::1]", address};
    snprintf(address, sizeof address, strchr(server->address, ':') != NULL ? "[%s]" : "%s",
             server->address);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        char own[96]; /* a port that is the scheme's own is left out by browsers */
        snprintf(own, sizeof own, "%s:%u", names[i], server->port);
        if (strcmp(authority, own) == 0 ||
            (server->port == (server->door != NULL ? 443 : 80) && strcmp(authority, names[i]) == 0))
            return true;
    }
    return false;
}

/* A numeric address without brackets; that of an IPv4 peer on an IPv6 socket as IPv4. */
static void write_address(const struct sockaddr *address, char *out, socklen_t out_size)
{
    struct sockaddr_in v4;
    struct sockaddr_in6 v6;
    out[0] = '\0';
    if (address->sa_family == AF_INET) {
        memcpy(&v4, address, sizeof v4);
        (void)inet_ntop(AF_INET, &v4.sin_addr, out, out_size);
    } else if (address->sa_family == AF_INET6) {
        memcpy(&v6, address, sizeof v6);
        (void)inet_ntop(AF_INET6, &v6.sin6_addr, out, out_size);
        if (IN6_IS_ADDR_V4MAPPED(&v6.sin6_addr))
            (void)inet_ntop(AF_INET, &v6.sin6_addr.s6_addr[12], out, out_size);
    }
}

static void write_peer(struct exchange *exchange, char *out, socklen_t out_size)
{
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(exchange->connection, MHD_CONNECTION_INFO_CLIENT_ADDRESS);
    out[0] = '\0';
    if (info != NULL && info->client_addr != NULL)
        write_address(info->client_addr, out, out_size);
}

/* The address that the peer connected to: no name can be bent to it, so it needs no list. */
static void write_own_end(struct exchange *exchange, char *out, socklen_t out_size)
{
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(exchange->connection, MHD_CONNECTION_INFO_CONNECTION_FD);
    struct sockaddr_storage address = {0};
    socklen_t size = sizeof address;
    out[0] = '\0';
    if (info != NULL && getsockname(info->connect_fd, (struct sockaddr *)&address, &size) == 0)
        write_address((const struct sockaddr *)&address, out, out_size);
}

static bool is_own_authority(struct exchange *exchange, const char *authority)
{
    const struct server *server = exchange->server;
    char host[256], own[64], port[8];
    if (is_own_name(server, authority))
        return true;
    if (server->door == NULL || strlen(authority) >= sizeof host)
        return false;
    snprintf(host, sizeof host, "%s", authority);
    snprintf(port, sizeof port, "%u", server->port);
    char *end = strrchr(host, ']');
    char *colon = strrchr(end != NULL ? end : host, ':');
    if (strcmp(colon != NULL ? colon + 1 : "443", port) != 0)
        return false;
    if (colon != NULL)
        *colon = '\0';
    char *name = host;
    if (end != NULL && host[0] == '[') {
        *end = '\0';
        name++;
    }
    write_own_end(exchange, own, sizeof own);
    return strcmp(name, own) == 0 || door_is_named(server->door, name);
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
    if (!is_own_authority(exchange, exchange_header(exchange, "Host"))) {
        if (exchange->server->door != NULL)
            answer_problem(exchange, 421,
                           "this bench does not go by that name; `names` under [serve] in "
                           "waned.ini lists more of them");
        else
            answer_problem(exchange, 421,
                           "this bench answers to 127.0.0.1:%u and localhost:%u only",
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
    const char *scheme = exchange->server->door != NULL ? "https://" : "http://";
    if (origin != NULL)
        is_foreign_origin = strncmp(origin, scheme, strlen(scheme)) != 0 ||
                            !is_own_authority(exchange, origin + strlen(scheme));
    if ((is_foreign_site && !is_look) || is_foreign_origin) {
        answer_problem(exchange, 403, "requests from other sites are refused");
        return false;
    }
    return true;
}

/* --- the door --- */

/* From this machine itself, and not passed on by a proxy on it: as on the loopback. */
static bool is_local(struct exchange *exchange)
{
    char peer[64];
    write_peer(exchange, peer, sizeof peer);
    return (strncmp(peer, "127.", 4) == 0 || strcmp(peer, "::1") == 0) &&
           is_own_name(exchange->server, exchange_header(exchange, "Host")) &&
           exchange_header(exchange, "Forwarded") == NULL &&
           exchange_header(exchange, "X-Forwarded-For") == NULL;
}

bool guard_tries(struct exchange *exchange)
{
    char peer[64];
    write_peer(exchange, peer, sizeof peer);
    if (!door_is_slowed(exchange->server->door, peer))
        return true;
    answer_header(exchange, "Retry-After", "60");
    answer_problem(exchange, 429, "too many wrong tries from %s; wait a minute", peer);
    return false;
}

void guard_note_wrong(struct exchange *exchange, const char *what)
{
    char peer[64], sentence[160];
    unsigned untold = 0;
    const struct serve_daemon *daemon = &exchange->server->daemon;
    write_peer(exchange, peer, sizeof peer);
    if (!door_note_wrong(exchange->server->door, peer, &untold) || daemon->tell == NULL)
        return;
    snprintf(sentence, sizeof sentence, "a wrong %s from %s (%u more not told of)", what, peer,
             untold);
    daemon->tell(daemon->user, sentence);
}

/* The token of the header, else of the cookie, or NULL. */
static const char *find_token(struct exchange *exchange)
{
    char cookie[64];
    const char *header = exchange_header(exchange, "Authorization");
    if (header != NULL) /* RFC 6750, section 2.1; a scheme's case does not count */
        return strlen(header) > 7 && (header[0] | 0x20) == 'b' &&
                       strncmp(header + 1, "earer ", 6) == 0
                   ? header + 7
                   : "";
    join_cookie_name(exchange->server, cookie, sizeof cookie);
    return MHD_lookup_connection_value(exchange->connection, MHD_COOKIE_KIND, cookie);
}

/* A right token always passes, however many wrong ones came from the same address before. */
bool guard_door(struct exchange *exchange, unsigned method)
{
    struct server *server = exchange->server;
    exchange->can_change = server->door == NULL || is_local(exchange);
    if (exchange->can_change || exchange->route->handle == api_get_healthz ||
        exchange->route->handle == api_get_join)
        return true;
    const char *token = find_token(exchange);
    enum door_right right = token != NULL ? door_check(server->door, token) : DOOR_NONE;
    exchange->can_change = right == DOOR_CHANGE;
    if (right == DOOR_CHANGE || (right == DOOR_LOOK && method == METHOD_GET))
        return true;
    if (right == DOOR_LOOK) {
        answer_problem(exchange, 403, "your invitation is to look, not to change");
        return false;
    }
    if (token != NULL && !guard_tries(exchange))
        return false;
    if (token != NULL)
        guard_note_wrong(exchange, "token");
    answer_header(exchange, "WWW-Authenticate", "Bearer");
    answer_problem(exchange, 401,
                   "this bench is open to those it invited: run `wane invite` on its machine "
                   "and open the address that it prints");
    return false;
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
