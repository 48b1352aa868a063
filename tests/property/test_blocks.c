/* The same samples give the same strikes at any block size, bit for bit, and the same readings. */
#include "quick.h"
#include "support/near.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define STRIKES_MAX 32

/* Eight blows on a part of three modes, some of them while it rings, in hum and noise. */
static void make_session(struct scene *scene, unsigned long seed)
{
    quick_begin(scene, 44100.0, 0.6, 1e-4);
    quick_mode(scene, 610.0, 5.0, 0.15, 0.2);
    quick_mode(scene, 1730.0, 9.0, 0.10, 1.3);
    quick_mode(scene, 3900.0, 14.0, 0.05, -0.7);
    scene->onset_frame += 44100.0;
    scene->pulse_count = SCENE_PULSES_MAX;
    for (unsigned i = 1; i < SCENE_PULSES_MAX; i++)
        scene->pulses[i] = (struct scene_pulse){
            .at_s = 0.9 * i * i, .contact_s = 3e-4, .weight = 1.0 / i, .noise = 0.01};
    scene->tone_count = 1;
    scene->tones[0] = (struct scene_tone){.f_hz = 50.02, .amplitude = 0.01};
    assert_true(quick_make(scene, 8.0, seed));
}

static void check_equal(const struct strike *is, const struct strike *was)
{
    assert_int_equal(is->first_frame, was->first_frame);
    assert_int_equal(is->frame_count, was->frame_count);
    assert_int_equal(is->trigger, was->trigger);
    assert_int_equal(is->end, was->end);
    assert_int_equal(is->lost_count, was->lost_count);
    assert_memory_equal(is->samples, was->samples, is->frame_count * sizeof *is->samples);
}

static void any_block_size_gives_the_same_strikes_and_readings(void **state)
{
    (void)state;
    static const size_t blocks[] = {0, 1, 64, 4096, 777};
    const char *word = getenv("WANE_SEED");
    unsigned long seed = word ? strtoul(word, NULL, 10) : 3;
    printf("seed %lu (WANE_SEED sets it)\n", seed);
    struct scene scene;
    struct error err = {0};
    make_session(&scene, seed);
    struct fit_workspace *workspace = fit_workspace_create(scene.frame_count, &err);
    assert_non_null(workspace);
    struct strike *first[STRIKES_MAX];
    struct reading first_readings[STRIKES_MAX];
    size_t first_count = 0;
    for (size_t b = 0; b < sizeof blocks / sizeof blocks[0]; b++) {
        struct strike *strikes[STRIKES_MAX];
        static struct reading readings[STRIKES_MAX];
        struct fit_settings settings = {0};
        size_t count = quick_detect(scene.samples, scene.frame_count, scene.rate_hz, blocks[b],
                                    strikes, STRIKES_MAX);
        for (size_t i = 0; i < count; i++) {
            if (i > 0)
                fit_carry(strikes[i - 1], &readings[i - 1], strikes[i]);
            assert_true(fit_strike(workspace, strikes[i], &settings, &readings[i], &err));
        }
        if (b == 0) {
            first_count = count;
            memcpy(first, strikes, count * sizeof first[0]);
            memcpy(first_readings, readings, count * sizeof readings[0]);
            printf("%zu strikes\n", count);
            assert_true(count >= 2);
            continue;
        }
        assert_int_equal(count, first_count);
        for (size_t i = 0; i < count; i++) {
            check_equal(strikes[i], first[i]);
            assert_int_equal(readings[i].mode_count, first_readings[i].mode_count);
            assert_memory_equal(readings[i].modes, first_readings[i].modes,
                                readings[i].mode_count * sizeof readings[i].modes[0]);
            strike_destroy(strikes[i]);
        }
    }
    for (size_t i = 0; i < first_count; i++)
        strike_destroy(first[i]);
    fit_workspace_destroy(workspace);
    bench_done(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(any_block_size_gives_the_same_strikes_and_readings),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
