/* Recordings of real struck bodies and of other sounds, from the shared folder (see its README.md
 * for sources and licences). Skipped, and said so, where the folder is missing. */
#include "wane/detect.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <dirent.h>
#include <sndfile.h>

#include <cmocka.h>

#define BLOCK    4096
#define MOST     64
#define CHANNELS 8

struct heard {
    double seconds;
    double onset_s[MOST];
    size_t count;
};

static bool hear(const char *path, struct heard *heard)
{
    SF_INFO info = {0};
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    if (file == NULL || info.channels > CHANNELS)
        return false;
    static const struct detect_settings automatic = {0};
    struct detector *detector = detect_create(&automatic, info.samplerate, 1, NULL);
    float *frames = malloc(BLOCK * CHANNELS * sizeof *frames);
    assert_non_null(detector);
    assert_non_null(frames);
    sf_count_t got = 0;
    while ((got = sf_readf_float(file, frames, BLOCK)) > 0) {
        for (sf_count_t i = 0; i < got; i++)
            frames[i] = frames[i * info.channels];
        assert_true(detect_push_block(detector, frames, (size_t)got, NULL));
    }
    assert_true(detect_finish(detector, NULL));
    heard->seconds = (double)detect_frame_count(detector) / info.samplerate;
    heard->count = 0;
    for (struct strike *s = NULL; (s = detect_take_strike(detector)) != NULL; strike_destroy(s))
        if (heard->count < MOST)
            heard->onset_s[heard->count++] = (double)(s->first_frame + s->trigger) / s->rate_hz;
    free(frames);
    detect_destroy(detector);
    sf_close(file);
    return true;
}

typedef void check_recording(const char *path, const struct heard *heard);

static void for_each(const char *folder, check_recording *check)
{
    char path[512];
    snprintf(path, sizeof path, "%s/recordings/%s", WANE_SHARED, folder);
    DIR *directory = opendir(path);
    if (directory == NULL) {
        print_message("1 case skipped: no recordings in %s\n", path);
        skip();
    }
    size_t count = 0;
    for (const struct dirent *entry = NULL; (entry = readdir(directory)) != NULL;) {
        struct heard heard;
        snprintf(path, sizeof path, "%s/recordings/%s/%s", WANE_SHARED, folder, entry->d_name);
        if (entry->d_name[0] == '.' || !hear(path, &heard))
            continue;
        check(path, &heard);
        count++;
    }
    closedir(directory);
    print_message("%zu recordings in %s\n", count, folder);
    assert_true(count > 0);
}

/* All clips are trimmed at their strike (README.md: "strike at 0.0 s"), or nearly. */
static void check_clip(const char *path, const struct heard *heard)
{
    if (heard->count == 0 || heard->onset_s[0] > 0.02) {
        print_error("%s: %zu strikes, the first at %g s\n", path, heard->count,
                    heard->count > 0 ? heard->onset_s[0] : -1);
        fail();
    }
    /* Other sounds in the tails are strikes of their own, but few. */
    if (heard->count > 6) {
        print_error("%s: %zu strikes, limit 6\n", path, heard->count);
        fail();
    }
}

static void check_negative(const char *path, const struct heard *heard)
{
    if ((double)heard->count > 6 * heard->seconds) {
        print_error("%s: %zu strikes in %g s, limit 6 a second\n", path, heard->count,
                    heard->seconds);
        fail();
    }
}

static void each_clip_gives_its_strike_at_its_start(void **state)
{
    (void)state;
    for_each("clips", check_clip);
}

static void speech_and_music_do_not_flood(void **state)
{
    (void)state;
    for_each("negative", check_negative);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(each_clip_gives_its_strike_at_its_start),
        cmocka_unit_test(speech_and_music_do_not_flood),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
