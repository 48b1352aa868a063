/* `wane read`, the whole program: what goes in as recordings comes out as readings that agree with
 * the simulated bench's truth, in every form and by every door. */
#include "support/near.h"
#include "support/program.h"
#include "support/scratch.h"

#include <jansson.h>
#include <math.h>
#include <setjmp.h>
#include <sndfile.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#define ROWS_MAX 64
#define RUN(result, in, ...)                                                                       \
    program_run("wane", (const char *const[]){__VA_ARGS__, NULL}, in, result)

static struct scratch scratch;
static char bench_path[512]; /* a rod, 6 strikes */
static char mode_path[512];  /* one mode, 24 strikes */
static char pair_path[512];  /* two channels */
static char quick_path[512]; /* a tank, 3 strikes, soon read */

static void simulate(const char *name, char *out_path, const char *const more[])
{
    const char *words[PROGRAM_WORDS_MAX] = {"simulate"};
    struct program_result result;
    size_t count = 1;
    for (size_t i = 0; more[i] != NULL; i++)
        words[count++] = more[i];
    words[count] = scratch_path(&scratch, name, out_path);
    program_run("wane", words, NULL, &result);
    if (result.status != 0)
        print_error("%s", result.err);
    assert_int_equal(result.status, 0);
    program_done(&result);
}

static double number(const json_t *object, const char *key)
{
    const json_t *value = json_object_get(object, key);
    if (!json_is_number(value))
        print_error("no number under %s\n", key);
    assert_true(json_is_number(value));
    return json_number_value(value);
}

/* Each line one object; returns their number. */
static size_t parse_lines(char *text, json_t *out[ROWS_MAX])
{
    size_t count = 0;
    for (char *line = text; *line != '\0' && count < ROWS_MAX;) {
        char *end = strchr(line, '\n');
        json_error_t error;
        assert_non_null(end);
        *end = '\0';
        out[count] = json_loads(line, JSON_REJECT_DUPLICATES, &error);
        if (out[count] == NULL)
            print_error("%s\n%s\n", error.text, line);
        assert_non_null(out[count]);
        count++;
        line = end + 1;
    }
    return count;
}

static void free_rows(json_t *rows[ROWS_MAX], size_t count)
{
    for (size_t i = 0; i < count; i++)
        json_decref(rows[i]);
}

static size_t read_json(const char *path, json_t *out[ROWS_MAX])
{
    struct program_result result;
    RUN(&result, NULL, "read", "--json", path);
    if (result.err_length > 0)
        print_error("%s", result.err);
    assert_int_equal(result.status, 0);
    assert_int_equal(result.err_length, 0);
    size_t count = parse_lines(result.out, out);
    program_done(&result);
    return count;
}

static json_t *load_truth(const char *name)
{
    char path[512];
    json_error_t error;
    json_t *truth = json_load_file(scratch_path(&scratch, name, path), 0, &error);
    assert_non_null(truth);
    return truth;
}

/* --- The rows --- */

static void each_line_is_an_object_with_the_contracts_keys(void **state)
{
    (void)state;
    json_t *rows[ROWS_MAX];
    const char *const first_keys[] = {"source",    "channel",    "strike", "onset_s", "window_s",
                                      "peak_dbfs", "noise_dbfs", "snr_db", "verdict", "reasons",
                                      "why",       "remarks",    "modes"};
    size_t count = read_json(bench_path, rows);
    assert_true(count >= 6);
    for (size_t i = 0; i < count; i++) {
        for (size_t k = 0; k < sizeof first_keys / sizeof first_keys[0]; k++)
            assert_non_null(json_object_get(rows[i], first_keys[k]));
        assert_string_equal(json_string_value(json_object_get(rows[i], "source")), bench_path);
        CHECK_NEAR(number(rows[i], "channel"), 1, 0);
        CHECK_NEAR(number(rows[i], "strike"), (double)(i + 1), 0);
        if (i > 0)
            assert_true(number(rows[i], "onset_s") > number(rows[i - 1], "onset_s"));
    }
    free_rows(rows, count);
}

