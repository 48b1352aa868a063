/* Where windows begin and end, lost frames, block sizes, levels. */
#include "support/detect_scene.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#define MOST 32

static double after_s(const struct strike *strike)
{
    return (double)(strike->frame_count - strike->trigger) / strike->rate_hz;
}

static struct strike *only_strike(struct scene *scene, const struct detect_settings *settings)
{
    struct strike *strikes[MOST];
    size_t count = scene_detect(scene, settings, 1000, strikes, MOST);
    assert_int_equal(count, 1);
    return strikes[0];
}

static void check_between(double value, double low, double high, const char *what)
{
    if (!(value >= low && value <= high)) {
        print_error("%s: %.4f is not within %.4f ... %.4f\n", what, value, low, high);
        fail();
    }
}

static void the_window_lasts_seven_time_constants_of_the_slowest_mode(void **state)
{
    (void)state;
    static const double decay[] = {2.2, 5, 20, 60};
    for (size_t i = 0; i < 4; i++) {
        struct scene scene;
        scene_init(&scene, 48000, 8, 100 + i);
        scene_add_white(&scene, 1e-3, 0);
        scene_add_ring(&scene, 1.3, 0.44, 880, decay[i], 0.4);
        scene_add_ring(&scene, 1.3, 0.2, 2380, 5 * decay[i], 0.4);
        struct strike *strike = only_strike(&scene, NULL);
        char what[64];
        snprintf(what, sizeof what, "decay %g/s: alpha T", decay[i]);
        check_between(after_s(strike) * decay[i], 6, 12, what);
        check_between((double)strike->trigger / 48000, 0.4999, 0.5001, "before the onset");
        assert_int_equal(strike->end, STRIKE_END_FADED);
        strike_destroy(strike);
        scene_done(&scene);
    }
}

static void a_weak_slow_mode_keeps_the_window_open(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 8, 110);
    scene_add_white(&scene, 1e-4, 0);
    scene_add_ring(&scene, 1.3, 0.44, 880, 30, 0.4);
    scene_add_ring(&scene, 1.3, 0.014, 1380, 2, 0.4); /* 30 dB below */
    struct strike *strike = only_strike(&scene, NULL);
    check_between(after_s(strike) * 2, 6, 10, "alpha T of the weak mode");
    strike_destroy(strike);
    scene_done(&scene);
}

static void a_quick_tank_closes_within_a_tenth_of_a_second(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 3, 111);
    scene_add_white(&scene, 1e-3, 0);
    scene_add_ring(&scene, 1, 0.4, 3000, 1000, 0);
    static const struct detect_settings automatic = {0};
    struct detector *detector = detect_create(&automatic, 48000, 1, NULL);
    struct strike *strike = NULL;
    size_t at = 0;
    for (; strike == NULL && at < scene.count; at += 48) {
        assert_true(detect_push_block(detector, scene.samples + at, 48, NULL));
        strike = detect_take_strike(detector);
    }
    assert_non_null(strike);
    check_between((double)at / 48000 - 1, 0, 0.1, "seconds from the onset to the strike");
    check_between(after_s(strike), 0.007, 0.06, "seconds kept");
    strike_destroy(strike);
    detect_destroy(detector);
    scene_done(&scene);
}

static void the_longest_window_is_kept(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 8000, 12, 112);
    scene_add_white(&scene, 1e-4, 0);
    scene_add_ring(&scene, 1, 0.4, 440, 0.2, 0);
    struct detect_settings settings = {.window_max_s = 3};
    struct strike *strike = only_strike(&scene, &settings);
    assert_int_equal(strike->end, STRIKE_END_LIMIT);
    check_between(after_s(strike), 2.999, 3.001, "seconds");
    strike_destroy(strike);
    scene_done(&scene);
}

static void the_end_of_the_input_closes_the_strike_at_hand(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 2, 113);
    scene_add_white(&scene, 1e-4, 0);
    scene_add_ring(&scene, 1.9, 0.4, 440, 2, 0);
    struct strike *strike = only_strike(&scene, NULL);
    assert_int_equal(strike->end, STRIKE_END_INPUT);
    assert_int_equal(strike->first_frame + strike->frame_count, scene.count);
    assert_memory_equal(strike->samples, scene.samples + strike->first_frame,
                        strike->frame_count * sizeof(float));
    strike_destroy(strike);
    scene_done(&scene);
}

static void make_mixed(struct scene *scene, uint64_t seed)
{
    scene_init(scene, 48000, 12, seed);
    scene_add_white(scene, 1e-3, 3);
    scene_add_pink(scene, 1e-3);
    double t = 0.3;
    while (t < 11) {
        double amplitude = scene_between(scene, 0.005, 0.3), f = scene_between(scene, 50, 8000);
        scene_add_ring(scene, t, amplitude, f, scene_between(scene, 2, 200), 1);
        scene_add_blow(scene, t, 1e-3, amplitude);
        t += scene_between(scene, 0.05, 1.5);
    }
}

