/* One recording from its first sample to its last reading: input, detectors, fit. */
#ifndef WANE_CLI_READ_RECORDING_H
#define WANE_CLI_READ_RECORDING_H

#include "wane/detect.h"
#include "wane/fit.h"
#include "wane/input.h"

#include <pthread.h>

struct read_settings {
    enum input_raw raw;
    double rate_hz; /* of raw samples */
    int channels;   /* of raw samples */
    int channel;    /* 1-based; 0: all */
    struct detect_settings detect;
    struct fit_settings fit;
    bool uses_second_thread;   /* for the fits */
    pthread_mutex_t *planning; /* held while FFTs are planned: FFTW's planner is not re-entrant */
};

/* number: 1-based, of this recording's strikes of all channels that are heard, in time order. */
struct read_row {
    uint64_t number;
    const struct strike *strike;
    const struct reading *reading;
};

/* begin is called once when the recording is open, put for each strike in time order; both may come
 * from another thread than the caller's, never two at once. */
struct read_sink {
    void *to;
    void (*begin)(void *to, const struct input_info *info);
    void (*put)(void *to, const struct read_row *row);
};

/* Reads it all in memory that does not grow with its length. What was read before a failure has
 * been put. out_info (may be NULL) is filled once the recording is open: its warnings. */
bool read_recording(const char *path, const struct read_settings *settings,
                    const struct read_sink *sink, struct input_info *out_info, struct error *err);

#endif
