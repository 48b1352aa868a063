/* What a workshop hears that is no ring-down. All are built from shaped noise, pulse trains and
 * resonators, at 48 kHz with a low room noise under them. */
#include "defects.h"

#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#define RATE_HZ 48000.0
#define TWO_PI  (2.0 * WANE_PI)

/* A two-pole resonator of given centre and half-power width. */
struct resonator {
    double a1, a2, gain, past1, past2;
};

static struct resonator resonator_of(double f_hz, double width_hz)
{
    double r = exp(-WANE_PI * width_hz / RATE_HZ);
    return (struct resonator){
        .a1 = 2.0 * r * cos(TWO_PI * f_hz / RATE_HZ), .a2 = -r * r, .gain = 1.0 - r};
}

static double resonate(struct resonator *resonator, double value)
{
    double now = resonator->gain * value + resonator->a1 * resonator->past1 +
                 resonator->a2 * resonator->past2;
    resonator->past2 = resonator->past1;
    resonator->past1 = now;
    return now;
}

static bool begin(struct scene *scene, double seconds, gsl_rng *rng)
{
    scene->rate_hz = RATE_HZ;
    scene->frame_count = (size_t)(seconds * RATE_HZ);
    scene->onset_frame = RATE_HZ; /* a second of quiet first: the detector learns its floor */
    scene->noise = draw_chance(rng, 0.5) ? SCENE_NOISE_ROOM : SCENE_NOISE_PINK;
    scene->noise_sd = draw_log(rng, 3e-5, 1e-3);
    return bench_make(scene, rng);
}

static void add(struct scene *scene, size_t n, double value)
{
    if (n < scene->frame_count)
        scene->samples[n] += (float)value;
}

/* One voiced or unvoiced syllable. */
static void add_syllable(struct scene *scene, size_t at, double seconds, double level,
                         double pitch_hz, gsl_rng *rng)
{
    struct resonator formants[3] = {
        resonator_of(draw_uniform(rng, 250.0, 850.0), draw_uniform(rng, 50.0, 120.0)),
        resonator_of(draw_uniform(rng, 900.0, 2300.0), draw_uniform(rng, 70.0, 150.0)),
        resonator_of(draw_uniform(rng, 2400.0, 3300.0), draw_uniform(rng, 100.0, 250.0)),
    };
    struct resonator hiss = resonator_of(draw_uniform(rng, 3500.0, 8000.0), 2500.0);
    bool has_hiss = draw_chance(rng, 0.4);
    double phase = 0.0, bend = draw_uniform(rng, -0.3, 0.3), attack_s = draw_log(rng, 0.005, 0.06);
    size_t frames = (size_t)(seconds * RATE_HZ);
    for (size_t i = 0; i < frames; i++) {
        double t = (double)i / RATE_HZ;
        double shape = fmin(1.0, t / attack_s) * fmin(1.0, (seconds - t) / 0.04);
        phase += pitch_hz * (1.0 + bend * t / seconds) *
                 (1.0 + 0.01 * gsl_ran_gaussian_ziggurat(rng, 1.0)) / RATE_HZ;
        double source = 0.02 * gsl_ran_gaussian_ziggurat(rng, 1.0);
        if (phase >= 1.0) {
            phase -= 1.0;
            source += 30.0 * (1.0 + 0.1 * gsl_ran_gaussian_ziggurat(rng, 1.0));
        }
        double value = 0.0;
        for (unsigned k = 0; k < 3; k++)
            value += resonate(&formants[k], source) / (1.0 + k);
        if (has_hiss && t < 0.08)
            value = 0.6 * resonate(&hiss, gsl_ran_gaussian_ziggurat(rng, 1.0));
        add(scene, at + i, level * shape * value);
    }
}

static void add_speech(struct scene *scene, size_t at, double seconds, double level, gsl_rng *rng)
{
    double pitch_hz = draw_log(rng, 85.0, 260.0);
    size_t end = at + (size_t)(seconds * RATE_HZ);
    while (at < end) {
        double syllable_s = draw_uniform(rng, 0.08, 0.3);
        add_syllable(scene, at, syllable_s, level * draw_log(rng, 0.4, 1.0),
                     pitch_hz * draw_uniform(rng, 0.85, 1.2), rng);
        double pause_s = draw_chance(rng, 0.2) ? draw_uniform(rng, 0.15, 0.6) : 0.02;
        at += (size_t)((syllable_s + pause_s) * RATE_HZ);
    }
}

