/* `wane simulate`: the file and its truth. */
#include "support/near.h"
#include "support/program.h"
#include "support/scratch.h"

#include <jansson.h>
#include <setjmp.h>
#include <sndfile.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

#define RUN(result, in, ...)                                                                       \
    program_run("wane", (const char *const[]){__VA_ARGS__, NULL}, in, result)

static struct scratch scratch;

static void must_run(const char *const words[])
{
    struct program_result result;
    program_run("wane", words, NULL, &result);
    if (result.status != 0)
        print_error("%s", result.err);
    assert_int_equal(result.status, 0);
    assert_int_equal(result.out_length, 0);
    assert_int_equal(result.err_length, 0);
    program_done(&result);
}

static json_t *load(const char *path)
{
    json_error_t error;
    json_t *root = json_load_file(path, JSON_REJECT_DUPLICATES, &error);
    if (root == NULL)
        print_error("%s: %s\n", path, error.text);
    assert_non_null(root);
    return root;
}

static double number(const json_t *object, const char *key)
{
    const json_t *value = json_object_get(object, key);
    assert_true(json_is_number(value));
    return json_number_value(value);
}

static char *slurp(const char *path, size_t *out_length)
{
    FILE *file = fopen(path, "rb");
    assert_non_null(file);
    fseek(file, 0, SEEK_END);
    *out_length = (size_t)ftell(file);
    rewind(file);
    char *bytes = malloc(*out_length + 1);
    assert_int_equal(fread(bytes, 1, *out_length, file), *out_length);
    fclose(file);
    return bytes;
}

static void same_words_give_the_same_bytes(void **state)
{
    (void)state;
    char path[3][512];
    char *bytes[3];
    size_t length[3];
    const char *names[] = {"one.wav", "two.wav", "three.wav"};
    for (int i = 0; i < 3; i++) {
        scratch_path(&scratch, names[i], path[i]);
        must_run((const char *const[]){"simulate", "--seconds", "6", "--seed", i < 2 ? "5" : "6",
                                       path[i], NULL});
        bytes[i] = slurp(path[i], &length[i]);
    }
    assert_int_equal(length[0], length[1]);
    assert_memory_equal(bytes[0], bytes[1], length[0]);
    assert_true(memcmp(bytes[0], bytes[2], length[0]) != 0);
    for (int i = 0; i < 3; i++)
        free(bytes[i]);
}

static void truth_says_what_the_file_holds(void **state)
{
    (void)state;
    char path[512];
    char truth_path[512];
    scratch_path(&scratch, "bench.wav", path);
    scratch_path(&scratch, "bench.truth.json", truth_path);
    must_run((const char *const[]){"simulate", "--seconds", "40", "--rate", "44100", "--channels",
                                   "2", "--bits", "16", path, NULL});
    SF_INFO info = {0};
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    assert_non_null(file);
    sf_close(file);
    json_t *truth = load(truth_path);
    assert_int_equal(info.channels, 2);
    assert_int_equal(info.samplerate, 44100);
    assert_int_equal(info.frames, 40 * 44100);
    assert_int_equal(info.format & SF_FORMAT_SUBMASK, SF_FORMAT_PCM_16);
    CHECK_NEAR(number(truth, "frames"), 40 * 44100, 0);
    CHECK_NEAR(number(truth, "rate_hz"), 44100, 0);
    const json_t *strikes = json_object_get(truth, "strikes");
    double last_s = 0;
    assert_true(json_array_size(strikes) >= 6);
    for (size_t i = 0; i < json_array_size(strikes); i++) {
        const json_t *strike = json_array_get(strikes, i);
        assert_true(number(strike, "onset_s") >= last_s && number(strike, "onset_s") < 40);
        assert_true(json_array_size(json_object_get(strike, "modes")) >= 1);
        last_s = number(strike, "onset_s");
    }
    assert_true(json_is_array(json_object_get(truth, "disturbances")));
    json_decref(truth);
}

static void a_single_mode_is_as_ordered(void **state)
{
    (void)state;
    char path[512];
    char truth_path[512];
    scratch_path(&scratch, "mode.wav", path);
    scratch_path(&scratch, "mode.truth.json", truth_path);
    must_run((const char *const[]){"simulate", "--f", "440", "--zeta", "0.01", "--strikes", "5",
                                   "--interval", "1.5", "--snr", "30", path, NULL});
    json_t *truth = load(truth_path);
    const json_t *strikes = json_object_get(truth, "strikes");
    assert_int_equal(json_array_size(strikes), 5);
    CHECK_NEAR(number(truth, "noise_dbfs"), -36, 1e-9);
    for (size_t i = 0; i < 5; i++) {
        const json_t *mode =
            json_array_get(json_object_get(json_array_get(strikes, i), "modes"), 0);
        CHECK_NEAR(number(mode, "f_hz"), 440, 1e-12);
        CHECK_NEAR(number(mode, "zeta"), 0.01, 1e-12);
        CHECK_NEAR(number(mode, "q"), 50, 1e-9);
        CHECK_NEAR(number(mode, "level_dbfs"), -6, 1e-9);
    }
    json_decref(truth);
}

static void wrong_words_are_told_in_one_line(void **state)
{
    (void)state;
    const char *const wrong[][6] = {
        {"simulate", NULL},
        {"simulate", "a.wav", "b.wav", NULL},
        {"simulate", "--bits", "12", "a.wav", NULL},
        {"simulate", "--part", "plank", "a.wav", NULL},
        {"simulate", "--defects", "bad", "a.wav", NULL},
        {"simulate", "--f", "100", "a.wav", NULL},
        {"simulate", "--seed", "-3", "a.wav", NULL},
        {"simulate", "--rate", "12,5", "a.wav", NULL},
        {"simulate", "--channels", "9", "a.wav", NULL},
        {"simulate", "--sed", "3", "a.wav", NULL},
        {"simulate", "a.wav", "--seed", NULL},
    };
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        struct program_result result;
        program_run("wane", wrong[i], NULL, &result);
        assert_int_equal(result.status, 2);
        assert_int_equal(program_count_lines(result.err), 1);
        assert_int_equal(result.out_length, 0);
        program_done(&result);
    }
}

static void an_unwritable_place_leaves_nothing_behind(void **state)
{
    (void)state;
    struct program_result result;
    char path[512];
    scratch_path(&scratch, "no-such-folder/a.wav", path);
    RUN(&result, NULL, "simulate", "--seconds", "1", path);
    assert_int_equal(result.status, 1);
    assert_int_equal(program_count_lines(result.err), 1);
    assert_non_null(strstr(result.err, "no-such-folder/a.wav"));
    assert_int_not_equal(access(path, F_OK), 0);
    program_done(&result);
}

static int make_scratch(void **state)
{
    (void)state;
    scratch_make(&scratch);
    return 0;
}

static int remove_scratch(void **state)
{
    (void)state;
    scratch_remove(&scratch);
    return 0;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(same_words_give_the_same_bytes),
        cmocka_unit_test(truth_says_what_the_file_holds),
        cmocka_unit_test(a_single_mode_is_as_ordered),
        cmocka_unit_test(wrong_words_are_told_in_one_line),
        cmocka_unit_test(an_unwritable_place_leaves_nothing_behind),
    };
    return cmocka_run_group_tests_name("cli.simulate", tests, make_scratch, remove_scratch);
}
