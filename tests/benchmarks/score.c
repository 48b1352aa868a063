#include "score.h"

#include "families.h"
#include "oracle.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define TWO_PI     (2.0 * WANE_PI)
#define OUTLIER_SD 6.0

static bool push(double **values, size_t *count, size_t *size, double value)
{
    if (*count == *size) {
        size_t grown = *size ? 2 * *size : 256;
        double *moved = realloc(*values, grown * sizeof **values);
        if (!moved)
            return false;
        *values = moved;
        *size = grown;
    }
    (*values)[(*count)++] = value;
    return true;
}

static bool push_error(struct score_errors *errors, double fit, double oracle, double u)
{
    if (errors->count == errors->size) {
        size_t grown = errors->size ? 2 * errors->size : 256;
        double **arrays[] = {&errors->fit, &errors->oracle, &errors->u};
        for (size_t i = 0; i < 3; i++) {
            double *moved = realloc(*arrays[i], grown * sizeof(double));
            if (!moved)
                return false;
            *arrays[i] = moved;
        }
        errors->size = grown;
    }
    errors->fit[errors->count] = fit;
    errors->oracle[errors->count] = oracle;
    errors->u[errors->count++] = u;
    return true;
}

void score_done(struct score *score)
{
    free(score->f.fit);
    free(score->f.oracle);
    free(score->f.u);
    free(score->decay.fit);
    free(score->decay.oracle);
    free(score->decay.u);
    free(score->ms);
}

static double mode_f(const struct element *element, double rate_hz)
{
    return cimag(element->q) * rate_hz / TWO_PI;
}

static double mode_decay(const struct element *element, double rate_hz)
{
    return -creal(element->q) * rate_hz;
}

/* match [truth_count]: index of the read mode, or -1. Nearest pairs first; a pair further apart
 * than one decay rate in the complex plane, or 30 bounds if that is more, is no pair. */
static void match_modes(const struct element *truth, const struct bound *bounds, size_t truth_count,
                        double rate_hz, const struct reading *reading, int *match)
{
    bool taken[READING_MODES_MAX] = {false};
    for (size_t k = 0; k < truth_count; k++)
        match[k] = -1;
    for (;;) {
        double nearest = 1.0;
        size_t best_truth = 0;
        unsigned best_read = 0;
        for (size_t k = 0; k < truth_count; k++) {
            double decay = mode_decay(&truth[k], rate_hz);
            double reach =
                fmax(decay, 30.0 * (bounds[k].decay_sd_per_s + TWO_PI * bounds[k].f_sd_hz));
            for (unsigned i = 0; match[k] < 0 && i < reading->mode_count; i++) {
                double away = hypot(TWO_PI * (reading->modes[i].f_hz - mode_f(&truth[k], rate_hz)),
                                    reading->modes[i].decay_per_s - decay) /
                              reach;
                if (!taken[i] && away < nearest) {
                    nearest = away;
                    best_truth = k;
                    best_read = i;
                }
            }
        }
        if (nearest >= 1.0)
            return;
        match[best_truth] = (int)best_read;
        taken[best_read] = true;
    }
}

static size_t solve_oracle(const struct scene *scene, const struct scene_take *take,
                           const struct element *truth, size_t count, struct element *out)
{
    size_t frames = take->end - take->free_frame;
    double *samples = malloc(frames * sizeof *samples);
    if (!samples)
        return 0;
    for (size_t n = 0; n < frames; n++)
        samples[n] = (double)scene->samples[take->free_frame + n];
    memcpy(out, truth, count * sizeof *out);
    unsigned used = oracle_solve(samples, frames, out, count);
    free(samples);
    return used;
}

/* A doublet whose halves the noise hides: one mode and `unresolved`, or two within 3 u, is honest.
 */
