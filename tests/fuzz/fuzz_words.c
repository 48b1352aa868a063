/* Selection words, times and numbers, as they come in query strings: "word=value&word=value". */
#include "fuzz.h"

#include "wane/clock.h"
#include "wane/log.h"
#include "wane/text.h"

#include <math.h>
#include <string.h>

static void try_pair(struct log_selection *selection, char *pair)
{
    struct error err = {0};
    char *value = strchr(pair, '=');
    if (value == NULL)
        return;
    *value++ = '\0';
    struct log_selection before = *selection;
    if (!log_selection_set(selection, pair, value, &err)) {
        PROMISE(err.text[0] != '\0');
        PROMISE(memcmp(&before, selection, sizeof before) == 0);
    }
    int64_t time_ms, again;
    if (clock_parse_utc(value, &time_ms)) {
        char text[CLOCK_TEXT_MAX];
        clock_format_utc(time_ms, text, sizeof text);
        PROMISE(clock_parse_utc(text, &again));
    }
    double number;
    if (text_parse_double(value, &number))
        PROMISE(isfinite(number));
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    char *text = malloc(size + 1);
    if (text == NULL)
        return 0;
    memcpy(text, bytes, size);
    text[size] = '\0';
    struct log_selection selection;
    memset(&selection, 0, sizeof selection);
    for (char *pair = text; pair != NULL;) {
        char *next = strchr(pair, '&');
        if (next != NULL)
            *next++ = '\0';
        try_pair(&selection, pair);
        pair = next;
    }
    free(text);
    return 0;
}
