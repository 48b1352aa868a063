/* The span that is fitted: noise before the strike, where the blow begins, where the fit may begin.
 */
#include "fit/state.h"

#include "fit/matrix.h"

#include <math.h>
#include <string.h>

/* Least variance a sample: the grain of 24-bit samples, step^2 / 12. */
#define GRAIN_24_BIT 1.18e-15

/* No input that listens is quieter than -114 dBFS: below it the
 * span before the strike was made by an editor, and says nothing of the noise in the ring. */
#define DIGITAL_SILENCE 2e-12

/* Takes carried modes out of residual [0, count) as predicted from the strike before. */
static void subtract_carried(const struct fit *fit, float *y, size_t count)
{
    const struct strike *strike = fit->strike;
    for (unsigned i = 0; i < strike->carried_count; i++) {
        const struct carried_mode *mode = &strike->carried[i];
        double complex p =
            -mode->decay_per_s / strike->rate_hz + J * 2 * WANE_PI * mode->f_hz / strike->rate_hz;
        struct pole pole = {.p = p};
        moments_subtract(y, pole_length(&pole, count), p,
                         mode->amplitude * cexp(J * mode->phase_rad), fit->segment->table);
    }
}

/* Two tones closer than the span can tell apart are one, and a tone must stand clear of the noise.
 */
static void merge_tones(struct fit *fit, size_t count)
{
    struct segment *segment = fit->segment;
    double cell = 2 * WANE_PI / (double)count;
    for (unsigned k = 0; k < segment->pole_count; k++)
        for (unsigned l = segment->pole_count; l-- > k + 1;) {
            if (fabs(cimag(segment->poles[k].p - segment->poles[l].p)) > 0.8 * cell)
                continue;
            if (cabs(segment->poles[l].c) > cabs(segment->poles[k].c)) {
                segment->poles[k] = segment->poles[l];
                segment->has_moments[k] = false;
            }
            segment_remove_pole(segment, l);
        }
}

/* A line that falls by less than this over the quiet span, in nepers, is steady. */
#define TONE_DECAY 0.25

/* Takes the steady lines out of `quiet` and lists them as tones, or takes the others out: what
 * decays is an earlier ring that nobody carried over. */
static void subtract_lines(struct fit *fit, float *quiet, size_t count, bool is_steady_wanted)
{
    struct segment *segment = fit->segment;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        bool is_steady = -creal(pole->p) * (double)count < TONE_DECAY;
        if (is_steady != is_steady_wanted)
            continue;
        if (is_steady) {
            fit->tones_w[fit->tone_count++] = cimag(pole->p);
            fit->tone_variance += creal(pole->c * conj(pole->c)) / 2;
        }
        moments_subtract(quiet, count, pole->p, pole->c, segment->table);
    }
}

/* Steady tones of the quiet span: found, refined together, taken out of `quiet`. */
static void find_tones(struct fit *fit, float *quiet, size_t count)
{
    struct fit_workspace *workspace = fit->workspace;
    struct segment *segment = fit->segment;
    segment_begin(segment, quiet, count);
    for (int round = 0; round < 3 && segment->pole_count < READING_TONES_MAX; round++) {
        double w[READING_TONES_MAX];
        memcpy(workspace->residual, quiet, count * sizeof *quiet);
        for (unsigned k = 0; k < segment->pole_count; k++)
            moments_subtract(workspace->residual, count, segment->poles[k].p, segment->poles[k].c,
                             segment->table);
        unsigned found =
            spectrum_find_lines(workspace->spectrum, workspace->residual, count, fit->w_low / 2,
                                fit->w_high, READING_TONES_MAX - segment->pole_count, w);
        if (found == 0)
            break;
        for (unsigned i = 0; i < found; i++)
            segment_add_pole(segment, POLE_RING, -0.05 / (double)count + J * w[i]);
        if (!refine_poles(segment, 12))
            break;
        unsigned before = segment->pole_count;
        merge_tones(fit, count);
        if (segment->pole_count < before)
            refine_poles(segment, 12);
    }
    fit->tone_count = 0;
    subtract_lines(fit, quiet, count, true);
    spectrum_remember(workspace->spectrum, quiet, count);
    subtract_lines(fit, quiet, count, false);
}

/* The first sample that stands clear of the noise, from 5 ms before the trigger on. What rang or
 * hummed before goes on as predicted; what is left of it, 5 to 10 ms before the trigger, counts as
 * noise. */