static void score_hidden(struct score *score, const struct scene *scene,
                         const struct element *truth, const struct reading *reading,
                         const int *match)
{
    score->hidden++;
    if (reading->mode_count <= 1) {
        if (reading->verdict != VERDICT_GOOD || reading->mode_count == 0)
            score->hidden_honest++;
        else
            score->hidden_one++;
        return;
    }
    bool honest = true;
    for (unsigned k = 0; k < scene->mode_count; k++) {
        if (match[k] < 0) {
            honest = false;
            continue;
        }
        const struct mode *mode = &reading->modes[match[k]];
        honest = honest &&
                 fabs(mode->f_hz - mode_f(&truth[k], scene->rate_hz)) < 3.0 * mode->f_u_hz &&
                 fabs(mode->decay_per_s - mode_decay(&truth[k], scene->rate_hz)) <
                     3.0 * mode->decay_u_per_s;
    }
    if (honest || reading->verdict == VERDICT_REJECTED ||
        (reading->reasons & (1u << REASON_UNRESOLVED)))
        score->hidden_honest++;
    else
        score->hidden_wrong++;
}

struct report {
    FILE *say;
    unsigned index;
    const struct scene *scene;
    bool is_open;
};

static FILE *say(struct report *report)
{
    if (!report->is_open)
        fprintf(report->say, "  #%u (%s)", report->index, report->scene->note);
    report->is_open = true;
    return report->say;
}

static bool score_mode(struct score *score, const struct element *truth,
                       const struct element *oracle, const struct bound *bound,
                       const struct mode *mode, double rate_hz, struct report *report)
{
    double f_hz = mode_f(truth, rate_hz), decay = mode_decay(truth, rate_hz);
    double f_error = (mode->f_hz - f_hz) / bound->f_sd_hz;
    double decay_error = (mode->decay_per_s - decay) / bound->decay_sd_per_s;
    double f_oracle = (mode_f(oracle, rate_hz) - f_hz) / bound->f_sd_hz;
    double decay_oracle = (mode_decay(oracle, rate_hz) - decay) / bound->decay_sd_per_s;
    double f_u = mode->f_u_hz / bound->f_sd_hz,
           decay_u = mode->decay_u_per_s / bound->decay_sd_per_s;
    if (report->say && (fabs(f_error) > 5.0 || fabs(decay_error) > 5.0))
        fprintf(say(report),
                "; mode %.6g Hz %.4g /s off by %.1f and %.1f sd (oracle %.1f, %.1f; u "
                "%.2f, %.2f)",
                f_hz, decay, f_error, decay_error, f_oracle, decay_oracle, f_u, decay_u);
    return push_error(&score->f, f_error, f_oracle, f_u) &&
           push_error(&score->decay, decay_error, decay_oracle, decay_u);
}

static void score_verdict(struct score *score, const struct reading *reading, struct report *report)
{
    score->strikes++;
    score->verdicts[reading->verdict]++;
    for (unsigned r = 0; r < REASON_COUNT; r++)
        if (reading->reasons & (1u << r))
            score->reasons[r]++;
    if (reading->mode_count == 0 || reading->verdict == VERDICT_REJECTED)
        score->missed++;
    if (report->say && reading->verdict != VERDICT_GOOD) {
        fprintf(say(report), "; %s", verdict_name(reading->verdict));
        for (unsigned r = 0; r < REASON_COUNT; r++)
            if (reading->reasons & (1u << r))
                fprintf(report->say, " %s", reason_name((enum reason)r));
    }
}

