#include "wane/serve.h"
#include "serve/door.h"
#include "serve/exchange.h"
#include "wane/clock.h"
#include "wane/log.h"

#include <arpa/inet.h>
#include <assert.h>
#include <errno.h>
#include <fcntl.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#define CONNECTIONS_BESIDE_WATCHERS 64 /* at the limit MHD lets new ones hang without a word */
#define TIMEOUT_S                   30u
#define UNSENT_TIMEOUT_MS           30000u /* a pulled cable is noticed after this long */
#define STOP_NS                     (CLOCK_NS_PER_S / 2)

/* --- answers --- */

static void add_header(struct MHD_Response *response, const char *name, const char *value)
{
    (void)MHD_add_response_header(response, name, value);
}

static void add_common_headers(struct MHD_Response *response, const struct answer *answer)
{
    bool has_cache_control = false, has_policy = false;
    add_header(response, "Content-Type", answer->content_type);
    for (unsigned i = 0; i < answer->header_count; i++) {
        add_header(response, answer->headers[i].name, answer->headers[i].value);
        has_policy |= strcmp(answer->headers[i].name, "Content-Security-Policy") == 0;
        has_cache_control |= strcmp(answer->headers[i].name, "Cache-Control") == 0;
    }
    if (!has_cache_control)
        add_header(response, "Cache-Control", "no-store");
    add_header(response, "X-Content-Type-Options", "nosniff");
    if (!has_policy)
        add_header(response, "Content-Security-Policy",
                   "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; "
                   "connect-src 'self'; worker-src 'self'; manifest-src 'self'; base-uri 'none'; "
                   "form-action 'none'; frame-ancestors 'none'");
    add_header(response, "Referrer-Policy", "no-referrer");
    add_header(response, "Cross-Origin-Opener-Policy", "same-origin");
    add_header(response, "Cross-Origin-Resource-Policy", "same-origin");
}

/* Queues the answer; the response takes the body's memory over. */
static enum MHD_Result send_answer(struct exchange *exchange)
{
    struct answer *answer = &exchange->answer;
    exchange->state = EXCHANGE_SENT;
    if (answer->status >= 400)
        exchange->server->refused++;
    if (answer->body.failed)
        return MHD_NO;
    struct MHD_Response *response = answer->response;
    answer->response = NULL;
    if (response == NULL) {
        char empty[] = "";
        response = answer->body.data != NULL
                       ? MHD_create_response_from_buffer(answer->body.length, answer->body.data,
                                                         MHD_RESPMEM_MUST_FREE)
                       : MHD_create_response_from_buffer(0, empty, MHD_RESPMEM_MUST_COPY);
        if (response == NULL)
            return MHD_NO;
        answer->body = (struct text){0};
    }
    add_common_headers(response, answer);
    enum MHD_Result is_queued = MHD_queue_response(exchange->connection, answer->status, response);
    MHD_destroy_response(response);
    return is_queued;
}

/* --- one request --- */

static unsigned method_of(const char *word)
{
    return strcmp(word, "GET") == 0 || strcmp(word, "HEAD") == 0 ? METHOD_GET
           : strcmp(word, "POST") == 0                           ? METHOD_POST
           : strcmp(word, "PUT") == 0                            ? METHOD_PUT
           : strcmp(word, "PATCH") == 0                          ? METHOD_PATCH
                                                                 : 0;
}

static int hex_value(char digit)
{
    return digit >= '0' && digit <= '9'   ? digit - '0'
           : digit >= 'a' && digit <= 'f' ? digit - 'a' + 10
           : digit >= 'A' && digit <= 'F' ? digit - 'A' + 10
                                          : -1;
}

/* %XX as MHD decodes it, but for %00: a text would end there and the rest go unseen. It becomes a
 * byte that no name, word or UTF-8 text holds. */
static size_t unescape(void *user, struct MHD_Connection *connection, char *text)
{
    (void)user;
    (void)connection;
    char *to = text;
    for (const char *from = text; *from != '\0'; from++) {
        int high = from[0] == '%' ? hex_value(from[1]) : -1;
        int low = high >= 0 ? hex_value(from[2]) : -1;
        if (low < 0) {
            *to++ = *from;
            continue;
        }
        int value = 16 * high + low;
        *to++ = (char)(value != 0 ? value : 0xFF);
        from += 2;
    }
    *to = '\0';
    return (size_t)(to - text);
}

