/* Which strikes are found, and which noises are not. Scenes are made here; seeds are printed. */
#include "support/detect_scene.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>

#include <cmocka.h>

#define MOST 64

struct found {
    struct strike *strikes[MOST];
    size_t count;
};

static struct found find(struct scene *scene)
{
    struct found found;
    found.count = scene_detect(scene, NULL, 4096, found.strikes, MOST);
    return found;
}

static void done(struct found *found, struct scene *scene)
{
    for (size_t i = 0; i < found->count && i < MOST; i++)
        strike_destroy(found->strikes[i]);
    scene_done(scene);
}

static void check_count(const struct found *found, size_t expected, const char *what)
{
    if (found->count != expected) {
        print_error("%s: %zu strikes, expected %zu\n", what, found->count, expected);
        for (size_t i = 0; i < found->count && i < MOST; i++)
            print_error("  at %.5f s\n", scene_onset_s(found->strikes[i]));
        fail();
    }
}

static void check_onset(const struct strike *strike, double truth_s, double late_s, double early_s,
                        const char *what)
{
    double off_s = scene_onset_s(strike) - truth_s;
    if (off_s > late_s || off_s < -early_s) {
        print_error("%s: onset off by %.3f ms, limits -%.3f and +%.3f ms\n", what, 1e3 * off_s,
                    1e3 * early_s, 1e3 * late_s);
        fail();
    }
}

/* zeta and per-sample SNR (amplitude^2 / 2 over noise power) of a strike that must be found. */
struct row {
    double rate_hz, f_hz, zeta, snr_db;
    double late_s, early_s;
};

static const struct row table[] = {
    {48000, 880, 4e-4, 50, 1e-3, 2e-3},    {48000, 440, 1e-3, 9, 1e-3, 3e-3},
    {48000, 440, 1e-3, 0, 3e-3, 8e-3},     {48000, 2000, 3e-4, -6, 8e-3, 12e-3},
    {48000, 20, 0.01, 40, 2e-3, 2e-3},     {48000, 20, 0.05, 30, 3e-3, 3e-3},
    {48000, 50, 0.02, 20, 3e-3, 3e-3},     {48000, 300, 0.9, 20, 1e-3, 2e-3},
    {48000, 1000, 0.9, 26, 1e-3, 2e-3},    {48000, 1000, 0.3, 12, 1e-3, 2e-3},
    {48000, 5000, 0.1, 20, 1e-3, 2e-3},    {48000, 20000, 0.001, 12, 1e-3, 2e-3},
    {48000, 21000, 1e-4, 30, 1e-3, 2e-3},  {44100, 1200, 0.002, 15, 1e-3, 2e-3},
    {8000, 500, 0.002, 20, 1e-3, 2e-3},    {8000, 3000, 0.01, 25, 1e-3, 2e-3},
    {16000, 1500, 0.05, 25, 1e-3, 2e-3},   {96000, 30000, 0.001, 15, 1e-3, 2e-3},
    {192000, 5000, 0.001, 15, 1e-3, 2e-3}, {192000, 60000, 0.01, 20, 1e-3, 2e-3},
};

static void every_strike_of_the_table_is_found_once(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof table / sizeof *table; i++) {
        const struct row *row = &table[i];
        for (uint64_t seed = 1; seed <= 4; seed++) {
            char what[128];
            snprintf(what, sizeof what, "rate %g f %g zeta %g SNR %g dB seed %d", row->rate_hz,
                     row->f_hz, row->zeta, row->snr_db, (int)seed);
            struct scene scene;
            scene_init(&scene, row->rate_hz, 3, seed + 100 * i);
            double onset_s = scene_between(&scene, 1, 1.2), amplitude = 0.1;
            double phase = scene_between(&scene, -3, 3);
            double decay = row->zeta / sqrt(1 - row->zeta * row->zeta) * 2 * WANE_PI * row->f_hz;
            /* Heavily damped ones start as a switch makes them: at the crest. */
            scene_add_ring(&scene, onset_s, amplitude, row->f_hz, decay,
                           row->zeta > 0.2 ? 0 : phase);
            scene_add_white(&scene, amplitude / sqrt(2) * pow(10, -row->snr_db / 20), 0);
            struct found found = find(&scene);
            check_count(&found, 1, what);
            check_onset(found.strikes[0], onset_s, row->late_s, row->early_s, what);
            done(&found, &scene);
        }
    }
}

static void a_floor_that_drifts_by_24_db_in_a_minute_gives_no_strike(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 60, 11);
    scene_add_white(&scene, 1e-3, 24);
    struct found found = find(&scene);
    check_count(&found, 0, "rising white noise, seed 11");
    done(&found, &scene);
    scene_init(&scene, 48000, 60, 12);
    scene_add_white(&scene, 1e-2, -24);
    scene_add_pink(&scene, 1e-2);
    found = find(&scene);
    check_count(&found, 0, "falling white and pink noise, seed 12");
    done(&found, &scene);
}