static bool score_modes(struct score *score, const struct scene *scene,
                        const struct scene_take *take, const struct reading *reading,
                        struct report *report)
{
    struct element truth[ELEMENTS_MAX], oracle[ELEMENTS_MAX];
    struct bound bounds[ELEMENTS_MAX];
    int match[SCENE_MODES_MAX];
    size_t count = bench_elements(scene, take, truth);
    bool is_bounded = family_bounds(scene, take, truth, count, bounds);
    if (!is_bounded)
        memset(bounds, 0, sizeof bounds);
    bool asked[SCENE_MODES_MAX];
    bool all = is_bounded;
    for (unsigned k = 0; k < scene->mode_count; k++) {
        asked[k] = is_bounded && family_mode_is_knowable(&truth[k], &bounds[k], scene->rate_hz);
        all = all && asked[k];
    }
    match_modes(truth, bounds, scene->mode_count, scene->rate_hz, reading, match);
    if (!all && strcmp(scene->note, "") != 0 && strstr(scene->note, "widths")) {
        score_hidden(score, scene, truth, reading, match);
        return true;
    }
    if (solve_oracle(scene, take, truth, count, oracle) == 0)
        return true;
    unsigned matched = 0;
    for (unsigned k = 0; k < scene->mode_count; k++) {
        matched += match[k] >= 0;
        if (!asked[k])
            continue;
        score->asked++;
        if (match[k] < 0) {
            score->missing++;
            if (report->say)
                fprintf(say(report), "; missing %.6g Hz %.4g /s (%.0f sd)",
                        mode_f(&truth[k], scene->rate_hz), mode_decay(&truth[k], scene->rate_hz),
                        cabs(truth[k].c) / bounds[k].amplitude_sd);
        } else if (!score_mode(score, &truth[k], &oracle[k], &bounds[k], &reading->modes[match[k]],
                               scene->rate_hz, report)) {
            return false;
        }
    }
    score->spurious += reading->mode_count - matched;
    for (unsigned i = 0; report->say && i < reading->mode_count; i++) {
        bool is_spurious = true;
        for (unsigned k = 0; k < scene->mode_count; k++)
            is_spurious = is_spurious && match[k] != (int)i;
        if (is_spurious)
            fprintf(say(report), "; spurious %.6g Hz %.4g /s %.1f dBFS", reading->modes[i].f_hz,
                    reading->modes[i].decay_per_s, reading->modes[i].level_dbfs);
    }
    return true;
}

bool score_add(struct score *score, const struct scene *scene, const struct scene_take *take,
               const struct reading *reading, double ms, unsigned index, FILE *out)
{
    struct report report = {.say = out, .index = index, .scene = scene};
    score_verdict(score, reading, &report);
    bool done = score_modes(score, scene, take, reading, &report) &&
                push(&score->ms, &score->ms_count, &score->ms_size, ms);
    if (report.is_open)
        fprintf(out, "; %.1f ms\n", ms);
    return done;
}

static int by_value(const void *a, const void *b)
{
    const double *x = a, *y = b;
    return (*x > *y) - (*x < *y);
}

double score_median(double *values, size_t count)
{
    if (count == 0)
        return (double)NAN;
    qsort(values, count, sizeof *values, by_value);
    return count % 2 ? values[count / 2] : 0.5 * (values[count / 2 - 1] + values[count / 2]);
}

void score_summarise(const struct score_errors *errors, struct score_summary *out)
{
    double sum = 0.0, square = 0.0, oracle = 0.0;
    size_t kept = 0, inside = 0;
    for (size_t i = 0; i < errors->count; i++) {
        double fit = errors->fit[i];
        inside += fabs(fit) <= 2.0 * errors->u[i];
        if (!(fabs(fit) <= OUTLIER_SD) && fabs(errors->oracle[i]) <= OUTLIER_SD)
            continue;
        kept++;
        sum += fit;
        square += fit * fit;
        oracle += errors->oracle[i] * errors->oracle[i];
    }
    double n = (double)errors->count, m = (double)kept;
    double rms = sqrt(square / m);
    double *u = malloc((errors->count + 1) * sizeof *u);
    double u_median = (double)NAN;
    if (u) {
        memcpy(u, errors->u, errors->count * sizeof *u);
        u_median = score_median(u, errors->count);
    }
    free(u);
    *out = (struct score_summary){
        .rms_over_bound = rms,
        .rms_over_oracle = sqrt(square / oracle),
        .bias_sd = sum / m,
        .u_over_bound = u_median,
        .u_over_rms = u_median / rms,
        .inside_2u = (double)inside / n,
        .outliers = (n - m) / n,
    };
}
