/* `wane simulate`: the simulated bench into a file, and what is true of it into another.
 *
 * NAME.truth.json, SI units, times in seconds from the start of the file:
 * {"program","version","seed","rate_hz","channels","frames","noise_dbfs","coupling_hz",
 *  "strikes":[...],"disturbances":[...]}, the objects as sim_event_write says. */
#include "cli/commands.h"

#include "cli/options.h"
#include "input/simulated.h"
#include "wane/text.h"

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <sndfile.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define BLOCK_FRAMES 4096
#define DAYS_2_S     172800.0

struct order {
    struct sim_settings settings;
    uint64_t frames;
    int format; /* of samples, libsndfile's number */
    const char *path;
};

struct words {
    const char *part, *defects, *bits;
    double seconds, snr_db, interval_s, rate_hz, level_dbfs, coupling_hz, f_hz, zeta;
    uint64_t seed, strikes, channels;
};

/* Seconds after the last strike until its slowest mode has fallen by 60 dB, 0.5 ... 10 s. */
static double tail_s(const struct sim_event *event)
{
    double slowest_per_s = HUGE_VAL;
    for (size_t i = 0; i < event->mode_count; i++)
        slowest_per_s = fmin(slowest_per_s, event->modes[i].decay_per_s);
    return fmin(10, fmax(0.5, log(1000) / slowest_per_s));
}

/* Length of a file that holds all strikes of all channels and the last one's ring. */
static bool find_length(const struct sim_settings *settings, double *out_seconds, struct error *err)
{
    double end_s = 0;
    for (int channel = 1; channel <= settings->channels; channel++) {
        struct sim_schedule *schedule = sim_schedule_create(settings, channel, err);
        struct sim_event event;
        if (schedule == NULL)
            return false;
        while (sim_schedule_next(schedule, &event)) {
            double tail = event.kind == SIM_EVENT_STRIKE ? tail_s(&event) : 0;
            end_s = fmax(end_s, fmax(event.onset_s + tail, event.until_s));
        }
        sim_schedule_destroy(schedule);
    }
    *out_seconds = end_s;
    return true;
}

static bool choose_format(const char *bits, int *out_format, struct error *err)
{
    static const struct {
        const char *word;
        int subtype;
    } formats[] = {{"16", SF_FORMAT_PCM_16}, {"24", SF_FORMAT_PCM_24}, {"float", SF_FORMAT_FLOAT}};
    for (size_t i = 0; i < sizeof formats / sizeof formats[0]; i++) {
        if (strcmp(bits, formats[i].word) == 0) {
            *out_format = formats[i].subtype;
            return true;
        }
    }
    return error_set(err, ERROR_USAGE, "--bits is 16, 24 or float, not \"%s\"", bits);
}

static bool choose_part(const struct words *words, struct sim_settings *settings, struct error *err)
{
    bool is_single = words->f_hz > 0 || words->zeta > 0;
    if (!is_single)
        return sim_part_from_name(words->part, &settings->part) ||
               error_set(err, ERROR_USAGE, "--part is goblet, rod, panel, tank or all, not \"%s\"",
                         words->part);
    if (words->f_hz <= 0 || words->zeta <= 0)
        return error_set(err, ERROR_USAGE, "a single mode needs both: --f HZ --zeta Z");
    settings->part = SIM_MODE;
    settings->f_hz = words->f_hz;
    settings->zeta = words->zeta;
    settings->level_dbfs = -6;
    settings->noise_dbfs = -46;
    settings->defects = SIM_NO_DEFECT;
    return true;
}

static bool make_order(const struct words *words, const char *path, struct order *order,
                       struct error *err)
{
    struct sim_settings *settings = &order->settings;
    double seconds = words->seconds;
    simulated_defaults(settings);
    order->path = path;
    if (!choose_format(words->bits, &order->format, err) || !choose_part(words, settings, err))
        return false;
    if (words->defects != NULL && !sim_defect_from_name(words->defects, &settings->defects))
        return error_set(err, ERROR_USAGE,
                         "--defects is none, some, double-hit, clipped, soft, restruck, hum or "
                         "cough, not \"%s\"",
                         words->defects);
    if (seconds > 0 && words->strikes > 0)
        return error_set(err, ERROR_USAGE, "--seconds and --strikes exclude each other");
    settings->seed = words->seed;
    settings->rate_hz = words->rate_hz;
    settings->channels = (int)words->channels;
    settings->interval_s = words->interval_s;
    settings->coupling_hz = words->coupling_hz;
    settings->strikes_max = words->strikes;
    if (!isnan(words->level_dbfs))
        settings->level_dbfs = words->level_dbfs;
    if (!isnan(words->snr_db))
        settings->noise_dbfs = settings->level_dbfs - words->snr_db;
    if (words->strikes > 0 && !find_length(settings, &seconds, err))
        return false;
    if (seconds <= 0)
        seconds = 60;
    if (seconds > DAYS_2_S)
        return error_set(err, ERROR_LIMIT, "that would last %.0f s; the longest is two days",
                         seconds);
    order->frames = (uint64_t)(seconds * settings->rate_hz);
    /* Plain WAV counts its bytes in 32 bits; 4 bytes a sample are the most that we write. */
    bool fits_wav = order->frames * 4 * (uint64_t)settings->channels < UINT32_MAX - 4096;
    order->format |= fits_wav ? SF_FORMAT_WAV : SF_FORMAT_RF64;
    return true;
}

