#include "series/limits.h"
#include "series/store.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define PROOF_P       0.001 /* of a trend or a slope: some forty are looked at in a series */
#define PROOF_STRIKES 6
#define RARE_STRIKES  5
#define RARE_SHARE    0.2
#define DIFFERENCE_P  0.01

/* Columns of what counts, for one figure after another. */
struct columns {
    double *values, *us, *places, *levels, *scratch;
    size_t *rows;
    bool *is_odd;
    size_t n;
};

static bool counts(const struct row *row)
{
    return row->verdict == VERDICT_GOOD && !row->is_set_aside;
}

static struct measured quantity_of_cell(const struct cell *cell, enum quantity quantity)
{
    if (quantity == QUANTITY_F_HZ)
        return (struct measured){cell->f_hz, (double)cell->f_u_hz};
    if (quantity == QUANTITY_DECAY_PER_S)
        return (struct measured){cell->decay_per_s, (double)cell->decay_u_per_s};
    struct ring ring = {{cell->f_hz, (double)cell->f_u_hz},
                        {cell->decay_per_s, (double)cell->decay_u_per_s},
                        cell->cov};
    struct decay_measures measures;
    constant_decay_measures(&ring, &measures);
    struct measured loss = measures.loss_factor;
    if (quantity == QUANTITY_T60_S)
        return measures.t60_s;
    if (quantity == QUANTITY_ZETA)
        return (struct measured){loss.value / 2, loss.u / 2};
    return (struct measured){1 / loss.value, loss.u / (loss.value * loss.value)};
}

static bool columns_create(struct columns *columns, size_t n, struct error *err)
{
    size_t size = n == 0 ? 1 : n;
    *columns = (struct columns){0};
    double *numbers = calloc(5 * size, sizeof *numbers);
    columns->rows = calloc(size, sizeof *columns->rows);
    columns->is_odd = calloc(size, sizeof *columns->is_odd);
    columns->values = numbers;
    if (numbers == NULL || columns->rows == NULL || columns->is_odd == NULL) {
        free(numbers);
        free(columns->rows);
        free(columns->is_odd);
        return error_set(err, ERROR_MEMORY, "memory ran out for the figures of a series");
    }
    columns->us = numbers + size;
    columns->places = numbers + 2 * size;
    columns->levels = numbers + 3 * size;
    columns->scratch = numbers + 4 * size;
    return true;
}

static void columns_destroy(struct columns *columns)
{
    free(columns->values);
    free(columns->rows);
    free(columns->is_odd);
}

static void gather(const struct series *series, unsigned track, enum quantity quantity,
                   struct columns *columns)
{
    columns->n = 0;
    for (size_t i = 0; i < series->row_count; i++) {
        const struct cell *cell = &series->rows[i].cells[track];
        if (!counts(&series->rows[i]) || !(cell->f_hz > 0))
            continue;
        struct measured read = quantity_of_cell(cell, quantity);
        columns->values[columns->n] = read.value;
        columns->us[columns->n] = read.u;
        columns->places[columns->n] = (double)i;
        columns->levels[columns->n] = (double)cell->level_dbfs;
        columns->rows[columns->n++] = i;
    }
}

static double root_mean_square(const double *values, size_t n)
{
    double squares = 0;
    size_t known = 0;
    for (size_t i = 0; i < n; i++) {
        if (!isfinite(values[i]))
            continue;
        squares += values[i] * values[i];
        known++;
    }
    return known == 0 ? (double)NAN : sqrt(squares / (double)known);
}

/* A spread below what the noise alone makes is luck. */
static double at_least(double sd, double within_u)
{
    return isfinite(within_u) ? fmax(sd, within_u) : sd;
}

static bool is_proved(const struct line_fit *line)
{
    return line->n >= PROOF_STRIKES && line->p < PROOF_P;
}

static void describe_without_odd(struct columns *columns, struct series_stat *stat)
{
    stat->sd_without_odd = stat->spread.sd;
    stat->more_without_odd = stat->more;
    if (stat->odd == 0)
        return;
    size_t kept = 0;
    for (size_t i = 0; i < columns->n; i++)
        if (!columns->is_odd[i])
            columns->scratch[kept++] = columns->values[i];
    struct sample_spread spread;
    sample_describe(columns->scratch, kept, &spread);
    stat->sd_without_odd = spread.sd;
    stat->more_without_odd = strikes_more(kept, at_least(spread.sd, stat->within_u), stat->wanted);
}

