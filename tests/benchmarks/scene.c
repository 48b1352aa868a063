#include "scene.h"

#include <gsl/gsl_randist.h>
#include <math.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define TWO_PI (2.0 * WANE_PI)

double draw_uniform(gsl_rng *rng, double low, double high)
{
    return low + (high - low) * gsl_rng_uniform(rng);
}

double draw_log(gsl_rng *rng, double low, double high)
{
    return low * pow(high / low, gsl_rng_uniform(rng));
}

bool draw_chance(gsl_rng *rng, double probability)
{
    return gsl_rng_uniform(rng) < probability;
}

/* integral over 0 ... t of sin(pi s / contact) e^(-p s) ds, 0 <= t <= contact */
static double complex half_sine_response(double complex p, double contact_s, double t)
{
    double complex plus = CMPLX(0.0, WANE_PI / contact_s) - p;
    double complex minus = CMPLX(0.0, -WANE_PI / contact_s) - p;
    return ((cexp(plus * t) - 1.0) / plus - (cexp(minus * t) - 1.0) / minus) / CMPLX(0.0, 2.0);
}

static double complex pole_of(const struct scene_mode *mode)
{
    return CMPLX(-mode->decay_per_s, TWO_PI * mode->f_hz);
}

/* c of the ring Re(c e^(p t)), t from the pulse's begin, once the pulse is over. A half-sine is
 * scaled so that a mode much slower than the contact gets the whole amplitude. */
static double complex pulse_amplitude(const struct scene_mode *mode,
                                      const struct scene_pulse *pulse)
{
    double complex c = pulse->weight * mode->amplitude * cexp(CMPLX(0.0, mode->phase_rad));
    if (pulse->contact_s > 0.0)
        c *= half_sine_response(pole_of(mode), pulse->contact_s, pulse->contact_s) * WANE_PI /
             (2.0 * pulse->contact_s);
    return c;
}

/* Amplitude and phase correction of a mode that glides or whose damping grows with amplitude:
 * da/dt = -decay a - level a^2, solved; phase from f + glide t. */
static double bent_sample(const struct scene_mode *mode, double complex c, double t)
{
    double a0 = cabs(c);
    double fade = exp(-mode->decay_per_s * t);
    double grown = mode->level_damping > 0.0
                       ? 1.0 + mode->level_damping * a0 * (1.0 - fade) / mode->decay_per_s
                       : 1.0;
    double phase = carg(c) + TWO_PI * (mode->f_hz + 0.5 * mode->glide_hz_per_s * t) * t;
    return a0 * fade / grown * cos(phase);
}

static void add_free_ring(double *samples, size_t frame_count, const struct scene_mode *mode,
                          double complex c, double begin_frame, double rate_hz)
{
    enum { BLOCK = 512 };
    size_t first = begin_frame <= 0.0 ? 0 : (size_t)ceil(begin_frame);
    double complex p = pole_of(mode);
    bool is_bent = mode->glide_hz_per_s != 0.0 || mode->level_damping > 0.0;
    double complex step = cexp(p / rate_hz);
    double complex now = 0.0;
    for (size_t n = first; n < frame_count; n++) {
        double t = ((double)n - begin_frame) / rate_hz;
        if (is_bent) {
            samples[n] += bent_sample(mode, c, t);
            continue;
        }
        if ((n - first) % BLOCK == 0) {
            now = c * cexp(p * t); /* afresh, so that rounding does not gather */
            if (cabs(now) < 1e-14)
                return;
        }
        samples[n] += creal(now);
        now = CMPLX(creal(now) * creal(step) - cimag(now) * cimag(step),
                    creal(now) * cimag(step) + cimag(now) * creal(step));
    }
}

