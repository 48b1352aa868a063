/* Scenes with one thing wrong, and sound ones: what the verdicts are measured on. */
#ifndef BENCHMARKS_DEFECTS_H
#define BENCHMARKS_DEFECTS_H

#include "scene.h"
#include "wane/reading.h"

#define REASON_BIT(reason) (1u << (reason))

struct defect {
    const char *name;
    const char *about;
    unsigned named_by; /* reasons that say what is wrong; 0: any, or none where nothing triggers */
    unsigned good;     /* strikes that must be good: 0 for a defect */
    bool needs_detector; /* no single onset: only the detector can say what a strike is */
    bool (*make)(struct scene *scene, gsl_rng *rng);
};

const struct defect *defect_table(size_t *out_count);

/* Makes scene `index` of a defect. False: memory. */
bool defect_make(const struct defect *defect, unsigned long seed, unsigned index,
                 struct scene *out_scene);

/* Sounds of a room that are no ring (noises.c): made into scene->samples, with their own noise. */
bool noises_speech(struct scene *scene, gsl_rng *rng);
bool noises_clap(struct scene *scene, gsl_rng *rng);
bool noises_door(struct scene *scene, gsl_rng *rng);
bool noises_keys(struct scene *scene, gsl_rng *rng);
bool noises_footsteps(struct scene *scene, gsl_rng *rng);
bool noises_click(struct scene *scene, gsl_rng *rng);
bool noises_swell(struct scene *scene, gsl_rng *rng);
bool noises_music(struct scene *scene, gsl_rng *rng);
bool noises_room(struct scene *scene, gsl_rng *rng); /* a minute of everything, softly */

#endif
