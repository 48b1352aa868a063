/* The ring between the audio callback and the listener: order, refusal when full, and two threads
 * at full speed (run with -DWANE_SANITIZE=thread as well). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "wane/ring.h"

#include <pthread.h>
#include <sched.h>
#include <stdlib.h>
#include <string.h>

#define CHANNELS   2
#define BLOCK_MAX  700
#define SMALL_RING 65536

static struct ring *make_ring(size_t bytes, void **out_memory)
{
    *out_memory = aligned_alloc(64, bytes);
    assert_non_null(*out_memory);
    memset(*out_memory, 0, bytes);
    struct ring *ring = ring_init(*out_memory, bytes, CHANNELS);
    assert_non_null(ring);
    return ring;
}

/* The sample that stands at a place of the stream. */
static float sample_at(uint64_t frame, size_t channel)
{
    return (float)((frame * CHANNELS + channel) % 8388593);
}

static void fill(float *samples, uint64_t first_frame, uint32_t count)
{
    for (uint32_t i = 0; i < count; i++) {
        for (size_t c = 0; c < CHANNELS; c++)
            samples[i * CHANNELS + c] = sample_at(first_frame + i, c);
    }
}

static void check(const float *samples, uint64_t first_frame, uint32_t count)
{
    for (uint32_t i = 0; i < count; i++) {
        for (size_t c = 0; c < CHANNELS; c++) {
            if (samples[i * CHANNELS + c] != sample_at(first_frame + i, c))
                fail_msg("frame %llu, channel %zu: %g, expected %g",
                         (unsigned long long)(first_frame + i), c,
                         (double)samples[i * CHANNELS + c], (double)sample_at(first_frame + i, c));
        }
    }
}

static void what_goes_in_comes_out_in_order(void **state)
{
    (void)state;
    void *memory = NULL;
    struct ring *ring = make_ring(SMALL_RING, &memory);
    static float in[BLOCK_MAX * CHANNELS], out[BLOCK_MAX * CHANNELS];
    uint64_t frame = 0;
    for (uint32_t n = 1; n <= 3000; n++) {
        struct ring_block block = {frame, 1000 + (int64_t)n, n % BLOCK_MAX + 1, n % 7 == 0}, got;
        fill(in, frame, block.frame_count);
        assert_true(ring_write(ring, &block, in));
        assert_true(ring_read(ring, &got, out, BLOCK_MAX));
        assert_memory_equal(&got, &block, sizeof got);
        check(out, got.first_frame, got.frame_count);
        assert_false(ring_read(ring, &got, out, BLOCK_MAX));
        frame += block.frame_count;
    }
    free(memory);
}

static void a_full_ring_refuses_and_keeps_what_it_has(void **state)
{
    (void)state;
    void *memory = NULL;
    struct ring *ring = make_ring(SMALL_RING, &memory);
    static float samples[100 * CHANNELS];
    uint64_t written = 0, read = 0;
    struct ring_block block = {.frame_count = 100};
    fill(samples, 0, 100);
    for (;;) {
        block.first_frame = written * 100;
        fill(samples, block.first_frame, 100);
        if (!ring_write(ring, &block, samples))
            break;
        written++;
    }
    assert_true(written >= SMALL_RING / 2 / (100 * CHANNELS * 4 + 24) - 1);
    assert_false(ring_write(ring, &block, samples));
    while (ring_read(ring, &block, samples, 100)) {
        assert_int_equal(block.first_frame, read * 100);
        check(samples, block.first_frame, block.frame_count);
        read++;
    }
    assert_int_equal(read, written);
    free(memory);
}

static void a_long_block_comes_out_in_parts(void **state)
{
    (void)state;
    void *memory = NULL;
    struct ring *ring = make_ring(SMALL_RING, &memory);
    static float samples[BLOCK_MAX * CHANNELS], part[64 * CHANNELS];
    struct ring_block block = {5000, 77, 300, RING_OVERFLOW}, got;
    fill(samples, 5000, 300);
    assert_true(ring_write(ring, &block, samples));
    uint64_t next = 5000;
    while (ring_read(ring, &got, part, 64)) {
        assert_int_equal(got.first_frame, next);
        assert_int_equal(got.flags, next == 5000 ? RING_OVERFLOW : 0);
        assert_int_equal(got.stamp_ns, 77);
        check(part, got.first_frame, got.frame_count);
        next += got.frame_count;
    }
    assert_int_equal(next, 5300);
    free(memory);
}

