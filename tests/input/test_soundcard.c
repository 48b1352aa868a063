/* The watcher of the capture process against drivers that misbehave. This program is started again
 * as the capture process, so it plays the driver itself: the card's name says what goes wrong. No
 * sound card is needed; the real one is heard by tests/card. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "input/capture.h"
#include "wane/clock.h"
#include "wane/input.h"
#include "wane/ring.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#define RATE_HZ    48000
#define CHANNELS   2
#define BLOCK      480
#define BLOCKS     10
#define BLOCK_NS   (CLOCK_NS_PER_S / 100)
#define LOST       4800
#define PATIENCE_S 20.0

/* --- the driver --- */

static void say(const char *line)
{
    if (write(CAPTURE_FD_MESSAGES, line, strlen(line)) < 0)
        _exit(1);
}

static struct ring *make_ring(size_t bytes)
{
    if (ftruncate(CAPTURE_FD_RING, (off_t)bytes) != 0)
        _exit(1);
    void *memory = mmap(NULL, bytes, PROT_READ | PROT_WRITE, MAP_SHARED, CAPTURE_FD_RING, 0);
    return memory == MAP_FAILED ? NULL : ring_init(memory, bytes, CHANNELS);
}

static void say_ready(size_t bytes, int rate_hz, const char *name)
{
    char line[200];
    (void)snprintf(line, sizeof line, "ready\t%d\t%d\t%zu\t%s\n", rate_hz, CHANNELS, bytes, name);
    say(line);
}

/* Each sample is its frame's number. */
static void give(struct ring *ring, uint64_t first_frame, uint32_t flags, int64_t stamp_ns)
{
    static float samples[BLOCK * CHANNELS];
    struct ring_block block = {first_frame, stamp_ns, BLOCK, flags};
    for (size_t i = 0; i < BLOCK * CHANNELS; i++)
        samples[i] = (float)(first_frame + i / CHANNELS);
    while (!ring_write(ring, &block, samples))
        clock_sleep_until(clock_monotonic_ns() + 1000000);
}

static void wait_for_the_end(void)
{
    char byte;
    while (read(STDIN_FILENO, &byte, 1) > 0) {
    }
    _exit(0);
}

static void give_some(struct ring *ring, uint64_t skip_before_5th, uint32_t flags_of_5th)
{
    uint64_t frame = 0;
    for (int n = 0; n < BLOCKS; n++) {
        frame += n == 5 ? skip_before_5th : 0;
        give(ring, frame, n == 5 ? flags_of_5th : 0, clock_monotonic_ns());
        frame += BLOCK;
    }
}

/* Twenty seconds by their stamps, in no time; in the tenth, frames go missing without a word. */
static void give_with_a_silent_loss(struct ring *ring)
{
    int64_t stamp_ns = clock_monotonic_ns();
    for (uint64_t n = 0; n < 2000; n++) {
        stamp_ns += BLOCK_NS;
        if (n == 1000)
            stamp_ns += CLOCK_NS_PER_S / RATE_HZ * LOST;
        give(ring, n * BLOCK, 0, stamp_ns);
    }
}

static int play_the_driver(char **argv)
{
    const char *name = argv[3] != NULL ? argv[3] : "";
    bool is_first = strcmp(argv[4], "0") == 0; /* later ones are told the rate that must be kept */
    size_t bytes = ring_bytes(RATE_HZ, CHANNELS, 1.0);
    if (strcmp(name, "refusing") == 0) {
        say("error\t7\tgong: in use by another program\n");
        return 1;
    }
    if (strcmp(name, "ringless") == 0) {
        say_ready(bytes, RATE_HZ, name); /* but the memory is empty */
        wait_for_the_end();
    }
    if (strcmp(name, "crashing at once") == 0)
        return 1;
    if (strcmp(name, "babbling") == 0) {
        for (int i = 0; i < 300; i++)
            say("\x01\xff\t\t\tnonsense without end ");
        say("\nready\nready\tx\nwarn\nerror\n\n\t\nwarn\tgain control is on\n");
    }
    struct ring *ring = make_ring(bytes);
    bool is_other = strcmp(name, "coming back as another") == 0;
    say_ready(bytes, is_other && !is_first ? 2 * RATE_HZ : RATE_HZ, name);
    if (strcmp(name, "skipping") == 0)
        give_some(ring, LOST, 0);
    else if (strcmp(name, "overflowing") == 0)
        give_some(ring, 0, RING_OVERFLOW);
    else if (strcmp(name, "losing in silence") == 0)
        give_with_a_silent_loss(ring);
    else
        give_some(ring, 0, 0);
    if (strcmp(name, "stopping") == 0 && is_first)
        say("stopped\n");
    else if ((strcmp(name, "crashing") == 0 || is_other) && is_first)
        return 1;
    wait_for_the_end();
    return 0;
}

