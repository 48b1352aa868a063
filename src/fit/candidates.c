/* Finds the modes: greedy search on the residual, all poles refined together after each addition.
 */
#include "fit/matrix.h"
#include "fit/state.h"

#include <math.h>
#include <string.h>

#define ROUNDS_MAX 12
/* A mode closer than this many line widths to a stronger one, and weaker than this share of it, is
 * what is left of the stronger one's own misfit: no real part is exactly the model. */
#define NEAR_WIDTHS  12
#define NEAR_SHARE   0.01
#define CLOSE_WIDTHS 4
#define ENERGY_SHARE 1e-6 /* of the whole: weaker modes do not matter to anyone */
#define A_MAX                                                                                      \
    0.35 /* per sample: a quicker pole is over before a band-limited input has followed it */
#define BLOW_S 0.005 /* the longest contact of a usual tap */

void candidates_residual(struct fit *fit)
{
    const struct segment *segment = fit->segment;
    size_t count = segment->frame_count;
    float *residual = fit->workspace->residual;
    memcpy(residual, segment->y, count * sizeof *residual);
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        moments_subtract(residual, pole_length(pole, count), pole->p, pole->c, segment->table);
    }
}

static double pole_energy(const struct pole *pole, size_t frame_count)
{
    double a = -creal(pole->p), n = (double)frame_count;
    double weight = a * n > 1e-6 ? (1 - exp(-2 * a * n)) / (2 * a) : n;
    return creal(pole->c * conj(pole->c)) / 2 * weight;
}

static bool is_misfit(const struct fit *fit, const struct candidate *candidate)
{
    const struct segment *segment = fit->segment;
    double a = -creal(candidate->p), w = cimag(candidate->p), size = cabs(candidate->c);
    struct pole as_pole = {.p = candidate->p, .c = candidate->c};
    if (pole_energy(&as_pole, segment->frame_count) < ENERGY_SHARE * segment->explained)
        return true;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        if (pole->kind == POLE_REAL)
            continue;
        /* A tone wanders by more than a ring does: mains by its load, a fan by its draught. */
        bool is_tone = pole->kind == POLE_TONE;
        double width = is_tone ? fmax(a, 2 / fit->strike->rate_hz) : fmax(-creal(pole->p), a);
        double share = is_tone ? 0.05 : NEAR_SHARE;
        if (fabs(cimag(pole->p) - w) < NEAR_WIDTHS * 2 * width && size < share * cabs(pole->c))
            return true;
    }
    return false;
}

/* A mode that had died before the fit begins cannot be read: what looks like one is noise. */
static bool is_too_quick(const struct fit *fit, double a)
{
    double wait = (double)fit->begin - fmax(fit->onset, (double)fit->blow);
    return a > A_MAX || a * wait > 5;
}

/* How surely a mode is there: its amplitude against the amplitude's own covariance with all else
 * free, c' V^-1 c / 2, on the scale of a log likelihood. V from the factor that refine_information
 * left; `i` is the index of the pole's first parameter. */
static double presence(const struct fit *fit, const struct parameter *parameters, unsigned n,
                       const double *scale, unsigned i)
{
    const struct segment *segment = fit->segment;
    const struct pole *pole = &segment->poles[parameters[i].pole];
    double column[PARAMETERS_MAX];
    double density = noise_density(&fit->noise, cimag(pole->p));
    matrix_inverse_column(segment->matrix, n, scale, i, column);
    double v00 = column[i] * density, v01 = column[i + 1] * density;
    matrix_inverse_column(segment->matrix, n, scale, i + 1, column);
    double v11 = column[i + 1] * density;
    double re = creal(pole->c), im = cimag(pole->c);
    double det = v00 * v11 - v01 * v01;
    if (!(det > 0))
        return 0;
    return (re * re * v11 - 2 * re * im * v01 + im * im * v00) / (2 * det);
}

/* The mode that is least surely there, or the weakest when they cannot be told apart; -1: none. */
static int find_weakest(struct fit *fit, double *out_presence)
{
    struct segment *segment = fit->segment;
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], least = INFINITY;
    unsigned n = refine_information(segment, parameters, scale);
    int weakest = -1;
    for (unsigned k = 0, i = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        while (n > 0 && i < n && parameters[i].pole < k)
            i++;
        if (pole->kind != POLE_RING)
            continue;
        double energy = pole_energy(pole, segment->frame_count);
        bool is_nothing =
            is_too_quick(fit, -creal(pole->p)) || energy < ENERGY_SHARE * segment->explained;
        double value = n > 0 ? presence(fit, parameters, n, scale, i)
                             : energy / noise_density(&fit->noise, cimag(pole->p)) * 1e-9;
        value = is_nothing ? 0 : value;
        if (value < least) {
            least = value;
            weakest = (int)k;
        }
    }
    *out_presence = least;
    return weakest;
}

