#include "detect/onset.h"

#include "wane/strike.h"

#include <math.h>
#include <stdbool.h>

/* Rounding of 24 bit samples and of floats near full scale: variance below this
 * is nothing. */
#define VARIANCE_FLOOR 1e-14

#define GAIN_SEEN   14.0 /* nats: chance reaches half of it once in a thousand searches */
#define FIRST_SIGMA 4.5
#define RATIO_SEEN  8.0 /* of variances; below it a tone is placed better by its phase */
#define TONE_STEPS  6   /* frequencies tried to each side, over one bin */
#define LEAD_LEAST  ((size_t)8 * ONSET_ORDER) /* samples that teach a predictor */

/* Levinson-Durbin on the autocorrelation of samples [count]; out [ONSET_ORDER]
 * such that samples[n] is predicted by sum out[k] samples[n - 1 - k]. */
static void predictor(const float *samples, size_t count, double out[ONSET_ORDER])
{
    double r[ONSET_ORDER + 1];
    for (size_t lag = 0; lag <= ONSET_ORDER; lag++) {
        double sum = 0;
        for (size_t i = lag; i < count; i++)
            sum += (double)samples[i] * (double)samples[i - lag];
        r[lag] = sum;
        out[lag < ONSET_ORDER ? lag : 0] = 0;
    }
    /* A little white noise keeps the recursion stable on pure tones. */
    double power = r[0] * (1 + 1e-9) + VARIANCE_FLOOR * (double)count;
    for (size_t m = 0; m < ONSET_ORDER; m++) {
        double reflection = r[m + 1], old[ONSET_ORDER];
        for (size_t k = 0; k < m; k++) {
            reflection -= out[k] * r[m - k];
            old[k] = out[k];
        }
        reflection /= power;
        for (size_t k = 0; k < m; k++)
            out[k] = old[k] - reflection * old[m - 1 - k];
        out[m] = reflection;
        power *= 1 - reflection * reflection;
        if (!(power > 0))
            break;
    }
}

/* Prediction errors; the first ONSET_ORDER are 0. */
static void innovations(const struct onset_search *search, double *out)
{
    double weight[ONSET_ORDER];
    size_t order = search->lead > LEAD_LEAST ? ONSET_ORDER : 0;
    if (order > 0)
        predictor(search->samples, search->lead, weight);
    for (size_t n = 0; n < search->count; n++) {
        double e = n < order ? 0 : (double)search->samples[n];
        for (size_t k = 0; k < order && n >= order; k++)
            e -= weight[k] * (double)search->samples[n - 1 - k];
        out[n] = e;
    }
}

static double mean_of(const double *values, size_t from, size_t until)
{
    double sum = 0;
    for (size_t i = from; i < until; i++)
        sum += values[i];
    return until > from ? sum / (double)(until - from) : 0;
}

/* Likeliest n in [lead, until) for "variance s0 before n, another, larger one
 * in [n, end)". */
static size_t variance_change(const double *squares, size_t lead, size_t until, size_t end,
                              double s0, double *out_gain, double *out_ratio)
{
    double sum = 0, best = 0;
    size_t at = lead;
    for (size_t n = end; n-- > lead;) {
        sum += squares[n] / s0;
        double m = (double)(end - n);
        if (n >= until || sum <= m)
            continue;
        double gain = 0.5 * (sum - m - m * log(sum / m));
        if (gain > best) {
            best = gain;
            at = n;
            *out_ratio = sum / m;
        }
    }
    *out_gain = best;
    return at;
}

/* From the change back over blocks of a quarter of a millisecond that stand out
 * too, then on to the first single sample that does. */
static size_t first_arrival(const double *squares, size_t lead, size_t at, double s0,
                            double rate_hz)
{
    size_t block = (size_t)(rate_hz * 0.25e-3) + 1;
    double limit = s0 * (1 + 6 * sqrt(2.0 / (double)block));
    size_t n = at;
    while (n >= lead + block && mean_of(squares, n - block, n) > limit)
        n -= block;
    size_t from = n >= lead + block ? n - block : lead;
    for (size_t i = from; i < at; i++)
        if (squares[i] > FIRST_SIGMA * FIRST_SIGMA * s0)
            return i;
    return at;
}

/* Likeliest start in [lead, until) of a tone of f_hz that lasts to the end:
 * largest |sum of e times the tone|^2 / count, which over s0 is its gain in
 * nats. */
static size_t tone_start(const struct onset_search *search, const double *e, double f_hz,
                         double *out_sum)
{
    double step = 2 * WANE_PI * f_hz / search->rate_hz;
    double turn_re = cos(step), turn_im = -sin(step);
    double re = 1, im = 0, sum_re = 0, sum_im = 0, best = 0;
    size_t at = search->lead;
    for (size_t n = search->count; n-- > search->lead;) {
        sum_re += e[n] * re;
        sum_im += e[n] * im;
        double next = re * turn_re - im * turn_im;
        im = re * turn_im + im * turn_re;
        re = next;
        double sum = (sum_re * sum_re + sum_im * sum_im) / (double)(search->count - n);
        if (n < search->until && sum > best) {
            best = sum;
            at = n;
        }
    }
    *out_sum = best;
    return at;
}

static size_t best_tone_start(const struct onset_search *search, const double *e, double s0,
                              double *out_gain)
{
    double best = 0, sum = 0;
    size_t at = search->lead;
    for (int i = -TONE_STEPS; i <= TONE_STEPS; i++) {
        double f_hz = search->lane_hz + i * search->lane_width_hz / TONE_STEPS;
        if (f_hz <= 0)
            continue;
        size_t start = tone_start(search, e, f_hz, &sum);
        if (sum > best) {
            best = sum;
            at = start;
        }
    }
    *out_gain = best / s0;
    return at;
}

size_t onset_find(const struct onset_search *search)
{
    double *e = search->work, *squares = search->work + search->count;
    innovations(search, e);
    for (size_t n = 0; n < search->count; n++)
        squares[n] = e[n] * e[n];
    size_t skip = search->lead > LEAD_LEAST ? ONSET_ORDER : 0;
    double s0 = mean_of(squares, skip, search->lead) + VARIANCE_FLOOR;
    double gain = 0, tone_gain = 0, ratio = 0;
    size_t at =
        variance_change(squares, search->lead, search->until, search->until, s0, &gain, &ratio);
    if (gain >= GAIN_SEEN && ratio >= RATIO_SEEN)
        return first_arrival(squares, search->lead, at, s0, search->rate_hz);
    size_t start = best_tone_start(search, e, s0, &tone_gain);
    return gain > tone_gain ? first_arrival(squares, search->lead, at, s0, search->rate_hz) : start;
}
