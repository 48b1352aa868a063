/* What samples show of the card: true bits, one signal on two channels. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "input/signal_check.h"
#include "support/scratch.h"

#include <stdbool.h>

#define RATE_HZ 8000.0
#define FRAMES  24000

static float samples[FRAMES * 2];

/* Feeds the samples in blocks; true when it was decided. */
static bool feed(struct signal_check *check, size_t frame_count, size_t channels)
{
    bool is_decided = false;
    signal_check_init(check, RATE_HZ);
    for (size_t at = 0; at + 100 <= frame_count; at += 100)
        is_decided |=
            signal_check_block(check, samples + at * channels, 100, channels) == SIGNAL_DECIDED;
    return is_decided;
}

static void fill(unsigned bits, bool is_twin)
{
    static int32_t whole[FRAMES * 2];
    scratch_samples(3, bits, whole, FRAMES * 2);
    for (size_t i = 0; i < FRAMES * 2; i++)
        samples[i] = (float)whole[is_twin ? i / 2 * 2 : i] / 2147483648.0F;
}

static void true_bits_are_seen(void **state)
{
    (void)state;
    static const unsigned bits[] = {8, 12, 16, 20, 24};
    struct signal_check check;
    for (size_t i = 0; i < sizeof bits / sizeof bits[0]; i++) {
        fill(bits[i], false);
        assert_true(feed(&check, FRAMES, 2));
        assert_int_equal(signal_check_bits(&check), bits[i]);
    }
}

static void scaled_samples_have_no_true_bits(void **state)
{
    (void)state;
    struct signal_check check;
    fill(16, false);
    for (size_t i = 0; i < FRAMES * 2; i++)
        samples[i] *= 0.7071F;
    assert_true(feed(&check, FRAMES, 2));
    assert_int_equal(signal_check_bits(&check), 0);
}

static void one_microphone_sent_twice_is_seen(void **state)
{
    (void)state;
    struct signal_check check;
    fill(16, true);
    assert_true(feed(&check, FRAMES, 2));
    assert_false(check.channels_differ);
    samples[FRAMES] += 0.25F; /* one sample only */
    assert_true(feed(&check, FRAMES, 2));
    assert_true(check.channels_differ);
}

static void silence_decides_nothing(void **state)
{
    (void)state;
    struct signal_check check;
    for (size_t i = 0; i < FRAMES * 2; i++)
        samples[i] = 0.0F;
    assert_false(feed(&check, FRAMES, 2));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(true_bits_are_seen),
        cmocka_unit_test(scaled_samples_have_no_true_bits),
        cmocka_unit_test(one_microphone_sent_twice_is_seen),
        cmocka_unit_test(silence_decides_nothing),
    };
    return cmocka_run_group_tests_name("input.signal_check", tests, NULL, NULL);
}
