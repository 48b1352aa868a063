/* Modes followed, statistics of a series, limits decided, when to stop. Readings are made here by
 * hand: what is tested is what becomes of them. */
#include "wane/series.h"

#include "support/near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include <cmocka.h>

/* Normal deviates from a seed: Box and Muller 1958 on a 64-bit congruence (Knuth, MMIX). */
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

static void add_mode(struct reading *reading, const char *label, double f_hz, double decay_per_s,
                     double level_dbfs)
{
    struct mode *mode = &reading->modes[reading->mode_count++];
    memset(mode, 0, sizeof *mode);
    snprintf(mode->label, sizeof mode->label, "%s", label);
    mode->f_hz = f_hz;
    mode->f_u_hz = 1e-4;
    mode->decay_per_s = decay_per_s;
    mode->decay_u_per_s = decay_per_s * 1e-3;
    mode->level_dbfs = level_dbfs;
    double natural = hypot(6.283185307179586 * f_hz, decay_per_s);
    mode->zeta = decay_per_s / natural;
    mode->zeta_u = mode->zeta * 1e-3;
    mode->q = natural / (2 * decay_per_s);
    mode->q_u = mode->q * 1e-3;
    mode->t60_s = log(1000) / decay_per_s;
    mode->t60_u_s = mode->t60_s * 1e-3;
}

static struct reading good_reading(void)
{
    struct reading reading;
    reading_init(&reading);
    reading.verdict = VERDICT_GOOD;
    return reading;
}

static struct reading goblet(double shift)
{
    struct reading reading = good_reading();
    add_mode(&reading, "1a", 881.741 * shift, 2.0, -10);
    add_mode(&reading, "1b", 884.062 * shift, 2.1, -14);
    add_mode(&reading, "2", 2031.45 * shift, 6.5, -20);
    return reading;
}

static void drop_mode(struct reading *reading, unsigned index)
{
    memmove(&reading->modes[index], &reading->modes[index + 1],
            (reading->mode_count - index - 1) * sizeof reading->modes[0]);
    reading->mode_count--;
}

static void a_missing_mode_is_a_gap_and_shifts_nothing(void **state)
{
    (void)state;
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, NULL);
    for (int i = 0; i < 4; i++) {
        struct reading reading = goblet(1 + 1e-6 * i);
        tracks_follow(&tracks, &reading, true, modes);
        assert_true(modes[0] == 0 && modes[1] == 1 && modes[2] == 2);
    }
    assert_int_equal(tracks.count, 3);
    for (unsigned missing = 0; missing < 3; missing++) {
        struct reading reading = goblet(1);
        drop_mode(&reading, missing);
        tracks_follow(&tracks, &reading, false, modes);
        for (unsigned t = 0; t < 3; t++)
            assert_int_equal(modes[t], t == missing ? -1 : t < missing ? (int)t : (int)t - 1);
    }
}

static void a_doublet_keeps_its_halves_when_the_part_warms_or_is_mounted_anew(void **state)
{
    (void)state;
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, NULL);
    /* The halves lie 2.6e-3 apart. Warming by 1e-5 a strike passes that in 300 strikes. */
    double shift = 1;
    for (int i = 0; i < 600; i++, shift *= 1 - 1e-5) {
        struct reading reading = goblet(shift);
        tracks_follow(&tracks, &reading, true, modes);
        assert_true(modes[0] == 0 && modes[1] == 1 && modes[2] == 2);
    }
    /* Mounted anew: all jump by 3e-3, more than the halves are apart. */
    struct reading jumped = goblet(shift * 1.003);
    tracks_follow(&tracks, &jumped, true, modes);
    assert_true(modes[0] == 0 && modes[1] == 1 && modes[2] == 2);
    assert_int_equal(tracks.count, 3);
}

static void a_stray_mode_does_not_take_a_missing_ones_place(void **state)
{
    (void)state;
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, NULL);
    for (int i = 0; i < 4; i++) {
        struct reading reading = goblet(1 + 1e-6 * i);
        tracks_follow(&tracks, &reading, true, modes);
    }
    /* 1a is missing, and something stray rings just above 1b. */
    struct reading reading = good_reading();
    add_mode(&reading, "1", 884.062, 2.1, -14);
    add_mode(&reading, "2", 886.0, 9, -30);
    add_mode(&reading, "3", 2031.45, 6.5, -20);
    tracks_follow(&tracks, &reading, true, modes);
    assert_true(modes[0] == -1 && modes[1] == 0 && modes[2] == 2);
    assert_int_equal(tracks.count, 4);
    assert_int_equal(modes[3], 1);
    assert_string_equal(tracks.tracks[3].label, "4");
}