static void add_pulse(struct scene *scene, double *samples, const struct scene_mode *mode,
                      const struct scene_pulse *pulse)
{
    double begin = scene->onset_frame + pulse->at_s * scene->rate_hz;
    double end = begin + pulse->contact_s * scene->rate_hz;
    double complex p = pole_of(mode);
    if (pulse->contact_s > 0.0) {
        double complex full = pulse->weight * mode->amplitude * cexp(CMPLX(0.0, mode->phase_rad));
        for (size_t n = (size_t)ceil(begin); (double)n < end && n < scene->frame_count; n++) {
            double t = ((double)n - begin) / scene->rate_hz;
            double complex part = half_sine_response(p, pulse->contact_s, t) * cexp(p * t);
            samples[n] += creal(full * part) * WANE_PI / (2.0 * pulse->contact_s);
        }
    }
    double complex at_end = pulse_amplitude(mode, pulse) * cexp(p * pulse->contact_s);
    if (scene->coupling_hz > 0.0 && pulse->contact_s <= 0.0) {
        /* s/(s + corner) on A/(s - p): the ring, and a real exponential at the corner. */
        double corner = TWO_PI * scene->coupling_hz;
        struct scene_mode slow = {.decay_per_s = corner};
        add_free_ring(samples, scene->frame_count, &slow, creal(at_end * corner / (p + corner)),
                      end, scene->rate_hz);
        at_end *= p / (p + corner);
    }
    add_free_ring(samples, scene->frame_count, mode, at_end, end, scene->rate_hz);
}

static void add_blow_noise(const struct scene *scene, double *samples, gsl_rng *rng)
{
    for (unsigned i = 0; i < scene->pulse_count; i++) {
        const struct scene_pulse *pulse = &scene->pulses[i];
        double begin = scene->onset_frame + pulse->at_s * scene->rate_hz;
        double length = pulse->contact_s * scene->rate_hz;
        for (size_t n = (size_t)ceil(begin);
             pulse->noise > 0.0 && (double)n < begin + length && n < scene->frame_count; n++)
            samples[n] += pulse->noise * sin(WANE_PI * ((double)n - begin) / length) *
                          gsl_ran_gaussian_ziggurat(rng, 1.0);
    }
}

static void add_tone(const struct scene *scene, double *samples, const struct scene_tone *tone,
                     gsl_rng *rng)
{
    double walk = 0.0;
    double step = tone->wander / sqrt(scene->rate_hz);
    for (size_t n = 0; n < scene->frame_count; n++) {
        double t = ((double)n - scene->onset_frame) / scene->rate_hz;
        samples[n] += tone->amplitude * cos(TWO_PI * tone->f_hz * t + tone->phase_rad + walk);
        if (tone->wander > 0.0)
            walk += gsl_ran_gaussian_ziggurat(rng, step);
    }
}

/* Coloured noise as a sum of first-order sections a factor 4 apart in corner. Equal variances a
 * section give 1/f; a room has a strong low end over a white floor. */
struct section {
    double corner_hz, share; /* of the variance */
};
#define SECTIONS_MAX 8

static size_t noise_sections(enum scene_noise noise, struct section out[SECTIONS_MAX])
{
    switch (noise) {
    case SCENE_NOISE_PINK: {
        double corner_hz = 1.0;
        for (size_t i = 0; i < SECTIONS_MAX; i++, corner_hz *= 4.0)
            out[i] = (struct section){corner_hz, 1.0 / SECTIONS_MAX};
        return SECTIONS_MAX;
    }
    case SCENE_NOISE_ROOM:
        out[0] = (struct section){15.0, 0.5};
        out[1] = (struct section){120.0, 0.3};
        out[2] = (struct section){700.0, 0.12};
        out[3] = (struct section){1e9, 0.08};
        return 4;
    case SCENE_NOISE_WHITE:
    case SCENE_NOISE_COUNT:
        break;
    }
    out[0] = (struct section){1e9, 1.0};
    return 1;
}

static double section_pole(const struct section *section, double rate_hz)
{
    return section->corner_hz > 0.5 * rate_hz ? 0.0 : exp(-TWO_PI * section->corner_hz / rate_hz);
}

static void add_noise(const struct scene *scene, double *samples, gsl_rng *rng)
{
    struct section sections[SECTIONS_MAX];
    size_t count = noise_sections(scene->noise, sections);
    double ring = (double)scene->frame_count - scene->onset_frame;
    for (size_t i = 0; i < count; i++) {
        double pole = section_pole(&sections[i], scene->rate_hz);
        double sd = scene->noise_sd * sqrt(sections[i].share);
        double drive = sd * sqrt(1.0 - pole * pole);
        double state = gsl_ran_gaussian_ziggurat(rng, sd);
        for (size_t n = 0; n < scene->frame_count; n++) {
            double rise = 1.0;
            double into = ((double)n - scene->onset_frame) / ring;
            if (scene->noise_rise > 1.0 && into > 0.0)
                rise += (scene->noise_rise - 1.0) * into;
            samples[n] += rise * state;
            state = pole * state + gsl_ran_gaussian_ziggurat(rng, drive);
        }
    }
}