static bool begin_exchange(struct exchange *exchange, const char *method_word)
{
    unsigned method = method_of(method_word);
    exchange->is_head = strcmp(method_word, "HEAD") == 0;
    exchange->server->requests++;
    if (!guard_host(exchange))
        return false;
    exchange->route = route_find(exchange, method);
    if (exchange->route == NULL || !guard_origin(exchange, method) || !guard_door(exchange, method))
        return false;
    const char *if_match = exchange_header(exchange, "If-Match");
    if (if_match != NULL)
        snprintf(exchange->if_match, sizeof exchange->if_match, "%s", if_match);
    return guard_content_type(exchange) && guard_length(exchange);
}

/* An unlinked file: it is gone when its descriptor is. */
static int open_temporary(void)
{
    const char *folder = getenv("TMPDIR");
    char path[4096];
    int length = snprintf(path, sizeof path, "%s/wane-XXXXXX", folder != NULL ? folder : "/tmp");
    if (length < 0 || length >= (int)sizeof path)
        return -1;
    int fd = mkstemp(path);
    if (fd < 0)
        return -1;
    (void)unlink(path);
    (void)fcntl(fd, F_SETFD, FD_CLOEXEC);
    return fd;
}

static bool write_all(int fd, const char *data, size_t size)
{
    while (size > 0) {
        ssize_t written = write(fd, data, size);
        if (written < 0 && errno == EINTR)
            continue;
        if (written <= 0)
            return false;
        data += written;
        size -= (size_t)written;
    }
    return true;
}

/* false: cut the connection. MHD refuses an answer in the middle of a body (traps: a 413 queued
 * there is lost), so what is too large is counted, thrown away and answered at its end, up to a
 * second limit. */
static bool take_body(struct exchange *exchange, const char *data, size_t size)
{
    exchange->body_size += size;
    if (exchange->body_size > guard_body_limit(exchange)) {
        exchange->is_body_too_large = true;
        text_done(&exchange->body);
        return exchange->body_size <= guard_body_limit(exchange) + SERVE_RECORDING_MAX;
    }
    if (exchange->route->body != BODY_FILE) {
        text_append_bytes(&exchange->body, data, size);
        return !exchange->body.failed;
    }
    if (exchange->body_fd < 0)
        exchange->body_fd = open_temporary();
    return exchange->body_fd >= 0 && write_all(exchange->body_fd, data, size);
}

/* A connection that sleeps must not be answered in the call that put it to sleep, however fast the
 * job was: MHD calls again once it is awake. */
static enum MHD_Result finish_request(struct exchange *exchange)
{
    if (exchange->is_body_too_large)
        guard_answer_too_large(exchange);
    else if (exchange->route->body != BODY_JSON || body_parse(exchange))
        exchange->route->handle(exchange);
    return exchange->is_submitted ? MHD_YES : send_answer(exchange);
}

static enum MHD_Result answer_request(void *user, struct MHD_Connection *connection,
                                      const char *url, const char *method, const char *version,
                                      const char *upload_data, size_t *upload_data_size,
                                      void **connection_user)
{
    (void)version;
    struct server *server = user;
    struct exchange *exchange = *connection_user;
    if (exchange == NULL) {
        exchange = calloc(1, sizeof *exchange);
        if (exchange == NULL)
            return MHD_NO;
        *exchange = (struct exchange){
            .server = server, .connection = connection, .path = url, .body_fd = -1};
        *connection_user = exchange;
        if (!begin_exchange(exchange, method))
            return send_answer(exchange);
        return MHD_YES;
    }
    exchange->path = url;
    if (*upload_data_size > 0) {
        bool is_taken = take_body(exchange, upload_data, *upload_data_size);
        *upload_data_size = 0;
        return is_taken ? MHD_YES : MHD_NO;
    }
    pthread_mutex_lock(&server->jobs_mutex);
    enum exchange_state state = exchange->state;
    pthread_mutex_unlock(&server->jobs_mutex);
    if (state == EXCHANGE_OPEN)
        return finish_request(exchange);
    return state == EXCHANGE_READY ? send_answer(exchange) : MHD_YES;
}

static void end_request(void *user, struct MHD_Connection *connection, void **connection_user,
                        enum MHD_RequestTerminationCode code)
{
    (void)user;
    (void)connection;
    (void)code;
    struct exchange *exchange = *connection_user;
    if (exchange == NULL)
        return;
    *connection_user = NULL;
    body_done(exchange);
    text_done(&exchange->body);
    text_done(&exchange->answer.body);
    if (exchange->answer.response != NULL)
        MHD_destroy_response(exchange->answer.response);
    if (exchange->body_fd >= 0)
        close(exchange->body_fd);
    free(exchange);
}

