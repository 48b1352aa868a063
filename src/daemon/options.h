/* The words and settings of waned. Words win over the settings file. */
#ifndef WANE_DAEMON_OPTIONS_H
#define WANE_DAEMON_OPTIONS_H

#include "wane/detect.h"
#include "wane/fit.h"
#include "wane/input.h"
#include "wane/log.h"
#include "wane/text.h"

#define OPTIONS_CHANNELS_MAX 32 /* heard at once: a detector each */

struct options {
    char config_path[LOG_PATH_MAX]; /* that was read; "": none */
    char input[INPUT_NAME_MAX];     /* "": none chosen yet */
    double rate_hz;                 /* 0: the input's own */
    double channels;                /* 0: the input's own */
    unsigned channels_heard;        /* bit K-1: channel K; 0: the first */
    bool is_fast;
    char address[64]; /* without brackets */
    unsigned port;
    char log_path[LOG_PATH_MAX]; /* "": by log_default_path */
    double rejected_waves_per_hour;
    double silent_minutes; /* without a strike, until that is told; 0: never */
    double samples_days, strikes_days, log_megabytes; /* 0: keep all */
    double watchers_max;
    char names[1024], tls_key[LOG_PATH_MAX], tls_certificate[LOG_PATH_MAX]; /* "": none given */
    double invite_valid_s;                                                  /* 0: 600 */
    double seed; /* of the simulated bench */
    struct detect_settings trigger;
    struct fit_settings fit;
    double modes_max;
    bool wants_help, wants_version;
};

/* Reads the words, then the settings file they name (or the default one, if there is one). All that
 * is wrong is appended to *out_problems, a line each; false when there is any. */
bool options_read(int argc, char **argv, struct options *out_options, struct text *out_problems);

/* What --help says. */
const char *options_help(void);

#endif
