#include "input/sim_noise.h"

#include "input/sim_random.h"
#include "wane/strike.h"

#include <math.h>

/* The same normal numbers drive the white part and all low-passes. With x' = p x + sqrt(1-p^2) w a
 * low-pass has variance 1; covariances follow from the geometric series:
 * cov(x_i, x_j) = sqrt((1-p_i^2)(1-p_j^2)) / (1 - p_i p_j), cov(x_i, w) = sqrt(1-p_i^2). */
void sim_room_init(struct sim_room *room, const struct sim_settings *settings, int channel)
{
    bool is_plain = settings->part == SIM_MODE;
    double pink_variance = 0;
    double shared = 0;
    *room = (struct sim_room){
        .key = sim_key(settings->seed, 'N', (uint64_t)channel),
        .wander_db = is_plain ? 0 : 2.5,
        .rate_hz = settings->rate_hz,
    };
    for (size_t i = 0; i < SIM_PINK_POLES; i++) {
        double corner_hz = 5.0 * (double)(1U << (2 * i));
        room->poles[i] = exp(-2 * WANE_PI * corner_hz / settings->rate_hz);
        room->feeds[i] = sqrt(1 - room->poles[i] * room->poles[i]);
        shared += room->feeds[i];
        for (size_t j = 0; j <= i; j++) {
            double covariance =
                room->feeds[i] * room->feeds[j] / (1 - room->poles[i] * room->poles[j]);
            pink_variance += i == j ? covariance : 2 * covariance;
        }
    }
    double rms = pow(10, settings->noise_dbfs / 20) / sqrt(2);
    /* White and 1/f parts of equal power before they are brought to the wanted sum. */
    double pink = is_plain ? 0 : 1 / sqrt(pink_variance);
    double variance = 1 + pink * pink * pink_variance + 2 * pink * shared;
    room->white = rms / sqrt(variance);
    room->pink = room->white * pink;
}

/* Level in dB at a moment: straight lines in the cosine of time between knots. */
static double wander_at(const struct sim_room *room, double t_s)
{
    const double knot_s = 15;
    double at = floor(t_s / knot_s);
    double share = (1 - cos(WANE_PI * (t_s / knot_s - at))) / 2;
    struct sim_random here = {.key = sim_key(room->key, 'W', (uint64_t)at)};
    struct sim_random next = {.key = sim_key(room->key, 'W', (uint64_t)at + 1)};
    return room->wander_db *
           ((1 - share) * sim_uniform(&here, -1, 1) + share * sim_uniform(&next, -1, 1));
}

void sim_room_add(struct sim_room *room, uint64_t first_frame, double out[SIM_CHUNK])
{
    double noise[SIM_CHUNK];
    double begin = pow(10, wander_at(room, (double)first_frame / room->rate_hz) / 20);
    double end = pow(10, wander_at(room, (double)(first_frame + SIM_CHUNK) / room->rate_hz) / 20);
    sim_normal_fill(room->key, first_frame, noise, SIM_CHUNK);
    if (room->pink <= 0) {
        for (size_t i = 0; i < SIM_CHUNK; i++)
            out[i] += room->white * noise[i];
        return;
    }
    for (size_t i = 0; i < SIM_CHUNK; i++) {
        double pink = 0;
        for (size_t k = 0; k < SIM_PINK_POLES; k++) {
            room->state[k] = room->poles[k] * room->state[k] + room->feeds[k] * noise[i];
            pink += room->state[k];
        }
        double level = begin + (end - begin) * (double)i / SIM_CHUNK;
        out[i] += level * (room->white * noise[i] + room->pink * pink);
    }
}

void sim_hum_add(const struct sim_event *hum, double rate_hz, uint64_t first_frame,
                 double out[SIM_CHUNK])
{
    const double ramp_s = 0.8;
    for (size_t i = 0; i < SIM_CHUNK; i++) {
        double t_s = (double)(first_frame + i) / rate_hz;
        double from_end_s = fmin(t_s - hum->onset_s, hum->until_s - t_s);
        if (from_end_s <= 0)
            continue;
        double swell = (1 - cos(WANE_PI * fmin(1, from_end_s / ramp_s))) / 2;
        double turn = 2 * WANE_PI * 50.02 * t_s;
        out[i] += hum->level * swell *
                  (0.7 * sin(turn) + 0.5 * sin(2 * turn + 1) + 0.3 * sin(3 * turn + 2));
    }
}

void sim_cough_add(struct sim_cough *cough, double rate_hz, uint64_t first_frame,
                   double out[SIM_CHUNK])
{
    static const double resonances_hz[] = {650, 1250, 2600};
    static const double widths_hz[] = {160, 240, 400};
    double noise[SIM_CHUNK];
    double length_s = cough->event.until_s - cough->event.onset_s;
    sim_normal_fill(cough->key, first_frame, noise, SIM_CHUNK);
    for (size_t i = 0; i < SIM_CHUNK; i++) {
        double share = ((double)(first_frame + i) / rate_hz - cough->event.onset_s) / length_s;
        if (share <= 0 || share >= 1)
            continue;
        /* The first push is short and strong, the second long and weak. */
        double push = share < 0.3 ? sin(WANE_PI * share / 0.3) : 0;
        double tail = share > 0.25 ? 0.6 * sin(WANE_PI * (share - 0.25) / 0.75) : 0;
        double air = (push * push + tail * tail) * noise[i];
        for (size_t k = 0; k < 3; k++) {
            double radius = exp(-WANE_PI * widths_hz[k] / rate_hz);
            double turn = 2 * radius * cos(2 * WANE_PI * resonances_hz[k] / rate_hz);
            double *past = cough->past[k];
            double now = turn * past[0] - radius * radius * past[1] + (1 - radius) * air;
            past[1] = past[0];
            past[0] = now;
            /* About 4 brings the resonances' rms to that of the level. */
            out[i] += 4 * cough->event.level * now;
        }
    }
}
