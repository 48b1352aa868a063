/* What happens on the bench, and what is true of it. One random sequence per event, so that an
 * event does not depend on how much was drawn for those before it. */
#include "input/sim_blow.h"
#include "input/sim_random.h"
#include "input/simulated.h"
#include "wane/strike.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

struct sim_schedule {
    struct sim_settings settings;
    int channel;
    uint64_t index, strikes;
    double last_s;      /* onset of the last event; 0 at first */
    double next_gap_s;  /* when the last event fixed it (restruck); else 0 */
    enum sim_part part; /* at hand, for SIM_ALL */
    unsigned part_left; /* strikes until the next part's turn */
    bool has_waiting;   /* a strike waits behind its hum */
    struct sim_event waiting;
};

void simulated_defaults(struct sim_settings *out_settings)
{
    *out_settings = (struct sim_settings){
        .seed = 1,
        .rate_hz = 48000,
        .channels = 1,
        .part = SIM_ALL,
        .defects = SIM_SOME,
        .level_dbfs = -16,
        .noise_dbfs = -66,
    };
}

static bool check_settings(const struct sim_settings *settings, int channel, struct error *err)
{
    if (!(settings->rate_hz >= 8000 && settings->rate_hz <= 768000))
        return error_set(err, ERROR_USAGE,
                         "the simulated bench runs at 8000 to 768000 Hz, not at %g",
                         settings->rate_hz);
    if (settings->channels < 1 || settings->channels > SIM_CHANNELS_MAX || channel < 1 ||
        channel > settings->channels)
        return error_set(err, ERROR_USAGE, "the simulated bench has 1 to %d channels, not %d",
                         SIM_CHANNELS_MAX, settings->channels);
    if (settings->part == SIM_MODE &&
        !(settings->f_hz > 0 && settings->f_hz < settings->rate_hz / 2 && settings->zeta > 0 &&
          settings->zeta < 1))
        return error_set(err, ERROR_USAGE,
                         "a single mode needs f between 0 and half the rate, and zeta between 0 "
                         "and 1, not f = %g Hz and zeta = %g",
                         settings->f_hz, settings->zeta);
    return true;
}

struct sim_schedule *sim_schedule_create(const struct sim_settings *settings, int channel,
                                         struct error *err)
{
    if (!check_settings(settings, channel, err))
        return NULL;
    struct sim_schedule *schedule = calloc(1, sizeof *schedule);
    if (schedule == NULL) {
        error_set(err, ERROR_MEMORY, "no memory for the simulated bench");
        return NULL;
    }
    schedule->settings = *settings;
    schedule->channel = channel;
    schedule->part = settings->part;
    if (settings->part < SIM_PART_COUNT)
        schedule->part = (enum sim_part)(((int)settings->part + channel - 1) % SIM_PART_COUNT);
    if (settings->part == SIM_ALL) /* moves on before the first strike */
        schedule->part = (enum sim_part)((channel + SIM_PART_COUNT - 2) % SIM_PART_COUNT);
    return schedule;
}

void sim_schedule_destroy(struct sim_schedule *schedule)
{
    free(schedule);
}

static enum sim_defect draw_defect(const struct sim_schedule *schedule, struct sim_random *random)
{
    static const struct {
        enum sim_defect defect;
        double share;
    } shares[] = {{SIM_DOUBLE_HIT, 0.045}, {SIM_CLIPPED, 0.04}, {SIM_SOFT, 0.025},
                  {SIM_RESTRUCK, 0.025},   {SIM_HUM, 0.03},     {SIM_COUGH, 0.03}};
    enum sim_defect defects = schedule->settings.defects;
    double drawn = sim_uniform(random, 0, 1);
    if (defects == SIM_RESTRUCK)
        return schedule->index % 2 == 0 ? SIM_RESTRUCK : SIM_NO_DEFECT;
    if (defects == SIM_COUGH)
        return schedule->index % 2 == 1 ? SIM_COUGH : SIM_NO_DEFECT;
    if (defects != SIM_SOME)
        return defects;
    for (size_t i = 0; i < sizeof shares / sizeof shares[0]; i++) {
        drawn -= shares[i].share;
        if (drawn < 0)
            return schedule->index < 2 ? SIM_NO_DEFECT : shares[i].defect;
    }
    return SIM_NO_DEFECT;
}

