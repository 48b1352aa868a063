/* Recordings as inputs: every format gives its samples back bit for bit, every bad file gives one
 * clear sentence, and memory does not follow length. Files are made by libsndfile, which is thereby
 * the reference for the formats. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "support/scratch.h"
#include "wane/clock.h"
#include "wane/input.h"

#include <fcntl.h>
#include <math.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

#define RATE_HZ  48000
#define CHANNELS 2
#define FRAMES   3000
#define SEED     7

/* All that an input gave, put together. */
struct heard {
    float *samples; /* [frame_count x channels], lost frames left out */
    size_t frame_count;
    uint64_t lost_frames, gaps;
    bool is_ended, has_failed;
    struct input_info info;
    struct error err;
};

static struct scratch scratch;

static bool listen_to(const struct input_choice *choice, struct heard *out_heard)
{
    *out_heard = (struct heard){0};
    struct input *input = input_open(choice, &out_heard->err);
    if (input == NULL)
        return false;
    size_t capacity = 0;
    while (!out_heard->is_ended && !out_heard->has_failed) {
        struct input_block block;
        if (!input_read(input, 1000, &block, &out_heard->err)) {
            out_heard->has_failed = true;
            break;
        }
        assert_true(block.frame_count <= 65536);
        assert_true(block.first_frame == out_heard->frame_count + out_heard->lost_frames);
        size_t channels = (size_t)input_get_info(input)->channels;
        if (block.event == INPUT_FRAMES) {
            if (out_heard->frame_count + block.frame_count > capacity) {
                capacity = 2 * (out_heard->frame_count + block.frame_count);
                out_heard->samples =
                    realloc(out_heard->samples, capacity * channels * sizeof(float));
                assert_non_null(out_heard->samples);
            }
            memcpy(out_heard->samples + out_heard->frame_count * channels, block.frames,
                   block.frame_count * channels * sizeof(float));
            out_heard->frame_count += block.frame_count;
        }
        out_heard->gaps += block.event == INPUT_GAP ? 1 : 0;
        out_heard->lost_frames += block.lost_frames;
        out_heard->is_ended = block.event == INPUT_ENDED;
    }
    out_heard->info = *input_get_info(input);
    input_close(input);
    return true;
}

static void heard_done(struct heard *heard)
{
    free(heard->samples);
}

static struct input_choice fast(const char *path)
{
    return (struct input_choice){.name = path, .pace = INPUT_PACE_FAST};
}

static bool has_warning(const struct input_info *info, const char *part)
{
    for (unsigned i = 0; i < info->warning_count; i++) {
        if (strstr(info->warnings[i], part) != NULL)
            return true;
    }
    return false;
}

/* The input must be refused with a sentence that holds `part`; no full stop, one line. */
static void check_refused(const struct input_choice *choice, enum error_kind kind, const char *part)
{
    struct error err = {0};
    struct input *input = input_open(choice, &err);
    if (input != NULL)
        fail_msg("%s was taken, expected: %s", choice->name, part);
    if (err.kind != kind || strstr(err.text, part) == NULL || strchr(err.text, '\n') != NULL ||
        err.text[strlen(err.text) - 1] == '.')
        fail_msg("kind %d, \"%s\"; expected kind %d and \"%s\" in one line", (int)err.kind,
                 err.text, (int)kind, part);
}

static const struct {
    const char *name;
    int format;
    unsigned bits;
} kinds[] = {
    {"a.wav", SF_FORMAT_WAV | SF_FORMAT_PCM_16, 16},
    {"b.wav", SF_FORMAT_WAV | SF_FORMAT_PCM_24, 24},
    {"c.wav", SF_FORMAT_WAV | SF_FORMAT_PCM_U8, 8},
    {"d.wav", SF_FORMAT_WAVEX | SF_FORMAT_PCM_24, 24},
    {"e.rf64", SF_FORMAT_RF64 | SF_FORMAT_PCM_24, 24},
    {"f.w64", SF_FORMAT_W64 | SF_FORMAT_PCM_16, 16},
    {"g.aiff", SF_FORMAT_AIFF | SF_FORMAT_PCM_24, 24},
    {"h.caf", SF_FORMAT_CAF | SF_FORMAT_PCM_24, 24},
    {"i.flac", SF_FORMAT_FLAC | SF_FORMAT_PCM_16, 16},
    {"j.flac", SF_FORMAT_FLAC | SF_FORMAT_PCM_24, 24},
};
#define KINDS (sizeof kinds / sizeof kinds[0])