static double presence_least(const struct segment *segment)
{
    return log((double)segment->frame_count) + 10;
}

/* Drops modes that are not surely there, one at a time, the rest refined in between. */
static void drop_weak_poles(struct fit *fit)
{
    struct segment *segment = fit->segment;
    for (;;) {
        double least = 0;
        int weakest = find_weakest(fit, &least);
        if (weakest < 0 || least >= presence_least(segment))
            return;
        segment_remove_pole(segment, (unsigned)weakest);
        refine_poles(segment, 30);
    }
}

static unsigned ring_count(const struct segment *segment)
{
    unsigned count = 0;
    for (unsigned k = 0; k < segment->pole_count; k++)
        count += segment->poles[k].kind == POLE_RING;
    return count;
}

static void add_known_poles(struct fit *fit)
{
    const struct strike *strike = fit->strike;
    for (unsigned i = 0; i < fit->tone_count; i++)
        segment_add_pole(fit->segment, POLE_TONE, J * fit->tones_w[i]);
    for (unsigned i = 0; i < strike->carried_count; i++) {
        const struct carried_mode *mode = &strike->carried[i];
        double complex p = (-mode->decay_per_s + J * 2 * WANE_PI * mode->f_hz) / strike->rate_hz;
        if (!segment_add_pole(fit->segment, POLE_RING, p))
            break;
        struct pole *pole = &fit->segment->poles[fit->segment->pole_count - 1];
        pole->is_carried = true;
        pole->tail = mode->amplitude * cexp(J * mode->phase_rad + p * (double)fit->begin);
    }
    if (fit->settings.coupling_hz > 0 &&
        segment_add_pole(fit->segment, POLE_REAL,
                         -2 * WANE_PI * fit->settings.coupling_hz / strike->rate_hz))
        fit->segment->poles[fit->segment->pole_count - 1].is_fixed = true;
    if (fit->segment->pole_count > 0)
        refine_amplitudes(fit->segment);
}

/* Beside a pole that is not settled yet (index `settled` and up) a candidate waits for the next
 * round: the residual there is mostly what that pole still misses. Within a line width or so of a
 * settled one it is the doublet test's matter. */
static bool is_crowded(const struct segment *segment, const struct candidate *candidate,
                       unsigned settled)
{
    double a = -creal(candidate->p), w = cimag(candidate->p);
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *pole = &segment->poles[k];
        if (pole->kind != POLE_RING)
            continue;
        double width = fmax(-creal(pole->p), a);
        double reach = k < settled ? CLOSE_WIDTHS * 2 * width : 30 * width;
        if (fabs(cimag(pole->p) - w) < reach)
            return true;
    }
    return false;
}

static unsigned search_round(struct fit *fit)
{
    struct segment *segment = fit->segment;
    struct candidate candidates[CANDIDATES_MAX];
    candidates_residual(fit);
    double threshold = log((double)segment->frame_count) + 15;
    unsigned found =
        spectrum_search(fit->workspace->spectrum, fit->workspace->residual, segment->frame_count,
                        &fit->noise, fit->w_low, fit->w_high, threshold, candidates);
    struct candidate heavy;
    bool is_real = false;
    if (lowq_search(fit, &heavy, &is_real) && heavy.statistic > threshold &&
        (found == 0 || heavy.statistic > 1.1 * candidates[0].statistic)) {
        if (is_real)
            return segment_add_pole(segment, POLE_REAL, heavy.p) ? 1 : 0;
        candidates[0] = heavy; /* the others may be its skirts: they wait for the next round */
        found = 1;
    }
    unsigned added = 0, before = segment->pole_count;
    for (unsigned i = 0; i < found; i++) {
        if (ring_count(segment) >= fit->settings.modes_max)
            break;
        if (is_crowded(segment, &candidates[i], before) || is_misfit(fit, &candidates[i]) ||
            is_too_quick(fit, -creal(candidates[i].p)))
            continue;
        if (segment_add_pole(segment, POLE_RING, candidates[i].p)) {
            segment->poles[segment->pole_count - 1].c = candidates[i].c;
            added++;
        }
    }
    return added;
}

/* A mode as short as a blow may be the blow. It is believed when a fit begun later, when a third of
 * it is over, finds the same pole again. */