static void begin_connection(void *user, struct MHD_Connection *connection, void **socket_user,
                             enum MHD_ConnectionNotificationCode code)
{
    (void)user;
    (void)socket_user;
    if (code != MHD_CONNECTION_NOTIFY_STARTED)
        return;
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(connection, MHD_CONNECTION_INFO_CONNECTION_FD);
    unsigned timeout_ms = UNSENT_TIMEOUT_MS;
    if (info != NULL)
        (void)setsockopt(info->connect_fd, IPPROTO_TCP, TCP_USER_TIMEOUT, &timeout_ms,
                         sizeof timeout_ms);
}

/* --- start and stop --- */

static bool copy_setting(char *out, size_t out_size, const char *value, struct error *err)
{
    if (value == NULL)
        value = "";
    if (strlen(value) >= out_size)
        return error_set(err, ERROR_LIMIT, "%.60s...: the path is too long", value);
    memcpy(out, value, strlen(value) + 1);
    return true;
}

static bool parse_address(const char *address, unsigned port, struct sockaddr_storage *out,
                          bool *out_is_loopback, struct error *err)
{
    struct sockaddr_in v4 = {.sin_family = AF_INET, .sin_port = htons((uint16_t)port)};
    struct sockaddr_in6 v6 = {.sin6_family = AF_INET6, .sin6_port = htons((uint16_t)port)};
    bool is_loopback = false;
    if (inet_pton(AF_INET, address, &v4.sin_addr) == 1) {
        is_loopback = (ntohl(v4.sin_addr.s_addr) >> 24) == 127;
        memcpy(out, &v4, sizeof v4);
    } else if (inet_pton(AF_INET6, address, &v6.sin6_addr) == 1) {
        is_loopback = IN6_IS_ADDR_LOOPBACK(&v6.sin6_addr);
        memcpy(out, &v6, sizeof v6);
    } else {
        return error_set(err, ERROR_USAGE,
                         "listen %s: not an address; give one like 127.0.0.1:9263", address);
    }
    *out_is_loopback = is_loopback;
    return true;
}

/* Off the loopback nothing is served without TLS and invitations. */
static bool open_door(struct server *server, struct error *err)
{
    const struct serve_settings *settings = &server->settings;
    const struct door_settings wanted = {.folder = settings->state_dir,
                                         .address = server->address,
                                         .names = settings->names,
                                         .tls_key = settings->tls_key,
                                         .tls_certificate = settings->tls_certificate,
                                         .code_valid_s = settings->code_valid_s};
    if (settings->state_dir == NULL)
        return error_set(err, ERROR_USAGE,
                         "listen %s: other machines need TLS and invitations, and there is no "
                         "folder for them; or use an SSH tunnel: ssh -L 9263:127.0.0.1:9263 "
                         "THIS-MACHINE",
                         server->address);
    if (MHD_is_feature_supported(MHD_FEATURE_TLS) != MHD_YES)
        return error_set(err, ERROR_USAGE, "listen %s: this libmicrohttpd has no TLS",
                         server->address);
    server->door = door_open(&wanted, err);
    return server->door != NULL;
}

/* What TLS adds to MHD's options. TLS 1.2 and up (RFC 8996). */
static void list_tls_options(const struct server *server, struct MHD_OptionItem *out)
{
    size_t count = 0;
    if (server->door != NULL) {
        union {
            const char *text;
            void *pointer; /* MHD only reads what it points to */
        } key = {.text = door_key(server->door)}, pem = {.text = door_certificate(server->door)},
          words = {.text = "NORMAL:-VERS-ALL:+VERS-TLS1.3:+VERS-TLS1.2"};
        out[count++] = (struct MHD_OptionItem){MHD_OPTION_HTTPS_MEM_KEY, 0, key.pointer};
        out[count++] = (struct MHD_OptionItem){MHD_OPTION_HTTPS_MEM_CERT, 0, pem.pointer};
        out[count++] = (struct MHD_OptionItem){MHD_OPTION_HTTPS_PRIORITIES, 0, words.pointer};
    }
    out[count] = (struct MHD_OptionItem){MHD_OPTION_END, 0, NULL};
}

