/* The bench as a whole: what is heard is what the truth says, whatever the block size. */
#include "input/simulated.h"
#include "support/near.h"
#include "wane/strike.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#define RATE_HZ 48000.0
/* A room so quiet that only the part is heard, in float samples too. */
#define SILENT_DBFS (-170.0)

static float *render(const struct sim_settings *settings, size_t frame_count, size_t block)
{
    struct error err;
    struct sim_bench *bench = sim_bench_create(settings, &err);
    float *samples = calloc(frame_count * (size_t)settings->channels, sizeof *samples);
    assert_non_null(bench);
    assert_non_null(samples);
    for (size_t done = 0; done < frame_count;) {
        size_t count = block < frame_count - done ? block : frame_count - done;
        float *out = samples + done * (size_t)settings->channels;
        assert_true(sim_bench_render(bench, out, count, &err));
        done += count;
    }
    sim_bench_destroy(bench);
    return samples;
}

/* The first `count` strikes of channel 1. */
static void find_strikes(const struct sim_settings *settings, struct sim_event *out, size_t count)
{
    struct error err;
    struct sim_schedule *schedule = sim_schedule_create(settings, 1, &err);
    assert_non_null(schedule);
    for (size_t i = 0; i < count;) {
        assert_true(sim_schedule_next(schedule, &out[i]));
        i += out[i].kind == SIM_EVENT_STRIKE;
    }
    sim_schedule_destroy(schedule);
}

/* Truth's own formula, summed over modes. */
static double ring_of(const struct sim_event *strike, double t_s)
{
    double sum = 0;
    for (size_t i = 0; i < strike->mode_count; i++) {
        const struct sim_truth_mode *mode = &strike->modes[i];
        sum += pow(10, mode->level_dbfs / 20) * exp(-mode->decay_per_s * t_s) *
               cos(2 * WANE_PI * mode->f_hz * t_s + mode->phase_rad);
    }
    return sum;
}

/* The first strike of `settings` against its truth, from `from_s` after its contact on. */
static void check_ring(const struct sim_settings *settings, double from_s)
{
    struct sim_event strike;
    find_strikes(settings, &strike, 1);
    size_t begin = (size_t)((strike.until_s + from_s) * settings->rate_hz) + 1;
    size_t end = begin + (size_t)settings->rate_hz / 4;
    float *samples = render(settings, end, 4096);
    for (size_t n = begin; n < end; n++) {
        double t_s = (double)n / settings->rate_hz - strike.onset_s;
        CHECK_NEAR((double)samples[n], ring_of(&strike, t_s), 3e-7);
    }
    free(samples);
}

static void after_the_contact_the_samples_are_the_truth(void **state)
{
    (void)state;
    for (int part = SIM_GOBLET; part <= SIM_TANK; part++) {
        for (uint64_t seed = 1; seed <= 3; seed++) {
            struct sim_settings settings;
            simulated_defaults(&settings);
            settings.part = (enum sim_part)part;
            settings.defects = SIM_NO_DEFECT;
            settings.seed = seed;
            settings.noise_dbfs = SILENT_DBFS;
            /* The blow's noise outlasts the contact by half of it. */
            check_ring(&settings, 0.002);
        }
    }
}

static void through_a_coupling_the_truth_is_what_is_heard(void **state)
{
    (void)state;
    struct sim_settings settings;
    simulated_defaults(&settings);
    settings.part = SIM_PANEL;
    settings.defects = SIM_NO_DEFECT;
    settings.noise_dbfs = SILENT_DBFS;
    settings.coupling_hz = 20;
    check_ring(&settings, 0.15); /* the coupling's own pole is then down by exp(-19) */
}

