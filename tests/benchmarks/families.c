#include "families.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define TWO_PI (2.0 * WANE_PI)

/* A long record at a high rate is no other problem than at a low one, and costs minutes. */
#define FRAMES_MAX 4000000u

static double noise_for(double amplitude, double snr_db)
{
    return amplitude / sqrt(2.0) * pow(10.0, -snr_db / 20.0);
}

static double draw_rate(gsl_rng *rng)
{
    static const double rates[] = {8000.0, 22050.0, 44100.0, 48000.0, 96000.0, 192000.0};
    return rates[gsl_rng_uniform_int(rng, sizeof rates / sizeof rates[0])];
}

/* A mode by frequency and Q (exact: zeta = 1/(2 Q)). */
static struct scene_mode mode_of(double f_hz, double q, double amplitude, gsl_rng *rng)
{
    double zeta = 0.5 / q;
    return (struct scene_mode){
        .f_hz = f_hz,
        .decay_per_s = TWO_PI * f_hz * zeta / sqrt(1.0 - zeta * zeta),
        .amplitude = amplitude,
        .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
    };
}

static void begin_scene(struct scene *scene, double rate_hz, gsl_rng *rng)
{
    scene->rate_hz = rate_hz;
    scene->onset_frame = floor(SCENE_LEAD_S * rate_hz) + gsl_rng_uniform(rng);
    scene->pulse_count = 1;
    scene->pulses[0] = (struct scene_pulse){.weight = 1.0};
    scene->bits = draw_chance(rng, 0.5) ? 16 : 24;
}

/* 16 bits under a noise of less than half a step would make noise that is not white. */
static void set_noise(struct scene *scene, double noise_sd)
{
    scene->noise_sd = noise_sd;
    if (scene->bits == 16 && noise_sd < 0.5 / 32768.0)
        scene->bits = 24;
    if (noise_sd < 0.5 / 8388608.0)
        scene->noise_sd = 0.5 / 8388608.0;
}

void bench_close(struct scene *scene, double spans, size_t frames_max, gsl_rng *rng)
{
    double rate_hz = scene->rate_hz, slowest = (double)INFINITY, end_s = 0.0;
    for (unsigned k = 0; k < scene->mode_count; k++)
        slowest = fmin(slowest, scene->modes[k].decay_per_s);
    for (unsigned i = 0; i < scene->pulse_count; i++)
        end_s = fmax(end_s, scene->pulses[i].at_s + scene->pulses[i].contact_s);
    double ring_s = spans / slowest + end_s;
    enum strike_end why = STRIKE_END_FADED;
    if (spans < 7.0)
        why = STRIKE_END_INPUT;
    if (ring_s > 60.0) {
        ring_s = 60.0;
        why = STRIKE_END_LIMIT;
    }
    double frames = scene->onset_frame + fmax(ring_s * rate_hz, 64.0);
    if (frames > (double)frames_max) {
        frames = (double)frames_max;
        why = STRIKE_END_INPUT;
    }
    /* After a ring that has faded the room goes on: the detector needs to hear that. */
    size_t end = (size_t)frames;
    scene->frame_count = end + (why == STRIKE_END_FADED ? (size_t)(SCENE_LEAD_S * rate_hz) : 0);
    double late = draw_uniform(rng, -0.001, 0.001) * rate_hz;
    scene->take_count = 1;
    scene->takes[0] = (struct scene_take){
        .end = end,
        .free_frame = (size_t)ceil(scene->onset_frame + end_s * rate_hz),
        .trigger = (size_t)(scene->onset_frame + late),
        .onset_frame = scene->onset_frame,
        .why_end = why,
    };
}