/* --- the tests --- */

static double now_s(void)
{
    return (double)clock_monotonic_ns() / (double)CLOCK_NS_PER_S;
}

static struct input *open_card(const char *name)
{
    struct error err = {0};
    struct input_choice choice = {.name = name};
    struct input *input = input_open(&choice, &err);
    if (input == NULL)
        fail_msg("%s", err.text);
    return input;
}

/* The next event that is not NOTHING. */
static struct input_block next_event(struct input *input)
{
    struct input_block block = {0};
    struct error err = {0};
    double until_s = now_s() + PATIENCE_S;
    while (block.event == INPUT_NOTHING && now_s() < until_s)
        assert_true(input_read(input, 100, &block, &err));
    return block;
}

static void expect_blocks(struct input *input, int count, uint64_t at, uint64_t first_sample)
{
    for (int n = 0; n < count; n++) {
        struct input_block block = next_event(input);
        assert_int_equal(block.event, INPUT_FRAMES);
        assert_int_equal(block.frame_count, BLOCK);
        assert_true(block.first_frame == at + (uint64_t)n * BLOCK);
        assert_true(block.frames[0] == (float)(first_sample + (uint64_t)n * BLOCK));
        assert_true(block.frames[BLOCK * CHANNELS - 1] ==
                    (float)(first_sample + (uint64_t)n * BLOCK + BLOCK - 1));
    }
}

static void expect_gap(struct input *input, uint64_t at, uint64_t lost)
{
    struct input_block block = next_event(input);
    assert_int_equal(block.event, INPUT_GAP);
    assert_true(block.first_frame == at && block.lost_frames == lost);
}

static void frames_that_found_the_ring_full_are_counted(void **state)
{
    (void)state;
    struct input *input = open_card("skipping");
    expect_blocks(input, 5, 0, 0);
    expect_gap(input, 5 * BLOCK, LOST);
    expect_blocks(input, 5, 5 * BLOCK + LOST, 5 * BLOCK + LOST);
    assert_true(input_get_info(input)->lost_frames == LOST);
    input_close(input);
}

static void an_overflow_is_a_gap_of_unknown_length(void **state)
{
    (void)state;
    struct input *input = open_card("overflowing");
    expect_blocks(input, 5, 0, 0);
    expect_gap(input, 5 * BLOCK, 0);
    expect_blocks(input, 5, 5 * BLOCK, 5 * BLOCK);
    input_close(input);
}

static void a_silent_loss_is_told_by_the_clock(void **state)
{
    (void)state;
    struct input *input = open_card("losing in silence");
    uint64_t lost = 0, blocks = 0, lost_at = 0;
    while (blocks < 2000) {
        struct input_block block = next_event(input);
        assert_true(block.event == INPUT_FRAMES || block.event == INPUT_GAP);
        blocks += block.event == INPUT_FRAMES ? 1 : 0;
        lost += block.lost_frames;
        lost_at = block.event == INPUT_GAP ? block.first_frame : lost_at;
    }
    assert_in_range(lost, LOST - 48, LOST + 48);
    assert_in_range(lost_at, 1000 * BLOCK, 1350 * BLOCK);
    const struct input_info *info = input_get_info(input);
    assert_int_equal(info->warning_count, 2); /* both channels are the same, too */
    assert_non_null(strstr(info->warnings[1], "lost without a word from the driver"));
    input_close(input);
}

