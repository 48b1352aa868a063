#include "inner.h"
#include "wane/json.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static void write_time(struct json_writer *json, const char *key, int64_t utc_ms)
{
    char text[CLOCK_TEXT_MAX];
    if (utc_ms <= 0) {
        json_null(json, key);
        return;
    }
    clock_format_utc(utc_ms, text, sizeof text);
    json_string(json, key, text);
}

static void write_channels(struct json_writer *json, unsigned bits)
{
    int first = 0;
    for (int channel = OPTIONS_CHANNELS_MAX; channel >= 1; channel--) {
        if (bits & (1u << (channel - 1)))
            first = channel;
    }
    if (first > 0)
        json_integer(json, "channel", first);
    else
        json_null(json, "channel");
    json_open_array(json, "channels_heard");
    for (int channel = 1; channel <= OPTIONS_CHANNELS_MAX; channel++) {
        if (bits & (1u << (channel - 1)))
            json_integer(json, NULL, channel);
    }
    json_close_array(json);
}

void view_write_input(struct json_writer *json, const char *key, const struct input_view *view)
{
    bool is_known = view->info.name[0] != '\0';
    json_open_object(json, key);
    json_string(json, "name", is_known ? view->info.name : NULL);
    json_string(json, "kind", is_known ? input_kind_name(view->info.kind) : "none");
    json_string(json, "state", input_state_name(view->is_open ? view->info.state : INPUT_NONE));
    json_bool(json, "ended", view->has_ended);
    json_number(json, "rate_hz", is_known ? view->info.rate_hz : (double)NAN, 12);
    json_integer(json, "channels", view->info.channels);
    write_channels(json, view->channels_heard);
    json_integer(json, "bits", view->info.bits);
    json_open_array(json, "warnings");
    for (unsigned i = 0; i < view->info.warning_count; i++)
        json_string(json, NULL, view->info.warnings[i]);
    json_close_array(json);
    write_time(json, "since", view->since_ms);
    write_time(json, "opened", view->opened_ms);
    json_string(json, "text", view->text[0] != '\0' ? view->text : NULL);
    json_integer(json, "lost_frames", (int64_t)view->info.lost_frames);
    json_close_object(json);
}

static void write_setting(struct json_writer *json, const char *key, double value)
{
    json_number(json, key, value > 0 ? value : (double)NAN, 9);
}

static void write_trigger(struct json_writer *json, const char *key,
                          const struct detect_settings *trigger)
{
    json_open_object(json, key);
    write_setting(json, "trigger_db", trigger->trigger_db);
    write_setting(json, "f_low_hz", trigger->f_low_hz);
    write_setting(json, "f_high_hz", trigger->f_high_hz);
    write_setting(json, "hold_off_s", trigger->hold_off_s);
    write_setting(json, "window_max_s", trigger->window_max_s);
    json_close_object(json);
}

/* FNV-1a, 64 bits (Fowler, Noll, Vo): the same settings give the same tag, also after a restart. */
static uint64_t hash_text(const char *text)
{
    uint64_t hash = UINT64_C(14695981039346656037);
    for (; *text != '\0'; text++)
        hash = (hash ^ (unsigned char)*text) * UINT64_C(1099511628211);
    return hash;
}

void view_write_trigger(void *user, struct text *out, char *out_etag, size_t out_etag_size)
{
    struct pipeline *pipeline = user;
    struct json_writer json = {.text = out};
    pthread_mutex_lock(&pipeline->mutex);
    struct detect_settings trigger = pipeline->trigger;
    pthread_mutex_unlock(&pipeline->mutex);
    write_trigger(&json, NULL, &trigger);
    snprintf(out_etag, out_etag_size, "\"%016llx\"",
             (unsigned long long)hash_text(out->data != NULL ? out->data : ""));
}

static void write_level_keys(struct json_writer *json, const struct detect_level *level,
                             int channel)
{
    json_integer(json, "channel", channel);
    json_number(json, "dbfs", round(level->dbfs * 100) / 100, 6);
    json_number(json, "noise_dbfs", round(level->noise_dbfs * 100) / 100, 6);
    json_number(json, "trigger_dbfs", round(level->trigger_dbfs * 100) / 100, 6);
    json_bool(json, "clipped", level->clipped);
    json_bool(json, "ringing", level->is_ringing);
}

/* The first channel's, and all of them when there are several. */
static void write_levels(struct json_writer *json, const struct detect_level *levels,
                         const int *channels, unsigned count)
{
    write_level_keys(json, &levels[0], channels[0]);
    if (count < 2)
        return;
    json_open_array(json, "channels");
    for (unsigned i = 0; i < count; i++) {
        json_open_object(json, NULL);
        write_level_keys(json, &levels[i], channels[i]);
        json_close_object(json);
    }
    json_close_array(json);
}

void view_write_level(struct text *out, const struct detect_level *levels, const int *channels,
                      unsigned count)
{
    static const char *const unknown[] = {"channel", "dbfs", "noise_dbfs", "trigger_dbfs"};
    struct json_writer json = {.text = out};
    json_open_object(&json, NULL);
    if (count > 0) {
        write_levels(&json, levels, channels, count);
    } else {
        for (size_t i = 0; i < sizeof unknown / sizeof unknown[0]; i++)
            json_null(&json, unknown[i]);
        json_bool(&json, "clipped", false);
        json_bool(&json, "ringing", false);
    }
    write_time(&json, "time", clock_utc_ms());
    json_close_object(&json);
}

