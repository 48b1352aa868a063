/* The open series: labels and decisions of its strikes, statistics, odd ones, steps and drifts. */
#include "keeper.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static bool update(struct keeper *keeper, int64_t series, struct error *err)
{
    return tally_update(&keeper->tally, keeper->reader, &keeper->pipeline->shelf, series, err);
}

/* --- what is stored --- */

void keeper_label_batch(struct keeper *keeper, size_t count)
{
    struct error err;
    pthread_mutex_lock(&keeper->pipeline->mutex);
    int64_t series = keeper->pipeline->series;
    pthread_mutex_unlock(&keeper->pipeline->mutex);
    keeper->judge = NULL;
    if (series == 0 || !update(keeper, series, &err))
        return;
    struct tracks tracks = *series_tracks(keeper->tally.series);
    for (size_t i = 0; i < count; i++) {
        struct reading *reading = &keeper->batch[i]->reading;
        tracks_label(&tracks, reading, reading->verdict == VERDICT_GOOD);
    }
    keeper->judge = keeper->tally.has_part ? &keeper->tally.part : NULL;
}

void keeper_label_reading(struct keeper *keeper, int64_t series, struct reading *reading)
{
    struct error err;
    keeper->judge = NULL;
    if (series == 0 || !update(keeper, series, &err))
        return;
    struct tracks tracks = *series_tracks(keeper->tally.series);
    tracks_label(&tracks, reading, false);
    keeper->judge = keeper->tally.has_part ? &keeper->tally.part : NULL;
}

void keeper_write_judgement(void *user, struct json_writer *json, const struct reading *reading)
{
    struct keeper *keeper = user;
    enum decision all = DECISION_NONE;
    if (keeper->judge == NULL)
        return;
    struct limit_result *limits = calloc(LIMITS_MAX, sizeof *limits);
    if (limits == NULL)
        return;
    unsigned count = part_decide(keeper->judge, reading, keeper->tally.clock_u_ppm, limits, &all);
    json_string(json, "decision", decision_name(all));
    limits_write_json(json, "limits", limits, count);
    free(limits);
}

/* --- what is told --- */

static void publish_changed(struct keeper *keeper, int64_t id)
{
    struct text text = {0};
    struct error err;
    if (log_read_strike_json(keeper->reader, id, &text, NULL, &err) && !text.failed)
        serve_publish(keeper->pipeline->server, "changed", text.data);
    text_done(&text);
}

static bool holds(const int64_t *ids, unsigned count, int64_t id)
{
    for (unsigned i = 0; i < count; i++) {
        if (ids[i] == id)
            return true;
    }
    return false;
}

static bool change_odd(struct keeper *keeper, int64_t id, bool is_odd)
{
    struct error err;
    const struct log_change change = {.odd = is_odd ? LOG_SET : LOG_CLEAR};
    if (!log_change_strike(keeper->writer, id, &change, NULL, &err))
        return false;
    publish_changed(keeper, id);
    return true;
}

/* The log's marks become those of the statistics. A mark that cannot be stored now is tried again
 * with the next strike. */
static void mark_odd(struct keeper *keeper)
{
    const struct tally *tally = &keeper->tally;
    int64_t now[TALLY_ODD_MAX], before[TALLY_ODD_MAX];
    unsigned now_count = series_odd_ids(tally->series, now, TALLY_ODD_MAX);
    unsigned before_count = tally->odd_in_log_count;
    memcpy(before, tally->odd_in_log, sizeof before);
    bool is_changed = false;
    for (unsigned i = 0; i < now_count; i++)
        is_changed |= !holds(before, before_count, now[i]) && change_odd(keeper, now[i], true);
    for (unsigned i = 0; i < before_count; i++)
        is_changed |= !holds(now, now_count, before[i]) && change_odd(keeper, before[i], false);
    if (is_changed)
        keeper_refresh_counts(keeper);
}