static size_t find_blow(const struct fit *fit)
{
    const struct strike *strike = fit->strike;
    size_t reach = (size_t)(0.005 * strike->rate_hz);
    size_t from = strike->trigger > reach ? strike->trigger - reach : 0;
    size_t to = strike->trigger + reach < strike->frame_count ? strike->trigger + reach
                                                              : strike->frame_count;
    float *y = fit->workspace->residual;
    memcpy(y, fit->workspace->y, to * sizeof *y);
    subtract_carried(fit, y, to);
    for (unsigned k = 0; k < fit->segment->pole_count; k++) {
        const struct pole *pole = &fit->segment->poles[k];
        moments_subtract(y, pole_length(pole, to), pole->p, pole->c, fit->segment->table);
    }
    double before = 0;
    size_t start = from > reach ? from - reach : 0;
    for (size_t n = start; n < from; n++)
        before += (double)y[n] * (double)y[n] / (double)(from - start);
    double limit = 25 * fmax(fit->noise.variance, before);
    for (size_t n = from; n < to; n++) {
        if ((double)y[n] * (double)y[n] > limit)
            return n < strike->trigger + reach / 4 ? n : strike->trigger;
    }
    return strike->trigger < strike->frame_count ? strike->trigger : strike->frame_count - 1;
}

bool window_was_there_before(const struct fit *fit, const struct pole *pole)
{
    size_t count = fit->quiet_end;
    if (count < 64 || pole->is_carried)
        return false;
    double amplitude = spectrum_amplitude_before(fit->workspace->spectrum, cimag(pole->p));
    double noise = 6 * noise_density(&fit->noise, cimag(pole->p)) / (double)count;
    double at_onset = cabs(pole->c * cexp(-pole->p * ((double)fit->begin - fit->onset)));
    return amplitude * amplitude > 12 * noise && amplitude > 0.4 * at_onset;
}

/* The mean of the quiet span is the card's offset, not part of the strike. Weighted by sin^4, so
 * that hum, which does not end on a whole period, leaves nothing in it. */
static float take_offset_out(struct fit *fit)
{
    const struct strike *strike = fit->strike;
    size_t count = fit->quiet_end;
    double complex turn = cexp(J * 2 * WANE_PI / (double)(count > 0 ? count : 1));
    double complex at = csqrt(turn);
    double sum = 0, weights = 0;
    for (size_t n = 0; n < count; n++) {
        double hann = 0.5 - 0.5 * creal(at);
        sum += (double)strike->samples[n] * hann * hann;
        weights += hann * hann;
        at *= turn;
    }
    float offset = weights > 0 ? (float)(sum / weights) : 0;
    for (size_t n = 0; n < strike->frame_count; n++)
        fit->workspace->y[n] = strike->samples[n] - offset;
    return offset;
}

/* The loudest block of the quiet span, as a mean square: coloured noise comes in bursts that white
 * noise of the same power does not have. */
static double loudest_block(const struct fit *fit, size_t block)
{
    double loudest = 0;
    for (size_t at = 0; at + block <= fit->quiet_end; at += block) {
        double sum = 0;
        for (size_t n = at; n < at + block; n++)
            sum += (double)fit->workspace->quiet[n] * (double)fit->workspace->quiet[n];
        loudest = fmax(loudest, sum / (double)block);
    }
    return loudest * fit->misfit;
}

