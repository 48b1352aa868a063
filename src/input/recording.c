/* Recordings, by libsndfile. Whatever the header claims, memory is one block: a claim is only ever
 * compared with what came. What libsndfile could parse beyond our formats never reaches it: the
 * first bytes are looked at before. */
#include "input_drivers.h"
#include "recording_file.h"
#include "wane/clock.h"

#include <math.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

/* Small enough to stay in a core's cache beside the detector, large enough that calls cost
 * nothing. */
#define BLOCK_SAMPLES 32768
#define BLOCK_FRAMES  16384

struct recording {
    struct recording_file file;
    float *frames; /* [capacity x channels]; [at, have) still to hand out */
    size_t capacity, at, have, live_frames;
    size_t channels;
    double rate_hz;
    uint64_t position; /* frames handed out, those that are no numbers counted */
    uint64_t claimed;  /* frames that the header promises; 0: nothing to hold it to */
    uint64_t not_numbers, first_not_number;
    unsigned not_number_warning; /* its place in info->warnings + 1 */
    struct input_pacer pacer;
    enum input_pace pace;
    bool may_hold_not_numbers;
    bool is_at_end;
    char name[INPUT_NAME_MAX];
};

static unsigned bits_of(int format)
{
    switch (format & SF_FORMAT_SUBMASK) {
    case SF_FORMAT_PCM_S8:
    case SF_FORMAT_PCM_U8:
        return 8;
    case SF_FORMAT_PCM_16:
        return 16;
    case SF_FORMAT_PCM_24:
        return 24;
    case SF_FORMAT_PCM_32:
        return 32;
    default:
        return 0;
    }
}

static bool is_float(int format)
{
    int sub = format & SF_FORMAT_SUBMASK;
    return sub == SF_FORMAT_FLOAT || sub == SF_FORMAT_DOUBLE;
}

static bool sound_is_sound(const char *name, const SF_INFO *sound, struct error *err)
{
    switch (sound->format & SF_FORMAT_TYPEMASK) {
    case SF_FORMAT_WAV:
    case SF_FORMAT_WAVEX:
    case SF_FORMAT_RF64:
    case SF_FORMAT_W64:
    case SF_FORMAT_AIFF:
    case SF_FORMAT_CAF:
    case SF_FORMAT_FLAC:
    case SF_FORMAT_RAW:
        break;
    default:
        return error_set(err, ERROR_DATA,
                         "%s: not a recording that Wane reads (" RECORDING_FORMATS ")", name);
    }
    if (sound->channels < 1 || sound->channels > INPUT_CHANNELS_MAX)
        return error_set(err, ERROR_DATA, "%s: the header says %d channels; Wane reads 1 to %d",
                         name, sound->channels, INPUT_CHANNELS_MAX);
    if (sound->samplerate < (int)INPUT_RATE_MIN_HZ || sound->samplerate > (int)INPUT_RATE_MAX_HZ)
        return error_set(err, ERROR_DATA, "%s: the header says %d Hz; Wane reads %.0f to %.0f Hz",
                         name, sound->samplerate, INPUT_RATE_MIN_HZ, INPUT_RATE_MAX_HZ);
    return true;
}

static void warn_of_header(const struct input_choice *choice, const SF_INFO *sound,
                           struct input_info *info)
{
    if (choice->rate_hz > 0.0 && choice->rate_hz != (double)sound->samplerate)
        input_warn(info, "the recording's own rate of %d Hz is used, not %g", sound->samplerate,
                   choice->rate_hz);
    if (choice->channels > 0 && choice->channels != sound->channels)
        input_warn(info, "the recording's own %d channels are used, not %d", sound->channels,
                   choice->channels);
    if (info->bits == 8)
        input_warn(info, "the recording has only 8 bits a sample");
    if (info->bits == 0 && !is_float(sound->format))
        input_warn(info, "the recording was packed with loss: decay rates may be bent");
}

