#include "detect/detector.h"
#include "detect/onset.h"
#include "detect/start.h"

#include <math.h>

#define TOGETHER_S     0.150 /* two blows closer than this are one event while the first rings */
#define DEAD_DB        35.0  /* alpha T = 4: the first has died */
#define NEXT_GAP_S     2e-3  /* a window ends this long before the next onset */
#define REACH          2     /* hops before the row `near` back ends, at which its news may begin */
#define LEAD_S         0.03  /* of samples before that, to learn what was there */
#define AFTER_S        0.04  /* of samples after it, to see that it lasts */
#define SOFTEST        1e-4F /* a start out of digital silence softer than this is rounding */
#define BEGIN_S        0.04  /* of a start is searched for the blow */
#define BLOCK_S        1e-3
#define REST_S         9e-3 /* before an onset: half a swing of the lowest modes */
#define RECENT_S       0.5  /* after an onset the floors may still hold its strike */
#define OVER_DB        12.0 /* over the noise: this bin still rings */
#define ROUNDING_POWER (1.0 / 12 / 32768 / 32768) /* of 16 bit samples */

/* A restrike adds energy; a hole in the record or a gate only breaks the ring.
 */
#define TOTAL_RISE_DB  2.0
#define STRONG_RISE_DB 3.0
#define STRONG_DB      20.0
#define WEAK_RISE_DB   6.0
#define FRESH_DB       10.0
#define LINE_DB        25.0 /* under the strongest bin: still a line of the ring */
#define AWAY_BINS      8
#define AWAY_DB        18.0 /* under the whole ring: a break's splash is less that far off */
#define WEAK_DB        20.0

static const float *at_index(const struct detector *detector, int64_t i)
{
    return detector->history + (i - detector->base);
}

static int64_t seconds(const struct detector *detector, double value)
{
    return (int64_t)(value * detector->rate_hz);
}

static int64_t later(int64_t a, int64_t b)
{
    return a > b ? a : b;
}

static int64_t sooner(int64_t a, int64_t b)
{
    return a < b ? a : b;
}

static int64_t locate(const struct detector *detector, const struct bank *bank, int64_t frame,
                      size_t lane)
{
    int64_t hop = (int64_t)bank->hop;
    int64_t from = later((frame - bank->near - REACH) * hop, detector->sound_start);
    int64_t until = frame * hop;
    int64_t begin = later(from - seconds(detector, LEAD_S), detector->sound_start);
    int64_t end = sooner(until + seconds(detector, AFTER_S), detector->done);
    begin = later(begin, end - (int64_t)(detector->work_count / 2));
    if (from <= begin || until <= from)
        return later(from, begin);
    struct onset_search search = {
        .samples = at_index(detector, begin),
        .count = (size_t)(end - begin),
        .lead = (size_t)(from - begin),
        .until = (size_t)(until - begin),
        .rate_hz = detector->rate_hz,
        .lane_hz = bank_lane_hz(bank, lane),
        .lane_width_hz = detector->rate_hz / (double)bank->length,
        .work = detector->work,
    };
    return begin + (int64_t)onset_find(&search);
}

/* Newest frame clear of what begins at index `at`, a hop for the estimate's error; within the rows
 * kept. */
static int64_t frame_before(const struct bank *bank, int64_t at)
{
    return later(at / (int64_t)bank->hop - 1, bank->newest - BANK_ROWS + 1);
}

static double power_db(double power)
{
    return power > 0 ? 10 * log10(power) : -300;
}

static double largest_block(const struct detector *detector, int64_t from, int64_t until)
{
    int64_t block = seconds(detector, BLOCK_S) + 1;
    double most = 0;
    for (int64_t i = later(from, detector->base); i + block <= until; i += block) {
        double energy = 0;
        for (int64_t k = i; k < i + block; k++) {
            double x = (double)(*at_index(detector, k) - detector->offset);
            energy += x * x;
        }
        most = fmax(most, energy);
    }
    return most;
}

/* How far the samples themselves have fallen, noise and all, between an onset and the last
 * milliseconds before another. */
static double fallen_in_time_db(const struct detector *detector, int64_t onset, int64_t next)
{
    double peak = largest_block(detector, onset, next - seconds(detector, 1e-3));
    double rest =
        largest_block(detector, next - seconds(detector, REST_S), next - seconds(detector, 1e-3));
    return power_db(peak) - power_db(rest);
}

/* Has the ring of the strike at hand died by index `at`? By its samples; where noise hides them, by
 * the bins of the quick bank that rose; once those have drowned too, by their rate before. */
static bool has_died(const struct detector *detector, int64_t at)
{
    const struct bank *bank = &detector->banks[BANK_QUICK];
    const struct hand *hand = &detector->hand;
    const int16_t *noise = hand->fades[BANK_QUICK].noise;
    if (fallen_in_time_db(detector, hand->onset, at) >= DEAD_DB)
        return true;
    double peak = 0;
    int64_t last = frame_before(bank, at);
    for (int64_t frame = frame_before(bank, hand->onset) + 1; frame <= last; frame++)
        peak = fmax(peak, bank_power_over(bank, bank_row(bank, frame), noise, OVER_DB));
    double rest = bank_power_over(bank, bank_row(bank, last), noise, OVER_DB);
    if (rest > 0)
        return power_db(peak) - power_db(rest) >= DEAD_DB;
    /* Not known: it drowned before three frames could be compared. */
    double fallen_db = hand_fallen_db(hand, at);
    return fallen_db == 0 || fallen_db >= DEAD_DB;
}

