#include "wane/fit.h"

#include "fit/state.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MISFIT_MOST    0.03 /* of the ring's energy: more is no misfit but another thing */
#define STEADY_DELAY_S 0.04
#define STEADIER       0.5 /* of what is left: worth a later begin */
#define WALKS_MAX      12
/* Bounds the time whatever the sound, by counting, not by a clock: the same strike gives the same
 * bits. */
#define WORK_MAX 40000

static bool allocate(struct fit_workspace *workspace, size_t frames_max)
{
    struct segment *segment = &workspace->segment;
    size_t blocks = frames_max / MOMENT_BLOCK_MAX + 128;
    float *y = realloc(workspace->y, frames_max * sizeof *y);
    if (y != NULL)
        workspace->y = y;
    float *quiet = realloc(workspace->quiet, frames_max * sizeof *quiet);
    if (quiet != NULL)
        workspace->quiet = quiet;
    float *residual = realloc(workspace->residual, frames_max * sizeof *residual);
    if (residual != NULL)
        workspace->residual = residual;
    double complex *pool =
        realloc(segment->moment_pool, (POLES_MAX + 1) * blocks * MOMENT_ORDERS * sizeof *pool);
    if (pool != NULL)
        segment->moment_pool = pool;
    if (y == NULL || quiet == NULL || residual == NULL || pool == NULL)
        return false;
    segment->pool_blocks = blocks;
    segment->spare_moments = pool + POLES_MAX * blocks * MOMENT_ORDERS;
    workspace->frames_max = frames_max;
    return true;
}

struct fit_workspace *fit_workspace_create(size_t frames_max, struct error *err)
{
    struct fit_workspace *workspace = calloc(1, sizeof *workspace);
    if (workspace != NULL) {
        struct segment *segment = &workspace->segment;
        workspace->spectrum = spectrum_create();
        segment->table = aligned_alloc(64, MOMENT_TABLE_FLOATS * sizeof(float));
        segment->matrix = calloc((size_t)PARAMETERS_MAX * PARAMETERS_MAX, sizeof(double));
        segment->pair_sums = calloc((size_t)POLES_MAX * POLES_MAX, sizeof segment->pair_sums[0]);
        if (workspace->spectrum != NULL && segment->table != NULL && segment->matrix != NULL &&
            segment->pair_sums != NULL &&
            allocate(workspace, frames_max < 4096 ? 4096 : frames_max))
            return workspace;
    }
    fit_workspace_destroy(workspace);
    error_set(err, ERROR_MEMORY,
              "no memory for fitting strikes of %zu samples: close other programs", frames_max);
    return NULL;
}

void fit_workspace_destroy(struct fit_workspace *workspace)
{
    if (workspace == NULL)
        return;
    spectrum_destroy(workspace->spectrum);
    free(workspace->y);
    free(workspace->quiet);
    free(workspace->residual);
    free(workspace->segment.moment_pool);
    free(workspace->segment.table);
    free(workspace->segment.matrix);
    free(workspace->segment.pair_sums);
    free(workspace);
}

void fit_settings_describe(const struct fit_settings *settings, char *out, size_t out_size)
{
    snprintf(out, out_size,
             "f_low_hz=%.9g f_high_hz=%.9g coupling_hz=%.9g not_exponential=%.9g gliding=%.9g "
             "modes_max=%u clock_ppm=%.9g",
             settings->f_low_hz, settings->f_high_hz, settings->coupling_hz,
             settings->not_exponential, settings->gliding, settings->modes_max,
             settings->clock_ppm);
}