static bool is_found_again(struct fit *fit, unsigned k)
{
    struct segment *segment = fit->segment;
    struct pole kept[POLES_MAX];
    unsigned kept_count = segment->pole_count;
    memcpy(kept, segment->poles, sizeof kept);
    double complex p = segment->poles[k].p;
    size_t later = (size_t)ceil(0.35 / -creal(p));
    bool is_same = false;
    if (later + 64 < segment->frame_count) {
        segment->y += later;
        segment->frame_count -= later;
        memset(segment->has_moments, 0, sizeof segment->has_moments);
        struct parameter parameters[PARAMETERS_MAX];
        double scale[PARAMETERS_MAX], column[PARAMETERS_MAX];
        unsigned n = refine_poles(segment, 12) ? refine_information(segment, parameters, scale) : 0;
        for (unsigned i = 0; i + 1 < n; i++) {
            if (parameters[i].pole != k || parameters[i].what != PARAMETER_A)
                continue;
            double density = noise_density(&fit->noise, cimag(p));
            double complex moved = segment->poles[k].p - p;
            matrix_inverse_column(segment->matrix, n, scale, i, column);
            double u_a = sqrt(density * column[i]);
            matrix_inverse_column(segment->matrix, n, scale, i + 1, column);
            double u_w = sqrt(density * column[i + 1]);
            is_same = fabs(creal(moved)) < 4 * u_a && fabs(cimag(moved)) < 4 * u_w &&
                      u_a < -0.3 * creal(p);
        }
        segment->y -= later;
        segment->frame_count += later;
    }
    segment_restore(segment, kept, kept_count);
    return is_same;
}

static bool drop_blow_poles(struct fit *fit)
{
    struct segment *segment = fit->segment;
    double strongest = 0;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        if (segment->poles[k].kind == POLE_RING)
            strongest = fmax(strongest, pole_energy(&segment->poles[k], segment->frame_count));
    }
    bool has_dropped = false;
    for (unsigned k = segment->pole_count; k-- > 0;) {
        const struct pole *pole = &segment->poles[k];
        bool is_quick = -creal(pole->p) * BLOW_S * fit->strike->rate_hz > 1;
        if (pole->kind != POLE_RING || !is_quick ||
            pole_energy(pole, segment->frame_count) >= strongest || is_found_again(fit, k))
            continue;
        segment_remove_pole(segment, k);
        has_dropped = true;
    }
    return has_dropped;
}

/* A pole far below the lowest frequency is the input's coupling, a real pole: kept as a ring, its
 * amplitude and phase could not be told apart. */
static bool straighten_slow_poles(struct fit *fit)
{
    struct segment *segment = fit->segment;
    bool has_changed = false;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        struct pole *pole = &segment->poles[k];
        if (pole->kind != POLE_RING || cimag(pole->p) > 0.25 * fit->w_low)
            continue;
        pole->kind = POLE_REAL;
        pole->p = creal(pole->p);
        segment->has_moments[k] = false;
        has_changed = true;
    }
    return has_changed;
}

static void search_all(struct fit *fit)
{
    struct segment *segment = fit->segment;
    for (int round = 0; round < ROUNDS_MAX && segment_may_work(segment, 0.5); round++) {
        if (search_round(fit) == 0)
            break;
        if (!refine_poles(segment, 30)) {
            segment_remove_pole(segment, segment->pole_count - 1);
            refine_poles(segment, 30);
        }
        if (straighten_slow_poles(fit))
            refine_poles(segment, 30);
        drop_weak_poles(fit);
    }
}

bool candidates_fit(struct fit *fit)
{
    segment_begin(fit->segment, fit->workspace->y + fit->begin, fit->end - fit->begin);
    add_known_poles(fit);
    search_all(fit);
    doublets_resolve(fit);
    return ring_count(fit->segment) > 0;
}

void candidates_refit(struct fit *fit)
{
    struct segment *segment = fit->segment;
    const float *y = fit->workspace->y + fit->begin;
    double moved = (double)(segment->y - y);
    for (unsigned k = 0; k < segment->pole_count; k++) {
        segment->poles[k].tail *= cexp(-segment->poles[k].p * moved);
        segment->has_moments[k] = false;
    }
    segment->y = y;
    segment->frame_count = fit->end - fit->begin;
    refine_poles(segment, 12);
}

bool candidates_finish(struct fit *fit)
{
    struct segment *segment = fit->segment;
    candidates_refit(fit);
    search_all(fit);
    if (drop_blow_poles(fit)) {
        refine_poles(segment, 30);
        drop_weak_poles(fit);
    }
    refine_amplitudes(segment);
    doublets_resolve(fit);
    return ring_count(segment) > 0;
}
