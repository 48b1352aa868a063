#include "support/log_scene.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

uint64_t log_scene_next(uint64_t *state)
{
    uint64_t z = (*state += UINT64_C(0x9e3779b97f4a7c15));
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

double log_scene_uniform(uint64_t *state)
{
    return (double)(log_scene_next(state) >> 11) * 0x1p-53;
}

static unsigned below(uint64_t *state, unsigned bound)
{
    return (unsigned)(log_scene_next(state) % bound);
}

/* A decaying tone in noise, on the grid of a converter where there is one. */
static float sample_of(uint64_t *state, enum log_scene_samples kind, size_t i)
{
    double t = (double)i / 48000;
    double value =
        0.7 * exp(-3 * t) * sin(2 * WANE_PI * 880 * t) + 1e-3 * (log_scene_uniform(state) - 0.5);
    if (kind == SAMPLES_16_BIT)
        return (float)(floor(value * 32768 + 0.5) / 32768);
    if (kind == SAMPLES_24_BIT)
        return (float)(floor(value * 8388608 + 0.5) / 8388608);
    return (float)value;
}

struct strike *log_scene_strike(uint64_t *state, enum log_scene_samples kind, size_t frame_count)
{
    struct strike *strike = calloc(1, sizeof *strike);
    float *samples = malloc((frame_count + 1) * sizeof *samples);
    if (strike == NULL || samples == NULL)
        abort();
    if (kind == SAMPLES_NONE)
        frame_count = 0;
    for (size_t i = 0; i < frame_count; i++)
        samples[i] = sample_of(state, kind, i);
    strike->rate_hz = 48000 + log_scene_uniform(state);
    strike->channel = 1 + (int)below(state, 64);
    strike->first_frame = log_scene_next(state);
    strike->samples = samples;
    strike->frame_count = frame_count;
    strike->trigger = frame_count / 10;
    strike->end = (enum strike_end)below(state, STRIKE_END_LOST + 1);
    strike->lost_count = below(state, STRIKE_LOST_MAX + 1);
    for (unsigned i = 0; i < strike->lost_count; i++)
        strike->lost[i] = (struct lost_span){below(state, 1000), log_scene_next(state)};
    strike->carried_count = below(state, STRIKE_CARRIED_MAX + 1);
    for (unsigned i = 0; i < strike->carried_count; i++)
        strike->carried[i] = (struct carried_mode){
            log_scene_uniform(state) * 2e4, log_scene_uniform(state), log_scene_uniform(state), -1};
    return strike;
}

static void fill_mode(uint64_t *state, unsigned i, struct mode *mode)
{
    double f_hz = 20 + 2e4 * log_scene_uniform(state);
    double decay_per_s = 0.1 + 30 * log_scene_uniform(state);
    snprintf(mode->label, sizeof mode->label, "%u%s", i + 1, i % 3 == 2 ? "a" : "");
    mode->f_hz = f_hz;
    mode->f_u_hz = 1e-4 * log_scene_uniform(state);
    mode->decay_per_s = decay_per_s;
    mode->decay_u_per_s = 1e-3 * log_scene_uniform(state);
    mode->f_decay_cov = -1e-9;
    mode->natural_f_hz = hypot(f_hz, decay_per_s / (2 * WANE_PI));
    mode->q = WANE_PI * mode->natural_f_hz / decay_per_s;
    mode->q_u = i % 4 == 3 ? (double)NAN : 0.1;
    mode->zeta = 0.5 / mode->q;
    mode->zeta_u = 1e-9;
    mode->t60_s = log(1000) / decay_per_s;
    mode->t60_u_s = 1e-5;
    mode->level_dbfs = -60 * log_scene_uniform(state);
    mode->phase_rad = log_scene_uniform(state);
}

void log_scene_reading(uint64_t *state, enum verdict verdict, struct reading *out_reading)
{
    reading_init(out_reading);
    out_reading->onset_frame = 480.25 + log_scene_uniform(state);
    out_reading->window_begin_frame = 500;
    out_reading->window_end_frame = 4096;
    out_reading->peak_dbfs = -3 * log_scene_uniform(state);
    out_reading->noise_dbfs = -70;
    out_reading->snr_db = 60;
    out_reading->verdict = verdict;
    out_reading->reasons = verdict == VERDICT_GOOD ? 0 : 1u << below(state, REASON_COUNT);
    out_reading->remarks = below(state, 1u << REMARK_COUNT);
    if (below(state, 2) == 1)
        out_reading->why.after_s = log_scene_uniform(state);
    if (below(state, 2) == 1)
        out_reading->why.near_hz = log_scene_uniform(state);
    out_reading->mode_count = below(state, READING_MODES_MAX + 1);
    for (unsigned i = 0; i < out_reading->mode_count; i++)
        fill_mode(state, i, &out_reading->modes[i]);
    out_reading->tone_count = below(state, READING_TONES_MAX + 1);
    for (unsigned i = 0; i < out_reading->tone_count; i++)
        out_reading->tones[i] = (struct steady_tone){50.0 * (i + 1), -40};
    if (below(state, 2) == 1)
        out_reading->fit_ms = log_scene_uniform(state);
}

void log_scene_context(int64_t n, struct log_context *out_context)
{
    *out_context = (struct log_context){0};
    out_context->time_ms = LOG_SCENE_MS + 1000 * n;
    out_context->closed_ms = out_context->time_ms + 700;
    out_context->clock_synced = true;
    out_context->keep_samples = true;
    snprintf(out_context->input, sizeof out_context->input, "bench");
    snprintf(out_context->settings, sizeof out_context->settings, "f_low_hz=20 modes_max=10");
    snprintf(out_context->version, sizeof out_context->version, "0.1.0");
}

#define SAME_BITS(a, b)                                                                            \
    do {                                                                                           \
        if (memcmp(&(a), &(b), sizeof(a)) != 0)                                                    \
            fail_msg("%s and %s differ", #a, #b);                                                  \
    } while (0)

void log_scene_same_strike(const struct strike *a, const struct strike *b)
{
    SAME_BITS(a->rate_hz, b->rate_hz);
    SAME_BITS(a->channel, b->channel);
    SAME_BITS(a->first_frame, b->first_frame);
    SAME_BITS(a->frame_count, b->frame_count);
    SAME_BITS(a->trigger, b->trigger);
    SAME_BITS(a->end, b->end);
    SAME_BITS(a->lost_count, b->lost_count);
    SAME_BITS(a->carried_count, b->carried_count);
    for (unsigned i = 0; i < a->lost_count; i++)
        SAME_BITS(a->lost[i], b->lost[i]);
    for (unsigned i = 0; i < a->carried_count; i++)
        SAME_BITS(a->carried[i], b->carried[i]);
    if (a->frame_count > 0 &&
        memcmp(a->samples, b->samples, a->frame_count * sizeof *a->samples) != 0)
        fail_msg("the samples differ");
}

/* The label's bytes after its NUL are not part of it. */
static void same_mode(const struct mode *a, const struct mode *b)
{
    assert_string_equal(a->label, b->label);
    if (memcmp(&a->f_hz, &b->f_hz, sizeof *a - offsetof(struct mode, f_hz)) != 0)
        fail_msg("mode %s differs", a->label);
}

void log_scene_same_reading(const struct reading *a, const struct reading *b)
{
    SAME_BITS(a->onset_frame, b->onset_frame);
    SAME_BITS(a->window_begin_frame, b->window_begin_frame);
    SAME_BITS(a->window_end_frame, b->window_end_frame);
    SAME_BITS(a->peak_dbfs, b->peak_dbfs);
    SAME_BITS(a->noise_dbfs, b->noise_dbfs);
    SAME_BITS(a->snr_db, b->snr_db);
    SAME_BITS(a->verdict, b->verdict);
    SAME_BITS(a->reasons, b->reasons);
    SAME_BITS(a->remarks, b->remarks);
    SAME_BITS(a->why, b->why);
    SAME_BITS(a->mode_count, b->mode_count);
    SAME_BITS(a->tone_count, b->tone_count);
    SAME_BITS(a->fit_ms, b->fit_ms);
    for (unsigned i = 0; i < a->mode_count; i++)
        same_mode(&a->modes[i], &b->modes[i]);
    for (unsigned i = 0; i < a->tone_count; i++)
        SAME_BITS(a->tones[i], b->tones[i]);
}