static void draw_single(struct scene *scene, gsl_rng *rng)
{
    double rate_hz = draw_rate(rng);
    begin_scene(scene, rate_hz, rng);
    double f_hz = draw_log(rng, 20.0, 0.45 * rate_hz), q = draw_log(rng, 0.6, 1e5);
    double amplitude = draw_log(rng, 0.02, 0.9), snr_db = draw_uniform(rng, 0.0, 80.0);
    scene->modes[0] = mode_of(f_hz, q, amplitude, rng);
    scene->mode_count = 1;
    set_noise(scene, noise_for(amplitude, snr_db));
    double spans = 7.0;
    if (draw_chance(rng, 0.25)) { /* a short record, at least three periods */
        spans = draw_log(rng, 0.3, 7.0);
        spans = fmax(spans, 3.0 * scene->modes[0].decay_per_s / f_hz);
    }
    bench_close(scene, spans, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note, "fs %g f %.5g q %.4g snr %.0f spans %.2f %ub",
                   rate_hz, f_hz, q, snr_db, spans, scene->bits);
}

/* A coil and capacitor through an AC-coupled input. In a fifth of them the switch bounces. */
static void draw_tank(struct scene *scene, gsl_rng *rng)
{
    static const double rates[] = {48000.0, 96000.0, 192000.0};
    double rate_hz = rates[gsl_rng_uniform_int(rng, 3)];
    begin_scene(scene, rate_hz, rng);
    double zeta = draw_log(rng, 0.05, 0.9), natural_hz = draw_log(rng, 60.0, 0.1 * rate_hz);
    double f_hz = natural_hz * sqrt(1.0 - zeta * zeta);
    double amplitude = draw_log(rng, 0.05, 0.8), snr_db = draw_uniform(rng, 30.0, 80.0);
    scene->modes[0] = mode_of(f_hz, 0.5 / zeta, amplitude, rng);
    /* A voltage that steps, or a current that starts at nothing. */
    scene->modes[0].phase_rad =
        draw_chance(rng, 0.5) ? -atan(zeta / sqrt(1.0 - zeta * zeta)) : -0.5 * WANE_PI;
    scene->mode_count = 1;
    scene->coupling_hz = draw_log(rng, 0.5, 20.0);
    scene->coupling_known = draw_chance(rng, 0.5);
    double tau_s = 1.0 / scene->modes[0].decay_per_s, bounce_s = 0.0;
    if (draw_chance(rng, 0.2)) {
        bounce_s = fmin(0.3 * tau_s, draw_log(rng, 1e-4, 2e-3));
        scene->pulses[1] =
            (struct scene_pulse){.at_s = bounce_s, .weight = draw_uniform(rng, 0.3, 1.0)};
        scene->pulse_count = 2;
    }
    set_noise(scene, noise_for(amplitude, snr_db));
    /* The detector follows until nothing is left: here, the slow tail of the coupling as well. */
    double spans = fmax(12.0, 0.3 * scene->modes[0].decay_per_s);
    bench_close(scene, spans, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note,
                   "fs %g fn %.5g zeta %.3g snr %.0f corner %.3g%s bounce %.2g ms", rate_hz,
                   natural_hz, zeta, snr_db, scene->coupling_hz,
                   scene->coupling_known ? " known" : "", 1e3 * bounce_s);
}

/* Modes apart from one another by ten widths of the wider, amplitudes over range_db, decay rates
 * over a factor of `spread`. Fewer than `count` where they find no room. */
static void add_chord(struct scene *scene, unsigned count, double low_hz, double high_hz,
                      double range_db, double spread, gsl_rng *rng)
{
    double slow = draw_log(rng, 1.0, 20.0), top = draw_uniform(rng, 0.1, 0.6) / sqrt(count);
    unsigned k = 0;
    for (unsigned tries = 0; k < count && tries < 1000; tries++) {
        double f_hz = draw_log(rng, low_hz, high_hz);
        double decay = slow * pow(spread, gsl_rng_uniform(rng));
        double level_db = k == 0 ? 0.0 : -draw_uniform(rng, 0.0, range_db);
        bool is_apart = decay < 0.05 * TWO_PI * f_hz;
        for (unsigned i = 0; i < k; i++) {
            double width = fmax(decay, scene->modes[i].decay_per_s) / WANE_PI;
            is_apart = is_apart && fabs(scene->modes[i].f_hz - f_hz) > 10.0 * width + 2.0;
        }
        if (!is_apart)
            continue;
        scene->modes[k++] = (struct scene_mode){
            .f_hz = f_hz,
            .decay_per_s = decay,
            .amplitude = top * pow(10.0, level_db / 20.0),
            .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
        };
    }
    scene->mode_count = k;
}

