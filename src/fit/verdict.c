#include "fit/state.h"

#include <math.h>

void verdict_judge(struct fit *fit, struct reading *reading)
{
    if (fit->tone_count > 0)
        reading->remarks |= 1u << REMARK_HUM;
    if (reading->mode_count == 0)
        reading->reasons |= 1u << REASON_NOT_A_RING;
    reading->verdict = reading->reasons == 0 ? VERDICT_GOOD : VERDICT_REJECTED;
}
