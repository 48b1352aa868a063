#include "signal_check.h"

#include <math.h>

#define ENOUGH_S   2.0
#define FULL_SCALE 2147483648.0 /* 2^31 */
#define STEREO     2
#define FLOAT_BITS 24

void signal_check_init(struct signal_check *check, double rate_hz)
{
    *check = (struct signal_check){.enough = (uint64_t)(rate_hz * ENOUGH_S)};
}

static void look_at_step(struct signal_check *check, float sample)
{
    double scaled = (double)sample * FULL_SCALE;
    if (fabs(scaled) >= FULL_SCALE)
        return;
    int64_t whole = (int64_t)scaled;
    if ((double)whole != scaled)
        check->is_no_integer = true;
    check->steps |= (uint32_t)whole;
}

enum signal_finding signal_check_block(struct signal_check *check, const float *frames,
                                       size_t frame_count, size_t channels)
{
    if (check->sounding >= check->enough)
        return SIGNAL_UNDECIDED;
    for (size_t i = 0; i < frame_count; i++) {
        const float *frame = frames + i * channels;
        if (channels == STEREO && frame[0] != frame[1])
            check->channels_differ = true;
        if (frame[0] == 0.0F)
            continue;
        look_at_step(check, frame[0]);
        check->sounding++;
    }
    return check->sounding >= check->enough ? SIGNAL_DECIDED : SIGNAL_UNDECIDED;
}

unsigned signal_check_bits(const struct signal_check *check)
{
    if (check->is_no_integer || check->steps == 0)
        return 0;
    unsigned bits = 32;
    for (uint32_t steps = check->steps; (steps & 1u) == 0; steps >>= 1)
        bits--;
    return bits <= FLOAT_BITS ? bits : 0;
}
