/* The families of strikes over which accuracy is measured. */
#ifndef BENCHMARKS_FAMILIES_H
#define BENCHMARKS_FAMILIES_H

#include "bound.h"
#include "scene.h"

struct family {
    const char *name;
    const char *about;
    void (*draw)(struct scene *scene, gsl_rng *rng);
    double reach; /* RMS error over the oracle's that is asked for */
};

const struct family *family_table(size_t *out_count);
const struct family *family_find(const char *name);

/* Draws strike number `index` of a family and makes its samples. Strikes whose answer the noise
 * hides (see family_is_knowable) are drawn again, but for doublets, where they are the point. */
bool family_make(const struct family *family, unsigned long seed, unsigned index,
                 struct scene *out_scene);

/* Bounds of a take's elements, each with the noise at its own frequency. False: singular. */
bool family_bounds(const struct scene *scene, const struct scene_take *take,
                   const struct element *elements, size_t element_count, struct bound *out);

/* A mode is asked for when its amplitude stands 10 sd over nothing (full matrix) and its decay rate
 * is known to 10 %, its frequency to 5 %: the contract's own limits for a good reading. */
bool family_mode_is_knowable(const struct element *element, const struct bound *bound,
                             double rate_hz);

/* Common to families and defects: one take over everything, from frame 0, ends when the slowest
 * mode has faded for `spans` time constants, at 60 s or at frames_max. The trigger errs by up to 1
 * ms. */
void bench_close(struct scene *scene, double spans, size_t frames_max, gsl_rng *rng);

#endif
