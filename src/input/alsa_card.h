/* What ALSA says of a hardware card beyond PortAudio. Capture process only. */
#ifndef ALSA_CARD_H
#define ALSA_CARD_H

#include <stdbool.h>
#include <stddef.h>

/* The card's id, a short word that stays when cards change places. false: no such card. */
bool alsa_card_id(int card, char *out_id, size_t out_size);

/* Whether a switch named like an automatic gain control is on; its name then. Many USB microphones
 * have one, on by default, filed where mixers do not show it. */
bool alsa_card_gain_control(int card, char *out_name, size_t out_size);

/* Which process holds a capture device: "arecord, process 1234". false: none, or not to be seen.
 * root: "" in life; another folder in tests. */
bool alsa_card_holder(const char *root, int card, int device, char *out_holder, size_t out_size);

/* The next hardware capture device after (*card, *device); start with -1, -1. */
bool alsa_card_next_capture(int *card, int *device);

#endif