static const char goblet_sheet[] = "[part]\nname = goblet\n"
                                   "[mode 1a]\nband_hz = 870 ... 900\nf_hz = 880 ... 884\n"
                                   "q = 1350 ... 1600\nwanted_q = 2.5 %\nspread_q = 10 %\n"
                                   "[mode 1b]\nband_hz = 870 ... 900\n"
                                   "[mode 2]\nband_hz = 2000 ... 2060\nq = 980 ... 1150\n"
                                   "[split 1a 1b]\nf_hz = 2.300 ... 2.322\n";

static struct part goblet_part(void)
{
    struct part part;
    struct error err = {0};
    if (!part_read("goblet.ini", goblet_sheet, strlen(goblet_sheet), &part, NULL, &err))
        fail_msg("%s", err.text);
    return part;
}

static void bands_find_the_strongest_and_a_doublet_in_one_band(void **state)
{
    (void)state;
    struct part part = goblet_part();
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, &part);
    struct reading reading = goblet(1);
    add_mode(&reading, "3", 2010, 9, -50); /* weaker, in the same band as mode 2 */
    add_mode(&reading, "4", 3641, 9, -25); /* in no band */
    tracks_follow(&tracks, &reading, true, modes);
    assert_true(modes[0] == 0 && modes[1] == 1 && modes[2] == 2);
    assert_int_equal(tracks.count, 3);
}

/* A series of strikes around given figures; the seed is in the failure's line. */
static struct series *tapped(const struct part *part, unsigned n, double f_sd, double q_sd_share,
                             struct chance *chance)
{
    struct series *series = series_create(part, 0, NULL);
    assert_non_null(series);
    for (unsigned i = 0; i < n; i++) {
        struct reading reading = goblet(1);
        for (unsigned k = 0; k < 3; k++) {
            struct mode old = reading.modes[k];
            reading.mode_count = k;
            double common = f_sd * normal(chance);
            add_mode(&reading, old.label, old.f_hz + common,
                     old.decay_per_s * (1 + q_sd_share * normal(chance)),
                     old.level_dbfs + normal(chance));
        }
        assert_true(series_add(series, (int64_t)i + 1, i, &reading, false, NULL));
    }
    return series;
}

static void statistics_are_those_of_the_values(void **state)
{
    (void)state;
    struct series *series = series_create(NULL, 0, NULL);
    /* The decays of NIST's NumAcc1 (10000001, 10000003, 10000002), as decay rates. */
    const double decays[] = {10000001, 10000003, 10000002};
    for (int i = 0; i < 3; i++) {
        struct reading reading = good_reading();
        add_mode(&reading, "1", 1000, decays[i], -10);
        assert_true(series_add(series, i + 1, i, &reading, false, NULL));
    }
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    assert_true(series_summarize(series, summary, NULL));
    const struct series_stat *decay = &summary->modes[0].stats[QUANTITY_DECAY_PER_S];
    CHECK_NEAR(decay->spread.mean, 10000002, 0);
    CHECK_NEAR(decay->spread.sd, 1, 1e-9);
    CHECK_NEAR(decay->spread.half_width, 4.302653 / sqrt(3), 1e-6);
    CHECK_NEAR(decay->median, 10000002, 0);
    CHECK_SHARE(decay->within_u, 10000.002, 1e-6);
    free(summary);
    series_destroy(series);
}

static void only_good_strikes_that_nobody_set_aside_count(void **state)
{
    (void)state;
    struct series *series = series_create(NULL, 0, NULL);
    for (int i = 0; i < 6; i++) {
        struct reading reading = goblet(1 + 1e-6 * i);
        if (i == 1)
            reading.verdict = VERDICT_DOUBTFUL;
        if (i == 2)
            reading.verdict = VERDICT_REJECTED;
        assert_true(series_add(series, 10 * i, i, &reading, i == 3, NULL));
    }
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    assert_true(series_summarize(series, summary, NULL));
    assert_int_equal(summary->count.strikes, 6);
    assert_int_equal(summary->count.counted, 3);
    assert_int_equal(summary->count.doubtful, 1);
    assert_int_equal(summary->count.rejected, 1);
    assert_int_equal(summary->count.set_aside, 1);
    assert_int_equal(summary->modes[0].n, 3);
    assert_true(series_change(series, 30, NULL, false));
    assert_false(series_change(series, 31, NULL, false));
    assert_true(series_summarize(series, summary, NULL));
    assert_int_equal(summary->count.counted, 4);
    free(summary);
    series_destroy(series);
}

