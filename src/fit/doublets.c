/* Doublets: two modes closer than a few line widths look like one to the search. Whether a pole
 * wants to be two is seen in the residual, by a score test; then several starts are tried. */
#include "fit/state.h"

#include <math.h>
#include <string.h>

/* In noise the score is Exp(1): exp(-7) is one mode in a thousand that is looked at in vain. */
#define SCORE_LEAST 7.0
/* What a pair may still leave, beside its stronger half: a part is never quite the model. */
#define LEFT_SHARE 0.01
#define SPLITS_MAX 4

/* To first order, what one pole misses of two is n^2 exp(p n). Among functions that the fit has
 * left nothing of (exp(p n), n exp(p n)) that is the second Laguerre function of x = 2 a n, (1 - 2
 * x + x^2/2) exp(-x/2): its share of the residual, as energy over density. */
static double doublet_score(struct fit *fit, unsigned k)
{
    struct segment *segment = fit->segment;
    const struct pole *pole = &segment->poles[k];
    double a = -creal(pole->p);
    size_t length = pole_length(pole, segment->frame_count);
    struct moments moments = {.m = (double complex(*)[MOMENT_ORDERS])segment->spare_moments};
    size_t block = moments_block_for(length);
    moments_gather(fit->workspace->residual, length, pole->p, block, segment->table, &moments);
    double complex sum = 0, step = cexp(pole->p * (double)block);
    double complex turn = cexp(pole->p * ((double)block - 1) / 2);
    for (size_t j = 0; j < moments.block_count; j++) {
        double n = (double)(j * block) + ((double)block - 1) / 2, b = (double)block;
        const double complex *m = moments.m[j];
        double complex n1 = n * m[0] + b * m[1];
        double complex n2 = n * n * m[0] + 2 * n * b * m[1] + b * b * m[2];
        sum += turn * (m[0] - 4 * a * n1 + 2 * a * a * n2);
        turn *= step;
    }
    double norm = (1 - exp(-2 * a * (double)segment->frame_count)) / (2 * a);
    double density = noise_density(&fit->plain, cimag(pole->p)) * fit->misfit;
    return (creal(sum) * creal(sum) + cimag(sum) * cimag(sum)) / (density * norm);
}

/* Tries to split pole k in several ways; keeps the best when it gains enough. */
static bool try_split(struct fit *fit, unsigned k)
{
    /* By how much the two differ in frequency and decay, in units of the decay. */
    static const double starts[][2] = {{0.5, 0}, {0.15, 0.4}, {0.15, -0.4},
                                       {1.5, 0}, {0.3, 0.1},  {0.3, -0.1}};
    struct segment *segment = fit->segment;
    struct pole before[POLES_MAX], best[POLES_MAX];
    unsigned count = segment->pole_count;
    double explained = segment->explained, best_explained = explained;
    if (count == POLES_MAX)
        return false;
    memcpy(before, segment->poles, sizeof before);
    for (size_t i = 0; i < sizeof starts / sizeof starts[0]; i++) {
        segment_restore(segment, before, count);
        double a = -creal(before[k].p);
        double complex half = (starts[i][1] + J * starts[i][0]) * a / 2;
        if (!segment_add_pole(segment, POLE_RING, before[k].p + half))
            continue;
        segment->poles[k].p = before[k].p - half;
        if (refine_poles(segment, 25) && segment->explained > best_explained) {
            best_explained = segment->explained;
            memcpy(best, segment->poles, sizeof best);
        }
    }
    double density = noise_density(&fit->plain, cimag(before[k].p)) * fit->misfit;
    double gain = (best_explained - explained) / (2 * density);
    if (gain < log((double)segment->frame_count) + 8) {
        segment_restore(segment, before, count);
        return false;
    }
    segment_restore(segment, best, count + 1);
    return true;
}

/* Before a mode is split: is it the input's AC coupling that it lacks? A real pole is simpler than
 * a second mode. */
static bool try_coupling(struct fit *fit, unsigned wanting)
{
    static const double corners_hz[] = {1, 5, 20};
    struct segment *segment = fit->segment;
    struct pole before[POLES_MAX], best[POLES_MAX];
    unsigned count = segment->pole_count;
    double explained = segment->explained, best_explained = explained;
    for (unsigned k = 0; k < count; k++) {
        if (segment->poles[k].kind == POLE_REAL)
            return false;
    }
    memcpy(before, segment->poles, sizeof before);
    for (size_t i = 0; i < sizeof corners_hz / sizeof corners_hz[0]; i++) {
        segment_restore(segment, before, count);
        double a = 2 * WANE_PI * corners_hz[i] / fit->strike->rate_hz;
        if (segment_add_pole(segment, POLE_REAL, -a) && refine_poles(segment, 25) &&
            segment->explained > best_explained) {
            best_explained = segment->explained;
            memcpy(best, segment->poles, sizeof best);
        }
    }
    double density = noise_density(&fit->plain, fit->w_low) * fit->misfit;
    double gain = (best_explained - explained) / (2 * density);
    bool is_needed = gain > log((double)segment->frame_count) + 8;
    if (is_needed) {
        segment_restore(segment, best, count + 1);
        refine_amplitudes(segment);
        candidates_residual(fit);
        is_needed = doublet_score(fit, wanting) < SCORE_LEAST;
    }
    if (!is_needed) {
        segment_restore(segment, before, count);
        refine_amplitudes(segment);
    }
    return is_needed;
}

