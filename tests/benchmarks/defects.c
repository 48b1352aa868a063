#include "defects.h"

#include "families.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define RATE_HZ    48000.0
#define FRAMES_MAX 1500000u

/* A sound part under a light hammer: 1 to 4 modes, a short contact, 7 time constants. The defect is
 * put on afterwards. peak: of the ring, full scale 1. */
static void draw_ring(struct scene *scene, unsigned modes_max, double decay_low, double decay_high,
                      double peak, double snr_db, gsl_rng *rng)
{
    scene->rate_hz = RATE_HZ;
    scene->onset_frame = floor(SCENE_LEAD_S * RATE_HZ) + gsl_rng_uniform(rng);
    unsigned count = 1 + (unsigned)gsl_rng_uniform_int(rng, modes_max);
    double slow = draw_log(rng, decay_low, decay_high), sum = 0.0, top_hz = 0.0;
    for (unsigned k = 0; k < count; k++) {
        double f_hz = draw_log(rng, 200.0, 1200.0) * (1.0 + 1.7 * k);
        scene->modes[k] = (struct scene_mode){
            .f_hz = f_hz,
            .decay_per_s = slow * (1.0 + draw_uniform(rng, 0.0, 1.5) * k),
            .amplitude = pow(10.0, -draw_uniform(rng, 0.3, 1.0) * k),
            .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
        };
        sum += scene->modes[k].amplitude;
        top_hz = fmax(top_hz, f_hz);
    }
    for (unsigned k = 0; k < count; k++)
        scene->modes[k].amplitude *= peak / sum;
    scene->mode_count = count;
    scene->pulse_count = 1;
    scene->pulses[0] =
        (struct scene_pulse){.contact_s = fmin(draw_log(rng, 1e-4, 5e-4), 0.7 / top_hz),
                             .weight = 1.0,
                             .noise = 0.1 * peak};
    scene->noise_sd = scene->modes[0].amplitude / sqrt(2.0) * pow(10.0, -snr_db / 20.0);
    (void)snprintf(scene->note, sizeof scene->note, "%u modes %.4g Hz %.3g /s snr %.0f", count,
                   scene->modes[0].f_hz, scene->modes[0].decay_per_s, snr_db);
}

static bool make_ring(struct scene *scene, double spans, gsl_rng *rng)
{
    bench_close(scene, spans, FRAMES_MAX, rng);
    return bench_make(scene, rng);
}

static void note(struct scene *scene, const char *what, double value)
{
    size_t used = strlen(scene->note);
    (void)snprintf(scene->note + used, sizeof scene->note - used, " %s %.4g", what, value);
}

/* ---- sound ---- */

static bool is_sound(const struct scene *scene)
{
    struct element elements[ELEMENTS_MAX];
    struct bound bounds[ELEMENTS_MAX];
    const struct scene_take *take = &scene->takes[0];
    size_t count = bench_elements(scene, take, elements);
    if (scene->pulse_count > 1 || scene->noise_rise > 1.0 ||
        !family_bounds(scene, take, elements, count, bounds))
        return false;
    unsigned lead = 0;
    for (unsigned k = 1; k < scene->mode_count; k++)
        if (cabs(elements[k].c) > cabs(elements[lead].c))
            lead = k;
    double span_s = (double)(take->end - take->free_frame) / scene->rate_hz;
    double decay = scene->modes[lead].decay_per_s;
    return decay * span_s >= 3.2 && bounds[lead].decay_sd_per_s < 0.05 * decay &&
           bounds[lead].amplitude_sd < 0.03 * cabs(elements[lead].c);
}

