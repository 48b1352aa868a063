#include "plot_inner.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define DECAY_POINTS_MAX 400
#define DECAY_CYCLES_MIN 4
#define QUIET_BEFORE_S   0.005 /* samples[trigger] minus this is still before the blow */
#define FLOOR_DB         (-200.0)

double plot_db(double amplitude)
{
    return amplitude > 1e-10 ? 20 * log10(amplitude) : FLOOR_DB;
}

static double seconds_at(const struct plot *plot, double frame)
{
    return (frame - plot->zero) / plot->strike->rate_hz;
}

static size_t frame_at(const struct plot *plot, double s)
{
    double frame = floor(plot->zero + s * plot->strike->rate_hz + 0.5);
    double last = (double)plot->strike->frame_count;
    return frame < 0 ? 0 : frame > last ? plot->strike->frame_count : (size_t)frame;
}

/* Rounded so that no digits are sent that no pixel shows. */
void plot_put(struct plot *plot, double value, int digits)
{
    json_number(&plot->json, NULL, value, digits);
}

void plot_put_db(struct plot *plot, double db)
{
    json_number(&plot->json, NULL, round(db * 100) / 100, 7);
}

/* --- the fitted modes as samples --- */

/* rest[n] -= Re(amplitude exp(s t)), t from `zero` frames on, s = -decay + i 2 pi f. */
static void subtract_mode(float *rest, size_t begin, size_t end, double zero, double rate_hz,
                          double complex amplitude, double complex s)
{
    double complex step = cexp(s / rate_hz);
    for (size_t at = begin; at < end; at += SYNC_FRAMES) {
        size_t stop = at + SYNC_FRAMES < end ? at + SYNC_FRAMES : end;
        double complex value = amplitude * cexp(s * (((double)at - zero) / rate_hz));
        if (cabs(value) < 1e-9)
            return;
        for (size_t n = at; n < stop; n++) {
            rest[n] = (float)((double)rest[n] - creal(value));
            value *= step;
        }
    }
}

