#include "wane/detect.h"

#include "detect/detector.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define QUICK_S        0.0107 /* wanted length of the quick bank's frames; the nearest power of two */
#define STEADY         4      /* the steady bank's are this many times as long */
#define BEFORE_S       0.5    /* of samples before the onset go with a strike */
#define BEFORE_LEAST_S 0.02
#define BLOW_S         0.01 /* after the onset of the strike before, its blow may still be heard */
#define OFFSET_S       0.3  /* how slowly the input's offset is followed */
#define LATEST_S       0.35 /* after the onset, by which a strike has been seen */
#define START_S        0.75 /* the same for an input that begins with a blow */
#define SILENCE_S      0.1  /* of exact silence ends a ring; less is a hole in it */
#define CLOSELY_S      0.5  /* after a strike, the floors still hold it */

static bool resolve(const struct detect_settings *given, double rate_hz,
                    struct detect_settings *out, struct error *err)
{
    struct detect_settings s = *given;
    s.trigger_db = s.trigger_db == 0 ? 17 : s.trigger_db;
    s.f_low_hz = s.f_low_hz == 0 ? 20 : s.f_low_hz;
    s.f_high_hz = s.f_high_hz == 0 ? 0.46 * rate_hz : s.f_high_hz;
    s.window_max_s = s.window_max_s == 0 ? 60 : s.window_max_s;
    if (!(s.trigger_db >= 6 && s.trigger_db <= 60))
        return error_set(err, ERROR_USAGE, "trigger: %g dB is not between 6 and 60", s.trigger_db);
    if (!(s.f_low_hz >= 0 && s.f_low_hz < s.f_high_hz && s.f_high_hz <= rate_hz / 2))
        return error_set(err, ERROR_USAGE,
                         "band: %g to %g Hz does not lie between 0 and half the rate, %g Hz",
                         s.f_low_hz, s.f_high_hz, rate_hz / 2);
    if (!(s.hold_off_s >= 0 && s.hold_off_s <= 600))
        return error_set(err, ERROR_USAGE, "hold-off: %g s is not between 0 and 600", s.hold_off_s);
    if (!(s.window_max_s >= 0.05 && s.window_max_s <= 600))
        return error_set(err, ERROR_USAGE, "longest window: %g s is not between 0.05 and 600",
                         s.window_max_s);
    *out = s;
    return true;
}

static struct bank_settings bank_settings_of(const struct detector *detector)
{
    return (struct bank_settings){
        .rate_hz = detector->rate_hz,
        .trigger_db = detector->settings.trigger_db,
        .f_low_hz = detector->settings.f_low_hz,
        .f_high_hz = detector->settings.f_high_hz,
    };
}

static size_t quick_length(double rate_hz)
{
    size_t length = 16;
    while ((double)length * 1.4142 < rate_hz * QUICK_S)
        length *= 2;
    return length;
}

static size_t steady_hop(const struct detector *detector)
{
    return detector->banks[BANK_STEADY].hop;
}

static size_t quick_hop(const struct detector *detector)
{
    return detector->banks[BANK_QUICK].hop;
}

/* A new input: silence as long as the longest frame, so that its first frames
 * exist. history has room for it. */
static void begin_input(struct detector *detector)
{
    size_t lead = detector->banks[BANK_STEADY].length;
    memset(detector->history + detector->count, 0, lead * sizeof *detector->history);
    detector->count += lead;
    detector->shift -= (int64_t)lead;
    detector->input_start = detector->base + (int64_t)detector->count;
    detector->input_end = INT64_MAX;
    detector->sound_start = detector->input_start;
    detector->is_offset_known = false;
}

static bool allocate(struct detector *detector, double rate_hz)
{
    struct bank_settings settings = bank_settings_of(detector);
    size_t length = quick_length(rate_hz);
    for (int i = 0; i < BANKS; i++)
        if (!bank_init(&detector->banks[i], i == BANK_QUICK ? length : STEADY * length,
                       i == BANK_QUICK ? 4 : 2, &settings))
            return false;
    /* What a strike may need from the past, in whole frames of the steady bank.
     */
    double seconds = fmax(BEFORE_S + LATEST_S, START_S);
    detector->keep = (size_t)(seconds * rate_hz) + 12 * detector->banks[BANK_STEADY].length;
    detector->capacity = 2 * detector->keep;
    detector->work_count = 2 * ((size_t)(0.12 * rate_hz) + 8 * steady_hop(detector));
    detector->history = calloc(detector->capacity, sizeof *detector->history);
    detector->work = calloc(detector->work_count, sizeof *detector->work);
    return detector->history != NULL && detector->work != NULL &&
           hand_init(&detector->hand, detector->banks);
}