static bool make_sound(struct scene *scene, gsl_rng *rng)
{
    static const char *const names[] = {"single", "tank", "chord", "hum", "coloured", "attack"};
    for (;;) {
        const struct family *family = family_find(names[gsl_rng_uniform_int(rng, 6)]);
        unsigned long seed = gsl_rng_uniform_int(rng, 1000000000ul);
        if (!family_make(family, seed, 0, scene))
            return false;
        if (is_sound(scene)) {
            char drawn[sizeof scene->note];
            memcpy(drawn, scene->note, sizeof drawn);
            (void)snprintf(scene->note, sizeof scene->note, "%.8s %.80s", family->name, drawn);
            return true;
        }
        bench_done(scene);
    }
}

/* Two taps on a part that has died in between: two good strikes. */
static bool make_two_apart(struct scene *scene, gsl_rng *rng)
{
    double after_s = draw_uniform(rng, 0.12, 0.4);
    draw_ring(scene, 2, 7.0 / after_s, 12.0 / after_s, draw_log(rng, 0.1, 0.5),
              draw_uniform(rng, 35.0, 55.0), rng);
    scene->pulses[1] = scene->pulses[0];
    scene->pulses[1].at_s = after_s;
    scene->pulse_count = 2;
    note(scene, "again after", after_s);
    return make_ring(scene, 7.0, rng);
}

/* ---- the input ---- */

static bool make_clip_hard(struct scene *scene, gsl_rng *rng)
{
    double drive = draw_uniform(rng, 1.3, 4.0);
    draw_ring(scene, 3, 2.0, 20.0, 0.95 * drive, draw_uniform(rng, 40.0, 60.0), rng);
    note(scene, "drive", drive);
    if (!make_ring(scene, 7.0, rng))
        return false;
    for (size_t n = 0; n < scene->frame_count; n++)
        scene->samples[n] = fmaxf(-1.0f, fminf(32767.0f / 32768.0f, scene->samples[n]));
    return true;
}

/* A pre-amp's stop below full scale: the noise behind it is added after the clipping. */
static bool make_clip_low(struct scene *scene, gsl_rng *rng)
{
    double drive = draw_uniform(rng, 1.3, 4.0), stop = draw_log(rng, 0.1, 0.8);
    draw_ring(scene, 3, 2.0, 20.0, stop * drive, draw_uniform(rng, 40.0, 60.0), rng);
    note(scene, "drive", drive);
    note(scene, "stop", stop);
    if (!make_ring(scene, 7.0, rng))
        return false;
    for (size_t n = 0; n < scene->frame_count; n++) {
        float hiss = (float)draw_uniform(rng, -1e-5, 1e-5);
        scene->samples[n] = fmaxf((float)-stop, fminf((float)stop, scene->samples[n])) + hiss;
    }
    return true;
}

static bool make_clip_soft(struct scene *scene, gsl_rng *rng)
{
    double drive = draw_uniform(rng, 1.2, 3.0), stop = draw_log(rng, 0.2, 0.9);
    draw_ring(scene, 3, 2.0, 20.0, stop * drive, draw_uniform(rng, 40.0, 60.0), rng);
    note(scene, "drive", drive);
    note(scene, "stop", stop);
    if (!make_ring(scene, 7.0, rng))
        return false;
    for (size_t n = 0; n < scene->frame_count; n++)
        scene->samples[n] = (float)(stop * tanh((double)scene->samples[n] / stop));
    return true;
}

static bool make_lost(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 3, 1.5, 15.0, draw_log(rng, 0.1, 0.8), draw_uniform(rng, 35.0, 60.0), rng);
    if (!make_ring(scene, 7.0, rng))
        return false;
    size_t lost = 200 + gsl_rng_uniform_int(rng, 1801);
    /* In the middle: while the lead mode is at a tenth or more. */
    double into_s = draw_uniform(rng, 0.15, 2.3) / scene->modes[0].decay_per_s;
    size_t at = (size_t)(scene->onset_frame + (into_s + 0.02) * RATE_HZ);
    memmove(scene->samples + at, scene->samples + at + lost,
            (scene->frame_count - at - lost) * sizeof *scene->samples);
    scene->frame_count -= lost;
    scene->takes[0].end -= lost;
    note(scene, "lost", (double)lost);
    note(scene, "after", into_s);
    return true;
}

