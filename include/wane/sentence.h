/* What a person is told about a strike: what was seen, a colon, what to change. One place for the
 * wording, for the shell, the log's exports and the page alike. */
#ifndef WANE_SENTENCE_H
#define WANE_SENTENCE_H

#include "wane/reading.h"
#include "wane/text.h"

/* What was struck decides the advice: nobody taps a tank. */
enum sentence_body { SENTENCE_STRUCK, SENTENCE_TANK };

/* Appends the sentence of the reading's first reason, with the numbers from reading->why (a clause
 * whose number is not known is left out), then the other reasons' words: "... Also: noisy." Appends
 * nothing for a good reading. UTF-8. rate_hz turns lost frames into time. Pure. */
void sentence_append(struct text *text, const struct reading *reading, double rate_hz,
                     enum sentence_body body);

#endif
