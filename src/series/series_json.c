#include "series/store.h"

#include <math.h>
#include <stdio.h>

static void write_more(struct json_writer *json, const char *key, int more)
{
    if (more < 0)
        json_null(json, key);
    else
        json_integer(json, key, more);
}

static void write_line(struct json_writer *json, const struct line_fit *line, const char *slope,
                       const char *slope_u)
{
    json_measured(json, slope, line->slope, line->slope_u);
    json_number(json, slope_u, line->slope_u, 3);
}

static const char *limited_by(const struct series_stat *stat)
{
    if (!isfinite(stat->ratio))
        return NULL;
    return stat->ratio > 2 ? "tapping" : "noise";
}

static void write_stat(struct json_writer *json, enum quantity quantity,
                       const struct series_stat *stat)
{
    const struct sample_spread *spread = &stat->spread;
    double u = isfinite(spread->mean_u) ? spread->mean_u : stat->within_u;
    json_open_object(json, quantity_name(quantity));
    json_measured(json, "mean", spread->mean, u);
    json_number(json, "sd", spread->sd, 6);
    json_number(json, "half_width", spread->half_width, 6);
    json_measured(json, "median", stat->median, u);
    json_number(json, "within_u", stat->within_u, 6);
    json_number(json, "ratio", stat->ratio, 4);
    json_string(json, "limited_by", limited_by(stat));
    json_integer(json, "odd", stat->odd);
    json_number(json, "sd_without_odd", stat->sd_without_odd, 6);
    write_line(json, &stat->trend, "trend_per_strike", "trend_u");
    json_bool(json, "has_trend", stat->has_trend);
    write_line(json, &stat->force, "per_db", "per_db_u");
    json_bool(json, "has_force", stat->has_force);
    if (stat->wanted > 0)
        json_number(json, "wanted", stat->wanted / fabs(spread->mean), 4);
    else
        json_null(json, "wanted");
    write_more(json, "more", stat->more);
    json_close_object(json);
}

static void write_mode(struct json_writer *json, const struct series_mode *mode)
{
    json_open_object(json, NULL);
    json_string(json, "label", mode->label);
    json_integer(json, "n", mode->n);
    json_integer(json, "gaps", mode->gaps);
    json_bool(json, "rare", mode->is_rare);
    for (unsigned q = 0; q < QUANTITY_COUNT; q++)
        write_stat(json, (enum quantity)q, &mode->stats[q]);
    json_close_object(json);
}

void limits_write_json(struct json_writer *json, const char *key,
                       const struct limit_result *results, unsigned count)
{
    static const char *const short_names[QUANTITY_COUNT] = {"f", "decay", "q", "zeta", "t60"};
    json_open_array(json, key);
    for (unsigned i = 0; i < count; i++) {
        const struct limit_result *result = &results[i];
        char of[32];
        if (result->kind == LIMIT_SPREAD)
            snprintf(of, sizeof of, "spread_%s", short_names[result->quantity]);
        else
            snprintf(of, sizeof of, "%s",
                     result->kind == LIMIT_SPLIT ? "split_hz" : quantity_name(result->quantity));
        json_open_object(json, NULL);
        json_string(json, "label", result->label);
        json_string(json, "of", of);
        json_number(json, "low", result->range.has_low ? result->range.low : (double)NAN, 12);
        json_number(json, "high", result->range.has_high ? result->range.high : (double)NAN, 12);
        json_measured(json, "value", result->value, result->half_width);
        json_number(json, "half_width", result->half_width, 4);
        json_string(json, "decision", decision_name(result->decision));
        write_more(json, "more", result->more);
        json_close_object(json);
    }
    json_close_array(json);
}

void series_write_json(struct json_writer *json, const char *key, const struct series *series,
                       const struct series_summary *summary)
{
    const struct series_count *count = &summary->count;
    json_open_object(json, key);
    json_integer(json, "strikes", count->strikes);
    json_integer(json, "counted", count->counted);
    json_integer(json, "doubtful", count->doubtful);
    json_integer(json, "rejected", count->rejected);
    json_integer(json, "set_aside", count->set_aside);
    json_integer(json, "forgotten", count->forgotten);
    json_string(json, "lead", summary->mode_count > 0 ? summary->modes[0].label : NULL);
    write_more(json, "more", summary->more);
    write_more(json, "more_without_odd", summary->more_without_odd);
    json_bool(json, "more_is_over", summary->more >= SERIES_MORE_MAX);
    json_open_array(json, "odd");
    for (size_t i = 0; i < series->row_count; i++)
        if (series->rows[i].is_odd)
            json_integer(json, NULL, series->rows[i].id);
    json_close_array(json);
    json_string(json, "decision", decision_name(summary->decision));
    json_open_array(json, "modes");
    for (unsigned i = 0; i < summary->mode_count; i++)
        write_mode(json, &summary->modes[i]);
    json_close_array(json);
    limits_write_json(json, "limits", summary->limits, summary->limit_count);
    json_close_object(json);
}
