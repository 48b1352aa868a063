/* The spectrum of the fitted window, and a closer look at the lead mode. */
#include "plot_inner.h"

#include <fftw3.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SPECTRUM_MAX     (1u << 21)
#define SPECTRUM_LOW_HZ  20.0
#define NOISE_FRAMES_MIN 1024
#define NEAR_POINTS      241

struct spectrum {
    double *amplitude; /* [bins], of a steady tone; owned */
    size_t bins;
    double bin_hz;
    size_t frames; /* under the window */
};

/* Hann window; a power of two of points, so that any length is quick. false: no memory. */
static bool spectrum_make(const float *samples, size_t frames, double rate_hz, struct spectrum *out)
{
    size_t size = 2;
    frames = frames > SPECTRUM_MAX ? SPECTRUM_MAX : frames;
    while (size < frames)
        size *= 2;
    *out =
        (struct spectrum){.bins = size / 2 + 1, .bin_hz = rate_hz / (double)size, .frames = frames};
    float *in = fftwf_alloc_real(size);
    fftwf_complex *bins = fftwf_alloc_complex(out->bins);
    out->amplitude = malloc(out->bins * sizeof *out->amplitude);
    fftwf_plan plan = NULL;
    if (in != NULL && bins != NULL && out->amplitude != NULL)
        plan = fftwf_plan_dft_r2c_1d((int)size, in, bins, FFTW_ESTIMATE);
    if (plan != NULL) {
        double weight_sum = 0;
        memset(in, 0, size * sizeof *in);
        for (size_t i = 0; i < frames; i++) {
            double weight = 0.5 - 0.5 * cos(2 * WANE_PI * ((double)i + 0.5) / (double)frames);
            in[i] = (float)(weight * (double)samples[i]);
            weight_sum += weight;
        }
        fftwf_execute(plan);
        for (size_t i = 0; i < out->bins; i++)
            out->amplitude[i] = 2 * (double)cabsf(bins[i]) / weight_sum;
        fftwf_destroy_plan(plan);
    } else {
        free(out->amplitude);
        out->amplitude = NULL;
    }
    fftwf_free(in);
    fftwf_free(bins);
    return out->amplitude != NULL;
}

/* rms of the noise's amplitudes within a tenth of f, as a window of `frames` would show it: noise
 * falls with the root of the length, a tone does not. NAN without noise samples. */
static double noise_at(const struct spectrum *noise, double f_hz, size_t frames)
{
    if (noise->amplitude == NULL || frames == 0)
        return (double)NAN;
    size_t begin = (size_t)(f_hz / 1.1 / noise->bin_hz);
    size_t end = (size_t)(f_hz * 1.1 / noise->bin_hz) + 2;
    end = end > noise->bins ? noise->bins : end;
    double sum = 0;
    for (size_t i = begin; i < end; i++)
        sum += noise->amplitude[i] * noise->amplitude[i];
    if (end <= begin)
        return (double)NAN;
    return plot_db(sqrt(sum / (double)(end - begin) * (double)noise->frames / (double)frames));
}

/* Highest bin of each group of equal ratio. Pairs of frequency and amplitude; returns their number.
 */
static size_t group_bins(const struct spectrum *spectrum, size_t groups, double *out_f,
                         double *out_amplitude)
{
    double high_hz = (double)(spectrum->bins - 1) * spectrum->bin_hz;
    double ratio = pow(high_hz / SPECTRUM_LOW_HZ, 1.0 / (double)groups);
    size_t bin = (size_t)(SPECTRUM_LOW_HZ / spectrum->bin_hz) + 1, count = 0;
    double edge_hz = SPECTRUM_LOW_HZ;
    for (size_t group = 0; group < groups && bin < spectrum->bins; group++) {
        edge_hz *= ratio;
        size_t best = 0;
        for (; bin < spectrum->bins && (double)bin * spectrum->bin_hz <= edge_hz; bin++) {
            if (best == 0 || spectrum->amplitude[bin] > spectrum->amplitude[best])
                best = bin;
        }
        if (best == 0)
            continue;
        out_f[count] = (double)best * spectrum->bin_hz;
        out_amplitude[count++] = spectrum->amplitude[best];
    }
    return count;
}

bool plot_write_spectrum(struct plot *plot, struct error *err)
{
    const struct strike *strike = plot->strike;
    struct spectrum spectrum = {0}, noise = {0};
    size_t groups = plot->choice->width, count = 0;
    double *pairs = malloc(2 * groups * sizeof *pairs);
    bool is_made = pairs != NULL &&
                   spectrum_make(strike->samples + plot->window_begin,
                                 plot->window_end - plot->window_begin, strike->rate_hz, &spectrum);
    if (is_made) {
        count = group_bins(&spectrum, groups, pairs, pairs + groups);
        if (plot->noise_end >= NOISE_FRAMES_MIN)
            (void)spectrum_make(strike->samples, plot->noise_end, strike->rate_hz, &noise);
        json_open_object(&plot->json, "spectrum");
        json_open_array(&plot->json, "f_hz");
        for (size_t i = 0; i < count; i++)
            plot_put(plot, pairs[i], 7);
        json_close_array(&plot->json);
        json_open_array(&plot->json, "db");
        for (size_t i = 0; i < count; i++)
            plot_put_db(plot, plot_db(pairs[groups + i]));
        json_close_array(&plot->json);
        json_open_array(&plot->json, "noise_db");
        for (size_t i = 0; i < count; i++)
            plot_put_db(plot, noise_at(&noise, pairs[i], spectrum.frames));
        json_close_array(&plot->json);
        json_close_object(&plot->json);
    }
    free(pairs);
    free(spectrum.amplitude);
    free(noise.amplitude);
    return is_made ? true : error_set(err, ERROR_MEMORY, "out of memory");
}

