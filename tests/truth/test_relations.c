/* What a reading says of Q, zeta, T60 and the natural frequency, against exact relations and tables
 * from outside (shared/check-values.md 4.5, 4.6 and 4.1, sources named there and beside each case).
 */
#include "quick.h"
#include "support/near.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

static void read_one(struct scene *scene, double spans, struct reading *out)
{
    struct fit_settings settings = {0};
    assert_true(quick_make(scene, spans, 11));
    assert_true(quick_read(scene, &scene->takes[0], &settings, out));
    bench_done(scene);
}

/* check-values.md 4.6 (derived; ISO 6721-2 for the decrement, ISO 354 / 3382 for the 60 dB time,
 * from memory there): set A, f 1000 Hz, alpha 20 /s. */
static void set_a_has_the_tabled_measures_of_decay(void **state)
{
    (void)state;
    struct scene scene;
    struct reading reading;
    quick_begin(&scene, 48000.0, 0.37, 1e-6);
    quick_mode(&scene, 1000.0, 20.0, 0.5, 0.3);
    read_one(&scene, 9.0, &reading);
    assert_int_equal(reading.mode_count, 1);
    const struct mode *mode = &reading.modes[0];
    CHECK_SHARE(mode->zeta, 3.183083e-3, 1e-5);
    CHECK_SHARE(mode->q, 157.080428, 1e-5);
    CHECK_SHARE(mode->t60_s, 0.345387764, 1e-5);
    CHECK_SHARE(mode->decay_per_s / mode->f_hz, 0.02, 1e-5); /* log decrement a cycle */
    CHECK_SHARE(mode->natural_f_hz, sqrt(1e6 + pow(20.0 / (2.0 * WANE_PI), 2)), 1e-7);
    CHECK_NEAR(mode->level_dbfs, 20.0 * log10(0.5), 0.001);
    /* Samples cannot tell when within a frame a sharp onset was: half a frame of phase. */
    CHECK_NEAR(mode->phase_rad, 0.3, 2.0 * WANE_PI * 1000.0 / 48000.0 * 0.5);
}

/* A wine glass, textbook exercise (author not identified; check-values.md 4.5): 660 Hz, down to
 * 1/100 in 3 s; decay of amplitude 1.53505673 /s, Q 1350.7327, T60 4.5 s exactly. */
static void the_textbook_glass_has_its_q(void **state)
{
    (void)state;
    struct scene scene;
    struct reading reading;
    quick_begin(&scene, 44100.0, 0.81, 1e-5);
    quick_mode(&scene, sqrt(660.0 * 660.0 - pow(1.53505673 / (2.0 * WANE_PI), 2)), 1.53505673, 0.4,
               -1.0);
    read_one(&scene, 7.0, &reading);
    assert_int_equal(reading.mode_count, 1);
    CHECK_SHARE(reading.modes[0].q, 1350.7327, 1e-4);
    CHECK_SHARE(reading.modes[0].t60_s, 4.5, 1e-4);
    CHECK_SHARE(reading.modes[0].natural_f_hz, 660.0, 1e-6);
}

/* Free-free bar: ratios of its flexural modes, roots of cos b cosh b = 1 (W. T. Thomson, Theory of
 * Vibration with Applications, App. D; check-values.md 4.1). A steel bar of 5 x 100 mm, E 200 GPa,
 * 7850 kg/m3: first mode 2594.235787 Hz. */
static void a_bar_keeps_its_modal_ratios(void **state)
{
    (void)state;
    static const double ratios[] = {1.0, 2.7565385, 5.4039176};
    struct scene scene;
    struct reading reading;
    quick_begin(&scene, 96000.0, 0.5, 2e-5);
    for (size_t i = 0; i < 3; i++)
        quick_mode(&scene, 2594.235787 * ratios[i], 6.0 + 4.0 * (double)i, 0.3 / (1.0 + (double)i),
                   0.4 + (double)i);
    read_one(&scene, 7.0, &reading);
    assert_int_equal(reading.mode_count, 3);
    for (size_t i = 0; i < 3; i++) /* strongest first is lowest first here */
        CHECK_SHARE(reading.modes[i].f_hz / reading.modes[0].f_hz, ratios[i], 2e-7);
    CHECK_SHARE(reading.modes[0].f_hz, 2594.235787, 1e-7);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(set_a_has_the_tabled_measures_of_decay),
        cmocka_unit_test(the_textbook_glass_has_its_q),
        cmocka_unit_test(a_bar_keeps_its_modal_ratios),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