/* sndfile's own words without its full stop. */
static bool fail_sound(const char *path, const char *words, struct error *err)
{
    size_t length = strlen(words);
    if (length > 0 && words[length - 1] == '.')
        length--;
    return error_set(err, ERROR_STORAGE, "%s: %.*s", path, (int)length, words);
}

static bool fail_system(const char *path, struct error *err)
{
    char words[128] = "cannot be written";
    (void)strerror_r(errno, words, sizeof words);
    return error_set(err, ERROR_STORAGE, "%s: cannot be written: %s", path, words);
}

static bool write_frames(SNDFILE *file, const struct order *order, struct error *err)
{
    struct sim_bench *bench = sim_bench_create(&order->settings, err);
    if (bench == NULL)
        return false;
    float *frames = calloc((size_t)BLOCK_FRAMES * (size_t)order->settings.channels, sizeof *frames);
    bool ok = frames != NULL || error_set(err, ERROR_MEMORY, "no memory");
    for (uint64_t left = order->frames; ok && left > 0;) {
        size_t count = left < BLOCK_FRAMES ? (size_t)left : BLOCK_FRAMES;
        ok = sim_bench_render(bench, frames, count, err);
        if (ok && sf_writef_float(file, frames, (sf_count_t)count) != (sf_count_t)count)
            ok = fail_sound(order->path, sf_strerror(file), err);
        left -= count;
    }
    free(frames);
    sim_bench_destroy(bench);
    return ok;
}

/* file_number is closed in any case. */
static bool write_sound(int file_number, const struct order *order, struct error *err)
{
    SF_INFO info = {.samplerate = (int)order->settings.rate_hz,
                    .channels = order->settings.channels,
                    .format = order->format};
    SNDFILE *file = sf_open_fd(file_number, SFM_WRITE, &info, SF_TRUE);
    if (file == NULL) {
        close(file_number);
        return fail_sound(order->path, sf_strerror(NULL), err);
    }
    sf_command(file, SFC_SET_CLIPPING, NULL, SF_TRUE);
    /* No peak chunk: it holds the time of writing, and the same words should give the same bytes.
     */
    sf_command(file, SFC_SET_ADD_PEAK_CHUNK, NULL, SF_FALSE);
    bool ok = write_frames(file, order, err);
    int status = sf_close(file);
    if (ok && status != 0)
        ok = fail_sound(order->path, sf_error_number(status), err);
    return ok;
}