static void draw_chord(struct scene *scene, gsl_rng *rng)
{
    double rate_hz = draw_chance(rng, 0.5) ? 48000.0 : 44100.0;
    begin_scene(scene, rate_hz, rng);
    unsigned count = 2 + (unsigned)gsl_rng_uniform_int(rng, 7);
    add_chord(scene, count, 150.0, 15000.0, 40.0, 20.0, rng);
    double snr_db = draw_uniform(rng, 25.0, 70.0);
    set_noise(scene, noise_for(scene->modes[0].amplitude, snr_db));
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note, "fs %g %u modes snr %.0f", rate_hz, count,
                   snr_db);
}

static void draw_doublet(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, 48000.0, rng);
    double f_hz = draw_log(rng, 150.0, 8000.0), decay = draw_log(rng, 1.0, 60.0);
    double widths = draw_log(rng, 0.15, 5.0), ratio = draw_log(rng, 0.1, 1.0);
    double amplitude = draw_uniform(rng, 0.1, 0.45), snr_db = draw_uniform(rng, 20.0, 70.0);
    double split_hz = widths * decay / WANE_PI;
    bool weaker_first = draw_chance(rng, 0.5);
    for (unsigned k = 0; k < 2; k++)
        scene->modes[k] = (struct scene_mode){
            .f_hz = f_hz + (k == 0 ? -0.5 : 0.5) * split_hz,
            .decay_per_s = decay * draw_uniform(rng, 0.8, 1.25),
            .amplitude = amplitude * ((k == 0) == weaker_first ? ratio : 1.0),
            .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
        };
    scene->mode_count = 2;
    set_noise(scene, noise_for(amplitude, snr_db));
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note,
                   "f %.5g decay %.3g split %.3g widths 1:%.2f snr %.0f", f_hz, decay, widths,
                   1.0 / ratio, snr_db);
}

static void add_hum(struct scene *scene, double mains_hz, unsigned harmonics, double amplitude,
                    gsl_rng *rng)
{
    for (unsigned h = 1; h <= harmonics && scene->tone_count < SCENE_TONES_MAX; h++)
        scene->tones[scene->tone_count++] = (struct scene_tone){
            .f_hz = mains_hz * h,
            .amplitude = amplitude * (h == 1 ? 1.0 : draw_log(rng, 0.03, 0.6)),
            .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
        };
}

static void draw_hum(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, 48000.0, rng);
    double mains_hz = (draw_chance(rng, 0.5) ? 50.0 : 60.0) * draw_uniform(rng, 0.996, 1.004);
    unsigned harmonics = 1 + (unsigned)gsl_rng_uniform_int(rng, 9);
    double f_hz = draw_log(rng, 80.0, 3000.0), amplitude = draw_log(rng, 0.05, 0.4);
    double decay = draw_log(rng, 1.0, 30.0), snr_db = draw_uniform(rng, 25.0, 65.0);
    bool is_beside = draw_chance(rng, 0.5);
    unsigned beside = 1 + (unsigned)gsl_rng_uniform_int(rng, harmonics);
    if (is_beside) {
        f_hz = mains_hz * beside + (draw_chance(rng, 0.5) ? 3.0 : -3.0);
        decay = draw_log(rng, 1.0, 8.0);
    }
    scene->modes[0] = mode_of(f_hz, WANE_PI * f_hz / decay, amplitude, rng);
    scene->mode_count = 1;
    add_hum(scene, mains_hz, harmonics, amplitude * draw_log(rng, 0.1, 1.0), rng);
    set_noise(scene, noise_for(amplitude, snr_db));
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note, "f %.5g decay %.3g mains %.2f x%u %s snr %.0f",
                   f_hz, decay, mains_hz, harmonics, is_beside ? "3 Hz beside" : "apart", snr_db);
}