static int open_listener(const struct sockaddr_storage *address, const char *shown, unsigned port,
                         struct error *err)
{
    int one = 1;
    socklen_t size =
        address->ss_family == AF_INET ? sizeof(struct sockaddr_in) : sizeof(struct sockaddr_in6);
    int fd = socket(address->ss_family, SOCK_STREAM, 0);
    if (fd < 0) {
        error_set(err, ERROR_DEVICE, "listen %s: %s", shown, strerror(errno));
        return -1;
    }
    (void)fcntl(fd, F_SETFD, FD_CLOEXEC);
    (void)fcntl(fd, F_SETFL, O_NONBLOCK);
    /* A port in TIME_WAIT may be taken again; one that somebody listens on may not. */
    (void)setsockopt(fd, SOL_SOCKET, SO_REUSEADDR, &one, sizeof one);
    if (bind(fd, (const struct sockaddr *)address, size) != 0 || listen(fd, 128) != 0) {
        if (errno == EADDRINUSE)
            error_set(err, ERROR_DEVICE,
                      "listen %s:%u: another program has this port (perhaps a waned that still "
                      "runs); stop it, or take another port with --listen",
                      shown, port);
        else
            error_set(err, ERROR_DEVICE, "listen %s:%u: %s", shown, port, strerror(errno));
        close(fd);
        return -1;
    }
    return fd;
}

static unsigned port_of(int fd)
{
    struct sockaddr_storage address;
    socklen_t size = sizeof address;
    if (getsockname(fd, (struct sockaddr *)&address, &size) != 0)
        return 0;
    if (address.ss_family == AF_INET) {
        struct sockaddr_in v4;
        memcpy(&v4, &address, sizeof v4);
        return ntohs(v4.sin_port);
    }
    struct sockaddr_in6 v6;
    memcpy(&v6, &address, sizeof v6);
    return ntohs(v6.sin6_port);
}

static bool start_http(struct server *server, struct error *err)
{
    struct sockaddr_storage address = {0};
    bool is_loopback = false;
    if (!parse_address(server->settings.address, server->settings.port, &address, &is_loopback,
                       err) ||
        (!is_loopback && !open_door(server, err)))
        return false;
    int fd = open_listener(&address, server->settings.address, server->settings.port, err);
    if (fd < 0)
        return false;
    bool is_v6 = address.ss_family == AF_INET6;
    server->port = port_of(fd);
    snprintf(server->url, sizeof server->url, is_v6 ? "http://[%s]:%u/" : "http://%s:%u/",
             server->address, server->port);
    if (server->door != NULL &&
        !door_set_port(server->door, server->port, server->url, sizeof server->url, err)) {
        close(fd);
        return false;
    }
    struct MHD_OptionItem tls[4];
    list_tls_options(server, tls);
    unsigned connections = server->settings.watchers_max + CONNECTIONS_BESIDE_WATCHERS;
    server->mhd = MHD_start_daemon(
        MHD_USE_EPOLL_INTERNAL_THREAD | MHD_ALLOW_SUSPEND_RESUME |
            (server->door != NULL ? MHD_USE_TLS : 0u),
        (uint16_t)server->port, NULL, NULL, answer_request, server, MHD_OPTION_LISTEN_SOCKET, fd,
        MHD_OPTION_CONNECTION_LIMIT, connections, MHD_OPTION_CONNECTION_TIMEOUT, TIMEOUT_S,
        MHD_OPTION_STRICT_FOR_CLIENT, 1, MHD_OPTION_UNESCAPE_CALLBACK, unescape, NULL,
        MHD_OPTION_NOTIFY_COMPLETED, end_request, NULL, MHD_OPTION_NOTIFY_CONNECTION,
        begin_connection, NULL, MHD_OPTION_ARRAY, tls, MHD_OPTION_END);
    if (server->mhd == NULL) {
        close(fd);
        return error_set(err, ERROR_DEVICE, "the HTTP server did not start: %s", strerror(errno));
    }
    return true;
}

static void destroy_server(struct server *server)
{
    stream_hub_destroy(server->hub);
    assets_destroy(server->assets);
    door_close(server->door);
    tally_done(&server->tally);
    log_reader_close(server->log);
    pthread_cond_destroy(&server->jobs_done);
    pthread_mutex_destroy(&server->jobs_mutex);
    free(server);
}