static void the_same_strikes_come_at_any_block_size(void **state)
{
    (void)state;
    struct scene scene;
    make_mixed(&scene, 120);
    struct strike *whole[MOST], *other[MOST];
    size_t count = scene_detect(&scene, NULL, 0, whole, MOST);
    assert_in_range(count, 5, MOST);
    static const size_t blocks[] = {1, 64, 1000, 4096};
    for (size_t b = 0; b < 4; b++) {
        assert_int_equal(scene_detect(&scene, NULL, blocks[b], other, MOST), count);
        for (size_t i = 0; i < count; i++) {
            assert_int_equal(other[i]->first_frame, whole[i]->first_frame);
            assert_int_equal(other[i]->frame_count, whole[i]->frame_count);
            assert_int_equal(other[i]->trigger, whole[i]->trigger);
            assert_int_equal(other[i]->end, whole[i]->end);
            assert_memory_equal(other[i]->samples, whole[i]->samples,
                                whole[i]->frame_count * sizeof(float));
            strike_destroy(other[i]);
        }
    }
    for (size_t i = 0; i < count; i++)
        strike_destroy(whole[i]);
    scene_done(&scene);
}

static void strikes_hold_the_samples_of_their_frames(void **state)
{
    (void)state;
    struct scene scene;
    make_mixed(&scene, 121);
    struct strike *strikes[MOST];
    size_t count = scene_detect(&scene, NULL, 777, strikes, MOST);
    for (size_t i = 0; i < count; i++) {
        assert_memory_equal(strikes[i]->samples, scene.samples + strikes[i]->first_frame,
                            strikes[i]->frame_count * sizeof(float));
        assert_in_range(strikes[i]->trigger, 960, strikes[i]->frame_count - 1);
        strike_destroy(strikes[i]);
    }
    scene_done(&scene);
}

static void lost_frames_inside_a_ring_are_told_and_cut_nothing(void **state)
{
    (void)state;
    static const size_t holes[] = {200, 700, 2000};
    for (size_t h = 0; h < 3; h++) {
        struct scene scene;
        scene_init(&scene, 48000, 6, 130 + h);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1, 0.3, 880, 2.5, 1);
        scene_add_ring(&scene, 1, 0.2, 2317, 4, 1);
        static const struct detect_settings automatic = {0};
        struct detector *detector = detect_create(&automatic, 48000, 1, NULL);
        size_t hole = 48000 * 3 / 2 + 17, rest = hole + holes[h];
        detect_push_block(detector, scene.samples, hole, NULL);
        assert_true(detect_push_gap(detector, holes[h], NULL));
        detect_push_block(detector, scene.samples + rest, scene.count - rest, NULL);
        assert_int_equal(detect_frame_count(detector), scene.count);
        detect_finish(detector, NULL);
        struct strike *strike = detect_take_strike(detector);
        assert_non_null(strike);
        assert_null(detect_take_strike(detector));
        assert_int_equal(strike->lost_count, 1);
        assert_int_equal(strike->lost[0].frames, holes[h]);
        assert_int_equal(strike->first_frame + strike->lost[0].at, hole);
        assert_memory_equal(strike->samples + strike->lost[0].at, scene.samples + rest, 4096);
        strike_destroy(strike);
        detect_destroy(detector);
        scene_done(&scene);
    }
}

/* The driver said nothing: the break alone is no strike, so that the fit can find it. */
static void an_unreported_hole_in_a_ring_is_no_new_strike(void **state)
{
    (void)state;
    for (uint64_t seed = 140; seed < 160; seed++) {
        struct scene scene;
        scene_init(&scene, 48000, 6, seed);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1, 0.3, scene_between(&scene, 200, 2000), 2.5, 1);
        scene_add_ring(&scene, 1, 0.2, scene_between(&scene, 2000, 5000), 4, 1);
        size_t hole = 48000 * 3 / 2, lost = (size_t)scene_between(&scene, 200, 2000);
        memmove(scene.samples + hole, scene.samples + hole + lost,
                (scene.count - hole - lost) * sizeof(float));
        scene.count -= lost;
        struct strike *strike = only_strike(&scene, NULL);
        strike_destroy(strike);
        scene_done(&scene);
    }
}

static void a_gap_in_silence_moves_the_frame_count_only(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 4, 160);
    scene_add_white(&scene, 1e-3, 0);
    scene_add_ring(&scene, 2, 0.3, 880, 25, 1);
    static const struct detect_settings automatic = {0};
    struct detector *detector = detect_create(&automatic, 48000, 1, NULL);
    detect_push_block(detector, scene.samples, 50001, NULL);
    detect_push_gap(detector, 12345, NULL);
    detect_push_block(detector, scene.samples + 50001, scene.count - 50001, NULL);
    detect_finish(detector, NULL);
    struct strike *strike = detect_take_strike(detector);
    assert_non_null(strike);
    assert_null(detect_take_strike(detector));
    assert_int_equal(strike->lost_count, 0);
    check_between(scene_onset_s(strike), 2 + 12345 / 48000.0 - 1e-3, 2 + 12345 / 48000.0 + 1e-3,
                  "onset");
    strike_destroy(strike);
    detect_destroy(detector);
    scene_done(&scene);
}

