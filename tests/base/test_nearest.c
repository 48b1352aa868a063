/* "Did you mean": near words are found, far ones are not offered. */
#include "wane/nearest.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static const char *const words[] = {"channel", "channels", "coupling", "raw", "rate", "window"};

static const char *near(const char *wrong)
{
    return nearest_word(wrong, words, sizeof words / sizeof words[0]);
}

static void a_slip_finds_the_word_that_was_meant(void **state)
{
    (void)state;
    assert_string_equal(near("chanel"), "channel");
    assert_string_equal(near("chanels"), "channels");
    assert_string_equal(near("cuopling"), "coupling");
    assert_string_equal(near("windows"), "window");
    assert_string_equal(near("ratte"), "rate");
}

static void nothing_near_is_nothing_said(void **state)
{
    (void)state;
    assert_null(near("temperature"));
    assert_null(near("x"));
    assert_null(near(""));
    assert_null(
        near("a word that is far too long to be any of those that are known by this table"));
    assert_null(nearest_word("rate", words, 0));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_slip_finds_the_word_that_was_meant),
        cmocka_unit_test(nothing_near_is_nothing_said),
    };
    return cmocka_run_group_tests_name("base.nearest", tests, NULL, NULL);
}