static void every_strike_is_found_once_and_in_its_place(void **state)
{
    (void)state;
    json_t *rows[ROWS_MAX];
    json_t *truth = load_truth("rod.truth.json");
    const json_t *strikes = json_object_get(truth, "strikes");
    size_t count = read_json(bench_path, rows);
    assert_int_equal(count, json_array_size(strikes));
    for (size_t i = 0; i < count; i++) {
        const json_t *strike = json_array_get(strikes, i);
        /* Contact of 0.15 ms; the blow is heard in its first half. */
        CHECK_NEAR(number(rows[i], "onset_s"), number(strike, "onset_s"), 1e-3);
        assert_string_equal(json_string_value(json_object_get(rows[i], "verdict")), "good");
    }
    free_rows(rows, count);
    json_decref(truth);
}

/* (read - true) / u over all strikes: its mean square must be that of a standard normal number. Of
 * 24 strikes the chi-squared limits at 1e-4 on either side are 6.4 and 60 (tables of chi-squared,
 * 24 degrees of freedom, rounded outwards). */
static void a_single_modes_errors_are_as_large_as_stated(void **state)
{
    (void)state;
    json_t *rows[ROWS_MAX];
    size_t count = read_json(mode_path, rows);
    json_t *truth = load_truth("mode.truth.json");
    const json_t *strikes = json_object_get(truth, "strikes");
    double f_sum = 0;
    double decay_sum = 0;
    assert_int_equal(json_array_size(strikes), 24);
    assert_int_equal(count, 24);
    for (size_t i = 0; i < count; i++) {
        const json_t *strike = json_array_get(strikes, i);
        const json_t *was = json_array_get(json_object_get(strike, "modes"), 0);
        const json_t *mode = json_array_get(json_object_get(rows[i], "modes"), 0);
        assert_int_equal(json_array_size(json_object_get(rows[i], "modes")), 1);
        f_sum += pow((number(mode, "f_hz") - number(was, "f_hz")) / number(mode, "f_u_hz"), 2);
        decay_sum += pow((number(mode, "decay_per_s") - number(was, "decay_per_s")) /
                             number(mode, "decay_u_per_s"),
                         2);
        CHECK_NEAR(number(mode, "level_dbfs"), number(was, "level_dbfs"), 0.1);
    }
    CHECK_NEAR(f_sum, 33.2, 26.8);
    CHECK_NEAR(decay_sum, 33.2, 26.8);
    free_rows(rows, count);
    json_decref(truth);
}

/* --- The doors --- */

static void standard_input_reads_as_the_file(void **state)
{
    (void)state;
    struct program_result file;
    struct program_result piped;
    RUN(&file, NULL, "read", "--csv", bench_path);
    RUN(&piped, bench_path, "read", "--csv", "-");
    assert_int_equal(piped.status, 0);
    /* All but the source's name. */
    const char *a = file.out;
    const char *b = piped.out;
    assert_int_equal(program_count_lines(a), program_count_lines(b));
    while (*a != '\0') {
        a = strchr(a, ',');
        b = strchr(b, ',');
        size_t length = strcspn(a, "\n");
        assert_int_equal(strcspn(b, "\n"), length);
        assert_memory_equal(a, b, length);
        a += length + 1;
        b += length + 1;
    }
    program_done(&file);
    program_done(&piped);
}

static void raw_samples_read_as_the_file(void **state)
{
    (void)state;
    char path[512];
    SF_INFO info = {0};
    SNDFILE *file = sf_open(bench_path, SFM_READ, &info);
    assert_non_null(file);
    short *samples = calloc((size_t)info.frames, sizeof *samples);
    assert_int_equal(sf_readf_short(file, samples, info.frames), info.frames);
    sf_close(file);
    scratch_write(scratch_path(&scratch, "rod.s16", path), samples,
                  (size_t)info.frames * sizeof *samples);
    free(samples);
    struct program_result result;
    json_t *expected[ROWS_MAX];
    json_t *rows[ROWS_MAX];
    RUN(&result, NULL, "read", "--json", "--raw", "s16", "--rate", "48000", "--channels", "1",
        path);
    assert_int_equal(result.status, 0);
    size_t count = parse_lines(result.out, rows);
    assert_int_equal(read_json(bench_path, expected), count);
    for (size_t i = 0; i < count; i++) {
        json_object_del(rows[i], "source");
        json_object_del(expected[i], "source");
        assert_true(json_equal(rows[i], expected[i]));
    }
    free_rows(rows, count);
    free_rows(expected, count);
    program_done(&result);
}

