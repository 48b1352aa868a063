/* `wane log` and `wane export` as their user runs them. */
#include "support/log_scene.h"
#include "support/program.h"
#include "support/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

struct bench {
    struct scratch scratch;
    char path[512];
};

#define RUN(result, ...) program_run("wane", (const char *const[]){__VA_ARGS__, NULL}, NULL, result)

/* A log of 30 strikes, one with a hostile note. */
static int begin(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    assert_non_null(bench);
    scratch_make(&bench->scratch);
    scratch_path(&bench->scratch, "log.sqlite", bench->path);
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, NULL);
    assert_non_null(writer);
    uint64_t seed = 6;
    for (int n = 0; n < 30; n++) {
        struct strike *strike = log_scene_strike(&seed, SAMPLES_16_BIT, 1000);
        struct reading reading;
        int64_t id = 0;
        strike->rate_hz = 48000;
        log_scene_reading(&seed, (enum verdict)(n % 3), &reading);
        struct log_entry entry = {.strike = strike, .reading = &reading};
        log_scene_context(n, &entry.context);
        assert_true(log_append(writer, &entry, 1, &id, NULL));
        strike_destroy(strike);
    }
    struct log_change change = {
        .note = "\x1b[2J\x07 =1+1", .set_aside = LOG_SET, .reason = "cough"};
    assert_true(log_change_strike(writer, 30, &change, NULL, NULL));
    log_writer_close(writer);
    *state = bench;
    return 0;
}

static int end(void **state)
{
    struct bench *bench = *state;
    scratch_remove(&bench->scratch);
    free(bench);
    return 0;
}

static void the_newest_are_listed_first(void **state)
{
    struct bench *bench = *state;
    struct program_result result;
    RUN(&result, "log", "--log", bench->path);
    assert_int_equal(result.status, 0);
    assert_int_equal(result.err_length, 0);
    assert_int_equal(program_count_lines(result.out), 21);
    assert_non_null(strstr(result.out, "\n30  "));
    assert_non_null(strstr(result.out, "set aside: cough"));
    assert_null(strchr(result.out, '\x1b')); /* a note must not steer the terminal */
    program_done(&result);
    RUN(&result, "log", "--log", bench->path, "--verdict", "good", "--limit", "4");
    assert_int_equal(program_count_lines(result.out), 5);
    program_done(&result);
    RUN(&result, "log", "--log", bench->path, "--json", "--to", "2026-12-01T08:00:02Z");
    assert_int_equal(program_count_lines(result.out), 2);
    assert_memory_equal(result.out, "{\"id\":2,", 8);
    program_done(&result);
}

static void one_strike_is_shown_and_its_samples_written(void **state)
{
    struct bench *bench = *state;
    struct program_result result;
    char wav[512];
    scratch_path(&bench->scratch, "one.wav", wav);
    RUN(&result, "log", "--log", bench->path, "show", "30");
    assert_int_equal(result.status, 0);
    assert_non_null(strstr(result.out, "rejected"));
    assert_null(strchr(result.out, '\x1b'));
    program_done(&result);
    RUN(&result, "log", "--log", bench->path, "wave", "30", wav);
    assert_int_equal(result.status, 0);
    assert_int_equal(access(wav, F_OK), 0);
    program_done(&result);
    RUN(&result, "log", "--log", bench->path, "wave", "30", wav);
    assert_int_equal(result.status, 1); /* never over a file that is there */
    assert_int_equal(program_count_lines(result.err), 1);
    program_done(&result);
}

static void a_sound_log_is_called_sound_and_can_be_copied(void **state)
{
    struct bench *bench = *state;
    struct program_result result;
    char copy[512];
    scratch_path(&bench->scratch, "copy.sqlite", copy);
    RUN(&result, "log", "--log", bench->path, "check");
    assert_int_equal(result.status, 0);
    assert_memory_equal(result.out, "sound: 30 strikes", 17);
    program_done(&result);
    RUN(&result, "log", "--log", bench->path, "backup", copy);
    assert_int_equal(result.status, 0);
    program_done(&result);
    RUN(&result, "log", "--log", copy, "check");
    assert_int_equal(result.status, 0);
    program_done(&result);
}

