/* Short ways through the program's own stages, for benchmarks and tests. */
#ifndef BENCHMARKS_QUICK_H
#define BENCHMARKS_QUICK_H

#include "scene.h"
#include "wane/fit.h"

/* All strikes that the detector finds in a recording in memory, pushed block by block (0: at once),
 * in order. The caller destroys them. Returns how many; stops at strikes_max. */
size_t quick_detect(const float *samples, size_t frame_count, double rate_hz, size_t block,
                    struct strike **out_strikes, size_t strikes_max);

/* Reads one take of a scene with a workspace of its own. False: the fit failed, said on stderr. */
bool quick_read(const struct scene *scene, const struct scene_take *take,
                const struct fit_settings *settings, struct reading *out_reading);

/* A plain scene to fill: one instantaneous blow, SCENE_LEAD_S of noise before the onset. `onset` is
 * the fraction of a frame at which it begins. Add modes, then bench_close and bench_make. */
void quick_begin(struct scene *out_scene, double rate_hz, double onset, double noise_sd);
void quick_mode(struct scene *scene, double f_hz, double decay_per_s, double amplitude,
                double phase_rad);
/* Closes after `spans` time constants and makes the samples; the seed makes noise and jitter. */
bool quick_make(struct scene *scene, double spans, unsigned long seed);

#endif
