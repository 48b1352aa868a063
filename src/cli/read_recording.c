/* The way of a strike, and who works where:
 *
 *     recording -> detectors (one a channel) -> merge -> [queue] -> fit -> sink
 *     '------------- caller's thread ---------------'    '- second thread, or the caller's -'
 *
 * A fit needs the reading of its channel's strike before (what still rings), so fits keep the order
 * of the strikes, and one thread does them all. */
#include "cli/read_recording.h"

#include "wane/queue.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Strikes that wait for their fit. A window of 60 s at 48 kHz takes 11 MiB: few may wait. */
#define QUEUE_STRIKES 6
/* The detector sees a strike later than it began: frames (of the longest) and a tenth of a second.
 */
#define SIGHT_S 0.25
/* As input.h promises. */
#define BLOCK_FRAMES_MAX 65536
/* Workspace to begin with; it grows where a strike is longer. */
#define WORKSPACE_S 4

struct fitter {
    const struct read_settings *settings;
    const struct read_sink *sink;
    struct fit_workspace *workspace;
    uint64_t number;
    struct strike *previous[INPUT_CHANNELS_MAX]; /* of each channel; owned */
    struct reading readings[INPUT_CHANNELS_MAX]; /* of those */
    struct queue *queue;                         /* NULL: fits run in the caller's thread */
    pthread_t thread;
    bool has_failed;
    struct error err;
};

struct hearing {
    struct input *input;
    double rate_hz;
    int channels;     /* of the recording */
    int first, count; /* of those that are heard, 1-based */
    struct detector *detectors[INPUT_CHANNELS_MAX];
    uint64_t horizons[INPUT_CHANNELS_MAX]; /* no later strike of this channel triggers before */
    float *samples;                        /* of one channel, [BLOCK_FRAMES_MAX] */
    struct strike **held; /* in time order, of several channels, until none can come before */
    size_t held_count, held_capacity;
    struct fitter *fitter;
};

/* --- Fits --- */

static bool fit_one(struct fitter *fitter, struct strike *strike, struct error *err)
{
    size_t at = (size_t)strike->channel - 1;
    struct reading reading;
    if (fitter->previous[at] != NULL)
        fit_carry(fitter->previous[at], &fitter->readings[at], strike);
    if (!fit_strike(fitter->workspace, strike, &fitter->settings->fit, &reading, err)) {
        strike_destroy(strike);
        return false;
    }
    const struct read_row row = {++fitter->number, strike, &reading};
    fitter->sink->put(fitter->sink->to, &row);
    strike_destroy(fitter->previous[at]);
    fitter->previous[at] = strike;
    fitter->readings[at] = reading;
    return true;
}

static void *run_fits(void *argument)
{
    struct fitter *fitter = argument;
    struct strike *strike = NULL;
    while ((strike = queue_take(fitter->queue, INT64_MAX)) != NULL) {
        if (!fit_one(fitter, strike, &fitter->err)) {
            fitter->has_failed = true;
            queue_close(fitter->queue);
            break;
        }
    }
    return NULL;
}

static void destroy_message(void *strike)
{
    strike_destroy(strike);
}

