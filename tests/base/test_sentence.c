/* What a person is told: seen, colon, what to change; unknown numbers leave no hole. */
#include "wane/sentence.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

static void check_says(const struct reading *reading, enum sentence_body body, const char *expected)
{
    struct text text = {0};
    sentence_append(&text, reading, 48000, body);
    assert_false(text.failed);
    assert_string_equal(text.data == NULL ? "" : text.data, expected);
    text_done(&text);
}

static struct reading with(enum reason reason)
{
    struct reading reading;
    reading_init(&reading);
    reading.reasons = 1U << reason;
    return reading;
}

static void a_good_strike_needs_no_words(void **state)
{
    (void)state;
    struct reading reading;
    reading_init(&reading);
    reading.verdict = VERDICT_GOOD;
    check_says(&reading, SENTENCE_STRUCK, "");
}

static void numbers_come_from_why(void **state)
{
    (void)state;
    struct reading reading = with(REASON_CLIPPED);
    reading.why.clipped_for_s = 3.1e-3;
    check_says(&reading, SENTENCE_STRUCK,
               "The input clipped for 3.1 ms: move the microphone back or tap softer.");
    reading = with(REASON_DOUBLE_HIT);
    reading.why.after_s = 0.021;
    check_says(&reading, SENTENCE_STRUCK,
               "A second blow came 21 ms after the first: let the mallet bounce away.");
    reading.why.after_s = 0.4e-3;
    check_says(&reading, SENTENCE_TANK, "The contact bounced after 0.4 ms: use a faster switch.");
    reading = with(REASON_SAMPLES_LOST);
    reading.why.lost_frames = 480;
    check_says(&reading, SENTENCE_TANK,
               "480 samples (10 ms) were lost in this ring: close other programs, or choose a "
               "longer buffer.");
    reading = with(REASON_NOISY);
    reading.why.noise_dbfs = -38.2;
    check_says(&reading, SENTENCE_STRUCK,
               "The noise is too high for this ring, \u221238 dBFS: tap again when it is quiet, or "
               "bring the microphone closer.");
}

static void two_rates_are_shown_to_the_place_where_they_differ(void **state)
{
    (void)state;
    struct reading reading = with(REASON_NOT_EXPONENTIAL);
    reading.why.early_per_s = 2.4112;
    reading.why.late_per_s = 1.9031;
    check_says(&reading, SENTENCE_STRUCK,
               "The decay slows as it fades, 2.4 /s early and 1.9 /s late: tap softer, or look for "
               "something that touches the part.");
    reading = with(REASON_GLIDING);
    reading.why.early_hz = 882.13;
    reading.why.late_hz = 881.92;
    check_says(&reading, SENTENCE_STRUCK,
               "The frequency moves during the ring, 882.1 Hz early and 881.9 Hz late: tap softer, "
               "or let the part come to the room's temperature.");
}

static void further_reasons_are_named_after_the_first(void **state)
{
    (void)state;
    struct reading reading = with(REASON_CLIPPED);
    reading.reasons |= 1U << REASON_NOISY | 1U << REASON_UNRESOLVED;
    check_says(&reading, SENTENCE_STRUCK,
               "The input clipped: move the microphone back or tap softer. Also: noisy, "
               "unresolved.");
}

static void every_reason_has_a_whole_sentence_without_its_numbers(void **state)
{
    (void)state;
    for (int reason = 0; reason < REASON_COUNT; reason++) {
        for (int body = SENTENCE_STRUCK; body <= SENTENCE_TANK; body++) {
            struct reading reading = with((enum reason)reason);
            struct text text = {0};
            sentence_append(&text, &reading, 48000, (enum sentence_body)body);
            assert_non_null(text.data);
            assert_non_null(strstr(text.data, ": "));
            assert_int_equal(text.data[text.length - 1], '.');
            assert_null(strstr(text.data, "nan"));
            assert_null(strstr(text.data, "  "));
            text_done(&text);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_good_strike_needs_no_words),
        cmocka_unit_test(numbers_come_from_why),
        cmocka_unit_test(two_rates_are_shown_to_the_place_where_they_differ),
        cmocka_unit_test(further_reasons_are_named_after_the_first),
        cmocka_unit_test(every_reason_has_a_whole_sentence_without_its_numbers),
    };
    return cmocka_run_group_tests_name("base.sentence", tests, NULL, NULL);
}
