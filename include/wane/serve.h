/* The HTTP server: turns requests into bytes and events into a stream. It measures nothing, holds
 * only read-only connections to the log, and passes everything that changes something on to the
 * daemon as a job, whose connection sleeps until the job is answered.
 *
 * JSON that the page draws from (besides contract.md). Times of plots are seconds after the onset.
 * All unknown numbers are null.
 *
 * GET /api/v1/state
 *   {"version":"0.1.0","time":"2026-03-01T12:00:00.000Z","uptime_s":12.5,
 *    "input":{"name":"simulated","kind":"simulated"|"recording"|"card"|"none",
 *             "state":"listening"|"lost"|"none","ended":false (a recording was heard to its end),
 *             "rate_hz":48000,"channels":2,"channel":1 (the first heard),"channels_heard":[1],
 *             "warnings":["..."],"since":TIME of the state's begin,"text":"why it is lost" or null,
 *             "lost_frames":0 (since it was opened),"opened":TIME},
 *    "level":{"dbfs","noise_dbfs","trigger_dbfs","clipped","ringing"} (null without an input),
 *    "trigger":{as GET /trigger},
 *    "series":null or {"id","name","input","part","specimen"}: GET /series/ID tells the rest,
 *    "log":{"token","path","newest":ID,"revision":R,"strikes":N,
 *           "state":"keeping"|"full"|"closed","text":null or why,"unkept":N (heard, not kept),
 *           "unkept_since":TIME or null,"unread":N (kept, not yet read)},
 *    "watchers":3,"watchers_max":200,"clock_u_ppm":null,"can_change":true}
 *
 * GET, PUT /api/v1/trigger (ETag; PUT needs If-Match); null: chosen by itself
 *   {"trigger_db":null|6...60 (over the floor),"f_low_hz":null,"f_high_hz":null,"hold_off_s":null,
 *    "window_max_s":null}
 * GET /api/v1/series/ID: see log_read_series_json, with "part_problem" (why the sheet that the
 *   series names is not used, or null) and "statistics" (series.h)
 * PATCH /api/v1/series/ID {"name","close":true}, or {"specimen":"17"} or {"next_specimen":true}
 *   (counts the number at its end up): the next specimen closes this series and opens a new one for
 *   the same part; the answer is the new series
 * GET /api/v1/series/ID/report, /api/v1/strikes/ID/report: one HTML file, ready to print
 * GET /api/v1/parts
 *   {"parts":[{"name","version","changed","etag"} (in the log), {"name","file":true,"etag"} (in a
 *    folder)]}
 * PUT /api/v1/parts/NAME {"sheet"}; a sheet with mistakes is refused (422), "complaints":["..."]
 *   has all of them with their lines
 * Strikes of a series with a part sheet have "decision":"inside"|"outside"|"not-decided"|null and
 *   "limits":[as in the statistics]; their modes carry the series' labels, "other" for the rest
 * GET /api/v1/inputs
 *   {"inputs":[{"name","kind":"card"|"simulated","host","channels","rate_hz","warnings":[]}]}
 * PUT /api/v1/input {"name":"...","rate_hz":null,"channel":1 or "channels_heard":[1,2]}
 *   answers the `input` object of /state. "simulated" is the bench; a path is never taken.
 *
 * Events of /api/v1/stream, `data:` on one line
 *   hello    {"log":TOKEN,"version","newest":ID,"revision":R,"state":{as GET /state}}
 *   level    {"dbfs","noise_dbfs","trigger_dbfs","clipped","ringing","channel",
 *             "channels":[{"channel","dbfs",...}] (only with several channels),
 *             "time":TIME}; once a second with null numbers while there is no input
 *   forming  {"rang_s":0.35,"time":TIME,"input","channel", and the keys of a strike from onset_s to
 *             modes as far as they are known}; `verdict` in it is what it would be now
 *   strike, changed, unkept: the object of GET /strikes/ID (unkept: "id":null)
 *   series   {as GET /series/ID}; input {the `input` object of /state};
 *   notice   {"kind":"unread"|"log"|"input"|...,"text"}; reset {"newest":ID}
 *
 * GET /api/v1/strikes/ID/plot?width=PX[&from=S&to=S]   width 50 ... 4000 (default 800)
 *   {"id":12,"width":800,"rate_hz":48000,"onset_s":1.004512 (as in the strike: the zero of all
 *    times below),"window_s":[0.0013,3.65],"from_s":-0.1,"to_s":3.9 (the span drawn),
 *    "trace":{"t0_s","dt_s","min":[...],"max":[...]}   one pair a pixel column (less when there are
 *             fewer samples: then min equals max), of full scale 1; column i covers
 *             t0_s + i dt_s ... t0_s + (i+1) dt_s
 *    "decay":[{"label":"1a","f_hz","t_s":[...],"db":[...],"fit_db":[first,last],"fit_t_s":[first,
 *             last] (a straight line),"noise_db":the floor in the band of `db`}]   dBFS; strongest
 *             first. A mode whose neighbour lies within its band has the neighbour's fit taken out
 *    "spectrum":{"f_hz":[...],"db":[...],"noise_db":[...]}   of the fitted window, dBFS of a steady
 *             tone (Hann), highest bin of each group; groups of equal ratio from 20 Hz to half the
 *             rate; noise_db: the same of the samples before the blow, or null when they are few
 *    "near":{"label","f_hz":[...],"db":[...],"fit_db":[...]} the same around the lead mode, finer;
 *             null when there is no mode. fit_db: spectrum of all fitted modes
 *    "residual":{"t_s":[...],"over_noise":[...]}   rms of samples minus fit, over the rms of the
 *             noise before the blow; 1 is a fit that leaves noise only
 *    "modes":[{"label","f_hz","level_dbfs","decay_per_s"}]}
 *
 * POST /api/v1/recordings: the file's bytes in the body (any Content-Type but a form's; at most
 *   64 MiB), ?channel=K or all, ?name=WORDS; answers application/x-ndjson, lines of `wane read
 *   --json`.
 */