static bool resolve_settings(const struct fit_settings *given, double rate_hz,
                             struct fit_settings *out, struct error *err)
{
    *out = *given;
    if (out->f_low_hz <= 0)
        out->f_low_hz = 20;
    if (out->f_high_hz <= 0)
        out->f_high_hz = 0.46 * rate_hz;
    if (out->not_exponential <= 0)
        out->not_exponential = 0.05;
    if (out->gliding <= 0)
        out->gliding = 1e-4;
    if (out->modes_max == 0)
        out->modes_max = READING_MODES_MAX;
    if (out->modes_max > READING_MODES_MAX)
        return error_set(err, ERROR_USAGE,
                         "at most %d modes can be read at once, not %u: ask for fewer",
                         READING_MODES_MAX, out->modes_max);
    if (out->f_low_hz >= out->f_high_hz)
        return error_set(
            err, ERROR_USAGE,
            "lowest frequency %.6g Hz is not below the highest, %.6g Hz: give a wider range",
            out->f_low_hz, out->f_high_hz);
    return true;
}

static bool check_samples(const struct strike *strike, struct error *err)
{
    if (strike->frame_count == 0 || strike->trigger >= strike->frame_count)
        return error_set(err, ERROR_DATA, "the strike holds no samples after its trigger");
    for (size_t n = 0; n < strike->frame_count; n++) {
        if (!isfinite(strike->samples[n]))
            return error_set(err, ERROR_DATA, "sample %zu of the strike is not a number", n);
    }
    return true;
}

static void set_levels(struct fit *fit, struct reading *reading)
{
    float peak = 0;
    for (size_t n = fit->blow > 8 ? fit->blow - 8 : 0; n < fit->end; n++)
        peak = fabsf(fit->strike->samples[n]) > peak ? fabsf(fit->strike->samples[n]) : peak;
    reading->peak_dbfs = 20 * log10(fmax((double)peak, 1e-10));
    reading->noise_dbfs = 10 * log10(2 * fit->noise.variance / fit->misfit);
    reading->onset_frame = fit->onset;
    reading->window_begin_frame = (double)fit->begin;
    reading->window_end_frame = (double)fit->end;
    double strongest = -INFINITY;
    for (unsigned i = 0; i < reading->mode_count; i++)
        strongest = fmax(strongest, reading->modes[i].level_dbfs);
    reading->snr_db = reading->mode_count > 0 ? strongest - reading->noise_dbfs : (double)NAN;
}

/* Strongest first; a doublet's halves share a number and are told apart by frequency. */
static void sort_and_label(struct reading *reading)
{
    struct mode *modes = reading->modes;
    unsigned count = reading->mode_count;
    for (unsigned i = 1; i < count; i++) {
        struct mode mode = modes[i];
        unsigned at = i;
        for (; at > 0 && modes[at - 1].level_dbfs < mode.level_dbfs; at--)
            modes[at] = modes[at - 1];
        modes[at] = mode;
    }
    unsigned number = 0;
    for (unsigned i = 0; i < count; i++)
        modes[i].label[0] = '\0';
    for (unsigned i = 0; i < count; i++) {
        if (modes[i].label[0] != '\0')
            continue;
        number++;
        unsigned partner = i;
        for (unsigned k = i + 1; k < count && partner == i; k++) {
            double width = (modes[i].decay_per_s + modes[k].decay_per_s) / (2 * WANE_PI);
            if (modes[k].label[0] == '\0' && fabs(modes[i].f_hz - modes[k].f_hz) < 5 * width)
                partner = k;
        }
        if (partner == i) {
            snprintf(modes[i].label, sizeof modes[i].label, "%u", number);
        } else {
            bool is_lower = modes[i].f_hz < modes[partner].f_hz;
            snprintf(modes[i].label, sizeof modes[i].label, "%u%c", number, is_lower ? 'a' : 'b');
            snprintf(modes[partner].label, sizeof modes[i].label, "%u%c", number,
                     is_lower ? 'b' : 'a');
        }
    }
}

static void list_tones(const struct fit *fit, struct reading *reading)
{
    reading->tone_count = 0;
    for (unsigned k = 0; k < fit->segment->pole_count; k++) {
        const struct pole *pole = &fit->segment->poles[k];
        if (pole->kind != POLE_TONE || reading->tone_count == READING_TONES_MAX)
            continue;
        reading->tones[reading->tone_count++] = (struct steady_tone){
            cimag(pole->p) * fit->strike->rate_hz / (2 * WANE_PI), 20 * log10(cabs(pole->c))};
    }
}

