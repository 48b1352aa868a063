/* Heavily damped modes, zeta over about 0.1: their spectrum is one broad hump that melts into its
 * own mirror at negative frequencies, so the FFT search cannot place them. Here each (f_n, zeta) of
 * a coarse grid is tried by least squares on samples thinned by averaging. */
#include "fit/state.h"

#include <math.h>

#define PER_PERIOD 32.0 /* samples a period of f_n after thinning */
#define F_RATIO    1.3

static const double zetas[] = {0.1, 0.18, 0.3, 0.45, 0.6, 0.75, 0.87, 0.95};

/* Energy that Re(c exp(p n)) explains of y [count], and the c that does. */
static double explained_by(const float *y, size_t count, double complex p, double complex *out_c)
{
    double gram[3] = {0}, data[2] = {0};
    double complex z = 1, step = cexp(p);
    for (size_t n = 0; n < count; n++) {
        double re = creal(z), im = cimag(z), sample = (double)y[n];
        gram[0] += re * re;
        gram[1] += re * im;
        gram[2] += im * im;
        data[0] += sample * re;
        data[1] += sample * im;
        z = re * step + J * im * step;
    }
    double det = gram[0] * gram[2] - gram[1] * gram[1];
    if (det <= 1e-9 * gram[0] * gram[2])
        return 0;
    double u = (gram[2] * data[0] - gram[1] * data[1]) / det;
    double v = (gram[0] * data[1] - gram[1] * data[0]) / det;
    *out_c = u - J * v;
    return u * data[0] + v * data[1];
}

/* The same for c exp(-a n), c real. */
static double explained_by_real(const float *y, size_t count, double a)
{
    double gram = 0, data = 0, z = 1, step = exp(-a);
    for (size_t n = 0; n < count; n++) {
        gram += z * z;
        data += (double)y[n] * z;
        z *= step;
    }
    return data * data / gram;
}

bool lowq_search(struct fit *fit, struct candidate *out, bool *out_is_real)
{
    const struct segment *segment = fit->segment;
    float *y = fit->workspace->residual; /* thinned in place, level by level */
    size_t count = segment->frame_count, most = (size_t)(1.5 * fit->strike->rate_hz);
    count = count < most ? count : most;
    double w_top = fmin(fit->w_high, 2 * WANE_PI / 8), w_low = fit->w_low;
    size_t thin = 1;
    double best = 0;
    for (double w = w_top; w >= w_low; w /= F_RATIO) {
        while (2 * WANE_PI / w > 2 * PER_PERIOD * (double)thin && count >= 128) {
            for (size_t i = 0; i < count / 2; i++)
                y[i] = (y[2 * i] + y[2 * i + 1]) / 2;
            count /= 2;
            thin *= 2;
        }
        for (size_t i = 0; i < sizeof zetas / sizeof zetas[0]; i++) {
            double a = zetas[i] * w;
            double complex p = -a + J * w * sqrt(1 - zetas[i] * zetas[i]);
            size_t length = (size_t)(6 / (a * (double)thin)) + 4;
            length = length < count ? length : count;
            double complex c = 0;
            double energy = explained_by(y, length, p * (double)thin, &c) * (double)thin;
            energy /= noise_density(&fit->noise, w);
            if (energy > best) {
                best = energy;
                /* An average of `thin` samples stands for their middle. */
                *out = (struct candidate){p, c * cexp(-p * ((double)thin - 1) / 2), energy / 2};
            }
        }
    }
    /* A real pole has two parameters less: it is preferred where it does nearly as well. */
    *out_is_real = false;
    double slowest = 2 * WANE_PI * 0.3 / fit->strike->rate_hz;
    for (double a = slowest; a < w_low * 2; a *= 1.5) {
        size_t length = (size_t)(6 / (a * (double)thin)) + 4;
        length = length < count ? length : count;
        double energy = explained_by_real(y, length, a * (double)thin) * (double)thin;
        energy /= noise_density(&fit->noise, fit->w_low);
        if (energy > 0.9 * best) {
            best = fmax(best, energy / 0.9);
            *out = (struct candidate){-a, 0, energy / 2};
            *out_is_real = true;
        }
    }
    return best > 0;
}
