#include "wane/watch.h"

#include <math.h>
#include <string.h>

#define SECONDS_A_DAY 86400.0
#define DRIFT_MIN     8
#define DRIFT_P       1e-6 /* looked at again and again: must not speak by chance in months */
#define DRIFT_SIGMAS  1.0  /* and be worth saying: over its span at least one sigma of a strike */
#define DRIFT_P_ALARM 1e-4 /* when the CUSUM has spoken already */
#define DECISIVE      3.0
#define WILD          3.0

/* Constants of ranges of two (exact): d2 = 2 / sqrt(pi), d3 = sqrt(2 - 4 / pi). */
static double range_d2(void)
{
    return 2 / sqrt(3.14159265358979323846);
}

static double range_d4(void)
{
    double d2 = range_d2();
    return 1 + 3 * sqrt(2 - d2 * d2) / d2;
}

bool chart_from_baseline(const double *values, size_t n, struct chart *out_chart)
{
    if (n < 2)
        return false;
    double ranges = 0;
    for (size_t i = 1; i < n; i++)
        ranges += fabs(values[i] - values[i - 1]);
    if (!(ranges > 0))
        return false;
    struct sample_spread spread;
    sample_describe(values, n, &spread);
    struct chart chart = {.n = n, .centre = spread.mean};
    chart.moving_range = ranges / (double)(n - 1);
    chart.sigma = chart.moving_range / range_d2();
    chart.lower = chart.centre - 3 * chart.sigma;
    chart.upper = chart.centre + 3 * chart.sigma;
    chart.range_upper = range_d4() * chart.moving_range;
    *out_chart = chart;
    return true;
}

/* How many of the last `among` values, the one at index counted, lie beyond `sigmas` on this side.
 */
static unsigned count_beyond(const struct chart *chart, const double *values, size_t index,
                             size_t among, double sigmas, double side)
{
    unsigned count = 0;
    for (size_t i = 0; i < among && i <= index; i++)
        count += side * (values[index - i] - chart->centre) > sigmas * chart->sigma;
    return count;
}

static bool is_run_up(const double *values, size_t index, double side)
{
    if (index < 6)
        return false;
    for (size_t i = 0; i < 6; i++)
        if (!(side * (values[index - i] - values[index - i - 1]) > 0))
            return false;
    return true;
}

unsigned chart_rules(const struct chart *chart, const double *values, size_t index)
{
    unsigned rules = 0;
    for (int k = 0; k < 2; k++) {
        double side = k == 0 ? 1 : -1;
        double now = side * (values[index] - chart->centre) / chart->sigma;
        if (now > 3)
            rules |= RUN_BEYOND_3;
        if (now > 2 && count_beyond(chart, values, index, 3, 2, side) >= 2)
            rules |= RUN_2_OF_3;
        if (now > 1 && count_beyond(chart, values, index, 5, 1, side) >= 4)
            rules |= RUN_4_OF_5;
        if (count_beyond(chart, values, index, 8, 0, side) == 8)
            rules |= RUN_8_ON_SIDE;
        if (is_run_up(values, index, side))
            rules |= RUN_6_TREND;
    }
    return rules;
}

int cusum_add(struct cusum *cusum, double score, double limit, uint64_t *out_from)
{
    cusum->count++;
    cusum->up += score - CUSUM_SLACK;
    cusum->down += -score - CUSUM_SLACK;
    if (!(cusum->up > 0)) {
        cusum->up = 0;
        cusum->up_from = cusum->count;
    }
    if (!(cusum->down > 0)) {
        cusum->down = 0;
        cusum->down_from = cusum->count;
    }
    int side = cusum->up > limit ? 1 : cusum->down > limit ? -1 : 0;
    if (side == 0)
        return 0;
    *out_from = cusum->count - (side > 0 ? cusum->up_from : cusum->down_from);
    *cusum = (struct cusum){0};
    return side;
}

bool drift_fit(const double *times_s, const double *values, size_t n, double *scratch,
               struct drift *out_drift)
{
    struct line_fit line;
    if (n < DRIFT_MIN || !line_fit(times_s, values, n, &line))
        return false;
    for (size_t i = 0; i < n; i++)
        scratch[i] = values[i] - line.intercept - line.slope * times_s[i];
    double likeness = sample_autocorrelation(scratch, n);
    double wider = likeness > 0 && likeness < 1 ? sqrt((1 + likeness) / (1 - likeness)) : 1;
    out_drift->per_day = line.slope * SECONDS_A_DAY;
    out_drift->per_day_u = line.slope_u * wider * SECONDS_A_DAY;
    out_drift->over_span = line.slope * (times_s[n - 1] - times_s[0]);
    /* As many independent values as the widening leaves. */
    double dof = ((double)n - 2) / (wider * wider);
    double t = out_drift->per_day_u > 0 ? out_drift->per_day / out_drift->per_day_u
               : line.slope == 0        ? 0
                                        : (double)INFINITY;
    out_drift->p = student_p(t, fmax(1, dof));
    return true;
}

