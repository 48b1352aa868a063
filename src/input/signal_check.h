/* What a card's samples show of the card itself: how many bits are really used, and whether two
 * channels are one. Looks at the first seconds of sound, then rests. */
#ifndef SIGNAL_CHECK_H
#define SIGNAL_CHECK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct signal_check {
    uint64_t sounding; /* frames seen in which channel 1 is not zero */
    uint64_t enough;   /* of them */
    uint32_t steps;    /* all bits that any sample used, of 32 */
    bool is_no_integer;
    bool channels_differ;
};

enum signal_finding { SIGNAL_UNDECIDED, SIGNAL_DECIDED };

void signal_check_init(struct signal_check *check, double rate_hz);

/* frames [frame_count x channels]. DECIDED once, when enough has been heard. */
enum signal_finding signal_check_block(struct signal_check *check, const float *frames,
                                       size_t frame_count, size_t channels);

/* After DECIDED: 1 ... 24 (a float holds no more of an integer), 0 when the samples are no
 * integers. */
unsigned signal_check_bits(const struct signal_check *check);

#endif
