/* The closed forms of a mode under a blow, against the equation of motion solved step by step. */
#include "input/sim_blow.h"
#include "support/near.h"
#include "wane/strike.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

struct motion {
    double x, v;
};

static double force(double t_s, double contact_s)
{
    return t_s < contact_s ? (1 - cos(2 * WANE_PI * t_s / contact_s)) / contact_s : 0;
}

/* x'' + 2 alpha x' + omega_n^2 x = F(t), omega_n^2 = omega^2 + alpha^2, mass 1; classical
 * Runge-Kutta of fourth order. */
static struct motion solve(double f_hz, double decay_per_s, double contact_s, double t_s)
{
    const int steps = 20000;
    double omega_squared = pow(2 * WANE_PI * f_hz, 2) + decay_per_s * decay_per_s;
    double h = t_s / steps;
    struct motion at = {0, 0};
    for (int i = 0; i < steps; i++) {
        double slopes_x[4];
        double slopes_v[4];
        const double shares[4] = {0, 0.5, 0.5, 1};
        for (int k = 0; k < 4; k++) {
            double ahead = h * shares[k];
            double x = at.x + (k > 0 ? ahead * slopes_x[k - 1] : 0);
            double v = at.v + (k > 0 ? ahead * slopes_v[k - 1] : 0);
            slopes_x[k] = v;
            slopes_v[k] = force(i * h + ahead, contact_s) - 2 * decay_per_s * v - omega_squared * x;
        }
        at.x += h / 6 * (slopes_x[0] + 2 * slopes_x[1] + 2 * slopes_x[2] + slopes_x[3]);
        at.v += h / 6 * (slopes_v[0] + 2 * slopes_v[1] + 2 * slopes_v[2] + slopes_v[3]);
    }
    return at;
}

/* The bench hears velocity: real part of (1 + i alpha/omega) z. */
static double heard(double f_hz, double decay_per_s, double complex z)
{
    return creal((1 + decay_per_s / (2 * WANE_PI * f_hz) * SIM_I) * z);
}

static const struct {
    double f_hz, decay_per_s, contact_s;
} cases[] = {
    {92.4, 7, 1.6e-3}, {641.3, 1.6, 0.35e-3}, {3045, 9, 0.15e-3},
    {4391, 12, 5e-4},  {1000, 3, 1e-3},       {300, 400, 2e-3},
};

static void motion_during_the_contact_solves_the_equation(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        double f_hz = cases[i].f_hz;
        double decay = cases[i].decay_per_s;
        double contact_s = cases[i].contact_s;
        double complex s = sim_mode_pole(f_hz, decay);
        for (double share = 0.1; share < 1.01; share += 0.1) {
            double t_s = fmin(1, share) * contact_s;
            double v = solve(f_hz, decay, contact_s, t_s).v;
            CHECK_NEAR(heard(f_hz, decay, sim_blow_during(s, contact_s, t_s)), v, 1e-9);
        }
    }
}

static void ring_after_the_contact_solves_the_equation(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        double f_hz = cases[i].f_hz;
        double decay = cases[i].decay_per_s;
        double contact_s = cases[i].contact_s;
        double complex s = sim_mode_pole(f_hz, decay);
        for (double t_s = contact_s; t_s < 6 * contact_s; t_s += 0.7 * contact_s) {
            double complex z = sim_blow_total(s, contact_s) * cexp(s * t_s);
            CHECK_NEAR(heard(f_hz, decay, z), solve(f_hz, decay, contact_s, t_s).v, 1e-8);
        }
    }
}

static void a_switch_rings_at_once(void **state)
{
    (void)state;
    double complex total = sim_blow_total(sim_mode_pole(3400, 400), 0);
    CHECK_NEAR(creal(total), 1, 0);
    CHECK_NEAR(cimag(total), 0, 0);
}

/* A long ring through the difference equation of a first-order high-pass: what is left when its own
 * pole has gone is the ring times the gain. */
static void coupling_gain_is_what_the_filter_does(void **state)
{
    (void)state;
    const double rate_hz = 48000;
    const double corner_hz = 12;
    double complex s = sim_mode_pole(65, 2.1);
    double complex gain = sim_coupling_gain(s, corner_hz, rate_hz);
    double p = exp(-2 * WANE_PI * corner_hz / rate_hz);
    double last_in = 0;
    double last_out = 0;
    for (int n = 0; n < 60000; n++) {
        double complex z = cexp(s * (n / rate_hz));
        double in = creal(z);
        double out = (1 + p) / 2 * (in - last_in) + p * last_out;
        if (n > 30000) /* exp(-2 pi 12 x 0.625) = 3e-21 */
            CHECK_NEAR(out, creal(gain * z), 1e-12);
        last_in = in;
        last_out = out;
    }
    /* Analogue law, f / sqrt(f^2 + corner^2), near enough this far under the rate. */
    CHECK_NEAR(cabs(gain), 65 / hypot(65, corner_hz), 2e-3);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(motion_during_the_contact_solves_the_equation),
        cmocka_unit_test(ring_after_the_contact_solves_the_equation),
        cmocka_unit_test(a_switch_rings_at_once),
        cmocka_unit_test(coupling_gain_is_what_the_filter_does),
    };
    return cmocka_run_group_tests_name("simulated.blow", tests, NULL, NULL);
}
