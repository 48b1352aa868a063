#include "wane/json.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

/* Length of the valid UTF-8 character at `string`, 0 when it is none (RFC 3629, table 3-7 of the
 * Unicode standard). */
static size_t character_length(const unsigned char *string)
{
    unsigned char lead = string[0];
    size_t length = lead < 0x80                   ? 1
                    : lead >= 0xC2 && lead < 0xE0 ? 2
                    : (lead & 0xF0u) == 0xE0      ? 3
                    : lead >= 0xF0 && lead < 0xF5 ? 4
                                                  : 0;
    for (size_t i = 1; i < length; i++) {
        if ((string[i] & 0xC0u) != 0x80u)
            return 0;
    }
    if ((lead == 0xE0 && string[1] < 0xA0) || (lead == 0xED && string[1] > 0x9F) ||
        (lead == 0xF0 && string[1] < 0x90) || (lead == 0xF4 && string[1] > 0x8F))
        return 0;
    return length;
}

static void append_quoted(struct text *text, const char *value)
{
    const unsigned char *at = (const unsigned char *)value;
    text_append(text, "\"");
    while (*at != '\0') {
        size_t length = character_length(at);
        if (length == 0) {
            text_append(text, "\xEF\xBF\xBD");
            at++;
        } else if (length == 1 && (*at < 0x20 || *at == 0x7F)) {
            text_appendf(text, "\\u%04x", (unsigned)*at++);
        } else {
            if (*at == '"' || *at == '\\')
                text_append(text, "\\");
            text_append_bytes(text, (const char *)at, length);
            at += length;
        }
    }
    text_append(text, "\"");
}

static void begin_item(struct json_writer *json, const char *key)
{
    if (json->has_item[json->depth])
        text_append(json->text, ",");
    json->has_item[json->depth] = true;
    if (key != NULL) {
        append_quoted(json->text, key);
        text_append(json->text, ":");
    }
}

static void open_level(struct json_writer *json, const char *key, const char *bracket)
{
    begin_item(json, key);
    text_append(json->text, bracket);
    if (json->depth + 1 < sizeof json->has_item / sizeof json->has_item[0])
        json->depth++;
    else
        json->text->failed = true;
    json->has_item[json->depth] = false;
}

static void close_level(struct json_writer *json, const char *bracket)
{
    text_append(json->text, bracket);
    if (json->depth > 0)
        json->depth--;
}

void json_open_object(struct json_writer *json, const char *key)
{
    open_level(json, key, "{");
}

void json_close_object(struct json_writer *json)
{
    close_level(json, "}");
}

void json_open_array(struct json_writer *json, const char *key)
{
    open_level(json, key, "[");
}

void json_close_array(struct json_writer *json)
{
    close_level(json, "]");
}

void json_raw(struct json_writer *json, const char *key, const char *json_text)
{
    begin_item(json, key);
    text_append(json->text, json_text);
}

void json_string(struct json_writer *json, const char *key, const char *value)
{
    if (value == NULL) {
        json_null(json, key);
        return;
    }
    begin_item(json, key);
    append_quoted(json->text, value);
}

void json_integer(struct json_writer *json, const char *key, int64_t value)
{
    char number[24];
    snprintf(number, sizeof number, "%" PRId64, value);
    json_raw(json, key, number);
}

void json_bool(struct json_writer *json, const char *key, bool value)
{
    json_raw(json, key, value ? "true" : "false");
}

void json_null(struct json_writer *json, const char *key)
{
    json_raw(json, key, "null");
}