struct detector *detect_create(const struct detect_settings *settings, double rate_hz, int channel,
                               struct error *err)
{
    struct detect_settings resolved;
    if (!(rate_hz >= 1000 && rate_hz <= 768000)) {
        error_set(err, ERROR_USAGE, "rate: %g Hz is not between 1000 and 768000", rate_hz);
        return NULL;
    }
    if (!resolve(settings, rate_hz, &resolved, err))
        return NULL;
    struct detector *detector = calloc(1, sizeof *detector);
    if (detector != NULL) {
        detector->settings = resolved;
        detector->rate_hz = rate_hz;
        detector->channel = channel;
    }
    if (detector == NULL || !allocate(detector, rate_hz)) {
        detect_destroy(detector);
        error_set(err, ERROR_MEMORY, "not enough memory to listen at %g Hz", rate_hz);
        return NULL;
    }
    detector->offset_share = (float)((double)quick_hop(detector) / (OFFSET_S * rate_hz));
    detector->last_onset = detector->strike_onset = detector->strike_end = INT64_MIN / 2;
    detector->zeros = INT64_MAX / 2;
    level_init(&detector->level, rate_hz, quick_hop(detector));
    begin_input(detector);
    detector->done = (int64_t)detector->count;
    for (int i = 0; i < BANKS; i++) {
        detector->banks[i].newest = detector->done / (int64_t)detector->banks[i].hop;
        bank_restart(&detector->banks[i], detector->done);
    }
    return detector;
}

void detect_destroy(struct detector *detector)
{
    if (detector == NULL)
        return;
    for (int i = 0; i < BANKS; i++)
        bank_done(&detector->banks[i]);
    hand_done(&detector->hand);
    for (size_t i = 0; i < detector->queue_count; i++)
        strike_destroy(detector->queue[i].strike);
    free(detector->queue);
    free(detector->history);
    free(detector->work);
    free(detector);
}

bool detect_set(struct detector *detector, const struct detect_settings *settings,
                struct error *err)
{
    if (!resolve(settings, detector->rate_hz, &detector->settings, err))
        return false;
    struct bank_settings bank = bank_settings_of(detector);
    for (int i = 0; i < BANKS; i++)
        bank_set(&detector->banks[i], &bank);
    return true;
}

void detector_close(struct detector *detector, int64_t end, enum strike_end reason)
{
    end = end < detector->input_end ? end : detector->input_end;
    detector->strike_end = end;
    detector->queue[detector->queue_count++].strike = hand_close(&detector->hand, end, reason);
}

static uint64_t frame_of(const struct detector *detector, int64_t index)
{
    int64_t frame = index + detector->shift;
    for (unsigned i = 0; i < detector->gap_count; i++)
        if (detector->gaps[i].at > index)
            frame -= (int64_t)detector->gaps[i].frames;
    return (uint64_t)frame;
}

/* Half a second before the onset, but not the blow of the strike before, nor
 * samples before a gap; 20 ms at least where the input has them. */
static int64_t window_start(const struct detector *detector, int64_t onset)
{
    int64_t start = onset - (int64_t)(BEFORE_S * detector->rate_hz);
    int64_t least = onset - (int64_t)(BEFORE_LEAST_S * detector->rate_hz);
    int64_t blow = detector->strike_onset + (int64_t)(BLOW_S * detector->rate_hz);
    start = blow > start ? blow : start;
    for (unsigned i = 0; i < detector->gap_count; i++)
        if (detector->gaps[i].at > start && detector->gaps[i].at <= least)
            start = detector->gaps[i].at;
    start = start < least ? start : least;
    start = start > detector->sound_start ? start : detector->sound_start;
    return start > detector->base ? start : detector->base;
}

static bool reserve_queue(struct detector *detector)
{
    if (detector->queue_count < detector->queue_capacity)
        return true;
    size_t capacity = 2 * detector->queue_capacity + 4;
    struct waiting *grown = realloc(detector->queue, capacity * sizeof *grown);
    if (grown == NULL)
        return false;
    detector->queue = grown;
    detector->queue_capacity = capacity;
    return true;
}

/* The samples that have been through the banks and belong to the input. */
static bool feed_hand(struct detector *detector, struct error *err)
{
    struct hand *hand = &detector->hand;
    int64_t have = hand->start + (int64_t)hand->strike->frame_count;
    int64_t until = detector->done < detector->input_end ? detector->done : detector->input_end;
    if (until <= have ||
        hand_append(hand, detector->history + (have - detector->base), (size_t)(until - have)))
        return true;
    detector_close(detector, have, STRIKE_END_LIMIT);
    return error_set(err, ERROR_MEMORY, "not enough memory to follow a ring any longer");
}

