/* From poles to modes with uncertainties. Formulas: contract.md's words; propagation JCGM 100:2008
 * (GUM) equation (13). */
#include "fit/matrix.h"
#include "fit/state.h"

#include <math.h>
#include <string.h>

static void fill_mode(struct mode *mode, double f_hz, double decay_per_s, double f_u_hz,
                      double decay_u_per_s, double cov)
{
    double w = 2 * WANE_PI * f_hz;
    double wn = sqrt(w * w + decay_per_s * decay_per_s);
    mode->f_hz = f_hz;
    mode->decay_per_s = decay_per_s;
    mode->f_u_hz = f_u_hz;
    mode->decay_u_per_s = decay_u_per_s;
    mode->f_decay_cov = cov;
    mode->natural_f_hz = wn / (2 * WANE_PI);
    mode->q = wn / (2 * decay_per_s);
    mode->zeta = decay_per_s / wn;
    /* dq/dw = w / (2 a wn), dq/da = -w^2 / (2 a^2 wn); zeta = 1 / (2 q). */
    double by_w = w / (2 * decay_per_s * wn) * 2 * WANE_PI;
    double by_a = -w * w / (2 * decay_per_s * decay_per_s * wn);
    double variance = by_w * by_w * f_u_hz * f_u_hz + by_a * by_a * decay_u_per_s * decay_u_per_s +
                      2 * by_w * by_a * cov;
    mode->q_u = sqrt(fmax(variance, 0));
    mode->zeta_u = mode->q_u / (2 * mode->q * mode->q);
    mode->t60_s = log(1000) / decay_per_s;
    mode->t60_u_s = mode->t60_s * decay_u_per_s / decay_per_s;
}

static void fill_from_pole(const struct fit *fit, const struct pole *pole, double var_a,
                           double var_w, double cov_aw, struct mode *mode)
{
    double rate = fit->strike->rate_hz * (1 + fit->settings.clock_ppm * 1e-6);
    double density = noise_density(&fit->noise, cimag(pole->p));
    fill_mode(mode, cimag(pole->p) * rate / (2 * WANE_PI), -creal(pole->p) * rate,
              sqrt(density * var_w) * rate / (2 * WANE_PI), sqrt(density * var_a) * rate,
              density * cov_aw * rate * rate / (2 * WANE_PI));
    double complex c = (pole->c - pole->tail) * cexp(-pole->p * ((double)fit->begin - fit->onset));
    mode->level_dbfs = 20 * log10(cabs(c));
    mode->phase_rad = carg(c);
}

/* A quick pole on top of a stronger, slower one at the same frequency is that mode's own beginning,
 * while the blow's traces settle: modelled, not reported. */
static bool is_companion(const struct segment *segment, const struct pole *pole)
{
    double a = -creal(pole->p), energy = creal(pole->c * conj(pole->c)) / a;
    for (unsigned k = 0; k < segment->pole_count; k++) {
        const struct pole *other = &segment->poles[k];
        double a_other = -creal(other->p);
        if (other != pole && other->kind == POLE_RING && a > 4 * a_other &&
            fabs(cimag(other->p - pole->p)) < a &&
            energy < creal(other->c * conj(other->c)) / a_other)
            return true;
    }
    return false;
}

/* A carried mode belongs to this strike too when it is not what the earlier one left; modes below
 * or above the range are fitted and left out. */
static bool is_of_this_strike(const struct fit *fit, const struct pole *pole)
{
    double w = cimag(pole->p);
    if (w < fit->w_low || w > fit->w_high || window_was_there_before(fit, pole))
        return false;
    /* What does not decay within the record is a tone that came on. */
    if (-creal(pole->p) * (double)fit->segment->frame_count < 0.05 ||
        is_companion(fit->segment, pole))
        return false;
    return !pole->is_carried || cabs(pole->c - pole->tail) > 0.1 * cabs(pole->tail);
}

void uncertainty_fill(struct fit *fit, struct reading *reading)
{
    struct segment *segment = fit->segment;
    struct parameter parameters[PARAMETERS_MAX];
    double scale[PARAMETERS_MAX], column[PARAMETERS_MAX];
    unsigned n = refine_information(segment, parameters, scale);
    reading->mode_count = 0;
    candidates_residual(fit);
    for (unsigned i = 0; i + 1 < n; i++) {
        const struct pole *pole = &segment->poles[parameters[i].pole];
        if (parameters[i].what != PARAMETER_A || pole->kind != POLE_RING ||
            !is_of_this_strike(fit, pole) || reading->mode_count == READING_MODES_MAX)
            continue;
        matrix_inverse_column(segment->matrix, n, scale, i, column);
        double var_a = column[i], cov_aw = column[i + 1];
        matrix_inverse_column(segment->matrix, n, scale, i + 1, column);
        double widen = fit->misfit > 1.5 ? curvature_excess(fit, pole) : 1;
        if (parameters[i].pole == fit->lead_pole) {
            fit->lead_noise_u =
                sqrt(noise_density(&fit->plain, cimag(pole->p)) * fit->misfit * var_a) /
                -creal(pole->p);
            fit->lead_u = fit->lead_noise_u * sqrt(widen);
        }
        fill_from_pole(fit, pole, widen * var_a, widen * column[i + 1], widen * cov_aw,
                       &reading->modes[reading->mode_count++]);
    }
}
