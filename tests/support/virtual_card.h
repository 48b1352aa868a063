/* The tests' own sound card: tests/card/virtual-card, started and stopped from C. */
#ifndef WANE_TESTS_VIRTUAL_CARD_H
#define WANE_TESTS_VIRTUAL_CARD_H

#include <stdbool.h>
#include <sys/types.h>

#define VIRTUAL_CARD_NAME "testcard"

struct virtual_card {
    char folder[64];
};

/* Starts it and puts what programs need to see it into this process's environment. false, with a
 * line on stdout that begins "skipped:", where the packages are missing. Ends the program when the
 * card does not start. */
bool virtual_card_start(struct virtual_card *card, int rate_hz, int channels);
void virtual_card_stop(const struct virtual_card *card);

/* Begins to play a recording; returns the player's pid, for waitpid. */
pid_t virtual_card_play(const struct virtual_card *card, const char *path);

/* how: "remove" "kill" "suspend" "freeze"; see the script. Both return when it is done. */
void virtual_card_unplug(const struct virtual_card *card, const char *how);
void virtual_card_replug(const struct virtual_card *card);

#endif
