/* Packed samples, strikes and readings of a log that somebody else may have written. */
#include "fuzz.h"

#include "log/pack.h"
#include "log/wave_pack.h"

#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    if (size < 4)
        return 0;
    struct error err = {0};
    size_t frame_count = (size_t)bytes[1] + 256u * bytes[2];
    float *samples = malloc((frame_count + 1) * sizeof *samples);
    struct reading reading;
    struct strike strike;
    switch (bytes[0] % 3) {
    case 0:
        if (samples != NULL)
            (void)wave_unpack(bytes + 4, size - 4, bytes[3] % 4, frame_count, samples, &err);
        break;
    case 1:
        if (unpack_reading(bytes + 4, size - 4, &reading, &err))
            PROMISE(reading.mode_count <= READING_MODES_MAX &&
                    reading.tone_count <= READING_TONES_MAX);
        break;
    default:
        if (unpack_strike(bytes + 4, size - 4, &strike, &err))
            PROMISE(strike.samples == NULL && strike.lost_count <= STRIKE_LOST_MAX &&
                    strike.carried_count <= STRIKE_CARRIED_MAX);
    }
    free(samples);
    return 0;
}