static void csv_says_what_json_says(void **state)
{
    (void)state;
    struct program_result result;
    json_t *rows[ROWS_MAX];
    size_t count = read_json(bench_path, rows);
    RUN(&result, NULL, "read", "--csv", bench_path);
    size_t modes = 0;
    for (size_t i = 0; i < count; i++) {
        size_t own = json_array_size(json_object_get(rows[i], "modes"));
        modes += own > 0 ? own : 1;
    }
    assert_int_equal(program_count_lines(result.out), 1 + modes);
    assert_memory_equal(result.out, "source,channel,strike,onset_s,", 30);
    size_t columns = 0;
    size_t commas = 0;
    for (const char *at = result.out; *at != '\0'; at++) {
        commas += *at == ',';
        if (*at != '\n')
            continue;
        columns = columns == 0 ? commas : columns;
        assert_int_equal(commas, columns);
        commas = 0;
    }
    /* The first mode's frequency, digit for digit. */
    char f_text[64];
    snprintf(f_text, sizeof f_text, ",%.15g,",
             number(json_array_get(json_object_get(rows[0], "modes"), 0), "f_hz"));
    assert_non_null(strstr(result.out, f_text));
    free_rows(rows, count);
    program_done(&result);
}

static void same_bytes_twice_and_beside_other_files(void **state)
{
    (void)state;
    struct program_result once;
    struct program_result again;
    struct program_result both;
    RUN(&once, NULL, "read", "--json", bench_path);
    RUN(&again, NULL, "read", "--json", bench_path);
    assert_string_equal(once.out, again.out);
    /* One file: fits on a thread of their own. Several: one thread a file. In the order given. */
    RUN(&both, NULL, "read", "--json", mode_path, bench_path, pair_path, bench_path);
    assert_int_equal(both.status, 0);
    const char *found = strstr(both.out, once.out);
    assert_non_null(found);
    assert_true(found > both.out);
    const char *second = strstr(found + 1, once.out);
    assert_non_null(second);
    assert_int_equal(strlen(second), once.out_length);
    program_done(&once);
    program_done(&again);
    program_done(&both);
}

static void channels_come_merged_in_time_order(void **state)
{
    (void)state;
    struct program_result result;
    json_t *rows[ROWS_MAX];
    size_t singles = 0;
    RUN(&result, NULL, "read", "--json", "--channel", "all", pair_path);
    assert_int_equal(result.status, 0);
    size_t count = parse_lines(result.out, rows);
    program_done(&result);
    size_t seen[2] = {0};
    for (size_t i = 0; i < count; i++) {
        CHECK_NEAR(number(rows[i], "strike"), (double)(i + 1), 0);
        seen[(int)number(rows[i], "channel") - 1]++;
        if (i > 0)
            assert_true(number(rows[i], "onset_s") > number(rows[i - 1], "onset_s") - 0.005);
    }
    for (int channel = 1; channel <= 2; channel++) {
        json_t *own[ROWS_MAX];
        RUN(&result, NULL, "read", "--json", "--channel", channel == 1 ? "1" : "2", pair_path);
        size_t own_count = parse_lines(result.out, own);
        assert_int_equal(own_count, seen[channel - 1]);
        /* The same readings as in the merged rows. */
        size_t at = 0;
        for (size_t i = 0; i < count; i++) {
            if ((int)number(rows[i], "channel") != channel)
                continue;
            assert_true(
                json_equal(json_object_get(rows[i], "modes"), json_object_get(own[at], "modes")));
            at++;
        }
        singles += own_count;
        free_rows(own, own_count);
        program_done(&result);
    }
    assert_int_equal(singles, count);
    free_rows(rows, count);
}