#ifndef WANE_SERVE_H
#define WANE_SERVE_H

#include "wane/detect.h"
#include "wane/error.h"
#include "wane/fit.h"
#include "wane/tally.h"
#include "wane/text.h"

#include <stdint.h>

#define SERVE_NAME_MAX      199 /* of parts, specimens, measurements, inputs; bytes without the NUL */
#define SERVE_NOTE_MAX      2000
#define SERVE_BODY_MAX      65536
#define SERVE_RECORDING_MAX (64u << 20)
#define SERVE_WATCHERS_MAX  200

/* What a job asks for. */
enum serve_call {
    SERVE_PATCH_STRIKE,    /* id, has_note, note, has_set_aside, set_aside */
    SERVE_REREAD,          /* id, fit */
    SERVE_OPEN_SERIES,     /* name, part, specimen (each may be NULL) */
    SERVE_PATCH_SERIES,    /* id, name, close, specimen or next_specimen */
    SERVE_PUT_PART,        /* name, sheet, if_match */
    SERVE_ADD_MEASUREMENT, /* name, value, unit */
    SERVE_LIST_INPUTS,     /* - */
    SERVE_PUT_INPUT,       /* name, rate_hz, channels_heard */
    SERVE_PUT_TRIGGER,     /* trigger, if_match */
    SERVE_WAVE,            /* id */
    SERVE_PLOT,            /* id, width, from_s, to_s (NAN: all) */
    SERVE_READ_RECORDING,  /* recording_fd (closed by serve), name, channel (0: all) */
    SERVE_RECENT,          /* seconds */
    SERVE_REPORT,          /* id of a series */
    SERVE_REPORT_STRIKE,   /* id of a strike */
};

/* One job. serve owns it; the daemon keeps the pointer until it calls serve_answer or serve_refuse,
 * once, from any thread, and not after. Strings end in NUL, are valid UTF-8 and within the limits
 * above. */
struct serve_job {
    enum serve_call call;
    int64_t id;
    const char *name, *part, *specimen, *note, *set_aside, *unit, *sheet, *if_match;
    bool has_note, has_set_aside, close, next_specimen;
    double value, rate_hz, from_s, to_s, seconds;
    unsigned width;
    int channel;
    unsigned channels_heard; /* bit K-1: channel K; 0: as before */
    int recording_fd;
    struct detect_settings trigger;
    struct fit_settings fit;
    void *serve; /* serve's own */
};

