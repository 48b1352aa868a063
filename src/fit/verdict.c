/* Can the strike be believed, and why (not)? The reasons' definitions: contract.md. */
#include "fit/state.h"

#include <math.h>
#include <string.h>

/* Uncertainties by which early and late must differ: the two are read from two halves only, and
 * their misfit is known by a few probes. */
#define SURE          4.0
#define MISFIT_U_MOST 0.03
/* Where there were more modes than can be listed, what is left is more of them: unresolved, as long
 * as those that are listed are most of it. */
#define CROWD_UNEXPLAINED 0.2
/* Under it a mode drowns in each single sample: what else is in the noise nobody can tell. */
#define DROWNED_DB     (-3.0)
#define RESTLESS_SHARE 0.01
#define VAGUE_U        0.02

static void add(struct reading *reading, enum reason reason, enum verdict verdict)
{
    reading->reasons |= 1u << reason;
    if (verdict > reading->verdict)
        reading->verdict = verdict;
}

/* The k-th smallest of values [n], which are reordered (Hoare 1961): qsort may allocate. */
static double nth_smallest(double *values, size_t n, size_t k)
{
    size_t low = 0, high = n - 1;
    while (low < high) {
        double pivot = values[low + (high - low) / 2];
        size_t i = low, j = high;
        for (;;) {
            while (values[i] < pivot)
                i++;
            while (values[j] > pivot)
                j--;
            if (i >= j)
                break;
            double swap = values[i];
            values[i++] = values[j];
            values[j--] = swap;
        }
        if (k <= j)
            high = j;
        else
            low = j + 1;
    }
    return values[k];
}

/* Median over the frequencies: what is left of a mode here and there does not count as noise. */
static double median_ratio(const struct noise *after, const struct noise *before)
{
    double ratios[NOISE_BINS_MAX + 1];
    size_t n = 0;
    for (size_t i = 1; i < after->bins; i++)
        ratios[n++] =
            after->density[i] / noise_density(before, WANE_PI * (double)i / (double)after->bins);
    return n > 0 ? nth_smallest(ratios, n, n / 2) : 0;
}

static double quietest_block(const float *y, size_t count, size_t block)
{
    double least = INFINITY;
    for (size_t at = 0; at + block <= count; at += block) {
        double sum = 0;
        for (size_t n = at; n < at + block; n++)
            sum += (double)y[n] * (double)y[n];
        least = fmin(least, sum / (double)block);
    }
    return least;
}

/* Was the span before the strike restless: a block of 10 ms far over the median one, and not small
 * beside the ring? Speech and work at the bench are; a ring in them cannot be told from them. */
static bool was_restless(const struct fit *fit)
{
    double powers[128];
    size_t block = (size_t)(0.01 * fit->strike->rate_hz), n = 0;
    double loudest = 0;
    for (size_t at = 0; at + block <= fit->quiet_end && n < 128; at += block) {
        powers[n] = quietest_block(fit->workspace->quiet + at, block, block);
        loudest = fmax(loudest, powers[n++]);
    }
    if (n < 4)
        return false;
    double ring = quietest_block(fit->segment->y, block, block);
    return loudest > 6 * nth_smallest(powers, n, n / 2) && loudest > RESTLESS_SHARE * ring;
}

/* Power of the quietest 10 ms of the ring over that of the quietest 10 ms before it: an input that
 * is left alone does not get quieter than it was. 0: unknown. */
static double measure_quietest(const struct fit *fit)
{
    size_t block = (size_t)(0.01 * fit->strike->rate_hz) + 64;
    double before = quietest_block(fit->workspace->quiet, fit->quiet_end, block);
    double after = quietest_block(fit->segment->y, fit->segment->frame_count, block);
    return isfinite(before) && isfinite(after) && before > 0 ? after / before : 0;
}

void verdict_measure(struct fit *fit)
{
    struct segment *segment = fit->segment;
    candidates_residual(fit);
    const float *r = fit->workspace->residual;
    double a = -creal(segment->poles[fit->lead_pole].p);
    size_t span = (size_t)fmin(4 / a, (double)segment->frame_count);
    /* The attack of a long ring is over when 50 ms, of a short one a third of its life, have gone.
     */
    size_t from = (size_t)fmin(0.05 * fit->strike->rate_hz, 0.3 / a);
    from = from < span / 2 ? from : 0;
    double left = 0, whole = 0;
    for (size_t n = from; n < span; n++) {
        left += (double)r[n] * (double)r[n];
        whole += (double)segment->y[n] * (double)segment->y[n];
    }
    span -= from;
    double noise = fit->noise.variance * (double)span;
    double tones = fit->tone_variance * (double)span;
    fit->unexplained = fmax(0, left - 1.6 * noise - 4 * fit->noise.variance * sqrt((double)span)) /
                       fmax(whole - noise - tones, 1e-30);
    fit->was_restless = segment->frame_count > 1024 && was_restless(fit);
    size_t tail = segment->frame_count / 4;
    if (!fit->noise.is_measured || fit->is_noise_from_tail || tail < 256)
        return;
    struct noise after;
    spectrum_measure_noise(fit->workspace->spectrum, r + segment->frame_count - tail, tail, 1e-16,
                           NOISE_ALONE, &after);
    fit->noise_after = median_ratio(&after, &fit->plain);
    fit->quietest = measure_quietest(fit);
}

