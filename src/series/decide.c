#include "wane/series.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "series/limits.h"

const char *decision_name(enum decision decision)
{
    static const char *const names[] = {NULL, "inside", "outside", "not-decided"};
    return names[decision];
}

enum decision decide(const struct part_range *range, double value, double half_width)
{
    if (!range->has_low && !range->has_high)
        return DECISION_NONE;
    if (!isfinite(value) || !isfinite(half_width))
        return DECISION_OPEN;
    if ((range->has_low && value + half_width < range->low) ||
        (range->has_high && value - half_width > range->high))
        return DECISION_OUTSIDE;
    if ((!range->has_low || value - half_width >= range->low) &&
        (!range->has_high || value + half_width <= range->high))
        return DECISION_INSIDE;
    return DECISION_OPEN;
}

enum decision decision_join(enum decision left, enum decision right)
{
    static const int weight[] = {
        [DECISION_NONE] = 0, [DECISION_INSIDE] = 1, [DECISION_OPEN] = 2, [DECISION_OUTSIDE] = 3};
    return weight[left] > weight[right] ? left : right;
}

double clock_u(enum quantity quantity, double value, double clock_u_ppm)
{
    /* Q and zeta are ratios of two rates: the clock falls out. */
    if (quantity == QUANTITY_Q || quantity == QUANTITY_ZETA || !(clock_u_ppm > 0))
        return 0;
    return fabs(value) * clock_u_ppm * 1e-6;
}

static struct limit_result *add_result(struct limit_result *results, unsigned *count,
                                       const char *label, enum limit_kind kind,
                                       enum quantity quantity, const struct part_range *range)
{
    struct limit_result *result = &results[(*count)++];
    *result = (struct limit_result){.kind = kind,
                                    .quantity = quantity,
                                    .range = *range,
                                    .value = (double)NAN,
                                    .half_width = (double)NAN,
                                    .more = -1};
    snprintf(result->label, sizeof result->label, "%s", label);
    return result;
}

struct limit_result *limit_of_value(struct limit_result *results, unsigned *count,
                                    const struct part_mode *mode, enum quantity quantity)
{
    return add_result(results, count, mode->label, LIMIT_VALUE, quantity, &mode->limits[quantity]);
}

struct limit_result *limit_of_spread(struct limit_result *results, unsigned *count,
                                     const struct part_mode *mode, enum quantity quantity)
{
    struct part_range range = {false, true, 0, mode->spread_max[quantity]};
    return add_result(results, count, mode->label, LIMIT_SPREAD, quantity, &range);
}

struct limit_result *limit_of_split(struct limit_result *results, unsigned *count,
                                    const struct part *part, const struct part_split *split)
{
    char labels[2 * READING_LABEL_MAX];
    snprintf(labels, sizeof labels, "%s %s", part->modes[split->first].label,
             part->modes[split->second].label);
    return add_result(results, count, labels, LIMIT_SPLIT, QUANTITY_F_HZ, &split->f_hz);
}

static void settle(struct limit_result *result, enum decision *all)
{
    result->decision = decide(&result->range, result->value, result->half_width);
    result->more = result->decision == DECISION_OPEN ? -1 : 0;
    *all = decision_join(*all, result->decision);
}

unsigned decide_strike(const struct part *part, const int modes[SERIES_TRACKS_MAX],
                       const struct reading *reading, double clock_u_ppm,
                       struct limit_result out_results[LIMITS_MAX], enum decision *out_all)
{
    unsigned count = 0;
    *out_all = DECISION_NONE;
    for (unsigned i = 0; i < part->mode_count; i++) {
        for (unsigned q = 0; q < QUANTITY_COUNT; q++) {
            const struct part_range *range = &part->modes[i].limits[q];
            if (!range->has_low && !range->has_high)
                continue;
            struct limit_result *result =
                limit_of_value(out_results, &count, &part->modes[i], (enum quantity)q);
            if (modes[i] >= 0) {
                struct measured read =
                    quantity_of_mode(&reading->modes[modes[i]], (enum quantity)q);
                result->value = read.value;
                result->half_width =
                    part->guard * hypot(read.u, clock_u((enum quantity)q, read.value, clock_u_ppm));
            }
            settle(result, out_all);
        }
    }
    for (unsigned i = 0; i < part->split_count; i++) {
        const struct part_split *split = &part->splits[i];
        struct limit_result *result = limit_of_split(out_results, &count, part, split);
        if (modes[split->first] >= 0 && modes[split->second] >= 0) {
            const struct mode *first = &reading->modes[modes[split->first]];
            const struct mode *second = &reading->modes[modes[split->second]];
            result->value = second->f_hz - first->f_hz;
            double own_u = hypot(first->f_u_hz, second->f_u_hz);
            result->half_width =
                part->guard * hypot(own_u, clock_u(QUANTITY_F_HZ, result->value, clock_u_ppm));
        }
        settle(result, out_all);
    }
    return count;
}

int strikes_more(size_t n, double sd, double half_width)
{
    if (n < 2 || !isfinite(sd) || !(half_width > 0))
        return -1;
    for (int more = 0; more < SERIES_MORE_MAX; more++) {
        double in_all = (double)n + more;
        if (in_all >= 3 && coverage_factor(0.95, in_all - 1) * sd / sqrt(in_all) <= half_width)
            return more;
    }
    return SERIES_MORE_MAX;
}
