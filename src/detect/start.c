#include "detect/start.h"

#define EARLY_FRAMES 10   /* frames that may hold the blow */
#define LATE_FROM    16   /* first frame of what follows */
#define LINE_DB      15.0 /* a line stands this far over the bins near it */
#define LINE_NEAR    4
#define LINE_FAR     12
#define LINE_FRAMES  4
#define LOWEST       3   /* bins below hold the offset of the input, which settles too */
#define FALL_DB      0.7 /* over the whole span; hum does not fall */
#define FALL_PART_DB 0.1 /* in each quarter */
#define QUARTERS     4
#define FRAMES_LEAST 12
#define LINES        3 /* strongest lines that are looked at */

static double mean_level(const struct bank *bank, size_t lane, int64_t from, int64_t until)
{
    double sum = 0;
    for (int64_t frame = from; frame < until; frame++)
        sum += bank_row(bank, frame)[lane];
    return sum / (double)(until - from);
}

bool start_falls_at_once(const struct bank *bank, int64_t last)
{
    int64_t first = bank->first, late = first + LATE_FROM;
    if (last > first + START_QUICK_FRAMES)
        last = first + START_QUICK_FRAMES;
    if (last - first < START_QUICK_FRAMES)
        late = first + (last - first) / 2;
    if (last - late < 4 || first < bank->newest - BANK_ROWS + 1)
        return false;
    double doubt_db =
        last - late < BANK_FLOOR ? 60.0 / (double)(last - late) - 60.0 / BANK_FLOOR : 0;
    for (size_t lane = LOWEST; lane < bank->lanes; lane++) {
        if (bank->need[lane] > bank_steps(100) || lane == bank->bins)
            continue;
        double limit = mean_level(bank, lane, late, last) + bank->need[lane] + bank_steps(doubt_db);
        for (int64_t frame = first; frame < first + EARLY_FRAMES && frame < late; frame++)
            if (bank_row(bank, frame)[lane] >= limit)
                return true;
    }
    return false;
}

static bool lane_falls(const struct bank *bank, size_t lane, int64_t first, int64_t last)
{
    int64_t part = (last - first + 1) / QUARTERS;
    double before = 0, at_start = 0;
    for (int q = 0; q < QUARTERS; q++) {
        double level = mean_level(bank, lane, first + q * part, first + (q + 1) * part);
        if (q > 0 && level > before - bank_steps(FALL_PART_DB))
            return false;
        before = level;
        at_start = q == 0 ? level : at_start;
    }
    return at_start - before >= bank_steps(FALL_DB);
}

/* A line of the spectrum stands out from the bins around it, in each of the first frames. */
static bool is_line(const struct bank *bank, int64_t first, size_t k)
{
    for (int64_t frame = first; frame < first + LINE_FRAMES; frame++) {
        const int16_t *row = bank_row(bank, frame);
        int sum = 0, count = 0;
        for (size_t i = LINE_NEAR; i <= LINE_FAR; i++) {
            sum += k > i ? row[k - i] : 0;
            count += k > i;
            sum += k + i + 1 < bank->bins ? row[k + i] : 0;
            count += k + i + 1 < bank->bins;
        }
        if (count == 0 || row[k] - sum / count < bank_steps(LINE_DB))
            return false;
    }
    return true;
}

bool start_falls_slowly(const struct bank *bank, int64_t last)
{
    int64_t first = bank->first;
    if (last - first < FRAMES_LEAST || first < bank->newest - BANK_ROWS + 1)
        return false;
    const int16_t *row = bank_row(bank, first);
    int below = INT16_MAX;
    for (int i = 0; i < LINES; i++) {
        size_t best = 0;
        for (size_t k = LOWEST; k + 1 < bank->bins; k++)
            if (bank->need[k] < bank_steps(100) && row[k] < below && row[k] >= row[k - 1] &&
                row[k] >= row[k + 1] && (best == 0 || row[k] > row[best]) &&
                is_line(bank, first, k))
                best = k;
        if (best == 0)
            return false;
        if (lane_falls(bank, best, first, last))
            return true;
        below = row[best];
    }
    return false;
}
