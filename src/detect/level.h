/* Peaks and means of hops of samples: the level meter and the test for digital
 * silence. */
#ifndef WANE_DETECT_LEVEL_H
#define WANE_DETECT_LEVEL_H

#include <stdbool.h>
#include <stddef.h>

#define LEVEL_HOPS_MAX 64

struct level {
    float peaks[LEVEL_HOPS_MAX]; /* of the last hops, in a ring */
    size_t kept;                 /* hops in 50 ms */
    size_t at;
};

/* peak and sum of one hop of samples [count]. */
struct level_hop {
    float peak;
    float sum;
};

struct level_hop level_measure(const float *samples, size_t count);

/* Meter over the last 50 ms. */
void level_init(struct level *level, double rate_hz, size_t hop);
void level_push(struct level *level, float peak);
float level_peak(const struct level *level);

/* Peak of the hops from `from` back to `until` (not counted), 0 being the newest. */
float level_peak_between(const struct level *level, size_t from, size_t until);

/* 20 log10(amplitude), not below -200. */
double level_dbfs(double amplitude);

/* Samples at the end stop of a 16 bit converter, or beyond. */
bool level_is_clipped(float peak);

#endif
