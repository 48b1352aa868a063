#include "wane/text.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static bool reserve(struct text *text, size_t more)
{
    if (text->failed)
        return false;
    size_t wanted = text->length + more + 1;
    if (wanted <= text->capacity)
        return true;
    size_t capacity = text->capacity < 256 ? 256 : text->capacity;
    while (capacity < wanted)
        capacity *= 2;
    char *data = realloc(text->data, capacity);
    if (data == NULL) {
        text->failed = true;
        return false;
    }
    text->data = data;
    text->capacity = capacity;
    return true;
}

void text_done(struct text *text)
{
    free(text->data);
    *text = (struct text){0};
}

void text_clear(struct text *text)
{
    text->length = 0;
    text->failed = false;
    if (text->data != NULL)
        text->data[0] = '\0';
}

void text_append_bytes(struct text *text, const char *bytes, size_t count)
{
    if (!reserve(text, count))
        return;
    memcpy(text->data + text->length, bytes, count);
    text->length += count;
    text->data[text->length] = '\0';
}

void text_append(struct text *text, const char *string)
{
    text_append_bytes(text, string, strlen(string));
}

void text_appendf(struct text *text, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    int length = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    if (length < 0 || !reserve(text, (size_t)length))
        return;
    va_start(arguments, format);
    vsnprintf(text->data + text->length, (size_t)length + 1, format, arguments);
    va_end(arguments);
    text->length += (size_t)length;
}

/* The program never calls setlocale, so printf and strtod use the C locale's point; a library that
 * did would be caught by the test `numbers_have_a_point`. */
static void format_significant(char *out, size_t out_size, double value, int digits)
{
    snprintf(out, out_size, "%.*g", digits, value);
}

/* Exponent of the decimal place that a value's digits end at: 10^place <= u/100, or with
 * `u_digits` digits of u to that place. */
static int place_of(double u, int u_digits)
{
    return (int)floor(log10(u)) - (u_digits - 1);
}

void json_number(struct json_writer *json, const char *key, double value, int digits)
{
    char number[40];
    if (!isfinite(value)) {
        json_null(json, key);
        return;
    }
    format_significant(number, sizeof number, value == 0 ? 0 : value, digits);
    json_raw(json, key, number);
}

void json_measured(struct json_writer *json, const char *key, double value, double u)
{
    int digits = 12;
    if (isfinite(u) && u > 0 && isfinite(value) && value != 0) {
        digits = (int)floor(log10(fabs(value))) - place_of(u, 3) + 1;
        digits = digits < 3 ? 3 : digits > 15 ? 15 : digits;
    }
    json_number(json, key, value, digits);
}

void text_append_measured(struct text *text, double value, double u, int u_digits)
{
    if (!isfinite(value)) {
        text_append(text, "-");
        return;
    }
    if (!isfinite(u) || u <= 0) {
        text_appendf(text, "%.6g", value);
        return;
    }
    int place = place_of(u, u_digits);
    if (place >= 0) {
        double unit = pow(10.0, place);
        text_appendf(text, "%.0f", floor(value / unit + 0.5) * unit);
    } else {
        text_appendf(text, "%.*f", place < -15 ? 15 : -place, value);
    }
}

bool text_parse_double(const char *string, double *out_value)
{
    if (strspn(string, "+-.0123456789eE") != strlen(string) || string[0] == '\0')
        return false;
    char *end = NULL;
    double value = strtod(string, &end);
    if (*end != '\0' || end == string || !isfinite(value))
        return false;
    *out_value = value;
    return true;
}
