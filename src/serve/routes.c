#include "serve/exchange.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define API "/api/v1"

/* Every call there is. The page's own files are found by assets_has. */
static const struct route routes[] = {
    {"/healthz", api_get_healthz, METHOD_GET, BODY_EMPTY},
    {"/join", api_get_join, METHOD_GET, BODY_EMPTY},
    {"/metrics", api_get_metrics, METHOD_GET, BODY_EMPTY},
    {API "/state", api_get_state, METHOD_GET, BODY_EMPTY},
    {API "/stream", api_get_stream, METHOD_GET, BODY_EMPTY},
    {API "/strikes", api_list_strikes, METHOD_GET, BODY_EMPTY},
    {API "/strikes/ID", api_get_strike, METHOD_GET, BODY_EMPTY},
    {API "/strikes/ID", api_patch_strike, METHOD_PATCH, BODY_JSON},
    {API "/strikes/ID/wave", api_get_wave, METHOD_GET, BODY_EMPTY},
    {API "/strikes/ID/plot", api_get_plot, METHOD_GET, BODY_EMPTY},
    {API "/strikes/ID/reread", api_reread_strike, METHOD_POST, BODY_JSON},
    {API "/series", api_list_series, METHOD_GET, BODY_EMPTY},
    {API "/series", api_open_series, METHOD_POST, BODY_JSON},
    {API "/series/ID", api_get_series, METHOD_GET, BODY_EMPTY},
    {API "/series/ID/report", api_get_series_report, METHOD_GET, BODY_EMPTY},
    {API "/strikes/ID/report", api_get_strike_report, METHOD_GET, BODY_EMPTY},
    {API "/series/ID", api_patch_series, METHOD_PATCH, BODY_JSON},
    {API "/parts", api_list_parts, METHOD_GET, BODY_EMPTY},
    {API "/parts/NAME", api_get_part, METHOD_GET, BODY_EMPTY},
    {API "/parts/NAME", api_put_part, METHOD_PUT, BODY_JSON},
    {API "/inputs", api_list_inputs, METHOD_GET, BODY_EMPTY},
    {API "/input", api_put_input, METHOD_PUT, BODY_JSON},
    {API "/trigger", api_get_trigger, METHOD_GET, BODY_EMPTY},
    {API "/trigger", api_put_trigger, METHOD_PUT, BODY_JSON},
    {API "/recordings", api_read_recording, METHOD_POST, BODY_FILE},
    {API "/recent.wav", api_get_recent, METHOD_GET, BODY_EMPTY},
    {API "/measurements", api_add_measurement, METHOD_POST, BODY_JSON},
    {API "/export.csv", api_export_csv, METHOD_GET, BODY_EMPTY},
    {API "/export.json", api_export_json, METHOD_GET, BODY_EMPTY},
};

static const struct route asset_route = {"/", api_get_asset, METHOD_GET, BODY_EMPTY};

static bool parse_id(const char *text, size_t length, int64_t *out_id)
{
    if (length < 1 || length > 15 || text[0] == '0' || strspn(text, "0123456789") < length)
        return false;
    *out_id = strtoll(text, NULL, 10);
    return true;
}

/* What a path is to a route's pattern: no match, a match, or a match but for its id. */
enum match { MATCH_NO, MATCH_YES, MATCH_BAD_ID };

static enum match match_path(const char *pattern, const char *path, int64_t *out_id, char *out_name)
{
    enum match match = MATCH_YES;
    while (*pattern != '\0' && *path != '\0') {
        size_t length = strcspn(path, "/");
        if (strncmp(pattern, "ID", 2) == 0) {
            if (!parse_id(path, length, out_id))
                match = MATCH_BAD_ID;
            pattern += 2;
            path += length;
        } else if (strncmp(pattern, "NAME", 4) == 0) {
            if (length == 0 || length > SERVE_NAME_MAX)
                return MATCH_NO;
            memcpy(out_name, path, length);
            out_name[length] = '\0';
            pattern += 4;
            path += length;
        } else if (*pattern++ != *path++) {
            return MATCH_NO;
        }
    }
    return *pattern == '\0' && *path == '\0' ? match : MATCH_NO;
}

static void list_methods(unsigned methods, char *out, size_t out_size)
{
    static const struct {
        unsigned bit;
        const char *name;
    } names[] = {{METHOD_GET, "GET, HEAD"},
                 {METHOD_POST, "POST"},
                 {METHOD_PUT, "PUT"},
                 {METHOD_PATCH, "PATCH"}};
    struct text list = {0};
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        if (methods & names[i].bit)
            text_appendf(&list, "%s%s", list.length > 0 ? ", " : "", names[i].name);
    }
    snprintf(out, out_size, "%s", list.data != NULL ? list.data : "");
    text_done(&list);
}

const struct route *route_find(struct exchange *exchange, unsigned method)
{
    unsigned allowed = 0;
    bool has_bad_id = false;
    for (size_t i = 0; i < sizeof routes / sizeof routes[0]; i++) {
        enum match match =
            match_path(routes[i].path, exchange->path, &exchange->id, exchange->name);
        if (match == MATCH_NO)
            continue;
        has_bad_id |= match == MATCH_BAD_ID;
        allowed |= routes[i].method;
        if (match == MATCH_YES && routes[i].method == method)
            return &routes[i];
    }
    if (allowed == 0 && assets_has(exchange->server->assets, exchange->path)) {
        if (method == METHOD_GET)
            return &asset_route;
        allowed = METHOD_GET;
    }
    if (has_bad_id) {
        answer_problem(exchange, 404, "an id is a whole number from 1 up, without leading zeros");
    } else if (allowed != 0) {
        char methods[64];
        list_methods(allowed, methods, sizeof methods);
        answer_header(exchange, "Allow", "%s", methods);
        answer_problem(exchange, 405, "this address takes %s", methods);
    } else {
        answer_problem(exchange, 404, "there is nothing at %.200s", exchange->path);
    }
    return NULL;
}
