/* The event stream (WHATWG HTML, section 9.2: server-sent events).
 *
 * One ring of events is shared by all watchers; each has a cursor. Levels and forming readings are
 * not in the ring: only the newest of each is kept. A watcher that falls so far behind that the
 * ring has gone on without it gets what strikes it missed from the log, and a `reset` for the rest.
 *
 *   publish (any thread) --> ring, newest --> [mutex] --> reader callback (HTTP thread) --> socket
 *
 * Invariants: (1) a watcher is asleep (its connection suspended) only if is_asleep, both under the
 * mutex; (2) a watcher that is not asleep will be asked by MHD without anybody's doing; (3) a
 * strike goes to a watcher once, in the order of ids: those up to last_id are skipped. A strike is
 * in the log before it is published, so replaying the log and then following the ring from where it
 * stood before misses none. */
#include "serve/exchange.h"
#include "wane/clock.h"
#include "wane/log.h"

#include <assert.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define RING_SIZE         512 /* events; at ten strikes a second most of a minute */
#define RING_BYTES_MAX    (4u << 20)
#define REPLAY_MAX        2000 /* more missed strikes than this: `reset` */
#define REPLAY_PAGE       20
#define HEARTBEAT_NS      (10 * CLOCK_NS_PER_S)
#define STREAM_BLOCK_SIZE 8192
#define KEPT_BUFFER_BYTES 4096 /* a watcher that has nothing to send keeps no more than this */

struct stream_event {
    const char *event; /* static */
    int64_t id;        /* 0: not a strike */
    char *data;
    size_t data_length;
};

struct watcher {
    struct stream_hub *hub;
    struct server *server;
    struct MHD_Connection *connection;
    struct watcher *previous, *next;
    uint64_t cursor; /* number of the next event of the ring */
    uint64_t level_seen, forming_seen;
    int64_t last_id;      /* newest strike that was sent or is not wanted */
    int64_t replay_until; /* 0: no replay; else strikes up to this id come from the log */
    int64_t written_ns;
    bool is_asleep;
    bool wants_heartbeat;
    bool is_stale;   /* follows a log that is no longer written */
    struct text out; /* HTTP thread only */
    size_t out_sent;
};

struct stream_hub {
    pthread_mutex_t mutex;
    struct stream_event ring[RING_SIZE];
    uint64_t begin, end; /* numbers of the oldest event kept, and of the next one */
    size_t ring_bytes;
    char *newest[2]; /* level, forming */
    uint64_t newest_number[2];
    struct watcher *watchers;
    unsigned watcher_count, watchers_max;
    bool is_ending;
};

struct stream_hub *stream_hub_create(unsigned watchers_max)
{
    struct stream_hub *hub = calloc(1, sizeof *hub);
    if (hub == NULL)
        return NULL;
    hub->watchers_max = watchers_max;
    pthread_mutex_init(&hub->mutex, NULL);
    return hub;
}

static void drop_oldest(struct stream_hub *hub)
{
    struct stream_event *oldest = &hub->ring[hub->begin++ % RING_SIZE];
    hub->ring_bytes -= oldest->data_length;
    free(oldest->data);
    oldest->data = NULL;
}

void stream_hub_destroy(struct stream_hub *hub)
{
    if (hub == NULL)
        return;
    assert(hub->watchers == NULL);
    while (hub->begin != hub->end)
        drop_oldest(hub);
    free(hub->newest[0]);
    free(hub->newest[1]);
    pthread_mutex_destroy(&hub->mutex);
    free(hub);
}

static void wake_watcher(struct watcher *watcher)
{
    if (!watcher->is_asleep)
        return;
    watcher->is_asleep = false;
    MHD_resume_connection(watcher->connection);
}

static void wake_all(struct stream_hub *hub)
{
    for (struct watcher *watcher = hub->watchers; watcher != NULL; watcher = watcher->next)
        wake_watcher(watcher);
}

bool stream_hub_end(struct stream_hub *hub)
{
    pthread_mutex_lock(&hub->mutex);
    hub->is_ending = true;
    wake_all(hub);
    bool is_empty = hub->watchers == NULL;
    pthread_mutex_unlock(&hub->mutex);
    return is_empty;
}

void stream_hub_restart(struct stream_hub *hub)
{
    pthread_mutex_lock(&hub->mutex);
    while (hub->begin != hub->end)
        drop_oldest(hub);
    for (struct watcher *watcher = hub->watchers; watcher != NULL; watcher = watcher->next)
        watcher->is_stale = true;
    wake_all(hub);
    pthread_mutex_unlock(&hub->mutex);
}

