/* SciPy's least squares on the same samples (optimize.least_squares), an independent solver: f and
 * decay agree to 1e-6 relative. Runs where /usr/bin/python3 has SciPy, else skips and says so. */
#include "quick.h"
#include "support/near.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define PYTHON "/usr/bin/python3"

static bool has_scipy(void)
{
    return system(PYTHON " -c 'import scipy.optimize' >/dev/null 2>&1") == 0;
}

/* The window goes to a file of its own; SciPy starts 1e-4 beside our answer, so that agreeing is
 * its own work. */
static FILE *start_scipy(const struct strike *strike, const struct reading *reading, char *path)
{
    int fd = mkstemp(path);
    assert_true(fd >= 0);
    FILE *out = fdopen(fd, "wb");
    assert_non_null(out);
    size_t begin = (size_t)reading->window_begin_frame, end = (size_t)reading->window_end_frame;
    assert_int_equal(fwrite(strike->samples + begin, sizeof(float), end - begin, out), end - begin);
    assert_int_equal(fclose(out), 0);
    char command[2048];
    int used = snprintf(command, sizeof command, PYTHON " '%s/least_squares.py' %s %.17g",
                        TRUTH_FOLDER, path, strike->rate_hz);
    for (unsigned k = 0; k < reading->mode_count; k++)
        used += snprintf(command + used, sizeof command - (size_t)used, " %.12g %.12g",
                         reading->modes[k].f_hz + 0.02 * reading->modes[k].decay_per_s,
                         reading->modes[k].decay_per_s * 1.02);
    return popen(command, "r");
}

static void compare(struct scene *scene, unsigned long seed)
{
    struct error err = {0};
    struct fit_settings settings = {0};
    struct reading reading;
    assert_true(quick_make(scene, 7.0, seed));
    struct strike *strike = bench_strike(scene, &scene->takes[0]);
    struct fit_workspace *workspace = fit_workspace_create(scene->frame_count, &err);
    assert_non_null(strike);
    assert_non_null(workspace);
    assert_true(fit_strike(workspace, strike, &settings, &reading, &err));
    assert_int_equal(reading.mode_count, scene->mode_count);
    char path[] = "/tmp/wane-truth-XXXXXX";
    FILE *answer = start_scipy(strike, &reading, path);
    assert_non_null(answer);
    for (unsigned k = 0; k < reading.mode_count; k++) {
        char line[128];
        assert_non_null(fgets(line, sizeof line, answer));
        char *rest;
        double f_hz = strtod(line, &rest), decay = strtod(rest, NULL);
        printf("seed %lu: %.10g (u %.1g) Hz %.9g (u %.1g) /s, SciPy %.10g Hz %.9g /s\n", seed,
               reading.modes[k].f_hz, reading.modes[k].f_u_hz, reading.modes[k].decay_per_s,
               reading.modes[k].decay_u_per_s, f_hz, decay);
        CHECK_SHARE(reading.modes[k].f_hz, f_hz, 1e-6);
        CHECK_SHARE(reading.modes[k].decay_per_s, decay, 1e-6);
    }
    assert_int_equal(pclose(answer), 0);
    assert_int_equal(unlink(path), 0);
    fit_workspace_destroy(workspace);
    strike_destroy(strike);
    bench_done(scene);
}

static bool is_possible(void)
{
    if (has_scipy())
        return true;
    printf("SKIPPED: " PYTHON " has no scipy (Debian: python3-scipy)\n");
    return false;
}

/* The noise moves each decay rate by 1e-5 and more of itself, so agreement to 1e-6 says that both
 * found the minimum, not that both found the truth. */
static void a_chord_agrees_with_scipy(void **state)
{
    (void)state;
    if (!is_possible())
        skip();
    for (unsigned long seed = 1; seed <= 3; seed++) {
        struct scene scene;
        quick_begin(&scene, 48000.0, 0.3, 1e-4);
        quick_mode(&scene, 523.0, 4.0, 0.30, 0.2);
        quick_mode(&scene, 1410.0, 7.0, 0.15, 1.3);
        quick_mode(&scene, 2790.0, 11.0, 0.08, -0.7);
        compare(&scene, seed);
    }
}

static void a_doublet_agrees_with_scipy(void **state)
{
    (void)state;
    if (!is_possible())
        skip();
    for (unsigned long seed = 1; seed <= 3; seed++) {
        struct scene scene;
        quick_begin(&scene, 48000.0, 0.3, 3e-5);
        quick_mode(&scene, 880.0, 6.0, 0.30, 0.2);
        quick_mode(&scene, 882.0, 7.0, 0.20, 1.3);
        compare(&scene, seed);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_chord_agrees_with_scipy),
        cmocka_unit_test(a_doublet_agrees_with_scipy),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