static void a_soft_tap_on_a_drifting_floor_is_found(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 30, 13);
    scene_add_white(&scene, 1e-3, 24);
    for (int i = 0; i < 10; i++)
        scene_add_ring(&scene, 2.0 + 2.7 * i, 4e-3 * pow(10, 24 * (2 + 2.7 * i) / 60 / 20), 1500,
                       20, 1);
    struct found found = find(&scene);
    check_count(&found, 10, "12 dB taps, floor rising 24 dB a minute, seed 13");
    done(&found, &scene);
}

static void hum_and_slow_swells_give_no_strike(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 20, 14);
    scene_add_white(&scene, 1e-4, 0);
    for (size_t n = 0; n < scene.count; n++) {
        double t = (double)n / scene.rate_hz, x = 0;
        for (int k = 1; k < 8; k++)
            x += 0.05 / k * sin(2 * WANE_PI * 50 * k * t + k);
        static const double begins_s[] = {3, 9, 15}, lasts_s[] = {1, 0.3, 2};
        for (int k = 0; k < 3; k++) {
            double at = (t - begins_s[k]) / lasts_s[k];
            if (at > 0 && at < 2)
                x += 0.2 * pow(sin(WANE_PI / 2 * at), 2) * sin(2 * WANE_PI * (700 + 300 * k) * t);
        }
        scene.samples[n] += (float)x;
    }
    struct found found = find(&scene);
    check_count(&found, 0, "hum and swells of 1, 0.3 and 2 s, seed 14");
    done(&found, &scene);
}

static void a_beating_ring_is_one_strike(void **state)
{
    (void)state;
    static const double beats_hz[] = {0.7, 1.5, 3, 6, 12, 25, 60};
    for (size_t i = 0; i < sizeof beats_hz / sizeof *beats_hz; i++) {
        char what[64];
        snprintf(what, sizeof what, "beat of %g Hz, seed %zu", beats_hz[i], 20 + i);
        struct scene scene;
        scene_init(&scene, 48000, 8, 20 + i);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1.1, 0.2, 440, 1.2, 0.3);
        scene_add_ring(&scene, 1.1, 0.2, 440 + beats_hz[i], 1.2, 1.3);
        scene_add_ring(&scene, 1.1, 0.02, 1444, 0.8, 1.3);
        struct found found = find(&scene);
        check_count(&found, 1, what);
        done(&found, &scene);
    }
}

static void a_strike_while_the_part_still_rings_is_found(void **state)
{
    (void)state;
    for (uint64_t seed = 31; seed < 35; seed++) {
        struct scene scene;
        scene_init(&scene, 48000, 8, seed);
        scene_add_white(&scene, 1e-4, 0);
        double at_s[5];
        for (int i = 0; i < 5; i++) {
            at_s[i] = 1 + 0.9 * i + scene_between(&scene, 0, 0.3);
            double amplitude = scene_between(&scene, 0.1, 0.3);
            for (int k = 1; k < 4; k++)
                scene_add_ring(&scene, at_s[i], amplitude / k, 700 * k * k, 0.8 * k,
                               scene_between(&scene, -3, 3));
            scene_add_blow(&scene, at_s[i], 1e-3, amplitude / 2);
        }
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "five strikes on a ringing part, seed %d", (int)seed);
        check_count(&found, 5, what);
        for (int i = 0; i < 5; i++) {
            check_onset(found.strikes[i], at_s[i], 1e-3, 2e-3, what);
            assert_int_equal(found.strikes[i]->end, i < 4 ? STRIKE_END_NEXT : STRIKE_END_INPUT);
        }
        done(&found, &scene);
    }
}

/* contract.md: a second blow within 150 ms while the first still rings is one event; later, or
 * once the first has died, it is a strike of its own. */
static void two_taps_on_a_ringing_part_are_one_event(void **state)
{
    (void)state;
    static const double apart_s[] = {0.005, 0.02, 0.05, 0.1, 0.14};
    for (size_t i = 0; i < sizeof apart_s / sizeof *apart_s; i++) {
        struct scene scene;
        scene_init(&scene, 48000, 6, 40 + i);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1, 0.2, 900, 4, 0.3);
        scene_add_ring(&scene, 1 + apart_s[i], 0.15, 900, 4, 1.3);
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "taps %g s apart, seed %zu", apart_s[i], 40 + i);
        check_count(&found, 1, what);
        done(&found, &scene);
    }
}

