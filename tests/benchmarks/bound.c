#include "bound.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static struct bound bound_at(const struct element *element, const double *cov, size_t n, size_t at,
                             double rate_hz)
{
    struct bound out = {0};
    bool has_phase = element->kind == ELEMENT_MODE || element->kind == ELEMENT_TONE;
    double magnitude = cabs(element->c);
    double re = creal(element->c) / magnitude, im = cimag(element->c) / magnitude;
    double v00 = cov[at * n + at];
    if (has_phase) {
        double v11 = cov[(at + 1) * n + at + 1], v01 = cov[at * n + at + 1];
        out.amplitude_sd = sqrt(re * re * v00 + 2.0 * re * im * v01 + im * im * v11);
        out.phase_sd_rad = sqrt(im * im * v00 - 2.0 * re * im * v01 + re * re * v11) / magnitude;
    } else {
        out.amplitude_sd = sqrt(v00);
    }
    const double two_pi = 6.283185307179586;
    if (element->kind == ELEMENT_MODE) {
        out.decay_sd_per_s = sqrt(cov[(at + 2) * n + at + 2]) * rate_hz;
        out.f_sd_hz = sqrt(cov[(at + 3) * n + at + 3]) * rate_hz / two_pi;
    } else if (element->kind == ELEMENT_TONE) {
        out.f_sd_hz = sqrt(cov[(at + 2) * n + at + 2]) * rate_hz / two_pi;
    } else if (element->kind == ELEMENT_REAL) {
        out.decay_sd_per_s = sqrt(cov[(at + 1) * n + at + 1]) * rate_hz;
    }
    return out;
}

bool bound_of(const struct element *elements, size_t element_count, size_t frame_count,
              double rate_hz, double noise_sd, struct bound *out)
{
    struct column columns[COLUMNS_MAX];
    size_t first[ELEMENTS_MAX];
    size_t n = poles_columns(elements, element_count, columns, first);
    double *cov = malloc(n * n * sizeof *cov);
    if (!cov)
        return false;
    poles_gram(elements, element_count, columns, n, frame_count, cov, NULL);
    bool definite = poles_invert(cov, n);
    if (definite) {
        for (size_t i = 0; i < n * n; i++)
            cov[i] *= noise_sd * noise_sd;
        for (size_t e = 0; e < element_count; e++)
            out[e] = bound_at(&elements[e], cov, n, first[e], rate_hz);
    }
    free(cov);
    return definite;
}
