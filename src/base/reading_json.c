#include "wane/json.h"

#include <math.h>

static void write_words(struct json_writer *json, const char *key, unsigned bits, unsigned count,
                        const char *(*name_of)(unsigned))
{
    json_open_array(json, key);
    for (unsigned i = 0; i < count; i++) {
        if (bits & (1u << i))
            json_string(json, NULL, name_of(i));
    }
    json_close_array(json);
}

static const char *reason_word(unsigned i)
{
    return reason_name((enum reason)i);
}

static const char *remark_word(unsigned i)
{
    return remark_name((enum remark)i);
}

static void write_why(struct json_writer *json, const struct why *why)
{
    const struct {
        const char *key;
        double value;
    } numbers[] = {
        {"lost_frames", why->lost_frames},
        {"at_s", why->lost_at_s},
        {"for_s", why->clipped_for_s},
        {"after_s", why->after_s},
        {"cut_s", why->cut_s},
        {"noise_dbfs", why->noise_dbfs},
        {"over_noise_db", why->over_noise_db},
        {"cycles", why->cycles},
        {"span_s", why->span_s},
        {"unexplained", why->unexplained},
        {"early_per_s", why->early_per_s},
        {"late_per_s", why->late_per_s},
        {"early_hz", why->early_hz},
        {"late_hz", why->late_hz},
        {"gain_db", why->gain_db},
        {"near_hz", why->near_hz},
    };
    json_open_object(json, "why");
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
        if (isfinite(numbers[i].value))
            json_number(json, numbers[i].key, numbers[i].value, 9);
    }
    json_close_object(json);
}

static void write_mode(struct json_writer *json, const struct mode *mode)
{
    json_open_object(json, NULL);
    json_string(json, "label", mode->label);
    json_measured(json, "f_hz", mode->f_hz, mode->f_u_hz);
    json_number(json, "f_u_hz", mode->f_u_hz, 3);
    json_measured(json, "decay_per_s", mode->decay_per_s, mode->decay_u_per_s);
    json_number(json, "decay_u_per_s", mode->decay_u_per_s, 3);
    json_measured(json, "q", mode->q, mode->q_u);
    json_number(json, "q_u", mode->q_u, 3);
    json_measured(json, "zeta", mode->zeta, mode->zeta_u);
    json_number(json, "zeta_u", mode->zeta_u, 3);
    json_measured(json, "natural_f_hz", mode->natural_f_hz, mode->f_u_hz);
    json_measured(json, "t60_s", mode->t60_s, mode->t60_u_s);
    json_number(json, "t60_u_s", mode->t60_u_s, 3);
    json_number(json, "level_dbfs", round(mode->level_dbfs * 1e3) / 1e3, 7);
    json_number(json, "phase_rad", round(mode->phase_rad * 1e4) / 1e4, 6);
    json_close_object(json);
}

/* Seconds from the start of the input, to the nanosecond. */
static void write_seconds(struct json_writer *json, const char *key, const struct strike *strike,
                          double frame)
{
    double s = ((double)strike->first_frame + frame) / strike->rate_hz;
    json_number(json, key, round(s * 1e9) / 1e9, 15);
}

void json_reading(struct json_writer *json, const struct strike *strike,
                  const struct reading *reading)
{
    json_integer(json, "channel", strike->channel);
    json_number(json, "rate_hz", strike->rate_hz, 12);
    write_seconds(json, "onset_s", strike, reading->onset_frame);
    json_open_array(json, "window_s");
    write_seconds(json, NULL, strike, reading->window_begin_frame);
    write_seconds(json, NULL, strike, reading->window_end_frame);
    json_close_array(json);
    json_number(json, "peak_dbfs", round(reading->peak_dbfs * 1e3) / 1e3, 7);
    json_number(json, "noise_dbfs", round(reading->noise_dbfs * 1e3) / 1e3, 7);
    json_number(json, "snr_db", round(reading->snr_db * 1e3) / 1e3, 7);
    json_string(json, "verdict", verdict_name(reading->verdict));
    write_words(json, "reasons", reading->reasons, REASON_COUNT, reason_word);
    write_why(json, &reading->why);
    write_words(json, "remarks", reading->remarks, REMARK_COUNT, remark_word);
    json_open_array(json, "modes");
    for (unsigned i = 0; i < reading->mode_count; i++)
        write_mode(json, &reading->modes[i]);
    json_close_array(json);
    json_open_array(json, "tones");
    for (unsigned i = 0; i < reading->tone_count; i++) {
        json_open_object(json, NULL);
        json_number(json, "f_hz", reading->tones[i].f_hz, 9);
        json_number(json, "level_dbfs", reading->tones[i].level_dbfs, 5);
        json_close_object(json);
    }
    json_close_array(json);
}