/* --- around the lead mode --- */

/* What is looked at around the lead mode: mixed down to zero, averaged to `count` values. */
struct baseband {
    double complex *samples, *fitted; /* [count], Hann-weighted */
    size_t count, step;               /* frames a value */
    double weight_sum;
};

static bool baseband_make(const struct plot *plot, double f_hz, double half_hz,
                          struct baseband *out)
{
    const struct strike *strike = plot->strike;
    size_t frames = plot->window_end - plot->window_begin;
    size_t step = (size_t)(strike->rate_hz / (8 * half_hz));
    step = step < 1 ? 1 : step;
    *out = (struct baseband){.step = step, .count = frames / step};
    out->samples = calloc(out->count + 1, sizeof *out->samples);
    out->fitted = calloc(out->count + 1, sizeof *out->fitted);
    if (out->samples == NULL || out->fitted == NULL)
        return false;
    double turn = 2 * WANE_PI * f_hz / strike->rate_hz;
    double complex rotation = cexp(-UNIT_I * turn), phasor = 0;
    for (size_t i = 0; i < out->count * step; i++) {
        size_t n = plot->window_begin + i;
        if (i % SYNC_FRAMES == 0)
            phasor = cexp(-UNIT_I * fmod(turn * (double)i, 2 * WANE_PI));
        double weight =
            0.5 - 0.5 * cos(2 * WANE_PI * ((double)i + 0.5) / (double)(out->count * step));
        double complex turned = weight * phasor;
        out->samples[i / step] += turned * (double)strike->samples[n];
        out->fitted[i / step] += turned * ((double)strike->samples[n] - (double)plot->rest[n]);
        out->weight_sum += weight;
        phasor *= rotation;
    }
    return true;
}

static double baseband_amplitude(const struct baseband *baseband, const double complex *values,
                                 double offset_hz, double rate_hz)
{
    double complex step =
        cexp(-UNIT_I * (2 * WANE_PI * offset_hz * (double)baseband->step / rate_hz));
    double complex phasor = 1, sum = 0;
    for (size_t i = 0; i < baseband->count; i++) {
        sum += values[i] * phasor;
        phasor *= step;
    }
    return baseband->weight_sum > 0 ? 2 * cabs(sum) / baseband->weight_sum : 0;
}

/* Wide enough for the line, for what the record can tell apart, and for a doublet's other half. */
static double near_half_hz(const struct plot *plot)
{
    const struct mode *lead = &plot->reading->modes[0];
    double span_s = (double)(plot->window_end - plot->window_begin) / plot->strike->rate_hz + 1e-6;
    double half_hz = fmax(10 * lead->decay_per_s / (2 * WANE_PI), 12 / span_s);
    for (unsigned i = 1; i < plot->reading->mode_count; i++) {
        double away_hz = fabs(plot->reading->modes[i].f_hz - lead->f_hz);
        if (away_hz < 0.02 * lead->f_hz)
            half_hz = fmax(half_hz, 1.5 * away_hz);
    }
    return fmin(half_hz, 0.5 * lead->f_hz);
}

bool plot_write_near(struct plot *plot, struct error *err)
{
    if (plot->reading->mode_count == 0 || plot->window_end - plot->window_begin < 16) {
        json_null(&plot->json, "near");
        return true;
    }
    const struct mode *lead = &plot->reading->modes[0];
    double half_hz = near_half_hz(plot), rate_hz = plot->strike->rate_hz;
    struct baseband baseband = {0};
    bool is_made = baseband_make(plot, lead->f_hz, half_hz, &baseband);
    if (is_made) {
        json_open_object(&plot->json, "near");
        json_string(&plot->json, "label", lead->label);
        json_open_array(&plot->json, "f_hz");
        for (int i = 0; i < NEAR_POINTS; i++)
            plot_put(plot, lead->f_hz + half_hz * (2.0 * i / (NEAR_POINTS - 1) - 1), 9);
        json_close_array(&plot->json);
        for (int is_fit = 0; is_fit <= 1; is_fit++) {
            json_open_array(&plot->json, is_fit ? "fit_db" : "db");
            for (int i = 0; i < NEAR_POINTS; i++) {
                double offset_hz = half_hz * (2.0 * i / (NEAR_POINTS - 1) - 1);
                plot_put_db(plot, plot_db(baseband_amplitude(
                                      &baseband, is_fit ? baseband.fitted : baseband.samples,
                                      offset_hz, rate_hz)));
            }
            json_close_array(&plot->json);
        }
        json_close_object(&plot->json);
    }
    free(baseband.samples);
    free(baseband.fitted);
    return is_made ? true : error_set(err, ERROR_MEMORY, "out of memory");
}
