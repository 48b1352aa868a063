/* Breaks: a second blow, or frames lost without a word. Both leave a ring whose complex amplitude
 * jumps: the same poles on both sides, other amplitudes. */
#include "fit/matrix.h"
#include "fit/state.h"

#include <math.h>
#ifdef FIT_DEBUG
#include <stdio.h>
#endif
#include <string.h>

#define BLOCK_S      0.0025
#define LINES_MAX    5
#define CONTACT_S    0.004 /* a break nearer to the onset is the blow's own end */
#define SUSPECT      0.05  /* of a block's energy unexplained: something happened there */
#define GAIN_LEAST   0.05  /* share of the energy that two halves must explain beyond one whole */
#define STEADY_RATIO 0.2   /* amplitudes of both sides alike within this: nothing hit the part */

struct lines {
    unsigned count;
    double complex p[LINES_MAX];
    double complex c[LINES_MAX]; /* at the segment's first sample */
};

/* The strongest poles that live longer than a blow. */
static void choose_lines(const struct fit *fit, struct lines *lines)
{
    const struct segment *segment = fit->segment;
    bool is_taken[POLES_MAX] = {false};
    double strongest = 0;
    lines->count = 0;
    while (lines->count < LINES_MAX) {
        double best = 0;
        int at = -1;
        for (unsigned k = 0; k < segment->pole_count; k++) {
            const struct pole *pole = &segment->poles[k];
            double a = -creal(pole->p);
            double energy = creal(pole->c * conj(pole->c)) / fmax(a, 1e-9);
            bool is_quick = a * 0.02 * fit->strike->rate_hz > 1;
            if (is_taken[k] || pole->kind != POLE_RING || (is_quick && lines->count > 0) ||
                energy <= best)
                continue;
            best = energy;
            at = (int)k;
        }
        if (at < 0 || best < 0.003 * strongest)
            return;
        strongest = fmax(strongest, best);
        is_taken[at] = true;
        lines->c[lines->count] = segment->poles[at].c;
        lines->p[lines->count++] = segment->poles[at].p;
    }
}

/* Energy of y [from, to) that the lines explain with free amplitudes (at `from`). */
static double explain(const float *y, size_t from, size_t to, const struct lines *lines,
                      double complex *out_c)
{
    double matrix[4 * LINES_MAX * LINES_MAX] = {0}, scale[2 * LINES_MAX], x[2 * LINES_MAX] = {0};
    double b[2 * LINES_MAX], ridge[2 * LINES_MAX] = {0};
    unsigned n = 2 * lines->count;
    for (unsigned k = 0; k < lines->count; k++) {
        double complex sum = 0, z = 1, step = cexp(lines->p[k]);
        for (size_t i = from; i < to; i++) {
            sum += (double)y[i] * z;
            z *= step;
        }
        x[2 * k] = creal(sum);
        x[2 * k + 1] = -cimag(sum);
        ridge[2 * k] = ridge[2 * k + 1] = 1e-6;
        for (unsigned l = 0; l <= k; l++) {
            double complex minus[3], plus[3];
            geometric_sums(lines->p[k] + conj(lines->p[l]), to - from, minus);
            geometric_sums(lines->p[k] + lines->p[l], to - from, plus);
            double block[2][2] = {
                {0.5 * creal(minus[0] + plus[0]), 0.5 * cimag(minus[0] - plus[0])},
                {-0.5 * cimag(minus[0] + plus[0]), 0.5 * creal(minus[0] - plus[0])}};
            for (unsigned i = 0; i < 2; i++)
                for (unsigned j = 0; j < 2; j++) {
                    matrix[(2 * k + i) * n + 2 * l + j] = block[i][j];
                    matrix[(2 * l + j) * n + 2 * k + i] = block[i][j];
                }
        }
    }
    memcpy(b, x, sizeof b);
    if (!matrix_factor(matrix, n, scale, ridge))
        return 0;
    matrix_solve(matrix, n, scale, x);
    double energy = 0;
    for (unsigned i = 0; i < n; i++)
        energy += x[i] * b[i];
    for (unsigned k = 0; k < lines->count; k++)
        out_c[k] = x[2 * k] + J * x[2 * k + 1];
    return energy;
}

static double complex at_break(double complex c, double complex p, size_t frames)
{
    return c * cexp(p * (double)frames);
}

static double energy_of(const float *y, size_t from, size_t to)
{
    double sum = 0;
    for (size_t n = from; n < to; n++)
        sum += (double)y[n] * (double)y[n];
    return sum;
}

/* Does some block of the fitted span hold much that the model does not? Fills the block's start. */
static bool find_suspect(struct fit *fit, size_t block, size_t *out_first, size_t *out_last)
{
    candidates_residual(fit);
    const float *r = fit->workspace->residual;
    const float *y = fit->segment->y;
    double noise = fit->noise.variance * (double)block;
    bool is_suspect = false;
    for (size_t at = 0; at + block <= fit->segment->frame_count; at += block) {
        double left = energy_of(r, at, at + block), whole = energy_of(y, at, at + block);
        if (left < 10 * noise || left < SUSPECT * whole)
            continue;
        if (!is_suspect)
            *out_first = at + fit->begin;
        *out_last = at + block + fit->begin;
        is_suspect = true;
    }
    return is_suspect;
}