void window_prepare(struct fit *fit)
{
    const struct strike *strike = fit->strike;
    struct fit_workspace *workspace = fit->workspace;
    size_t guard = (size_t)(0.005 * strike->rate_hz);
    fit->quiet_end = strike->trigger > guard ? strike->trigger - guard : 0;
    fit->end = strike->frame_count;
    for (unsigned i = strike->lost_count; i-- > 0;) {
        if (strike->lost[i].at <= strike->trigger || strike->lost[i].at >= fit->end)
            continue;
        fit->end = fit->lost_at = strike->lost[i].at;
        fit->lost_frames = (double)strike->lost[i].frames;
    }
    float offset = take_offset_out(fit);
    float *quiet = workspace->quiet;
    memcpy(quiet, workspace->y, fit->quiet_end * sizeof *quiet);
    subtract_carried(fit, quiet, fit->quiet_end);
    find_tones(fit, quiet, fit->quiet_end);
    spectrum_measure_noise(workspace->spectrum, quiet, fit->quiet_end, GRAIN_24_BIT, NOISE_ALONE,
                           &fit->noise);
    /* An offset that the noise alone could feign is left where it was: taking it out would only add
     * it. 35 / (18 count) is the sum of the squares of sin^4 weights over the square of their sum.
     */
    double offset_u =
        sqrt(noise_density(&fit->noise, fit->w_low) * 35 / (18 * (double)fit->quiet_end + 1));
    if (fabs((double)offset) < 5 * offset_u)
        memcpy(workspace->y, strike->samples, strike->frame_count * sizeof *workspace->y);
    /* Slow wander lies below the lowest bins: in time it counts. */
    double power = 0;
    for (size_t n = 0; n < fit->quiet_end; n++)
        power += (double)quiet[n] * (double)quiet[n] / (double)fit->quiet_end;
    fit->noise.variance = fmax(fit->noise.variance, power);
    if (!fit->noise.is_measured || fit->noise.variance < DIGITAL_SILENCE) {
        fit->is_noise_from_tail = true;
        size_t tail = (strike->frame_count - strike->trigger) / 4;
        size_t from = strike->frame_count - tail;
        spectrum_measure_noise(workspace->spectrum, workspace->y + from, tail, GRAIN_24_BIT,
                               NOISE_BETWEEN_LINES, &fit->noise);
    }
    /* Longer transforms gain little for modes that anyone could still read, and cost most of the
     * search's time. */
    fit->noise.search_count = (size_t)(1.3 * strike->rate_hz);
    fit->blow = find_blow(fit);
    fit->onset = (double)fit->blow;
}

/* Well after the blow, unless the ring is too quick for that: the latest of the steps 10, 5, 2.5
 * ... ms at which a tenth of the energy is still to come. */
size_t window_first_begin(const struct fit *fit)
{
    const float *y = fit->workspace->y;
    double rate = fit->strike->rate_hz, noise = fit->noise.variance;
    size_t last = fit->blow + (size_t)(0.1 * rate);
    last = last < fit->end ? last : fit->end;
    double total = 0;
    for (size_t n = fit->blow + 1; n < last; n++)
        total += (double)y[n] * (double)y[n] - noise;
    for (double step = 0.010 * rate; step >= 1; step /= 2) {
        size_t begin = fit->blow + (size_t)step;
        double rest = 0;
        for (size_t n = begin; n < last; n++)
            rest += (double)y[n] * (double)y[n] - noise;
        if (rest > 0.1 * total && begin + 32 < fit->end)
            return begin;
    }
    return fit->blow + 1 < fit->end ? fit->blow + 1 : fit->blow;
}

/* Model at `offset` samples from the segment's first (negative: before it), tones and all. */
static double model_at(const struct segment *segment, double offset, bool with_rings)
{
    double sum = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        double complex c = with_rings || pole->kind == POLE_TONE ? pole->c : pole->tail;
        if (c != 0)
            sum += creal(c * cexp(pole->p * offset));
    }
    return sum;
}

/* Variance of the model's prediction at `offset`, by the fit's own covariance. Needs what
 * refine_information left. */
static double prediction_variance(const struct segment *segment, const struct parameter *parameters,
                                  unsigned n, const double *scale, const double *density,
                                  double offset)
{
    double gradient[PARAMETERS_MAX], x[PARAMETERS_MAX];
    for (unsigned i = 0; i < n; i++) {
        const struct pole *pole = &segment->poles[parameters[i].pole];
        double complex basis = cexp(pole->p * offset) * (parameters[i].order > 0 ? offset : 1);
        gradient[i] = creal(parameters[i].d * basis) * sqrt(density[parameters[i].pole]);
        x[i] = gradient[i];
    }
    matrix_solve(segment->matrix, n, scale, x);
    double sum = 0;
    for (unsigned i = 0; i < n; i++)
        sum += gradient[i] * x[i];
    return sum;
}

/* The onset as the change point: before it silence (and tones) explains the samples, after it the
 * ring. Least squares over [from, to). out_excess: the worst of the two sides' mean squares over
 * `near` samples, in units of the noise. */