/* Band-shaped noise with a sudden begin and an exponential end. */
static void add_burst(struct scene *scene, size_t at, double f_hz, double width_hz, double decay_s,
                      double level, gsl_rng *rng)
{
    struct resonator band = resonator_of(f_hz, width_hz);
    double scale = level / sqrt(band.gain); /* keeps the rms about the same for any width */
    size_t frames = (size_t)(8.0 * decay_s * RATE_HZ);
    for (size_t i = 0; i < frames; i++)
        add(scene, at + i,
            scale * exp(-(double)i / (decay_s * RATE_HZ)) *
                resonate(&band, gsl_ran_gaussian_ziggurat(rng, 1.0)));
}

static void add_clap(struct scene *scene, size_t at, double level, gsl_rng *rng)
{
    double f_hz = draw_log(rng, 700.0, 2500.0);
    add_burst(scene, at, f_hz, f_hz, draw_log(rng, 0.003, 0.012), level, rng);
    add_burst(scene, at + (size_t)(0.004 * RATE_HZ), 0.8 * f_hz, 2.0 * f_hz,
              draw_log(rng, 0.03, 0.15), 0.12 * level, rng); /* the room answers */
}

static void add_thump(struct scene *scene, size_t at, double level, gsl_rng *rng)
{
    double f_hz = draw_log(rng, 25.0, 130.0);
    add_burst(scene, at, f_hz, 0.7 * f_hz, draw_log(rng, 0.03, 0.12), level, rng);
    add_burst(scene, at, draw_log(rng, 300.0, 1500.0), 800.0, draw_log(rng, 0.004, 0.02),
              0.3 * level, rng);
}

static void add_jingle(struct scene *scene, size_t at, double seconds, double level, gsl_rng *rng)
{
    double rate_per_s = draw_uniform(rng, 25.0, 80.0);
    double t = 0.0;
    while (t < seconds) {
        size_t here = at + (size_t)(t * RATE_HZ);
        for (unsigned k = 0; k < 6; k++) { /* one touch: a handful of short high partials */
            double f_hz = draw_log(rng, 2500.0, 14000.0), decay = draw_log(rng, 40.0, 250.0);
            double a = level * draw_log(rng, 0.03, 1.0), phase = draw_uniform(rng, 0.0, TWO_PI);
            for (size_t i = 0; (double)i < 8.0 * RATE_HZ / decay; i++) {
                double s = (double)i / RATE_HZ;
                add(scene, here + i, a * exp(-decay * s) * sin(TWO_PI * f_hz * s + phase));
            }
        }
        t += -log(1.0 - gsl_rng_uniform(rng)) / rate_per_s;
    }
}

static void add_swell(struct scene *scene, size_t at, double level, gsl_rng *rng)
{
    double f_hz = draw_log(rng, 80.0, 4000.0), rise_s = draw_log(rng, 0.15, 2.0);
    double hold_s = draw_uniform(rng, 0.0, 1.0), fall_s = draw_log(rng, 0.2, 2.0);
    for (size_t i = 0; (double)i < (rise_s + hold_s + fall_s) * RATE_HZ; i++) {
        double t = (double)i / RATE_HZ;
        double up = t < rise_s ? t / rise_s : 1.0;
        double down = t > rise_s + hold_s ? 1.0 - (t - rise_s - hold_s) / fall_s : 1.0;
        add(scene, at + i, level * up * up * down * sin(TWO_PI * f_hz * t));
    }
}

/* A held note: harmonics, vibrato, a soft begin and end. */
static void add_note(struct scene *scene, size_t at, double f_hz, double seconds, double level,
                     gsl_rng *rng)
{
    double attack_s = draw_log(rng, 0.02, 0.15), vibrato = draw_uniform(rng, 0.001, 0.006);
    double phase = 0.0;
    for (size_t i = 0; (double)i < seconds * RATE_HZ; i++) {
        double t = (double)i / RATE_HZ;
        phase += TWO_PI * f_hz * (1.0 + vibrato * sin(TWO_PI * 5.5 * t)) / RATE_HZ;
        double shape = fmin(1.0, t / attack_s) * fmin(1.0, (seconds - t) / 0.1);
        double value = 0.0;
        for (unsigned h = 1; h <= 6; h++)
            value += sin(phase * h) / (double)(h * h);
        add(scene, at + i, level * shape * value);
    }
}

