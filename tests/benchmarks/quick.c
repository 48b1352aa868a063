#include "quick.h"

#include "families.h"
#include "wane/detect.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

size_t quick_detect(const float *samples, size_t frame_count, double rate_hz, size_t block,
                    struct strike **out_strikes, size_t strikes_max)
{
    size_t count = 0;
    struct error err = {0};
    struct detect_settings settings = {0};
    struct detector *detector = detect_create(&settings, rate_hz, 1, &err);
    bool done = detector != NULL;
    if (block == 0)
        block = frame_count;
    for (size_t n = 0; done && n < frame_count; n += block) {
        size_t length = frame_count - n < block ? frame_count - n : block;
        done = detect_push_block(detector, samples + n, length, &err);
    }
    if (!done || !detect_finish(detector, &err))
        fprintf(stderr, "detector: %s\n", err.text);
    struct strike *strike;
    while (detector && count < strikes_max && (strike = detect_take_strike(detector)) != NULL)
        out_strikes[count++] = strike;
    detect_destroy(detector);
    return count;
}

bool quick_read(const struct scene *scene, const struct scene_take *take,
                const struct fit_settings *settings, struct reading *out_reading)
{
    struct error err = {0};
    struct strike *strike = bench_strike(scene, take);
    struct fit_workspace *workspace = fit_workspace_create(take->end - take->begin, &err);
    bool done = strike && workspace && fit_strike(workspace, strike, settings, out_reading, &err);
    if (!done)
        fprintf(stderr, "fit: %s\n", err.text);
    fit_workspace_destroy(workspace);
    strike_destroy(strike);
    return done;
}

void quick_begin(struct scene *out_scene, double rate_hz, double onset, double noise_sd)
{
    *out_scene = (struct scene){
        .rate_hz = rate_hz,
        .onset_frame = floor(SCENE_LEAD_S * rate_hz) + onset,
        .pulse_count = 1,
        .pulses = {{.weight = 1.0}},
        .noise_sd = noise_sd,
    };
}

void quick_mode(struct scene *scene, double f_hz, double decay_per_s, double amplitude,
                double phase_rad)
{
    scene->modes[scene->mode_count++] = (struct scene_mode){
        .f_hz = f_hz,
        .decay_per_s = decay_per_s,
        .amplitude = amplitude,
        .phase_rad = phase_rad,
    };
}

bool quick_make(struct scene *scene, double spans, unsigned long seed)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    if (!rng)
        return false;
    gsl_rng_set(rng, seed);
    scene->seed = seed;
    bench_close(scene, spans, 5000000, rng);
    bool made = bench_make(scene, rng);
    gsl_rng_free(rng);
    return made;
}