static void an_odd_strike_is_marked_kept_and_told_without(void **state)
{
    (void)state;
    struct chance chance = {7};
    struct part part = goblet_part();
    struct series *series = tapped(&part, 9, 0.003, 0.01, &chance);
    struct reading odd = goblet(1);
    odd.modes[0].decay_per_s *= 1.15;
    assert_true(series_change(series, 7, &odd, false));
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    assert_true(series_summarize(series, summary, NULL));
    const struct series_stat *q = &summary->modes[0].stats[QUANTITY_Q];
    assert_int_equal(q->odd, 1);
    assert_true(series_is_odd(series, 7));
    assert_false(series_is_odd(series, 6));
    assert_int_equal(q->spread.n, 9);
    assert_true(q->sd_without_odd < q->spread.sd / 2);
    assert_true(q->more > q->more_without_odd);
    assert_true(q->ratio > 2);
    free(summary);
    series_destroy(series);
}

/* By hand: t(0.975, N - 1) sd / sqrt N. For sd 1 and half-width 1: N 7 (2.447 / 2.646 = 0.925; N 6:
 * 2.571 / 2.449 = 1.05). */
static void further_strikes_are_counted_by_students_interval(void **state)
{
    (void)state;
    assert_int_equal(strikes_more(2, 1, 1), 5);
    assert_int_equal(strikes_more(6, 1, 1), 1);
    assert_int_equal(strikes_more(7, 1, 1), 0);
    assert_int_equal(strikes_more(2, 1e-9, 1), 1); /* two that agree are luck */
    assert_int_equal(strikes_more(10, 1, 0.01), SERIES_MORE_MAX);
    assert_int_equal(strikes_more(1, 1, 1), -1);
    assert_int_equal(strikes_more(5, 1, 0), -1);
}

/* Guard bands on both sides of each limit, as ISO 14253-1 has them. */
static void a_limit_within_the_uncertainty_is_not_decided(void **state)
{
    (void)state;
    const struct part_range range = {true, true, 1350, 1600};
    assert_int_equal(decide(&range, 1427, 44), DECISION_INSIDE);
    assert_int_equal(decide(&range, 1380, 44), DECISION_OPEN);
    assert_int_equal(decide(&range, 1320, 44), DECISION_OPEN);
    assert_int_equal(decide(&range, 1300, 44), DECISION_OUTSIDE);
    assert_int_equal(decide(&range, 1700, 44), DECISION_OUTSIDE);
    assert_int_equal(decide(&range, 1427, 400), DECISION_OPEN);
    assert_int_equal(decide(&range, (double)NAN, 1), DECISION_OPEN);
    const struct part_range none = {0};
    assert_int_equal(decide(&none, 5, 1), DECISION_NONE);
    assert_int_equal(decision_join(DECISION_INSIDE, DECISION_OPEN), DECISION_OPEN);
    assert_int_equal(decision_join(DECISION_OUTSIDE, DECISION_OPEN), DECISION_OUTSIDE);
}

static const struct limit_result *find_limit(const struct limit_result *results, unsigned count,
                                             const char *label, enum limit_kind kind,
                                             enum quantity quantity)
{
    for (unsigned i = 0; i < count; i++)
        if (strcmp(results[i].label, label) == 0 && results[i].kind == kind &&
            results[i].quantity == quantity)
            return &results[i];
    fail_msg("no limit on %s", label);
    return NULL;
}

