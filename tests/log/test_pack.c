/* Stored bytes that were damaged are refused, or give a strike within bounds; never a crash. */
#include "log/pack.h"

#include "support/log_scene.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

static void damage(uint64_t *seed, struct text *bytes)
{
    for (unsigned i = 0; i < 1 + log_scene_next(seed) % 4; i++)
        bytes->data[log_scene_next(seed) % bytes->length] = (char)log_scene_next(seed);
    if (log_scene_next(seed) % 4 == 0)
        bytes->length = log_scene_next(seed) % (bytes->length + 1);
}

static void damaged_readings_are_refused_or_within_bounds(void **state)
{
    (void)state;
    uint64_t seed = 31;
    print_message("seed %llu\n", (unsigned long long)seed);
    for (int n = 0; n < 20000; n++) {
        struct reading reading;
        struct reading back;
        struct text bytes = {0};
        log_scene_reading(&seed, VERDICT_DOUBTFUL, &reading);
        pack_reading(&reading, &bytes);
        damage(&seed, &bytes);
        if (unpack_reading(bytes.data, bytes.length, &back, NULL)) {
            assert_true(back.mode_count <= READING_MODES_MAX);
            assert_true(back.tone_count <= READING_TONES_MAX);
            assert_true(back.verdict <= VERDICT_REJECTED);
            for (unsigned i = 0; i < back.mode_count; i++)
                assert_non_null(memchr(back.modes[i].label, '\0', READING_LABEL_MAX));
        }
        text_done(&bytes);
    }
}

static void damaged_heads_are_refused_or_within_bounds(void **state)
{
    (void)state;
    uint64_t seed = 37;
    print_message("seed %llu\n", (unsigned long long)seed);
    for (int n = 0; n < 20000; n++) {
        struct strike *strike = log_scene_strike(&seed, SAMPLES_NONE, 0);
        struct strike back;
        struct text bytes = {0};
        pack_strike(strike, &bytes);
        damage(&seed, &bytes);
        if (unpack_strike(bytes.data, bytes.length, &back, NULL)) {
            assert_true(back.lost_count <= STRIKE_LOST_MAX);
            assert_true(back.carried_count <= STRIKE_CARRIED_MAX);
            assert_true(back.end <= STRIKE_END_LOST);
            assert_null(back.samples);
        }
        text_done(&bytes);
        strike_destroy(strike);
    }
}

static void nothing_and_the_wrong_form_are_refused(void **state)
{
    (void)state;
    struct reading reading;
    struct strike strike;
    struct error err = {0};
    assert_false(unpack_reading(NULL, 0, &reading, &err));
    assert_int_equal(err.kind, ERROR_DATA);
    assert_false(unpack_reading("\x02", 1, &reading, &err));
    assert_false(unpack_strike(NULL, 0, &strike, &err));
    assert_false(unpack_strike("", 1, &strike, &err));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(damaged_readings_are_refused_or_within_bounds),
        cmocka_unit_test(damaged_heads_are_refused_or_within_bounds),
        cmocka_unit_test(nothing_and_the_wrong_form_are_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
