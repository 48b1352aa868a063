/* "Did you mean": the known word that is nearest to a wrong one. */
#ifndef WANE_NEAREST_H
#define WANE_NEAREST_H

#include <stddef.h>

/* The word of words [count] with the smallest edit distance (Levenshtein 1966: insert, delete,
 * replace) to `wrong`, or NULL when none comes near (more than a third of its letters, at least
 * two, would have to change). Words over 63 bytes are never near. Pure. */
const char *nearest_word(const char *wrong, const char *const words[], size_t count);

#endif
