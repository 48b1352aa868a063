/* The table of drivers, and what all of them share: choosing one, counting frames, pace. */
#include "wane/input.h"
#include "input_drivers.h"
#include "wane/clock.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/stat.h>

#define LIVE_BLOCK_S   0.01
#define PACER_LAG_S    1
#define NS_PER_MS      INT64_C(1000000)
#define SIMULATED_WORD "simulated"

struct input {
    const struct input_driver *driver;
    void *state;
    struct input_info info;
    uint64_t frame; /* frames passed on, lost ones counted */
    bool has_ended;
};

static const struct input_driver drivers[] = {
    {INPUT_SIMULATED, simulated_open, simulated_read, simulated_close},
    {INPUT_RECORDING, recording_open, recording_read, recording_close},
    {INPUT_CARD, soundcard_open, soundcard_read, soundcard_close},
};

static bool ends_like_a_recording(const char *name)
{
    static const char *const endings[] = {".wav",  ".wave", ".rf64", ".w64",  ".aif", ".aiff",
                                          ".aifc", ".caf",  ".flac", ".bw64", ".raw", ".pcm"};
    size_t length = strlen(name);
    for (size_t i = 0; i < sizeof endings / sizeof endings[0]; i++) {
        size_t end = strlen(endings[i]);
        if (length > end && strcasecmp(name + length - end, endings[i]) == 0)
            return true;
    }
    return false;
}

static enum input_kind kind_of(const struct input_choice *choice)
{
    struct stat file;
    if (strcmp(choice->name, SIMULATED_WORD) == 0)
        return INPUT_SIMULATED;
    if (choice->raw != INPUT_RAW_NONE || strcmp(choice->name, "-") == 0 ||
        strchr(choice->name, '/') != NULL || ends_like_a_recording(choice->name) ||
        stat(choice->name, &file) == 0)
        return INPUT_RECORDING;
    return INPUT_CARD;
}

static bool choice_is_sound(const struct input_choice *choice, struct error *err)
{
    if (choice->name == NULL || choice->name[0] == '\0')
        return error_set(
            err, ERROR_USAGE,
            "no input is named: give `simulated`, a recording's path or a card's name");
    if (strlen(choice->name) >= INPUT_NAME_MAX)
        return error_set(err, ERROR_LIMIT, "the input's name is longer than %d bytes",
                         INPUT_NAME_MAX - 1);
    if (choice->rate_hz != 0.0 &&
        !(choice->rate_hz >= INPUT_RATE_MIN_HZ && choice->rate_hz <= INPUT_RATE_MAX_HZ))
        return error_set(err, ERROR_USAGE, "a rate of %g Hz is outside %.0f ... %.0f Hz",
                         choice->rate_hz, INPUT_RATE_MIN_HZ, INPUT_RATE_MAX_HZ);
    if (choice->channels < 0 || choice->channels > INPUT_CHANNELS_MAX)
        return error_set(err, ERROR_USAGE, "%d channels are outside 1 ... %d", choice->channels,
                         INPUT_CHANNELS_MAX);
    return true;
}

struct input *input_open(const struct input_choice *choice, struct error *err)
{
    if (!choice_is_sound(choice, err))
        return NULL;
    enum input_kind kind = kind_of(choice);
    const struct input_driver *driver = NULL;
    for (size_t i = 0; i < sizeof drivers / sizeof drivers[0]; i++) {
        if (drivers[i].kind == kind)
            driver = &drivers[i];
    }
    if (driver == NULL) {
        (void)error_set(err, ERROR_INTERNAL, "%s: no driver in this build", choice->name);
        return NULL;
    }
    struct input *input = calloc(1, sizeof *input);
    if (input == NULL) {
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", choice->name);
        return NULL;
    }
    input->driver = driver;
    input->info.kind = kind;
    (void)snprintf(input->info.name, sizeof input->info.name, "%s", choice->name);
    input->state = driver->open(choice, &input->info, err);
    if (input->state == NULL) {
        free(input);
        return NULL;
    }
    return input;
}

bool input_read(struct input *input, int timeout_ms, struct input_block *out_block,
                struct error *err)
{
    *out_block = (struct input_block){.first_frame = input->frame};
    if (input->has_ended) {
        out_block->event = INPUT_ENDED;
        return true;
    }
    if (!input->driver->read(input->state, timeout_ms, &input->info, out_block, err))
        return false;
    out_block->first_frame = input->frame;
    input->frame += out_block->frame_count + out_block->lost_frames;
    input->info.lost_frames += out_block->lost_frames;
    input->has_ended = out_block->event == INPUT_ENDED;
    if (input->has_ended)
        input->info.state = INPUT_NONE;
    return true;
}

const struct input_info *input_get_info(const struct input *input)
{
    return &input->info;
}

void input_close(struct input *input)
{
    if (input == NULL)
        return;
    input->driver->close(input->state);
    free(input);
}

const char *input_kind_name(enum input_kind kind)
{
    static const char *const names[] = {"simulated", "recording", "card"};
    return names[kind];
}

const char *input_state_name(enum input_state state)
{
    static const char *const names[] = {"listening", "lost", "none"};
    return names[state];
}

bool input_raw_from_name(const char *word, enum input_raw *out_raw)
{
    static const char *const words[] = {"", "s16", "s24", "s32", "f32"};
    for (size_t i = INPUT_RAW_S16; i < sizeof words / sizeof words[0]; i++) {
        if (strcmp(word, words[i]) == 0) {
            *out_raw = (enum input_raw)i;
            return true;
        }
    }
    return false;
}

void input_warn(struct input_info *info, const char *format, ...)
{
    char text[INPUT_WARNING_MAX];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    for (unsigned i = 0; i < info->warning_count; i++) {
        if (strcmp(info->warnings[i], text) == 0)
            return;
    }
    if (info->warning_count < INPUT_WARNINGS_MAX)
        memcpy(info->warnings[info->warning_count++], text, sizeof text);
}

bool input_pacer_wait(struct input_pacer *pacer, uint64_t end_frame, int timeout_ms,
                      int64_t *out_arrived_ns)
{
    int64_t now = clock_monotonic_ns();
    if (pacer->pace == INPUT_PACE_FAST) {
        *out_arrived_ns = now;
        return true;
    }
    int64_t due_after = (int64_t)((double)end_frame / pacer->rate_hz * (double)CLOCK_NS_PER_S);
    if (pacer->start_ns == 0 || now > pacer->start_ns + due_after + PACER_LAG_S * CLOCK_NS_PER_S) {
        int64_t block = (int64_t)(LIVE_BLOCK_S * (double)CLOCK_NS_PER_S);
        pacer->start_ns = now + block - due_after;
    }
    int64_t due = pacer->start_ns + due_after;
    int64_t over = now + timeout_ms * NS_PER_MS;
    if (due > over) {
        clock_sleep_until(over);
        return false;
    }
    clock_sleep_until(due);
    *out_arrived_ns = due > now ? due : now;
    return true;
}

size_t input_live_block_frames(double rate_hz)
{
    size_t frames = (size_t)(rate_hz * LIVE_BLOCK_S);
    return frames > 0 ? frames : 1;
}
