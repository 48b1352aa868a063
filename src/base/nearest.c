#include "wane/nearest.h"

#include <string.h>

#define WORD_MAX 63

static size_t smaller(size_t a, size_t b)
{
    return a < b ? a : b;
}

/* One row of the distance table at a time; both words at most WORD_MAX long. */
static size_t edit_distance(const char *a, size_t a_length, const char *b, size_t b_length)
{
    size_t row[WORD_MAX + 1];
    for (size_t j = 0; j <= b_length; j++)
        row[j] = j;
    for (size_t i = 1; i <= a_length; i++) {
        size_t diagonal = row[0];
        row[0] = i;
        for (size_t j = 1; j <= b_length; j++) {
            size_t replaced = diagonal + (a[i - 1] != b[j - 1]);
            diagonal = row[j];
            row[j] = smaller(replaced, smaller(row[j], row[j - 1]) + 1);
        }
    }
    return row[b_length];
}

const char *nearest_word(const char *wrong, const char *const words[], size_t count)
{
    size_t length = strlen(wrong);
    const char *nearest = NULL;
    size_t best = length / 3 < 2 ? 3 : length / 3 + 1;
    if (length == 0 || length > WORD_MAX)
        return NULL;
    for (size_t i = 0; i < count; i++) {
        size_t word_length = strlen(words[i]);
        if (word_length > WORD_MAX)
            continue;
        size_t distance = edit_distance(wrong, length, words[i], word_length);
        /* A distance as large as the word itself is no likeness. */
        if (distance < best && distance < length) {
            best = distance;
            nearest = words[i];
        }
    }
    return nearest;
}