/* Gain control: gain moves so that the envelope tends to a target, quickly down, slowly up. */
static bool make_gain_control(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 3, 1.5, 8.0, draw_log(rng, 0.2, 0.8), draw_uniform(rng, 40.0, 60.0), rng);
    double target = draw_log(rng, 0.02, 0.1), rise_s = draw_log(rng, 0.1, 1.0);
    double most = pow(10.0, draw_uniform(rng, 12.0, 30.0) / 20.0);
    note(scene, "target", target);
    note(scene, "rise", rise_s);
    if (!make_ring(scene, 7.0, rng))
        return false;
    double envelope = 0.0, gain = most;
    double let_go = exp(-1.0 / (0.02 * RATE_HZ));
    for (size_t n = 0; n < scene->frame_count; n++) {
        double value = (double)scene->samples[n];
        envelope = fmax(fabs(value), envelope * let_go);
        double wanted = fmin(most, target / fmax(envelope, 1e-9));
        double time_s = wanted < gain ? 0.005 : rise_s;
        gain *= pow(wanted / gain, 1.0 / (time_s * RATE_HZ));
        scene->samples[n] = (float)(value * gain);
    }
    double peak = 0.0;
    for (size_t n = 0; n < scene->frame_count; n++)
        peak = fmax(peak, fabs((double)scene->samples[n]));
    for (size_t n = 0; n < scene->frame_count; n++)
        scene->samples[n] *= (float)(0.7 / peak);
    return true;
}

/* A gate: shut by 20 dB to all the way, once the envelope has sunk under its threshold. */
static bool make_gate(struct scene *scene, gsl_rng *rng)
{
    double peak = draw_log(rng, 0.1, 0.8), snr_db = draw_uniform(rng, 40.0, 60.0);
    draw_ring(scene, 3, 1.5, 10.0, peak, snr_db, rng);
    double threshold = peak * pow(10.0, -draw_uniform(rng, 12.0, fmin(30.0, snr_db - 15.0)) / 20.0);
    double shut = draw_chance(rng, 0.5) ? 0.0 : pow(10.0, -draw_uniform(rng, 20.0, 40.0) / 20.0);
    double fade = exp(-1.0 / (draw_log(rng, 0.005, 0.05) * RATE_HZ));
    note(scene, "threshold", threshold);
    if (!make_ring(scene, 7.0, rng))
        return false;
    double envelope = 0.0, gain = shut, let_go = exp(-1.0 / (0.02 * RATE_HZ));
    for (size_t n = 0; n < scene->frame_count; n++) {
        envelope = fmax(fabs((double)scene->samples[n]), envelope * let_go);
        bool is_open = envelope > threshold;
        gain = is_open ? 1.0 + (gain - 1.0) * 0.97 : shut + (gain - shut) * fade;
        scene->samples[n] *= (float)gain;
    }
    return true;
}

/* ---- the hand ---- */

static bool make_double_hit(struct scene *scene, gsl_rng *rng)
{
    double after_s = draw_log(rng, 0.005, 0.15);
    draw_ring(scene, 3, 1.0, fmin(20.0, 3.0 / after_s), draw_log(rng, 0.1, 0.45),
              draw_uniform(rng, 35.0, 60.0), rng);
    scene->pulses[1] = scene->pulses[0];
    scene->pulses[1].at_s = after_s;
    scene->pulses[1].weight = draw_log(rng, 0.3, 1.0) * (draw_chance(rng, 0.3) ? -1.0 : 1.0);
    scene->pulses[1].noise *= fabs(scene->pulses[1].weight);
    scene->pulse_count = 2;
    note(scene, "again after", after_s);
    note(scene, "by", scene->pulses[1].weight);
    return make_ring(scene, 7.0, rng);
}