static size_t change_point(const struct fit *fit, size_t from, size_t to, double *out_excess)
{
    const struct segment *segment = fit->segment;
    const float *y = fit->workspace->y;
    double gain = 0, best = 0;
    size_t at = to;
    for (size_t n = to; n-- > from;) {
        double offset = (double)n - (double)fit->begin;
        double old = model_at(segment, offset, false), all = model_at(segment, offset, true);
        double ring = (double)y[n] - all, silence = (double)y[n] - old;
        gain += silence * silence - ring * ring;
        if (gain > best) {
            best = gain;
            at = n;
        }
    }
    size_t near = 16;
    double worst = 0;
    for (int side = 0; side < 2; side++) {
        double sum = 0;
        for (size_t i = 0; i < near; i++) {
            size_t n = side == 0 ? at - 1 - i : at + i;
            if (n >= fit->strike->frame_count || n >= fit->end)
                continue;
            double r = (double)y[n] - model_at(segment, (double)n - (double)fit->begin, side == 1);
            sum += r * r;
        }
        worst = fmax(worst, sum / (double)near);
    }
    *out_excess = worst / fit->noise.variance;
    return at;
}

/* Mean square of the samples [from, from + count) less the model, with or without the ring. */
static double mean_square(const struct fit *fit, size_t from, size_t count, bool with_rings)
{
    double sum = 0;
    for (size_t n = from; n < from + count; n++) {
        double offset = (double)n - (double)fit->begin;
        double r = (double)fit->workspace->y[n] - model_at(fit->segment, offset, with_rings);
        sum += r * r;
    }
    return sum / (double)count;
}

double window_left(const struct fit *fit, size_t from, size_t count)
{
    return mean_square(fit, from, count, true);
}

/* Does the ring begin near `at` out of silence, with no blow between? Then that is the onset. */
static bool find_clean_onset(struct fit *fit, size_t at, size_t block)
{
    size_t from = at > 4 * block ? at - 4 * block : 0;
    size_t to = at + 2 * block < fit->end ? at + 2 * block : fit->end;
    double excess = 0;
    size_t onset = change_point(fit, from, to, &excess);
    if (onset <= from || onset >= to || excess > 1 + 5 * sqrt(2.0 / 16))
        return false;
    fit->onset = (double)onset - 0.5;
    fit->is_clean_onset = true;
    fit->begin = onset;
    return true;
}

enum walk window_walk_back(struct fit *fit)
{
    const struct segment *segment = fit->segment;
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], density[POLES_MAX];
    unsigned n = refine_information(fit->segment, parameters, scale);
    if (n == 0)
        return WALK_ENDED;
    for (unsigned k = 0; k < segment->pole_count; k++)
        density[k] = noise_density(&fit->noise, cimag(segment->poles[k].p));
    double quickest = 0;
    for (unsigned k = 0; k < segment->pole_count; k++)
        quickest = fmax(quickest, -creal(segment->poles[k].p));
    size_t block = (size_t)fmin(0.00025 * fit->strike->rate_hz, 0.5 / fmax(quickest, 1e-9));
    block = block < 4 ? 4 : block;
    double noise = fit->noise.variance;
    double limit = fmax(1 + 5 * sqrt(2.0 / (double)block), 1.2 * loudest_block(fit, block) / noise);
    size_t reach = (size_t)(0.006 * fit->strike->rate_hz);
    size_t least = fit->blow > reach ? fit->blow - reach : 0;
    size_t at = fit->begin;
    while (at >= least + block) {
        double middle = (double)at - (double)block / 2 - (double)fit->begin;
        double predicted = prediction_variance(segment, parameters, n, scale, density, middle);
        bool fits_silence = mean_square(fit, at - block, block, false) < limit * noise;
        if (fits_silence && find_clean_onset(fit, at, block))
            return WALK_CLEAN;
        /* The prediction is wrong by one and the same amount all over the block: its square, not a
         * mean of squares, is allowed for, at 3.5 sigma. */
        if (mean_square(fit, at - block, block, true) > limit * noise + 12 * predicted)
            break;
        /* Where the prediction is worse than the noise the test has lost its power: the fit must
         * take in what has been gained before it goes on. */
        at -= block;
        if (predicted > noise && !fits_silence) {
            fit->begin = at;
            return WALK_MOVED;
        }
    }
    if (find_clean_onset(fit, at, block))
        return WALK_CLEAN;
    bool has_moved = at < fit->begin;
    fit->begin = at;
    return has_moved ? WALK_MOVED : WALK_ENDED;
}