static bool fill_raw(const struct input_choice *choice, SF_INFO *sound, struct error *err)
{
    static const int formats[] = {[INPUT_RAW_S16] = SF_FORMAT_PCM_16,
                                  [INPUT_RAW_S24] = SF_FORMAT_PCM_24,
                                  [INPUT_RAW_S32] = SF_FORMAT_PCM_32,
                                  [INPUT_RAW_F32] = SF_FORMAT_FLOAT};
    if (choice->raw == INPUT_RAW_NONE)
        return true;
    if (choice->rate_hz == 0.0 || choice->channels == 0)
        return error_set(err, ERROR_USAGE,
                         "%s: raw samples need their rate and channels said (--rate, --channels)",
                         choice->name);
    sound->samplerate = (int)lround(choice->rate_hz);
    sound->channels = choice->channels;
    sound->format = formats[choice->raw] | SF_FORMAT_RAW | SF_ENDIAN_LITTLE;
    return true;
}

static bool open_sound(struct recording *recording, const struct input_choice *choice,
                       SF_INFO *sound, struct error *err)
{
    if (!fill_raw(choice, sound, err))
        return false;
    int fd = recording_file_open(choice->name, choice->raw != INPUT_RAW_NONE, err);
    if (fd < 0)
        return false;
    if (!recording_file_read_header_take(&recording->file, fd, choice->name, sound, err) ||
        !sound_is_sound(choice->name, sound, err))
        return false;
    recording->claimed = recording_file_claim(recording->file.sound, sound);
    if (sound->frames <= 0)
        return error_set(err, ERROR_DATA,
                         "%s: has a header but no samples; if the recorder crashed, try it as raw "
                         "samples (--raw)",
                         choice->name);
    return true;
}

void *recording_open(const struct input_choice *choice, struct input_info *info, struct error *err)
{
    struct recording *recording = calloc(1, sizeof *recording);
    if (recording == NULL) {
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", choice->name);
        return NULL;
    }
    recording->file.fd = -1;
    SF_INFO sound = {0};
    if (!open_sound(recording, choice, &sound, err)) {
        recording_close(recording);
        return NULL;
    }
    recording->channels = (size_t)sound.channels;
    recording->rate_hz = (double)sound.samplerate;
    recording->capacity = BLOCK_SAMPLES / recording->channels;
    if (recording->capacity > BLOCK_FRAMES)
        recording->capacity = BLOCK_FRAMES;
    recording->live_frames = input_live_block_frames(recording->rate_hz);
    recording->pacer = (struct input_pacer){.rate_hz = recording->rate_hz, .pace = choice->pace};
    recording->pace = choice->pace;
    recording->may_hold_not_numbers = is_float(sound.format);
    (void)snprintf(recording->name, sizeof recording->name, "%s", choice->name);
    recording->frames =
        malloc(recording->capacity * recording->channels * sizeof *recording->frames);
    if (recording->frames == NULL) {
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", choice->name);
        recording_close(recording);
        return NULL;
    }
    info->state = INPUT_LISTENING;
    info->rate_hz = recording->rate_hz;
    info->channels = sound.channels;
    info->bits = bits_of(sound.format);
    info->frame_count = recording->claimed;
    warn_of_header(choice, &sound, info);
    return recording;
}

void recording_close(void *state)
{
    struct recording *recording = state;
    if (recording == NULL)
        return;
    recording_file_close(&recording->file);
    free(recording->frames);
    free(recording);
}

