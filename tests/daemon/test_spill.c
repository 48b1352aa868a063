/* Strikes that an earlier run put aside unread are read at the next start, before anything else. */
#include "wane/clock.h"
#include "wane/log.h"

#include <math.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cmocka.h>

#define RATE_HZ 48000.0

/* 0.2 s of quiet, then a ring of one mode at f_hz; quiet is a fixed dither far below it. */
static struct strike *make_strike(double f_hz, uint64_t first_frame)
{
    size_t frames = (size_t)RATE_HZ, trigger = frames / 5;
    struct strike *strike = calloc(1, sizeof *strike);
    strike->samples = calloc(frames, sizeof *strike->samples);
    uint32_t state = 12345;
    for (size_t n = 0; n < frames; n++) {
        state = state * 1664525u + 1013904223u; /* Numerical Recipes' LCG */
        double noise = ((double)(state >> 8) / 16777216.0 - 0.5) * 2e-4;
        double t = ((double)n - (double)trigger) / RATE_HZ;
        double ring = t < 0 ? 0 : 0.3 * exp(-8 * t) * sin(2 * WANE_PI * f_hz * t);
        strike->samples[n] = (float)(noise + ring);
    }
    strike->rate_hz = RATE_HZ;
    strike->channel = 1;
    strike->first_frame = first_frame;
    strike->frame_count = frames;
    strike->trigger = trigger;
    strike->end = STRIKE_END_INPUT;
    return strike;
}

static void spill_two(const char *path)
{
    struct error err;
    struct log_writer *log = log_writer_open(path, NULL, clock_utc_ms(), NULL, &err);
    assert_non_null(log);
    for (int i = 0; i < 2; i++) {
        struct log_context context = {.time_ms = 1700000000000 + 1000 * i, .strike_number = i + 1};
        struct strike *strike = make_strike(1000.0 + 500.0 * i, (uint64_t)(i * RATE_HZ));
        int64_t key = 0;
        strcpy(context.input, "bench card");
        assert_true(log_spill(log, strike, &context, &key, &err));
        strike_destroy(strike);
    }
    log_writer_close(log);
}

/* Runs waned until `wanted` strikes are read, then ends it. */
static void run_daemon(const char *path, int64_t wanted)
{
    struct error err;
    pid_t child = fork();
    if (child == 0) {
        execl(WANE_BUILD "/waned", "waned", "--listen", "127.0.0.1:0", "--log", path, (char *)NULL);
        _exit(127);
    }
    struct log_counts counts = {0};
    int64_t deadline_ns = clock_monotonic_ns() + 30 * CLOCK_NS_PER_S;
    struct log_reader *reader = log_reader_open(path, &err);
    assert_non_null(reader);
    while (counts.newest_id < wanted || counts.spilled > 0) {
        assert_true(clock_monotonic_ns() < deadline_ns);
        clock_sleep_until(clock_monotonic_ns() + CLOCK_NS_PER_S / 50);
        assert_true(log_counts(reader, &counts, &err));
    }
    log_reader_close(reader);
    int status = -1;
    assert_int_equal(kill(child, SIGTERM), 0);
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_true(WIFEXITED(status));
    assert_int_equal(WEXITSTATUS(status), 0);
}

static void strikes_left_unread_are_read_in_turn_at_the_next_start(void **state)
{
    (void)state;
    char folder[] = "/tmp/wane-spill-XXXXXX", path[64];
    assert_non_null(mkdtemp(folder));
    snprintf(path, sizeof path, "%s/log.sqlite", folder);
    spill_two(path);
    run_daemon(path, 2);
    struct error err;
    struct log_reader *reader = log_reader_open(path, &err);
    assert_non_null(reader);
    for (int i = 0; i < 2; i++) {
        struct log_stored stored;
        assert_true(log_read_strike(reader, i + 1, &stored, &err));
        assert_true(stored.reading.mode_count >= 1);
        double away_hz = fabs(stored.reading.modes[0].f_hz - (1000.0 + 500.0 * i));
        if (away_hz > 0.01)
            print_error("strike %d: %g Hz away, limit 0.01 Hz\n", i + 1, away_hz);
        assert_true(away_hz <= 0.01);
        /* The time of day is the spilled one's, put from the trigger to the fitted onset. */
        assert_true(llabs(stored.context.time_ms - (1700000000000 + 1000 * i)) <= 20);
        assert_string_equal(stored.context.input, "bench card");
        log_stored_done(&stored);
    }
    log_reader_close(reader);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(strikes_left_unread_are_read_in_turn_at_the_next_start),
    };
    return cmocka_run_group_tests_name("daemon.spill", tests, NULL, NULL);
}