/* Seconds from the last event to this one. The first comes early: whoever opens the demo waits. */
static double draw_gap(struct sim_schedule *schedule, struct sim_random *random)
{
    double interval_s = schedule->settings.interval_s;
    double share = sim_uniform(random, -1, 1);
    double fixed_s = schedule->next_gap_s;
    schedule->next_gap_s = 0;
    if (schedule->index == 0)
        return 2.2 + 0.5 * share;
    if (fixed_s > 0)
        return fixed_s;
    return interval_s > 0 ? interval_s * (1 + 0.15 * share) : 6.5 + 2.5 * share;
}

/* Force of the blow over an everyday one. */
static double draw_force(const struct sim_settings *settings, enum sim_defect defect,
                         struct sim_random *random)
{
    double spread_db = 2.5 * sim_normal(random);
    double share = sim_uniform(random, 0, 1);
    double db = fmax(-6, fmin(6, spread_db));
    if (settings->part == SIM_MODE)
        db = 0;
    if (defect == SIM_CLIPPED)
        db = 2 + 4 * share - settings->level_dbfs;
    if (defect == SIM_SOFT)
        db = settings->noise_dbfs + 4 + 8 * share - settings->level_dbfs;
    return pow(10, db / 20);
}

/* One mode's arrow at the onset. Velocity after an impulse on m x'' + c x' + k x = F is the real
 * part of (1 + i alpha/omega) e^(s t); a charged tank's voltage that of (1 - i alpha/omega) e^(s t)
 * (both: any vibration or circuit textbook, from the initial conditions). */
static double complex arrow_of(const struct sim_part_data *data, const struct sim_part_mode *mode,
                               double force, double contact_s, double angle_rad)
{
    double complex s = sim_mode_pole(mode->f_hz, mode->decay_per_s);
    double ratio = mode->decay_per_s / (2 * WANE_PI * mode->f_hz);
    double complex shape = 1 + (contact_s > 0 ? ratio : -ratio) * SIM_I;
    double everyday = cabs(shape * sim_blow_total(s, data->contact_s));
    double turn = mode->lobes * angle_rad;
    double pattern = mode->lobes <= 0 ? 1 : mode->is_crossed ? sin(turn) : cos(turn);
    return shape * sim_blow_total(s, contact_s) / everyday * force * pattern;
}

static int compare_levels(const void *a, const void *b)
{
    const struct sim_truth_mode *one = a;
    const struct sim_truth_mode *other = b;
    return (one->level_dbfs < other->level_dbfs) - (one->level_dbfs > other->level_dbfs);
}

static void fill_modes(const struct sim_settings *settings, const struct sim_part_data *data,
                       double force, struct sim_random *random, struct sim_event *event)
{
    double angle_rad = data->angle_rad + 0.05 * sim_normal(random);
    /* How a part lies and how warm it is moves all its modes together, from strike to strike. */
    double f_factor = settings->part == SIM_MODE ? 1 : 1 + 4e-6 * sim_normal(random);
    for (size_t i = 0; i < data->mode_count; i++) {
        struct sim_part_mode mode = data->modes[i];
        double spread_db = settings->part == SIM_MODE ? 0 : sim_normal(random);
        double decay_factor = settings->part == SIM_MODE ? 1 : 1 + 3e-3 * sim_normal(random);
        mode.f_hz *= f_factor;
        mode.decay_per_s *= decay_factor;
        double complex arrow = arrow_of(data, &mode, force, event->contact_s, angle_rad) *
                               pow(10, (settings->level_dbfs + mode.level_db + spread_db) / 20);
        if (settings->part == SIM_MODE)
            arrow = cabs(arrow) * cexp(sim_uniform(random, -WANE_PI, WANE_PI) * SIM_I);
        double complex heard = arrow * sim_coupling_gain(sim_mode_pole(mode.f_hz, mode.decay_per_s),
                                                         settings->coupling_hz, settings->rate_hz);
        event->modes[i] = (struct sim_truth_mode){
            .f_hz = mode.f_hz,
            .decay_per_s = mode.decay_per_s,
            .level_dbfs = 20 * log10(cabs(heard)),
            .phase_rad = carg(heard),
            .amplitude = cabs(arrow),
            .raw_phase_rad = carg(arrow),
        };
    }
    event->mode_count = data->mode_count;
    qsort(event->modes, event->mode_count, sizeof event->modes[0], compare_levels);
}

static void make_part(const struct sim_schedule *schedule, struct sim_part_data *out)
{
    const struct sim_settings *settings = &schedule->settings;
    if (settings->part != SIM_MODE) {
        sim_part_make(schedule->part, settings->seed, out);
        return;
    }
    /* f is the damped frequency: f_n = f / sqrt(1 - zeta^2), alpha = 2 pi zeta f_n. */
    double natural_hz = settings->f_hz / sqrt(1 - settings->zeta * settings->zeta);
    *out = (struct sim_part_data){.mode_count = 1};
    out->modes[0].f_hz = settings->f_hz;
    out->modes[0].decay_per_s = 2 * WANE_PI * settings->zeta * natural_hz;
}

