/* Watching a fixture over days: control charts of single values, run rules, steps and drifts. Names
 * and rules as in the NIST/SEMATECH e-Handbook of Statistical Methods, section 6.3.2. Pure, any
 * thread, no allocation. */
#ifndef WANE_WATCH_H
#define WANE_WATCH_H

#include "wane/statistics.h"

#include <stdint.h>

/* --- individuals and moving-range chart (e-Handbook 6.3.2.2) --- */

struct chart {
    size_t n;            /* values of the baseline */
    double centre;       /* their mean */
    double moving_range; /* mean |x_i - x_i-1| */
    double sigma;        /* moving_range / d2, d2 = 2 / sqrt(pi) for ranges of two */
    double lower, upper; /* centre -+ 3 sigma */
    double range_upper;  /* D4 moving_range, D4 = 1 + 3 d3 / d2 */
};

/* Limits from a baseline of 2 values or more; 20 or more make them worth drawing. Fails below 2, or
 * when all values are equal. */
bool chart_from_baseline(const double *values, size_t n, struct chart *out_chart);

/* Western Electric run rules (e-Handbook 6.3.2); each is tested on either side of the centre. */
enum run_rule {
    RUN_BEYOND_3 = 1u << 0,  /* a point beyond 3 sigma */
    RUN_2_OF_3 = 1u << 1,    /* 2 of the last 3 beyond 2 sigma */
    RUN_4_OF_5 = 1u << 2,    /* 4 of the last 5 beyond 1 sigma */
    RUN_8_ON_SIDE = 1u << 3, /* the last 8 on one side */
    RUN_6_TREND = 1u << 4,   /* the last 6 each above, or each below, the one before */
};

/* The rules that the value at `index` completes, as bits; values [index + 1] are looked at. A chart
 * in control completes one of the first four every 92nd point by chance: a hint, not an alarm. */
unsigned chart_rules(const struct chart *chart, const double *values, size_t index);

/* --- steps: two-sided tabular CUSUM (e-Handbook 6.3.2.3; Page 1954) --- */

#define CUSUM_SLACK 0.5 /* half of the step that is sought, in sigma */
/* In control it speaks by chance once in some 70 000 strikes (Siegmund's approximation 1985), and
 * finds a step of one sigma in about 21. The handbook's 4 and 5 speak once in 168 and 465. */
#define CUSUM_LIMIT 10.0

struct cusum {
    double up, down;             /* sums, in sigma */
    uint64_t up_from, down_from; /* count of the value after which each sum last was 0 */
    uint64_t count;
};

/* = {0} starts. Adds (value - centre) / sigma; +1 or -1 when a sum goes over `limit` (both sums
 * then start anew), else 0. *out_from: how many values ago the step began (1: with this one). */
int cusum_add(struct cusum *cusum, double score, double limit, uint64_t *out_from);

/* --- drifts: a straight line over time --- */

struct drift {
    double per_day, per_day_u; /* u widened for neighbours that resemble each other: sqrt((1 + r) /
                                  (1 - r)) with the residuals' lag-1 autocorrelation r > 0 */
    double p;
    double over_span; /* per_day times the span */
};

/* times_s rising. scratch [n]. Fails below 8 values or without a span. */
bool drift_fit(const double *times_s, const double *values, size_t n, double *scratch,
               struct drift *out_drift);

/* --- one figure of one fixture, followed for as long as it stands --- */

#define WATCH_BASELINE                                                                             \
    24 /* strikes that make the limits, after the odd ones among them are left out */
#define WATCH_KEPT 512 /* for drifts: values (means of several, once there are more) */

enum watch_event {
    WATCH_NOTHING,
    WATCH_READY, /* the baseline is there: the chart's limits are known */
    WATCH_STEP,
    WATCH_DRIFT,
};

struct watch_notice {
    enum watch_event event;
    int64_t from_id;         /* strike with which the step began; of a drift the first one */
    double change, change_u; /* of the step; of a drift per day */
    double before;           /* what the change counts from */
};

/* Plain data; = {0} is a valid new watch. About 21 kB.
 *
 * Scores for the CUSUM come from mean and spread of all since the last step, so that a short
 * baseline does not make false alarms (self-starting CUSUM, Hawkins 1987; scores made normal as
 * Wallace 1959 does it). Wild strikes are drawn in to 3 sigma: one of them is a strike, not a step.
 */
struct watch {
    struct chart chart; /* of the baseline; moved along by steps */
    bool is_ready, has_drifted;
    double baseline[WATCH_BASELINE];
    unsigned baseline_count;
    struct cusum cusum;
    double mean, mean_n;           /* since the last step */
    double variance, variance_dof; /* about the mean, pooled over steps */
    /* The last values since the last step. */
    int64_t recent_ids[WATCH_KEPT];
    double recent[WATCH_KEPT];
    uint64_t recent_count;
    /* All since the last step, thinned by pairing: for drifts. */
    double times_s[WATCH_KEPT], values[WATCH_KEPT];
    double pending_time_s, pending_value;
    int64_t first_id;
    unsigned kept, per_kept, pending;
};

/* The next good strike's value. Says at most one thing; after a step the centre moves to the new
 * level, so that it is said once; a drift is said once until watch_restart. */
void watch_add(struct watch *watch, int64_t id, double time_s, double value,
               struct watch_notice *out_notice);

/* Forgets all: the next strikes make a new baseline. */
void watch_restart(struct watch *watch);

#endif
