/* Samples are packed without loss, whatever they are. */
#include "log/wave_pack.h"

#include "support/log_scene.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

/* Packs, unpacks, compares bit for bit; gives the packing and its size. */
static size_t round_trip(const float *samples, size_t count, enum wave_packing expected)
{
    struct text bytes = {0};
    struct error err = {0};
    enum wave_packing packing = WAVE_RAW;
    float *back = malloc((count + 1) * sizeof *back);
    assert_non_null(back);
    if (!wave_pack(samples, count, &bytes, &packing, &err))
        fail_msg("%s", err.text);
    assert_int_equal(packing, expected);
    if (!wave_unpack(bytes.data, bytes.length, (int)packing, count, back, &err))
        fail_msg("%s", err.text);
    if (count > 0)
        assert_memory_equal(samples, back, count * sizeof *back);
    size_t size = bytes.length;
    text_done(&bytes);
    free(back);
    return size;
}

static void converters_samples_are_packed_small(void **state)
{
    (void)state;
    uint64_t seed = 11;
    print_message("seed %llu\n", (unsigned long long)seed);
    enum { COUNT = 48000 };
    struct strike *s16 = log_scene_strike(&seed, SAMPLES_16_BIT, COUNT);
    struct strike *s24 = log_scene_strike(&seed, SAMPLES_24_BIT, COUNT);
    struct strike *real = log_scene_strike(&seed, SAMPLES_FLOAT, COUNT);
    size_t size16 = round_trip(s16->samples, COUNT, WAVE_FLAC_16);
    size_t size24 = round_trip(s24->samples, COUNT, WAVE_FLAC_24);
    size_t size = round_trip(real->samples, COUNT, WAVE_RAW);
    print_message("%d samples: %zu bytes (16 bit), %zu (24 bit), %zu (float)\n", COUNT, size16,
                  size24, size);
    assert_true(size16 < COUNT * 5 / 4);
    assert_true(size24 < COUNT * 3);
    assert_int_equal(size, COUNT * 4);
    strike_destroy(s16);
    strike_destroy(s24);
    strike_destroy(real);
}

static void every_value_of_16_bits_comes_back(void **state)
{
    (void)state;
    float *samples = malloc(65536 * sizeof *samples);
    assert_non_null(samples);
    for (int i = 0; i < 65536; i++)
        samples[i] = (float)(i - 32768) / 32768;
    round_trip(samples, 65536, WAVE_FLAC_16);
    free(samples);
}

static void the_ends_of_24_bits_come_back(void **state)
{
    (void)state;
    static float samples[4096];
    for (int i = 0; i < 4096; i++)
        samples[i] = i % 2 == 0 ? -1 + (float)i / 8388608 : (float)(8388607 - i) / 8388608;
    round_trip(samples, 4096, WAVE_FLAC_24);
}

static void what_no_converter_gives_stays_raw(void **state)
{
    (void)state;
    static float samples[1000];
    samples[500] = -0.0F;
    round_trip(samples, 1000, WAVE_RAW); /* FLAC has no negative zero */
    samples[500] = 1.0F;
    round_trip(samples, 1000, WAVE_RAW); /* one above the largest */
    samples[500] = 1e-30F;
    round_trip(samples, 1000, WAVE_RAW);
    samples[500] = 3.4e38F;
    round_trip(samples, 1000, WAVE_RAW);
    samples[500] = NAN; /* never comes from the detector, and must not be lost either */
    round_trip(samples, 1000, WAVE_RAW);
    samples[500] = 0;
    round_trip(samples, 1000, WAVE_FLAC_16);
}

static void short_and_empty_strikes_come_back(void **state)
{
    (void)state;
    uint64_t seed = 5;
    for (size_t count = 0; count < 200; count++) {
        struct strike *strike = log_scene_strike(&seed, SAMPLES_16_BIT, count);
        round_trip(strike->samples, count, count < 64 ? WAVE_RAW : WAVE_FLAC_16);
        strike_destroy(strike);
    }
}

static void damaged_bytes_are_told_not_believed(void **state)
{
    (void)state;
    uint64_t seed = 17;
    enum { COUNT = 5000 };
    struct strike *strike = log_scene_strike(&seed, SAMPLES_16_BIT, COUNT);
    struct text bytes = {0};
    struct error err = {0};
    enum wave_packing packing = WAVE_RAW;
    float *back = malloc((COUNT + 10) * sizeof *back);
    assert_non_null(back);
    assert_true(wave_pack(strike->samples, COUNT, &bytes, &packing, &err));
    assert_false(wave_unpack(bytes.data, bytes.length / 2, (int)packing, COUNT, back, &err));
    assert_int_equal(err.kind, ERROR_DATA);
    assert_false(wave_unpack(bytes.data, bytes.length, (int)packing, COUNT - 1, back, &err));
    assert_false(wave_unpack(bytes.data, bytes.length, (int)packing, COUNT + 1, back, &err));
    assert_false(wave_unpack(bytes.data, bytes.length, WAVE_RAW, COUNT, back, &err));
    assert_false(wave_unpack(bytes.data, bytes.length, 77, COUNT, back, &err));
    assert_false(wave_unpack("", 0, (int)packing, COUNT, back, &err));
    text_done(&bytes);
    free(back);
    strike_destroy(strike);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(converters_samples_are_packed_small),
        cmocka_unit_test(every_value_of_16_bits_comes_back),
        cmocka_unit_test(the_ends_of_24_bits_come_back),
        cmocka_unit_test(what_no_converter_gives_stays_raw),
        cmocka_unit_test(short_and_empty_strikes_come_back),
        cmocka_unit_test(damaged_bytes_are_told_not_believed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