static void two_taps_on_a_dead_part_are_two_strikes(void **state)
{
    (void)state;
    static const double apart_s[] = {0.02, 0.05, 0.12}, decay[] = {400, 160, 60};
    for (size_t i = 0; i < 3; i++) {
        struct scene scene;
        scene_init(&scene, 48000, 3, 50 + i);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 1, 0.2, 2000, decay[i], 0.3);
        scene_add_ring(&scene, 1 + apart_s[i], 0.2, 2000, decay[i], 0.3);
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "taps %g s apart, decay %g/s, seed %zu", apart_s[i], decay[i],
                 50 + i);
        check_count(&found, 2, what);
        check_onset(found.strikes[0], 1, 1e-3, 1e-3, what);
        check_onset(found.strikes[1], 1 + apart_s[i], 1e-3, 1e-3, what);
        done(&found, &scene);
    }
}

static void ten_strikes_a_second_of_a_short_lived_part_are_found(void **state)
{
    (void)state;
    static const double decay[] = {50, 200, 1000, 4000};
    for (size_t i = 0; i < 4; i++) {
        struct scene scene;
        scene_init(&scene, 48000, 6, 60 + i);
        scene_add_white(&scene, 1e-3, 0);
        for (int k = 0; k < 40; k++)
            scene_add_ring(&scene, 1 + 0.1 * k + scene_between(&scene, 0, 5e-3), 0.3, 1800,
                           decay[i], 0);
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "ten a second, decay %g/s, seed %zu", decay[i], 60 + i);
        check_count(&found, 40, what);
        done(&found, &scene);
    }
}

static void a_record_that_begins_with_the_blow_gives_it(void **state)
{
    (void)state;
    static const double decay[] = {0.6, 2, 9, 60, 300};
    for (size_t i = 0; i < 5; i++) {
        struct scene scene;
        scene_init(&scene, 44100, 4, 70 + i);
        scene_add_white(&scene, 1e-4, 0);
        scene_add_ring(&scene, 0, 0.3, 1318, decay[i], 0.3);
        scene_add_ring(&scene, 0, 0.1, 3618, 3 * decay[i], 0.3);
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "trimmed at the blow, decay %g/s, seed %zu", decay[i], 70 + i);
        check_count(&found, 1, what);
        check_onset(found.strikes[0], 0, 1e-3, 0, what);
        done(&found, &scene);
    }
}

static void noise_or_hum_that_begins_with_the_record_gives_none(void **state)
{
    (void)state;
    for (uint64_t seed = 80; seed < 90; seed++) {
        struct scene scene;
        scene_init(&scene, 48000, 3, seed);
        scene_add_white(&scene, 1e-3, 0);
        scene_add_pink(&scene, 1e-2);
        for (size_t n = 0; n < scene.count; n++)
            scene.samples[n] += (float)(0.1 * sin(2 * WANE_PI * 50 * (double)n / 48000) + 0.05);
        /* The second half of the seeds: digital silence first. */
        for (size_t n = 0; seed >= 85 && n < 20000; n++)
            scene.samples[n] = 0;
        struct found found = find(&scene);
        char what[64];
        snprintf(what, sizeof what, "noise and hum that begin, seed %d", (int)seed);
        check_count(&found, 0, what);
        done(&found, &scene);
    }
}

static void strikes_out_of_digital_silence_are_found(void **state)
{
    (void)state;
    struct scene scene;
    scene_init(&scene, 48000, 8, 91);
    scene_add_ring(&scene, 1, 0.3, 880, 30, 1);
    scene_add_ring(&scene, 3, 0.3, 880, 8, 1);
    scene_add_ring(&scene, 5, 0.3, 880, 3, 1);
    scene_round_16_bit(&scene);
    struct found found = find(&scene);
    check_count(&found, 3, "16 bit without noise");
    for (int i = 0; i < 3; i++)
        check_onset(found.strikes[i], 1 + 2 * i, 1e-3, 1e-3, "16 bit without noise");
    done(&found, &scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_strike_of_the_table_is_found_once),
        cmocka_unit_test(a_floor_that_drifts_by_24_db_in_a_minute_gives_no_strike),
        cmocka_unit_test(a_soft_tap_on_a_drifting_floor_is_found),
        cmocka_unit_test(hum_and_slow_swells_give_no_strike),
        cmocka_unit_test(a_beating_ring_is_one_strike),
        cmocka_unit_test(a_strike_while_the_part_still_rings_is_found),
        cmocka_unit_test(two_taps_on_a_ringing_part_are_one_event),
        cmocka_unit_test(two_taps_on_a_dead_part_are_two_strikes),
        cmocka_unit_test(ten_strikes_a_second_of_a_short_lived_part_are_found),
        cmocka_unit_test(a_record_that_begins_with_the_blow_gives_it),
        cmocka_unit_test(noise_or_hum_that_begins_with_the_record_gives_none),
        cmocka_unit_test(strikes_out_of_digital_silence_are_found),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