/* A blade frequency whose first three lines keep 25 Hz from all modes: a line that wanders inside a
 * mode's width is no noise, and neither bound nor oracle would know it. */
static double draw_fan(const struct scene *scene, gsl_rng *rng)
{
    for (;;) {
        double fan_hz = draw_log(rng, 60.0, 500.0);
        bool is_apart = true;
        for (unsigned k = 0; k < scene->mode_count; k++)
            for (unsigned h = 1; h <= 3; h++)
                is_apart = is_apart && fabs(scene->modes[k].f_hz - h * fan_hz) > 25.0;
        if (is_apart)
            return fan_hz;
    }
}

static void draw_coloured(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, 48000.0, rng);
    unsigned count = 1 + (unsigned)gsl_rng_uniform_int(rng, 3);
    add_chord(scene, count, 150.0, 8000.0, 20.0, 8.0, rng);
    double snr_db = draw_uniform(rng, 15.0, 50.0);
    set_noise(scene, noise_for(scene->modes[0].amplitude, snr_db));
    unsigned kind = (unsigned)gsl_rng_uniform_int(rng, 4);
    static const char *const names[] = {"1/f", "room", "fan", "rising"};
    scene->noise = kind == 0                ? SCENE_NOISE_PINK
                   : kind == 1 || kind == 2 ? SCENE_NOISE_ROOM
                                            : SCENE_NOISE_WHITE;
    double fan_hz = draw_fan(scene, rng);
    if (kind == 2)
        for (unsigned h = 1; h <= 3; h++)
            scene->tones[scene->tone_count++] = (struct scene_tone){
                .f_hz = fan_hz * h,
                .amplitude = scene->noise_sd * draw_uniform(rng, 0.3, 1.5) / h,
                .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
                .wander = draw_log(rng, 0.1, 2.0),
            };
    if (kind == 3)
        scene->noise_rise = draw_uniform(rng, 1.2, 2.0);
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note, "%s %u modes snr %.0f fan %.3g", names[kind],
                   count, snr_db, kind == 2 ? fan_hz : 0.0);
}

/* A hammer: force for 0.1 to 5 ms, its own noise, sometimes a second short touch right after. The
 * lowest mode must be slow enough to be driven by it (the half-sine's first zero is
 * at 1.5/contact). */
static void draw_attack(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, draw_chance(rng, 0.5) ? 48000.0 : 96000.0, rng);
    double contact_s = draw_log(rng, 1e-4, 5e-3);
    double high_hz = fmin(12000.0, 1.2 / contact_s);
    unsigned count = 1 + (unsigned)gsl_rng_uniform_int(rng, 4);
    bool is_quick = draw_chance(rng, 0.15);
    if (is_quick) {
        double f_hz = draw_log(rng, 0.3 * high_hz, high_hz);
        double decay = fmin(0.41 / contact_s, 0.6 * f_hz); /* a third is over at the end */
        scene->modes[0] = mode_of(f_hz, WANE_PI * f_hz / decay, draw_uniform(rng, 0.1, 0.5), rng);
        scene->mode_count = count = 1;
    } else {
        add_chord(scene, count, fmin(120.0, 0.3 * high_hz), high_hz, 25.0, 8.0, rng);
        count = scene->mode_count;
    }
    scene->pulses[0].contact_s = contact_s;
    double loudest = 0.0, level = scene->modes[0].amplitude;
    for (unsigned k = 0; k < count; k++)
        loudest += scene->modes[k].amplitude;
    scene->pulses[0].noise = loudest * draw_log(rng, 0.02, 1.0) * 0.35;
    bool has_bounce = !is_quick && draw_chance(rng, 0.15);
    if (has_bounce) {
        scene->pulses[1] = scene->pulses[0];
        scene->pulses[1].at_s = contact_s + draw_log(rng, 3e-4, 3e-3);
        scene->pulses[1].weight = draw_uniform(rng, 0.1, 0.5);
        scene->pulses[1].contact_s *= 0.7;
        scene->pulses[1].noise *= 0.5;
        scene->pulse_count = 2;
    }
    double snr_db = draw_uniform(rng, 30.0, 65.0);
    set_noise(scene, noise_for(level, snr_db));
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    (void)snprintf(scene->note, sizeof scene->note,
                   "contact %.2f ms noise %.2f %u modes%s%s snr %.0f", 1e3 * contact_s,
                   scene->pulses[0].noise / loudest, count, is_quick ? " quick" : "",
                   has_bounce ? " bounce" : "", snr_db);
}