static void nonsense_in_the_memory_is_no_ring(void **state)
{
    (void)state;
    unsigned char *memory = aligned_alloc(64, SMALL_RING);
    assert_non_null(memory);
    struct ring_block block;
    float samples[16];
    uint32_t random = 3;
    for (int round = 0; round < 2000; round++) {
        (void)ring_init(memory, SMALL_RING, CHANNELS);
        for (int i = 0; i < 6; i++) {
            random = random * 1664525U + 1013904223U;
            memory[(random >> 8) % 320] = (unsigned char)(random >> 24);
        }
        struct ring *ring = ring_attach(memory, SMALL_RING);
        if (ring != NULL && ring_channels(ring) == CHANNELS)
            (void)ring_read(ring, &block, samples, 8); /* must only stay inside the memory */
    }
    memset(memory, 0, SMALL_RING);
    assert_null(ring_attach(memory, SMALL_RING));
    assert_null(ring_attach(memory, 16));
    assert_null(ring_init(memory, 64, CHANNELS));
    assert_null(ring_init(memory, SMALL_RING, 65));
    free(memory);
}

struct race {
    struct ring *ring;
    uint64_t frames;  /* to write */
    uint64_t refused; /* by a full ring */
    bool waits;       /* the writer tries again instead of losing the block */
};

static void *write_all(void *state)
{
    struct race *race = state;
    static float samples[BLOCK_MAX * CHANNELS];
    uint32_t random = 1;
    for (uint64_t frame = 0; frame < race->frames;) {
        random = random * 1664525U + 1013904223U;
        struct ring_block block = {frame, 0, (random >> 8) % BLOCK_MAX + 1, 0};
        if (block.frame_count > race->frames - frame)
            block.frame_count = (uint32_t)(race->frames - frame);
        fill(samples, frame, block.frame_count);
        bool is_last = frame + block.frame_count == race->frames;
        bool is_in = ring_write(race->ring, &block, samples);
        while (!is_in && (race->waits || is_last)) {
            (void)sched_yield();
            is_in = ring_write(race->ring, &block, samples);
        }
        race->refused += is_in ? 0 : block.frame_count;
        frame += block.frame_count;
    }
    return NULL;
}

/* Returns the frames that were missing, as the jumps of first_frame tell it. */
static uint64_t read_all(struct race *race)
{
    static float samples[BLOCK_MAX * CHANNELS];
    struct ring_block block;
    uint64_t next = 0, missing = 0;
    while (next < race->frames) {
        if (!ring_read(race->ring, &block, samples, BLOCK_MAX)) {
            (void)sched_yield();
            continue;
        }
        assert_true(block.first_frame >= next);
        missing += block.first_frame - next;
        check(samples, block.first_frame, block.frame_count);
        next = block.first_frame + block.frame_count;
    }
    return missing;
}

static void run_race(bool waits)
{
    void *memory = NULL;
    struct race race = {.ring = make_ring(SMALL_RING, &memory), .frames = 4000000, .waits = waits};
    pthread_t writer;
    assert_int_equal(pthread_create(&writer, NULL, write_all, &race), 0);
    uint64_t missing = read_all(&race);
    assert_int_equal(pthread_join(writer, NULL), 0);
    assert_true(missing == race.refused);
    if (waits)
        assert_true(missing == 0);
    free(memory);
}

static void two_threads_pass_every_frame(void **state)
{
    (void)state;
    run_race(true);
}

static void what_a_full_ring_lost_is_counted_to_the_frame(void **state)
{
    (void)state;
    run_race(false);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_goes_in_comes_out_in_order),
        cmocka_unit_test(a_full_ring_refuses_and_keeps_what_it_has),
        cmocka_unit_test(a_long_block_comes_out_in_parts),
        cmocka_unit_test(nonsense_in_the_memory_is_no_ring),
        cmocka_unit_test(two_threads_pass_every_frame),
        cmocka_unit_test(what_a_full_ring_lost_is_counted_to_the_frame),
    };
    return cmocka_run_group_tests_name("base.ring", tests, NULL, NULL);
}