static void an_export_goes_to_stdout_or_to_a_file(void **state)
{
    struct bench *bench = *state;
    struct program_result result;
    char file[512];
    scratch_path(&bench->scratch, "out.json", file);
    RUN(&result, "export", "--log", bench->path, "--csv", "--limit", "3");
    assert_int_equal(result.status, 0);
    assert_memory_equal(result.out, "id,time_utc,", 12);
    assert_non_null(strstr(result.out, "\n28,"));
    assert_null(strstr(result.out, "\n27,"));
    program_done(&result);
    RUN(&result, "export", "--log", bench->path, "-o", file);
    assert_int_equal(result.status, 0);
    assert_int_equal(result.out_length, 0);
    assert_int_equal(access(file, F_OK), 0);
    program_done(&result);
}

static void wrong_words_are_one_line_and_status_2(void **state)
{
    struct bench *bench = *state;
    const char *const lines[][6] = {
        {"log", "--log", bench->path, "paint", NULL},
        {"log", "--log", bench->path, "show", NULL},
        {"log", "--log", bench->path, "show", "x"},
        {"log", "--log", bench->path, "--verdict", "bad"},
        {"log", "--log", bench->path, "--limit", "0"},
        {"log", "--log", bench->path, "--colour", NULL},
        {"export", "--log", bench->path, "--from", "noon"},
        {"export", "--log", bench->path, "--csv", "--json"},
        {"export", "--log", bench->path, "more", NULL},
    };
    for (size_t i = 0; i < sizeof lines / sizeof lines[0]; i++) {
        struct program_result result;
        program_run("wane", lines[i], NULL, &result);
        print_message("%s", result.err);
        assert_int_equal(result.status, 2);
        assert_int_equal(program_count_lines(result.err), 1);
        assert_int_equal(result.out_length, 0);
        program_done(&result);
    }
}

static void what_is_not_there_is_one_line_and_status_1(void **state)
{
    struct bench *bench = *state;
    const char *const lines[][6] = {
        {"log", "--log", "/nowhere/log.sqlite", NULL},
        {"log", "--log", bench->path, "show", "99"},
        {"log", "--log", "/etc/passwd", NULL},
        {"export", "--log", "/nowhere/log.sqlite", NULL},
        {"export", "--log", bench->path, "-o", "/nowhere/out.csv"},
    };
    for (size_t i = 0; i < sizeof lines / sizeof lines[0]; i++) {
        struct program_result result;
        program_run("wane", lines[i], NULL, &result);
        print_message("%s", result.err);
        assert_int_equal(result.status, 1);
        assert_int_equal(program_count_lines(result.err), 1);
        program_done(&result);
    }
}

static void the_config_names_the_log(void **state)
{
    struct bench *bench = *state;
    struct program_result result;
    char config[512];
    char text[700];
    scratch_path(&bench->scratch, "waned.ini", config);
    (void)snprintf(text, sizeof text, "[serve]\nlisten = 127.0.0.1:0\n[log]\nfile = %s\n",
                   bench->path);
    scratch_write(config, text, strlen(text));
    RUN(&result, "log", "--config", config, "--limit", "1");
    assert_int_equal(result.status, 0);
    assert_int_equal(program_count_lines(result.out), 2);
    program_done(&result);
    RUN(&result, "log", "--config", "/nowhere.ini");
    assert_int_equal(result.status, 2);
    program_done(&result);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(the_newest_are_listed_first),
        CASE(one_strike_is_shown_and_its_samples_written),
        CASE(a_sound_log_is_called_sound_and_can_be_copied),
        CASE(an_export_goes_to_stdout_or_to_a_file),
        CASE(wrong_words_are_one_line_and_status_2),
        CASE(what_is_not_there_is_one_line_and_status_1),
        CASE(the_config_names_the_log),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