static void check_samples(const char *name, const struct heard *heard, const int32_t *samples,
                          size_t count)
{
    for (size_t i = 0; i < count; i++) {
        float expected = (float)samples[i] / 2147483648.0F;
        if (heard->samples[i] != expected)
            fail_msg("%s: sample %zu is %.9g, expected %.9g (seed %d)", name, i,
                     (double)heard->samples[i], (double)expected, SEED);
    }
}

static void every_format_gives_its_samples_bit_for_bit(void **state)
{
    (void)state;
    static int32_t samples[FRAMES * CHANNELS];
    char path[512];
    for (size_t k = 0; k < KINDS; k++) {
        scratch_samples(SEED, kinds[k].bits, samples, FRAMES * CHANNELS);
        scratch_record(scratch_path(&scratch, kinds[k].name, path), kinds[k].format, RATE_HZ,
                       CHANNELS, samples, FRAMES);
        struct heard heard;
        struct input_choice choice = fast(path);
        if (!listen_to(&choice, &heard))
            fail_msg("%s", heard.err.text);
        assert_int_equal(heard.frame_count, FRAMES);
        assert_int_equal(heard.info.frame_count, FRAMES);
        assert_int_equal(heard.info.bits, kinds[k].bits);
        assert_int_equal(heard.info.channels, CHANNELS);
        assert_true(heard.info.rate_hz == RATE_HZ);
        assert_int_equal(heard.info.state, INPUT_NONE);
        assert_int_equal(heard.info.warning_count, kinds[k].bits == 8 ? 1 : 0);
        check_samples(kinds[k].name, &heard, samples, FRAMES * CHANNELS);
        heard_done(&heard);
    }
}

