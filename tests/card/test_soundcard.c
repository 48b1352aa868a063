/* The sound-card input on the tests' own card, through PortAudio: every frame bit for bit, and the
 * card's loss and return in four ways. The limits in seconds are the program's promise (2 s to see
 * a loss, 3 s to listen again). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "input/capture.h"
#include "support/scratch.h"
#include "support/virtual_card.h"
#include "wane/clock.h"
#include "wane/input.h"

#include <dirent.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#define RATE_HZ     48000
#define CHANNELS    2
#define FRAMES      (3 * RATE_HZ)
#define SEED        5
#define SEEN_S      2.0
#define LISTENING_S 3.0
#define PATIENCE_S  20.0

static struct virtual_card card;
static struct scratch scratch;
static bool has_card;
static int32_t samples[FRAMES * CHANNELS];
static char noise_path[512];

static double now_s(void)
{
    return (double)clock_monotonic_ns() / (double)CLOCK_NS_PER_S;
}

static void need_card(void)
{
    if (has_card)
        return;
    printf("skipped: no virtual sound card (pulseaudio, pulseaudio-utils, libasound2-plugins)\n");
    skip();
}

static struct input *open_card(void)
{
    struct error err = {0};
    struct input_choice choice = {.name = VIRTUAL_CARD_NAME};
    struct input *input = input_open(&choice, &err);
    if (input == NULL)
        fail_msg("%s", err.text);
    return input;
}

/* Reads on until this event comes. */
static struct input_block wait_for_event(struct input *input, enum input_event event)
{
    struct input_block block = {0};
    struct error err = {0};
    double until_s = now_s() + PATIENCE_S;
    do
        assert_true(input_read(input, 100, &block, &err));
    while (block.event != event && now_s() < until_s);
    assert_int_equal(block.event, event);
    return block;
}

/* Listens until all that is played has come, and holds every sample against the recording's. */
static void check_played(struct input *input, const char *path)
{
    pid_t player = virtual_card_play(&card, path);
    struct input_block block = {0};
    struct error err = {0};
    size_t next = 0; /* sample of the recording; the first is not zero */
    double until_s = now_s() + PATIENCE_S;
    assert_int_not_equal(samples[0], 0);
    while (next < FRAMES * CHANNELS && now_s() < until_s) {
        assert_true(input_read(input, 100, &block, &err));
        assert_true(block.event == INPUT_FRAMES || block.event == INPUT_NOTHING);
        for (size_t i = 0; i < block.frame_count * CHANNELS && next < FRAMES * CHANNELS; i++) {
            float expected = (float)samples[next] / 2147483648.0F;
            if (next == 0 && block.frames[i] == 0.0F)
                continue;
            if (block.frames[i] != expected)
                fail_msg("sample %zu of what was played is %.9g, not %.9g (seed %d)", next,
                         (double)block.frames[i], (double)expected, SEED);
            next++;
        }
    }
    assert_int_equal(next, FRAMES * CHANNELS);
    int status = -1;
    assert_int_equal(waitpid(player, &status, 0), player);
    assert_int_equal(status, 0);
}

static bool has_warning(const struct input_info *info, const char *part)
{
    for (unsigned i = 0; i < info->warning_count; i++) {
        if (strstr(info->warnings[i], part) != NULL)
            return true;
    }
    return false;
}

static void what_is_played_arrives_bit_for_bit(void **state)
{
    (void)state;
    need_card();
    struct input *input = open_card();
    const struct input_info *info = input_get_info(input);
    assert_int_equal(info->kind, INPUT_CARD);
    assert_int_equal(info->state, INPUT_LISTENING);
    assert_true(info->rate_hz == RATE_HZ && info->channels == CHANNELS);
    check_played(input, noise_path);
    assert_int_equal(info->bits, 24);
    assert_true(has_warning(info, "sound server"));
    assert_false(has_warning(info, "both channels"));
    assert_true(info->lost_frames == 0);
    input_close(input);
}