static bool make_rest(struct plot *plot, struct error *err)
{
    const struct strike *strike = plot->strike;
    const struct reading *reading = plot->reading;
    plot->rest = malloc((strike->frame_count + 1) * sizeof *plot->rest);
    if (plot->rest == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    memcpy(plot->rest, strike->samples, strike->frame_count * sizeof *plot->rest);
    for (unsigned i = 0; i < strike->carried_count; i++) {
        const struct carried_mode *mode = &strike->carried[i];
        subtract_mode(plot->rest, 0, strike->frame_count, 0, strike->rate_hz,
                      mode->amplitude * cexp(UNIT_I * mode->phase_rad),
                      -mode->decay_per_s + UNIT_I * (2 * WANE_PI * mode->f_hz));
    }
    size_t begin = (size_t)ceil(plot->zero > 0 ? plot->zero : 0);
    for (unsigned i = 0; i < reading->mode_count; i++) {
        const struct mode *mode = &reading->modes[i];
        subtract_mode(plot->rest, begin, strike->frame_count, plot->zero, strike->rate_hz,
                      pow(10, mode->level_dbfs / 20) * cexp(UNIT_I * mode->phase_rad),
                      -mode->decay_per_s + UNIT_I * (2 * WANE_PI * mode->f_hz));
    }
    return true;
}

/* --- trace and residual --- */

static void write_trace(struct plot *plot)
{
    size_t frames = plot->to - plot->from;
    size_t columns = frames < plot->choice->width ? frames : plot->choice->width;
    const float *samples = plot->strike->samples;
    json_open_object(&plot->json, "trace");
    json_number(&plot->json, "t0_s", seconds_at(plot, (double)plot->from), 9);
    json_number(&plot->json, "dt_s",
                columns > 0 ? (double)frames / (double)columns / plot->strike->rate_hz : 0, 9);
    for (int is_max = 0; is_max <= 1; is_max++) {
        json_open_array(&plot->json, is_max ? "max" : "min");
        for (size_t i = 0; i < columns; i++) {
            size_t begin = plot->from + frames * i / columns;
            size_t end = plot->from + frames * (i + 1) / columns;
            float extreme = samples[begin];
            for (size_t n = begin; n < end; n++) {
                if (is_max ? samples[n] > extreme : samples[n] < extreme)
                    extreme = samples[n];
            }
            plot_put(plot, (double)extreme, 5);
        }
        json_close_array(&plot->json);
    }
    json_close_object(&plot->json);
}

static double noise_rms(const struct plot *plot)
{
    return pow(10, plot->reading->noise_dbfs / 20) / sqrt(2);
}

static void write_residual(struct plot *plot)
{
    size_t begin = frame_at(plot, 0) > plot->from ? frame_at(plot, 0) : plot->from;
    size_t frames = plot->to > begin ? plot->to - begin : 0;
    size_t columns = plot->choice->width / 2;
    columns = frames < columns ? frames : columns;
    double noise = noise_rms(plot);
    json_open_object(&plot->json, "residual");
    json_open_array(&plot->json, "t_s");
    for (size_t i = 0; i < columns; i++)
        plot_put(
            plot,
            seconds_at(plot, (double)begin + (double)frames * ((double)i + 0.5) / (double)columns),
            7);
    json_close_array(&plot->json);
    json_open_array(&plot->json, "over_noise");
    for (size_t i = 0; i < columns; i++) {
        double sum = 0;
        size_t first = begin + frames * i / columns, last = begin + frames * (i + 1) / columns;
        for (size_t n = first; n < last; n++)
            sum += (double)plot->rest[n] * (double)plot->rest[n];
        plot_put(plot, sqrt(sum / (double)(last - first)) / noise, 4);
    }
    json_close_array(&plot->json);
    json_close_object(&plot->json);
}

/* --- decay of each mode --- */

/* Twice the Hann-weighted mean of samples [begin, begin + count) turned back by the mode's phase:
 * the complex amplitude of what lies in its band. */
static double complex demodulate(const float *samples, size_t begin, size_t count, double zero,
                                 double rate_hz, double f_hz)
{
    double turn = 2 * WANE_PI * f_hz / rate_hz;
    double complex step = cexp(-UNIT_I * turn), sum = 0, phasor = 0;
    double complex hann_step = cexp(UNIT_I * (2 * WANE_PI / (double)count)), hann = 1;
    double weight_sum = 0;
    hann *= cexp(UNIT_I * (WANE_PI / (double)count));
    for (size_t i = 0; i < count; i++) {
        if (i % SYNC_FRAMES == 0)
            phasor = cexp(-UNIT_I * fmod(turn * ((double)(begin + i) - zero), 2 * WANE_PI));
        double weight = 1 - creal(hann);
        sum += weight * (double)samples[begin + i] * phasor;
        weight_sum += weight;
        phasor *= step;
        hann *= hann_step;
    }
    return weight_sum > 0 ? 2 * sum / weight_sum : 0;
}

/* dBFS of the noise in the band of blocks of `count` frames: measured before the blow where there
 * is room for four blocks, else as white noise has it (a Hann mean of n samples has 1.5 times the
 * variance of a plain one; Harris 1978, table I). */
static double band_noise_db(const struct plot *plot, double f_hz, size_t count)
{
    const struct strike *strike = plot->strike;
    size_t blocks = plot->noise_end / count;
    double sum = 0;
    for (size_t i = 0; i < blocks && blocks >= 4; i++) {
        double size = cabs(demodulate(strike->samples, i * count, count, 0, strike->rate_hz, f_hz));
        sum += size * size;
    }
    if (blocks >= 4)
        return plot_db(sqrt(sum / (double)blocks));
    return plot_db(2 * noise_rms(plot) * sqrt(1.5 / (double)count));
}

/* Blocks overlap by half. Other modes are out of `rest` already; this mode is added back as its
 * fit, so that neighbours however close do not beat. */
static void write_decay_of(struct plot *plot, const struct mode *mode)
{
    const struct strike *strike = plot->strike;
    size_t begin = frame_at(plot, 0) > plot->from ? frame_at(plot, 0) : plot->from;
    size_t frames = plot->to > begin ? plot->to - begin : 0;
    size_t points = plot->choice->width / 2;
    points = points > DECAY_POINTS_MAX ? DECAY_POINTS_MAX : points;
    size_t hop = frames / points;
    size_t hop_min = (size_t)(DECAY_CYCLES_MIN / 2.0 * strike->rate_hz / mode->f_hz) + 1;
    hop = hop > hop_min ? hop : hop_min;
    size_t count = frames >= 2 * hop ? frames / hop - 1 : 0;
    double last_s = count > 0 ? seconds_at(plot, (double)(begin + count * hop)) : 0;
    double first_s = count > 0 ? seconds_at(plot, (double)(begin + hop)) : 0;
    double slope_db = -20 / log(10.0) * mode->decay_per_s;
    json_open_object(&plot->json, NULL);
    json_string(&plot->json, "label", mode->label);
    json_number(&plot->json, "f_hz", mode->f_hz, 9);
    json_open_array(&plot->json, "t_s");
    for (size_t i = 0; i < count; i++)
        plot_put(plot, seconds_at(plot, (double)(begin + (i + 1) * hop)), 7);
    json_close_array(&plot->json);
    json_open_array(&plot->json, "db");
    for (size_t i = 0; i < count; i++) {
        double t = seconds_at(plot, (double)(begin + (i + 1) * hop));
        double fitted = pow(10, mode->level_dbfs / 20) * exp(-mode->decay_per_s * t);
        double complex other = demodulate(plot->rest, begin + i * hop, 2 * hop, plot->zero,
                                          strike->rate_hz, mode->f_hz) *
                               cexp(-UNIT_I * mode->phase_rad);
        plot_put_db(plot, plot_db(cabs(fitted + other)));
    }
    json_close_array(&plot->json);
    json_open_array(&plot->json, "fit_t_s");
    plot_put(plot, first_s, 7);
    plot_put(plot, last_s, 7);
    json_close_array(&plot->json);
    json_open_array(&plot->json, "fit_db");
    plot_put_db(plot, mode->level_dbfs + slope_db * first_s);
    plot_put_db(plot, mode->level_dbfs + slope_db * last_s);
    json_close_array(&plot->json);
    json_number(&plot->json, "noise_db",
                round(band_noise_db(plot, mode->f_hz, 2 * hop) * 100) / 100, 6);
    json_close_object(&plot->json);
}

/* --- all of it --- */

static void write_head(struct plot *plot)
{
    const struct strike *strike = plot->strike;
    struct json_writer *json = &plot->json;
    json_integer(json, "id", plot->choice->id);
    json_integer(json, "width", plot->choice->width);
    json_number(json, "rate_hz", strike->rate_hz, 12);
    json_number(json, "onset_s", ((double)strike->first_frame + plot->zero) / strike->rate_hz, 15);
    json_open_array(json, "window_s");
    plot_put(plot, seconds_at(plot, plot->reading->window_begin_frame), 9);
    plot_put(plot, seconds_at(plot, plot->reading->window_end_frame), 9);
    json_close_array(json);
    json_number(json, "from_s", seconds_at(plot, (double)plot->from), 9);
    json_number(json, "to_s", seconds_at(plot, (double)plot->to), 9);
}

static void write_modes(struct plot *plot)
{
    json_open_array(&plot->json, "modes");
    for (unsigned i = 0; i < plot->reading->mode_count; i++) {
        const struct mode *mode = &plot->reading->modes[i];
        json_open_object(&plot->json, NULL);
        json_string(&plot->json, "label", mode->label);
        json_measured(&plot->json, "f_hz", mode->f_hz, mode->f_u_hz);
        json_number(&plot->json, "level_dbfs", round(mode->level_dbfs * 1e3) / 1e3, 7);
        json_measured(&plot->json, "decay_per_s", mode->decay_per_s, mode->decay_u_per_s);
        json_close_object(&plot->json);
    }
    json_close_array(&plot->json);
}

/* Frames that the drawing stands on, each within the strike whatever the reading says. */
static void place(struct plot *plot)
{
    const struct strike *strike = plot->strike;
    const struct reading *reading = plot->reading;
    size_t quiet = (size_t)(QUIET_BEFORE_S * strike->rate_hz);
    plot->zero = isfinite(reading->onset_frame) ? reading->onset_frame : (double)strike->trigger;
    plot->from = frame_at(plot, plot->choice->from_s);
    plot->to = frame_at(plot, plot->choice->to_s);
    plot->noise_end = strike->trigger > quiet ? strike->trigger - quiet : 0;
    plot->window_begin = isfinite(reading->window_begin_frame)
                             ? frame_at(plot, seconds_at(plot, reading->window_begin_frame))
                             : strike->trigger;
    plot->window_end = isfinite(reading->window_end_frame)
                           ? frame_at(plot, seconds_at(plot, reading->window_end_frame))
                           : strike->frame_count;
    if (plot->window_begin > plot->window_end)
        plot->window_begin = plot->window_end;
}

bool plot_write(const struct strike *strike, const struct reading *reading,
                const struct plot_choice *choice, struct text *out, struct error *err)
{
    struct plot plot = {
        .strike = strike, .reading = reading, .choice = choice, .json = {.text = out}};
    place(&plot);
    if (plot.from >= plot.to)
        return error_set(err, ERROR_USAGE, "from, to: nothing was stored there");
    if (!make_rest(&plot, err))
        return false;
    json_open_object(&plot.json, NULL);
    write_head(&plot);
    write_trace(&plot);
    json_open_array(&plot.json, "decay");
    for (unsigned i = 0; i < reading->mode_count; i++)
        write_decay_of(&plot, &reading->modes[i]);
    json_close_array(&plot.json);
    bool is_written = plot_write_spectrum(&plot, err) && plot_write_near(&plot, err);
    write_residual(&plot);
    write_modes(&plot);
    json_close_object(&plot.json);
    free(plot.rest);
    return is_written;
}