/* Is one of the pair only what is left of the other's misfit, or of a decay that is no exponential?
 * Two rates at one frequency are the mark of the latter. */
static bool is_real_pair(const struct pole *a, const struct pole *b)
{
    double size_a = cabs(a->c), size_b = cabs(b->c);
    double least = fmin(-creal(a->p), -creal(b->p)), most = fmax(-creal(a->p), -creal(b->p));
    double split = fabs(cimag(a->p - b->p));
    double share = fmin(size_a, size_b) / fmax(size_a, size_b);
    return share > 0.02 && split > 0.2 * least && (split > 0.3 * most || most < 2 * least);
}

/* Which ring pole's residual asks most for a second one; -1 when none does. */
static int find_wanting(struct fit *fit, const bool *is_done, double least)
{
    struct segment *segment = fit->segment;
    int wanting = -1;
    candidates_residual(fit);
    for (unsigned k = 0; k < segment->pole_count; k++) {
        if (segment->poles[k].kind != POLE_RING || segment->poles[k].is_half || is_done[k])
            continue;
        double score = doublet_score(fit, k);
        if (score > least) {
            least = score;
            wanting = (int)k;
        }
    }
    return wanting;
}

/* Is there still a line near the pair? */
static bool has_line_beside(struct fit *fit, unsigned a, unsigned b)
{
    const struct segment *segment = fit->segment;
    struct candidate candidates[CANDIDATES_MAX];
    double reach = 0, size = fmax(cabs(segment->poles[a].c), cabs(segment->poles[b].c));
    double w_a = cimag(segment->poles[a].p), w_b = cimag(segment->poles[b].p);
    reach = fmax(-creal(segment->poles[a].p), -creal(segment->poles[b].p)) * 10;
    unsigned found =
        spectrum_search(fit->workspace->spectrum, fit->workspace->residual, segment->frame_count,
                        &fit->noise, fmax(fit->w_low, fmin(w_a, w_b) - reach),
                        fmin(fit->w_high, fmax(w_a, w_b) + reach), 25, candidates);
    for (unsigned i = 0; i < found; i++) {
        if (cabs(candidates[i].c) > LEFT_SHARE * size)
            return true;
    }
    return false;
}

/* After a split both halves must leave nothing: else the pole is bent, not double. */
static bool is_settled_pair(struct fit *fit, unsigned a, unsigned b)
{
    struct segment *segment = fit->segment;
    if (!is_real_pair(&segment->poles[a], &segment->poles[b]))
        return false;
    candidates_residual(fit);
    return !has_line_beside(fit, a, b);
}

/* Does one half of the pair want to be two again, by more than a real part's misfit? Then the three
 * are no modes but one that bends. */
static bool is_crowd(struct fit *fit, unsigned a, unsigned b)
{
    struct segment *segment = fit->segment;
    struct pole before[POLES_MAX];
    unsigned count = segment->pole_count;
    memcpy(before, segment->poles, sizeof before);
    candidates_residual(fit);
    double score_a = doublet_score(fit, a), score_b = doublet_score(fit, b);
    bool is_third = fmax(score_a, score_b) > 25 && try_split(fit, score_a > score_b ? a : b);
    if (is_third) {
        double size = fmax(cabs(before[a].c), cabs(before[b].c));
        double third = fmin(fmin(cabs(segment->poles[a].c), cabs(segment->poles[b].c)),
                            cabs(segment->poles[count].c));
        is_third = third > 0.02 * size;
    }
    segment_restore(segment, before, count);
    refine_amplitudes(segment);
    return is_third;
}

void doublets_resolve(struct fit *fit)
{
    struct segment *segment = fit->segment;
    bool is_done[POLES_MAX] = {false};
    fit->unresolved_w = 0;
    memset(fit->is_curved, 0, sizeof fit->is_curved);
    for (int split = 0; split < SPLITS_MAX && segment_may_work(segment, 0.75); split++) {
        int wanting = find_wanting(fit, is_done, SCORE_LEAST);
        if (wanting < 0)
            return;
        if (split == 0 && try_coupling(fit, (unsigned)wanting))
            continue;
        struct pole before[POLES_MAX];
        unsigned count = segment->pole_count, one = (unsigned)wanting;
        memcpy(before, segment->poles, sizeof before);
        bool is_split = try_split(fit, one);
        is_done[one] = true;
        if (is_split && is_settled_pair(fit, one, count) && !is_crowd(fit, one, count)) {
            segment->poles[one].is_half = segment->poles[count].is_half = true;
            continue;
        }
        if (!is_split)
            fit->unresolved_w = cimag(before[wanting].p);
        segment_restore(segment, before, count);
        refine_amplitudes(segment);
        fit->is_curved[wanting] = true;
    }
}