static void one_microphone_sent_twice_is_warned_of(void **state)
{
    (void)state;
    need_card();
    static int32_t twin[FRAMES * CHANNELS];
    char path[512];
    for (size_t i = 0; i < FRAMES * CHANNELS; i++)
        twin[i] = samples[i / CHANNELS * CHANNELS];
    scratch_record(scratch_path(&scratch, "twin.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_24,
                   RATE_HZ, CHANNELS, twin, FRAMES);
    struct input *input = open_card();
    pid_t player = virtual_card_play(&card, path);
    struct input_block block = {0};
    struct error err = {0};
    double until_s = now_s() + PATIENCE_S;
    while (!has_warning(input_get_info(input), "both channels carry the same") && now_s() < until_s)
        assert_true(input_read(input, 100, &block, &err));
    assert_true(has_warning(input_get_info(input), "both channels carry the same"));
    (void)waitpid(player, NULL, 0);
    input_close(input);
}

static void check_loss_and_return(const char *how)
{
    need_card();
    struct input *input = open_card();
    (void)wait_for_event(input, INPUT_FRAMES);
    double away_s = now_s();
    virtual_card_unplug(&card, how);
    struct input_block block = wait_for_event(input, INPUT_GONE);
    double seen_s = now_s() - away_s;
    uint64_t gone_at = block.first_frame;
    assert_non_null(block.text);
    assert_int_equal(input_get_info(input)->state, INPUT_LOST);
    double until_s = now_s() + 1.5; /* one vain try at least */
    struct error err = {0};
    while (now_s() < until_s) {
        assert_true(input_read(input, 100, &block, &err));
        assert_int_equal(block.event, INPUT_NOTHING);
    }
    virtual_card_replug(&card);
    double back_s = now_s();
    block = wait_for_event(input, INPUT_BACK);
    double again_s = now_s() - back_s;
    assert_int_equal(input_get_info(input)->state, INPUT_LISTENING);
    assert_true(block.first_frame == gone_at && block.lost_frames > RATE_HZ);
    printf("%s: loss seen after %.2f s, listening again %.2f s after the return\n", how, seen_s,
           again_s);
    if (seen_s > SEEN_S || again_s > LISTENING_S)
        fail_msg("%s: seen after %.2f s (limit %.1f), again after %.2f s (limit %.1f)", how, seen_s,
                 SEEN_S, again_s, LISTENING_S);
    block = wait_for_event(input, INPUT_FRAMES);
    assert_true(block.first_frame == gone_at + input_get_info(input)->lost_frames);
    check_played(input, noise_path);
    input_close(input);
}

static void a_card_that_is_pulled_out_comes_back(void **state)
{
    (void)state;
    check_loss_and_return("remove");
}

static void a_server_that_dies_comes_back(void **state)
{
    (void)state;
    check_loss_and_return("kill");
}

static void a_card_that_falls_silent_comes_back(void **state)
{
    (void)state;
    check_loss_and_return("suspend");
}

static void a_driver_that_freezes_comes_back(void **state)
{
    (void)state;
    check_loss_and_return("freeze");
}

static void a_listener_that_was_away_too_long_is_told_what_it_lost(void **state)
{
    (void)state;
    need_card();
    struct input *input = open_card();
    struct input_block block = wait_for_event(input, INPUT_FRAMES);
    /* The ring holds 4 s at least and 8 s less a block at most. */
    clock_sleep_until(clock_monotonic_ns() + 9 * CLOCK_NS_PER_S);
    block = wait_for_event(input, INPUT_GAP);
    assert_true(block.lost_frames > 0);
    uint64_t gap_at = block.first_frame, lost = block.lost_frames;
    assert_true(gap_at >= 4 * RATE_HZ);
    block = wait_for_event(input, INPUT_FRAMES);
    assert_true(block.first_frame == gap_at + lost);
    assert_true(input_get_info(input)->lost_frames == lost);
    input_close(input);
}

static void check_open_fails(const char *name, enum error_kind kind, const char *part)
{
    struct error err = {0};
    struct input_choice choice = {.name = name};
    struct input *input = input_open(&choice, &err);
    assert_null(input);
    if (err.kind != kind || strstr(err.text, part) == NULL)
        fail_msg("kind %d: %s", (int)err.kind, err.text);
}

static void a_card_is_chosen_by_a_part_of_its_name(void **state)
{
    (void)state;
    need_card();
    struct error err = {0};
    struct input_choice choice = {.name = "STCAR"};
    struct input *input = input_open(&choice, &err);
    assert_non_null(input);
    assert_string_equal(input_get_info(input)->name, VIRTUAL_CARD_NAME);
    input_close(input);
    check_open_fails("a", ERROR_USAGE, "`a` fits 2 sound cards: `testcard`, `default`");
    check_open_fails("gong", ERROR_NOT_FOUND,
                     "no sound card named `gong`; there are `testcard`, `default`");
}

static void the_list_names_the_card_and_warns_of_the_server(void **state)
{
    (void)state;
    need_card();
    struct input_card *cards = NULL;
    size_t count = 0;
    struct error err = {0};
    assert_true(input_list_cards(&cards, &count, &err));
    assert_int_equal(count, 2);
    assert_string_equal(cards[0].name, VIRTUAL_CARD_NAME);
    assert_string_equal(cards[0].words, VIRTUAL_CARD_NAME);
    assert_string_equal(cards[0].host, "ALSA");
    assert_true(cards[0].is_behind_server);
    assert_int_equal(cards[0].rate_count, 0);
    assert_true(cards[0].warning_count == 1 &&
                strstr(cards[0].warnings[0], "sound server") != NULL);
    free(cards);
}

static void a_driver_that_hangs_does_not_hang_the_list(void **state)
{
    (void)state;
    need_card();
    struct input_card *cards = NULL;
    size_t count = 0;
    struct error err = {0};
    virtual_card_unplug(&card, "freeze");
    double begun_s = now_s();
    bool is_listed = input_list_cards(&cards, &count, &err);
    double took_s = now_s() - begun_s;
    virtual_card_replug(&card);
    assert_false(is_listed);
    assert_int_equal(err.kind, ERROR_DEVICE);
    if (took_s > 6.0)
        fail_msg("took %.2f s, limit 6 s", took_s);
}

/* Capture processes that this program, or a child of it, has started. */
static int count_capture_processes(void)
{
    char own[512] = "", other[512], path[300], words[256];
    int count = 0;
    DIR *all = opendir("/proc");
    assert_non_null(all);
    assert_true(readlink("/proc/self/exe", own, sizeof own - 1) > 0);
    for (struct dirent *entry = readdir(all); entry != NULL; entry = readdir(all)) {
        (void)snprintf(path, sizeof path, "/proc/%s/exe", entry->d_name);
        memset(other, 0, sizeof other);
        if (readlink(path, other, sizeof other - 1) <= 0 || strcmp(own, other) != 0)
            continue;
        (void)snprintf(path, sizeof path, "/proc/%s/cmdline", entry->d_name);
        FILE *file = fopen(path, "r");
        size_t length = file != NULL ? fread(words, 1, sizeof words - 1, file) : 0;
        words[length] = '\0';
        size_t first = strlen(words) + 1;
        count += first < length && strcmp(words + first, CAPTURE_WORD) == 0 ? 1 : 0;
        if (file != NULL)
            (void)fclose(file);
    }
    (void)closedir(all);
    return count;
}

static void wait_for_capture_processes(int wanted)
{
    double until_s = now_s() + PATIENCE_S;
    while (count_capture_processes() != wanted && now_s() < until_s)
        clock_sleep_until(clock_monotonic_ns() + CLOCK_NS_PER_S / 100);
    assert_int_equal(count_capture_processes(), wanted);
}

static void the_capture_process_ends_with_its_parent(void **state)
{
    (void)state;
    need_card();
    wait_for_capture_processes(0);
    pid_t parent = fork();
    assert_true(parent >= 0);
    if (parent == 0) {
        struct input_choice choice = {.name = VIRTUAL_CARD_NAME};
        struct error err = {0};
        bool is_good = input_open(&choice, &err) != NULL && count_capture_processes() == 1;
        _exit(is_good ? 0 : 1); /* without input_close: as if it had crashed */
    }
    int status = -1;
    assert_int_equal(waitpid(parent, &status, 0), parent);
    assert_int_equal(status, 0);
    wait_for_capture_processes(0);
}

static int begin(void **state)
{
    (void)state;
    scratch_make(&scratch);
    scratch_samples(SEED, 24, samples, FRAMES * CHANNELS);
    scratch_record(scratch_path(&scratch, "noise.wav", noise_path),
                   SF_FORMAT_WAV | SF_FORMAT_PCM_24, RATE_HZ, CHANNELS, samples, FRAMES);
    has_card = virtual_card_start(&card, RATE_HZ, CHANNELS);
    return 0;
}

static int end(void **state)
{
    (void)state;
    scratch_remove(&scratch);
    if (has_card)
        virtual_card_stop(&card);
    return 0;
}

int main(int argc, char **argv)
{
    if (input_is_capture_process(argc, argv))
        return input_capture_main(argc, argv);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_is_played_arrives_bit_for_bit),
        cmocka_unit_test(one_microphone_sent_twice_is_warned_of),
        cmocka_unit_test(a_card_that_is_pulled_out_comes_back),
        cmocka_unit_test(a_server_that_dies_comes_back),
        cmocka_unit_test(a_card_that_falls_silent_comes_back),
        cmocka_unit_test(a_driver_that_freezes_comes_back),
        cmocka_unit_test(a_listener_that_was_away_too_long_is_told_what_it_lost),
        cmocka_unit_test(a_card_is_chosen_by_a_part_of_its_name),
        cmocka_unit_test(the_list_names_the_card_and_warns_of_the_server),
        cmocka_unit_test(a_driver_that_hangs_does_not_hang_the_list),
        cmocka_unit_test(the_capture_process_ends_with_its_parent),
    };
    return cmocka_run_group_tests_name("card.soundcard", tests, begin, end);
}