static void a_single_mode_has_the_f_and_zeta_asked_for(void **state)
{
    (void)state;
    struct sim_settings settings;
    simulated_defaults(&settings);
    settings.part = SIM_MODE;
    settings.defects = SIM_NO_DEFECT;
    settings.f_hz = 880;
    settings.zeta = 0.4;
    settings.level_dbfs = -6;
    settings.noise_dbfs = SILENT_DBFS;
    struct sim_event strike;
    find_strikes(&settings, &strike, 1);
    CHECK_NEAR(strike.modes[0].f_hz, 880, 0);
    CHECK_NEAR(strike.modes[0].level_dbfs, -6, 1e-12);
    double decay = strike.modes[0].decay_per_s;
    CHECK_SHARE(decay / hypot(decay, 2 * WANE_PI * 880), 0.4, 1e-12);
    check_ring(&settings, 0);
}

static void same_seed_same_samples_and_another_seed_others(void **state)
{
    (void)state;
    const size_t frames = 10 * 48000;
    struct sim_settings settings;
    simulated_defaults(&settings);
    float *once = render(&settings, frames, 4096);
    float *again = render(&settings, frames, 4096);
    assert_memory_equal(once, again, frames * sizeof *once);
    settings.seed = 2;
    float *other = render(&settings, frames, 4096);
    assert_true(memcmp(once, other, frames * sizeof *once) != 0);
    free(once);
    free(again);
    free(other);
}

static void block_size_changes_no_bit(void **state)
{
    (void)state;
    const size_t frames = 400000;
    const size_t blocks[] = {1, 64, 480, 1000, 65536};
    struct sim_settings settings;
    simulated_defaults(&settings);
    settings.channels = 2;
    settings.coupling_hz = 4;
    float *expected = render(&settings, frames, 4096);
    for (size_t i = 0; i < sizeof blocks / sizeof blocks[0]; i++) {
        float *samples = render(&settings, frames, blocks[i]);
        assert_memory_equal(expected, samples, 2 * frames * sizeof *samples);
        free(samples);
    }
    free(expected);
}

static double rms_of(const float *samples, size_t count)
{
    double sum = 0;
    for (size_t i = 0; i < count; i++)
        sum += (double)samples[i] * (double)samples[i];
    return sqrt(sum / (double)count);
}

/* Before the first strike, at 1.7 s at the earliest. 81600 samples: sd of the rms 0.25 %, more for
 * the 1/f part, whose level wanders by 2.5 dB besides. */
static void the_room_is_as_loud_as_it_says(void **state)
{
    (void)state;
    const size_t frames = 81600;
    for (uint64_t seed = 1; seed <= 10; seed++) {
        struct sim_settings settings;
        simulated_defaults(&settings);
        settings.seed = seed;
        float *samples = render(&settings, frames, 4096);
        CHECK_NEAR(20 * log10(sqrt(2) * rms_of(samples, frames)), settings.noise_dbfs, 3.2);
        free(samples);
        settings.part = SIM_MODE;
        settings.f_hz = 1000;
        settings.zeta = 0.01;
        samples = render(&settings, frames, 4096);
        CHECK_NEAR(20 * log10(sqrt(2) * rms_of(samples, frames)), settings.noise_dbfs, 0.1);
        free(samples);
    }
}

/* Power of a band of one octave by a chain of real sums (Goertzel's idea, written as a plain
 * correlation): enough to see that an octave low down holds more per hertz than one high up. */
static double density(const float *samples, size_t count, double f_hz)
{
    double sum = 0;
    for (int k = 0; k < 40; k++) {
        double turn = 2 * WANE_PI * f_hz * (1 + 0.025 * k) / RATE_HZ;
        double re = 0;
        double im = 0;
        for (size_t n = 0; n < count; n++) {
            re += (double)samples[n] * cos(turn * (double)n);
            im += (double)samples[n] * sin(turn * (double)n);
        }
        sum += re * re + im * im;
    }
    return sum / 40;
}