/* Reads the next block when all has been handed out. */
static bool refill(struct recording *recording, struct input_info *info, struct error *err)
{
    if (recording->at < recording->have || recording->is_at_end)
        return true;
    sf_count_t count =
        sf_readf_float(recording->file.sound, recording->frames, (sf_count_t)recording->capacity);
    recording->at = 0;
    recording->have = count > 0 ? (size_t)count : 0;
    if (recording->have > 0)
        return true;
    recording->is_at_end = true;
    if (sf_error(recording->file.sound) == SF_ERR_SYSTEM)
        return error_set(err, ERROR_DATA, "%s: cannot be read past %.3f s (%s)", recording->name,
                         (double)recording->position / recording->rate_hz,
                         sf_strerror(recording->file.sound));
    if (recording->position < recording->claimed)
        input_warn(info, "the file ends early: %.3f s of the %.3f s that its header promises",
                   (double)recording->position / recording->rate_hz,
                   (double)recording->claimed / recording->rate_hz);
    return true;
}

static bool frame_is_finite(const float *frame, size_t channels)
{
    for (size_t c = 0; c < channels; c++) {
        if (!isfinite(frame[c]))
            return false;
    }
    return true;
}

/* Frames from `at` on, `most` at the longest, that are all finite, or all not. */
static size_t run_length(const struct recording *recording, bool is_finite, size_t most)
{
    size_t left = recording->have - recording->at;
    size_t limit = most < left ? most : left;
    if (!recording->may_hold_not_numbers)
        return is_finite ? limit : 0;
    const float *frame = recording->frames + recording->at * recording->channels;
    size_t n = 0;
    while (n < limit && frame_is_finite(frame, recording->channels) == is_finite) {
        frame += recording->channels;
        n++;
    }
    return n;
}

static void warn_not_numbers(struct recording *recording, uint64_t count, struct input_info *info)
{
    if (recording->not_numbers == 0)
        recording->first_not_number = recording->position;
    recording->not_numbers += count;
    char text[INPUT_WARNING_MAX];
    (void)snprintf(text, sizeof text,
                   "%llu frames hold samples that are no numbers, the first at %.4f s: they count "
                   "as lost",
                   (unsigned long long)recording->not_numbers,
                   (double)recording->first_not_number / recording->rate_hz);
    unsigned place = recording->not_number_warning;
    if (place > 0) { /* the same warning, with a higher count */
        memcpy(info->warnings[place - 1], text, sizeof text);
        return;
    }
    unsigned before = info->warning_count;
    input_warn(info, "%s", text);
    if (info->warning_count > before)
        recording->not_number_warning = info->warning_count;
}

/* Samples that are no numbers count as lost frames, however many blocks they fill. */
static bool skip_not_numbers(struct recording *recording, struct input_info *info,
                             uint64_t *out_count, struct error *err)
{
    uint64_t count = 0;
    for (;;) {
        size_t run = run_length(recording, false, recording->capacity);
        recording->at += run;
        count += run;
        if (recording->at < recording->have || recording->is_at_end || run == 0)
            break;
        if (!refill(recording, info, err))
            return false;
    }
    *out_count = count;
    return true;
}

bool recording_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err)
{
    struct recording *recording = state;
    if (!refill(recording, info, err))
        return false;
    if (recording->at == recording->have) {
        out_block->event = INPUT_ENDED;
        out_block->arrived_ns = clock_monotonic_ns();
        return true;
    }
    size_t most = recording->pace == INPUT_PACE_LIVE ? recording->live_frames : recording->capacity;
    size_t run = run_length(recording, true, most);
    if (run == 0) {
        uint64_t lost = 0;
        if (!skip_not_numbers(recording, info, &lost, err))
            return false;
        warn_not_numbers(recording, lost, info);
        recording->position += lost;
        out_block->event = INPUT_GAP;
        out_block->lost_frames = lost;
        out_block->arrived_ns = clock_monotonic_ns();
        return true;
    }
    if (!input_pacer_wait(&recording->pacer, recording->position + run, timeout_ms,
                          &out_block->arrived_ns))
        return true;
    out_block->event = INPUT_FRAMES;
    out_block->frames = recording->frames + recording->at * recording->channels;
    out_block->frame_count = run;
    recording->at += run;
    recording->position += run;
    return true;
}