unsigned stream_hub_watchers(struct stream_hub *hub)
{
    pthread_mutex_lock(&hub->mutex);
    unsigned count = hub->watcher_count;
    pthread_mutex_unlock(&hub->mutex);
    return count;
}

static char *copy_text(const char *text, size_t length)
{
    char *copy = malloc(length + 1);
    if (copy != NULL)
        memcpy(copy, text, length + 1);
    return copy;
}

void stream_hub_publish(struct stream_hub *hub, const char *event, int64_t id, const char *data)
{
    size_t length = strlen(data);
    char *copy = copy_text(data, length);
    pthread_mutex_lock(&hub->mutex);
    while (hub->begin != hub->end &&
           (hub->end - hub->begin == RING_SIZE || hub->ring_bytes + length > RING_BYTES_MAX))
        drop_oldest(hub);
    if (copy != NULL) {
        hub->ring[hub->end++ % RING_SIZE] =
            (struct stream_event){.event = event, .id = id, .data = copy, .data_length = length};
        hub->ring_bytes += length;
    } else {
        /* No memory: whoever follows sees a gap in the numbers and goes to the log for strikes. */
        while (hub->begin != hub->end)
            drop_oldest(hub);
        hub->begin = ++hub->end;
    }
    wake_all(hub);
    pthread_mutex_unlock(&hub->mutex);
}

void stream_hub_publish_newest(struct stream_hub *hub, bool is_forming, const char *data)
{
    char *copy = data != NULL ? copy_text(data, strlen(data)) : NULL;
    pthread_mutex_lock(&hub->mutex);
    free(hub->newest[is_forming]);
    hub->newest[is_forming] = copy;
    if (copy != NULL) {
        hub->newest_number[is_forming]++;
        wake_all(hub);
    }
    pthread_mutex_unlock(&hub->mutex);
}

void stream_hub_tick(struct stream_hub *hub)
{
    int64_t now_ns = clock_monotonic_ns();
    pthread_mutex_lock(&hub->mutex);
    for (struct watcher *watcher = hub->watchers; watcher != NULL; watcher = watcher->next) {
        if (watcher->is_asleep && now_ns - watcher->written_ns > HEARTBEAT_NS) {
            watcher->wants_heartbeat = true;
            wake_watcher(watcher);
        }
    }
    pthread_mutex_unlock(&hub->mutex);
}

static void write_event(struct watcher *watcher, const char *event, int64_t id, const char *data,
                        size_t data_length)
{
    struct text *out = &watcher->out;
    text_append(out, "event: ");
    text_append(out, event);
    if (id > 0)
        text_appendf(out, "\nid: %lld", (long long)id);
    text_append(out, "\ndata: ");
    text_append_bytes(out, data, data_length);
    text_append(out, "\n\n");
}

/* One page of strikes from the log. HTTP thread, without the mutex. false: the stream must end (the
 * browser comes back and asks again). */
static bool replay_page(struct watcher *watcher)
{
    struct text lines = {0};
    int64_t ids[REPLAY_PAGE];
    size_t count = 0;
    struct error err;
    struct log_reader *log = server_log(watcher->server, &err);
    if (log == NULL ||
        !log_read_after(log, watcher->last_id, REPLAY_PAGE, &lines, ids, &count, &err)) {
        text_done(&lines);
        return false;
    }
    const char *line = lines.data;
    for (size_t i = 0; i < count; i++) {
        size_t length = strcspn(line, "\n");
        write_event(watcher, "strike", ids[i], line, length);
        watcher->last_id = ids[i];
        line += length + 1;
    }
    if (count < REPLAY_PAGE || watcher->last_id >= watcher->replay_until)
        watcher->replay_until = 0;
    text_done(&lines);
    return true;
}

/* The ring went on without this watcher: strikes come from the log, the rest the page must fetch.
 */
static void fall_back_to_log(struct watcher *watcher)
{
    struct log_counts counts;
    struct error err;
    watcher->cursor = watcher->hub->end;
    char data[64];
    struct log_reader *log = server_log(watcher->server, &err);
    bool is_known = log != NULL && log_counts(log, &counts, &err);
    snprintf(data, sizeof data, "{\"newest\":%lld}", is_known ? (long long)counts.newest_id : 0LL);
    if (is_known && watcher->last_id > 0 && counts.newest_id - watcher->last_id <= REPLAY_MAX)
        watcher->replay_until = counts.newest_id;
    else if (is_known)
        watcher->last_id = counts.newest_id;
    write_event(watcher, "reset", 0, data, strlen(data));
}