static void write_log(struct json_writer *json, const struct pipeline *pipeline)
{
    json_open_object(json, "log");
    json_string(json, "token", pipeline->counts.token);
    json_string(json, "path", pipeline->log_path);
    json_integer(json, "newest", pipeline->counts.newest_id);
    json_integer(json, "revision", pipeline->counts.revision);
    json_integer(json, "strikes", pipeline->counts.strikes);
    json_integer(json, "bytes", pipeline->counts.bytes);
    json_integer(json, "free_bytes_on_disk", pipeline->counts.free_bytes_on_disk);
    json_string(json, "state", pipeline->is_log_full ? "full" : "keeping");
    json_string(json, "text", pipeline->log_text[0] != '\0' ? pipeline->log_text : NULL);
    json_integer(json, "unkept", (int64_t)pipeline->unkept);
    write_time(json, "unkept_since", pipeline->unkept_since_ms);
    json_integer(json, "unread", (int64_t)pipeline->spilled);
    json_close_object(json);
}

static void write_series(struct json_writer *json, int64_t id, const struct log_series *series)
{
    if (id == 0) {
        json_null(json, "series");
        return;
    }
    json_open_object(json, "series");
    json_integer(json, "id", id);
    json_string(json, "name", series->name);
    json_string(json, "input", series->input);
    json_string(json, "part", series->part[0] != '\0' ? series->part : NULL);
    json_string(json, "specimen", series->specimen[0] != '\0' ? series->specimen : NULL);
    json_close_object(json);
}

void view_write_state(void *user, struct json_writer *json)
{
    struct pipeline *pipeline = user;
    pthread_mutex_lock(&pipeline->mutex);
    view_write_input(json, "input", &pipeline->input);
    if (pipeline->level_count > 0) {
        json_open_object(json, "level");
        write_levels(json, pipeline->levels, pipeline->level_channels, pipeline->level_count);
        json_close_object(json);
    } else {
        json_null(json, "level");
    }
    write_trigger(json, "trigger", &pipeline->trigger);
    write_series(json, pipeline->series, &pipeline->series_now);
    write_log(json, pipeline);
    json_null(json, "clock_u_ppm");
    pthread_mutex_unlock(&pipeline->mutex);
}

void view_write_metrics(void *user, struct text *out)
{
    struct pipeline *pipeline = user;
    pthread_mutex_lock(&pipeline->mutex);
    text_appendf(out,
                 "# TYPE wane_strikes_heard counter\nwane_strikes_heard_total %llu\n"
                 "# TYPE wane_strikes_read counter\nwane_strikes_read_total %llu\n"
                 "# TYPE wane_strikes_unkept counter\nwane_strikes_unkept_total %llu\n"
                 "# TYPE wane_strikes_unread gauge\nwane_strikes_unread %llu\n"
                 "# TYPE wane_frames_lost counter\nwane_frames_lost_total %llu\n"
                 "# TYPE wane_input_listening gauge\nwane_input_listening %d\n"
                 "# TYPE wane_log_bytes gauge\n# UNIT wane_log_bytes bytes\nwane_log_bytes %lld\n"
                 "# TYPE wane_fit_seconds gauge\n# UNIT wane_fit_seconds seconds\n"
                 "wane_fit_seconds %.6f\n",
                 (unsigned long long)pipeline->strikes_heard,
                 (unsigned long long)pipeline->strikes_read, (unsigned long long)pipeline->unkept,
                 (unsigned long long)pipeline->spilled,
                 (unsigned long long)pipeline->input.info.lost_frames,
                 pipeline->input.is_open && pipeline->input.info.state == INPUT_LISTENING,
                 (long long)pipeline->counts.bytes, pipeline->last_fit_ms / 1e3);
    pthread_mutex_unlock(&pipeline->mutex);
}

int64_t view_onset_ms(const struct strike *strike, const struct reading *reading,
                      const struct origin *origin)
{
    if (!isfinite(reading->onset_frame))
        return origin->trigger_ms;
    double later_s = (reading->onset_frame - (double)strike->trigger) / strike->rate_hz;
    return origin->trigger_ms + (int64_t)llround(later_s * 1e3);
}

void view_write_strike(struct text *out, const struct strike *strike, const struct reading *reading,
                       const struct origin *origin, double rang_s)
{
    struct json_writer json = {.text = out};
    json_open_object(&json, NULL);
    json_null(&json, "id");
    if (isfinite(rang_s))
        json_number(&json, "rang_s", round(rang_s * 1e4) / 1e4, 9);
    write_time(&json, "time", view_onset_ms(strike, reading, origin));
    json_string(&json, "input", origin->input);
    json_string(&json, "source", origin->source[0] != '\0' ? origin->source : NULL);
    json_integer(&json, "strike", origin->strike_number);
    json_reading(&json, strike, reading);
    json_close_object(&json);
}