/* Answers a job with `body` (its memory is taken; *body is empty afterwards). content_type NULL:
 * application/json. etag NULL: none; else with its quotes. */
void serve_answer(struct serve_job *job, unsigned http_status, const char *content_type,
                  const char *etag, struct text *body);
/* Answers with problem+json of the error's HTTP status. */
void serve_refuse(struct serve_job *job, const struct error *err);

/* What the server asks of the daemon. All may be called from the HTTP thread: they must not wait
 * for more than a moment. */
struct serve_daemon {
    void *user;
    /* The keys of /state but those that serve knows itself (version, time, watchers, can_change),
     * into an open object. */
    void (*write_state)(void *user, struct json_writer *json);
    /* The trigger object's text and its ETag (with quotes), out_etag [at least 32]. */
    void (*write_trigger)(void *user, struct text *out, char *out_etag, size_t out_etag_size);
    /* Takes a job on. false: the daemon is closing down; the job is then serve's to refuse. */
    bool (*take_job)(void *user, struct serve_job *job);
    /* Numbers for /metrics, OpenMetrics text, without the closing line. */
    void (*write_metrics)(void *user, struct text *out);
    /* A sentence for the service's journal (wrong tries at the door); may be NULL. */
    void (*tell)(void *user, const char *sentence);
};

struct serve_settings {
    const char *address;    /* numeric IPv4 or IPv6 address without brackets */
    unsigned port;          /* 0: any free one */
    const char *web_dir;    /* NULL: the page is not served */
    const char *vendor_dir; /* uPlot's two files, or NULL */
    const char *log_path;
    const struct shelf *shelf; /* part sheets beside the log's; lives as long as the server */
    const char *version;
    unsigned watchers_max; /* 0: SERVE_WATCHERS_MAX */
    /* Off the loopback only: TLS and an invitation are then needed. */
    const char *state_dir;                 /* for door.json and door.pem; NULL: such addresses are
                                              refused */
    const char *names;                     /* the machine's, commas between, or NULL */
    const char *tls_key, *tls_certificate; /* PEM files; NULL: made on first use */
    double code_valid_s;                   /* of an invitation; 0: 600 */
};

struct server;

/* Opens its own read-only connections to the log (which must exist), listens, and answers from then
 * on in its own threads. Signals must be blocked by the caller before. NULL and *err: ERROR_USAGE
 * for an address that is refused, ERROR_DEVICE for a port in use, ERROR_STORAGE. */
struct server *serve_start(const struct serve_settings *settings, const struct serve_daemon *daemon,
                           struct error *err);

/* "http://127.0.0.1:9263/" with the port that was taken. Lives as long as the server. */
const char *serve_url(const struct server *server);
/* SHA-256 of the certificate, "AB:CD:..."; NULL: plain HTTP on the loopback. */
const char *serve_fingerprint(const struct server *server);

/* No new connections and no new jobs; streams end. Jobs that were taken must still be answered. */
void serve_quiet(struct server *server);
/* Waits for the last answers and the ends of streams (0.5 s at most), then frees all. NULL is
 * allowed. false: a job was not answered in time; its threads then run on until the process ends,
 * and `daemon` must stay valid. */
bool serve_stop(struct server *server);

/* --- Events. Any thread; never wait for a client. `data` is JSON on one line, copied. --- */

/* A strike that is committed. Ids must grow. */
void serve_publish_strike(struct server *server, int64_t id, const char *data);
/* changed, unkept, series, input, notice: kept for those who are a little behind. */
void serve_publish(struct server *server, const char *event, const char *data);
/* Newest only. */
void serve_publish_level(struct server *server, const char *data);
void serve_publish_forming(struct server *server, const char *data);
/* Nothing rings any more: a forming reading that nobody has fetched yet is dropped. */
void serve_clear_forming(struct server *server);
/* Another log is written from now on: it must exist. Streams end, browsers come back and learn its
 * token. */
void serve_change_log(struct server *server, const char *path);
/* Once a second, from any one thread: heartbeats. */
void serve_tick(struct server *server);

unsigned serve_watchers(const struct server *server);

#endif