/* Power at the crest in bins away from those that rang before: a break splashes too, but near the
 * lines it breaks. */
static double power_away(const struct bank *bank, const int16_t *before, const int16_t *crest)
{
    int top = 0;
    double sum = 0;
    size_t last_line = 0, k = 0;
    for (size_t i = 2; i + 1 < bank->bins; i++)
        top = before[i] > top ? before[i] : top;
    const int line = top - bank_steps(LINE_DB), fresh = bank_steps(FRESH_DB);
    bool has_line = false;
    for (size_t i = 2; i + 1 < bank->bins; i++) {
        if (before[i] < line)
            continue;
        for (k = has_line ? last_line + AWAY_BINS + 1 : 2; k + AWAY_BINS < i; k++)
            sum += crest[k] - bank->floor[k] >= fresh ? (double)bank_power(crest[k]) : 0;
        last_line = i;
        has_line = true;
    }
    for (k = has_line ? last_line + AWAY_BINS + 1 : 2; k + 1 < bank->bins; k++)
        sum += crest[k] - bank->floor[k] >= fresh ? (double)bank_power(crest[k]) : 0;
    return sum;
}

/* Power in bins that rose and last, or infinity where a strong one did. */
static double power_fresh(const struct bank *bank, const int16_t *noise, const int16_t *before,
                          int64_t frame)
{
    const int16_t *soon = bank_row(bank, frame + bank->look / 2);
    const int16_t *late = bank_row(bank, frame + bank->look);
    int top = 0;
    double fresh = 0;
    for (size_t k = 2; k + 1 < bank->bins; k++)
        top = late[k] > top ? late[k] : top;
    for (size_t k = 2; k + 1 < bank->bins; k++) {
        int after = soon[k] < late[k] ? soon[k] : late[k];
        int risen = after - before[k];
        if (after - noise[k] < bank_steps(OVER_DB))
            continue;
        if (after >= top - bank_steps(STRONG_DB) && risen >= bank_steps(STRONG_RISE_DB))
            return (double)INFINITY;
        if (after - bank->floor[k] >= bank_steps(FRESH_DB) && risen >= bank_steps(WEAK_RISE_DB))
            fresh += (double)bank_power(after);
    }
    return fresh;
}

/* Does more sound after the onset than before it, beyond the splash of a break? In all, or in bins
 * that last, or far from those that rang. noise [lanes]: what was there before the strike at
 * hand. */
static bool has_risen(const struct bank *bank, const int16_t *noise, int64_t frame, int64_t onset)
{
    const int16_t *before = bank_row(bank, frame_before(bank, onset));
    const int16_t *crest = bank_row(bank, frame);
    double had_db = power_db(bank_power_over(bank, before, noise, OVER_DB));
    return power_db(bank_power_over(bank, crest, noise, OVER_DB)) >= had_db + TOTAL_RISE_DB ||
           power_db(power_fresh(bank, noise, before, frame)) >= had_db - WEAK_DB ||
           power_db(power_away(bank, before, crest)) >= had_db - AWAY_DB;
}

/* Is this event a strike of its own beside the one at hand? */
static bool is_next(const struct detector *detector, const struct bank *bank, int64_t frame,
                    int64_t onset)
{
    int64_t since = onset - detector->hand.onset;
    if (since < seconds(detector, detector->settings.hold_off_s))
        return false;
    if (since < seconds(detector, TOGETHER_S))
        return has_died(detector, onset);
    return has_risen(bank, detector->hand.fades[bank - detector->banks].noise, frame, onset);
}

static bool take_event(struct detector *detector, const struct bank *bank, int64_t frame,
                       int64_t onset, struct error *err)
{
    bool is_ringing = detector->hand.strike != NULL;
    detector->last_onset = onset;
    if (is_ringing && !is_next(detector, bank, frame, onset))
        return true;
    if (!is_ringing &&
        onset - detector->strike_onset < seconds(detector, detector->settings.hold_off_s))
        return true;
    if (is_ringing)
        detector_close(
            detector,
            later(onset - seconds(detector, NEXT_GAP_S), (onset + detector->hand.onset) / 2),
            STRIKE_END_NEXT);
    return detector_open(detector, onset, true, err);
}

/* The blow with which the sound began: the first sample near the size of the
 * largest, and a little before it. */