static void judge_input(const struct fit *fit, struct reading *reading)
{
    double rate = fit->strike->rate_hz;
    if (fit->clipped > 0) {
        reading->why.clipped_for_s = (double)fit->clipped / rate;
        add(reading, REASON_CLIPPED,
            fit->clipped_share > 0.01 ? VERDICT_REJECTED : VERDICT_DOUBTFUL);
    } else if (fit->clipped_in_blow > 0) {
        reading->remarks |= 1u << REMARK_BLOW_CLIPPED;
    }
    if (fit->lost_at > 0 || fit->break_kind == BREAK_LOST) {
        size_t at = fit->lost_at > 0 ? fit->lost_at : fit->break_at;
        reading->why.lost_frames = fit->lost_frames;
        reading->why.lost_at_s = ((double)at - fit->onset) / rate;
        double spans =
            -creal(fit->segment->poles[fit->lead_pole].p) * ((double)at - (double)fit->begin);
        bool suffices = reading->mode_count > 0 && at >= fit->end && spans >= 3;
        add(reading, REASON_SAMPLES_LOST, suffices ? VERDICT_DOUBTFUL : VERDICT_REJECTED);
    }
    if (fit->break_kind == BREAK_GAIN) {
        reading->why.gain_db = fit->gain_db;
        add(reading, REASON_INPUT_STEERED, VERDICT_DOUBTFUL);
    }
    if (fit->break_kind == BREAK_HIT) {
        reading->why.after_s = ((double)fit->break_at - fit->onset) / rate;
        add(reading, REASON_DOUBLE_HIT, VERDICT_REJECTED);
    }
}

/* The lead mode: the strongest. */
static void judge_lead(const struct fit *fit, struct reading *reading)
{
    const struct mode *lead = &reading->modes[0];
    double rate = fit->strike->rate_hz;
    double span_s = ((double)fit->end - (double)fit->begin) / rate;
    double spans = lead->decay_per_s * span_s;
    double relative_u =
        fit->misfit > 1.5 ? fit->lead_noise_u : lead->decay_u_per_s / lead->decay_per_s;
    bool is_cut = fit->strike->end == STRIKE_END_NEXT || fit->strike->end == STRIKE_END_INPUT;
    if (is_cut && spans < 7)
        reading->remarks |= 1u << REMARK_CUT;
    if (fit->strike->end == STRIKE_END_NEXT && spans < 3) {
        reading->why.cut_s = span_s;
        add(reading, REASON_RESTRUCK, VERDICT_DOUBTFUL);
    } else if (spans < 1 || lead->f_u_hz > 0.05 * lead->f_hz) {
        reading->why.cycles = lead->f_hz * fmin(span_s, 3 / lead->decay_per_s);
        reading->why.span_s = span_s;
        add(reading, REASON_TOO_SHORT, VERDICT_DOUBTFUL);
    }
    bool has_risen = fit->noise_after > 2 || fit->was_restless || reading->snr_db < DROWNED_DB;
    if (relative_u > 0.1 || has_risen) {
        reading->why.noise_dbfs =
            10 * log10(2 * fit->noise.variance / fit->misfit * fmax(fit->noise_after, 1));
        add(reading, REASON_NOISY, relative_u > 0.3 ? VERDICT_REJECTED : VERDICT_DOUBTFUL);
    }
    /* The band that a mode fills: its half-power width, a / pi cycles a sample on both sides of
     * zero. */
    double a = lead->decay_per_s / rate, amplitude = pow(10, lead->level_dbfs / 20);
    double density = noise_density(&fit->noise, 2 * WANE_PI * lead->f_hz / rate);
    double over_db = 10 * log10(amplitude * amplitude / 2 / (density * 2 * a / WANE_PI));
    if (over_db < 6) {
        reading->why.over_noise_db = over_db;
        add(reading, REASON_TOO_SOFT, VERDICT_DOUBTFUL);
    }
}