static bool make_bounce(struct scene *scene, gsl_rng *rng)
{
    double after_s = draw_log(rng, 0.008, 0.04);
    draw_ring(scene, 3, 1.0, 20.0, draw_log(rng, 0.1, 0.6), draw_uniform(rng, 35.0, 60.0), rng);
    for (unsigned i = 1; i < 3; i++) {
        scene->pulses[i] = scene->pulses[i - 1];
        scene->pulses[i].at_s += after_s * (i == 1 ? 1.0 : 0.6);
        scene->pulses[i].weight *= draw_uniform(rng, 0.2, 0.5);
        scene->pulses[i].noise *= 0.3;
    }
    scene->pulse_count = 3;
    note(scene, "bounces after", after_s);
    return make_ring(scene, 7.0, rng);
}

static bool make_too_soft(struct scene *scene, gsl_rng *rng)
{
    /* In the mode's own width alpha/pi the noise's rms is sd sqrt(2 alpha/(pi rate)). */
    draw_ring(scene, 1, 3.0, 60.0, 0.05, 40.0, rng);
    double over_db = draw_uniform(rng, -6.0, 5.0);
    double rms = scene->modes[0].amplitude / sqrt(2.0) * pow(10.0, -over_db / 20.0);
    scene->noise_sd = rms / sqrt(2.0 * scene->modes[0].decay_per_s / (WANE_PI * RATE_HZ));
    scene->pulses[0].noise = 0.0;
    note(scene, "over noise dB", over_db);
    return make_ring(scene, 7.0, rng);
}

static bool make_noisy(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 1, 3.0, 60.0, 0.05, 40.0, rng);
    double share = draw_log(rng, 0.14, 0.6), decay = scene->modes[0].decay_per_s;
    /* sd(alpha)/alpha = sqrt(16 alpha sd^2 / (A^2 rate)) (shared/check-values.md 1.1) */
    scene->noise_sd = share * scene->modes[0].amplitude * sqrt(RATE_HZ / (16.0 * decay));
    scene->pulses[0].noise = 0.0;
    note(scene, "u/decay", share);
    return make_ring(scene, 7.0, rng);
}

static bool make_noise_rose(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 3, 1.0, 10.0, draw_log(rng, 0.05, 0.3), draw_uniform(rng, 30.0, 45.0), rng);
    scene->noise_rise = draw_uniform(rng, 8.0, 30.0);
    note(scene, "noise rises x", scene->noise_rise);
    return make_ring(scene, 7.0, rng);
}

static bool make_too_short(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 1, 1.0, 20.0, draw_log(rng, 0.1, 0.8), draw_uniform(rng, 40.0, 60.0), rng);
    double spans = draw_uniform(rng, 0.25, 0.9);
    note(scene, "spans", spans);
    return make_ring(scene, spans, rng);
}

/* ---- the part ---- */

static bool make_level_damping(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 1, 1.5, 15.0, draw_log(rng, 0.1, 0.8), draw_uniform(rng, 45.0, 60.0), rng);
    double share = draw_uniform(rng, 0.3, 1.5); /* early rate over late rate, less one */
    scene->modes[0].level_damping = share * scene->modes[0].decay_per_s / scene->modes[0].amplitude;
    note(scene, "early rate +", share);
    return make_ring(scene, 7.0, rng);
}

static bool make_glide(struct scene *scene, gsl_rng *rng)
{
    draw_ring(scene, 1, 0.3, 5.0, draw_log(rng, 0.1, 0.8), draw_uniform(rng, 45.0, 60.0), rng);
    double share = draw_log(rng, 5e-4, 4e-3) * (draw_chance(rng, 0.5) ? -1.0 : 1.0);
    struct scene_mode *mode = &scene->modes[0];
    mode->glide_hz_per_s = share * mode->f_hz * 0.5 * mode->decay_per_s; /* over two tau */
    note(scene, "glide in 2 tau", share);
    return make_ring(scene, 7.0, rng);
}

