#include "wane/part.h"

#include <math.h>

static const char *const names[QUANTITY_COUNT] = {
    [QUANTITY_F_HZ] = "f_hz",   [QUANTITY_DECAY_PER_S] = "decay_per_s",
    [QUANTITY_Q] = "q",         [QUANTITY_ZETA] = "zeta",
    [QUANTITY_T60_S] = "t60_s",
};

const char *quantity_name(enum quantity quantity)
{
    return names[quantity];
}

struct measured quantity_of_mode(const struct mode *mode, enum quantity quantity)
{
    switch (quantity) {
    case QUANTITY_F_HZ:
        return (struct measured){mode->f_hz, mode->f_u_hz};
    case QUANTITY_DECAY_PER_S:
        return (struct measured){mode->decay_per_s, mode->decay_u_per_s};
    case QUANTITY_Q:
        return (struct measured){mode->q, mode->q_u};
    case QUANTITY_ZETA:
        return (struct measured){mode->zeta, mode->zeta_u};
    case QUANTITY_T60_S:
        return (struct measured){mode->t60_s, mode->t60_u_s};
    case QUANTITY_COUNT:
        break;
    }
    return (struct measured){(double)NAN, (double)NAN};
}