void watch_restart(struct watch *watch)
{
    memset(watch, 0, sizeof *watch);
}

/* The baseline without its odd ones gives the limits, and the first mean and spread. */
static bool settle_baseline(struct watch *watch)
{
    double scratch[WATCH_BASELINE], kept[WATCH_BASELINE];
    bool is_odd[WATCH_BASELINE];
    sample_mark_odd(watch->baseline, WATCH_BASELINE, 0, scratch, is_odd);
    size_t count = 0;
    for (size_t i = 0; i < WATCH_BASELINE; i++)
        if (!is_odd[i])
            kept[count++] = watch->baseline[i];
    if (!chart_from_baseline(kept, count, &watch->chart))
        return false;
    struct sample_spread spread;
    sample_describe(kept, count, &spread);
    watch->mean = spread.mean;
    watch->mean_n = (double)count;
    watch->variance = spread.sd * spread.sd;
    watch->variance_dof = (double)count - 1;
    return true;
}

static double sigma_of(const struct watch *watch)
{
    return sqrt(watch->variance);
}

/* The value's score by what came before it, as a normal deviate; then it counts itself. */
static double score_and_learn(struct watch *watch, double value)
{
    double reach = sigma_of(watch) * sqrt(1 + 1 / watch->mean_n);
    double t = (value - watch->mean) / reach, dof = watch->variance_dof;
    double z = (8 * dof + 1) / (8 * dof + 3) * sqrt(dof * log1p(t * t / dof));
    z = copysign(fmin(z, WILD), t);
    double off = copysign(fmin(fabs(t), WILD), t) * reach;
    watch->variance_dof++;
    watch->variance +=
        (off * off * watch->mean_n / (watch->mean_n + 1) - watch->variance) / watch->variance_dof;
    watch->mean_n++;
    watch->mean += off / watch->mean_n;
    return z;
}

/* Each kept value is the mean of per_kept ones; when full, neighbours are paired. */
static void keep_for_drift(struct watch *watch, double time_s, double value)
{
    if (watch->per_kept == 0)
        watch->per_kept = 1;
    watch->pending_time_s += time_s;
    watch->pending_value += value;
    if (++watch->pending < watch->per_kept)
        return;
    if (watch->kept == WATCH_KEPT) {
        for (size_t i = 0; i < WATCH_KEPT / 2; i++) {
            watch->times_s[i] = (watch->times_s[2 * i] + watch->times_s[2 * i + 1]) / 2;
            watch->values[i] = (watch->values[2 * i] + watch->values[2 * i + 1]) / 2;
        }
        watch->kept = WATCH_KEPT / 2;
        watch->per_kept *= 2;
    }
    watch->times_s[watch->kept] = watch->pending_time_s / watch->pending;
    watch->values[watch->kept++] = watch->pending_value / watch->pending;
    watch->pending_time_s = watch->pending_value = 0;
    watch->pending = 0;
}

static void look_for_drift(struct watch *watch, struct watch_notice *notice)
{
    double scratch[WATCH_KEPT];
    struct drift drift;
    /* Looking at every strike would find chance lines: once for each kept quarter more. */
    if (watch->has_drifted || watch->pending != 0 || watch->kept < 32 || watch->kept % 16 != 0 ||
        !drift_fit(watch->times_s, watch->values, watch->kept, scratch, &drift) ||
        drift.p > DRIFT_P || fabs(drift.over_span) < DRIFT_SIGMAS * sigma_of(watch))
        return;
    watch->has_drifted = true;
    *notice = (struct watch_notice){WATCH_DRIFT, watch->first_id, drift.per_day, drift.per_day_u,
                                    watch->chart.centre};
}

struct change_point {
    size_t at;      /* first value of the new level; 0: none */
    double squares; /* about both levels */
    double before, after;
};

/* The likeliest place of a step: least squares about two levels. */
static struct change_point find_step(const double *values, size_t n)
{
    struct sample_spread all;
    sample_describe(values, n, &all);
    struct change_point best = {0, (double)INFINITY, (double)NAN, (double)NAN};
    double total = 0, below = 0;
    for (size_t i = 0; i < n; i++)
        total += (values[i] - all.mean) * (values[i] - all.mean);
    for (size_t at = 1; at < n; at++) {
        below += values[at - 1] - all.mean;
        double left = (double)at, right = (double)(n - at);
        double squares = total - below * below / left - below * below / right;
        if (squares < best.squares)
            best = (struct change_point){at, squares, all.mean + below / left,
                                         all.mean - below / right};
    }
    return best;
}

