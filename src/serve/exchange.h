/* One request and its answer, as the server's own files see it. Everything here runs on the HTTP
 * thread, unless said otherwise. */
#ifndef WANE_SERVE_EXCHANGE_H
#define WANE_SERVE_EXCHANGE_H

#include "wane/error.h"
#include "wane/serve.h"
#include "wane/text.h"

#include <microhttpd.h>
#include <pthread.h>
#include <stdbool.h>
#include <stdint.h>

#define METHOD_GET   1u
#define METHOD_POST  2u
#define METHOD_PUT   4u
#define METHOD_PATCH 8u

/* What a call takes in its body. */
enum body_kind { BODY_EMPTY, BODY_JSON, BODY_FILE };

struct exchange;
struct json_t;

/* One call of the table in routes.c. */
struct route {
    const char *path; /* "ID" stands for a positive number, "NAME" for a word of any kind */
    void (*handle)(struct exchange *exchange);
    unsigned method;
    enum body_kind body;
};

enum exchange_state {
    EXCHANGE_OPEN,    /* headers are in, the body may still come */
    EXCHANGE_WAITING, /* its connection sleeps until a job is answered */
    EXCHANGE_READY,   /* the answer is there, but not yet queued */
    EXCHANGE_SENT,
};

#define ANSWER_HEADERS_MAX 6

struct answer {
    unsigned status;
    const char *content_type; /* static */
    struct text body;
    struct MHD_Response *response; /* instead of the body */
    struct {
        const char *name; /* static */
        char value[192];
    } headers[ANSWER_HEADERS_MAX];
    unsigned header_count;
};

struct exchange {
    struct server *server;
    struct MHD_Connection *connection;
    const struct route *route;
    const char *path; /* decoded; borrowed from MHD for the current call only */
    bool is_head;
    bool can_change;           /* else only look; set by guard_door */
    enum exchange_state state; /* under server->jobs_mutex once it is WAITING */
    int64_t id;
    char name[SERVE_NAME_MAX + 1];
    struct text body;
    uint64_t body_size; /* what came, kept or not */
    bool is_body_too_large;
    int body_fd;         /* BODY_FILE: an unlinked temporary file, else -1 */
    struct json_t *json; /* the body, parsed by libjansson (query.c) */
    char if_match[64];
    struct serve_job job;
    bool is_submitted;
    struct answer answer;
};

struct stream_hub;
struct assets;
struct log_reader;
struct door;

struct server {
    struct serve_settings settings; /* its strings are copies of our own */
    struct serve_daemon daemon;
    struct MHD_Daemon *mhd;
    struct stream_hub *hub;
    struct assets *assets;
    struct door *door;      /* NULL: on the loopback, without TLS */
    struct log_reader *log; /* the HTTP thread's own: use server_log */
    struct tally tally;     /* the series that was asked for last; HTTP thread only */
    char address[64], url[320];
    char web_dir[4096], vendor_dir[4096], log_path[4096], version[32];
    unsigned port;
    int64_t started_ns;
    pthread_mutex_t jobs_mutex;
    pthread_cond_t jobs_done;
    unsigned jobs_out; /* taken by the daemon, not yet answered */
    bool is_quiet;
    bool is_log_changed;        /* log_path is another one than that of `log` */
    uint64_t requests, refused; /* for /metrics; HTTP thread only */
};

/* The log of now, on the HTTP thread's connection. NULL and *err when it cannot be opened. */
struct log_reader *server_log(struct server *server, struct error *err);

/* --- answers (exchange.c) --- */

