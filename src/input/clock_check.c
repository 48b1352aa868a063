#include "clock_check.h"
#include "wane/clock.h"

#include <float.h>
#include <math.h>
#include <string.h>

#define WINDOW_NS CLOCK_NS_PER_S
/* Below this a loss cannot be told from a sound server's own unrest; the fit's break test sees
 * shorter holes in a ring by itself. A sample clock that runs 0.1 % slow moves the arrivals by 2 ms
 * in the span, well below. */
#define LATE_S 0.010

void clock_check_init(struct clock_check *check, double rate_hz)
{
    *check = (struct clock_check){.rate_hz = rate_hz, .earliest_s = DBL_MAX};
}

static void remember(struct clock_check *check, double earliest_s)
{
    if (check->history_count == CLOCK_CHECK_SPAN) {
        memmove(check->history_s, check->history_s + 1,
                (CLOCK_CHECK_SPAN - 1) * sizeof check->history_s[0]);
        check->history_count--;
    }
    check->history_s[check->history_count++] = earliest_s;
}

/* Both newest seconds later than every one before: seconds that are missing, else 0. */
static double judge(struct clock_check *check)
{
    if (check->history_count < CLOCK_CHECK_SPAN)
        return 0.0;
    double before_least_s = DBL_MAX, before_most_s = -DBL_MAX, after_least_s = DBL_MAX;
    for (unsigned i = 0; i < CLOCK_CHECK_SPAN; i++) {
        double earliest_s = check->history_s[i];
        if (i < CLOCK_CHECK_BEFORE) {
            before_least_s = fmin(before_least_s, earliest_s);
            before_most_s = fmax(before_most_s, earliest_s);
        } else {
            after_least_s = fmin(after_least_s, earliest_s);
        }
    }
    double unrest_s = before_most_s - before_least_s;
    if (after_least_s < before_most_s + fmax(LATE_S, unrest_s))
        return 0.0;
    double missing_s = after_least_s - before_least_s;
    for (unsigned i = CLOCK_CHECK_BEFORE; i < CLOCK_CHECK_SPAN; i++)
        check->history_s[i] -= missing_s;
    return missing_s;
}

uint64_t clock_check_block(struct clock_check *check, uint64_t frame_count, int64_t stamp_ns)
{
    uint64_t missing = 0;
    check->frames += frame_count;
    if (check->first_ns == 0) {
        check->first_ns = stamp_ns;
        check->window_end_ns = stamp_ns + WINDOW_NS;
    }
    if (stamp_ns >= check->window_end_ns) {
        if (check->earliest_s < DBL_MAX) {
            remember(check, check->earliest_s);
            missing = (uint64_t)llround(judge(check) * check->rate_hz);
        }
        check->earliest_s = DBL_MAX;
        check->window_end_ns = stamp_ns + WINDOW_NS;
        check->frames += missing;
    }
    double arrival_s = (double)(stamp_ns - check->first_ns) / (double)CLOCK_NS_PER_S;
    check->earliest_s = fmin(check->earliest_s, arrival_s - (double)check->frames / check->rate_hz);
    return missing;
}