static void a_part_sheet_names_modes_and_decides_its_limits(void **state)
{
    (void)state;
    static const char sheet[] = "[part]\nname = Tank A\n[mode main]\nband_hz = 3000 ... 3800\n"
                                "f_hz = 3000 ... 3800\nq = 100 ...\n";
    char path[512];
    struct program_result result;
    json_t *rows[ROWS_MAX];
    scratch_write(scratch_path(&scratch, "tank.ini", path), sheet, strlen(sheet));
    RUN(&result, NULL, "read", "--json", "--part", path, quick_path);
    assert_int_equal(result.status, 0);
    size_t count = parse_lines(result.out, rows);
    assert_int_equal(count, 3);
    for (size_t i = 0; i < count; i++) {
        const json_t *limits = json_object_get(rows[i], "limits");
        const json_t *mode = json_array_get(json_object_get(rows[i], "modes"), 0);
        assert_string_equal(json_string_value(json_object_get(mode, "label")), "main");
        assert_string_equal(json_string_value(json_object_get(rows[i], "part")), "Tank A");
        assert_int_equal(json_array_size(limits), 2);
        /* Its Q is near 26: f lies inside, Q does not. */
        assert_string_equal(
            json_string_value(json_object_get(json_array_get(limits, 0), "decision")), "inside");
        assert_string_equal(json_string_value(json_object_get(rows[i], "decision")), "outside");
    }
    free_rows(rows, count);
    program_done(&result);
    RUN(&result, NULL, "read", "--part", path, quick_path);
    assert_non_null(strstr(result.out, "limits: outside"));
    program_done(&result);
}

static void a_wrong_part_sheet_is_told_with_file_and_line(void **state)
{
    (void)state;
    static const char sheet[] = "[part]\nnme = x\n";
    char path[512];
    char expected[600];
    struct program_result result;
    scratch_write(scratch_path(&scratch, "wrong.ini", path), sheet, strlen(sheet));
    RUN(&result, NULL, "read", "--part", path, quick_path);
    assert_int_equal(result.status, 2);
    assert_int_equal(result.out_length, 0);
    snprintf(expected, sizeof expected, "wane read: %s:2: ", path);
    assert_non_null(strstr(result.err, expected));
    program_done(&result);
    RUN(&result, NULL, "read", "--part", "/no/such.ini", quick_path);
    assert_int_equal(result.status, 1);
    assert_int_equal(program_count_lines(result.err), 1);
    program_done(&result);
}

/* --- Nothing, and bad things --- */

static void nothing_to_find_is_no_row_and_no_failure(void **state)
{
    (void)state;
    char path[512];
    struct program_result result;
    int32_t *samples = calloc(96000, sizeof *samples);
    scratch_samples(3, 8, samples, 96000);
    for (size_t i = 0; i < 96000; i++)
        samples[i] /= 4096;
    scratch_record(scratch_path(&scratch, "noise.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_24,
                   48000, 1, samples, 96000);
    free(samples);
    RUN(&result, NULL, "read", "--json", path);
    assert_int_equal(result.status, 0);
    assert_int_equal(result.out_length, 0);
    assert_int_equal(result.err_length, 0);
    program_done(&result);
    RUN(&result, NULL, "read", path);
    assert_int_equal(result.status, 0);
    assert_non_null(strstr(result.out, "no strike found"));
    program_done(&result);
}

static void a_bad_file_is_one_line_and_the_others_are_read(void **state)
{
    (void)state;
    char empty[512];
    char words[512];
    char header[512];
    struct program_result once;
    struct program_result result;
    scratch_write(scratch_path(&scratch, "empty.wav", empty), "", 0);
    scratch_write(scratch_path(&scratch, "words.wav", words), "not a sound\n", 12);
    scratch_write(scratch_path(&scratch, "header.wav", header), "RIFF\x24\0\0\0WAVE", 12);
    const char *const bad[] = {empty, words, header, "no-such-file.wav", "/", "simulated"};
    RUN(&once, NULL, "read", "--json", quick_path);
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        RUN(&result, NULL, "read", "--json", bad[i]);
        if (result.status != 1 || program_count_lines(result.err) != 1)
            print_error("%s: status %d, said \"%s\"\n", bad[i], result.status, result.err);
        assert_int_equal(result.status, 1);
        assert_int_equal(result.out_length, 0);
        assert_int_equal(program_count_lines(result.err), 1);
        assert_memory_equal(result.err, "wane read: ", 11);
        assert_non_null(strstr(result.err, bad[i]));
        program_done(&result);
        RUN(&result, NULL, "read", "--json", bad[i], quick_path);
        assert_int_equal(result.status, 1);
        assert_string_equal(result.out, once.out);
        assert_int_equal(program_count_lines(result.err), 1);
        program_done(&result);
    }
    program_done(&once);
}

