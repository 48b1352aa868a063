#include "wane/error.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

/* A cut text must not end inside a UTF-8 character. */
static void trim_broken_character(char *text)
{
    size_t length = strlen(text);
    size_t tail = 0;
    while (tail < length && tail < 4 && ((unsigned char)text[length - 1 - tail] & 0xC0u) == 0x80u)
        tail++;
    if (tail >= length)
        return;
    unsigned char lead = (unsigned char)text[length - 1 - tail];
    size_t wanted = lead >= 0xF0u ? 3 : lead >= 0xE0u ? 2 : lead >= 0xC0u ? 1 : 0;
    if (tail < wanted)
        text[length - 1 - tail] = '\0';
}

bool(error_set)(struct error *err, enum error_kind kind, const char *format, ...)
{
    if (err == NULL)
        return false;
    char text[sizeof err->text];
    va_list arguments;
    va_start(arguments, format);
    int length = vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    if (length >= (int)sizeof text)
        trim_broken_character(text);
    err->kind = kind;
    memcpy(err->text, text, sizeof text);
    return false;
}

void error_prefix(struct error *err, const char *format, ...)
{
    if (err == NULL)
        return;
    char prefix[sizeof err->text];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(prefix, sizeof prefix, format, arguments);
    va_end(arguments);
    char whole[2 * sizeof err->text + 2];
    int length = snprintf(whole, sizeof whole, "%s: %s", prefix, err->text);
    whole[sizeof err->text - 1] = '\0';
    if (length >= (int)sizeof err->text)
        trim_broken_character(whole);
    memcpy(err->text, whole, sizeof err->text);
}

static const struct {
    int exit_status;
    unsigned http_status;
} statuses[] = {
    [ERROR_NONE] = {0, 200},      [ERROR_USAGE] = {2, 400},    [ERROR_DATA] = {1, 422},
    [ERROR_NOT_FOUND] = {1, 404}, [ERROR_CONFLICT] = {1, 412}, [ERROR_LIMIT] = {1, 413},
    [ERROR_DENIED] = {1, 403},    [ERROR_DEVICE] = {1, 503},   [ERROR_STORAGE] = {1, 503},
    [ERROR_MEMORY] = {1, 503},    [ERROR_INTERNAL] = {1, 500},
};

int error_exit_status(enum error_kind kind)
{
    return statuses[kind].exit_status;
}

unsigned error_http_status(enum error_kind kind)
{
    return statuses[kind].http_status;
}
