/* Breaks: a second blow, or frames lost without a word. Both leave a ring whose complex amplitude
 * jumps: the same poles on both sides, other amplitudes. */
#include "fit/matrix.h"
#include "fit/state.h"

#include <math.h>
#include <string.h>

#define BLOCK_S      0.0025
#define LINES_MAX    5
#define CONTACT_S    0.0055 /* a break nearer to the onset is the blow's own end */
#define SUSPECT      0.05   /* of a block's energy unexplained: something happened there */
#define JUMP_LEAST   0.2    /* of the lead's amplitude: less is the part's own unsteadiness */
#define STEADY_RATIO 0.2    /* amplitudes of both sides alike within this: nothing hit the part */

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
    double noise = fit->noise.variance / fit->misfit * (double)block;
    bool is_suspect = false;
    /* Before the fitted span, too: its begin may lie just behind a second blow. */
    size_t early = fit->blow + (size_t)(0.002 * fit->strike->rate_hz);
    for (size_t at = early; at + block <= fit->begin; at += block) {
        double whole = energy_of(fit->workspace->y, at, at + block);
        double left = window_left(fit, at, block) * (double)block;
        if (left < 10 * noise || left < SUSPECT * whole)
            continue;
        if (!is_suspect)
            *out_first = at;
        *out_last = at + block;
        is_suspect = true;
    }
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
    /* A gain that moves takes all lines alike and leaves their phases; a hit adds what it adds. */
    bool is_steady = true, is_gain = true;
    double gain_db = 0;
    for (unsigned k = 0; k < lines->count && k < 3; k++) {
        double complex reached = at_break(before[k], lines->p[k], at - from);
        double ratio = cabs(after[k]) / cabs(reached);
        if (k < 2)
            is_steady = is_steady && fabs(ratio - 1) < STEADY_RATIO;
        if (k == 0)
            gain_db = 20 * log10(ratio);
        is_gain = is_gain && ratio < 0.8 && fabs(carg(after[k] / reached)) < 0.2;
    }
    double wait_s = ((double)at - (double)fit->blow) / rate;
    if ((is_gain && (lines->count > 1 || wait_s > 0.16)) || (wait_s > 0.16 && gain_db < -6)) {
        fit->break_kind = BREAK_GAIN;
        fit->gain_db = gain_db;
    } else if (wait_s > 0.16 || (is_steady && wait_s > 0.02)) {
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

/* Energy of y [from, to) that is left when the lines, whose amplitudes hold at `origin`, are taken
 * out. Close lines have amplitudes that mean little each; their sum means much. */
static double left_by(const float *y, size_t from, size_t to, size_t origin,
                      const struct lines *lines)
{
    double left = 0;
    for (size_t n = from; n < to; n++) {
        double offset = (double)n - (double)origin, r = (double)y[n];
        for (unsigned k = 0; k < lines->count; k++)
            r -= creal(lines->c[k] * cexp(lines->p[k] * offset));
        left += r * r;
    }
    return left;
}

/* The strongest lines that lie at least `apart` from each other: closer ones act as one in a span
 * that short. */
static void keep_apart(const struct lines *lines, unsigned most, double apart, struct lines *out)
{
    out->count = 0;
    for (unsigned k = 0; k < lines->count && out->count < most; k++) {
        bool is_apart = true;
        for (unsigned l = 0; l < out->count; l++)
            is_apart = is_apart && fabs(cimag(lines->p[k] - out->p[l])) > apart;
        if (is_apart) {
            out->c[out->count] = lines->c[k];
            out->p[out->count++] = lines->p[k];
        }
    }
}

/* The blow that takes longer than a blow: the same ring, with another amplitude, was there before.
 */
static void look_before_begin(struct fit *fit, const struct lines *lines)
{
    double rate = fit->strike->rate_hz;
    size_t from = fit->blow + (size_t)(0.001 * rate), to = fit->begin;
    size_t margin = (size_t)(0.0005 * rate);
    /* A walk that did not come off its first step ended on the part's misfit, not on a blow. */
    if (fit->is_clean_onset || fit->begin >= fit->first_begin || to < from + 2 * margin + 32 ||
        (double)(to - fit->blow) < CONTACT_S * rate)
        return;
    to -= margin;
    double cycles = cimag(lines->p[0]) * (double)(to - from) / (2 * WANE_PI);
    unsigned bearable = cycles < 2.5 ? 1 : cycles < 5 ? 2 : 3;
    struct lines few;
    keep_apart(lines, bearable, 2 * WANE_PI / (double)(to - from), &few);
    double complex c[LINES_MAX];
    double whole = energy_of(fit->workspace->y, from, to);
    double noise = fit->noise.variance * (double)(to - from);
    double explained = explain(fit->workspace->y, from, to, &few, c);
    if (cycles < 1 || whole < 20 * noise || explained < 0.85 * whole)
        return;
    /* The same blow's ring, only not quite the model, goes on where it was. */
    struct lines next = few;
    size_t beyond = fit->begin + (to - from) < fit->end ? fit->begin + (to - from) : fit->end;
    explain(fit->workspace->y, fit->begin, beyond, &few, next.c);
    double jump = left_by(fit->workspace->y, from, to, fit->begin, &next) - (whole - explained);
    if (jump < JUMP_LEAST * JUMP_LEAST * explained)
        return;
    fit->break_kind = BREAK_HIT;
    fit->break_at = fit->begin;
}

/* The lines' poles and amplitudes on [from, to) alone; amplitudes at `from`. */
static void fit_side(struct fit *fit, size_t from, size_t to, const struct lines *lines,
                     struct lines *out)
{
    struct segment *segment = fit->segment;
    segment_begin(segment, fit->workspace->y + from, to - from);
    for (unsigned k = 0; k < lines->count; k++)
        segment_add_pole(segment, POLE_RING, lines->p[k]);
    *out = *lines;
    if (!refine_poles(segment, 8))
        return;
    for (unsigned k = 0; k < lines->count; k++) {
        out->p[k] = segment->poles[k].p;
        out->c[k] = segment->poles[k].c;
    }
}

/* Where two halves with amplitudes of their own explain most more than one whole does. */
static size_t scan(const float *y, size_t from, size_t to, size_t block, const struct lines *lines)
{
    double complex before[LINES_MAX], after[LINES_MAX];
    double best = explain(y, from, to, lines, before);
    size_t at = 0, stride = (to - from) / 160 + 1;
    stride = stride < block / 2 ? block / 2 : stride;
    for (size_t n = from + block; n + block < to; n += stride) {
        double both = explain(y, from, n, lines, before) + explain(y, n, to, lines, after);
        if (both > best) {
            best = both;
            at = n;
        }
    }
    return at;
}

void breaks_find(struct fit *fit)
{
    struct lines lines, before, after;
    fit->break_kind = BREAK_NONE;
    choose_lines(fit, &lines);
    if (lines.count == 0)
        return;
    double rate = fit->strike->rate_hz;
    look_before_begin(fit, &lines);
    size_t block = (size_t)(BLOCK_S * rate), first = 0, last = 0;
    if (fit->break_kind != BREAK_NONE || !find_suspect(fit, block, &first, &last))
        return;
    const float *y = fit->workspace->y;
    size_t start = fit->blow + (size_t)(0.0015 * rate), reach = (size_t)(0.15 * rate);
    size_t from = first > start + reach ? first - reach : start;
    size_t to = last + reach < fit->end ? last + reach : fit->end;
    size_t at = scan(y, from, to, block, &lines);
    struct segment *segment = fit->segment;
    struct pole poles[POLES_MAX];
    unsigned pole_count = segment->pole_count;
    memcpy(poles, segment->poles, sizeof poles);
    if (at > 0 && (double)(at - fit->blow) >= 0.005 * rate) {
        size_t left = at > from + reach ? at - reach : from;
        size_t right = at + reach < to ? at + reach : to;
        fit_side(fit, left, at, &lines, &before);
        fit_side(fit, at, right, &lines, &after);
        size_t near = at + 2 * block < right ? at + 2 * block : right;
        size_t last_before = at > left + 2 * block ? at - 2 * block : left;
        double own_after = left_by(y, at, near, at, &after);
        double own_before = left_by(y, last_before, at, left, &before);
        double jump = left_by(y, at, near, left, &before) - own_after;
        /* A jump stands clear of what each side leaves by itself: misfit does not. */
        if (jump > JUMP_LEAST * JUMP_LEAST * energy_of(y, at, near) &&
            jump > 3 * (own_after + own_before))
            classify(fit, &before, left, at, before.c, after.c);
    }
    segment_begin(segment, y + fit->begin, fit->end - fit->begin);
    segment_restore(segment, poles, pole_count);
    refine_amplitudes(segment);
}