bool detector_open(struct detector *detector, int64_t onset, bool is_noise_known, struct error *err)
{
    struct hand *hand = &detector->hand;
    int64_t start = window_start(detector, onset);
    double since_s = (double)(onset - detector->strike_end) / detector->rate_hz;
    struct hand_opening opening = {
        .rate_hz = detector->rate_hz,
        .channel = detector->channel,
        .start = start,
        .onset = onset,
        .first_frame = frame_of(detector, start),
        .window_max = (int64_t)(detector->settings.window_max_s * detector->rate_hz),
        .is_noise_known = is_noise_known,
        .follows_closely = since_s < CLOSELY_S && detector->strike_onset > detector->sound_start,
    };
    if (!reserve_queue(detector) || !hand_open(hand, detector->banks, &opening))
        return error_set(err, ERROR_MEMORY, "not enough memory to keep a strike");
    detector->strike_onset = onset;
    for (unsigned i = 0; i < detector->gap_count; i++)
        if (detector->gaps[i].at > start)
            hand_note_lost(hand, detector->gaps[i].at, detector->gaps[i].frames);
    for (int i = 0; i < BANKS; i++) {
        const struct bank *bank = &detector->banks[i];
        hand_follow(hand, bank, i, onset / (int64_t)bank->hop, detector->input_end);
    }
    return feed_hand(detector, err);
}

/* Digital silence has no floor to rise over: what comes after it begins anew.
 */
static void watch_silence(struct detector *detector, const float *hop, float peak)
{
    size_t count = quick_hop(detector);
    if (peak == 0) {
        detector->zeros += (int64_t)count;
        if (detector->hand.strike != NULL && detector->done < detector->input_end &&
            (double)detector->zeros > SILENCE_S * detector->rate_hz)
            detector_close(detector, detector->done - detector->zeros / 2, STRIKE_END_FADED);
        return;
    }
    if (detector->zeros >= (int64_t)detector->banks[BANK_QUICK].length) {
        size_t first = 0;
        while (hop[first] == 0)
            first++;
        int64_t start = detector->done + (int64_t)first;
        for (int i = 0; i < BANKS; i++)
            bank_restart(&detector->banks[i], start);
        /* A hole in a ring is no new beginning. */
        if (detector->hand.strike == NULL) {
            detector->sound_start = start;
            detector->is_start_open = true;
            detector->is_offset_known = false;
        }
    }
    detector->zeros = 0;
}

static bool process_hop(struct detector *detector, struct error *err)
{
    size_t hop = quick_hop(detector);
    const float *samples = detector->history + (detector->done - detector->base);
    struct level_hop measured = level_measure(samples, hop);
    level_push(&detector->level, measured.peak);
    watch_silence(detector, samples, measured.peak);
    float mean = measured.sum / (float)hop;
    detector->offset +=
        (mean - detector->offset) * (detector->is_offset_known ? detector->offset_share : 1.0F);
    detector->is_offset_known = true;
    detector->done += (int64_t)hop;
    struct hand *hand = &detector->hand;
    for (int i = 0; i < BANKS; i++) {
        struct bank *bank = &detector->banks[i];
        if (detector->done % (int64_t)bank->hop != 0)
            continue;
        bank_push(bank, samples + hop - bank->length, detector->offset);
        if (hand->strike != NULL)
            hand_follow(hand, bank, i, bank->newest, detector->input_end);
    }
    if (hand->strike != NULL && !feed_hand(detector, err))
        return false;
    if (!trigger_look(detector, err))
        return false;
    if (hand->strike != NULL) {
        int64_t end = hand_end(hand, detector->done);
        if (end != INT64_MAX && end <= detector->input_end)
            detector_close(detector, end,
                           end - hand->onset >= hand->window_max ? STRIKE_END_LIMIT
                                                                 : STRIKE_END_FADED);
    }
    return true;
}

/* Room for `count` more samples; old ones are let go. */
static void make_room(struct detector *detector, size_t count)
{
    if (detector->count + count <= detector->capacity)
        return;
    size_t drop = detector->count > detector->keep ? detector->count - detector->keep : 0;
    memmove(detector->history, detector->history + drop,
            (detector->count - drop) * sizeof *detector->history);
    detector->count -= drop;
    detector->base += (int64_t)drop;
}

