#include "wane/strike.h"

#include <stdlib.h>
#include <string.h>

void strike_destroy(struct strike *strike)
{
    if (strike == NULL)
        return;
    free(strike->samples);
    free(strike);
}

struct strike *strike_copy(const struct strike *strike)
{
    struct strike *copy = malloc(sizeof *copy);
    if (copy == NULL)
        return NULL;
    *copy = *strike;
    copy->samples = malloc((strike->frame_count + 1) * sizeof *copy->samples);
    if (copy->samples == NULL) {
        free(copy);
        return NULL;
    }
    if (strike->frame_count > 0)
        memcpy(copy->samples, strike->samples, strike->frame_count * sizeof *copy->samples);
    return copy;
}

const char *strike_end_name(enum strike_end end)
{
    static const char *const names[] = {
        [STRIKE_END_FADED] = "faded", [STRIKE_END_NEXT] = "next", [STRIKE_END_LIMIT] = "limit",
        [STRIKE_END_INPUT] = "input", [STRIKE_END_LOST] = "lost",
    };
    return names[end];
}
