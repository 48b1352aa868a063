/* Clipping: the converter's end stop, or a flat top below it. */
#include "fit/state.h"

#include <math.h>

#define END_STOP 0.999f
#define FLAT_RUN 3

/* Samples of [from, to) that stand at an end stop or in a flat top near the extreme. */
static size_t count_clipped(const float *x, size_t from, size_t to, float peak, size_t flat_run)
{
    size_t count = 0, run = 1;
    for (size_t n = from; n < to; n++) {
        bool is_high = fabsf(x[n]) >= 0.98f * peak;
        bool is_same = n > from && x[n] == x[n - 1];
        run = is_same ? run + 1 : 1;
        if (!is_high)
            continue;
        if (fabsf(x[n]) >= END_STOP)
            count++;
        else if (run == flat_run)
            count += flat_run;
        else if (run > flat_run)
            count++;
    }
    return count;
}

/* The samples' grain: the smallest step between neighbours. */
static double grain_of(const float *x, size_t from, size_t to)
{
    float least = 1;
    for (size_t n = from + 1; n < to; n++) {
        float step = fabsf(x[n] - x[n - 1]);
        if (step > 0 && step < least)
            least = step;
    }
    return (double)least;
}

void clip_count(struct fit *fit)
{
    const float *x = fit->strike->samples;
    float peak = 0;
    for (size_t n = fit->blow; n < fit->end; n++)
        peak = fabsf(x[n]) > peak ? fabsf(x[n]) : peak;
    if (peak < 1e-4f)
        return;
    /* The top of a slow sine is flat to within the grain for 2 sqrt(2 grain / (A w^2)) samples. */
    double w = cimag(fit->segment->poles[fit->lead_pole].p);
    double grain = grain_of(x, fit->blow, fit->end);
    double top = 2 * sqrt(2 * grain / ((double)peak * w * w));
    size_t flat_run = FLAT_RUN + (size_t)fmin(2 * top, 1e6);
    size_t third = fit->begin + (fit->end - fit->begin) / 3;
    size_t blow = fit->blow > 8 ? fit->blow - 8 : 0;
    fit->clipped_in_blow =
        blow < fit->begin ? count_clipped(x, blow, fit->begin, peak, flat_run) : 0;
    fit->clipped_early = count_clipped(x, fit->begin, third, peak, flat_run);
    fit->clipped = fit->clipped_early + count_clipped(x, third, fit->end, peak, flat_run);
    fit->clipped_share = (double)fit->clipped_early / (double)(third - fit->begin + 1);
}

/* A bent input leaves odd harmonics that are a third of what it takes from the fundamental (a cubic
 * bend: cos^3 = 3/4 cos + 1/4 cos 3) up to all of it (a flat top, in the limit of a light touch:
 * 4/(3 pi) k (1 - k^2)^1.5 against 1 - 2/pi (asin k + k sqrt(1 - k^2))). A harmonic that is
 * stronger than the loss has another cause. `loss`: share of the lead's early amplitude that is
 * missing by what its late part says. */
bool clip_is_bent(struct fit *fit, double loss)
{
    const struct pole *lead = &fit->segment->poles[fit->lead_pole];
    double a = -creal(lead->p), w = 3 * cimag(lead->p);
    if (w > WANE_PI)
        w = fabs(2 * WANE_PI - w);
    size_t count = (size_t)fmin(0.3 / a, (double)fit->segment->frame_count);
    double complex sum = 0, z = 1, step = cexp(J * w);
    const float *y = fit->segment->y;
    double norm = 0;
    for (size_t n = 0; n < count; n++) {
        double window = 0.5 - 0.5 * cos(2 * WANE_PI * (double)n / (double)count);
        sum += (double)y[n] * window * z;
        norm += window;
        z *= step;
    }
    double harmonic = 2 * cabs(sum) / norm;
    double noise = 6 * noise_density(&fit->noise, w) / (double)count;
    return harmonic * harmonic > 16 * noise && harmonic > 0.08 * loss * cabs(lead->c) &&
           harmonic < 1.1 * loss * cabs(lead->c) && harmonic > 0.002 * cabs(lead->c);
}
