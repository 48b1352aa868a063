#include "cli/table.h"

#include <math.h>

void table_pad(struct text *text, size_t begin, size_t width)
{
    size_t shown = 0;
    for (size_t i = begin; i < text->length; i++)
        shown += ((unsigned char)text->data[i] & 0xC0U) != 0x80U;
    do {
        text_append(text, " ");
        shown++;
    } while (shown < width && !text->failed);
}

void table_text(struct text *text, const char *string, size_t width)
{
    size_t begin = text->length;
    for (const char *at = string; *at != '\0'; at++) {
        unsigned char byte = (unsigned char)*at;
        /* 0x80 ... 0x9F as UTF-8 (C2 80 ...) are control characters too. */
        bool is_control =
            byte < 0x20 || byte == 0x7F ||
            (byte == 0xC2 && (unsigned char)at[1] >= 0x80 && (unsigned char)at[1] < 0xA0);
        if (is_control && byte == 0xC2)
            at++;
        text_append_bytes(text, is_control ? "?" : at, 1);
    }
    table_pad(text, begin, width);
}

void table_end_line(struct text *text)
{
    while (text->length > 0 && text->data[text->length - 1] == ' ')
        text->length--;
    text_append(text, "\n");
}

void table_value(struct text *text, double value, double u, size_t width)
{
    size_t begin = text->length;
    if (!isfinite(value) || (isfinite(u) && u >= fabs(value))) {
        text_append(text, "-");
    } else {
        text_append_measured(text, value, u, 2);
        if (isfinite(u) && u > 0) {
            text_append(text, " ± ");
            text_append_measured(text, u, u, 2);
        }
    }
    table_pad(text, begin, width);
}
