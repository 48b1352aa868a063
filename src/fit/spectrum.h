/* All that the fit does with FFTs: the noise before the strike, steady tones in it, and the search
 * for modes. The only file of fit/ that knows FFTW. */
#ifndef WANE_FIT_SPECTRUM_H
#define WANE_FIT_SPECTRUM_H

#include "fit/model.h"

#include <stdbool.h>
#include <stddef.h>

#define SPECTRUM_LOG2_MIN 6
#define SPECTRUM_LOG2_MAX 18
#define NOISE_BINS_MAX    2048
#define CANDIDATES_MAX    8

struct spectrum; /* plans and buffers */

struct spectrum *spectrum_create(void);
void spectrum_destroy(struct spectrum *spectrum);

/* Noise as a variance a sample that white noise of the same density would have, on bins 0 ... bins
 * of pi/bins rad each. */
struct noise {
    double density[NOISE_BINS_MAX + 1];
    size_t bins;
    double variance;     /* mean of the density */
    double lowest;       /* the density's lowest value */
    size_t search_count; /* samples that the search looks at, at most */
    bool is_measured;    /* false: there was nothing before the strike to measure it from */
};

/* Density at w rad a sample, 0 ... pi. */
double noise_density(const struct noise *noise, double w);

/* Welch's method (Hann frames, half overlap), smoothed over a few bins, from y [count]. With fewer
 * than 64 samples, or all of them zero, is_measured stays false and the density is `least`.
 * `least` > 0 bounds the density from below (the grain of the samples). */
enum noise_kind {
    NOISE_ALONE,         /* y holds noise and nothing else */
    NOISE_BETWEEN_LINES, /* a ring is in it: only what lies between its lines counts */
};
void spectrum_measure_noise(struct spectrum *spectrum, const float *y, size_t count, double least,
                            enum noise_kind kind, struct noise *out_noise);

/* Keeps the spectrum of what came before a strike, and gives the amplitude that a steady tone at w
 * would have had in it. */
void spectrum_remember(struct spectrum *spectrum, const float *y, size_t count);
double spectrum_amplitude_before(const struct spectrum *spectrum, double w);

/* Frequencies (rad a sample) of lines in y [count] that stand out of their surroundings, strongest
 * first; at most `max`. Returns how many. */
unsigned spectrum_find_lines(struct spectrum *spectrum, const float *y, size_t count, double w_low,
                             double w_high, unsigned max, double *out_w);

struct candidate {
    double complex p; /* per sample */
    double complex c; /* at the first sample */
    double statistic; /* energy over density: Exp(1) in noise */
};

/* Damped sinusoids in y [count] by a matched filter on a grid of decay rates: peaks over
 * `threshold` that are no skirt of a stronger one. Most significant first; at most CANDIDATES_MAX.
 */
unsigned spectrum_search(struct spectrum *spectrum, const float *y, size_t count,
                         const struct noise *noise, double w_low, double w_high, double threshold,
                         struct candidate *out_candidates);

#endif