static void a_forming_copy_holds_what_has_arrived(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 2, 170);
    scene_add_white(&scene, 1e-4, 0);
    scene_add_ring(&scene, 1, 0.3, 880, 2, 1);
    static const struct detect_settings automatic = {0};
    struct detector *detector = detect_create(&automatic, 48000, 1, NULL);
    detect_push_block(detector, scene.samples, 40000, NULL);
    assert_null(detect_copy_forming(detector, 48000));
    detect_push_block(detector, scene.samples + 40000, scene.count - 40000, NULL);
    struct strike *all = detect_copy_forming(detector, 480000);
    struct strike *part = detect_copy_forming(detector, 4800);
    assert_int_equal(part->frame_count, part->trigger + 4800);
    assert_in_range(all->first_frame + all->frame_count, scene.count - 512, scene.count);
    assert_memory_equal(all->samples, scene.samples + all->first_frame,
                        all->frame_count * sizeof(float));
    strike_destroy(all);
    strike_destroy(part);
    detect_destroy(detector);
    scene_done(&scene);
}

static void the_level_tells_noise_and_what_a_tone_needs(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 4, 171);
    scene_add_white(&scene, 1e-3, 0);
    static const struct detect_settings automatic = {0};
    struct detector *detector = detect_create(&automatic, 48000, 1, NULL);
    detect_push_block(detector, scene.samples, scene.count, NULL);
    struct detect_level level;
    detect_level(detector, &level);
    check_between(level.noise_dbfs, -57.5, -56.5, "noise, dBFS (sqrt2 x rms is -57)");
    check_between(level.dbfs, -52, -46, "peak, dBFS");
    /* 17 dB over the noise of one bin of 512 samples, which is 10 log10(512 / 3) under the whole;
     * sqrt2 rms stands 3 dB over rms. */
    check_between(level.trigger_dbfs, -57 - 22.3 + 17 - 1.5, -57 - 22.3 + 17 + 1.5, "trigger");
    assert_false(level.clipped);
    assert_false(level.is_ringing);
    detect_destroy(detector);
    scene_done(&scene);
}

static void wrong_settings_are_refused_in_a_sentence(void **state)
{
    (void)state;
    static const struct detect_settings wrong[] = {
        {.trigger_db = 3},    {.trigger_db = 61},          {.f_low_hz = 5000, .f_high_hz = 100},
        {.f_high_hz = 30000}, {.window_max_s = 0.01},      {.window_max_s = 601},
        {.hold_off_s = -1},   {.trigger_db = (double)NAN},
    };
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        struct error err = {0};
        assert_null(detect_create(&wrong[i], 48000, 1, &err));
        assert_int_equal(err.kind, ERROR_USAGE);
        assert_true(strlen(err.text) > 10);
    }
    struct error err = {0};
    static const struct detect_settings automatic = {0};
    assert_null(detect_create(&automatic, 999, 1, &err));
    assert_null(detect_create(&automatic, (double)NAN, 1, &err));
}

static void every_rate_works(void **state)
{
    (void)state;
    static const double rates[] = {1000, 2000, 4000, 11025, 22050, 384000, 768000};
    for (size_t i = 0; i < sizeof rates / sizeof *rates; i++) {
        struct scene scene;
        scene_init(&scene, rates[i], 3, 180 + i);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1, 0.3, rates[i] / 10, 6, 1);
        struct strike *strike = only_strike(&scene, NULL);
        check_between(scene_onset_s(strike), 1 - 4e-3, 1 + 2e-3, "onset");
        strike_destroy(strike);
        scene_done(&scene);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_window_lasts_seven_time_constants_of_the_slowest_mode),
        cmocka_unit_test(a_weak_slow_mode_keeps_the_window_open),
        cmocka_unit_test(a_quick_tank_closes_within_a_tenth_of_a_second),
        cmocka_unit_test(the_longest_window_is_kept),
        cmocka_unit_test(the_end_of_the_input_closes_the_strike_at_hand),
        cmocka_unit_test(the_same_strikes_come_at_any_block_size),
        cmocka_unit_test(strikes_hold_the_samples_of_their_frames),
        cmocka_unit_test(lost_frames_inside_a_ring_are_told_and_cut_nothing),
        cmocka_unit_test(an_unreported_hole_in_a_ring_is_no_new_strike),
        cmocka_unit_test(a_gap_in_silence_moves_the_frame_count_only),
        cmocka_unit_test(a_forming_copy_holds_what_has_arrived),
        cmocka_unit_test(the_level_tells_noise_and_what_a_tone_needs),
        cmocka_unit_test(wrong_settings_are_refused_in_a_sentence),
        cmocka_unit_test(every_rate_works),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