static void live_pace_gives_the_same_samples_in_blocks_of_10_ms(void **state)
{
    (void)state;
    static int32_t samples[FRAMES * CHANNELS];
    char path[512];
    scratch_samples(SEED, 16, samples, FRAMES * CHANNELS);
    scratch_record(scratch_path(&scratch, "live.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16,
                   RATE_HZ, CHANNELS, samples, FRAMES);
    struct input_choice choice = {.name = path};
    struct error err = {0};
    struct input *input = input_open(&choice, &err);
    assert_non_null(input);
    struct input_block block = {0};
    size_t frames = 0;
    int64_t before_ns = 0;
    while (block.event != INPUT_ENDED) {
        assert_true(input_read(input, 50, &block, &err));
        if (block.event != INPUT_FRAMES)
            continue;
        assert_true(block.frame_count == 480 || frames + block.frame_count == FRAMES);
        for (size_t i = 0; i < block.frame_count * CHANNELS; i++)
            assert_true(block.frames[i] == (float)samples[frames * CHANNELS + i] / 2147483648.0F);
        assert_true(block.arrived_ns > before_ns);
        before_ns = block.arrived_ns;
        frames += block.frame_count;
    }
    assert_int_equal(frames, FRAMES);
    input_close(input);
}

static void a_read_that_may_not_wait_says_nothing_yet(void **state)
{
    (void)state;
    char path[512];
    struct input_choice choice = {.name = scratch_path(&scratch, "live.wav", path)};
    struct error err = {0};
    struct input *input = input_open(&choice, &err);
    assert_non_null(input);
    struct input_block block = {0};
    assert_true(input_read(input, 0, &block, &err));
    assert_int_equal(block.event, INPUT_NOTHING);
    input_close(input);
}

static void raw_samples_are_read_with_the_format_that_is_said(void **state)
{
    (void)state;
    static const struct {
        const char *word;
        int format;
        unsigned bits;
    } raws[] = {{"s16", SF_FORMAT_PCM_16, 16},
                {"s24", SF_FORMAT_PCM_24, 24},
                {"s32", SF_FORMAT_PCM_32, 24},
                {"f32", SF_FORMAT_FLOAT, 24}};
    static int32_t samples[FRAMES * CHANNELS];
    static float floats[FRAMES * CHANNELS];
    char path[512];
    for (size_t k = 0; k < sizeof raws / sizeof raws[0]; k++) {
        struct input_choice choice = fast(scratch_path(&scratch, "samples.bin", path));
        scratch_samples(SEED, raws[k].bits, samples, FRAMES * CHANNELS);
        for (size_t i = 0; i < FRAMES * CHANNELS; i++)
            floats[i] = (float)samples[i] / 2147483648.0F;
        int format = SF_FORMAT_RAW | SF_ENDIAN_LITTLE | raws[k].format;
        if (raws[k].format == SF_FORMAT_FLOAT)
            scratch_record_floats(path, format, RATE_HZ, CHANNELS, floats, FRAMES);
        else
            scratch_record(path, format, RATE_HZ, CHANNELS, samples, FRAMES);
        assert_true(input_raw_from_name(raws[k].word, &choice.raw));
        check_refused(&choice, ERROR_USAGE, "--rate");
        choice.rate_hz = RATE_HZ;
        choice.channels = CHANNELS;
        struct heard heard;
        assert_true(listen_to(&choice, &heard));
        assert_int_equal(heard.frame_count, FRAMES);
        check_samples(raws[k].word, &heard, samples, FRAMES * CHANNELS);
        heard_done(&heard);
    }
    enum input_raw raw = INPUT_RAW_NONE;
    assert_false(input_raw_from_name("s17", &raw));
    assert_false(input_raw_from_name("", &raw));
}

/* Puts a pipe that a child process fills from `path` in the place of standard input. */
static int pipe_into_stdin(const char *path)
{
    int ends[2];
    assert_int_equal(pipe(ends), 0);
    pid_t pid = fork();
    assert_true(pid >= 0);
    if (pid == 0) {
        char block[4096];
        int from = open(path, O_RDONLY);
        (void)close(ends[0]);
        for (ssize_t count = read(from, block, sizeof block); count > 0;
             count = read(from, block, sizeof block)) {
            if (write(ends[1], block, (size_t)count) != count)
                _exit(1);
        }
        _exit(0);
    }
    int kept = dup(STDIN_FILENO);
    assert_int_equal(dup2(ends[0], STDIN_FILENO), STDIN_FILENO);
    (void)close(ends[0]);
    (void)close(ends[1]);
    return kept;
}

static void every_format_comes_through_a_pipe(void **state)
{
    (void)state;
    static int32_t samples[FRAMES * CHANNELS];
    char path[512];
    for (size_t k = 0; k < KINDS; k++) {
        scratch_samples(SEED, kinds[k].bits, samples, FRAMES * CHANNELS);
        int kept = pipe_into_stdin(scratch_path(&scratch, kinds[k].name, path));
        struct input_choice choice = fast("-");
        struct heard heard;
        bool is_read = listen_to(&choice, &heard);
        (void)dup2(kept, STDIN_FILENO);
        (void)close(kept);
        if (!is_read)
            fail_msg("%s: %s", kinds[k].name, heard.err.text);
        assert_int_equal(heard.frame_count, FRAMES);
        assert_string_equal(heard.info.name, "-");
        check_samples(kinds[k].name, &heard, samples, FRAMES * CHANNELS);
        heard_done(&heard);
    }
}

/* FLAC decodes whole blocks of some 4096 frames; CAF's header must be whole. */
static void a_file_that_was_cut_off_gives_what_is_there_and_says_so(void **state)
{
    (void)state;
    enum { LONG_FRAMES = 40000 };
    static int32_t samples[LONG_FRAMES * CHANNELS];
    char path[512];
    for (size_t k = 0; k < KINDS; k++) {
        scratch_samples(SEED, kinds[k].bits, samples, (size_t)LONG_FRAMES * CHANNELS);
        scratch_record(scratch_path(&scratch, kinds[k].name, path), kinds[k].format, RATE_HZ,
                       CHANNELS, samples, LONG_FRAMES);
        struct stat file;
        assert_int_equal(stat(path, &file), 0);
        assert_int_equal(truncate(path, file.st_size / 2), 0);
        struct heard heard;
        struct input_choice choice = fast(path);
        if (!listen_to(&choice, &heard))
            fail_msg("%s: %s", kinds[k].name, heard.err.text);
        assert_true(heard.is_ended);
        if (heard.frame_count < LONG_FRAMES / 2 - 5000 || heard.frame_count > LONG_FRAMES / 2)
            fail_msg("%s: %zu frames of the %d that are there", kinds[k].name, heard.frame_count,
                     LONG_FRAMES / 2);
        if (!has_warning(&heard.info, "the file ends early"))
            fail_msg("%s: no word of its early end", kinds[k].name);
        check_samples(kinds[k].name, &heard, samples, heard.frame_count * CHANNELS);
        heard_done(&heard);
    }
}

/* As a recorder writes to a pipe: the size is not known when the header goes out. */
static void a_header_that_does_not_know_its_length_is_no_complaint(void **state)
{
    (void)state;
    static int32_t samples[FRAMES * CHANNELS];
    static const uint32_t sizes[] = {UINT32_MAX, 0x7FFFFFFF, 0x7FFFF000};
    char path[512];
    scratch_samples(SEED, 16, samples, FRAMES * CHANNELS);
    for (size_t k = 0; k < sizeof sizes / sizeof sizes[0]; k++) {
        scratch_record(scratch_path(&scratch, "piped.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16,
                       RATE_HZ, CHANNELS, samples, FRAMES);
        int fd = open(path, O_WRONLY);
        assert_int_equal(pwrite(fd, &sizes[k], 4, 4), 4);
        assert_int_equal(pwrite(fd, &sizes[k], 4, 40), 4);
        (void)close(fd);
        struct heard heard;
        struct input_choice choice = fast(path);
        assert_true(listen_to(&choice, &heard));
        assert_int_equal(heard.frame_count, FRAMES);
        assert_int_equal(heard.info.warning_count, 0);
        heard_done(&heard);
    }
}

static void what_is_no_recording_is_refused_in_one_line(void **state)
{
    (void)state;
    char path[512];
    struct input_choice choice = fast(scratch_path(&scratch, "no such.wav", path));
    check_refused(&choice, ERROR_NOT_FOUND, "no such file");
    choice = fast(scratch.folder);
    check_refused(&choice, ERROR_DATA, "is a folder");
    choice = fast("/dev/zero");
    check_refused(&choice, ERROR_DATA, "is a device");
    choice = fast(scratch_path(&scratch, "empty.wav", path));
    scratch_write(path, "", 0);
    check_refused(&choice, ERROR_DATA, "the file is empty");
    choice = fast(scratch_path(&scratch, "text.wav", path));
    scratch_write(path, "tap, tap\n", 9);
    check_refused(&choice, ERROR_DATA, "text.wav: text, not a recording");
    choice = fast(scratch_path(&scratch, "bytes.wav", path));
    scratch_write(path, "\0\1\2\3\4\5\6\7", 8);
    check_refused(&choice, ERROR_DATA, "unknown bytes");
    choice = fast(scratch_path(&scratch, "riff.wav", path));
    scratch_write(path, "RIFF\0\0\0\0WAVE", 12);
    check_refused(&choice, ERROR_DATA, "riff.wav: damaged");
    scratch_record(scratch_path(&scratch, "header.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16,
                   RATE_HZ, 1, NULL, 0);
    choice = fast(path);
    check_refused(&choice, ERROR_DATA, "has a header but no samples");
}

static void silly_rates_and_channels_are_refused(void **state)
{
    (void)state;
    static const int32_t samples[100] = {1};
    static const uint32_t rates[] = {1, 999, 768001, 2000000000};
    char path[512];
    scratch_record(scratch_path(&scratch, "rate.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16,
                   RATE_HZ, 1, samples, 100);
    struct input_choice choice = fast(path);
    for (size_t k = 0; k < sizeof rates / sizeof rates[0]; k++) {
        int fd = open(path, O_WRONLY);
        assert_int_equal(pwrite(fd, &rates[k], 4, 24), 4);
        (void)close(fd);
        check_refused(&choice, ERROR_DATA, "Hz; Wane reads 1000 to 768000 Hz");
    }
    scratch_record(scratch_path(&scratch, "wide.wav", path), SF_FORMAT_WAVEX | SF_FORMAT_PCM_16,
                   RATE_HZ, 100, samples, 1);
    choice = fast(path);
    check_refused(&choice, ERROR_DATA, "100 channels; Wane reads 1 to 64");
    choice = (struct input_choice){.name = "x.raw", .raw = INPUT_RAW_S16, .rate_hz = 10};
    check_refused(&choice, ERROR_USAGE, "10 Hz");
    choice = (struct input_choice){.name = "x.raw", .raw = INPUT_RAW_S16, .channels = 65};
    check_refused(&choice, ERROR_USAGE, "65 channels");
    choice = (struct input_choice){.name = "", .raw = INPUT_RAW_NONE};
    check_refused(&choice, ERROR_USAGE, "no input is named");
}

static void samples_that_are_no_numbers_count_as_lost_frames(void **state)
{
    (void)state;
    enum { HOLE_AT = 20000, HOLE = 20000, LATER_AT = 50000, ALL = 60000 };
    static float samples[ALL * CHANNELS];
    char path[512];
    for (size_t i = 0; i < (size_t)ALL * CHANNELS; i++)
        samples[i] = (float)(i % 1000) / 1000.0F - 0.5F;
    for (size_t i = HOLE_AT; i < HOLE_AT + HOLE; i++)
        samples[i * CHANNELS + i % CHANNELS] = i % 3 == 0 ? INFINITY : NAN;
    samples[LATER_AT * CHANNELS] = -INFINITY;
    scratch_record_floats(scratch_path(&scratch, "holes.wav", path),
                          SF_FORMAT_WAV | SF_FORMAT_FLOAT, RATE_HZ, CHANNELS, samples, ALL);
    struct heard heard;
    struct input_choice choice = fast(path);
    assert_true(listen_to(&choice, &heard));
    assert_int_equal(heard.frame_count, ALL - HOLE - 1);
    assert_int_equal(heard.lost_frames, HOLE + 1);
    assert_int_equal(heard.gaps, 2);
    assert_int_equal(heard.info.lost_frames, HOLE + 1);
    assert_int_equal(heard.info.warning_count, 1);
    assert_true(has_warning(&heard.info, "20001 frames hold samples that are no numbers, the first "
                                         "at 0.4167 s"));
    heard_done(&heard);
}

static void a_recording_keeps_its_own_rate_and_says_so(void **state)
{
    (void)state;
    static const int32_t samples[100] = {1};
    char path[512];
    scratch_record(scratch_path(&scratch, "own.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16, 44100,
                   1, samples, 100);
    struct input_choice choice = fast(path);
    choice.rate_hz = 96000;
    struct heard heard;
    assert_true(listen_to(&choice, &heard));
    assert_true(heard.info.rate_hz == 44100.0);
    assert_true(has_warning(&heard.info, "own rate of 44100 Hz is used, not 96000"));
    heard_done(&heard);
}

static long peak_memory_kib(void)
{
    struct rusage usage;
    assert_int_equal(getrusage(RUSAGE_SELF, &usage), 0);
    return usage.ru_maxrss;
}

static void two_hours_need_no_more_memory_than_two_seconds(void **state)
{
    (void)state;
    enum { HOURS_FRAMES = 2 * 3600 * RATE_HZ };
    static const int32_t samples[100] = {1};
    char path[512];
    scratch_record(scratch_path(&scratch, "long.wav", path), SF_FORMAT_WAV | SF_FORMAT_PCM_16,
                   RATE_HZ, 1, samples, 100);
    uint32_t bytes = (uint32_t)HOURS_FRAMES * 2, riff = bytes + 36;
    int fd = open(path, O_WRONLY);
    assert_int_equal(pwrite(fd, &riff, 4, 4), 4);
    assert_int_equal(pwrite(fd, &bytes, 4, 40), 4);
    (void)close(fd);
    assert_int_equal(truncate(path, (off_t)bytes + 44), 0); /* holes: takes no room on the disk */
    struct input_choice choice = fast(path);
    struct error err = {0};
    struct input *input = input_open(&choice, &err);
    assert_non_null(input);
    long before_kib = peak_memory_kib();
    uint64_t frames = 0;
    struct input_block block = {0};
    while (block.event != INPUT_ENDED) {
        assert_true(input_read(input, 0, &block, &err));
        frames += block.frame_count;
    }
    assert_true(frames == HOURS_FRAMES);
    assert_int_equal(input_get_info(input)->warning_count, 0);
    long grown_kib = peak_memory_kib() - before_kib;
    if (grown_kib > 4096)
        fail_msg("grew by %ld KiB, limit 4096 KiB", grown_kib);
    input_close(input);
}

/* Whatever bytes a file holds: refused with a sentence, or read to an end, all samples finite. */
static void check_hostile(const char *path)
{
    struct input_choice choice = fast(path);
    struct error err = {0};
    struct input *input = input_open(&choice, &err);
    if (input == NULL) {
        assert_true(err.kind != ERROR_NONE && err.text[0] != '\0');
        return;
    }
    struct input_block block = {0};
    size_t channels = (size_t)input_get_info(input)->channels;
    while (block.event != INPUT_ENDED && input_read(input, 0, &block, &err)) {
        for (size_t i = 0; i < block.frame_count * channels; i++)
            assert_true(isfinite(block.frames[i]));
    }
    input_close(input);
}

static size_t slurp(const char *path, unsigned char *bytes, size_t most)
{
    FILE *file = fopen(path, "rb");
    assert_non_null(file);
    size_t count = fread(bytes, 1, most, file);
    (void)fclose(file);
    return count;
}

static void no_file_however_damaged_does_harm(void **state)
{
    (void)state;
    enum { SHORT_FRAMES = 200, FLIPS = 60 };
    static int32_t samples[SHORT_FRAMES * CHANNELS];
    static unsigned char whole[1 << 16], damaged[1 << 16];
    char path[512];
    uint64_t random = SEED;
    for (size_t k = 0; k < KINDS; k++) {
        scratch_samples(SEED, kinds[k].bits, samples, SHORT_FRAMES * CHANNELS);
        scratch_record(scratch_path(&scratch, kinds[k].name, path), kinds[k].format, RATE_HZ,
                       CHANNELS, samples, SHORT_FRAMES);
        size_t count = slurp(path, whole, sizeof whole);
        for (size_t cut = 0; cut < count; cut += cut < 120 ? 1 : 37) {
            scratch_write(path, whole, cut);
            check_hostile(path);
        }
        for (int flip = 0; flip < FLIPS; flip++) {
            memcpy(damaged, whole, count);
            for (int i = 0; i < 3; i++) {
                random = random * UINT64_C(6364136223846793005) + 1442695040888963407U;
                size_t most = count < 128 ? count : 128; /* headers are where harm is done */
                damaged[(random >> 33) % most] = (unsigned char)(random >> 24);
            }
            scratch_write(path, damaged, count);
            check_hostile(path);
        }
    }
}

static int make_scratch(void **state)
{
    (void)state;
    scratch_make(&scratch);
    return 0;
}

static int remove_scratch(void **state)
{
    (void)state;
    scratch_remove(&scratch);
    return 0;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_format_gives_its_samples_bit_for_bit),
        cmocka_unit_test(live_pace_gives_the_same_samples_in_blocks_of_10_ms),
        cmocka_unit_test(a_read_that_may_not_wait_says_nothing_yet),
        cmocka_unit_test(raw_samples_are_read_with_the_format_that_is_said),
        cmocka_unit_test(every_format_comes_through_a_pipe),
        cmocka_unit_test(a_file_that_was_cut_off_gives_what_is_there_and_says_so),
        cmocka_unit_test(a_header_that_does_not_know_its_length_is_no_complaint),
        cmocka_unit_test(what_is_no_recording_is_refused_in_one_line),
        cmocka_unit_test(silly_rates_and_channels_are_refused),
        cmocka_unit_test(samples_that_are_no_numbers_count_as_lost_frames),
        cmocka_unit_test(a_recording_keeps_its_own_rate_and_says_so),
        cmocka_unit_test(two_hours_need_no_more_memory_than_two_seconds),
        cmocka_unit_test(no_file_however_damaged_does_harm),
    };
    return cmocka_run_group_tests_name("input.recording", tests, make_scratch, remove_scratch);
}
