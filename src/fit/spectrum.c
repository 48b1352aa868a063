#include "fit/spectrum.h"

#include <fftw3.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define PI              3.14159265358979323846
#define PLAN_COUNT      (SPECTRUM_LOG2_MAX + 1)
#define BEFORE_LOG2_MAX 17
#define PEAKS_A_GRID    12
#define LEVEL_BINS      32
/* The grid's decay rates are GRID_DECAY / length: the window has fallen to exp(-4) at its end, and
 * a mode that decays as fast as the window is matched. */
#define GRID_DECAY 4.0

struct spectrum {
    fftwf_plan plans[PLAN_COUNT];
    float *in;          /* [2^SPECTRUM_LOG2_MAX] */
    fftwf_complex *out; /* [2^(SPECTRUM_LOG2_MAX - 1) + 1] */
    float *power;       /* as out */
    float levels[((size_t)1 << (SPECTRUM_LOG2_MAX - 1)) / LEVEL_BINS + 1];
    /* What spectrum_remember keeps of the samples before a strike. */
    float *before; /* power, [2^(BEFORE_LOG2_MAX - 1) + 1] */
    size_t before_bins;
    double before_norm; /* (sum of the weights / 2)^2 */
};

struct spectrum *spectrum_create(void)
{
    struct spectrum *spectrum = calloc(1, sizeof *spectrum);
    if (spectrum == NULL)
        return NULL;
    size_t size = (size_t)1 << SPECTRUM_LOG2_MAX;
    spectrum->in = fftwf_alloc_real(size);
    spectrum->out = fftwf_alloc_complex(size / 2 + 1);
    spectrum->power = fftwf_alloc_real(size / 2 + 1);
    spectrum->before = fftwf_alloc_real(((size_t)1 << (BEFORE_LOG2_MAX - 1)) + 1);
    bool is_made = spectrum->before != NULL && spectrum->in != NULL && spectrum->out != NULL &&
                   spectrum->power != NULL;
    for (int i = SPECTRUM_LOG2_MIN; is_made && i <= SPECTRUM_LOG2_MAX; i++) {
        spectrum->plans[i] =
            fftwf_plan_dft_r2c_1d(1 << i, spectrum->in, spectrum->out, FFTW_ESTIMATE);
        is_made = spectrum->plans[i] != NULL;
    }
    if (!is_made) {
        spectrum_destroy(spectrum);
        return NULL;
    }
    return spectrum;
}

void spectrum_destroy(struct spectrum *spectrum)
{
    if (spectrum == NULL)
        return;
    for (int i = SPECTRUM_LOG2_MIN; i <= SPECTRUM_LOG2_MAX; i++) {
        if (spectrum->plans[i] != NULL)
            fftwf_destroy_plan(spectrum->plans[i]);
    }
    fftwf_free(spectrum->in);
    fftwf_free(spectrum->out);
    fftwf_free(spectrum->power);
    fftwf_free(spectrum->before);
    free(spectrum);
}

static int log2_up(size_t count)
{
    int log2 = SPECTRUM_LOG2_MIN;
    while (log2 < SPECTRUM_LOG2_MAX && ((size_t)1 << log2) < count)
        log2++;
    return log2;
}

double noise_density(const struct noise *noise, double w)
{
    double x = w / PI * (double)noise->bins;
    if (!(x > 0))
        return noise->density[0];
    size_t i = (size_t)x;
    if (i >= noise->bins)
        return noise->density[noise->bins];
    double part = x - (double)i;
    return noise->density[i] * (1 - part) + noise->density[i + 1] * part;
}

/* Hann window over `count` samples into the transform buffer, padded to 2^log2; returns the sum of
 * its squares. */
static double put_hann(struct spectrum *spectrum, const float *y, size_t count, int log2)
{
    double complex turn = cexp(J * 2 * PI / (double)count), at = 1;
    double sum = 0;
    for (size_t i = 0; i < count; i++) {
        double w = 0.5 - 0.5 * creal(at);
        spectrum->in[i] = (float)((double)y[i] * w);
        sum += w * w;
        at *= turn;
    }
    memset(spectrum->in + count, 0, (((size_t)1 << log2) - count) * sizeof *spectrum->in);
    return sum;
}