static void the_room_has_a_one_over_f_part(void **state)
{
    (void)state;
    struct sim_settings settings;
    simulated_defaults(&settings);
    float *samples = render(&settings, 81600, 4096);
    double low = density(samples, 81600, 50);
    double high = density(samples, 81600, 800);
    double top = density(samples, 81600, 12000);
    /* Four octaves of 1/f are 12 dB; the white part takes some of it. 40 lines: sd 0.7 dB. */
    assert_true(10 * log10(low / high) > 7 && 10 * log10(low / high) < 15);
    assert_true(high > top);
    free(samples);
}

static void the_first_strike_comes_soon_and_others_at_uneven_times(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 100; seed++) {
        struct sim_settings settings;
        struct sim_event strikes[6];
        simulated_defaults(&settings);
        settings.seed = seed;
        settings.defects = SIM_NO_DEFECT;
        find_strikes(&settings, strikes, 6);
        assert_true(strikes[0].onset_s > 1.5 && strikes[0].onset_s < 10);
        for (size_t i = 1; i < 6; i++) {
            double gap_s = strikes[i].onset_s - strikes[i - 1].onset_s;
            assert_true(gap_s >= 4 && gap_s <= 9);
            assert_int_equal(strikes[i].number, i + 1);
        }
    }
}

static void it_goes_on_for_ever_within_full_scale(void **state)
{
    (void)state;
    struct sim_settings settings;
    simulated_defaults(&settings);
    settings.rate_hz = 12000;
    struct error err;
    struct sim_bench *bench = sim_bench_create(&settings, &err);
    float block[4096];
    size_t loud_blocks = 0;
    const size_t blocks = 3600 * 12000 / 4096; /* an hour */
    for (size_t i = 0; i < blocks; i++) {
        bool is_loud = false;
        assert_true(sim_bench_render(bench, block, 4096, &err));
        for (size_t n = 0; n < 4096; n++) {
            assert_true(isfinite(block[n]) && block[n] >= -1 && block[n] <= 1);
            is_loud = is_loud || block[n] > 0.05F;
        }
        loud_blocks += is_loud;
    }
    /* Some 550 strikes, most loud for one to four of these blocks of a third of a second. */
    assert_true(loud_blocks > 400 && loud_blocks < 4000);
    sim_bench_destroy(bench);
}

static void now_and_then_something_goes_wrong(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct error err;
    simulated_defaults(&settings);
    struct sim_schedule *schedule = sim_schedule_create(&settings, 1, &err);
    size_t counts[SIM_DEFECT_COUNT] = {0};
    size_t parts[SIM_PART_COUNT] = {0};
    size_t hums = 0;
    double last_s = 0;
    for (size_t i = 0; i < 4000; i++) {
        struct sim_event event;
        assert_true(sim_schedule_next(schedule, &event));
        assert_true(event.onset_s > last_s);
        last_s = event.onset_s;
        hums += event.kind == SIM_EVENT_HUM;
        if (event.kind != SIM_EVENT_HUM)
            counts[event.defect]++;
        if (event.kind == SIM_EVENT_STRIKE)
            parts[event.part]++;
    }
    sim_schedule_destroy(schedule);
    assert_true(counts[SIM_NO_DEFECT] > 2800 && counts[SIM_NO_DEFECT] < 3600);
    for (int defect = SIM_DOUBLE_HIT; defect <= SIM_COUGH; defect++)
        assert_true(counts[defect] > 40 && counts[defect] < 400);
    assert_int_equal(hums, counts[SIM_HUM]);
    for (int part = SIM_GOBLET; part <= SIM_TANK; part++)
        assert_true(parts[part] > 700 && parts[part] < 1300);
}

static void a_clipped_strike_reaches_the_end_stop(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct sim_event strike;
    simulated_defaults(&settings);
    settings.defects = SIM_CLIPPED;
    settings.part = SIM_GOBLET;
    find_strikes(&settings, &strike, 1);
    size_t begin = (size_t)(strike.until_s * RATE_HZ);
    float *samples = render(&settings, begin + 4800, 4096);
    size_t stopped = 0;
    for (size_t n = begin; n < begin + 4800; n++)
        stopped += samples[n] >= 1 || samples[n] <= -1;
    assert_true(stopped > 20);
    free(samples);
}

