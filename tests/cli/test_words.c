/* `wane` without a command's work: help, version, wrong words. */
#include "support/program.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

#define RUN(result, ...) program_run("wane", (const char *const[]){__VA_ARGS__, NULL}, NULL, result)

static void help_goes_to_stdout_and_names_every_command(void **state)
{
    (void)state;
    struct program_result result;
    RUN(&result, "--help");
    assert_int_equal(result.status, 0);
    assert_int_equal(result.err_length, 0);
    assert_non_null(strstr(result.out, "read"));
    assert_non_null(strstr(result.out, "simulate"));
    program_done(&result);
}

static void each_command_has_its_help(void **state)
{
    (void)state;
    const char *const commands[] = {"read", "simulate"};
    for (size_t i = 0; i < sizeof commands / sizeof commands[0]; i++) {
        struct program_result result;
        RUN(&result, commands[i], "--help");
        assert_int_equal(result.status, 0);
        assert_int_equal(result.err_length, 0);
        assert_non_null(strstr(result.out, "usage: wane "));
        program_done(&result);
    }
}

static void version_is_one_line(void **state)
{
    (void)state;
    struct program_result result;
    RUN(&result, "--version");
    assert_int_equal(result.status, 0);
    assert_int_equal(program_count_lines(result.out), 1);
    assert_memory_equal(result.out, "wane ", 5);
    program_done(&result);
}

static void no_word_at_all_is_wrong_usage_with_the_help(void **state)
{
    (void)state;
    struct program_result result;
    program_run("wane", (const char *const[]){NULL}, NULL, &result);
    assert_int_equal(result.status, 2);
    assert_int_equal(result.out_length, 0);
    assert_non_null(strstr(result.err, "usage: wane COMMAND"));
    program_done(&result);
}

static void a_mistyped_command_is_told_the_nearest(void **state)
{
    (void)state;
    struct program_result result;
    RUN(&result, "raed");
    assert_int_equal(result.status, 2);
    assert_string_equal(result.err, "wane: there is no command \"raed\"; did you mean \"read\"?\n");
    program_done(&result);
    RUN(&result, "paint");
    assert_int_equal(result.status, 2);
    assert_int_equal(program_count_lines(result.err), 1);
    program_done(&result);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(help_goes_to_stdout_and_names_every_command),
        cmocka_unit_test(each_command_has_its_help),
        cmocka_unit_test(version_is_one_line),
        cmocka_unit_test(no_word_at_all_is_wrong_usage_with_the_help),
        cmocka_unit_test(a_mistyped_command_is_told_the_nearest),
    };
    return cmocka_run_group_tests_name("cli.words", tests, NULL, NULL);
}
