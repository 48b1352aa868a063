/* Made strikes whose truth is known. The generator's physics are its own: closed-form response of
 * damped modes to blows of a given force, then whatever the room, the input and the sound card add.
 * It shares no code with src/fit. */
#ifndef BENCHMARKS_SCENE_H
#define BENCHMARKS_SCENE_H

#include "poles.h"
#include "wane/strike.h"

#include <gsl/gsl_rng.h>

#define SCENE_MODES_MAX  12
#define SCENE_TONES_MAX  24
#define SCENE_PULSES_MAX 4
#define SCENE_TAKES_MAX  4
#define SCENE_LEAD_S     0.3 /* noise before the onset, as the detector hands it over */

struct scene_mode {
    double f_hz, decay_per_s;
    double amplitude; /* after a blow of weight 1 that lasts no time; less after a longer one */
    double phase_rad;
    double glide_hz_per_s;
    double
        level_damping; /* extra decay rate at an amplitude of 1, proportional to amplitude, 1/s */
};

/* A blow: a half-sine of force for contact_s, or an impulse (a step of the state) for 0. */
struct scene_pulse {
    double at_s; /* after the onset */
    double contact_s;
    double weight;
    double noise; /* sd of the blow's own noise at its height, full scale 1 */
};

/* A steady tone. wander: sd of its phase's random walk, radians in a second. */
struct scene_tone {
    double f_hz, amplitude, phase_rad, wander;
};

enum scene_noise { SCENE_NOISE_WHITE, SCENE_NOISE_PINK, SCENE_NOISE_ROOM, SCENE_NOISE_COUNT };

/* What a window of the scene holds: frames [begin, end), the onset of its strike and the first
 * frame at which only the free ring is left. Positions are counted from the scene's first frame. */
struct scene_take {
    size_t begin, end, free_frame, trigger;
    double onset_frame;
    enum strike_end why_end;
};

struct scene {
    unsigned long seed;
    char note[96]; /* what was drawn, for the table of worst strikes */
    double rate_hz;
    size_t frame_count;
    double onset_frame; /* of the first pulse */
    struct scene_mode modes[SCENE_MODES_MAX];
    unsigned mode_count;
    struct scene_pulse pulses[SCENE_PULSES_MAX];
    unsigned pulse_count;
    struct scene_tone tones[SCENE_TONES_MAX];
    unsigned tone_count;
    enum scene_noise noise;
    double noise_sd; /* of one sample, all frequencies */
    double
        noise_rise; /* the noise's sd grows by this factor from the onset to the end; 0 or 1: no */
    double coupling_hz;
    bool coupling_known; /* told to the fit */
    unsigned bits;       /* 16, 24; 0: not quantised */
    struct scene_take takes[SCENE_TAKES_MAX];
    unsigned take_count;
    float *samples; /* [frame_count], made by bench_make */
};

/* Fills scene->samples from the description. `rng` makes the noise only. False: memory. */
bool bench_make(struct scene *scene, gsl_rng *rng);
void bench_done(struct scene *scene);

/* The truth as elements at a take's free_frame: modes first, in order, then tones, then the real
 * pole of the coupling. Returns how many. Coupling only where one pulse of no duration made the
 * ring. */
size_t bench_elements(const struct scene *scene, const struct scene_take *take,
                      struct element elements[ELEMENTS_MAX]);

/* sd of white noise that has the density of the scene's noise at f_hz, quantising noise included.
 * For rising noise, weighed as a mode of this decay rate weighs it. */
double bench_noise_at(const struct scene *scene, const struct scene_take *take, double f_hz,
                      double decay_per_s);

/* The window as the detector would hand it over, with its own copy of the samples; NULL: memory. */
struct strike *bench_strike(const struct scene *scene, const struct scene_take *take);

/* Writes NAME.wav (float) and NAME.txt (truth). */
bool bench_dump(const struct scene *scene, const char *name);

/* Draws: uniform and log-uniform in [low, high). */
double draw_uniform(gsl_rng *rng, double low, double high);
double draw_log(gsl_rng *rng, double low, double high);
bool draw_chance(gsl_rng *rng, double probability);

#endif