/* The same part struck again while it rings. */
static void draw_restrike(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, 48000.0, rng);
    unsigned count = 1 + (unsigned)gsl_rng_uniform_int(rng, 3);
    add_chord(scene, count, 200.0, 8000.0, 20.0, 5.0, rng);
    count = scene->mode_count;
    double slowest = (double)INFINITY;
    for (unsigned k = 0; k < count; k++) {
        slowest = fmin(slowest, scene->modes[k].decay_per_s);
        scene->modes[k].amplitude *= 0.5;
    }
    double contact_s = draw_log(rng, 1e-4, 8e-4),
           after_s = fmax(0.2, draw_uniform(rng, 1.0, 4.0) / slowest);
    double weight = draw_uniform(rng, 0.5, 1.6), snr_db = draw_uniform(rng, 30.0, 60.0);
    double top_hz = 0.0;
    for (unsigned k = 0; k < count; k++)
        top_hz = fmax(top_hz, scene->modes[k].f_hz);
    contact_s = fmin(contact_s, 1.0 / top_hz);
    scene->pulses[0].contact_s = contact_s;
    scene->pulses[0].noise = 0.1 * scene->modes[0].amplitude;
    scene->pulses[1] = scene->pulses[0];
    scene->pulses[1].at_s = after_s;
    scene->pulses[1].weight = weight;
    scene->pulse_count = 2;
    set_noise(scene, noise_for(scene->modes[0].amplitude, snr_db));
    bench_close(scene, 7.0, FRAMES_MAX, rng);
    struct scene_take second = scene->takes[0];
    double rate_hz = scene->rate_hz;
    second.onset_frame = scene->onset_frame + after_s * rate_hz;
    second.begin = (size_t)(second.onset_frame - fmin(SCENE_LEAD_S, 0.5 * after_s) * rate_hz);
    second.trigger = (size_t)(second.onset_frame + draw_uniform(rng, 0.0, 0.001) * rate_hz);
    second.free_frame = (size_t)ceil(second.onset_frame + contact_s * rate_hz);
    scene->takes[0].free_frame = (size_t)ceil(scene->onset_frame + contact_s * rate_hz);
    scene->takes[0].end = (size_t)(second.onset_frame - 0.002 * rate_hz);
    scene->takes[0].why_end = STRIKE_END_NEXT;
    scene->takes[1] = second;
    scene->take_count = 2;
    (void)snprintf(scene->note, sizeof scene->note,
                   "%u modes, again after %.2f s (%.1f tau) x%.2f snr %.0f", count, after_s,
                   after_s * slowest, weight, snr_db);
}

static void draw_long(struct scene *scene, gsl_rng *rng)
{
    begin_scene(scene, draw_chance(rng, 0.5) ? 48000.0 : 44100.0, rng);
    unsigned count = 1 + (unsigned)gsl_rng_uniform_int(rng, 3);
    double slow = draw_log(rng, 0.06, 0.5);
    for (unsigned k = 0; k < count; k++) {
        double decay = slow * draw_uniform(rng, 1.0, 3.0);
        double f_hz = fmin(draw_log(rng, 200.0, 6000.0), 1e5 * decay / WANE_PI);
        scene->modes[k] =
            mode_of(f_hz * (1.0 + 0.3 * k), WANE_PI * f_hz / decay, draw_log(rng, 0.05, 0.3), rng);
    }
    scene->mode_count = count;
    double snr_db = draw_uniform(rng, 20.0, 60.0);
    set_noise(scene, noise_for(scene->modes[0].amplitude, snr_db));
    bench_close(scene, 7.0, 60 * 48000 + 20000, rng);
    (void)snprintf(scene->note, sizeof scene->note, "%u modes slow %.3g snr %.0f", count, slow,
                   snr_db);
}

