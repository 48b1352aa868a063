/* Coil-and-capacitor tanks: the circuit equation L q'' + R q' + q/C = 0 is integrated here by
 * Runge-Kutta steps of a hundredth of the sampling interval, sampled, and read. Rows and figures:
 * shared/check-values.md 5 (formulas: OpenStax University Physics Volume 2, section 14.6; the first
 * row's f0 and zeta are common practice, no source; the others derived). */
#include "quick.h"
#include "support/near.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#define RATE_HZ 192000.0
#define LEAD    57600u

struct tank {
    double henry, farad, ohm;
    double f_hz, decay_per_s, zeta, q; /* as published or derived */
};

static const struct tank tanks[] = {
    {470e-6, 1000e-6, 1.2, 112.310049, 1276.59574, 0.875189949, 0.571304550},
    {680e-6, 0.47e-6, 0.9, 8901.97462, 661.764706, 0.0118306059, 42.2632624},
    {2.2e-3, 22e-6, 6.0, 690.109724, 1363.63636, 0.300000000, 1.66666667},
    {2.2e-3, 22e-6, 12.0, 578.745248, 2727.27273, 0.600000000, 0.833333333},
    {1.0e-3, 330e-6, 3.0, 140.589141, 1500.0, 0.861684397, 0.580258853},
    {10e-3, 100e-9, 20.0, 5030.40412, 1000.0, 0.0316227766, 15.8113883},
};

/* One step of the classical Runge-Kutta method on (charge, current). */
static void step(const struct tank *tank, double h, double *charge, double *current)
{
    double k_charge[4], k_current[4];
    static const double at[4] = {0.0, 0.5, 0.5, 1.0};
    for (size_t i = 0; i < 4; i++) {
        double q = *charge + (i ? at[i] * h * k_charge[i - 1] : 0.0);
        double c = *current + (i ? at[i] * h * k_current[i - 1] : 0.0);
        k_charge[i] = c;
        k_current[i] = -(tank->ohm * c + q / tank->farad) / tank->henry;
    }
    *charge += h / 6.0 * (k_charge[0] + 2.0 * k_charge[1] + 2.0 * k_charge[2] + k_charge[3]);
    *current += h / 6.0 * (k_current[0] + 2.0 * k_current[1] + 2.0 * k_current[2] + k_current[3]);
}

/* The capacitor's voltage, 0.5 of full scale at first, switched on at `fraction` of a frame. */
static struct strike *ring_down(const struct tank *tank, double fraction, double noise_sd)
{
    size_t ring = (size_t)(12.0 / tank->decay_per_s * RATE_HZ);
    struct strike *strike = calloc(1, sizeof *strike);
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    assert_non_null(strike);
    assert_non_null(rng);
    strike->rate_hz = RATE_HZ;
    strike->channel = 1;
    strike->frame_count = LEAD + ring;
    strike->trigger = LEAD + 20;
    strike->end = STRIKE_END_FADED;
    strike->samples = malloc(strike->frame_count * sizeof *strike->samples);
    assert_non_null(strike->samples);
    double charge = 0.5 * tank->farad, current = 0.0, h = 0.01 / RATE_HZ;
    for (size_t n = 0; n < strike->frame_count; n++) {
        double value = gsl_ran_gaussian_ziggurat(rng, noise_sd);
        if (n > LEAD) {
            double steps = n == LEAD + 1 ? 100.0 * (1.0 - fraction) : 100.0;
            for (unsigned i = 0; i < (unsigned)steps; i++)
                step(tank, h, &charge, &current);
            value += charge / tank->farad;
        }
        strike->samples[n] = (float)value;
    }
    gsl_rng_free(rng);
    return strike;
}

static void each_circuit_is_read_as_its_equation_says(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof tanks / sizeof tanks[0]; i++) {
        const struct tank *tank = &tanks[i];
        struct strike *strike = ring_down(tank, 0.25, 2e-6);
        struct error err = {0};
        struct fit_settings settings = {0};
        struct reading reading;
        struct fit_workspace *workspace = fit_workspace_create(strike->frame_count, &err);
        assert_non_null(workspace);
        assert_true(fit_strike(workspace, strike, &settings, &reading, &err));
        printf("tank %zu: %u modes, %s\n", i, reading.mode_count, verdict_name(reading.verdict));
        assert_int_equal(reading.mode_count, 1);
        assert_int_equal(reading.verdict, VERDICT_GOOD);
        const struct mode *mode = &reading.modes[0];
        CHECK_SHARE(mode->f_hz, tank->f_hz, 1e-3);
        CHECK_SHARE(mode->decay_per_s, tank->decay_per_s, 1e-3);
        CHECK_SHARE(mode->zeta, tank->zeta, 1e-3);
        CHECK_SHARE(mode->q, tank->q, 1e-3);
        CHECK_NEAR(mode->f_hz, tank->f_hz, 5.0 * mode->f_u_hz);
        CHECK_NEAR(mode->decay_per_s, tank->decay_per_s, 5.0 * mode->decay_u_per_s);
        CHECK_NEAR(reading.onset_frame, LEAD + 0.25, 1.0);
        /* Backwards: L from f and alpha, C known (check-values.md 5, "inverse"). */
        double w2 = pow(2.0 * WANE_PI * mode->f_hz, 2) + pow(mode->decay_per_s, 2);
        CHECK_SHARE(1.0 / (tank->farad * w2), tank->henry, 2e-3);
        CHECK_SHARE(2.0 * mode->decay_per_s / (tank->farad * w2), tank->ohm, 3e-3);
        fit_workspace_destroy(workspace);
        strike_destroy(strike);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(each_circuit_is_read_as_its_equation_says),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