static void a_double_hit_is_the_same_ring_twice(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct sim_event strike;
    simulated_defaults(&settings);
    settings.defects = SIM_DOUBLE_HIT;
    settings.part = SIM_TANK;
    settings.noise_dbfs = SILENT_DBFS;
    find_strikes(&settings, &strike, 1);
    assert_true(strike.after_s >= 0.3e-3 && strike.after_s <= 2e-3);
    size_t begin = (size_t)((strike.onset_s + strike.after_s) * RATE_HZ) + 1;
    float *samples = render(&settings, begin + 500, 4096);
    for (size_t n = begin; n < begin + 500; n++) {
        double t_s = (double)n / RATE_HZ - strike.onset_s;
        double both =
            ring_of(&strike, t_s) + strike.second * ring_of(&strike, t_s - strike.after_s);
        CHECK_NEAR((double)samples[n], both, 3e-7);
    }
    free(samples);
}

static void channels_hear_parts_of_their_own(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct error err;
    struct sim_event event;
    simulated_defaults(&settings);
    settings.channels = 2;
    settings.part = SIM_TANK;
    struct sim_schedule *schedule = sim_schedule_create(&settings, 2, &err);
    assert_true(sim_schedule_next(schedule, &event));
    assert_int_equal(event.part, SIM_GOBLET);
    assert_int_equal(event.channel, 2);
    sim_schedule_destroy(schedule);
}

static void the_strikes_end_when_a_number_was_asked_for(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct error err;
    struct sim_event event;
    size_t strikes = 0;
    simulated_defaults(&settings);
    settings.strikes_max = 7;
    struct sim_schedule *schedule = sim_schedule_create(&settings, 1, &err);
    while (sim_schedule_next(schedule, &event))
        strikes += event.kind == SIM_EVENT_STRIKE;
    assert_int_equal(strikes, 7);
    sim_schedule_destroy(schedule);
}

static void wrong_settings_are_refused_in_words(void **state)
{
    (void)state;
    struct sim_settings settings;
    struct error err = {0};
    simulated_defaults(&settings);
    settings.channels = 9;
    assert_null(sim_bench_create(&settings, &err));
    assert_non_null(strstr(err.text, "1 to 4 channels"));
    settings.channels = -1;
    assert_null(sim_bench_create(&settings, &err));
    simulated_defaults(&settings);
    settings.rate_hz = 10;
    assert_null(sim_bench_create(&settings, &err));
    assert_int_equal(err.kind, ERROR_USAGE);
    simulated_defaults(&settings);
    settings.part = SIM_MODE;
    assert_null(sim_bench_create(&settings, &err));
    assert_non_null(strstr(err.text, "zeta"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(after_the_contact_the_samples_are_the_truth),
        cmocka_unit_test(through_a_coupling_the_truth_is_what_is_heard),
        cmocka_unit_test(a_single_mode_has_the_f_and_zeta_asked_for),
        cmocka_unit_test(same_seed_same_samples_and_another_seed_others),
        cmocka_unit_test(block_size_changes_no_bit),
        cmocka_unit_test(the_room_is_as_loud_as_it_says),
        cmocka_unit_test(the_room_has_a_one_over_f_part),
        cmocka_unit_test(the_first_strike_comes_soon_and_others_at_uneven_times),
        cmocka_unit_test(it_goes_on_for_ever_within_full_scale),
        cmocka_unit_test(now_and_then_something_goes_wrong),
        cmocka_unit_test(a_clipped_strike_reaches_the_end_stop),
        cmocka_unit_test(a_double_hit_is_the_same_ring_twice),
        cmocka_unit_test(channels_hear_parts_of_their_own),
        cmocka_unit_test(the_strikes_end_when_a_number_was_asked_for),
        cmocka_unit_test(wrong_settings_are_refused_in_words),
    };
    return cmocka_run_group_tests_name("simulated.bench", tests, NULL, NULL);
}