static bool open_start(struct detector *detector, struct error *err)
{
    detector->is_start_open = false;
    int64_t until = sooner(detector->sound_start + seconds(detector, BEGIN_S), detector->done);
    until = sooner(until, detector->input_end);
    float peak = 0;
    for (int64_t i = detector->sound_start; i < until; i++)
        peak = fmaxf(peak, fabsf(*at_index(detector, i)));
    if (peak < SOFTEST)
        return true;
    int64_t onset = detector->sound_start;
    while (fabsf(*at_index(detector, onset)) < 0.1F * peak)
        onset++;
    onset = later(onset - seconds(detector, 0.5e-3), detector->sound_start);
    detector->last_onset = later(onset, detector->last_onset);
    return detector_open(detector, onset, false, err);
}

/* Sound began; once enough has followed, was it with a blow? */
static bool look_at_start(struct detector *detector, struct error *err)
{
    const struct bank *quick = &detector->banks[BANK_QUICK];
    const struct bank *steady = &detector->banks[BANK_STEADY];
    if (quick->newest == quick->first + START_QUICK_FRAMES &&
        detector->done % (int64_t)quick->hop == 0 && start_falls_at_once(quick, quick->newest))
        return open_start(detector, err);
    if (steady->newest < steady->first + START_STEADY_FRAMES)
        return true;
    detector->is_start_open = false;
    return start_falls_slowly(steady, steady->newest) ? open_start(detector, err) : true;
}

bool trigger_settle_start(struct detector *detector, struct error *err)
{
    if (!detector->is_start_open)
        return true;
    detector->is_start_open = false;
    int64_t end = sooner(detector->done, detector->input_end);
    int64_t quick = end / (int64_t)detector->banks[BANK_QUICK].hop;
    int64_t steady = end / (int64_t)detector->banks[BANK_STEADY].hop;
    if (start_falls_at_once(&detector->banks[BANK_QUICK], quick) ||
        start_falls_slowly(&detector->banks[BANK_STEADY], steady))
        return open_start(detector, err);
    return true;
}

/* The floor still holds what was there before the strike at hand: a beat that
 * comes out of its null stands over that. */
static bool rises_over_ring(const struct detector *detector, const struct bank *bank)
{
    if (detector->hand.strike == NULL)
        return true;
    int64_t clear = detector->hand.onset + seconds(detector, GUARD_S) + (int64_t)bank->length;
    int64_t hop = (int64_t)bank->hop;
    return bank_test_over_ring(bank, (clear + hop - 1) / hop);
}

/* The samples of the frame under test are larger than those before it, so that a look at every bin
 * is worth its time. */
static bool has_grown(const struct detector *detector)
{
    const struct bank *bank = &detector->banks[BANK_QUICK];
    const struct level *level = &detector->level;
    size_t look = (size_t)bank->look, near = (size_t)bank->near;
    return level_peak_between(level, look, look + near) >
           1.4F * level_peak_between(level, look + near, look + near + 4);
}

static bool has_event(const struct detector *detector, int which, size_t *out_lane)
{
    const struct bank *bank = &detector->banks[which];
    if (bank_test(bank, out_lane) && rises_over_ring(detector, bank))
        return true;
    int64_t since = detector->done - detector->strike_onset;
    return which == BANK_QUICK && since < seconds(detector, RECENT_S) && has_grown(detector) &&
           bank_test_over_calm(bank, detector->hand.fades[which].noise, out_lane);
}

/* A tone of 16 bit samples without any noise breaks into clicks and lines of
 * its rounding as it dies. Is this event no larger than what was there, in
 * samples like that? */
static bool is_rounding(const struct detector *detector, const struct bank *bank, int64_t onset)
{
    double rounding = bank_white_power(bank, ROUNDING_POWER);
    int level = bank_median_level(bank, bank->floor) - bank->doubt;
    if ((double)bank_power(level) > 2 * rounding)
        return false;
    float before = 0, after = 0;
    int64_t until = sooner(onset + seconds(detector, 2 * LEAD_S), detector->done);
    for (int64_t i = later(onset - seconds(detector, LEAD_S), detector->base); i < until; i++) {
        float steps = fabsf(*at_index(detector, i)) * 32768.0F;
        if (steps != rintf(steps))
            return false;
        if (i < onset)
            before = steps > before ? steps : before;
        else
            after = steps > after ? steps : after;
    }
    return after < before + 2.5F;
}

bool trigger_look(struct detector *detector, struct error *err)
{
    if (detector->is_start_open && detector->hand.strike == NULL && !look_at_start(detector, err))
        return false;
    for (int i = 0; i < BANKS; i++) {
        const struct bank *bank = &detector->banks[i];
        int64_t frame = bank->newest - bank->look, hop = (int64_t)bank->hop;
        size_t lane = 0;
        /* A bank that has no new row has been asked before. */
        if (detector->done % hop != 0 ||
            detector->last_onset >= (frame - bank->near - REACH) * hop ||
            !has_event(detector, i, &lane))
            continue;
        int64_t onset = locate(detector, bank, frame, lane);
        if (is_rounding(detector, bank, onset))
            continue;
        if (detector->is_start_open && detector->hand.strike == NULL &&
            !trigger_settle_start(detector, err))
            return false;
        if (!take_event(detector, bank, frame, onset, err))
            return false;
    }
    return true;
}
