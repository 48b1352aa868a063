/* A growing text, and a writer of JSON (RFC 8259) on top of it. No locale, no NaN. */
#ifndef WANE_TEXT_H
#define WANE_TEXT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* = {0} is a valid empty text. After memory ran out, `failed` stays set and further appends do
 * nothing: check once at the end. data is always NUL-terminated when not NULL. */
struct text {
    char *data;
    size_t length, capacity;
    bool failed;
};

void text_done(struct text *text);
void text_clear(struct text *text); /* keeps the memory */
void text_append(struct text *text, const char *string);
void text_append_bytes(struct text *text, const char *bytes, size_t count);
void text_appendf(struct text *text, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* libjansson exports functions of these three names; ours must not stand in for them. */
#define json_string  wane_json_string
#define json_integer wane_json_integer
#define json_null    wane_json_null

/* JSON. Objects and arrays nest up to 32 deep; commas are put by the writer. `key` NULL inside
 * arrays. = {.text = &text} is a valid start. */
struct json_writer {
    struct text *text;
    unsigned depth;
    bool has_item[33];
};

void json_open_object(struct json_writer *json, const char *key);
void json_close_object(struct json_writer *json);
void json_open_array(struct json_writer *json, const char *key);
void json_close_array(struct json_writer *json);
/* A string; bad UTF-8 becomes U+FFFD; NULL writes null. */
void json_string(struct json_writer *json, const char *key, const char *value);
void json_integer(struct json_writer *json, const char *key, int64_t value);
void json_bool(struct json_writer *json, const char *key, bool value);
void json_null(struct json_writer *json, const char *key);
/* A number with `digits` significant digits (1 ... 17), shortest form; null when not finite. */
void json_number(struct json_writer *json, const char *key, double value, int digits);
/* A value as far as its uncertainty makes digits worth printing: the last digit is at most u/100.
 * u not finite or <= 0: 12 significant digits. */
void json_measured(struct json_writer *json, const char *key, double value, double u);
/* Text that is JSON already. */
void json_raw(struct json_writer *json, const char *key, const char *json_text);

/* Locale-free number for tables: as json_measured, but `u_digits` digits of u and the value to the
 * same place. */
void text_append_measured(struct text *text, double value, double u, int u_digits);

/* Parses a decimal number with a point whatever the locale; the whole string must be used.
 * false for anything else, and for values that are not finite. */
bool text_parse_double(const char *string, double *out_value);

#endif