static bool prepare_server(struct server *server, const struct serve_settings *settings,
                           struct error *err)
{
    if (!copy_setting(server->address, sizeof server->address, settings->address, err) ||
        !copy_setting(server->web_dir, sizeof server->web_dir, settings->web_dir, err) ||
        !copy_setting(server->vendor_dir, sizeof server->vendor_dir, settings->vendor_dir, err) ||
        !copy_setting(server->log_path, sizeof server->log_path, settings->log_path, err) ||
        !copy_setting(server->version, sizeof server->version, settings->version, err))
        return false;
    server->settings = *settings;
    server->settings.address = server->address;
    if (server->settings.watchers_max == 0)
        server->settings.watchers_max = SERVE_WATCHERS_MAX;
    server->started_ns = clock_monotonic_ns();
    server->assets = assets_create(server->web_dir, server->vendor_dir);
    server->hub = stream_hub_create(server->settings.watchers_max);
    if (server->assets == NULL || server->hub == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    server->log = log_reader_open(server->log_path, err);
    return server->log != NULL;
}

struct server *serve_start(const struct serve_settings *settings, const struct serve_daemon *daemon,
                           struct error *err)
{
    struct server *server = calloc(1, sizeof *server);
    if (server == NULL) {
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    server->daemon = *daemon;
    pthread_mutex_init(&server->jobs_mutex, NULL);
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&server->jobs_done, &attributes);
    pthread_condattr_destroy(&attributes);
    if (!prepare_server(server, settings, err) || !start_http(server, err)) {
        destroy_server(server);
        return NULL;
    }
    return server;
}

const char *serve_url(const struct server *server)
{
    return server->url;
}

const char *serve_fingerprint(const struct server *server)
{
    return server->door != NULL ? door_fingerprint(server->door) : NULL;
}

void serve_quiet(struct server *server)
{
    pthread_mutex_lock(&server->jobs_mutex);
    server->is_quiet = true;
    pthread_mutex_unlock(&server->jobs_mutex);
}

/* MHD aborts the process when it is stopped while a connection sleeps: first every job must be
 * answered and every stream ended. */
bool serve_stop(struct server *server)
{
    if (server == NULL)
        return true;
    serve_quiet(server);
    int listener = MHD_quiesce_daemon(server->mhd);
    int64_t deadline_ns = clock_monotonic_ns() + STOP_NS;
    struct timespec deadline = {.tv_sec = (time_t)(deadline_ns / CLOCK_NS_PER_S),
                                .tv_nsec = (long)(deadline_ns % CLOCK_NS_PER_S)};
    pthread_mutex_lock(&server->jobs_mutex);
    while (server->jobs_out > 0 &&
           pthread_cond_timedwait(&server->jobs_done, &server->jobs_mutex, &deadline) == 0) {
    }
    bool is_idle = server->jobs_out == 0;
    pthread_mutex_unlock(&server->jobs_mutex);
    while (!stream_hub_end(server->hub) && clock_monotonic_ns() < deadline_ns)
        clock_sleep_until(clock_monotonic_ns() + CLOCK_NS_PER_S / 500);
    if (listener >= 0)
        close(listener);
    if (!is_idle || !stream_hub_end(server->hub))
        return false; /* the process is about to end: a leak is better than MHD's abort */
    MHD_stop_daemon(server->mhd);
    destroy_server(server);
    return true;
}

/* Any thread; the HTTP thread changes over when it next needs the log. */
void serve_change_log(struct server *server, const char *path)
{
    pthread_mutex_lock(&server->jobs_mutex);
    snprintf(server->log_path, sizeof server->log_path, "%s", path);
    server->is_log_changed = true;
    pthread_mutex_unlock(&server->jobs_mutex);
    stream_hub_restart(server->hub);
}

struct log_reader *server_log(struct server *server, struct error *err)
{
    char path[sizeof server->log_path];
    pthread_mutex_lock(&server->jobs_mutex);
    bool is_changed = server->is_log_changed;
    memcpy(path, server->log_path, sizeof path);
    server->is_log_changed = false;
    pthread_mutex_unlock(&server->jobs_mutex);
    if (is_changed || server->log == NULL) {
        tally_done(&server->tally);
        log_reader_close(server->log);
        server->log = log_reader_open(path, err);
    }
    return server->log;
}

void serve_publish_strike(struct server *server, int64_t id, const char *data)
{
    stream_hub_publish(server->hub, "strike", id, data);
}

void serve_publish(struct server *server, const char *event, const char *data)
{
    stream_hub_publish(server->hub, event, 0, data);
}

void serve_publish_level(struct server *server, const char *data)
{
    stream_hub_publish_newest(server->hub, false, data);
}

void serve_publish_forming(struct server *server, const char *data)
{
    stream_hub_publish_newest(server->hub, true, data);
}

void serve_clear_forming(struct server *server)
{
    stream_hub_publish_newest(server->hub, true, NULL);
}

void serve_tick(struct server *server)
{
    /* Who was shut out does not come back; the others' browsers do, at once. */
    if (server->door != NULL && door_take_revoked(server->door))
        stream_hub_restart(server->hub);
    stream_hub_tick(server->hub);
}

unsigned serve_watchers(const struct server *server)
{
    return stream_hub_watchers(server->hub);
}