static void wrong_words_exit_2_in_one_line(void **state)
{
    (void)state;
    const char *const wrong[][8] = {
        {"read", NULL},
        {"read", "--jsn", "a.wav", NULL},
        {"read", "--json", "--csv", "a.wav", NULL},
        {"read", "--raw", "s16", "a.raw", NULL},
        {"read", "--raw", "s17", "--rate", "48000", "--channels", "1", NULL},
        {"read", "--rate", "48000", "a.wav", NULL},
        {"read", "--channel", "0", "a.wav", NULL},
        {"read", "--channel", "left", "a.wav", NULL},
        {"read", "--low", "500", "--high", "100", "a.wav", NULL},
        {"read", "--window", "0,5", "a.wav", NULL},
        {"read", "-j", "a.wav", NULL},
        {"read", "a.wav", "--high", NULL},
    };
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        struct program_result result;
        program_run("wane", wrong[i], NULL, &result);
        if (result.status != 2)
            print_error("%s %s: %s", wrong[i][0], wrong[i][1], result.err);
        assert_int_equal(result.status, 2);
        assert_int_equal(result.out_length, 0);
        assert_int_equal(program_count_lines(result.err), 1);
        program_done(&result);
    }
}

static void a_channel_that_is_not_there_is_said(void **state)
{
    (void)state;
    struct program_result result;
    RUN(&result, NULL, "read", "--channel", "2", bench_path);
    assert_int_equal(result.status, 2);
    assert_non_null(strstr(result.err, "has 1 channel, there is no channel 2"));
    program_done(&result);
}

static void the_table_says_what_to_change(void **state)
{
    (void)state;
    char path[512];
    struct program_result result;
    simulate(
        "loud.wav", path,
        (const char *const[]){"--part", "goblet", "--defects", "clipped", "--strikes", "1", NULL});
    RUN(&result, NULL, "read", path);
    assert_int_equal(result.status, 0);
    if (strstr(result.out, "The input clipped") == NULL)
        print_error("%s", result.out);
    assert_non_null(strstr(result.out, "The input clipped"));
    assert_non_null(strstr(result.out, "move the microphone back or tap softer."));
    program_done(&result);
}

static int make_recordings(void **state)
{
    (void)state;
    scratch_make(&scratch);
    simulate("rod.wav", bench_path,
             (const char *const[]){"--part", "rod", "--defects", "none", "--strikes", "6", "--bits",
                                   "16", NULL});
    simulate("mode.wav", mode_path,
             (const char *const[]){"--f", "880", "--zeta", "2e-3", "--strikes", "24", "--interval",
                                   "2", "--snr", "45", NULL});
    simulate("quick.wav", quick_path,
             (const char *const[]){"--part", "tank", "--defects", "none", "--strikes", "3",
                                   "--interval", "1", NULL});
    simulate("pair.wav", pair_path,
             (const char *const[]){"--channels", "2", "--part", "panel", "--defects", "none",
                                   "--seconds", "25", NULL});
    return 0;
}

static int remove_recordings(void **state)
{
    (void)state;
    scratch_remove(&scratch);
    return 0;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(each_line_is_an_object_with_the_contracts_keys),
        cmocka_unit_test(every_strike_is_found_once_and_in_its_place),
        cmocka_unit_test(a_single_modes_errors_are_as_large_as_stated),
        cmocka_unit_test(standard_input_reads_as_the_file),
        cmocka_unit_test(raw_samples_read_as_the_file),
        cmocka_unit_test(csv_says_what_json_says),
        cmocka_unit_test(same_bytes_twice_and_beside_other_files),
        cmocka_unit_test(channels_come_merged_in_time_order),
        cmocka_unit_test(a_part_sheet_names_modes_and_decides_its_limits),
        cmocka_unit_test(a_wrong_part_sheet_is_told_with_file_and_line),
        cmocka_unit_test(nothing_to_find_is_no_row_and_no_failure),
        cmocka_unit_test(a_bad_file_is_one_line_and_the_others_are_read),
        cmocka_unit_test(wrong_words_exit_2_in_one_line),
        cmocka_unit_test(a_channel_that_is_not_there_is_said),
        cmocka_unit_test(the_table_says_what_to_change),
    };
    return cmocka_run_group_tests_name("cli.read", tests, make_recordings, remove_recordings);
}
