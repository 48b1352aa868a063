/* Real struck bodies, shared/recordings, against a reference made by two independent methods
 * (README.md there: demodulation with a straight line, and matrix pencil with least squares). What
 * is asked is what that README asks: grade A modes at -30 dB or above within 0.05 % in f and 15 %
 * in decay; most rings good, none rejected; no good strike in what is no ring. */
#include "clips.h"
#include "quick.h"
#include "support/near.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define STRIKES_MAX 64

static struct clips clips;

static bool is_there(void)
{
    const char *shared = getenv("WANE_SHARED");
    if (clips_open(&clips, shared ? shared : WANE_SHARED))
        return true;
    printf("SKIPPED: no recordings in %s (WANE_SHARED names the folder)\n",
           shared ? shared : WANE_SHARED);
    return false;
}

/* All strikes of a clip, read in order; returns how many. readings [STRIKES_MAX] */
static size_t read_clip(const struct clip *clip, struct reading *readings)
{
    float *samples;
    size_t frame_count;
    double rate_hz;
    struct strike *strikes[STRIKES_MAX];
    struct fit_settings settings = {0};
    struct error err = {0};
    assert_true(clips_load(&clips, clip, 0.3, &samples, &frame_count, &rate_hz));
    size_t count = quick_detect(samples, frame_count, rate_hz, 0, strikes, STRIKES_MAX);
    free(samples);
    struct fit_workspace *workspace = fit_workspace_create(frame_count, &err);
    assert_non_null(workspace);
    for (size_t i = 0; i < count; i++) {
        if (i > 0)
            fit_carry(strikes[i - 1], &readings[i - 1], strikes[i]);
        assert_true(fit_strike(workspace, strikes[i], &settings, &readings[i], &err));
    }
    fit_workspace_destroy(workspace);
    for (size_t i = 0; i < count; i++)
        strike_destroy(strikes[i]);
    return count;
}

static double nearest_share(double value, const double reference[2])
{
    return fmin(fabs(value / reference[0] - 1.0), fabs(value / reference[1] - 1.0));
}

/* Returns how many grade A modes of the clip are wrong or missing. */
static unsigned check_modes(const struct clip *clip, const struct reading *reading)
{
    unsigned wrong = 0;
    for (size_t i = 0; i < clips.mode_count; i++) {
        const struct clip_mode *mode = &clips.modes[i];
        if (strcmp(mode->name, clip->name) != 0 || mode->grade != 'A' || mode->level_db < -30.0)
            continue;
        bool found = false;
        for (unsigned k = 0; !found && k < reading->mode_count; k++)
            found = nearest_share(reading->modes[k].f_hz, mode->f_hz) <= 5e-4 &&
                    nearest_share(reading->modes[k].decay_per_s, mode->decay_per_s) <= 0.15;
        if (!found) {
            printf("%s: no mode within 0.05 %% of %.6g Hz and 15 %% of %.4g /s among", clip->name,
                   mode->f_hz[0], mode->decay_per_s[0]);
            for (unsigned k = 0; k < reading->mode_count; k++)
                printf(" %.6g Hz %.4g /s;", reading->modes[k].f_hz, reading->modes[k].decay_per_s);
            printf("\n");
            wrong++;
        }
    }
    return wrong;
}

static void grade_a_modes_are_read_and_rings_are_believed(void **state)
{
    (void)state;
    if (!is_there())
        skip();
    unsigned wrong = 0, rings = 0, good = 0, rejected = 0;
    for (size_t c = 0; c < clips.clip_count; c++) {
        const struct clip *clip = &clips.clips[c];
        static struct reading readings[STRIKES_MAX];
        if (strcmp(clip->kind, "negative") == 0)
            continue;
        size_t count = read_clip(clip, readings);
        if (count == 0)
            printf("%s: no strike found\n", clip->name);
        wrong += count == 0 || check_modes(clip, &readings[0]) > 0;
        if (strcmp(clip->kind, "ring") != 0 || count == 0)
            continue;
        rings++;
        good += readings[0].verdict == VERDICT_GOOD;
        rejected += readings[0].verdict == VERDICT_REJECTED;
        if (readings[0].verdict != VERDICT_GOOD)
            printf("%s: %s, reasons %#x\n", clip->name, verdict_name(readings[0].verdict),
                   readings[0].reasons);
    }
    printf("rings %u, good %u, rejected %u; clips with a wrong mode %u\n", rings, good, rejected,
           wrong);
    assert_int_equal(wrong, 0);
    assert_int_equal(rejected, 0);
    /* The aim is most of them. Several of these bars and bells differ between early and late by
     * more than the contract's 5 % and 1e-4, and are doubtful by its word; fewer good ones than
     * this is worse. */
    assert_true(5 * good >= 2 * rings);
}

static void what_is_no_ring_is_never_good(void **state)
{
    (void)state;
    if (!is_there())
        skip();
    unsigned good = 0;
    for (size_t c = 0; c < clips.clip_count; c++) {
        const struct clip *clip = &clips.clips[c];
        static struct reading readings[STRIKES_MAX];
        if (strcmp(clip->kind, "negative") != 0)
            continue;
        size_t count = read_clip(clip, readings);
        for (size_t i = 0; i < count; i++)
            if (readings[i].verdict == VERDICT_GOOD) {
                printf("%s: strike %zu of %zu is called good: %.6g Hz %.4g /s\n", clip->name, i + 1,
                       count, readings[i].modes[0].f_hz, readings[i].modes[0].decay_per_s);
                good++;
            }
    }
    assert_int_equal(good, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(grade_a_modes_are_read_and_rings_are_believed),
        cmocka_unit_test(what_is_no_ring_is_never_good),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
