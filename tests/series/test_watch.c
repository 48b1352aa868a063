/* Charts, steps, drifts and gauge studies, against the handbook's examples and what is known of
 * their false alarms. */
#include "wane/gauge.h"
#include "wane/watch.h"

#include "support/near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

struct chance {
    uint64_t state;
};

static double uniform(struct chance *chance)
{
    chance->state = chance->state * 6364136223846793005u + 1442695040888963407u;
    return ((double)(chance->state >> 11) + 0.5) / 9007199254740992.0;
}

static double normal(struct chance *chance)
{
    double radius = sqrt(-2 * log(uniform(chance)));
    return radius * cos(6.283185307179586 * uniform(chance));
}

/* NIST/SEMATECH e-Handbook 6.3.2.2: flow rates; centre 50.81, limits 55.8041 and 45.8159 (with d2
 * rounded to 1.128). */
static void handbook_individuals_chart_is_met(void **state)
{
    (void)state;
    const double flow[] = {49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1};
    struct chart chart;
    assert_true(chart_from_baseline(flow, COUNT(flow), &chart));
    CHECK_NEAR(chart.centre, 50.81, 1e-12);
    CHECK_NEAR(chart.moving_range, 1.8777778, 1e-7);
    CHECK_NEAR(chart.upper, 55.8041, 0.002);
    CHECK_NEAR(chart.lower, 45.8159, 0.002);
    /* D4 = 3.266532 (ASTM MNL 7 and ISO 7870-2 tables, from memory). */
    CHECK_NEAR(chart.range_upper / chart.moving_range, 3.266532, 1e-6);
}

/* Data of SAS/QC User's Guide, IRCHART example (engine vibration); limits computed from them (check
 * values, section 3). */
static void a_second_published_chart_is_met(void **state)
{
    (void)state;
    const double vibration[] = {78.4, 80.1, 84.4, 79.1, 80.4, 83.5, 73.8, 83.5, 75.0, 76.8,
                                70.5, 80.3, 82.4, 79.4, 86.4, 90.5, 77.7, 82.5, 79.9, 83.2};
    struct chart chart;
    assert_true(chart_from_baseline(vibration, COUNT(vibration), &chart));
    CHECK_NEAR(chart.sigma, 4.7203245, 1e-7);
    CHECK_NEAR(chart.upper, 94.550973, 1e-6);
    CHECK_NEAR(chart.lower, 66.229027, 1e-6);
}

static void each_run_rule_is_completed_by_its_pattern(void **state)
{
    (void)state;
    const struct chart chart = {.n = 20, .centre = 0, .sigma = 1, .lower = -3, .upper = 3};
    const double beyond[] = {0, 3.1};
    assert_int_equal(chart_rules(&chart, beyond, 1), RUN_BEYOND_3);
    const double two[] = {2.1, 0, 2.2};
    assert_int_equal(chart_rules(&chart, two, 2), RUN_2_OF_3);
    const double four[] = {-1.1, -1.5, 0.2, -1.2, -1.3};
    assert_int_equal(chart_rules(&chart, four, 4), RUN_4_OF_5);
    const double side[] = {.1, .3, .2, .5, .1, .4, .2, .3};
    assert_int_equal(chart_rules(&chart, side, 7), RUN_8_ON_SIDE);
    const double trend[] = {-.9, -.6, -.3, 0, .3, .6, .9};
    assert_int_equal(chart_rules(&chart, trend, 6), RUN_6_TREND);
    assert_int_equal(chart_rules(&chart, trend, 5), 0);
}

/* e-Handbook 6.3.2: with the four Western Electric rules a chart in control speaks once in 91.75
 * points on average (from memory; Champ and Woodall 1987). */
static void run_rules_speak_by_chance_as_often_as_is_known(void **state)
{
    (void)state;
    const struct chart chart = {.n = 20, .centre = 0, .sigma = 1, .lower = -3, .upper = 3};
    const unsigned western =
        RUN_BEYOND_3 | RUN_2_OF_3 | RUN_4_OF_5 | RUN_8_ON_SIDE; /* without the trend */
    struct chance chance = {1};
    double total = 0;
    const int runs = 4000;
    static double values[5000];
    for (int run = 0; run < runs; run++) {
        for (size_t i = 0; i < COUNT(values); i++) {
            values[i] = normal(&chance);
            if ((chart_rules(&chart, values, i) & western) != 0) {
                total += (double)i + 1;
                break;
            }
        }
    }
    /* One run's length scatters like its mean: 1.5 % for 4000 runs; three of that. */
    CHECK_SHARE(total / runs, 91.75, 0.045);
}

static double mean_run_length(double limit, double shift, int runs, uint64_t seed)
{
    struct chance chance = {seed};
    double total = 0;
    for (int run = 0; run < runs; run++) {
        struct cusum cusum = {0};
        uint64_t from;
        int length = 0;
        do
            length++;
        while (cusum_add(&cusum, shift + normal(&chance), limit, &from) == 0);
        total += length;
    }
    return total / runs;
}