static bool start_fitter(struct fitter *fitter, double rate_hz, struct error *err)
{
    const struct read_settings *settings = fitter->settings;
    pthread_mutex_lock(settings->planning);
    fitter->workspace = fit_workspace_create((size_t)(WORKSPACE_S * rate_hz), err);
    pthread_mutex_unlock(settings->planning);
    if (fitter->workspace == NULL)
        return false;
    if (!settings->uses_second_thread)
        return true;
    fitter->queue = queue_create(QUEUE_STRIKES, destroy_message);
    if (fitter->queue == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for the strikes that wait");
    if (pthread_create(&fitter->thread, NULL, run_fits, fitter) != 0) {
        queue_destroy(fitter->queue);
        fitter->queue = NULL; /* the caller's thread can do it */
    }
    return true;
}

/* Takes the strike over. */
static bool give_strike(struct fitter *fitter, struct strike *strike, struct error *err)
{
    if (fitter->queue == NULL)
        return fit_one(fitter, strike, err);
    if (queue_put(fitter->queue, strike))
        return true;
    strike_destroy(strike);
    return false; /* fitter->err says why, see end_fitter */
}

/* Waits for the fits; false when one of them failed. */
static bool end_fitter(struct fitter *fitter, struct error *err)
{
    if (fitter->queue != NULL) {
        queue_close(fitter->queue);
        pthread_join(fitter->thread, NULL);
        queue_destroy(fitter->queue);
    }
    for (size_t i = 0; i < INPUT_CHANNELS_MAX; i++)
        strike_destroy(fitter->previous[i]);
    pthread_mutex_lock(fitter->settings->planning);
    fit_workspace_destroy(fitter->workspace);
    pthread_mutex_unlock(fitter->settings->planning);
    if (fitter->has_failed)
        *err = fitter->err;
    return !fitter->has_failed;
}

/* --- Detection, and the merge of channels --- */

static uint64_t moment_of(const struct strike *strike)
{
    return strike->first_frame + strike->trigger;
}

static bool hold_strike(struct hearing *hearing, struct strike *strike, struct error *err)
{
    if (hearing->held_count == hearing->held_capacity) {
        size_t capacity = 2 * hearing->held_capacity + 8;
        struct strike **held = realloc(hearing->held, capacity * sizeof(struct strike *));
        if (held == NULL) {
            strike_destroy(strike);
            return error_set(err, ERROR_MEMORY, "no memory for the strikes that wait");
        }
        hearing->held = held;
        hearing->held_capacity = capacity;
    }
    size_t at = hearing->held_count++;
    for (; at > 0 && moment_of(hearing->held[at - 1]) > moment_of(strike); at--)
        hearing->held[at] = hearing->held[at - 1];
    hearing->held[at] = strike;
    return true;
}

/* Gives on what is older than anything that any channel may still bring. */
static bool give_held(struct hearing *hearing, uint64_t before, struct error *err)
{
    size_t given = 0;
    bool ok = true;
    while (ok && given < hearing->held_count && moment_of(hearing->held[given]) < before)
        ok = give_strike(hearing->fitter, hearing->held[given++], err);
    hearing->held_count -= given;
    for (size_t i = 0; i < hearing->held_count; i++)
        hearing->held[i] = hearing->held[given + i];
    return ok;
}

/* The strikes that got complete on the channel number `at` of those heard. */
static bool take_strikes(struct hearing *hearing, int at, struct error *err)
{
    struct detector *detector = hearing->detectors[at];
    struct strike *strike = NULL;
    bool ok = true;
    while (ok && (strike = detect_take_strike(detector)) != NULL)
        ok = hearing->count == 1 ? give_strike(hearing->fitter, strike, err)
                                 : hold_strike(hearing, strike, err);
    return ok;
}

static bool merge_channels(struct hearing *hearing, struct error *err)
{
    uint64_t sight = (uint64_t)(SIGHT_S * hearing->rate_hz);
    uint64_t before = UINT64_MAX;
    for (int at = 0; at < hearing->count; at++) {
        struct detect_level level;
        uint64_t seen = detect_frame_count(hearing->detectors[at]);
        detect_level(hearing->detectors[at], &level);
        if (!level.is_ringing && seen > sight)
            hearing->horizons[at] = seen - sight;
        if (hearing->horizons[at] < before)
            before = hearing->horizons[at];
    }
    return give_held(hearing, before, err);
}

static const float *pick_channel(struct hearing *hearing, const struct input_block *block,
                                 int channel)
{
    size_t channels = (size_t)hearing->channels;
    if (channels == 1)
        return block->frames;
    const float *from = block->frames + (channel - 1);
    for (size_t i = 0; i < block->frame_count; i++)
        hearing->samples[i] = from[i * channels];
    return hearing->samples;
}

static bool hear_block(struct hearing *hearing, const struct input_block *block, struct error *err)
{
    bool ok = true;
    for (int at = 0; ok && at < hearing->count; at++) {
        struct detector *detector = hearing->detectors[at];
        if (block->event == INPUT_FRAMES)
            ok = detect_push_block(detector, pick_channel(hearing, block, hearing->first + at),
                                   block->frame_count, err);
        else if (block->event == INPUT_ENDED)
            ok = detect_finish(detector, err);
        else
            ok = detect_push_gap(detector, block->lost_frames, err);
        ok = ok && take_strikes(hearing, at, err);
    }
    if (ok && hearing->count > 1)
        ok = merge_channels(hearing, err);
    return ok;
}

static bool hear_all(struct hearing *hearing, struct error *err)
{
    struct input_block block = {0};
    bool ok = true;
    while (ok && block.event != INPUT_ENDED) {
        ok = input_read(hearing->input, 1000, &block, err);
        if (ok && block.event != INPUT_NOTHING)
            ok = hear_block(hearing, &block, err);
    }
    if (!ok) {
        /* What came before the failure is worth its reading. */
        struct error ignored;
        for (int at = 0; at < hearing->count; at++) {
            if (detect_finish(hearing->detectors[at], &ignored))
                (void)take_strikes(hearing, at, &ignored);
        }
        (void)give_held(hearing, UINT64_MAX, &ignored);
        return false;
    }
    return give_held(hearing, UINT64_MAX, err);
}

/* --- Opening and closing --- */

/* A word that input_open could take for a card or for the bench means a file here. */
static struct input *open_recording(const char *path, const struct read_settings *settings,
                                    struct error *err)
{
    char name[INPUT_NAME_MAX + 2];
    bool is_bare = strcmp(path, "-") != 0 && strchr(path, '/') == NULL;
    if (strlen(path) >= INPUT_NAME_MAX - 2) {
        error_set(err, ERROR_USAGE, "%.60s...: a path may have %d bytes at most", path,
                  INPUT_NAME_MAX - 3);
        return NULL;
    }
    snprintf(name, sizeof name, "%s%s", is_bare ? "./" : "", path);
    const struct input_choice choice = {.name = name,
                                        .rate_hz = settings->rate_hz,
                                        .channels = settings->channels,
                                        .raw = settings->raw,
                                        .pace = INPUT_PACE_FAST};
    struct input *input = input_open(&choice, err);
    if (input == NULL && is_bare && strncmp(err->text, "./", 2) == 0)
        memmove(err->text, err->text + 2, strlen(err->text + 2) + 1);
    return input;
}

static bool start_hearing(struct hearing *hearing, const char *path,
                          const struct read_settings *settings, struct error *err)
{
    int channels = hearing->channels;
    if (settings->channel > channels)
        return error_set(err, ERROR_USAGE, "%s: has %d channel%s, there is no channel %d", path,
                         channels, channels == 1 ? "" : "s", settings->channel);
    hearing->first = settings->channel > 0 ? settings->channel : 1;
    hearing->count = settings->channel > 0 ? 1 : channels;
    hearing->samples = malloc(BLOCK_FRAMES_MAX * sizeof *hearing->samples);
    if (hearing->samples == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for a block of samples");
    bool ok = true;
    pthread_mutex_lock(settings->planning);
    for (int at = 0; ok && at < hearing->count; at++) {
        hearing->detectors[at] =
            detect_create(&settings->detect, hearing->rate_hz, hearing->first + at, err);
        ok = hearing->detectors[at] != NULL;
    }
    pthread_mutex_unlock(settings->planning);
    return ok;
}

static void end_hearing(struct hearing *hearing, const struct read_settings *settings)
{
    for (size_t i = 0; i < hearing->held_count; i++)
        strike_destroy(hearing->held[i]);
    free(hearing->held);
    free(hearing->samples);
    pthread_mutex_lock(settings->planning);
    for (int at = 0; at < hearing->count; at++)
        detect_destroy(hearing->detectors[at]);
    pthread_mutex_unlock(settings->planning);
    input_close(hearing->input);
}

bool read_recording(const char *path, const struct read_settings *settings,
                    const struct read_sink *sink, struct input_info *out_info, struct error *err)
{
    struct hearing hearing = {0};
    struct fitter *fitter = calloc(1, sizeof *fitter);
    if (fitter == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for the fits");
    fitter->settings = settings;
    fitter->sink = sink;
    hearing.fitter = fitter;
    hearing.input = open_recording(path, settings, err);
    bool ok = hearing.input != NULL;
    if (ok) {
        const struct input_info *info = input_get_info(hearing.input);
        hearing.rate_hz = info->rate_hz;
        hearing.channels = info->channels;
        ok = start_hearing(&hearing, path, settings, err) &&
             start_fitter(fitter, hearing.rate_hz, err);
        if (ok) {
            sink->begin(sink->to, input_get_info(hearing.input));
            ok = hear_all(&hearing, err);
        }
        if (out_info != NULL)
            *out_info = *input_get_info(hearing.input);
    }
    ok = end_fitter(fitter, err) && ok;
    end_hearing(&hearing, settings);
    free(fitter);
    return ok;
}