static void a_strike_and_a_series_are_held_against_the_sheet(void **state)
{
    (void)state;
    struct part part = goblet_part();
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, &part);
    struct reading reading = goblet(1);
    tracks_follow(&tracks, &reading, true, modes);
    static struct limit_result results[LIMITS_MAX];
    enum decision all;
    unsigned count = decide_strike(&part, modes, &reading, 50, results, &all);
    assert_int_equal(count, 4);
    /* f with 50 ppm of clock: 0.044 Hz, twice; inside 880 ... 884 all the same. */
    const struct limit_result *f = find_limit(results, count, "1a", LIMIT_VALUE, QUANTITY_F_HZ);
    CHECK_NEAR(f->half_width, 2 * hypot(1e-4, 881.741 * 5e-5), 1e-9);
    assert_int_equal(f->decision, DECISION_INSIDE);
    assert_int_equal(find_limit(results, count, "1a 1b", LIMIT_SPLIT, QUANTITY_F_HZ)->decision,
                     DECISION_INSIDE);
    /* Q of mode 2 is 981.9 +- 0.98 against 980 ... 1150: the guard band holds the limit. */
    assert_int_equal(find_limit(results, count, "2", LIMIT_VALUE, QUANTITY_Q)->decision,
                     DECISION_OPEN);
    assert_int_equal(all, DECISION_OPEN);

    struct chance chance = {3};
    struct series *series = tapped(&part, 12, 0.003, 0.004, &chance);
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    assert_true(series_summarize(series, summary, NULL));
    assert_int_equal(summary->limit_count, 5);
    const struct limit_result *q =
        find_limit(summary->limits, summary->limit_count, "1a", LIMIT_VALUE, QUANTITY_Q);
    /* Guard 2: the coverage of two sigma with 11 degrees of freedom. */
    const struct sample_spread *spread = &summary->modes[0].stats[QUANTITY_Q].spread;
    CHECK_SHARE(q->half_width, coverage_factor(erf(sqrt(2.0)), 11) * spread->mean_u, 1e-9);
    assert_int_equal(q->decision, DECISION_INSIDE);
    assert_int_equal(
        find_limit(summary->limits, summary->limit_count, "1a", LIMIT_SPREAD, QUANTITY_Q)->decision,
        DECISION_INSIDE);
    assert_int_equal(summary->more, 0);
    free(summary);
    series_destroy(series);
}

static void a_missing_mode_leaves_its_limit_open(void **state)
{
    (void)state;
    struct part part = goblet_part();
    struct tracks tracks;
    int modes[SERIES_TRACKS_MAX];
    tracks_init(&tracks, &part);
    struct reading reading = goblet(1);
    drop_mode(&reading, 2);
    tracks_follow(&tracks, &reading, true, modes);
    static struct limit_result results[LIMITS_MAX];
    enum decision all;
    unsigned count = decide_strike(&part, modes, &reading, 0, results, &all);
    assert_int_equal(find_limit(results, count, "2", LIMIT_VALUE, QUANTITY_Q)->decision,
                     DECISION_OPEN);
}

static void warming_and_strike_force_are_found_and_chance_is_not(void **state)
{
    (void)state;
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    unsigned false_trends = 0;
    for (uint64_t seed = 1; seed <= 40; seed++) {
        struct chance chance = {seed};
        struct series *series = tapped(NULL, 20, 0.003, 0.01, &chance);
        assert_true(series_summarize(series, summary, NULL));
        for (unsigned q = 0; q < QUANTITY_COUNT; q++)
            false_trends += summary->modes[0].stats[q].has_trend;
        series_destroy(series);
    }
    /* 40 series, p < 0.001 each for f and for the decay (the others say the same): 0.08 expected.
     */
    assert_true(false_trends <= 4);

    struct chance chance = {11};
    struct series *series = series_create(NULL, 0, NULL);
    for (int i = 0; i < 20; i++) {
        double level = -20 + 3 * normal(&chance);
        struct reading reading = good_reading();
        add_mode(&reading, "1", 880 - 0.002 * i + 0.001 * normal(&chance),
                 2.0 + 0.01 * (level + 20) + 0.005 * normal(&chance), level);
        assert_true(series_add(series, i, i, &reading, false, NULL));
    }
    assert_true(series_summarize(series, summary, NULL));
    const struct series_stat *f = &summary->modes[0].stats[QUANTITY_F_HZ];
    assert_true(f->has_trend && !f->has_force);
    CHECK_NEAR(f->trend.slope, -0.002, 4 * f->trend.slope_u);
    const struct series_stat *decay = &summary->modes[0].stats[QUANTITY_DECAY_PER_S];
    assert_true(decay->has_force && !decay->has_trend);
    CHECK_NEAR(decay->force.slope, 0.01, 4 * decay->force.slope_u);
    free(summary);
    series_destroy(series);
}