static bool process_all(struct detector *detector, struct error *err)
{
    bool is_ok = true;
    int64_t hop = (int64_t)quick_hop(detector);
    while (detector->done + hop <= detector->base + (int64_t)detector->count)
        is_ok = process_hop(detector, err) && is_ok;
    return is_ok;
}

/* samples NULL: zeros. */
static bool append(struct detector *detector, const float *samples, size_t frame_count,
                   struct error *err)
{
    bool is_ok = true;
    size_t most = steady_hop(detector);
    while (frame_count > 0) {
        size_t count = frame_count < most ? frame_count : most;
        make_room(detector, count);
        float *to = detector->history + detector->count;
        if (samples != NULL) {
            memcpy(to, samples, count * sizeof *to);
            samples += count;
        } else {
            memset(to, 0, count * sizeof *to);
        }
        detector->count += count;
        frame_count -= count;
        is_ok = process_all(detector, err) && is_ok;
    }
    return is_ok;
}

bool detect_push_block(struct detector *detector, const float *samples, size_t frame_count,
                       struct error *err)
{
    return append(detector, samples, frame_count, err);
}

bool detect_push_gap(struct detector *detector, uint64_t lost_frames, struct error *err)
{
    (void)err;
    int64_t at = detector->base + (int64_t)detector->count;
    detector->shift += (int64_t)lost_frames;
    struct gap *last = detector->gap_count > 0 ? &detector->gaps[detector->gap_count - 1] : NULL;
    if (last != NULL && last->at == at) {
        last->frames += lost_frames;
    } else {
        if (detector->gap_count == GAPS_KEPT) {
            memmove(detector->gaps, detector->gaps + 1, (GAPS_KEPT - 1) * sizeof *detector->gaps);
            detector->gap_count--;
        }
        detector->gaps[detector->gap_count++] = (struct gap){.at = at, .frames = lost_frames};
    }
    for (int i = 0; i < BANKS; i++)
        bank_mark_joint(&detector->banks[i], at);
    if (detector->hand.strike != NULL)
        hand_note_lost(&detector->hand, at, lost_frames);
    return true;
}

bool detect_finish(struct detector *detector, struct error *err)
{
    int64_t end = detector->base + (int64_t)detector->count;
    detector->input_end = end;
    for (int i = 0; i < BANKS; i++)
        bank_mark_joint(&detector->banks[i], end);
    /* Silence after the end gives the last frames their hindsight. */
    size_t hop = steady_hop(detector);
    size_t pad =
        ((size_t)detector->banks[BANK_STEADY].look + 1) * hop + (hop - (size_t)end % hop) % hop;
    bool is_ok = append(detector, NULL, pad, err);
    detector->shift -= (int64_t)pad;
    if (detector->hand.strike == NULL)
        is_ok = trigger_settle_start(detector, err) && is_ok;
    detector->is_start_open = false;
    if (detector->hand.strike != NULL)
        detector_close(detector, end, STRIKE_END_INPUT);
    detector->zeros = INT64_MAX / 2;
    make_room(detector, detector->banks[BANK_STEADY].length);
    begin_input(detector);
    return process_all(detector, err) && is_ok;
}

struct strike *detect_take_strike(struct detector *detector)
{
    if (detector->queue_count == 0)
        return NULL;
    struct strike *strike = detector->queue[0].strike;
    detector->queue_count--;
    memmove(detector->queue, detector->queue + 1, detector->queue_count * sizeof *detector->queue);
    return strike;
}

struct strike *detect_copy_forming(const struct detector *detector, size_t frames_max)
{
    const struct strike *strike = detector->hand.strike;
    if (strike == NULL)
        return NULL;
    struct strike part = *strike;
    if (part.frame_count > part.trigger + frames_max)
        part.frame_count = part.trigger + frames_max;
    while (part.lost_count > 0 && part.lost[part.lost_count - 1].at >= part.frame_count)
        part.lost_count--;
    return strike_copy(&part);
}

void detect_level(const struct detector *detector, struct detect_level *out_level)
{
    const struct bank *quick = &detector->banks[BANK_QUICK];
    float peak = level_peak(&detector->level);
    out_level->dbfs = level_dbfs((double)peak);
    out_level->noise_dbfs = level_dbfs(sqrt(2 * bank_noise_power(quick)));
    out_level->trigger_dbfs = level_dbfs(bank_trigger_amplitude(quick));
    out_level->clipped = level_is_clipped(peak);
    out_level->is_ringing = detector->hand.strike != NULL;
}

uint64_t detect_frame_count(const struct detector *detector)
{
    return (uint64_t)(detector->base + (int64_t)detector->count + detector->shift);
}