/* The ring pole with most energy. */
static unsigned find_lead(const struct fit *fit)
{
    const struct segment *segment = fit->segment;
    double strongest = -1;
    unsigned lead = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        double energy = creal(pole->c * conj(pole->c)) / fmax(-creal(pole->p), 1e-9);
        if (pole->kind == POLE_RING && energy > strongest) {
            strongest = energy;
            lead = k;
        }
    }
    return lead;
}

/* What the verdict needs to know beyond the modes. */
static void examine(struct fit *fit)
{
    struct segment *segment = fit->segment;
    bool is_any_curved = false;
    for (unsigned k = 0; k < segment->pole_count; k++)
        is_any_curved = is_any_curved || (segment->poles[k].kind == POLE_RING && fit->is_curved[k]);
    fit->lead_pole = find_lead(fit);
    clip_count(fit);
    breaks_find(fit);
    if (fit->break_kind == BREAK_LOST && fit->break_at > fit->begin + 64 &&
        -creal(segment->poles[fit->lead_pole].p) * (double)(fit->break_at - fit->begin) >= 3) {
        fit->end = fit->break_at;
        if (!candidates_fit(fit) || !candidates_finish(fit))
            return;
        fit->lead_pole = find_lead(fit);
    }
    if (fit->break_kind == BREAK_NONE && (is_any_curved || fit->misfit > 1))
        curvature_measure(fit);
    verdict_measure(fit);
}

/* No real part is exactly the model. What the first fit leaves, where it is more than the noise but
 * little beside the ring, is misfit: from here on it counts as noise, in the tests that decide on
 * modes and begin, and in the uncertainties. */
static double allow_for_misfit(struct fit *fit)
{
    const struct segment *segment = fit->segment;
    double slowest = INFINITY, left = 0, whole = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        if (segment->poles[k].kind == POLE_RING)
            slowest = fmin(slowest, -creal(segment->poles[k].p));
    }
    candidates_residual(fit);
    const float *r = fit->workspace->residual;
    size_t span = (size_t)fmin(fmax(1 / slowest, 2048), (double)segment->frame_count);
    for (size_t n = 0; n < span; n++) {
        left += (double)r[n] * (double)r[n];
        whole += (double)segment->y[n] * (double)segment->y[n];
    }
    double excess = left / ((double)span * fit->noise.variance);
    if (span < 64 || excess < 1 + 6 * sqrt(2.0 / (double)span) || excess < 1.5 ||
        left > MISFIT_MOST * whole)
        return left / whole;
    /* Where it lies: beside the lines that are not quite lines. */
    struct noise misfit;
    spectrum_measure_noise(fit->workspace->spectrum, r, span, 1e-16, NOISE_ALONE, &misfit);
    for (size_t i = 0; i <= fit->noise.bins; i++) {
        double w = WANE_PI * (double)i / (double)fit->noise.bins;
        fit->noise.density[i] = fmax(fit->noise.density[i], noise_density(&misfit, w));
    }
    fit->noise.variance *= excess;
    fit->misfit = excess;
    fit->misfit_share = left / whole;
    return left / whole;
}

/* Where a real part and its room need longer than the blow to come to a steady ring, a fit begun
 * later leaves much less: then it is the better one, as long as the lead has lost little by then.
 */
static bool find_steady_begin(struct fit *fit, double left_share)
{
    size_t first = fit->begin;
    double a = -creal(fit->segment->poles[find_lead(fit)].p);
    double delay = STEADY_DELAY_S * fit->strike->rate_hz;
    if (a * delay > 0.15 || (double)first + 8 * delay > (double)fit->end)
        return true;
    for (int later = 1; later >= 0; later--) {
        fit->begin = first + (later ? (size_t)delay : 0);
        fit->segment->work = 0;
        fit->noise = fit->plain;
        fit->misfit = 1;
        bool has_modes = candidates_fit(fit);
        if (!later && !has_modes)
            return false;
        if (has_modes && allow_for_misfit(fit) < STEADIER * left_share && later)
            break;
    }
    fit->first_begin = fit->begin;
    return true;
}

