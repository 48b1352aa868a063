/* What the daemon's files share. The drawing of threads and queues stands in pipeline.c. */
#ifndef WANE_DAEMON_INNER_H
#define WANE_DAEMON_INNER_H

#include "options.h"
#include "wane/clock.h"
#include "wane/detect.h"
#include "wane/fit.h"
#include "wane/input.h"
#include "wane/log.h"
#include "wane/queue.h"
#include "wane/serve.h"

#include <pthread.h>

#define RECENT_S     60.0
#define STOP_FITS_NS (CLOCK_NS_PER_S * 8 / 10) /* what is not fitted by then is stored unread */

/* Where a strike comes from; all that the log wants to know beside samples and reading. */
struct origin {
    uint64_t epoch; /* of the input: counts every opening */
    char input[LOG_NAME_MAX];
    char source[LOG_SOURCE_MAX];
    int64_t strike_number;
    int64_t trigger_ms; /* time of day of samples[trigger] */
    int64_t closed_ms;
    bool clock_synced;
};

enum message_kind {
    MESSAGE_STRIKE,     /* strike, origin: to be fitted; then also reading: to be kept */
    MESSAGE_SPILL,      /* strike, origin: to be kept unread */
    MESSAGE_FORMING,    /* look into the forming slot */
    MESSAGE_JOB,        /* job: for whom it reaches */
    MESSAGE_REREADING,  /* job, reading: to replace the stored one */
    MESSAGE_INPUT,      /* view: the input changed; logged, and announced if `announces` */
    MESSAGE_SWITCH_LOG, /* path: the next strikes belong into another log */
};

/* What /state says of the input. */
struct input_view {
    struct input_info info;
    bool is_open;   /* false: no input; info then holds the last one, or zeros */
    bool has_ended; /* a recording was heard to its end */
    unsigned channels_heard;
    int64_t since_ms, opened_ms;
    char text[256]; /* why it is lost */
};

struct message {
    enum message_kind kind;
    struct strike *strike; /* owned */
    struct reading reading;
    struct origin origin;
    int64_t spill_key;
    struct serve_job *job;
    struct input_view *view; /* owned */
    bool announces;
    int64_t gap_ms;
    char *path; /* owned */
    int64_t queued_ns;
    char settings[LOG_SETTINGS_MAX];
};

/* The last minute heard: interleaved frames of the heard channels. */
struct recent {
    float *frames;
    unsigned channels;
    double rate_hz;
    size_t capacity, begin, count; /* frames */
};

enum pipeline_thread {
    THREAD_LISTENER,
    THREAD_FITTER,
    THREAD_KEEPER,
    THREAD_PLOTTER,
    THREAD_ERRANDS,
    THREAD_COUNT
};

struct pipeline {
    struct options options;
    struct server *server;
    struct queue *commands, *fits, *writes, *plots, *errands;
    pthread_t threads[THREAD_COUNT];
    bool has_thread[THREAD_COUNT];
    bool log_is_given; /* by word or setting: one log for all inputs */

    /* Made at start by the main thread, then each its own thread's. */
    struct listener *listener;
    struct fitter *fitter;
    struct keeper *keeper;
    char notice[512];
    struct shelf shelf; /* part sheets; not changed once the server runs */

    /* All below: with the mutex held, for a moment only. */
    pthread_mutex_t mutex;
    pthread_cond_t changed;
    int64_t stop_fits_ns; /* once stopping: no fit begins after this */
    bool is_finished[THREAD_COUNT];
    bool is_stopping, is_forming_queued, is_log_full;
    uint64_t progress;
    struct input_view input;
    struct detect_level levels[OPTIONS_CHANNELS_MAX];
    int level_channels[OPTIONS_CHANNELS_MAX];
    unsigned level_count;
    struct detect_settings trigger;
    struct strike *forming; /* newest, not yet read */
    struct origin forming_origin;
    uint64_t forming_number; /* grows when a forming reading gets out of date */
    int64_t forming_cost_ns; /* of the last one */
    struct recent recent;
    size_t queued_bytes; /* of the samples that wait for the fitter */
    uint64_t spilled;    /* strikes that wait unread, on disk or on their way to it */
    char log_path[LOG_PATH_MAX];
    uint64_t log_number;       /* grows with every try to switch the log */
    struct error switch_error; /* of the last try; ERROR_NONE: it went well */
    struct log_counts counts;
    char log_text[256];
    uint64_t unkept;
    int64_t unkept_since_ms;
    int64_t series;
    struct log_series series_now;
    uint64_t strikes_heard, strikes_read;
    double last_fit_ms;
};

/* --- messages (message.c) --- */
struct message *message_create(enum message_kind kind);
void message_destroy(void *message);
/* Refuses the job of a message that nobody will see to, then destroys the message. */
void message_refuse(struct message *message, enum error_kind kind, const char *text);

/* --- small things (pipeline.c) --- */
bool pipeline_is_stopping(struct pipeline *pipeline);
/* A sentence for pages (a notice) and for stderr. Any thread. */
void pipeline_tell(struct pipeline *pipeline, const char *kind, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* --- listener.c --- */
/* Opens the input of the options, if one is chosen. Before the threads start. */
struct listener *listener_create(struct pipeline *pipeline, struct error *err);
void listener_destroy(struct listener *listener);

/* --- fitter.c --- */
struct fitter *fitter_create(struct pipeline *pipeline, struct error *err);
void fitter_destroy(struct fitter *fitter);

/* --- the threads' bodies --- */
void *listener_run(void *pipeline);
void *fitter_run(void *pipeline);
void *keeper_run(void *pipeline);
void *plotter_run(void *pipeline);
void *errands_run(void *pipeline);

/* Opens the log at start; also after a failure keeper_close frees pipeline->keeper. keeper.c. */
bool keeper_open(struct pipeline *pipeline, const char *path, struct error *err);
void keeper_close(struct keeper *keeper);
/* Which log belongs to an input. */
bool keeper_path(const struct pipeline *pipeline, bool is_simulated, char *out, size_t out_size,
                 struct error *err);

/* --- JSON (view.c) --- */
void view_write_state(void *pipeline, struct json_writer *json);
void view_write_trigger(void *pipeline, struct text *out, char *out_etag, size_t out_etag_size);
void view_write_metrics(void *pipeline, struct text *out);
void view_write_input(struct json_writer *json, const char *key, const struct input_view *view);
/* The `level` event; without channels: nulls. */
void view_write_level(struct text *out, const struct detect_level *levels, const int *channels,
                      unsigned count);
/* A strike that has no number: `forming` (rang_s finite) or `unkept` (rang_s NAN). */
void view_write_strike(struct text *out, const struct strike *strike, const struct reading *reading,
                       const struct origin *origin, double rang_s);
/* Time of day of the onset: the trigger's, and where the fit puts the onset beside it. */
int64_t view_onset_ms(const struct strike *strike, const struct reading *reading,
                      const struct origin *origin);

#endif