void answer_header(struct exchange *exchange, const char *name, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
/* The body is in exchange->answer.body. */
void answer_json(struct exchange *exchange, unsigned status);
/* RFC 9457. `detail` NULL: the title alone. */
void answer_problem(struct exchange *exchange, unsigned status, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
void answer_error(struct exchange *exchange, const struct error *err);
/* Hands exchange->job to the daemon; the connection sleeps until it is answered. */
void exchange_submit(struct exchange *exchange, enum serve_call call);

/* --- guard.c: each fills the answer with a problem and returns false when it refuses --- */

/* A header's value, or NULL. Borrowed from MHD. */
const char *exchange_header(struct exchange *exchange, const char *name);
/* Exactly one Host, ours; one length of the body. */
bool guard_host(struct exchange *exchange);
/* Not from another site's page. */
bool guard_origin(struct exchange *exchange, unsigned method);
/* Not too many wrong tries from this peer; counts one more, and tells the daemon. Need a door. */
bool guard_tries(struct exchange *exchange);
void guard_note_wrong(struct exchange *exchange, const char *what);
/* Off the loopback: invited, and to what. Needs exchange->route. */
bool guard_door(struct exchange *exchange, unsigned method);
/* The two below need exchange->route. */
bool guard_content_type(struct exchange *exchange);
bool guard_length(struct exchange *exchange);
uint64_t guard_body_limit(const struct exchange *exchange);
void guard_answer_too_large(struct exchange *exchange);

/* --- problem.c --- */
void problem_write(struct text *out, unsigned status, const char *detail);
const char *problem_title(unsigned status);

/* --- words of the query string and keys of a JSON body (query.c). Each fills the answer with a
 * problem and returns false when something is wrong. --- */

/* Every word of the query string must be one of `words` (ending in NULL), and come once. */
bool query_check(struct exchange *exchange, const char *const *words);
/* NULL when the word is not there. */
const char *query_text(struct exchange *exchange, const char *word);
bool query_integer(struct exchange *exchange, const char *word, int64_t least, int64_t most,
                   int64_t *inout_value);
bool query_number(struct exchange *exchange, const char *word, double *inout_value);
/* Parses the body; an object is wanted. body_done frees it. */
bool body_parse(struct exchange *exchange);
void body_done(struct exchange *exchange);
/* Keys of the body: each must be one of `keys` (ending in NULL). */
bool body_check(struct exchange *exchange, const char *const *keys);
/* Absent: *out stays NULL. null: *out is NULL too, *out_is_there true. The text is at most
 * bytes_max long and holds no control character but (in notes) the newline. */
bool body_text(struct exchange *exchange, const char *key, size_t bytes_max, bool *out_is_there,
               const char **out);
/* null or absent: untouched. */
bool body_number(struct exchange *exchange, const char *key, double least, double most,
                 double *inout_value);
bool body_bool(struct exchange *exchange, const char *key, bool *inout_value);
/* A list of whole numbers 1 ... 32, as bits (bit K-1: K). */
bool body_channels(struct exchange *exchange, const char *key, unsigned *inout_bits);
bool body_has(struct exchange *exchange, const char *key);

/* --- routes.c --- */

/* Finds the call; fills exchange->id and ->name. NULL: exchange's answer says 404 or 405. */
const struct route *route_find(struct exchange *exchange, unsigned method);

/* --- handlers, one file a topic --- */
void api_get_state(struct exchange *exchange);
void api_get_join(struct exchange *exchange);
void join_cookie_name(const struct server *server, char *out, size_t out_size);
void api_get_healthz(struct exchange *exchange);
void api_get_metrics(struct exchange *exchange);
void api_get_stream(struct exchange *exchange);
void api_get_asset(struct exchange *exchange);
void api_list_strikes(struct exchange *exchange);
void api_get_strike(struct exchange *exchange);
void api_get_wave(struct exchange *exchange);
void api_get_plot(struct exchange *exchange);
void api_patch_strike(struct exchange *exchange);
void api_reread_strike(struct exchange *exchange);
void api_list_series(struct exchange *exchange);
void api_open_series(struct exchange *exchange);
void api_get_series(struct exchange *exchange);
void api_get_series_report(struct exchange *exchange);
void api_get_strike_report(struct exchange *exchange);
void api_patch_series(struct exchange *exchange);
void api_list_parts(struct exchange *exchange);
void api_get_part(struct exchange *exchange);
void api_put_part(struct exchange *exchange);
void api_list_inputs(struct exchange *exchange);
void api_put_input(struct exchange *exchange);
void api_get_trigger(struct exchange *exchange);
void api_put_trigger(struct exchange *exchange);
void api_read_recording(struct exchange *exchange);
void api_get_recent(struct exchange *exchange);
void api_add_measurement(struct exchange *exchange);
void api_export_csv(struct exchange *exchange);
void api_export_json(struct exchange *exchange);

/* --- stream.c --- */

/* max_watchers >= 1. */
struct stream_hub *stream_hub_create(unsigned watchers_max);
/* Ends every stream; returns true when none is left. Call it again until it is. */
bool stream_hub_end(struct stream_hub *hub);
void stream_hub_destroy(struct stream_hub *hub);
/* Ends the streams of now; new ones may come at once. */
void stream_hub_restart(struct stream_hub *hub);
unsigned stream_hub_watchers(struct stream_hub *hub);
void stream_hub_publish(struct stream_hub *hub, const char *event, int64_t id, const char *data);
void stream_hub_publish_newest(struct stream_hub *hub, bool is_forming, const char *data);
void stream_hub_tick(struct stream_hub *hub);

/* --- assets.c --- */

/* The names in the web folder, read once. Never fails: without a folder there is no page, and the
 * root says so. NULL when memory ran out. */
struct assets *assets_create(const char *web_dir, const char *vendor_dir);
void assets_destroy(struct assets *assets);
/* Whether this path is the page's. */
bool assets_has(const struct assets *assets, const char *path);

#endif