/* Written beside and renamed at the end: a file of that name is a whole one. */
static bool write_recording(const struct order *order, struct error *err)
{
    struct text part = {0};
    text_appendf(&part, "%s.part", order->path);
    if (part.failed)
        return error_set(err, ERROR_MEMORY, "no memory for a file name");
    int file_number = open(part.data, O_RDWR | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
    bool ok = file_number >= 0 || fail_system(order->path, err);
    ok = ok && write_sound(file_number, order, err);
    if (ok && rename(part.data, order->path) != 0)
        ok = fail_system(order->path, err);
    if (!ok && file_number >= 0)
        (void)unlink(part.data);
    text_done(&part);
    return ok;
}

static void write_head(struct json_writer *json, const struct order *order)
{
    const struct sim_settings *settings = &order->settings;
    json_string(json, "program", "wane simulate");
    json_string(json, "version", WANE_VERSION);
    json_integer(json, "seed", (int64_t)settings->seed);
    json_number(json, "rate_hz", settings->rate_hz, 12);
    json_integer(json, "channels", settings->channels);
    json_integer(json, "frames", (int64_t)order->frames);
    json_number(json, "noise_dbfs", settings->noise_dbfs, 9);
    json_number(json, "coupling_hz",
                settings->coupling_hz > 0 ? settings->coupling_hz : (double)NAN, 9);
}

/* The events of one kind of all channels that begin within the file, in time order. */
static bool write_events(struct json_writer *json, const struct order *order, bool of_strikes,
                         struct error *err)
{
    struct sim_schedule *schedules[SIM_CHANNELS_MAX] = {NULL};
    struct sim_event next[SIM_CHANNELS_MAX];
    bool has_next[SIM_CHANNELS_MAX] = {false};
    int channels = order->settings.channels;
    double end_s = (double)order->frames / order->settings.rate_hz;
    bool ok = true;
    for (int i = 0; ok && i < channels; i++) {
        schedules[i] = sim_schedule_create(&order->settings, i + 1, err);
        ok = schedules[i] != NULL;
        has_next[i] = ok && sim_schedule_next(schedules[i], &next[i]);
    }
    while (ok) {
        int first = -1;
        for (int i = 0; i < channels; i++) {
            if (has_next[i] && (first < 0 || next[i].onset_s < next[first].onset_s))
                first = i;
        }
        if (first < 0 || next[first].onset_s >= end_s)
            break;
        if ((next[first].kind == SIM_EVENT_STRIKE) == of_strikes)
            sim_event_write(json, &next[first]);
        has_next[first] = sim_schedule_next(schedules[first], &next[first]);
    }
    for (int i = 0; i < channels; i++)
        sim_schedule_destroy(schedules[i]);
    return ok;
}

/* take.wav has its truth in take.truth.json. */
static void name_truth(const char *path, struct text *out)
{
    const char *slash = strrchr(path, '/');
    const char *dot = strrchr(slash != NULL ? slash : path, '.');
    text_append_bytes(out, path, dot != NULL ? (size_t)(dot - path) : strlen(path));
    text_append(out, ".truth.json");
}

static bool write_truth(const struct order *order, struct error *err)
{
    struct text path = {0};
    struct text text = {0};
    struct json_writer json = {.text = &text};
    name_truth(order->path, &path);
    json_open_object(&json, NULL);
    write_head(&json, order);
    json_open_array(&json, "strikes");
    bool ok = write_events(&json, order, true, err);
    json_close_array(&json);
    json_open_array(&json, "disturbances");
    ok = ok && write_events(&json, order, false, err);
    json_close_array(&json);
    json_close_object(&json);
    text_append(&text, "\n");
    if (ok && (text.failed || path.failed))
        ok = error_set(err, ERROR_MEMORY, "no memory for the truth");
    FILE *file = ok ? fopen(path.data, "w") : NULL;
    if (ok && file == NULL)
        ok = fail_system(path.data, err);
    if (file != NULL) {
        bool written = fwrite(text.data, 1, text.length, file) == text.length;
        if (fclose(file) != 0 || !written)
            ok = error_set(err, ERROR_STORAGE, "%s: the disk is full or cannot be written",
                           path.data);
    }
    text_done(&text);
    text_done(&path);
    return ok;
}

int cmd_simulate(int argc, char **argv)
{
    struct words words = {.part = "all",
                          .bits = "24",
                          .seed = 1,
                          .channels = 1,
                          .rate_hz = 48000,
                          .snr_db = (double)NAN,
                          .level_dbfs = (double)NAN};
    const struct option_spec specs[] = {
        {"seed", OPTION_INTEGER, "N", "the same seed gives the same file (1)",
         .integer = &words.seed},
        {"seconds", OPTION_NUMBER, "S", "length of the file (60)", .number = &words.seconds, 0.1,
         DAYS_2_S},
        {"strikes", OPTION_INTEGER, "N", "strikes of each channel, instead of a length",
         .integer = &words.strikes, 1, 100000},
        {"part", OPTION_TEXT, "NAME", "goblet, rod, panel, tank or all (all)", .text = &words.part},
        {"f", OPTION_NUMBER, "HZ", "a single mode of this frequency instead of a part",
         .number = &words.f_hz, 0.1, 384000},
        {"zeta", OPTION_NUMBER, "Z", "and of this damping ratio", .number = &words.zeta, 1e-7,
         0.999},
        {"defects", OPTION_TEXT, "NAME",
         "none, some, double-hit, clipped, soft, restruck, hum or cough (some)",
         .text = &words.defects},
        {"level", OPTION_NUMBER, "DBFS", "strongest mode of an everyday strike (-16; one mode -6)",
         .number = &words.level_dbfs, -120, 20},
        {"snr", OPTION_NUMBER, "DB", "how far the room's noise lies under that level (50; 40)",
         .number = &words.snr_db, -20, 160},
        {"interval", OPTION_NUMBER, "S", "between strikes, give or take 15 % (4 to 9 s)",
         .number = &words.interval_s, 0.02, 3600},
        {"coupling", OPTION_NUMBER, "HZ", "corner of the input's AC coupling (none)",
         .number = &words.coupling_hz, 0.01, 1000},
        {"rate", OPTION_NUMBER, "HZ", "sample rate (48000)", .number = &words.rate_hz, 8000,
         768000},
        {"channels", OPTION_INTEGER, "N", "channels, each with a part of its own (1)",
         .integer = &words.channels, 1, SIM_CHANNELS_MAX},
        {"bits", OPTION_TEXT, "FORM", "16, 24 or float (24)", .text = &words.bits},
    };
    struct options options = {
        .program = "wane simulate",
        .words = "[OPTIONS] OUT.wav",
        .about = "Writes a recording of the simulated bench to OUT.wav, and what is true of it to "
                 "OUT.truth.json.",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0],
    };
    struct error err = {0};
    struct order order = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    if (word_count != 1) {
        error_set(&err, ERROR_USAGE, "wants one file to write: wane simulate %s", options.words);
        return options_fail(&options, &err);
    }
    if (!make_order(&words, argv[0], &order, &err) || !write_recording(&order, &err) ||
        !write_truth(&order, &err))
        return options_fail(&options, &err);
    return 0;
}
