#include "serve/exchange.h"
#include "wane/clock.h"

static const char *const no_words[] = {NULL};

void api_get_healthz(struct exchange *exchange)
{
    text_append(&exchange->answer.body, "ok\n");
    exchange->answer.status = 200;
    exchange->answer.content_type = "text/plain; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}

void api_get_state(struct exchange *exchange)
{
    struct server *server = exchange->server;
    if (!query_check(exchange, no_words))
        return;
    char now[CLOCK_TEXT_MAX];
    clock_format_utc(clock_utc_ms(), now, sizeof now);
    struct json_writer json = {.text = &exchange->answer.body};
    json_open_object(&json, NULL);
    json_string(&json, "version", server->version);
    json_string(&json, "time", now);
    json_number(&json, "uptime_s", (double)(clock_monotonic_ns() - server->started_ns) / 1e9, 9);
    json_integer(&json, "watchers", stream_hub_watchers(server->hub));
    json_integer(&json, "watchers_max", server->settings.watchers_max);
    server->daemon.write_state(server->daemon.user, &json);
    json_bool(&json, "can_change", exchange->can_change);
    json_close_object(&json);
    answer_json(exchange, 200);
}

void api_get_trigger(struct exchange *exchange)
{
    char etag[64];
    if (!query_check(exchange, no_words))
        return;
    exchange->server->daemon.write_trigger(exchange->server->daemon.user, &exchange->answer.body,
                                           etag, sizeof etag);
    answer_header(exchange, "ETag", "%s", etag);
    answer_json(exchange, 200);
}

void api_put_trigger(struct exchange *exchange)
{
    static const char *const keys[] = {"trigger_db", "f_low_hz",     "f_high_hz",
                                       "hold_off_s", "window_max_s", NULL};
    struct detect_settings *trigger = &exchange->job.trigger;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_number(exchange, "trigger_db", 6, 60, &trigger->trigger_db) ||
        !body_number(exchange, "f_low_hz", 1, 400e3, &trigger->f_low_hz) ||
        !body_number(exchange, "f_high_hz", 1, 400e3, &trigger->f_high_hz) ||
        !body_number(exchange, "hold_off_s", 0, 60, &trigger->hold_off_s) ||
        !body_number(exchange, "window_max_s", 0.05, 600, &trigger->window_max_s))
        return;
    if (exchange->if_match[0] == '\0') {
        answer_problem(exchange, 428,
                       "send If-Match with the ETag of GET /api/v1/trigger, so that "
                       "nobody's change is lost");
        return;
    }
    exchange->job.if_match = exchange->if_match;
    exchange_submit(exchange, SERVE_PUT_TRIGGER);
}

void api_list_inputs(struct exchange *exchange)
{
    if (query_check(exchange, no_words))
        exchange_submit(exchange, SERVE_LIST_INPUTS);
}

void api_put_input(struct exchange *exchange)
{
    static const char *const keys[] = {"name", "rate_hz", "channel", "channels_heard", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    double channel = 0;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "name", SERVE_NAME_MAX, &is_there, &job->name) ||
        !body_number(exchange, "rate_hz", 1000, 768000, &job->rate_hz) ||
        !body_number(exchange, "channel", 1, 32, &channel) ||
        !body_channels(exchange, "channels_heard", &job->channels_heard))
        return;
    if (job->name == NULL || job->name[0] == '\0') {
        answer_problem(exchange, 400, "name: wanted; GET /api/v1/inputs lists them");
        return;
    }
    if (channel >= 1 && job->channels_heard == 0)
        job->channels_heard = 1u << ((unsigned)channel - 1);
    exchange_submit(exchange, SERVE_PUT_INPUT);
}

void api_get_recent(struct exchange *exchange)
{
    static const char *const words[] = {"seconds", NULL};
    exchange->job.seconds = 60;
    if (!query_check(exchange, words) || !query_number(exchange, "seconds", &exchange->job.seconds))
        return;
    if (!(exchange->job.seconds > 0 && exchange->job.seconds <= 60)) {
        answer_problem(exchange, 400, "seconds: must be over 0 and at most 60");
        return;
    }
    answer_header(exchange, "Content-Disposition", "attachment; filename=\"recent.wav\"");
    exchange_submit(exchange, SERVE_RECENT);
}

void api_read_recording(struct exchange *exchange)
{
    static const char *const words[] = {"channel", "name", NULL};
    struct serve_job *job = &exchange->job;
    int64_t channel = 1;
    if (!query_check(exchange, words))
        return;
    const char *channel_word = query_text(exchange, "channel");
    if (channel_word != NULL && channel_word[0] == 'a' && channel_word[1] == 'l' &&
        channel_word[2] == 'l' && channel_word[3] == '\0')
        channel = 0;
    else if (!query_integer(exchange, "channel", 1, 64, &channel))
        return;
    if (exchange->body_fd < 0) {
        answer_problem(exchange, 422, "the recording is empty");
        return;
    }
    job->channel = (int)channel;
    job->name = query_text(exchange, "name");
    job->recording_fd = exchange->body_fd;
    exchange_submit(exchange, SERVE_READ_RECORDING);
}

void api_add_measurement(struct exchange *exchange)
{
    static const char *const keys[] = {"name", "value", "unit", NULL};
    struct serve_job *job = &exchange->job;
    bool is_there = false;
    if (!query_check(exchange, no_words) || !body_check(exchange, keys) ||
        !body_text(exchange, "name", SERVE_NAME_MAX, &is_there, &job->name) ||
        !body_text(exchange, "unit", 32, &is_there, &job->unit) ||
        !body_number(exchange, "value", -1e300, 1e300, &job->value))
        return;
    if (job->name == NULL || job->name[0] == '\0' || !body_has(exchange, "value")) {
        answer_problem(exchange, 400,
                       "name and value are wanted, as in "
                       "{\"name\":\"temperature\",\"value\":21.5,\"unit\":\"C\"}");
        return;
    }
    exchange_submit(exchange, SERVE_ADD_MEASUREMENT);
}