static void two_series_of_one_part_agree_and_of_two_differ(void **state)
{
    (void)state;
    struct chance chance = {5};
    struct series_summary *first = malloc(sizeof *first), *second = malloc(sizeof *second);
    static struct mode_difference differences[SERIES_TRACKS_MAX * QUANTITY_COUNT];
    assert_true(first != NULL && second != NULL);
    struct series *a = tapped(NULL, 10, 0.003, 0.01, &chance);
    struct series *b = tapped(NULL, 12, 0.003, 0.01, &chance);
    assert_true(series_summarize(a, first, NULL) && series_summarize(b, second, NULL));
    unsigned count = series_compare(first, second, differences);
    assert_int_equal(count, 3 * QUANTITY_COUNT);
    for (unsigned i = 0; i < count; i++)
        assert_false(differences[i].is_more);
    second->modes[0].stats[QUANTITY_F_HZ].spread.mean += 0.02;
    assert_int_equal(series_compare(first, second, differences), count);
    assert_true(differences[0].is_more && differences[0].quantity == QUANTITY_F_HZ);
    CHECK_NEAR(differences[0].difference.difference, 0.02, 4 * differences[0].difference.u);
    series_destroy(a);
    series_destroy(b);
    free(first);
    free(second);
}

static void json_has_no_numbers_that_are_none(void **state)
{
    (void)state;
    struct part part = goblet_part();
    struct series *series = series_create(&part, 0, NULL);
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    for (int n = 0; n < 3; n++) {
        assert_true(series_summarize(series, summary, NULL));
        struct text text = {0};
        struct json_writer json = {.text = &text};
        json_open_object(&json, NULL);
        series_write_json(&json, "statistics", series, summary);
        json_close_object(&json);
        assert_non_null(text.data);
        assert_null(strstr(text.data, "nan"));
        assert_null(strstr(text.data, "inf"));
        assert_non_null(strstr(text.data, "\"lead\":\"1a\""));
        text_done(&text);
        struct reading reading = goblet(1);
        assert_true(series_add(series, n + 1, n, &reading, false, NULL));
    }
    free(summary);
    series_destroy(series);
}

static void a_full_series_forgets_the_oldest_and_says_how_many(void **state)
{
    (void)state;
    struct series *series = series_create(NULL, 0, NULL);
    struct reading reading = goblet(1);
    for (int i = 0; i < SERIES_STRIKES_MAX + 1; i++)
        assert_true(series_add(series, i, i, &reading, false, NULL));
    assert_false(series_change(series, 0, NULL, true));
    assert_true(series_change(series, SERIES_STRIKES_MAX, NULL, true));
    struct series_summary *summary = malloc(sizeof *summary);
    assert_non_null(summary);
    assert_true(series_summarize(series, summary, NULL));
    assert_int_equal(summary->count.forgotten, SERIES_STRIKES_MAX / 4);
    assert_int_equal(summary->count.strikes, SERIES_STRIKES_MAX + 1 - SERIES_STRIKES_MAX / 4);
    free(summary);
    series_destroy(series);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_missing_mode_is_a_gap_and_shifts_nothing),
        cmocka_unit_test(a_doublet_keeps_its_halves_when_the_part_warms_or_is_mounted_anew),
        cmocka_unit_test(a_stray_mode_does_not_take_a_missing_ones_place),
        cmocka_unit_test(bands_find_the_strongest_and_a_doublet_in_one_band),
        cmocka_unit_test(statistics_are_those_of_the_values),
        cmocka_unit_test(only_good_strikes_that_nobody_set_aside_count),
        cmocka_unit_test(an_odd_strike_is_marked_kept_and_told_without),
        cmocka_unit_test(further_strikes_are_counted_by_students_interval),
        cmocka_unit_test(a_limit_within_the_uncertainty_is_not_decided),
        cmocka_unit_test(a_strike_and_a_series_are_held_against_the_sheet),
        cmocka_unit_test(a_missing_mode_leaves_its_limit_open),
        cmocka_unit_test(warming_and_strike_force_are_found_and_chance_is_not),
        cmocka_unit_test(two_series_of_one_part_agree_and_of_two_differ),
        cmocka_unit_test(json_has_no_numbers_that_are_none),
        cmocka_unit_test(a_full_series_forgets_the_oldest_and_says_how_many),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