static void describe(struct columns *columns, double wanted_share, struct series_stat *stat)
{
    const double not_known = (double)NAN;
    sample_describe(columns->values, columns->n, &stat->spread);
    stat->within_u = root_mean_square(columns->us, columns->n);
    stat->ratio = stat->within_u > 0 ? stat->spread.sd / stat->within_u : not_known;
    stat->odd = (unsigned)sample_mark_odd(columns->values, columns->n, stat->within_u,
                                          columns->scratch, columns->is_odd);
    stat->wanted = wanted_share > 0 ? wanted_share * fabs(stat->spread.mean) : 0;
    stat->more = strikes_more(columns->n, at_least(stat->spread.sd, stat->within_u), stat->wanted);
    describe_without_odd(columns, stat);
    struct line_fit none = {0, not_known, not_known, not_known, not_known, not_known, not_known};
    stat->trend = stat->force = none;
    if (line_fit(columns->places, columns->values, columns->n, &stat->trend))
        stat->has_trend = is_proved(&stat->trend);
    if (line_fit(columns->levels, columns->values, columns->n, &stat->force))
        stat->has_force = is_proved(&stat->force);
    memcpy(columns->scratch, columns->values, columns->n * sizeof *columns->values);
    stat->median = sample_median(columns->scratch, columns->n);
}

static void mark_odd_rows(struct series *series, const struct columns *columns)
{
    for (size_t i = 0; i < columns->n; i++)
        if (columns->is_odd[i])
            series->rows[columns->rows[i]].is_odd = true;
}

static int larger_more(int left, int right)
{
    return left > right ? left : right;
}

static void describe_mode(struct series *series, unsigned track, struct columns *columns,
                          struct series_summary *summary)
{
    struct series_mode *mode = &summary->modes[track];
    memcpy(mode->label, series->tracks.tracks[track].label, sizeof mode->label);
    for (unsigned q = 0; q < QUANTITY_COUNT; q++) {
        double wanted = series->has_part && track < series->part.mode_count
                            ? series->part.modes[track].wanted[q]
                            : 0;
        gather(series, track, (enum quantity)q, columns);
        describe(columns, wanted, &mode->stats[q]);
        mode->n = (unsigned)columns->n;
        if (wanted > 0) {
            summary->more = larger_more(summary->more, mode->stats[q].more);
            summary->more_without_odd =
                larger_more(summary->more_without_odd, mode->stats[q].more_without_odd);
        }
        if (track == 0 && (q == QUANTITY_F_HZ || q == QUANTITY_Q))
            mark_odd_rows(series, columns);
    }
    mode->gaps = summary->count.counted - mode->n;
    mode->is_rare =
        summary->count.counted >= RARE_STRIKES && mode->n < RARE_SHARE * summary->count.counted;
}

static void settle(struct limit_result *result, size_t n, double sd, double clock_half_width,
                   enum decision *all)
{
    result->decision = decide(&result->range, result->value, result->half_width);
    *all = decision_join(*all, result->decision);
    result->more = result->decision == DECISION_OPEN ? -1 : 0;
    if (result->decision != DECISION_OPEN || !isfinite(result->value))
        return;
    double room = INFINITY;
    if (result->range.has_low)
        room = fmin(room, fabs(result->value - result->range.low));
    if (result->range.has_high)
        room = fmin(room, fabs(result->range.high - result->value));
    if (!(room > clock_half_width))
        return;
    int more = strikes_more(n, sd, sqrt(room * room - clock_half_width * clock_half_width));
    result->more = more < SERIES_MORE_MAX ? more : -1;
}

/* Half-width of the mean's interval at the coverage that `guard` standard uncertainties have when
 * they are well known. */
static double guard_half_width(double guard, size_t n, double sd)
{
    if (n < 2)
        return (double)NAN;
    if (!(guard > 0))
        return 0;
    double coverage = fmin(erf(guard / sqrt(2.0)), 1 - 1e-12);
    return coverage_factor(coverage, (double)n - 1) * sd / sqrt((double)n);
}

static void settle_mean(const struct series *series, struct limit_result *result,
                        enum quantity quantity, size_t n, double mean, double sd,
                        enum decision *all)
{
    double clock = series->part.guard * clock_u(quantity, mean, series->clock_u_ppm);
    result->value = mean;
    result->half_width = hypot(guard_half_width(series->part.guard, n, sd), clock);
    settle(result, n, sd, clock, all);
}

/* The interval of a standard deviation, from the chi-square distribution: its ends lie unevenly, so
 * each side is decided with its own. */
