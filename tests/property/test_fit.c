/* What must not change a reading, and what must change it by just so much. */
#include "families.h"
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

static unsigned long seed_of_run(void)
{
    const char *word = getenv("WANE_SEED");
    unsigned long seed = word ? strtoul(word, NULL, 10) : 3;
    printf("seed %lu (WANE_SEED sets it)\n", seed);
    return seed;
}

/* Three modes at 60 dB over the noise, a light blow of no duration. */
static void make_chord(struct scene *scene, double onset, unsigned long seed)
{
    quick_begin(scene, 48000.0, onset, 2e-4);
    quick_mode(scene, 523.0, 4.0, 0.30, 0.2);
    quick_mode(scene, 1410.0, 7.0, 0.15, 1.3);
    quick_mode(scene, 2790.0, 11.0, 0.08, -0.7);
    assert_true(quick_make(scene, 7.0, seed));
}

static void read_take(const struct scene *scene, struct reading *out)
{
    struct fit_settings settings = {0};
    assert_true(quick_read(scene, &scene->takes[0], &settings, out));
    assert_int_equal(out->mode_count, scene->mode_count);
}

/* share: of one u. */
static void check_same_modes(const struct reading *is, const struct reading *was, double share)
{
    assert_int_equal(is->mode_count, was->mode_count);
    for (unsigned k = 0; k < was->mode_count; k++) {
        CHECK_NEAR(is->modes[k].f_hz, was->modes[k].f_hz, share * was->modes[k].f_u_hz);
        CHECK_NEAR(is->modes[k].decay_per_s, was->modes[k].decay_per_s,
                   share * was->modes[k].decay_u_per_s);
        CHECK_SHARE(is->modes[k].f_u_hz, was->modes[k].f_u_hz, 0.1);
        CHECK_SHARE(is->modes[k].decay_u_per_s, was->modes[k].decay_u_per_s, 0.1);
    }
}

static void scaled_samples_move_only_the_levels(void **state)
{
    (void)state;
    static const double scales[] = {0.5, 0.25, 0.0625, 1.5625e-2};
    struct scene scene;
    struct reading was;
    make_chord(&scene, 0.3, seed_of_run());
    read_take(&scene, &was);
    for (size_t i = 0; i < sizeof scales / sizeof scales[0]; i++) {
        struct scene scaled = scene;
        struct reading is;
        scaled.samples = malloc(scene.frame_count * sizeof *scaled.samples);
        assert_non_null(scaled.samples);
        /* Powers of two: the samples keep every bit. */
        for (size_t n = 0; n < scene.frame_count; n++)
            scaled.samples[n] = (float)scales[i] * scene.samples[n];
        read_take(&scaled, &is);
        free(scaled.samples);
        check_same_modes(&is, &was, 1e-3);
        double moved_db = 20.0 * log10(scales[i]);
        CHECK_NEAR(is.peak_dbfs, was.peak_dbfs + moved_db, 1e-6);
        CHECK_NEAR(is.noise_dbfs, was.noise_dbfs + moved_db, 1e-3);
        CHECK_NEAR(is.snr_db, was.snr_db, 1e-3);
        CHECK_NEAR(is.onset_frame, was.onset_frame, 1e-3);
        for (unsigned k = 0; k < was.mode_count; k++) {
            CHECK_NEAR(is.modes[k].level_dbfs, was.modes[k].level_dbfs + moved_db, 1e-4);
            CHECK_NEAR(is.modes[k].phase_rad, was.modes[k].phase_rad, 1e-3);
        }
        assert_int_equal(is.verdict, was.verdict);
    }
    bench_done(&scene);
}

/* The same samples with less of the quiet before them. */
static void an_onset_moved_by_frames_moves_nothing_else(void **state)
{
    (void)state;
    static const size_t cuts[] = {1, 333, 4096};
    struct scene scene;
    struct reading was;
    make_chord(&scene, 0.3, seed_of_run());
    read_take(&scene, &was);
    for (size_t i = 0; i < sizeof cuts / sizeof cuts[0]; i++) {
        struct scene cut = scene;
        struct reading is;
        cut.takes[0].begin += cuts[i];
        read_take(&cut, &is);
        check_same_modes(&is, &was, 0.05);
        CHECK_NEAR(is.onset_frame, was.onset_frame - (double)cuts[i], 0.05);
        for (unsigned k = 0; k < was.mode_count; k++)
            CHECK_NEAR(is.modes[k].level_dbfs, was.modes[k].level_dbfs, 0.01);
    }
    bench_done(&scene);
}

/* The same ring begun a fraction of a frame later, in the same noise: f and decay stay within what
 * noise allows. */
