#include "wane/constants.h"

#include <math.h>
#include <string.h>

/* Central difference over a step that is small beside the value and large beside its rounding. */
static double slope_at(propagate_model *model, const void *user, double *x, size_t i, double u)
{
    double centre = x[i];
    double step = fabs(centre) * 1e-5;
    if (step == 0)
        step = u * 1e-2;
    x[i] = centre + step;
    double above = model(x, user), right = x[i];
    x[i] = centre - step;
    double below = model(x, user), left = x[i];
    x[i] = centre;
    return (above - below) / (right - left);
}

bool propagate(propagate_model *model, const void *user, const struct measured *inputs, size_t n,
               const double *correlation, struct measured *out_result, double *out_shares,
               struct error *err)
{
    double x[PROPAGATE_INPUTS_MAX], part[PROPAGATE_INPUTS_MAX];
    if (n == 0 || n > PROPAGATE_INPUTS_MAX)
        return error_set(err, ERROR_INTERNAL, "a propagation with %zu inputs", n);
    for (size_t i = 0; i < n; i++)
        x[i] = inputs[i].value;
    double value = model(x, user);
    bool is_defined = isfinite(value);
    for (size_t i = 0; i < n; i++) {
        part[i] = inputs[i].u > 0 ? slope_at(model, user, x, i, inputs[i].u) * inputs[i].u : 0;
        is_defined = is_defined && isfinite(part[i]);
    }
    if (!is_defined)
        return error_set(err, ERROR_DATA, "the formula has no value at these inputs");
    double variance = 0;
    for (size_t i = 0; i < n; i++) {
        for (size_t j = 0; j < n; j++) {
            double r = i == j ? 1 : correlation == NULL ? 0 : correlation[i * n + j];
            variance += r * part[i] * part[j];
        }
        if (out_shares != NULL)
            out_shares[i] = fabs(part[i]);
    }
    *out_result = (struct measured){value, sqrt(fmax(0, variance))};
    return true;
}