static void make_strike(struct sim_schedule *schedule, struct sim_random *random,
                        struct sim_event *event)
{
    const struct sim_settings *settings = &schedule->settings;
    struct sim_part_data data;
    if (settings->part == SIM_ALL) {
        if (schedule->part_left == 0) {
            schedule->part = (enum sim_part)(((int)schedule->part + 1) % SIM_PART_COUNT);
            schedule->part_left = (unsigned)sim_uniform(random, 4, 7);
        }
        schedule->part_left--;
    }
    make_part(schedule, &data);
    double force = draw_force(settings, event->defect, random);
    bool is_switch = data.contact_s <= 0;
    event->kind = SIM_EVENT_STRIKE;
    event->number = ++schedule->strikes;
    event->part = settings->part == SIM_MODE ? SIM_MODE : schedule->part;
    /* Hertz: the contact of a harder blow is shorter, with the fifth root of its speed
     * (Timoshenko and Goodier, Theory of Elasticity, section on impact). */
    event->contact_s = data.contact_s * pow(force, -0.2);
    event->until_s = event->onset_s + event->contact_s;
    fill_modes(settings, &data, force, random, event);
    event->blow_rms = is_switch ? 0 : force * pow(10, (settings->level_dbfs + data.blow_db) / 20);
    double after_share = sim_uniform(random, 0, 1);
    event->second = sim_uniform(random, 0.35, 0.8);
    if (event->defect == SIM_DOUBLE_HIT)
        event->after_s = is_switch ? 0.3e-3 + 1.7e-3 * after_share : 15e-3 + 30e-3 * after_share;
    if (event->defect == SIM_RESTRUCK)
        schedule->next_gap_s = sim_uniform(random, 0.35, 0.7);
}

/* Hum and cough, in amplitudes over the room's noise. */
static void make_cough(const struct sim_schedule *schedule, struct sim_random *random,
                       struct sim_event *event)
{
    event->kind = SIM_EVENT_COUGH;
    event->number = schedule->strikes;
    event->until_s = event->onset_s + sim_uniform(random, 0.25, 0.45);
    event->level = pow(10, (schedule->settings.noise_dbfs + sim_uniform(random, 28, 38)) / 20);
}

static void make_hum(const struct sim_event *strike, double gap_s, struct sim_schedule *schedule,
                     struct sim_random *random, struct sim_event *hum)
{
    *hum = (struct sim_event){
        .kind = SIM_EVENT_HUM,
        .channel = strike->channel,
        .number = strike->number - 1,
        .index = strike->index,
        .onset_s = strike->onset_s - fmin(2.5, 0.5 * gap_s),
        .until_s = strike->onset_s + 3.5,
        .level = pow(10, (schedule->settings.noise_dbfs + sim_uniform(random, 12, 18)) / 20),
    };
}

bool sim_schedule_next(struct sim_schedule *schedule, struct sim_event *out_event)
{
    const struct sim_settings *settings = &schedule->settings;
    if (schedule->has_waiting) {
        schedule->has_waiting = false;
        *out_event = schedule->waiting;
        return true;
    }
    if (settings->strikes_max > 0 && schedule->strikes >= settings->strikes_max)
        return false;
    struct sim_random random = {
        .key = sim_key(settings->seed, 'E' + 256U * (uint64_t)schedule->channel, schedule->index)};
    double gap_s = draw_gap(schedule, &random);
    struct sim_event event = {
        .channel = schedule->channel,
        .index = schedule->index,
        .onset_s = schedule->last_s + gap_s,
        .defect = draw_defect(schedule, &random),
    };
    bool would_be_crowded = event.defect == SIM_HUM && settings->defects == SIM_SOME && gap_s < 3;
    bool is_quick = schedule->part == SIM_TANK && event.defect == SIM_RESTRUCK;
    if (would_be_crowded || is_quick)
        event.defect = SIM_NO_DEFECT;
    if (event.defect == SIM_COUGH)
        make_cough(schedule, &random, &event);
    else
        make_strike(schedule, &random, &event);
    schedule->last_s = event.onset_s;
    schedule->index++;
    if (event.defect == SIM_HUM) {
        schedule->waiting = event;
        schedule->has_waiting = true;
        make_hum(&event, gap_s, schedule, &random, &event);
    }
    *out_event = event;
    return true;
}
