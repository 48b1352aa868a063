#include "serve/exchange.h"
#include "wane/clock.h"

/* OpenMetrics 1.0 text: names with their unit, counters end in _total, the last line is # EOF. */
void api_get_metrics(struct exchange *exchange)
{
    struct server *server = exchange->server;
    struct text *body = &exchange->answer.body;
    text_appendf(body,
                 "# TYPE wane info\nwane_info{version=\"%s\"} 1\n"
                 "# TYPE wane_uptime_seconds gauge\n# UNIT wane_uptime_seconds seconds\n"
                 "wane_uptime_seconds %.3f\n"
                 "# TYPE wane_watchers gauge\nwane_watchers %u\n"
                 "# TYPE wane_http_requests counter\nwane_http_requests_total %llu\n"
                 "# TYPE wane_http_refused counter\nwane_http_refused_total %llu\n",
                 server->version, (double)(clock_monotonic_ns() - server->started_ns) / 1e9,
                 stream_hub_watchers(server->hub), (unsigned long long)server->requests,
                 (unsigned long long)server->refused);
    server->daemon.write_metrics(server->daemon.user, body);
    text_append(body, "# EOF\n");
    exchange->answer.status = 200;
    exchange->answer.content_type = "application/openmetrics-text; version=1.0.0; charset=utf-8";
    exchange->state = EXCHANGE_READY;
}
