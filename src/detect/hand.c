#include "detect/hand.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define QUICK_S        0.3 /* later than this only the steady bank is followed */
#define HOLD_LEAST_S   0.01
#define AFTER_SHARE    0.1 /* of the ring is kept after it, for its noise, within the next two */
#define AFTER_LEAST_S  5e-3
#define SEEN_S         0.03 /* after a blow the quick bank tells of it */
#define DRIFT_DB_PER_S 0.6  /* noise that grows by 24 dB in a minute, and some */
#define DRIFT_MOST_DB  60.0
#define AFTER_MOST_S   0.1
#define COPY_MOST      (8U << 20) /* bytes; longer windows give their memory away */

bool hand_init(struct hand *hand, const struct bank banks[BANKS])
{
    for (int i = 0; i < BANKS; i++)
        if (!fade_init(&hand->fades[i], &banks[i]))
            return false;
    return true;
}

void hand_done(struct hand *hand)
{
    free(hand->strike);
    free(hand->samples);
    hand->strike = NULL;
    hand->samples = NULL;
    for (int i = 0; i < BANKS; i++)
        fade_done(&hand->fades[i]);
}

/* The floors are what was there before, unless they still hold the strike before: then no more than
 * what was known before that one, and what a drifting noise may have gained since. */
static void note_noise(struct fade *fade, const struct bank *bank,
                       const struct hand_opening *opening)
{
    double elapsed_s = ((double)opening->onset - fade->onset) / bank->rate_hz;
    int gain = bank_steps(fmin(DRIFT_DB_PER_S * elapsed_s, DRIFT_MOST_DB));
    for (size_t i = 0; i < bank->lanes; i++) {
        int level = bank->floor[i] - bank->doubt, known = fade->noise[i] + gain;
        fade->noise[i] = (int16_t)(opening->follows_closely && known < level ? known : level);
    }
}

static int compare_levels(const void *a, const void *b)
{
    int16_t left = *(const int16_t *)a, right = *(const int16_t *)b;
    return (left > right) - (left < right);
}

/* The input began with the blow: what lies between the lines of the spectrum,
 * at its lowest so far, is taken for the noise. */
static void guess_noise(struct fade *fade, const struct bank *bank, const int16_t *row,
                        bool keep_lower)
{
    enum { reach = 16, step = 8 };
    int16_t near[2 * reach + 1];
    /* The lowest hold the input's offset as it settles: never followed. */
    for (size_t i = 0; i < 3 && i < bank->bins; i++)
        fade->noise[i] = INT16_MAX / 2;
    for (size_t k = 3; k < bank->bins; k += step) {
        size_t from = k > reach ? k - reach : 1;
        size_t until = k + reach < bank->bins ? k + reach : bank->bins;
        size_t count = until > from ? until - from : 0;
        if (count == 0)
            continue;
        memcpy(near, row + from, count * sizeof *near);
        qsort(near, count, sizeof *near, compare_levels);
        int16_t level = near[count / 4];
        for (size_t i = k; i < k + step && i < bank->bins; i++)
            if (!keep_lower || level < fade->noise[i])
                fade->noise[i] = level;
    }
}

bool hand_open(struct hand *hand, const struct bank banks[BANKS],
               const struct hand_opening *opening)
{
    struct strike *strike = calloc(1, sizeof *strike);
    if (strike == NULL)
        return false;
    strike->rate_hz = opening->rate_hz;
    strike->channel = opening->channel;
    strike->first_frame = opening->first_frame;
    strike->trigger = (size_t)(opening->onset - opening->start);
    hand->strike = strike;
    hand->start = opening->start;
    hand->onset = opening->onset;
    hand->window_max = opening->window_max;
    hand->is_noise_known = opening->is_noise_known;
    for (int i = 0; i < BANKS; i++) {
        if (opening->is_noise_known)
            note_noise(&hand->fades[i], &banks[i], opening);
        else
            guess_noise(&hand->fades[i], &banks[i], bank_row(&banks[i], banks[i].newest), false);
        fade_start(&hand->fades[i], (double)opening->onset);
    }
    return true;
}