static const struct defect defects[] = {
    {"sound", "nothing wrong", 0, 1, false, make_sound},
    {"two-apart", "two taps, dead in between", 0, 2, true, make_two_apart},
    {"clip-hard", "full scale reached in the ring", REASON_BIT(REASON_CLIPPED), 0, false,
     make_clip_hard},
    {"clip-low", "a pre-amp's stop below it", REASON_BIT(REASON_CLIPPED), 0, false, make_clip_low},
    {"clip-soft", "a pre-amp that saturates",
     REASON_BIT(REASON_CLIPPED) | REASON_BIT(REASON_NOT_EXPONENTIAL), 0, false, make_clip_soft},
    {"lost", "200-2000 frames gone", REASON_BIT(REASON_SAMPLES_LOST), 0, false, make_lost},
    {"gain-control", "gain follows the level",
     REASON_BIT(REASON_INPUT_STEERED) | REASON_BIT(REASON_NOT_EXPONENTIAL), 0, false,
     make_gain_control},
    {"gate", "the tail is cut off",
     REASON_BIT(REASON_INPUT_STEERED) | REASON_BIT(REASON_NOT_EXPONENTIAL), 0, false, make_gate},
    {"double-hit", "two taps 5-150 ms apart", REASON_BIT(REASON_DOUBLE_HIT), 0, false,
     make_double_hit},
    {"bounce", "the hammer bounces", REASON_BIT(REASON_DOUBLE_HIT), 0, false, make_bounce},
    {"too-soft", "under 6 dB over the noise",
     REASON_BIT(REASON_TOO_SOFT) | REASON_BIT(REASON_NOISY) | REASON_BIT(REASON_NOT_A_RING), 0,
     false, make_too_soft},
    {"noisy", "u(decay) 14-60 %",
     REASON_BIT(REASON_NOISY) | REASON_BIT(REASON_TOO_SOFT) | REASON_BIT(REASON_NOT_A_RING), 0,
     false, make_noisy},
    {"noise-rose", "noise x8-30 during the ring", REASON_BIT(REASON_NOISY), 0, false,
     make_noise_rose},
    {"too-short", "ends after 0.25-0.9 tau",
     REASON_BIT(REASON_TOO_SHORT) | REASON_BIT(REASON_NOISY), 0, false, make_too_short},
    {"level-damping", "damping grows with amplitude", REASON_BIT(REASON_NOT_EXPONENTIAL), 0, false,
     make_level_damping},
    {"glide", "the frequency moves", REASON_BIT(REASON_GLIDING), 0, false, make_glide},
    {"speech", "", 0, 0, true, noises_speech},
    {"claps", "", 0, 0, true, noises_clap},
    {"door", "a door thumps", 0, 0, true, noises_door},
    {"keys", "keys jingle", 0, 0, true, noises_keys},
    {"footsteps", "", 0, 0, true, noises_footsteps},
    {"clicks", "a loose plug", 0, 0, true, noises_click},
    {"swell", "a tone swells", 0, 0, true, noises_swell},
    {"music", "bowed and blown notes", 0, 0, true, noises_music},
    {"room", "a minute of all that, softly", 0, 0, true, noises_room},
};

const struct defect *defect_table(size_t *out_count)
{
    *out_count = sizeof defects / sizeof defects[0];
    return defects;
}

bool defect_make(const struct defect *defect, unsigned long seed, unsigned index,
                 struct scene *out_scene)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    if (!rng)
        return false;
    unsigned long hash = 5381;
    for (const char *c = defect->name; *c; c++)
        hash = hash * 33 + (unsigned long)*c;
    gsl_rng_set(rng, seed * 1000003ul + index * 7919ul + hash);
    *out_scene = (struct scene){0};
    bool made = defect->make(out_scene, rng);
    out_scene->seed = seed;
    gsl_rng_free(rng);
    return made;
}