static void add_music(struct scene *scene, size_t at, double seconds, double level, gsl_rng *rng)
{
    for (unsigned voice = 0; voice < 3; voice++) {
        double t = draw_uniform(rng, 0.0, 0.3);
        while (t < seconds) {
            double length_s = draw_log(rng, 0.15, 1.2);
            double f_hz = 110.0 * pow(2.0, floor(draw_uniform(rng, 0.0, 36.0)) / 12.0);
            add_note(scene, at + (size_t)(t * RATE_HZ), f_hz, length_s,
                     level * draw_log(rng, 0.3, 1.0), rng);
            t += length_s;
        }
    }
}

static void add_click(struct scene *scene, size_t at, double level, gsl_rng *rng)
{
    size_t frames = 1 + gsl_rng_uniform_int(rng, 6);
    double sign = draw_chance(rng, 0.5) ? 1.0 : -1.0;
    for (size_t i = 0; i < frames; i++)
        add(scene, at + i, sign * level * draw_uniform(rng, 0.3, 1.0));
}

#define START (size_t)(1.0 * RATE_HZ)

static size_t later(gsl_rng *rng, double low_s, double high_s)
{
    return (size_t)(draw_uniform(rng, low_s, high_s) * RATE_HZ);
}

bool noises_speech(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 6.0, rng))
        return false;
    add_speech(scene, START, 4.0, draw_log(rng, 0.02, 0.5), rng);
    return true;
}

bool noises_clap(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 4.0, rng))
        return false;
    for (size_t at = START; at < scene->frame_count - 48000; at += later(rng, 0.2, 1.0))
        add_clap(scene, at, draw_log(rng, 0.05, 0.5), rng);
    return true;
}

bool noises_door(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 3.5, rng))
        return false;
    add_thump(scene, START, draw_log(rng, 0.05, 0.5), rng);
    for (unsigned i = 0; i < 4; i++)
        if (draw_chance(rng, 0.5))
            add_burst(scene, START + later(rng, 0.0, 0.3), draw_log(rng, 400.0, 3000.0), 600.0,
                      0.008, draw_log(rng, 0.01, 0.1), rng); /* the latch */
    return true;
}

bool noises_keys(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 4.0, rng))
        return false;
    add_jingle(scene, START, draw_uniform(rng, 0.3, 2.0), draw_log(rng, 0.01, 0.15), rng);
    return true;
}

bool noises_footsteps(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 5.0, rng))
        return false;
    double level = draw_log(rng, 0.02, 0.3);
    for (size_t at = START; at < scene->frame_count - 24000; at += later(rng, 0.4, 0.7)) {
        add_thump(scene, at, level, rng);
        add_burst(scene, at + later(rng, 0.05, 0.12), 2500.0, 3000.0, 0.03, 0.1 * level, rng);
    }
    return true;
}

bool noises_click(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 3.5, rng))
        return false;
    for (size_t at = START; at < scene->frame_count - 24000; at += later(rng, 0.1, 1.5))
        add_click(scene, at, draw_log(rng, 0.03, 0.9), rng);
    return true;
}

bool noises_swell(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 7.0, rng))
        return false;
    add_swell(scene, START, draw_log(rng, 0.02, 0.5), rng);
    return true;
}

bool noises_music(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 6.0, rng))
        return false;
    add_music(scene, START, 4.0, draw_log(rng, 0.02, 0.2), rng);
    return true;
}

bool noises_room(struct scene *scene, gsl_rng *rng)
{
    if (!begin(scene, 60.0, rng))
        return false;
    for (size_t at = START; at < scene->frame_count - 240000; at += later(rng, 1.0, 6.0)) {
        double level = draw_log(rng, 0.003, 0.1);
        switch (gsl_rng_uniform_int(rng, 7)) {
        case 0:
            add_speech(scene, at, draw_uniform(rng, 0.5, 3.0), level, rng);
            break;
        case 1:
            add_clap(scene, at, level, rng);
            break;
        case 2:
            add_thump(scene, at, level, rng);
            break;
        case 3:
            add_jingle(scene, at, draw_uniform(rng, 0.1, 1.0), 0.3 * level, rng);
            break;
        case 4:
            add_click(scene, at, level, rng);
            break;
        case 5:
            add_swell(scene, at, level, rng);
            break;
        default:
            add_music(scene, at, draw_uniform(rng, 1.0, 3.0), 0.3 * level, rng);
            break;
        }
    }
    return true;
}