/* Walks to the onset; where a quick mode only shows on the way, with it once more. */
static bool settle(struct fit *fit)
{
    for (int again = 0; again < 3; again++) {
        enum walk walk = WALK_MOVED;
        for (int i = 0; walk == WALK_MOVED && i < WALKS_MAX; i++) {
            walk = window_walk_back(fit);
            if (walk == WALK_MOVED)
                candidates_refit(fit);
        }
        unsigned before = fit->segment->pole_count;
        if (!candidates_finish(fit))
            return false;
        if (walk == WALK_CLEAN || fit->segment->pole_count <= before)
            break;
    }
    return true;
}

bool fit_strike(struct fit_workspace *workspace, const struct strike *strike,
                const struct fit_settings *settings, struct reading *out_reading, struct error *err)
{
    struct fit fit = {.workspace = workspace, .strike = strike, .segment = &workspace->segment};
    if (!resolve_settings(settings, strike->rate_hz, &fit.settings, err) ||
        !check_samples(strike, err))
        return false;
    if (strike->frame_count > workspace->frames_max && !allocate(workspace, strike->frame_count))
        return error_set(err, ERROR_MEMORY, "no memory to fit a strike of %zu samples",
                         strike->frame_count);
    struct reading reading;
    reading_init(&reading);
    fit.w_low = 2 * WANE_PI * fit.settings.f_low_hz / strike->rate_hz;
    fit.w_high = 2 * WANE_PI * fit.settings.f_high_hz / strike->rate_hz;
    fit.misfit = 1;
    fit.segment->work = 0;
    fit.segment->work_max = 0;
    fit.segment->negligible = 0;
    window_prepare(&fit);
    fit.segment->work = 0;
    fit.segment->work_max = WORK_MAX;
    fit.segment->negligible = 1e-5 * fit.noise.variance;
    fit.plain = fit.noise;
    fit.begin = fit.first_begin = window_first_begin(&fit);
    bool has_modes = candidates_fit(&fit);
    if (has_modes) {
        double left_share = allow_for_misfit(&fit);
        if (fit.misfit > 4)
            has_modes = find_steady_begin(&fit, left_share);
    }
    has_modes = has_modes && settle(&fit);
    fit.segment->work = 0; /* the examination has an allowance of its own */
    if (has_modes)
        examine(&fit);
    uncertainty_fill(&fit, &reading);
    sort_and_label(&reading);
    list_tones(&fit, &reading);
    set_levels(&fit, &reading);
    verdict_judge(&fit, &reading);
    *out_reading = reading;
    return true;
}

void fit_carry(const struct strike *strike, const struct reading *reading, struct strike *next)
{
    next->carried_count = 0;
    double rate = strike->rate_hz;
    double from = (double)strike->first_frame + reading->onset_frame;
    double t = ((double)next->first_frame - from) / rate;
    if (!(t >= 0) || next->rate_hz != rate || next->channel != strike->channel)
        return;
    double floor_amplitude = pow(10, (reading->noise_dbfs - 20) / 20);
    for (unsigned i = 0; i < reading->mode_count && next->carried_count < STRIKE_CARRIED_MAX; i++) {
        const struct mode *mode = &reading->modes[i];
        double amplitude = pow(10, mode->level_dbfs / 20) * exp(-mode->decay_per_s * t);
        if (!(amplitude > floor_amplitude))
            continue;
        double phase = fmod(mode->phase_rad + 2 * WANE_PI * fmod(mode->f_hz * t, 1.0), 2 * WANE_PI);
        next->carried[next->carried_count++] =
            (struct carried_mode){mode->f_hz, mode->decay_per_s, amplitude, phase};
    }
}
