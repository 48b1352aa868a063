/* Scenes for the detector's tests, made here: rings, blows, noises. No code is shared with the
 * program's own simulated bench. */
#ifndef WANE_TESTS_DETECT_SCENE_H
#define WANE_TESTS_DETECT_SCENE_H

#include "wane/detect.h"

#include <stddef.h>
#include <stdint.h>

struct scene {
    float *samples; /* [count] */
    size_t count;
    double rate_hz;
    uint64_t random; /* state of the generator: the seed */
};

void scene_init(struct scene *scene, double rate_hz, double seconds, uint64_t seed);
void scene_done(struct scene *scene);

double scene_uniform(struct scene *scene); /* [0, 1) */
double scene_between(struct scene *scene, double low, double high);
double scene_normal(struct scene *scene);

/* amplitude exp(-decay t) cos(2 pi f t + phase) from onset_s on; the onset may lie between two
 * samples. */
void scene_add_ring(struct scene *scene, double onset_s, double amplitude, double f_hz,
                    double decay_per_s, double phase_rad);

/* Noise of the blow: rms `level` under a half sine of `contact_s`. */
void scene_add_blow(struct scene *scene, double onset_s, double contact_s, double level);

/* White noise; its level grows by db_per_min. */
void scene_add_white(struct scene *scene, double rms, double db_per_min);

/* 1/f noise: a sum of first order noises, one an octave from 2 Hz up. */
void scene_add_pink(struct scene *scene, double rms);

void scene_round_16_bit(struct scene *scene);

/* Runs a detector over the scene in blocks of `block` frames (0: whole) and finishes it. Strikes
 * go into out [most]; gives their number, more than `most` are counted but not kept. */
size_t scene_detect(const struct scene *scene, const struct detect_settings *settings, size_t block,
                    struct strike **out, size_t most);

/* Onset of a strike in seconds from the start of the input. */
double scene_onset_s(const struct strike *strike);

#endif
