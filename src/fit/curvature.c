/* Is the decay one exponential, the frequency one frequency? Early and late part are fitted apart.
 */
#include "fit/matrix.h"
#include "fit/state.h"

#include <math.h>
#include <string.h>

struct half {
    bool is_known[POLES_MAX];
    double complex p[POLES_MAX];
    double u_a[POLES_MAX], u_w[POLES_MAX];
};

/* By how much the residual beside a pole exceeds the noise: probes a few line widths away, each
 * Exp(1) where noise alone is left. A half that is no exponential itself says little about its
 * rate. */
double curvature_excess(struct fit *fit, const struct pole *pole)
{
    static const double offsets[] = {-6, -4, -2.5, 2.5, 4, 6};
    struct segment *segment = fit->segment;
    struct moments moments = {.m = (double complex(*)[MOMENT_ORDERS])segment->spare_moments};
    double a = -creal(pole->p), sum = 0;
    size_t length = pole_length(pole, segment->frame_count);
    double norm = (1 - exp(-2 * a * (double)segment->frame_count)) / (2 * a);
    double density = noise_density(&fit->noise, cimag(pole->p));
    unsigned count = sizeof offsets / sizeof offsets[0];
    for (unsigned i = 0; i < count; i++) {
        double complex p = pole->p + J * offsets[i] * a, s[2];
        moments_gather(fit->workspace->residual, length, p, moments_block_for(length),
                       segment->table, &moments);
        moments_evaluate(&moments, p, s);
        sum += (creal(s[0]) * creal(s[0]) + cimag(s[0]) * cimag(s[0])) / (density * norm);
    }
    return fmax(1, sum / count);
}

static void fit_half(struct fit *fit, size_t from, size_t count, const struct pole *poles,
                     unsigned pole_count, struct half *out)
{
    struct segment *segment = fit->segment;
    unsigned origin[POLES_MAX];
    memset(out, 0, sizeof *out);
    segment->y = fit->workspace->y + fit->begin + from;
    segment->frame_count = count;
    segment->pole_count = 0;
    for (unsigned k = 0; k < pole_count; k++) {
        /* What had died before this part begins is not in it. */
        if (poles[k].kind == POLE_RING && -creal(poles[k].p) * (double)from > 5)
            continue;
        origin[segment->pole_count] = k;
        segment->has_moments[segment->pole_count] = false;
        segment->poles[segment->pole_count++] = poles[k];
    }
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], column[PARAMETERS_MAX];
    unsigned n = segment->pole_count > 0 && refine_poles(segment, 12)
                     ? refine_information(segment, parameters, scale)
                     : 0;
    for (unsigned i = 0; i + 1 < n; i++) {
        const struct pole *pole = &segment->poles[parameters[i].pole];
        if (parameters[i].what != PARAMETER_A || pole->kind != POLE_RING)
            continue;
        unsigned k = origin[parameters[i].pole];
        double density = noise_density(&fit->plain, cimag(pole->p)) * fit->misfit;
        matrix_inverse_column(segment->matrix, n, scale, i, column);
        out->u_a[k] = sqrt(density * column[i]);
        matrix_inverse_column(segment->matrix, n, scale, i + 1, column);
        out->u_w[k] = sqrt(density * column[i + 1]);
        out->p[k] = pole->p;
        out->is_known[k] = true;
    }
    unsigned lead = fit->lead_pole;
    candidates_residual(fit);
    for (unsigned k = 0; k < segment->pole_count; k++) {
        if (origin[k] != lead || !out->is_known[lead])
            continue;
        double widen = sqrt(curvature_excess(fit, &segment->poles[k]));
        out->u_a[lead] *= widen;
        out->u_w[lead] *= widen;
    }
}

void curvature_measure(struct fit *fit)
{
    struct segment *segment = fit->segment;
    struct pole poles[POLES_MAX];
    unsigned pole_count = segment->pole_count;
    size_t frame_count = segment->frame_count;
    const float *y = segment->y;
    memcpy(poles, segment->poles, sizeof poles);
    double a = -creal(poles[fit->lead_pole].p);
    size_t middle = (size_t)fmin(1.2 / a, 0.45 * (double)frame_count);
    struct half early, late;
    fit_half(fit, 0, middle, poles, pole_count, &early);
    fit_half(fit, middle, frame_count - middle, poles, pole_count, &late);
    for (unsigned k = 0; k < pole_count; k++) {
        struct curvature *out = &fit->curvature[k];
        *out = (struct curvature){0};
        if (!early.is_known[k] || !late.is_known[k])
            continue;
        out->is_known = true;
        out->early = early.p[k];
        out->late = late.p[k];
        out->u_a = hypot(early.u_a[k], late.u_a[k]);
        out->u_w = hypot(early.u_w[k], late.u_w[k]);
    }
    segment->y = y;
    segment->frame_count = frame_count;
    segment_restore(segment, poles, pole_count);
    refine_amplitudes(segment);
}