enum change { CHANGE_STEP, CHANGE_DRIFT, CHANGE_UNCLEAR };

/* The sum has gone over its limit: was it a step, or does a straight line from the last step on say
 * it better? Neither is said before one is likelier than the other by e^3: the sum fills again. */
static enum change judge(const struct watch *watch, struct drift *out_drift)
{
    double scratch[WATCH_KEPT];
    struct line_fit line;
    if (!drift_fit(watch->times_s, watch->values, watch->kept, scratch, out_drift) ||
        !line_fit(watch->times_s, watch->values, watch->kept, &line))
        return CHANGE_STEP;
    double n = (double)watch->kept;
    double about_line = line.residual_sd * line.residual_sd * (n - 2);
    double step_likelier = n / 2 * log(about_line / find_step(watch->values, watch->kept).squares);
    if (step_likelier > DECISIVE)
        return CHANGE_STEP;
    return step_likelier < 0 && out_drift->p < DRIFT_P_ALARM ? CHANGE_DRIFT : CHANGE_UNCLEAR;
}

/* The level after the change is the new one; the spread stays. */
static void move_to(struct watch *watch, double mean, double mean_n)
{
    watch->mean = mean;
    watch->mean_n = mean_n;
    watch->chart.centre = mean;
    watch->chart.lower = mean - 3 * watch->chart.sigma;
    watch->chart.upper = mean + 3 * watch->chart.sigma;
    watch->recent_count = 0;
}

static size_t unroll(const struct watch *watch, double *values)
{
    size_t n = watch->recent_count < WATCH_KEPT ? (size_t)watch->recent_count : WATCH_KEPT;
    for (size_t i = 0; i < n; i++)
        values[i] = watch->recent[(watch->recent_count - n + i) % WATCH_KEPT];
    return n;
}

static void judge_change(struct watch *watch, struct watch_notice *notice)
{
    double values[WATCH_KEPT];
    size_t n = unroll(watch, values);
    struct change_point step = {0, 0, watch->chart.centre, watch->mean};
    if (n > 1)
        step = find_step(values, n);
    struct drift drift = {0};
    enum change change = judge(watch, &drift);
    if (change == CHANGE_UNCLEAR)
        return;
    if (change == CHANGE_DRIFT) {
        if (!watch->has_drifted)
            *notice = (struct watch_notice){WATCH_DRIFT, watch->first_id, drift.per_day,
                                            drift.per_day_u, watch->chart.centre};
        watch->has_drifted = true;
        move_to(watch, step.after, (double)(n - step.at));
        return;
    }
    double after = (double)(n - step.at), earlier = fmax(1, watch->mean_n - after);
    double u = sigma_of(watch) * sqrt(1 / after + 1 / earlier);
    int64_t from_id = watch->recent_ids[(watch->recent_count - (n - step.at)) % WATCH_KEPT];
    *notice = (struct watch_notice){WATCH_STEP, from_id, step.after - step.before, u, step.before};
    watch->kept = watch->per_kept = watch->pending = 0;
    watch->pending_time_s = watch->pending_value = 0;
    watch->has_drifted = false;
    move_to(watch, step.after, after);
}

void watch_add(struct watch *watch, int64_t id, double time_s, double value,
               struct watch_notice *out_notice)
{
    *out_notice = (struct watch_notice){0};
    if (!isfinite(value))
        return;
    if (!watch->is_ready) {
        if (watch->baseline_count == WATCH_BASELINE) {
            /* All were equal: the oldest makes room until there is a spread. */
            memmove(watch->baseline, watch->baseline + 1,
                    (WATCH_BASELINE - 1) * sizeof watch->baseline[0]);
            watch->baseline_count--;
        }
        watch->baseline[watch->baseline_count++] = value;
        watch->is_ready = watch->baseline_count == WATCH_BASELINE && settle_baseline(watch);
        if (watch->is_ready)
            *out_notice =
                (struct watch_notice){WATCH_READY, id, 0, watch->chart.sigma, watch->chart.centre};
        return;
    }
    watch->recent_ids[watch->recent_count % WATCH_KEPT] = id;
    watch->recent[watch->recent_count++ % WATCH_KEPT] = value;
    uint64_t values_ago = 0;
    double score = score_and_learn(watch, value);
    if (watch->kept == 0 && watch->pending == 0)
        watch->first_id = id;
    keep_for_drift(watch, time_s, value);
    if (cusum_add(&watch->cusum, score, CUSUM_LIMIT, &values_ago) != 0)
        judge_change(watch, out_notice);
    else
        look_for_drift(watch, out_notice);
}
