/* Settings files (INI): the daemon's own and part sheets. Read by libinih, with what it does not
 * do: every complaint has file and line, and all of them are collected; a line that it would cut or
 * join in silence is refused; a key that is given twice is said. Pure, any thread. */
#ifndef WANE_SETTINGS_H
#define WANE_SETTINGS_H

#include "wane/error.h"
#include "wane/text.h"

#include <stddef.h>

#define SETTINGS_LINE_MAX 198 /* bytes; what libinih reads in one piece */
#define SETTINGS_NAME_MAX 49  /* bytes of a section's or key's name */
#define SETTINGS_KEYS_MAX 1000

struct settings_entry {
    const char *section; /* "" before the first */
    const char *key, *value;
    int line;
};

/* Takes one entry, or refuses it with a sentence (without file and line, which are put before it).
 * The entry's texts live until it returns. */
typedef bool settings_take(void *user, const struct settings_entry *entry, struct error *err);

/* Reads text [size], calling `take` for every entry in order. Complaints, one a line, each
 * "FILE:LINE: SENTENCE", go to out_complaints (may be NULL). Fails (ERROR_USAGE) with the first of
 * them when there is any; entries that were in order have been taken all the same. */
bool settings_read(const char *file_name, const char *text, size_t size, settings_take *take,
                   void *user, struct text *out_complaints, struct error *err);

/* A sentence for a key that is not known: names the nearest of words [count], or all of them when
 * none is near. Always false. what: "key" or "section". */
bool settings_refuse_word(const char *what, const char *wrong, const char *const words[],
                          size_t count, struct error *err);

/* A number with a point, low ... high; refuses "0,5" with a hint. */
bool settings_number(const char *value, double low, double high, double *out_number,
                     struct error *err);

#endif
