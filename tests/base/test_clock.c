/* Times as text, against examples of RFC 3339 section 5.8 and against the C library. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "wane/clock.h"

#include <string.h>
#include <time.h>

static int64_t parsed(const char *text)
{
    int64_t ms = -1;
    if (!clock_parse_utc(text, &ms))
        fail_msg("%s was refused", text);
    return ms;
}

/* RFC 3339, section 5.8. The first and second are given there with their meaning in UTC; the leap
 * second of 1990 is the next day's first second in POSIX time. */
static void examples_of_rfc_3339_are_understood(void **state)
{
    (void)state;
    assert_true(parsed("1985-04-12T23:20:50.52Z") == INT64_C(482196050520));
    assert_true(parsed("1996-12-19T16:39:57-08:00") == parsed("1996-12-20T00:39:57Z"));
    assert_true(parsed("1990-12-31T23:59:60Z") == parsed("1991-01-01T00:00:00Z"));
    assert_true(parsed("1990-12-31T15:59:60-08:00") == parsed("1990-12-31T23:59:60Z"));
}

static void a_time_survives_text_and_back(void **state)
{
    (void)state;
    static const int64_t times_ms[] = {0,
                                       1,
                                       999,
                                       INT64_C(951782399999), /* 2000-02-28T23:59:59.999Z */
                                       INT64_C(951868800000), /* 2000-03-01 */
                                       INT64_C(1796134298123),
                                       INT64_C(4107542400000), /* 2100-03-01 */
                                       INT64_C(253402300799999)};
    for (size_t i = 0; i < sizeof times_ms / sizeof times_ms[0]; i++) {
        char text[CLOCK_TEXT_MAX];
        clock_format_utc(times_ms[i], text, sizeof text);
        if (parsed(text) != times_ms[i])
            fail_msg("%s is not %lld", text, (long long)times_ms[i]);
    }
}

static void every_day_of_400_years_agrees_with_the_c_library(void **state)
{
    (void)state;
    for (int64_t day = 0; day < 146097; day++) {
        time_t seconds = (time_t)(day * 86400);
        struct tm t = {0};
        char text[CLOCK_TEXT_MAX];
        assert_non_null(gmtime_r(&seconds, &t));
        assert_int_equal(strftime(text, sizeof text, "%Y-%m-%d", &t), 10);
        if (parsed(text) != day * 86400000)
            fail_msg("%s is day %lld, not %lld", text, (long long)(parsed(text) / 86400000),
                     (long long)day);
    }
}

static void what_is_no_time_is_refused(void **state)
{
    (void)state;
    static const char *const wrong[] = {"",
                                        "now",
                                        "2026",
                                        "2026-13-01",
                                        "2026-02-29",
                                        "2100-02-29",
                                        "2026-00-10",
                                        "2026-01-00",
                                        "2026-01-01T",
                                        "2026-01-01T10:00Z",
                                        "2026-1-1",
                                        "2026-01-01x",
                                        "1969-12-31",
                                        "2026-01-01T24:00:00Z",
                                        "2026-01-01T10:60:00Z",
                                        "2026-01-01T10:00:00",
                                        "2026-01-01T10:00:00.Z",
                                        "2026-01-01T10:00:00Zx",
                                        "2026-01-01T10:00:00+24:00"};
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        int64_t ms = 42;
        if (clock_parse_utc(wrong[i], &ms) || ms != 42)
            fail_msg("`%s` was taken", wrong[i]);
    }
}

static void the_clocks_agree_with_each_other(void **state)
{
    (void)state;
    int64_t before_ms = clock_utc_ms();
    int64_t stamp_ns = clock_monotonic_ns();
    int64_t of_stamp_ms = clock_utc_ms_of(stamp_ns);
    int64_t after_ms = clock_utc_ms();
    assert_true(of_stamp_ms >= before_ms - 1 && of_stamp_ms <= after_ms + 1);
    assert_true(clock_utc_ms_of(stamp_ns - 5 * CLOCK_NS_PER_S) <= of_stamp_ms - 4990);
    clock_sleep_until(stamp_ns + 1000000);
    assert_true(clock_monotonic_ns() >= stamp_ns + 1000000);
    clock_sleep_until(stamp_ns); /* in the past: returns */
    clock_sleep_until(-1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(examples_of_rfc_3339_are_understood),
        cmocka_unit_test(a_time_survives_text_and_back),
        cmocka_unit_test(every_day_of_400_years_agrees_with_the_c_library),
        cmocka_unit_test(what_is_no_time_is_refused),
        cmocka_unit_test(the_clocks_agree_with_each_other),
    };
    return cmocka_run_group_tests_name("base.clock", tests, NULL, NULL);
}
