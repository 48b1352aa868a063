#include "wane/reading.h"

#include <math.h>
#include <string.h>

static const char *const verdict_names[] = {
    [VERDICT_GOOD] = "good",
    [VERDICT_DOUBTFUL] = "doubtful",
    [VERDICT_REJECTED] = "rejected",
};

static const char *const reason_names[REASON_COUNT] = {
    [REASON_SAMPLES_LOST] = "samples-lost",
    [REASON_CLIPPED] = "clipped",
    [REASON_DOUBLE_HIT] = "double-hit",
    [REASON_RESTRUCK] = "restruck",
    [REASON_NOISY] = "noisy",
    [REASON_TOO_SOFT] = "too-soft",
    [REASON_TOO_SHORT] = "too-short",
    [REASON_NOT_A_RING] = "not-a-ring",
    [REASON_NOT_EXPONENTIAL] = "not-exponential",
    [REASON_GLIDING] = "gliding",
    [REASON_INPUT_STEERED] = "input-steered",
    [REASON_UNRESOLVED] = "unresolved",
};

static const char *const remark_names[REMARK_COUNT] = {
    [REMARK_BLOW_CLIPPED] = "blow-clipped",
    [REMARK_HUM] = "hum",
    [REMARK_CUT] = "cut",
};

const char *verdict_name(enum verdict verdict)
{
    return verdict_names[verdict];
}

const char *reason_name(enum reason reason)
{
    return reason_names[reason];
}

const char *remark_name(enum remark remark)
{
    return remark_names[remark];
}

bool verdict_from_name(const char *name, enum verdict *out_verdict)
{
    for (unsigned i = 0; i < sizeof verdict_names / sizeof verdict_names[0]; i++) {
        if (strcmp(name, verdict_names[i]) == 0) {
            *out_verdict = (enum verdict)i;
            return true;
        }
    }
    return false;
}

void reading_init(struct reading *reading)
{
    memset(reading, 0, sizeof *reading);
    reading->verdict = VERDICT_REJECTED;
    reading->onset_frame = (double)NAN;
    reading->window_begin_frame = (double)NAN;
    reading->window_end_frame = (double)NAN;
    reading->peak_dbfs = (double)NAN;
    reading->noise_dbfs = (double)NAN;
    reading->snr_db = (double)NAN;
    reading->fit_ms = (double)NAN;
    reading->why = (struct why){
        .lost_frames = (double)NAN,
        .lost_at_s = (double)NAN,
        .clipped_for_s = (double)NAN,
        .after_s = (double)NAN,
        .cut_s = (double)NAN,
        .noise_dbfs = (double)NAN,
        .over_noise_db = (double)NAN,
        .cycles = (double)NAN,
        .span_s = (double)NAN,
        .unexplained = (double)NAN,
        .early_per_s = (double)NAN,
        .late_per_s = (double)NAN,
        .early_hz = (double)NAN,
        .late_hz = (double)NAN,
        .gain_db = (double)NAN,
        .near_hz = (double)NAN,
    };
}