static void classify(struct fit *fit, const struct lines *lines, size_t from, size_t at,
                     const double complex *before, const double complex *after)
{
    double rate = fit->strike->rate_hz;
    bool is_steady = true;
    for (unsigned k = 0; k < lines->count && k < 2; k++) {
        double ratio = cabs(after[k]) / cabs(at_break(before[k], lines->p[k], at - from));
        is_steady = is_steady && fabs(ratio - 1) < STEADY_RATIO;
    }
    double wait_s = ((double)at - (double)fit->blow) / rate;
    if (wait_s > 0.16 || (is_steady && wait_s > 0.02)) {
        fit->break_kind = BREAK_LOST;
        /* How many: the time by which the first line's phase jumped, whole periods unknown. */
        double complex turn = after[0] / at_break(before[0], lines->p[0], at - from);
        double w = cimag(lines->p[0]);
        double phase = carg(turn);
        fit->lost_frames = round((phase < 0 ? phase + 2 * WANE_PI : phase) / w);
    } else {
        fit->break_kind = BREAK_HIT;
    }
    fit->break_at = at;
}

/* The blow that takes longer than a blow: the same ring, with another amplitude, was there before.
 */
static void look_before_begin(struct fit *fit, const struct lines *lines)
{
    double rate = fit->strike->rate_hz;
    size_t from = fit->blow + (size_t)(0.001 * rate), to = fit->begin;
    size_t margin = (size_t)(0.0005 * rate);
    if (fit->is_clean_onset || to < from + 2 * margin + 32 ||
        (double)(to - fit->blow) < CONTACT_S * rate)
        return;
    to -= margin;
    double cycles = cimag(lines->p[0]) * (double)(to - from) / (2 * WANE_PI);
    struct lines few = *lines;
    unsigned bearable = cycles < 2.5 ? 1 : cycles < 5 ? 2 : 3;
    few.count = few.count > bearable ? bearable : few.count;
    double complex c[LINES_MAX];
    double whole = energy_of(fit->workspace->y, from, to);
    double noise = fit->noise.variance * (double)(to - from);
    if (cycles < 1 || whole < 20 * noise ||
        explain(fit->workspace->y, from, to, &few, c) < 0.85 * whole)
        return;
    /* The same blow's ring, only not quite the model, goes on where it was. */
    double complex expected = lines->c[0] * cexp(lines->p[0] * ((double)from - (double)fit->begin));
    if (cabs(c[0] - expected) < 0.2 * cabs(expected))
        return;
    fit->break_kind = BREAK_HIT;
    fit->break_at = fit->begin;
#ifdef FIT_DEBUG
    fprintf(stderr, "BREAK before begin: %zu samples\n", fit->begin - fit->blow);
#endif
}

void breaks_find(struct fit *fit)
{
    struct lines lines;
    fit->break_kind = BREAK_NONE;
    choose_lines(fit, &lines);
    if (lines.count == 0)
        return;
    double rate = fit->strike->rate_hz, a = -creal(lines.p[0]);
    look_before_begin(fit, &lines);
    size_t block = (size_t)(BLOCK_S * rate), first = 0, last = 0;
    if (fit->break_kind != BREAK_NONE || !find_suspect(fit, block, &first, &last))
        return;
    const float *y = fit->workspace->y;
    size_t from = fit->blow + (size_t)(0.0015 * rate);
    size_t to = from + (size_t)(8 / a);
    to = to < fit->end ? to : fit->end;
    double whole = energy_of(y, from, to);
    double complex c[LINES_MAX], before[LINES_MAX], after[LINES_MAX];
    double one = explain(y, from, to, &lines, c), best = one;
    size_t at = 0;
    size_t reach = (size_t)(0.1 * rate);
    size_t start = from + (size_t)(0.0025 * rate);
    size_t stop = last + 2 * block < to ? last + 2 * block : to;
    if (first > reach + start)
        start = first - reach;
    size_t stride = (stop - start) / 200 + 1;
    stride = stride < block ? block : stride;
    for (size_t n = start; n < stop && n + block < to; n += stride) {
        double both = explain(y, from, n, &lines, before) + explain(y, n, to, &lines, after);
        if (both > best) {
            best = both;
            at = n;
        }
    }
    if (at == 0 || best - one < GAIN_LEAST * whole || whole - best > 0.5 * (whole - one))
        return;
#ifdef FIT_DEBUG
    fprintf(stderr, "BREAK at %zu after blow, one %.4g both %.4g whole %.4g first %zu last %zu\n",
            at - fit->blow, one / whole, best / whole, whole, first, last);
#endif
    explain(y, from, at, &lines, before);
    explain(y, at, to, &lines, after);
    classify(fit, &lines, from, at, before, after);
}