bool hand_append(struct hand *hand, const float *samples, size_t count)
{
    struct strike *strike = hand->strike;
    if (strike->frame_count + count > hand->capacity) {
        size_t capacity = hand->capacity + hand->capacity / 2 + count + (size_t)strike->rate_hz;
        float *grown = realloc(hand->samples, capacity * sizeof *grown);
        if (grown == NULL)
            return false;
        hand->samples = grown;
        hand->capacity = capacity;
    }
    strike->samples = hand->samples;
    memcpy(strike->samples + strike->frame_count, samples, count * sizeof *samples);
    strike->frame_count += count;
    return true;
}

void hand_follow(struct hand *hand, const struct bank *bank, int which, int64_t from, int64_t until)
{
    struct fade *fade = &hand->fades[which];
    if (from < bank->newest - BANK_ROWS + 1)
        from = bank->newest - BANK_ROWS + 1;
    for (int64_t frame = from; frame <= bank->newest; frame++) {
        int64_t end = frame * (int64_t)bank->hop;
        if (end > until ||
            (which == BANK_QUICK && (double)(end - hand->onset) > QUICK_S * bank->rate_hz))
            return;
        unsigned shots = fade->shot_count;
        fade_push(fade, bank, frame, GUARD_S);
        if (!hand->is_noise_known && fade->shot_count != shots)
            guess_noise(fade, bank, bank_row(bank, frame), true);
    }
}

int64_t hand_end(const struct hand *hand, int64_t now)
{
    double rate_hz = hand->strike->rate_hz, hold_s = HOLD_LEAST_S;
    for (int i = 0; i < BANKS; i++)
        hold_s = fmax(hold_s, hand->fades[i].hold_max_s);
    double after_s = fmin(fmax(AFTER_SHARE * hold_s, AFTER_LEAST_S), AFTER_MOST_S);
    int64_t end = hand->onset + (int64_t)((hold_s + after_s) * rate_hz);
    bool has_seen =
        hand->fades[BANK_QUICK].shot_count >= 4 && hand->fades[BANK_STEADY].shot_count >= 1;
    /* A blow before the end must have had the time to be seen. */
    int64_t seen = now - (int64_t)(SEEN_S * rate_hz);
    if (has_seen && seen >= end && end - hand->onset < hand->window_max)
        return end;
    return now - hand->onset >= hand->window_max ? hand->onset + hand->window_max : INT64_MAX;
}

double hand_fallen_db(const struct hand *hand, int64_t at)
{
    double seconds = (double)(at - hand->onset) / hand->strike->rate_hz;
    double rate_per_s = hand->fades[BANK_QUICK].strongest_per_s;
    return rate_per_s > 0 ? 8.685889638065036 * rate_per_s * seconds : 0;
}

void hand_note_lost(struct hand *hand, int64_t at, uint64_t frames)
{
    struct strike *strike = hand->strike;
    size_t index = (size_t)(at - hand->start);
    if (strike->lost_count > 0) {
        struct lost_span *last = &strike->lost[strike->lost_count - 1];
        if (last->at == index || strike->lost_count == STRIKE_LOST_MAX) {
            last->frames += frames;
            return;
        }
    }
    strike->lost[strike->lost_count++] = (struct lost_span){.at = index, .frames = frames};
}

struct strike *hand_close(struct hand *hand, int64_t end, enum strike_end reason)
{
    struct strike *strike = hand->strike;
    size_t count = end > hand->start ? (size_t)(end - hand->start) : 0;
    if (count < strike->frame_count)
        strike->frame_count = count;
    while (strike->lost_count > 0 && strike->lost[strike->lost_count - 1].at >= strike->frame_count)
        strike->lost_count--;
    strike->end = reason;
    hand->strike = NULL;
    size_t bytes = (strike->frame_count + 1) * sizeof *strike->samples;
    float *copy = bytes <= COPY_MOST ? malloc(bytes) : NULL;
    if (copy != NULL) {
        memcpy(copy, strike->samples, strike->frame_count * sizeof *copy);
        strike->samples = copy;
        return strike;
    }
    float *fitted = realloc(hand->samples, bytes);
    strike->samples = fitted != NULL ? fitted : hand->samples;
    hand->samples = NULL;
    hand->capacity = 0;
    return strike;
}
