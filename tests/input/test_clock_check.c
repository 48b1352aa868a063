/* Lost samples that no driver speaks of, on made-up stamps: late blocks, bursts, drifting clocks.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "input/clock_check.h"
#include "wane/clock.h"

#include <math.h>
#include <stdbool.h>

#define RATE_HZ    48000.0
#define BLOCK      480
#define SEED       11
#define LATE_SHARE 0.3

/* A card some of whose blocks come late by a random time, whose clock runs fast, and which loses
 * frames. */
struct made_up {
    double late_s;                /* at most */
    double drift;                 /* of the sample clock, ratio minus 1 */
    double stall_from_s, stall_s; /* blocks are held back, then come in one burst */
    double lose_at_s;
    uint64_t lose_frames;
};

struct told {
    uint64_t frames;
    unsigned times;
    double at_s;
};

static double random_share(uint64_t *random)
{
    *random = *random * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return (double)(*random >> 11) / 9007199254740992.0;
}

static struct told run(const struct made_up *card, double seconds)
{
    struct clock_check check;
    struct told told = {0};
    uint64_t random = SEED, frames = 0;
    double rate_hz = RATE_HZ * (1.0 + card->drift), newest_s = 0.0;
    bool has_lost = false;
    clock_check_init(&check, RATE_HZ);
    for (double t_s = 0.0; t_s < seconds;) {
        frames += BLOCK;
        t_s = (double)frames / rate_hz;
        if (!has_lost && card->lose_frames > 0 && t_s >= card->lose_at_s) {
            frames += card->lose_frames - BLOCK; /* time goes on, these never come */
            has_lost = true;
            continue;
        }
        bool is_late = random_share(&random) < LATE_SHARE;
        double arrival_s = t_s + (is_late ? card->late_s * random_share(&random) : 0.0);
        if (arrival_s >= card->stall_from_s && arrival_s < card->stall_from_s + card->stall_s)
            arrival_s = card->stall_from_s + card->stall_s;
        if (arrival_s < newest_s)
            arrival_s = newest_s;
        newest_s = arrival_s;
        uint64_t missing = clock_check_block(&check, BLOCK, (int64_t)((arrival_s + 100.0) * 1e9));
        if (missing > 0) {
            told.frames += missing;
            told.times++;
            told.at_s = t_s;
        }
    }
    return told;
}

static void late_blocks_bursts_and_drift_are_no_loss(void **state)
{
    (void)state;
    static const struct made_up cards[] = {
        {.late_s = 0.0},
        {.late_s = 0.03},
        {.late_s = 0.15},
        {.late_s = 0.02, .drift = 2e-4},
        {.late_s = 0.02, .drift = -2e-4},
        {.late_s = 0.02, .drift = -1e-3},
        {.late_s = 0.02, .stall_from_s = 20.0, .stall_s = 0.9},
        {.late_s = 0.02, .stall_from_s = 20.4, .stall_s = 0.3, .drift = 1e-4},
    };
    for (size_t i = 0; i < sizeof cards / sizeof cards[0]; i++) {
        struct told told = run(&cards[i], 300.0);
        if (told.times > 0)
            fail_msg("card %zu: %llu frames told as lost at %.2f s, seed %d", i,
                     (unsigned long long)told.frames, told.at_s, SEED);
    }
}

static void a_silent_loss_is_told_once_within_three_seconds(void **state)
{
    (void)state;
    static const struct made_up cards[] = {
        {.late_s = 0.0, .lose_at_s = 30.0, .lose_frames = 960},
        {.late_s = 0.03, .lose_at_s = 30.3, .lose_frames = 2400},
        {.late_s = 0.03, .lose_at_s = 30.7, .lose_frames = 24000, .drift = 1e-4},
        {.late_s = 0.03, .lose_at_s = 30.9, .lose_frames = 48000, .drift = -1e-4},
    };
    for (size_t i = 0; i < sizeof cards / sizeof cards[0]; i++) {
        struct told told = run(&cards[i], 100.0);
        double after_s = told.at_s - cards[i].lose_at_s;
        double off = fabs((double)told.frames - (double)cards[i].lose_frames);
        if (told.times != 1 || after_s > 3.1 + (double)cards[i].lose_frames / RATE_HZ ||
            off > 0.005 * RATE_HZ)
            fail_msg("card %zu: told %u times, %llu of %llu frames, after %.2f s, seed %d", i,
                     told.times, (unsigned long long)told.frames,
                     (unsigned long long)cards[i].lose_frames, after_s, SEED);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(late_blocks_bursts_and_drift_are_no_loss),
        cmocka_unit_test(a_silent_loss_is_told_once_within_three_seconds),
    };
    return cmocka_run_group_tests_name("input.clock_check", tests, NULL, NULL);
}