static void expect_gone(struct input *input, uint64_t at, const char *why)
{
    struct input_block block = next_event(input);
    assert_int_equal(block.event, INPUT_GONE);
    assert_true(block.first_frame == at);
    if (block.text == NULL || strstr(block.text, why) == NULL)
        fail_msg("gone because \"%s\", expected \"%s\"", block.text, why);
    assert_int_equal(input_get_info(input)->state, INPUT_LOST);
}

static void what_came_before_a_crash_is_kept_and_the_card_comes_back(void **state)
{
    (void)state;
    static const struct {
        const char *name, *why;
    } cards[] = {{"crashing", "the card's driver crashed"}, {"stopping", "ended the stream"}};
    for (size_t i = 0; i < sizeof cards / sizeof cards[0]; i++) {
        struct input *input = open_card(cards[i].name);
        expect_blocks(input, BLOCKS, 0, 0);
        expect_gone(input, BLOCKS * BLOCK, cards[i].why);
        struct input_block block = next_event(input);
        assert_int_equal(block.event, INPUT_BACK);
        assert_int_equal(input_get_info(input)->state, INPUT_LISTENING);
        expect_blocks(input, BLOCKS, BLOCKS * BLOCK + block.lost_frames, 0);
        input_close(input);
    }
}

static void a_card_that_falls_silent_is_lost(void **state)
{
    (void)state;
    struct input *input = open_card("falling silent");
    expect_blocks(input, BLOCKS, 0, 0);
    expect_gone(input, BLOCKS * BLOCK, "gives no samples any more");
    input_close(input);
}

static void a_card_that_comes_back_with_another_rate_stays_lost(void **state)
{
    (void)state;
    struct input *input = open_card("coming back as another");
    expect_blocks(input, BLOCKS, 0, 0);
    expect_gone(input, BLOCKS * BLOCK, "crashed");
    double until_s = now_s() + 2.5; /* two tries */
    struct input_block block;
    struct error err = {0};
    while (now_s() < until_s) {
        assert_true(input_read(input, 100, &block, &err));
        assert_int_equal(block.event, INPUT_NOTHING);
    }
    assert_int_equal(input_get_info(input)->state, INPUT_LOST);
    input_close(input);
}

static void check_open_fails(const char *name, enum error_kind kind, const char *part)
{
    struct error err = {0};
    struct input_choice choice = {.name = name};
    assert_null(input_open(&choice, &err));
    if (err.kind != kind || strstr(err.text, part) == NULL)
        fail_msg("%s: kind %d, \"%s\"", name, (int)err.kind, err.text);
}

static void a_card_that_does_not_open_is_refused_with_its_reason(void **state)
{
    (void)state;
    check_open_fails("refusing", ERROR_DEVICE, "gong: in use by another program");
    check_open_fails("crashing at once", ERROR_DEVICE, "the card's driver crashed");
    check_open_fails("ringless", ERROR_INTERNAL, "ringless: the capture process made no ring");
}

static void babble_between_the_lines_is_passed_over(void **state)
{
    (void)state;
    struct input *input = open_card("babbling");
    expect_blocks(input, BLOCKS, 0, 0);
    const struct input_info *info = input_get_info(input);
    assert_int_equal(info->warning_count, 1);
    assert_string_equal(info->warnings[0], "gain control is on");
    input_close(input);
}

int main(int argc, char **argv)
{
    if (input_is_capture_process(argc, argv))
        return play_the_driver(argv);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(frames_that_found_the_ring_full_are_counted),
        cmocka_unit_test(an_overflow_is_a_gap_of_unknown_length),
        cmocka_unit_test(a_silent_loss_is_told_by_the_clock),
        cmocka_unit_test(what_came_before_a_crash_is_kept_and_the_card_comes_back),
        cmocka_unit_test(a_card_that_falls_silent_is_lost),
        cmocka_unit_test(a_card_that_comes_back_with_another_rate_stays_lost),
        cmocka_unit_test(a_card_that_does_not_open_is_refused_with_its_reason),
        cmocka_unit_test(babble_between_the_lines_is_passed_over),
    };
    return cmocka_run_group_tests_name("input.soundcard", tests, NULL, NULL);
}