/* With the mutex held. */
static void take_from_ring(struct watcher *watcher)
{
    struct stream_hub *hub = watcher->hub;
    if (watcher->cursor < hub->begin) {
        fall_back_to_log(watcher);
        return;
    }
    while (watcher->cursor < hub->end && watcher->out.length < STREAM_BLOCK_SIZE) {
        const struct stream_event *event = &hub->ring[watcher->cursor++ % RING_SIZE];
        if (event->id > 0 && event->id <= watcher->last_id)
            continue;
        if (event->id > 0)
            watcher->last_id = event->id;
        write_event(watcher, event->event, event->id, event->data, event->data_length);
    }
    if (watcher->cursor < hub->end)
        return;
    uint64_t *const seen[2] = {&watcher->level_seen, &watcher->forming_seen};
    static const char *const names[2] = {"level", "forming"};
    for (int kind = 1; kind >= 0; kind--) {
        if (*seen[kind] != hub->newest_number[kind] && hub->newest[kind] != NULL)
            write_event(watcher, names[kind], 0, hub->newest[kind], strlen(hub->newest[kind]));
        *seen[kind] = hub->newest_number[kind];
    }
    if (watcher->out.length == 0 && watcher->wants_heartbeat)
        text_append(&watcher->out, ":\n\n");
    watcher->wants_heartbeat = false;
}

static size_t send_some(struct watcher *watcher, char *buffer, size_t buffer_size)
{
    size_t count = watcher->out.length - watcher->out_sent;
    if (count > buffer_size)
        count = buffer_size;
    memcpy(buffer, watcher->out.data + watcher->out_sent, count);
    watcher->out_sent += count;
    if (watcher->out_sent == watcher->out.length) {
        watcher->out_sent = 0;
        if (watcher->out.capacity > KEPT_BUFFER_BYTES)
            text_done(&watcher->out);
        else
            text_clear(&watcher->out);
    }
    watcher->written_ns = clock_monotonic_ns();
    return count;
}

static ssize_t read_stream(void *user, uint64_t position, char *buffer, size_t buffer_size)
{
    (void)position;
    struct watcher *watcher = user;
    struct stream_hub *hub = watcher->hub;
    ssize_t result = 0;
    pthread_mutex_lock(&hub->mutex);
    for (;;) {
        if (watcher->out.failed || watcher->is_stale || hub->is_ending) {
            result = MHD_CONTENT_READER_END_OF_STREAM;
            break;
        }
        if (watcher->out.length > 0) {
            result = (ssize_t)send_some(watcher, buffer, buffer_size);
            break;
        }
        if (watcher->replay_until > 0) {
            pthread_mutex_unlock(&hub->mutex);
            bool is_read = replay_page(watcher);
            pthread_mutex_lock(&hub->mutex);
            if (!is_read) {
                result = MHD_CONTENT_READER_END_OF_STREAM;
                break;
            }
            continue;
        }
        take_from_ring(watcher);
        if (watcher->out.length == 0 && watcher->replay_until == 0) {
            watcher->is_asleep = true;
            MHD_suspend_connection(watcher->connection);
            break;
        }
    }
    pthread_mutex_unlock(&hub->mutex);
    return result;
}

static void leave_stream(void *user)
{
    struct watcher *watcher = user;
    struct stream_hub *hub = watcher->hub;
    pthread_mutex_lock(&hub->mutex);
    if (watcher->previous != NULL)
        watcher->previous->next = watcher->next;
    else
        hub->watchers = watcher->next;
    if (watcher->next != NULL)
        watcher->next->previous = watcher->previous;
    hub->watcher_count--;
    pthread_mutex_unlock(&hub->mutex);
    text_done(&watcher->out);
    free(watcher);
}

/* Puts the watcher on the list; from here on it follows the ring. false: too many already. */
static bool join_stream(struct stream_hub *hub, struct watcher *watcher)
{
    pthread_mutex_lock(&hub->mutex);
    bool is_room = hub->watcher_count < hub->watchers_max && !hub->is_ending;
    if (is_room) {
        watcher->cursor = hub->end;
        watcher->next = hub->watchers;
        if (hub->watchers != NULL)
            hub->watchers->previous = watcher;
        hub->watchers = watcher;
        hub->watcher_count++;
    }
    pthread_mutex_unlock(&hub->mutex);
    return is_room;
}