/* Early and late values that differ: is it the part, the input's gain, or its end stop? */
static void judge_curvature(struct fit *fit, struct reading *reading)
{
    double rate = fit->strike->rate_hz;
    const struct curvature *lead = &fit->curvature[fit->lead_pole];
    if (!lead->is_known)
        return;
    double early = -creal(lead->early) * rate, late = -creal(lead->late) * rate;
    double a = -creal(fit->segment->poles[fit->lead_pole].p) * rate;
    double w = cimag(fit->segment->poles[fit->lead_pole].p);
    double moved = fabs(cimag(lead->early - lead->late));
    bool is_bent = fabs(early - late) > SURE * lead->u_a * rate &&
                   fabs(early - late) > fit->settings.not_exponential * a;
    /* A bent input is looked for below that, too: its harmonics give it away. */
    double loss = 1 - exp((early - late) * 0.6 / a);
    bool has_moved = fabs(early - late) * sqrt(fit->misfit) > 3 * lead->u_a * rate;
    if (has_moved && loss > 0.003 && clip_is_bent(fit, loss)) {
        reading->why.clipped_for_s = 1 / a;
        add(reading, REASON_CLIPPED, VERDICT_DOUBTFUL);
    } else if (is_bent) {
        reading->why.early_per_s = early;
        reading->why.late_per_s = late;
        add(reading, REASON_NOT_EXPONENTIAL, VERDICT_DOUBTFUL);
    }
    if (moved > SURE * lead->u_w && moved > fit->settings.gliding * w) {
        reading->why.early_hz = cimag(lead->early) * rate / (2 * WANE_PI);
        reading->why.late_hz = cimag(lead->late) * rate / (2 * WANE_PI);
        add(reading, REASON_GLIDING, VERDICT_DOUBTFUL);
    }
}

/* Gain that moves takes all modes and the noise with it. */
static void judge_steering(struct fit *fit, struct reading *reading)
{
    double least = INFINITY, most = -INFINITY;
    unsigned count = 0;
    for (unsigned k = 0; k < fit->segment->pole_count; k++) {
        const struct curvature *curve = &fit->curvature[k];
        if (!curve->is_known || curve->u_a * 5 > fabs(creal(curve->early - curve->late)))
            continue;
        double change = creal(curve->early - curve->late);
        least = fmin(least, change);
        most = fmax(most, change);
        count++;
    }
    bool moves_together = count >= 2 && least * most > 0 &&
                          fmax(fabs(least), fabs(most)) < 1.5 * fmin(fabs(least), fabs(most));
    bool noise_fell = fit->quietest > 0 && fit->quietest < 0.25;
    bool is_bent = reading->reasons & (1u << REASON_NOT_EXPONENTIAL);
    bool noise_moved = fit->noise_after > 2.5 || (fit->noise_after > 0 && fit->noise_after < 0.4);
    if (noise_fell || (is_bent && (moves_together || noise_moved))) {
        reading->why.gain_db =
            10 * log10(fmax(noise_fell ? fit->quietest : fit->noise_after, 1e-9));
        add(reading, REASON_INPUT_STEERED, VERDICT_DOUBTFUL);
    }
}

void verdict_judge(struct fit *fit, struct reading *reading)
{
    reading->verdict = VERDICT_GOOD;
    if (fit->tone_count > 0)
        reading->remarks |= 1u << REMARK_HUM;
    judge_input(fit, reading);
    /* Misfit that makes even the lead uncertain is no misfit: the sound is not made of these modes.
     */
    bool is_full = reading->mode_count == fit->settings.modes_max;
    bool is_made_of_modes =
        reading->mode_count > 0 && fit->unexplained <= (is_full ? CROWD_UNEXPLAINED : 0.05);
    if (is_made_of_modes && fit->misfit > 1.5 && fit->lead_noise_u > MISFIT_U_MOST) {
        is_made_of_modes = false;
        fit->unexplained = fmax(fit->unexplained, fit->misfit_share);
    }
    if (!is_made_of_modes) {
        if (reading->mode_count > 0)
            reading->why.unexplained = fmin(fit->unexplained, 1);
        if ((reading->reasons & (1u << REASON_DOUBLE_HIT | 1u << REASON_SAMPLES_LOST)) == 0)
            add(reading, REASON_NOT_A_RING, VERDICT_REJECTED);
    }
    if (reading->mode_count == 0)
        return;
    judge_lead(fit, reading);
    if (fit->break_kind == BREAK_NONE) {
        judge_curvature(fit, reading);
        judge_steering(fit, reading);
    }
    /* A lead that its own misfit leaves vague stands for more than one mode. */
    bool is_vague = fit->misfit > 1.5 && fit->lead_u > VAGUE_U;
    if ((is_full || is_vague) && fit->unresolved_w <= 0)
        fit->unresolved_w = 2 * WANE_PI * reading->modes[0].f_hz / fit->strike->rate_hz;
    if (fit->unresolved_w > 0) {
        reading->why.near_hz = fit->unresolved_w * fit->strike->rate_hz / (2 * WANE_PI);
        add(reading, REASON_UNRESOLVED, VERDICT_DOUBTFUL);
    }
}