/* Average run lengths of the two-sided CUSUM with k = 0.5: h = 4: 168 in control, 8.38 at a step of
 * one sigma; h = 5: 465 and 10.4 (Montgomery, Introduction to Statistical Quality Control; also
 * e-Handbook 6.3.2.3; from memory). */
static void cusum_run_lengths_are_those_of_the_tables(void **state)
{
    (void)state;
    CHECK_SHARE(mean_run_length(4, 0, 3000, 1), 168, 0.06);
    CHECK_SHARE(mean_run_length(4, 1, 3000, 2), 8.38, 0.04);
    CHECK_SHARE(mean_run_length(5, 0, 3000, 3), 465, 0.06);
    CHECK_SHARE(mean_run_length(5, 1, 3000, 4), 10.4, 0.04);
}

static void a_step_is_said_once_with_size_and_first_strike(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 20; seed++) {
        struct chance chance = {seed};
        static struct watch watch;
        watch_restart(&watch);
        int steps = 0, others = 0;
        for (int i = 0; i < 600; i++) {
            double value = 1441 + 10 * normal(&chance) - (i >= 300 ? 46 : 0);
            struct watch_notice notice;
            watch_add(&watch, 1000 + i, 60.0 * i, value, &notice);
            if (notice.event == WATCH_STEP) {
                steps++;
                assert_true(notice.from_id >= 1298 && notice.from_id <= 1303);
                CHECK_NEAR(notice.change, -46, 4 * notice.change_u + 8);
            }
            others += notice.event == WATCH_DRIFT;
        }
        if (steps != 1 || others != 0)
            fail_msg("seed %d: %d steps, %d drifts", (int)seed, steps, others);
    }
}

static void a_drift_is_said_once_and_not_as_steps(void **state)
{
    (void)state;
    int all_steps = 0;
    for (uint64_t seed = 1; seed <= 20; seed++) {
        struct chance chance = {seed};
        static struct watch watch;
        watch_restart(&watch);
        int steps = 0, drifts = 0;
        for (int i = 0; i < 1500; i++) {
            double time_s = 60.0 * i;
            double value = 881.74 + 0.004 * normal(&chance) - 0.02 * time_s / 86400;
            struct watch_notice notice;
            watch_add(&watch, i, time_s, value, &notice);
            steps += notice.event == WATCH_STEP;
            if (notice.event == WATCH_DRIFT) {
                drifts++;
                CHECK_NEAR(notice.change, -0.02, 4 * notice.change_u);
            }
        }
        all_steps += steps;
        if (drifts != 1)
            fail_msg("seed %d: %d steps, %d drifts", (int)seed, steps, drifts);
    }
    /* A line too short to show yet may be taken for a step now and then. */
    assert_true(all_steps <= 2);
}

/* 1.5 sigma: one strike tells nothing, forty tell it. */
static void a_small_step_is_found_within_sixty_strikes(void **state)
{
    (void)state;
    int found = 0;
    for (uint64_t seed = 1; seed <= 40; seed++) {
        struct chance chance = {seed};
        static struct watch watch;
        watch_restart(&watch);
        for (int i = 0; i < 260; i++) {
            struct watch_notice notice;
            watch_add(&watch, i, 60.0 * i, 100 + normal(&chance) + (i >= 200 ? 1.5 : 0), &notice);
            if (notice.event == WATCH_STEP && i >= 200) {
                found++;
                CHECK_NEAR(notice.change, 1.5, 4 * notice.change_u);
            }
        }
    }
    assert_in_range(found, 38, 40);
}

static void a_quiet_fixture_says_nothing_for_weeks(void **state)
{
    (void)state;
    unsigned said = 0;
    for (uint64_t seed = 1; seed <= 10; seed++) {
        struct chance chance = {seed};
        static struct watch watch;
        watch_restart(&watch);
        /* Two weeks at one strike in two minutes. */
        for (int i = 0; i < 10000; i++) {
            struct watch_notice notice;
            /* One strike in 200 is wild. */
            double wild = uniform(&chance) < 0.005 ? 30 * normal(&chance) : 0;
            watch_add(&watch, i, 120.0 * i, 100 + normal(&chance) + wild, &notice);
            said += notice.event == WATCH_STEP || notice.event == WATCH_DRIFT;
        }
    }
    if (said > 10)
        fail_msg("%u notices in ten quiet fortnights", said);
}

static void equal_values_make_no_limits_until_there_is_a_spread(void **state)
{
    (void)state;
    static struct watch watch;
    watch_restart(&watch);
    struct watch_notice notice;
    for (int i = 0; i < 100; i++) {
        watch_add(&watch, i, i, 5, &notice);
        assert_int_equal(notice.event, WATCH_NOTHING);
    }
    watch_add(&watch, 100, 100, (double)NAN, &notice);
    assert_int_equal(notice.event, WATCH_NOTHING);
}

/* NIST StRD SiRstv as five set-ups of one part; the components by ISO 5725-2 (check values,
 * section 2.3: s_r 0.104076068, s_L 0.01977239, s_R 0.1059376). */