/* First bytes: `:ok` so that the browser calls onopen at once, and how soon to come back. */
static void write_hello(struct exchange *exchange, struct watcher *watcher,
                        const struct log_counts *counts)
{
    struct server *server = exchange->server;
    struct text data = {0};
    struct json_writer json = {.text = &data};
    json_open_object(&json, NULL);
    json_string(&json, "log", counts->token);
    json_string(&json, "version", server->version);
    json_integer(&json, "newest", counts->newest_id);
    json_integer(&json, "revision", counts->revision);
    json_open_object(&json, "state");
    server->daemon.write_state(server->daemon.user, &json);
    json_bool(&json, "can_change", exchange->can_change);
    json_close_object(&json);
    json_close_object(&json);
    text_append(&watcher->out, ":ok\nretry: 2000\n\n");
    if (data.failed || data.data == NULL)
        watcher->out.failed = true;
    else
        write_event(watcher, "hello", 0, data.data, data.length);
    text_done(&data);
}

/* Where to begin: nothing is replayed for a fresh stream. */
static void plan_replay(struct watcher *watcher, bool has_after, int64_t after,
                        const struct log_counts *counts)
{
    if (!has_after)
        return;
    if (after > counts->newest_id || counts->newest_id - after > REPLAY_MAX) {
        char data[64];
        snprintf(data, sizeof data, "{\"newest\":%lld}", (long long)counts->newest_id);
        write_event(watcher, "reset", 0, data, strlen(data));
        watcher->last_id = counts->newest_id;
        return;
    }
    watcher->last_id = after;
    watcher->replay_until = counts->newest_id > after ? counts->newest_id : 0;
}

/* Last-Event-ID wins over ?after=: the browser sends it when it comes back by itself. */
static bool read_after(struct exchange *exchange, bool *out_has_after, int64_t *out_after)
{
    static const char *const words[] = {"after", NULL};
    *out_after = 0;
    if (!query_check(exchange, words) ||
        !query_integer(exchange, "after", 0, INT64_MAX / 2, out_after))
        return false;
    *out_has_after = query_text(exchange, "after") != NULL;
    const char *last =
        MHD_lookup_connection_value(exchange->connection, MHD_HEADER_KIND, "Last-Event-ID");
    if (last == NULL || last[0] == '\0')
        return true;
    size_t length = strlen(last);
    if (length > 15 || strspn(last, "0123456789") != length) {
        answer_problem(exchange, 400, "Last-Event-ID: must be the number of a strike");
        return false;
    }
    *out_after = strtoll(last, NULL, 10);
    *out_has_after = true;
    return true;
}

void api_get_stream(struct exchange *exchange)
{
    struct server *server = exchange->server;
    bool has_after = false;
    int64_t after = 0;
    if (!read_after(exchange, &has_after, &after))
        return;
    struct watcher *watcher = calloc(1, sizeof *watcher);
    if (watcher == NULL) {
        answer_problem(exchange, 503, "out of memory");
        return;
    }
    *watcher = (struct watcher){.hub = server->hub,
                                .server = server,
                                .connection = exchange->connection,
                                .written_ns = clock_monotonic_ns()};
    if (exchange->is_head || !join_stream(server->hub, watcher)) {
        free(watcher);
        answer_header(exchange, "Retry-After", "5");
        answer_problem(exchange, 503,
                       "%u pages already watch this bench: close one, this page tries again",
                       stream_hub_watchers(server->hub));
        return;
    }
    struct log_counts counts;
    struct error err;
    struct MHD_Response *response = NULL;
    struct log_reader *log = server_log(server, &err);
    bool is_known = log != NULL && log_counts(log, &counts, &err);
    if (is_known) {
        write_hello(exchange, watcher, &counts);
        plan_replay(watcher, has_after, after, &counts);
        response = MHD_create_response_from_callback(MHD_SIZE_UNKNOWN, STREAM_BLOCK_SIZE,
                                                     read_stream, watcher, leave_stream);
    }
    if (response == NULL) {
        leave_stream(watcher);
        answer_problem(exchange, 503, "%s", is_known ? "out of memory" : err.text);
        return;
    }
    exchange->answer.response = response;
    answer_header(exchange, "X-Accel-Buffering", "no");
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/event-stream";
    exchange->state = EXCHANGE_READY;
}