double bench_noise_at(const struct scene *scene, const struct scene_take *take, double f_hz,
                      double decay_per_s)
{
    struct section sections[SECTIONS_MAX];
    size_t count = noise_sections(scene->noise, sections);
    double power = 0.0;
    for (size_t i = 0; i < count; i++) {
        double pole = section_pole(&sections[i], scene->rate_hz);
        double complex back = 1.0 - pole * cexp(CMPLX(0.0, -TWO_PI * f_hz / scene->rate_hz));
        power += sections[i].share * (1.0 - pole * pole) /
                 (creal(back) * creal(back) + cimag(back) * cimag(back));
    }
    power *= scene->noise_sd * scene->noise_sd;
    if (scene->noise_rise > 1.0) {
        double weight = 0.0, sum = 0.0;
        double ring = (double)scene->frame_count - scene->onset_frame;
        for (size_t i = 0; i < 1000; i++) {
            double n = (double)(take->end - take->free_frame) * ((double)i + 0.5) / 1000.0;
            double at = decay_per_s * n / scene->rate_hz;
            double w = at * at * exp(-2.0 * at);
            double rise = 1.0 + (scene->noise_rise - 1.0) * n / ring;
            weight += w;
            sum += w * rise * rise;
        }
        power *= sum / weight;
    }
    if (scene->bits > 0) {
        double step = ldexp(1.0, -(int)scene->bits + 1);
        power += step * step / 12.0;
    }
    return sqrt(power);
}

bool bench_make(struct scene *scene, gsl_rng *rng)
{
    double *sum = calloc(scene->frame_count, sizeof *sum);
    scene->samples = malloc(scene->frame_count * sizeof *scene->samples);
    if (!sum || !scene->samples) {
        free(sum);
        return false;
    }
    for (unsigned k = 0; k < scene->mode_count; k++)
        for (unsigned i = 0; i < scene->pulse_count; i++)
            add_pulse(scene, sum, &scene->modes[k], &scene->pulses[i]);
    for (unsigned i = 0; i < scene->tone_count; i++)
        add_tone(scene, sum, &scene->tones[i], rng);
    add_blow_noise(scene, sum, rng);
    add_noise(scene, sum, rng);
    double top = scene->bits > 0 ? ldexp(1.0, (int)scene->bits - 1) : 0.0;
    for (size_t n = 0; n < scene->frame_count; n++) {
        double value = sum[n];
        if (scene->bits > 0)
            value = fmax(-top, fmin(top - 1.0, floor(value * top + 0.5))) / top;
        scene->samples[n] = (float)value;
    }
    free(sum);
    return true;
}

void bench_done(struct scene *scene)
{
    free(scene->samples);
    scene->samples = NULL;
}

size_t bench_elements(const struct scene *scene, const struct scene_take *take,
                      struct element elements[ELEMENTS_MAX])
{
    size_t n = 0;
    double at_s = ((double)take->free_frame - scene->onset_frame) / scene->rate_hz;
    double corner = TWO_PI * scene->coupling_hz;
    double complex slow = 0.0;
    for (unsigned k = 0; k < scene->mode_count; k++) {
        double complex p = pole_of(&scene->modes[k]), c = 0.0;
        for (unsigned i = 0; i < scene->pulse_count; i++) {
            const struct scene_pulse *pulse = &scene->pulses[i];
            double since_s = at_s - pulse->at_s;
            if (since_s < pulse->contact_s - 1e-12)
                continue;
            double complex here = pulse_amplitude(&scene->modes[k], pulse);
            if (corner > 0.0) {
                slow += creal(here * corner / (p + corner)) * exp(-corner * since_s);
                here *= p / (p + corner);
            }
            c += here * cexp(p * since_s);
        }
        elements[n++] = (struct element){ELEMENT_MODE, p / scene->rate_hz, c};
    }
    for (unsigned i = 0; i < scene->tone_count; i++) {
        const struct scene_tone *tone = &scene->tones[i];
        if (tone->wander > 0.0)
            continue; /* noise, in effect: no steady tone describes it */
        double complex w = CMPLX(0.0, TWO_PI * tone->f_hz);
        elements[n++] =
            (struct element){ELEMENT_TONE, w / scene->rate_hz,
                             tone->amplitude * cexp(CMPLX(0.0, tone->phase_rad) + w * at_s)};
    }
    if (corner > 0.0)
        elements[n++] = (struct element){scene->coupling_known ? ELEMENT_REAL_KNOWN : ELEMENT_REAL,
                                         -corner / scene->rate_hz, creal(slow)};
    return n;
}