static void settle_spread(struct limit_result *result, const struct series_stat *stat,
                          enum decision *all)
{
    double n = (double)stat->spread.n, share = stat->spread.sd / fabs(stat->spread.mean);
    result->decision = DECISION_OPEN;
    if (stat->spread.n >= 2) {
        double highest = share * sqrt((n - 1) / chi2_quantile(0.025, n - 1));
        double lowest = share * sqrt((n - 1) / chi2_quantile(0.975, n - 1));
        result->value = share;
        result->half_width = highest - share;
        if (highest <= result->range.high)
            result->decision = DECISION_INSIDE;
        else if (lowest > result->range.high)
            result->decision = DECISION_OUTSIDE;
    }
    result->more = result->decision == DECISION_OPEN ? -1 : 0;
    *all = decision_join(*all, result->decision);
}

static void decide_modes(const struct series *series, struct series_summary *summary)
{
    for (unsigned i = 0; i < series->part.mode_count; i++) {
        const struct part_mode *mode = &series->part.modes[i];
        for (unsigned q = 0; q < QUANTITY_COUNT; q++) {
            const struct series_stat *stat = &summary->modes[i].stats[q];
            if (mode->limits[q].has_low || mode->limits[q].has_high) {
                struct limit_result *result =
                    limit_of_value(summary->limits, &summary->limit_count, mode, (enum quantity)q);
                settle_mean(series, result, (enum quantity)q, stat->spread.n, stat->spread.mean,
                            at_least(stat->spread.sd, stat->within_u), &summary->decision);
            }
            if (mode->spread_max[q] > 0)
                settle_spread(
                    limit_of_spread(summary->limits, &summary->limit_count, mode, (enum quantity)q),
                    stat, &summary->decision);
        }
    }
}

/* Strike by strike: what both halves share (temperature, the clock) falls out of the difference. */
static void decide_split(const struct series *series, const struct part_split *split,
                         struct columns *columns, struct series_summary *summary)
{
    columns->n = 0;
    for (size_t i = 0; i < series->row_count; i++) {
        const struct cell *first = &series->rows[i].cells[split->first];
        const struct cell *second = &series->rows[i].cells[split->second];
        if (!counts(&series->rows[i]) || !(first->f_hz > 0) || !(second->f_hz > 0))
            continue;
        columns->us[columns->n] = hypot((double)first->f_u_hz, (double)second->f_u_hz);
        columns->values[columns->n++] = second->f_hz - first->f_hz;
    }
    struct sample_spread spread;
    sample_describe(columns->values, columns->n, &spread);
    struct limit_result *result =
        limit_of_split(summary->limits, &summary->limit_count, &series->part, split);
    settle_mean(series, result, QUANTITY_F_HZ, spread.n, spread.mean,
                at_least(spread.sd, root_mean_square(columns->us, columns->n)), &summary->decision);
}

static void count_strikes(struct series *series, struct series_count *count)
{
    *count = (struct series_count){.strikes = (unsigned)series->row_count,
                                   .forgotten = series->forgotten};
    for (size_t i = 0; i < series->row_count; i++) {
        struct row *row = &series->rows[i];
        row->is_odd = false;
        count->counted += counts(row);
        count->set_aside += row->is_set_aside;
        count->doubtful += !row->is_set_aside && row->verdict == VERDICT_DOUBTFUL;
        count->rejected += !row->is_set_aside && row->verdict == VERDICT_REJECTED;
    }
}

bool series_summarize(struct series *series, struct series_summary *out_summary, struct error *err)
{
    struct columns columns;
    if (!columns_create(&columns, series->row_count, err))
        return false;
    memset(out_summary, 0, sizeof *out_summary);
    out_summary->more = out_summary->more_without_odd = -1;
    count_strikes(series, &out_summary->count);
    out_summary->mode_count = series->tracks.count;
    for (unsigned t = 0; t < series->tracks.count; t++)
        describe_mode(series, t, &columns, out_summary);
    if (series->has_part) {
        decide_modes(series, out_summary);
        for (unsigned i = 0; i < series->part.split_count; i++)
            decide_split(series, &series->part.splits[i], &columns, out_summary);
    }
    columns_destroy(&columns);
    return true;
}

unsigned series_compare(const struct series_summary *first, const struct series_summary *second,
                        struct mode_difference *out_differences)
{
    unsigned count = 0;
    for (unsigned i = 0; i < first->mode_count; i++) {
        for (unsigned k = 0; k < second->mode_count; k++) {
            if (strcmp(first->modes[i].label, second->modes[k].label) != 0)
                continue;
            for (unsigned q = 0; q < QUANTITY_COUNT; q++) {
                struct mode_difference *out = &out_differences[count];
                if (!sample_compare(&first->modes[i].stats[q].spread,
                                    &second->modes[k].stats[q].spread, &out->difference))
                    continue;
                memcpy(out->label, first->modes[i].label, sizeof out->label);
                out->quantity = (enum quantity)q;
                out->is_more = out->difference.p < DIFFERENCE_P;
                count++;
            }
        }
    }
    return count;
}