static void an_onset_between_frames_moves_phase_and_onset(void **state)
{
    (void)state;
    unsigned long seed = seed_of_run();
    for (unsigned i = 0; i < 5; i++) {
        struct scene scene;
        struct reading is;
        double onset = 0.05 + 0.2 * i;
        make_chord(&scene, onset, seed);
        read_take(&scene, &is);
        CHECK_NEAR(is.onset_frame, scene.onset_frame, 1.0);
        for (unsigned k = 0; k < scene.mode_count; k++) {
            CHECK_NEAR(is.modes[k].f_hz, scene.modes[k].f_hz, 4.0 * is.modes[k].f_u_hz);
            CHECK_NEAR(is.modes[k].decay_per_s, scene.modes[k].decay_per_s,
                       4.0 * is.modes[k].decay_u_per_s);
        }
        bench_done(&scene);
    }
}

static void a_doubled_rate_label_doubles_f_and_decay(void **state)
{
    (void)state;
    struct scene scene;
    struct reading was, is;
    make_chord(&scene, 0.3, seed_of_run());
    read_take(&scene, &was);
    struct scene doubled = scene;
    doubled.rate_hz = 2.0 * scene.rate_hz;
    read_take(&doubled, &is);
    for (unsigned k = 0; k < was.mode_count; k++) {
        CHECK_NEAR(0.5 * is.modes[k].f_hz, was.modes[k].f_hz, 0.1 * was.modes[k].f_u_hz);
        CHECK_NEAR(0.5 * is.modes[k].decay_per_s, was.modes[k].decay_per_s,
                   0.1 * was.modes[k].decay_u_per_s);
        CHECK_NEAR(is.modes[k].q, was.modes[k].q, 0.1 * was.modes[k].q_u);
    }
    bench_done(&scene);
}

static void added_hum_leaves_the_modes_within_their_uncertainty(void **state)
{
    (void)state;
    unsigned long seed = seed_of_run();
    for (unsigned i = 0; i < 4; i++) {
        struct scene scene;
        struct reading was, is;
        make_chord(&scene, 0.3, seed + i);
        read_take(&scene, &was);
        double mains_hz = i % 2 ? 60.1 : 49.93;
        for (unsigned h = 1; h <= 5; h += 2)
            for (size_t n = 0; n < scene.frame_count; n++)
                scene.samples[n] += (float)(0.1 / h *
                                            cos(2.0 * WANE_PI * mains_hz * h * (double)n / 48000.0 +
                                                0.7 * (i + h)));
        read_take(&scene, &is);
        check_same_modes(&is, &was, 1.0);
        bench_done(&scene);
    }
}

static void the_same_strike_gives_the_same_bits(void **state)
{
    (void)state;
    unsigned long seed = seed_of_run();
    static const char *const names[] = {"chord", "doublet", "attack", "tank", "hum"};
    struct error err = {0};
    struct fit_workspace *used = fit_workspace_create(100000, &err);
    assert_non_null(used);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        struct scene scene;
        struct fit_settings settings = {0};
        /* Wiped, so that padding compares equal. */
        struct reading first, second;
        memset(&first, 0, sizeof first);
        memset(&second, 0, sizeof second);
        assert_true(family_make(family_find(names[i]), seed, 0, &scene));
        struct strike *strike = bench_strike(&scene, &scene.takes[0]);
        struct fit_workspace *fresh = fit_workspace_create(scene.frame_count, &err);
        assert_non_null(strike);
        assert_non_null(fresh);
        assert_true(fit_strike(fresh, strike, &settings, &first, &err));
        /* A workspace that has read other strikes before leaves no trace of them. */
        assert_true(fit_strike(used, strike, &settings, &second, &err));
        assert_int_equal(first.mode_count, second.mode_count);
        assert_memory_equal(&first.onset_frame, &second.onset_frame, sizeof first.onset_frame);
        assert_memory_equal(first.modes, second.modes, first.mode_count * sizeof first.modes[0]);
        assert_int_equal(first.reasons, second.reasons);
        fit_workspace_destroy(fresh);
        strike_destroy(strike);
        bench_done(&scene);
    }
    fit_workspace_destroy(used);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(scaled_samples_move_only_the_levels),
        cmocka_unit_test(an_onset_moved_by_frames_moves_nothing_else),
        cmocka_unit_test(an_onset_between_frames_moves_phase_and_onset),
        cmocka_unit_test(a_doubled_rate_label_doubles_f_and_decay),
        cmocka_unit_test(added_hum_leaves_the_modes_within_their_uncertainty),
        cmocka_unit_test(the_same_strike_gives_the_same_bits),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