static double power_at(const struct spectrum *spectrum, size_t i)
{
    double re = (double)crealf(spectrum->out[i]), im = (double)cimagf(spectrum->out[i]);
    return re * re + im * im;
}

/* Mean over a few bins on both sides, more of them higher up: the density of a room changes in
 * proportion to the frequency, and the fit's uncertainties want a quiet estimate. */
static void smooth(const double *raw, size_t bins, double *out)
{
    double sums[NOISE_BINS_MAX + 2];
    sums[0] = 0;
    for (size_t i = 0; i <= bins; i++)
        sums[i + 1] = sums[i] + raw[i];
    for (size_t i = 0; i <= bins; i++) {
        size_t reach = 2 + i / 8;
        if (reach > 64)
            reach = 64;
        size_t from = i > reach ? i - reach : 0, to = i + reach < bins ? i + reach : bins;
        if (from == 0 && i > 0)
            from = 1; /* bin 0 holds the offset */
        out[i] = (sums[to + 1] - sums[from]) / (double)(to + 1 - from);
    }
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Lower quartile of the surroundings, which the lines of a ring do not lift. For a mean of K
 * exponentials it lies about 0.67 / sqrt(K) of the mean below it. */
static void smooth_between_lines(const double *raw, size_t bins, size_t frames, double *out)
{
    double factor = 1 / fmax(0.3, 1 - 0.67 / sqrt((double)frames));
    for (size_t i = 0; i <= bins; i++) {
        double near[49];
        size_t n = 0;
        size_t from = i > 24 ? i - 24 : 1, to = i + 24 < bins ? i + 24 : bins;
        for (size_t k = from; k <= to; k++)
            near[n++] = raw[k];
        qsort(near, n, sizeof *near, compare_doubles);
        out[i] = near[n / 4] * factor;
    }
}

void spectrum_measure_noise(struct spectrum *spectrum, const float *y, size_t count, double least,
                            enum noise_kind kind, struct noise *out_noise)
{
    int log2 = SPECTRUM_LOG2_MIN;
    while (((size_t)1 << (log2 + 1)) <= NOISE_BINS_MAX * 2 && ((size_t)4 << log2) <= count)
        log2++;
    size_t frame = (size_t)1 << log2, bins = frame / 2;
    double raw[NOISE_BINS_MAX + 1] = {0};
    size_t frames = 0;
    for (size_t at = 0; at + frame <= count; at += frame / 2, frames++) {
        double norm = put_hann(spectrum, y + at, frame, log2);
        fftwf_execute_dft_r2c(spectrum->plans[log2], spectrum->in, spectrum->out);
        for (size_t i = 0; i <= bins; i++)
            raw[i] += power_at(spectrum, i) / norm;
    }
    out_noise->bins = bins;
    double sum = 0;
    for (size_t i = 0; i <= bins; i++) {
        raw[i] = frames > 0 ? raw[i] / (double)frames : 0;
        sum += raw[i];
    }
    out_noise->is_measured = frames > 0 && sum > 0;
    if (kind == NOISE_BETWEEN_LINES && frames > 0)
        smooth_between_lines(raw, bins, frames, out_noise->density);
    else
        smooth(raw, bins, out_noise->density);
    double total = 0;
    out_noise->lowest = INFINITY;
    for (size_t i = 0; i <= bins; i++) {
        out_noise->density[i] = fmax(out_noise->density[i], least);
        out_noise->lowest = fmin(out_noise->lowest, out_noise->density[i]);
        total += out_noise->density[i];
    }
    out_noise->variance = total / (double)(bins + 1);
}

static int compare_floats(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* Mean power of the noise in each stretch of LEVEL_BINS bins, by the lower quartile, which lines do
 * not lift: the first quartile of an exponential distribution is 0.2877 of its mean. */
static void measure_levels(struct spectrum *spectrum, size_t bins)
{
    for (size_t at = 0; at * LEVEL_BINS < bins; at++) {
        float near[LEVEL_BINS];
        size_t from = at * LEVEL_BINS, n = 0;
        for (size_t i = from; i < from + LEVEL_BINS && i <= bins; i++)
            if (i > 0)
                near[n++] = spectrum->power[i];
        qsort(near, n, sizeof *near, compare_floats);
        spectrum->levels[at] = near[n / 4] / 0.2877f;
    }
}

static double local_level(const struct spectrum *spectrum, size_t i, size_t bins)
{
    size_t at = i / LEVEL_BINS, last = (bins - 1) / LEVEL_BINS;
    size_t other = i % LEVEL_BINS < LEVEL_BINS / 2 ? (at > 0 ? at - 1 : at) : at + 1;
    other = other > last ? last : other;
    at = at > last ? last : at;
    return 0.5 * ((double)spectrum->levels[at] + (double)spectrum->levels[other]);
}

struct peak {
    size_t bin;
    double statistic;
};

/* Keeps the PEAKS_A_GRID strongest, sorted. */
static void keep_peak(struct peak *peaks, unsigned *count, unsigned max, struct peak peak)
{
    unsigned at = *count;
    if (at == max) {
        if (peaks[max - 1].statistic >= peak.statistic)
            return;
        at = max - 1;
    } else {
        (*count)++;
    }
    for (; at > 0 && peaks[at - 1].statistic < peak.statistic; at--)
        peaks[at] = peaks[at - 1];
    peaks[at] = peak;
}

void spectrum_remember(struct spectrum *spectrum, const float *y, size_t count)
{
    int log2 = log2_up(count);
    log2 = log2 > BEFORE_LOG2_MAX ? BEFORE_LOG2_MAX : log2;
    spectrum->before_bins = 0;
    if (count > (size_t)1 << log2)
        count = (size_t)1 << log2;
    if (count < 64)
        return;
    put_hann(spectrum, y, count, log2);
    fftwf_execute_dft_r2c(spectrum->plans[log2], spectrum->in, spectrum->out);
    spectrum->before_bins = (size_t)1 << (log2 - 1);
    for (size_t i = 0; i <= spectrum->before_bins; i++)
        spectrum->before[i] = (float)power_at(spectrum, i);
    spectrum->before_norm = (double)count * (double)count / 16;
}

double spectrum_amplitude_before(const struct spectrum *spectrum, double w)
{
    size_t bins = spectrum->before_bins;
    size_t i = (size_t)(w / PI * (double)bins);
    if (bins == 0 || i + 1 > bins)
        return 0;
    double power = fmax((double)spectrum->before[i], (double)spectrum->before[i + 1]);
    return sqrt(power / spectrum->before_norm);
}

unsigned spectrum_find_lines(struct spectrum *spectrum, const float *y, size_t count, double w_low,
                             double w_high, unsigned max, double *out_w)
{
    max = max < POLES_MAX ? max : POLES_MAX;
    int log2 = log2_up(count);
    if (count > (size_t)1 << log2)
        count = (size_t)1 << log2;
    if (count < 64 || max == 0)
        return 0;
    size_t bins = (size_t)1 << (log2 - 1);
    put_hann(spectrum, y, count, log2);
    fftwf_execute_dft_r2c(spectrum->plans[log2], spectrum->in, spectrum->out);
    for (size_t i = 0; i <= bins; i++)
        spectrum->power[i] = (float)power_at(spectrum, i);
    measure_levels(spectrum, bins);
    size_t from = (size_t)fmax(2, ceil(w_low / PI * (double)bins));
    size_t to = (size_t)fmin((double)bins - 2, w_high / PI * (double)bins);
    struct peak lines[POLES_MAX];
    unsigned found = 0;
    const float *power = spectrum->power;
    for (size_t i = from; i <= to; i++) {
        if (power[i] <= power[i - 1] || power[i] < power[i + 1])
            continue;
        double p = (double)power[i];
        if (found == max && lines[max - 1].statistic >= p)
            continue;
        /* In noise a bin exceeds 20 times the mean once in 5e8; most of that margin goes to the
         * scatter of the level itself. */
        if (p > 20 * local_level(spectrum, i, bins))
            keep_peak(lines, &found, max, (struct peak){i, p});
    }
    for (unsigned k = 0; k < found; k++) {
        size_t i = lines[k].bin;
        double l = sqrt((double)power[i - 1]), r = sqrt((double)power[i + 1]);
        double m = sqrt((double)power[i]);
        double shift = (r - l) / (4 * m - 2 * l - 2 * r + 1e-30);
        shift = fmin(fmax(shift, -0.5), 0.5);
        out_w[k] = ((double)i + shift) * PI / (double)bins;
    }
    return found;
}

/* What one grid's transform needs to turn a bin into a pole. */
struct grid {
    size_t length, count;
    double decay; /* per sample */
    double norm;  /* sum of the squared weights */
};

static void transform_weighted(struct spectrum *spectrum, const float *y, int log2,
                               struct grid *grid)
{
    double ratio = exp(-grid->decay), weight = 1;
    size_t count = grid->count;
    float *restrict in = spectrum->in;
    /* Eight running weights: one chain of products would be the slowest part of the search. */
    float lane[8], step = (float)pow(ratio, 8);
    for (int i = 0; i < 8; i++)
        lane[i] = (float)pow(ratio, i);
    size_t whole = count / 8 * 8;
    for (size_t at = 0; at < whole; at += 8) {
        if (at % 1024 == 0) {
            weight = exp(-grid->decay * (double)at);
            for (int i = 0; i < 8; i++)
                lane[i] = (float)(weight * pow(ratio, i));
        }
        for (int i = 0; i < 8; i++) {
            in[at + (size_t)i] = y[at + (size_t)i] * lane[i];
            lane[i] *= step;
        }
    }
    for (size_t i = whole; i < count; i++)
        in[i] = (float)((double)y[i] * exp(-grid->decay * (double)i));
    memset(in + count, 0, (grid->length - count) * sizeof *in);
    double square = ratio * ratio;
    grid->norm = (1 - pow(square, (double)count)) / (1 - square);
    fftwf_execute_dft_r2c(spectrum->plans[log2], spectrum->in, spectrum->out);
}

/* Two neighbouring bins of one damped exponential obey X1 (1 - z e1) = X2 (1 - z e2) exactly, when
 * the record fills the transform: z follows. */
static bool pole_from_bins(const struct spectrum *spectrum, const struct grid *grid, size_t bin,
                           struct candidate *out)
{
    size_t other = power_at(spectrum, bin - 1) > power_at(spectrum, bin + 1) ? bin - 1 : bin + 1;
    double unit = 2 * PI / (double)grid->length;
    double complex x1 = (double complex)spectrum->out[bin];
    double complex x2 = (double complex)spectrum->out[other];
    double complex e1 = cexp(-J * unit * (double)bin), e2 = cexp(-J * unit * (double)other);
    double complex bottom = x1 * e1 - x2 * e2;
    double w = unit * (double)bin, a = 0;
    if (cabs(bottom) > 0) {
        double complex z = (x1 - x2) / bottom;
        if (cabs(z) > 0) {
            double complex q = clog(z);
            a = -creal(q) - grid->decay;
            if (fabs(cimag(q) - w) < 1.5 * unit)
                w = cimag(q);
        }
    }
    a = fmin(fmax(a, 0.1 * grid->decay), 6 * grid->decay);
    out->p = -a + J * w;
    double complex q = out->p - grid->decay;
    double complex z = cexp(q);
    double complex top = 1 - cexp(q * (double)grid->count);
    out->c = cabs(top) > 0 ? 2 * x1 * (1 - z * e1) / top : 0;
    return w > 0 && w < PI;
}

/* Energy that a pole puts into a bin of a grid. */
static double skirt(const struct candidate *candidate, const struct grid *grid, size_t bin)
{
    double w = 2 * PI / (double)grid->length * (double)bin;
    double complex q = candidate->p - grid->decay;
    double complex top = 1 - cexp(q * (double)grid->count);
    double complex here = candidate->c / 2 * top / (1 - cexp(q - J * w));
    double complex far = conj(candidate->c / 2 * top) / (1 - cexp(conj(q) - J * w));
    double complex sum = here + far;
    return creal(sum) * creal(sum) + cimag(sum) * cimag(sum);
}

static void scan_grid(struct spectrum *spectrum, const struct grid *grid, const struct noise *noise,
                      double w_low, double w_high, double threshold, struct peak *peaks,
                      unsigned *peak_count)
{
    size_t bins = grid->length / 2;
    double unit = PI / (double)bins;
    size_t from = (size_t)fmax(1, ceil(w_low / unit));
    size_t to = (size_t)fmin((double)bins - 1, w_high / unit);
    double least = threshold * grid->norm, lowest = least * noise->lowest;
    double before = power_at(spectrum, from - 1), here = power_at(spectrum, from);
    for (size_t i = from; i <= to; i++) {
        double after = power_at(spectrum, i + 1);
        if (here > lowest && here > before && here >= after) {
            double density = noise_density(noise, (double)i * unit);
            if (here > least * density)
                keep_peak(peaks, peak_count, PEAKS_A_GRID,
                          (struct peak){i, here / (density * grid->norm)});
        }
        before = here;
        here = after;
    }
}

static void keep_candidate(struct candidate *kept, unsigned *count, struct candidate candidate)
{
    /* The same line on another grid: the better match wins. */
    double w = cimag(candidate.p);
    for (unsigned i = 0; i < *count; i++) {
        double width = fmax(-creal(kept[i].p), -creal(candidate.p));
        if (fabs(cimag(kept[i].p) - w) < 3 * width) {
            if (kept[i].statistic < candidate.statistic)
                kept[i] = candidate;
            return;
        }
    }
    unsigned at = *count;
    if (at == CANDIDATES_MAX) {
        if (kept[at - 1].statistic >= candidate.statistic)
            return;
        at--;
    } else {
        (*count)++;
    }
    for (; at > 0 && kept[at - 1].statistic < candidate.statistic; at--)
        kept[at] = kept[at - 1];
    kept[at] = candidate;
}

unsigned spectrum_search(struct spectrum *spectrum, const float *y, size_t count,
                         const struct noise *noise, double w_low, double w_high, double threshold,
                         struct candidate *out_candidates)
{
    struct candidate kept[CANDIDATES_MAX];
    unsigned kept_count = 0;
    int last = log2_up(count < noise->search_count ? count : noise->search_count);
    for (int log2 = last; log2 >= SPECTRUM_LOG2_MIN; log2--) {
        struct grid grid = {.length = (size_t)1 << log2};
        grid.count = count < grid.length ? count : grid.length;
        grid.decay = GRID_DECAY / (double)grid.length;
        transform_weighted(spectrum, y, log2, &grid);
        struct peak peaks[PEAKS_A_GRID];
        unsigned peak_count = 0;
        scan_grid(spectrum, &grid, noise, w_low, w_high, threshold, peaks, &peak_count);
        struct candidate here[PEAKS_A_GRID];
        unsigned here_count = 0;
        for (unsigned i = 0; i < peak_count; i++) {
            double tail = 0;
            for (unsigned k = 0; k < here_count; k++)
                tail += skirt(&here[k], &grid, peaks[i].bin);
            if (power_at(spectrum, peaks[i].bin) < 10 * tail)
                continue;
            struct candidate candidate = {.statistic = peaks[i].statistic};
            if (pole_from_bins(spectrum, &grid, peaks[i].bin, &candidate))
                here[here_count++] = candidate;
        }
        for (unsigned i = 0; i < here_count; i++)
            keep_candidate(kept, &kept_count, here[i]);
    }
    memcpy(out_candidates, kept, kept_count * sizeof *kept);
    return kept_count;
}
