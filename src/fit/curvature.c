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
        double density = noise_density(&fit->noise, cimag(pole->p));
        matrix_inverse_column(segment->matrix, n, scale, i, column);
        out->u_a[k] = sqrt(density * column[i]);
        matrix_inverse_column(segment->matrix, n, scale, i + 1, column);
        out->u_w[k] = sqrt(density * column[i + 1]);
        out->p[k] = pole->p;
        out->is_known[k] = true;
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
    segment->pole_count = pole_count;
    memcpy(segment->poles, poles, sizeof poles);
    memset(segment->has_moments, 0, sizeof segment->has_moments);
    refine_amplitudes(segment);
}
