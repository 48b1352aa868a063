/* From a strike to its reading: joint least squares of all modes on all samples.
 * Pure: no input or output, no clock, no global state, no allocation once the workspace exists.
 * The same strike with the same settings gives the same bits. */
#ifndef WANE_FIT_H
#define WANE_FIT_H

#include "wane/error.h"
#include "wane/reading.h"
#include "wane/strike.h"

/* Zero in a double: automatic. */
struct fit_settings {
    double f_low_hz;        /* automatic 20 */
    double f_high_hz;       /* automatic 0.46 x rate */
    double coupling_hz;     /* corner of the input's AC coupling, first order; 0: none or unknown */
    double not_exponential; /* early and late rate may differ by this share; automatic 0.05 */
    double gliding;         /* f may move by this share; automatic 1e-4 */
    unsigned modes_max;     /* 1 ... READING_MODES_MAX; 0: automatic, all of them */
    double clock_ppm;       /* the sample clock runs fast by this much: f and decay are multiplied
                               by 1 - clock_ppm * 1e-6 ... see `wane clock` */
};

/* Text form of the settings, stored beside each reading and part of its trace: "f_low_hz=20 ...".
 * Always the same text for the same settings. out [at least 256]. */
void fit_settings_describe(const struct fit_settings *settings, char *out, size_t out_size);

struct fit_workspace;

/* Memory for strikes of up to frames_max samples (it grows by itself for longer ones: then, and
 * only then, fit_strike allocates). Plans FFTs: one thread at a time. NULL and *err when memory ran
 * out. */
struct fit_workspace *fit_workspace_create(size_t frames_max, struct error *err);
void fit_workspace_destroy(struct fit_workspace *workspace);

/* Reads one strike. One workspace a thread. A strike that cannot be read is a verdict, not a
 * failure; fails only for wrong settings (ERROR_USAGE), samples that are no numbers (ERROR_DATA) or
 * memory. */
bool fit_strike(struct fit_workspace *workspace, const struct strike *strike,
                const struct fit_settings *settings, struct reading *out_reading,
                struct error *err);

/* The modes of `reading` (of `strike`) that may still ring at `next->first_frame`, written into
 * next->carried. Call it for every two strikes of a channel that follow one another, before
 * fit_strike(next). Pure. */
void fit_carry(const struct strike *strike, const struct reading *reading, struct strike *next);

#endif