static void tell_notice(struct keeper *keeper, const struct tally_notice *told)
{
    struct text change = {0};
    struct error err;
    char sentence[300];
    const struct watch_notice *notice = &told->notice;
    bool is_f = told->quantity == QUANTITY_F_HZ;
    const char *label = series_tracks(keeper->tally.series)->tracks[0].label;
    text_append_measured(&change, notice->change, notice->change_u, 2);
    if (notice->event == WATCH_STEP)
        snprintf(
            sentence, sizeof sentence,
            "Series %lld: %s of mode %s stepped by %s%.60s%s from %.7g%s; it began with strike "
            "%lld",
            (long long)keeper->tally.id, is_f ? "f" : "Q", label, notice->change > 0 ? "+" : "",
            change.data != NULL ? change.data : "", is_f ? " Hz" : "", notice->before,
            is_f ? " Hz" : "", (long long)notice->from_id);
    else
        snprintf(sentence, sizeof sentence,
                 "Series %lld: %s of mode %s drifts by %s%.60s%s a day, since strike %lld",
                 (long long)keeper->tally.id, is_f ? "f" : "Q", label,
                 notice->change > 0 ? "+" : "", change.data != NULL ? change.data : "",
                 is_f ? " Hz" : "", (long long)notice->from_id);
    text_done(&change);
    keeper_notice(keeper, notice->event == WATCH_STEP ? "step" : "drift", sentence, &err);
}

void keeper_notice(struct keeper *keeper, const char *kind, const char *sentence, struct error *err)
{
    (void)log_notice(keeper->writer, clock_utc_ms(), kind, sentence, err);
    pipeline_tell(keeper->pipeline, kind, "%s", sentence);
}

#define DISK_LOW_BYTES  INT64_C(200000000)
#define DISK_FINE_BYTES INT64_C(400000000)
#define NS_PER_MINUTE   (60e9)

static void look_at_disk(struct keeper *keeper, int64_t free_bytes)
{
    struct error err;
    char sentence[200];
    if (free_bytes >= DISK_FINE_BYTES)
        keeper->is_disk_told = false;
    if (keeper->is_disk_told || free_bytes >= DISK_LOW_BYTES || free_bytes <= 0)
        return;
    keeper->is_disk_told = true;
    snprintf(sentence, sizeof sentence,
             "The disk of the log is nearly full, %lld MB are left: make room, or set [log] "
             "megabytes_max",
             (long long)(free_bytes / 1000000));
    keeper_notice(keeper, "log-nearly-full", sentence, &err);
}

void keeper_look_around(struct keeper *keeper)
{
    struct pipeline *pipeline = keeper->pipeline;
    struct error err;
    char sentence[200];
    double limit = pipeline->options.silent_minutes;
    pthread_mutex_lock(&pipeline->mutex);
    bool is_listening = pipeline->input.is_open && pipeline->input.info.state == INPUT_LISTENING;
    int64_t free_bytes = pipeline->counts.free_bytes_on_disk;
    pthread_mutex_unlock(&pipeline->mutex);
    look_at_disk(keeper, free_bytes);
    double minutes = (double)(clock_monotonic_ns() - keeper->strike_ns) / NS_PER_MINUTE;
    if (limit <= 0 || !is_listening || keeper->is_silence_told || keeper->strike_ns == 0 ||
        minutes < limit)
        return;
    keeper->is_silence_told = true;
    snprintf(sentence, sizeof sentence,
             "No strike for %.3g minutes: look at the input's level, the trigger and the line",
             minutes);
    keeper_notice(keeper, "silent", sentence, &err);
}

bool keeper_read_series(struct keeper *keeper, int64_t id, struct text *out, struct error *err)
{
    return update(keeper, id, err) && tally_read_json(&keeper->tally, keeper->reader, out, err);
}

void keeper_tell_series(struct keeper *keeper, int64_t series)
{
    struct text text = {0};
    struct error err;
    /* Steps of the past are known: only those that this tally saw coming are news. */
    bool is_followed = keeper->tally.id == series;
    if (series == 0 || !update(keeper, series, &err))
        return;
    unsigned notices = is_followed ? keeper->tally.notice_count : 0;
    mark_odd(keeper);
    if (tally_read_json(&keeper->tally, keeper->reader, &text, &err) && !text.failed)
        serve_publish(keeper->pipeline->server, "series", text.data);
    text_done(&text);
    for (unsigned i = 0; i < notices; i++)
        tell_notice(keeper, &keeper->tally.notices[i]);
}
