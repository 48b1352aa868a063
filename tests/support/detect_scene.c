#include "support/detect_scene.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

void scene_init(struct scene *scene, double rate_hz, double seconds, uint64_t seed)
{
    scene->count = (size_t)(rate_hz * seconds);
    scene->rate_hz = rate_hz;
    scene->random = seed * 0x9e3779b97f4a7c15U + 1;
    scene->samples = calloc(scene->count + 1, sizeof *scene->samples);
    if (scene->samples == NULL)
        abort();
}

void scene_done(struct scene *scene)
{
    free(scene->samples);
    scene->samples = NULL;
}

/* xorshift64*: S. Vigna, "An experimental exploration of Marsaglia's xorshift generators,
 * scrambled", 2016 (constants from memory). */
static uint64_t draw(struct scene *scene)
{
    scene->random ^= scene->random >> 12;
    scene->random ^= scene->random << 25;
    scene->random ^= scene->random >> 27;
    return scene->random * 0x2545f4914f6cdd1dU;
}

double scene_uniform(struct scene *scene)
{
    return (double)(draw(scene) >> 11) * 0x1p-53;
}

double scene_between(struct scene *scene, double low, double high)
{
    return low + (high - low) * scene_uniform(scene);
}

double scene_normal(struct scene *scene)
{
    double u = 1 - scene_uniform(scene);
    return sqrt(-2 * log(u)) * cos(2 * WANE_PI * scene_uniform(scene));
}

void scene_add_ring(struct scene *scene, double onset_s, double amplitude, double f_hz,
                    double decay_per_s, double phase_rad)
{
    size_t first = (size_t)ceil(onset_s * scene->rate_hz);
    for (size_t n = first; n < scene->count; n++) {
        double t = (double)n / scene->rate_hz - onset_s;
        if (decay_per_s * t > 25)
            break;
        scene->samples[n] +=
            (float)(amplitude * exp(-decay_per_s * t) * cos(2 * WANE_PI * f_hz * t + phase_rad));
    }
}

void scene_add_blow(struct scene *scene, double onset_s, double contact_s, double level)
{
    size_t first = (size_t)ceil(onset_s * scene->rate_hz);
    for (size_t n = first; n < scene->count; n++) {
        double t = (double)n / scene->rate_hz - onset_s;
        if (t >= contact_s)
            break;
        scene->samples[n] += (float)(level * sin(WANE_PI * t / contact_s) * scene_normal(scene));
    }
}

void scene_add_white(struct scene *scene, double rms, double db_per_min)
{
    double growth = pow(10, db_per_min / 20 / 60 / scene->rate_hz), level = rms;
    for (size_t n = 0; n < scene->count; n++, level *= growth)
        scene->samples[n] += (float)(level * scene_normal(scene));
}

void scene_add_pink(struct scene *scene, double rms)
{
    enum { octaves_max = 24 };
    double pole[octaves_max], drive[octaves_max], state[octaves_max] = {0};
    int octaves = 0;
    for (double f_hz = 2; f_hz < scene->rate_hz / 4 && octaves < octaves_max; f_hz *= 2) {
        pole[octaves] = exp(-2 * WANE_PI * f_hz / scene->rate_hz);
        drive[octaves] = sqrt(1 - pole[octaves] * pole[octaves]);
        octaves++;
    }
    double each = rms / sqrt(octaves);
    for (int i = 0; i < octaves; i++)
        state[i] = scene_normal(scene);
    for (size_t n = 0; n < scene->count; n++) {
        double sum = 0;
        for (int i = 0; i < octaves; i++) {
            state[i] = pole[i] * state[i] + drive[i] * scene_normal(scene);
            sum += state[i];
        }
        scene->samples[n] += (float)(each * sum);
    }
}

void scene_round_16_bit(struct scene *scene)
{
    for (size_t n = 0; n < scene->count; n++) {
        double x = floor((double)scene->samples[n] * 32768 + 0.5);
        x = x > 32767 ? 32767 : x < -32768 ? -32768 : x;
        scene->samples[n] = (float)(x / 32768);
    }
}

size_t scene_detect(const struct scene *scene, const struct detect_settings *settings, size_t block,
                    struct strike **out, size_t most)
{
    static const struct detect_settings automatic = {0};
    struct error err = {0};
    struct detector *detector =
        detect_create(settings != NULL ? settings : &automatic, scene->rate_hz, 1, &err);
    if (detector == NULL) {
        fprintf(stderr, "%s\n", err.text);
        abort();
    }
    size_t found = 0;
    for (size_t at = 0; at < scene->count;) {
        size_t count = block == 0 || scene->count - at < block ? scene->count - at : block;
        if (!detect_push_block(detector, scene->samples + at, count, &err))
            abort();
        at += count;
        if (at == scene->count && !detect_finish(detector, &err))
            abort();
        for (struct strike *s = NULL; (s = detect_take_strike(detector)) != NULL; found++) {
            if (found < most)
                out[found] = s;
            else
                strike_destroy(s);
        }
    }
    detect_destroy(detector);
    return found;
}

double scene_onset_s(const struct strike *strike)
{
    return (double)(strike->first_frame + strike->trigger) / strike->rate_hz;
}