static const struct family families[] = {
    {"single", "one mode, everything drawn wide", draw_single, 1.03},
    {"tank", "zeta 0.05 ... 0.9 through AC coupling", draw_tank, 1.15},
    {"chord", "2-8 modes over 40 dB, decay over x20", draw_chord, 1.03},
    {"doublet", "5 ... 0.15 widths apart, level to 1:10", draw_doublet, 1.03},
    {"hum", "mains and harmonics, half 3 Hz beside", draw_hum, 1.03},
    {"coloured", "1/f, room, fan, rising noise", draw_coloured, 1.03},
    {"attack", "contact 0.1-5 ms, blow noise, bounce", draw_attack, 1.15},
    {"restrike", "struck again while it rings", draw_restrike, 1.15},
    {"long", "tens of seconds, Q to 1e5", draw_long, 1.03},
};

const struct family *family_table(size_t *out_count)
{
    *out_count = sizeof families / sizeof families[0];
    return families;
}

const struct family *family_find(const char *name)
{
    for (size_t i = 0; i < sizeof families / sizeof families[0]; i++)
        if (strcmp(families[i].name, name) == 0)
            return &families[i];
    return NULL;
}

bool family_bounds(const struct scene *scene, const struct scene_take *take,
                   const struct element *elements, size_t element_count, struct bound *out)
{
    if (!bound_of(elements, element_count, take->end - take->free_frame, scene->rate_hz, 1.0, out))
        return false;
    for (unsigned k = 0; k < scene->mode_count; k++) {
        double sd = bench_noise_at(scene, take, scene->modes[k].f_hz, scene->modes[k].decay_per_s);
        out[k].f_sd_hz *= sd;
        out[k].decay_sd_per_s *= sd;
        out[k].amplitude_sd *= sd;
        out[k].phase_sd_rad *= sd;
    }
    return true;
}

bool family_mode_is_knowable(const struct element *element, const struct bound *bound,
                             double rate_hz)
{
    double decay = -creal(element->q) * rate_hz, f_hz = cimag(element->q) * rate_hz / TWO_PI;
    return bound->amplitude_sd < 0.1 * cabs(element->c) && bound->decay_sd_per_s < 0.1 * decay &&
           bound->f_sd_hz < 0.05 * f_hz;
}

static bool is_knowable(const struct scene *scene)
{
    struct element elements[ELEMENTS_MAX];
    struct bound bounds[ELEMENTS_MAX];
    size_t count = bench_elements(scene, &scene->takes[0], elements);
    if (!family_bounds(scene, &scene->takes[0], elements, count, bounds))
        return false;
    bool any = false;
    for (unsigned k = 0; k < scene->mode_count; k++)
        any = any || family_mode_is_knowable(&elements[k], &bounds[k], scene->rate_hz);
    return any;
}

static bool is_too_loud(const struct scene *scene)
{
    for (size_t n = 0; n < scene->frame_count; n++)
        if (fabsf(scene->samples[n]) > 0.97f)
            return true;
    return false;
}

bool family_make(const struct family *family, unsigned long seed, unsigned index,
                 struct scene *out_scene)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    if (!rng)
        return false;
    gsl_rng_set(rng, seed * 1000003ul + index * 7919ul + (unsigned long)family->name[0] * 31ul +
                         (unsigned long)family->name[1]);
    bool made = false;
    for (unsigned tries = 0; tries < 1000; tries++) {
        *out_scene = (struct scene){.seed = seed};
        family->draw(out_scene, rng);
        if (family->draw != draw_doublet && !is_knowable(out_scene))
            continue;
        made = bench_make(out_scene, rng);
        if (!made || !is_too_loud(out_scene))
            break;
        bench_done(out_scene);
        made = false;
    }
    gsl_rng_free(rng);
    return made;
}