static void silicon_resistivity_gives_the_components_of_iso_5725(void **state)
{
    (void)state;
    const double ohm_cm[25] = {196.3052, 196.1240, 196.1890, 196.2569, 196.3403, 196.3042, 196.3825,
                               196.1669, 196.3257, 196.0422, 196.1303, 196.2005, 196.2889, 196.0343,
                               196.1811, 196.2795, 196.1748, 196.1494, 196.1485, 195.9885, 196.2119,
                               196.1051, 196.1850, 196.0052, 196.2090};
    struct gauge_study study;
    assert_true(gauge_analyze(ohm_cm, 1, 5, 5, &study, NULL));
    CHECK_NEAR(study.mean, 196.189156, 1e-9);
    CHECK_NEAR(study.repeatability.sd, 0.104076068, 1e-9);
    CHECK_NEAR(study.setup.sd, 0.01977239, 1e-8);
    CHECK_NEAR(study.reproducibility.sd, 0.1059376, 1e-7);
    CHECK_SHARE(study.setup_f, 1.18046237440255, 1e-9);
    assert_true(isnan(study.part.sd) && isnan(study.categories));
    /* The interval of s_r: sqrt(20 s^2 / chi2(0.975; 20)) with chi2 34.1696, 9.59078 (tables). */
    CHECK_NEAR(study.repeatability.low, 0.104076068 * sqrt(20 / 34.1696), 1e-6);
    CHECK_NEAR(study.repeatability.high, 0.104076068 * sqrt(20 / 9.59078), 1e-6);
}

static void known_components_come_back_and_intervals_hold(void **state)
{
    (void)state;
    enum { PARTS = 10, SETUPS = 3, STRIKES = 5, STUDIES = 400 };
    static double values[PARTS * SETUPS * STRIKES];
    struct chance chance = {9};
    double part_mean = 0, setup_mean = 0;
    int held[2] = {0, 0};
    for (int study_index = 0; study_index < STUDIES; study_index++) {
        size_t at = 0;
        for (int p = 0; p < PARTS; p++) {
            double part = 3 * normal(&chance);
            for (int s = 0; s < SETUPS; s++) {
                double setup = 0.8 * normal(&chance);
                for (int k = 0; k < STRIKES; k++)
                    values[at++] = 1000 + part + setup + 0.5 * normal(&chance);
            }
        }
        struct gauge_study study;
        assert_true(gauge_analyze(values, PARTS, SETUPS, STRIKES, &study, NULL));
        part_mean += study.part.sd * study.part.sd / STUDIES;
        setup_mean += study.setup.sd * study.setup.sd / STUDIES;
        held[0] += study.repeatability.low <= 0.5 && 0.5 <= study.repeatability.high;
        double gauge = hypot(0.5, 0.8);
        held[1] += study.reproducibility.low <= gauge && gauge <= study.reproducibility.high;
        assert_true(study.part_p < 0.01);
    }
    CHECK_SHARE(part_mean, 9, 0.08); /* sd of one: 47 %; of 400: 2.4 % */
    CHECK_SHARE(setup_mean, 0.64, 0.07);
    /* 95 % of 400: 380 +- 4.4. */
    assert_in_range(held[0], 366, 394);
    assert_in_range(held[1], 362, 398);
}

static void a_study_that_cannot_tell_is_refused_with_what_is_missing(void **state)
{
    (void)state;
    const double values[8] = {1, 2, 3, 4, 5, 6, 7, 8}, same[4] = {1, 1, 2, 2};
    struct gauge_study study;
    struct error err;
    assert_false(gauge_analyze(values, 4, 1, 2, &study, &err));
    assert_non_null(strstr(err.text, "two set-ups"));
    assert_false(gauge_analyze(values, 4, 2, 1, &study, &err));
    assert_non_null(strstr(err.text, "two strikes"));
    assert_false(gauge_analyze(same, 1, 2, 2, &study, &err));
    assert_true(gauge_analyze(values, 2, 2, 2, &study, &err));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(handbook_individuals_chart_is_met),
        cmocka_unit_test(a_second_published_chart_is_met),
        cmocka_unit_test(each_run_rule_is_completed_by_its_pattern),
        cmocka_unit_test(run_rules_speak_by_chance_as_often_as_is_known),
        cmocka_unit_test(cusum_run_lengths_are_those_of_the_tables),
        cmocka_unit_test(a_step_is_said_once_with_size_and_first_strike),
        cmocka_unit_test(a_drift_is_said_once_and_not_as_steps),
        cmocka_unit_test(a_small_step_is_found_within_sixty_strikes),
        cmocka_unit_test(a_quiet_fixture_says_nothing_for_weeks),
        cmocka_unit_test(equal_values_make_no_limits_until_there_is_a_spread),
        cmocka_unit_test(silicon_resistivity_gives_the_components_of_iso_5725),
        cmocka_unit_test(known_components_come_back_and_intervals_hold),
        cmocka_unit_test(a_study_that_cannot_tell_is_refused_with_what_is_missing),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