struct strike *bench_strike(const struct scene *scene, const struct scene_take *take)
{
    struct strike *strike = calloc(1, sizeof *strike);
    if (!strike)
        return NULL;
    *strike = (struct strike){
        .rate_hz = scene->rate_hz,
        .channel = 1,
        .first_frame = take->begin,
        .frame_count = take->end - take->begin,
        .trigger = take->trigger - take->begin,
        .end = take->why_end,
    };
    strike->samples = malloc(strike->frame_count * sizeof *strike->samples);
    if (!strike->samples) {
        free(strike);
        return NULL;
    }
    memcpy(strike->samples, scene->samples + take->begin,
           strike->frame_count * sizeof *strike->samples);
    return strike;
}

static void dump_truth(const struct scene *scene, FILE *out)
{
    fprintf(out,
            "seed %lu, %s\nrate_hz %g onset_frame %.6f noise_sd %g noise %d rise %g\n"
            "coupling_hz %g known %d bits %u\n",
            scene->seed, scene->note, scene->rate_hz, scene->onset_frame, scene->noise_sd,
            (int)scene->noise, scene->noise_rise, scene->coupling_hz, scene->coupling_known,
            scene->bits);
    for (unsigned k = 0; k < scene->mode_count; k++) {
        const struct scene_mode *mode = &scene->modes[k];
        fprintf(out,
                "mode f_hz %.9g decay_per_s %.9g amplitude %.6g phase_rad %.4f glide %g "
                "level_damping %g\n",
                mode->f_hz, mode->decay_per_s, mode->amplitude, mode->phase_rad,
                mode->glide_hz_per_s, mode->level_damping);
    }
    for (unsigned i = 0; i < scene->pulse_count; i++)
        fprintf(out, "pulse at_s %.6g contact_s %.6g weight %.4g noise %.4g\n",
                scene->pulses[i].at_s, scene->pulses[i].contact_s, scene->pulses[i].weight,
                scene->pulses[i].noise);
    for (unsigned i = 0; i < scene->tone_count; i++)
        fprintf(out, "tone f_hz %.6f amplitude %.6g\n", scene->tones[i].f_hz,
                scene->tones[i].amplitude);
    for (unsigned i = 0; i < scene->take_count; i++)
        fprintf(out, "take begin %zu end %zu onset %.6f free %zu trigger %zu why %d\n",
                scene->takes[i].begin, scene->takes[i].end, scene->takes[i].onset_frame,
                scene->takes[i].free_frame, scene->takes[i].trigger, (int)scene->takes[i].why_end);
}

bool bench_dump(const struct scene *scene, const char *name)
{
    char path[512];
    (void)snprintf(path, sizeof path, "%s.txt", name);
    FILE *out = fopen(path, "w");
    if (!out)
        return false;
    dump_truth(scene, out);
    bool written = fclose(out) == 0;
    (void)snprintf(path, sizeof path, "%s.wav", name);
    SF_INFO info = {.samplerate = (int)scene->rate_hz,
                    .channels = 1,
                    .format = SF_FORMAT_WAV | SF_FORMAT_FLOAT};
    SNDFILE *file = sf_open(path, SFM_WRITE, &info);
    if (!file)
        return false;
    sf_count_t count = (sf_count_t)scene->frame_count;
    written = sf_writef_float(file, scene->samples, count) == count && written;
    return sf_close(file) == 0 && written;
}
