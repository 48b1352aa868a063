/* Recordings of any kind, through the same door as `wane read` and the page use. */
#include "fuzz.h"

#include "wane/input.h"

#include <math.h>
#include <stdio.h>

static void read_all(struct input *input)
{
    struct input_block block;
    struct error err = {0};
    uint64_t frames = 0;
    int channels = input_get_info(input)->channels;
    PROMISE(channels >= 1 && channels <= INPUT_CHANNELS_MAX);
    while (frames < 4000000 && input_read(input, 0, &block, &err) && block.event != INPUT_ENDED) {
        if (block.event != INPUT_FRAMES)
            continue;
        for (size_t i = 0; i < block.frame_count * (size_t)channels; i++)
            PROMISE(isfinite(block.frames[i]));
        frames += block.frame_count;
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    if (size < 2)
        return 0;
    FILE *file = fopen("fuzz.wav", "wb");
    if (file == NULL)
        return 0;
    (void)fwrite(bytes + 1, 1, size - 1, file);
    (void)fclose(file);
    struct input_choice choice = {.name = "./fuzz.wav", .pace = INPUT_PACE_FAST};
    if (bytes[0] % 8 == 7) {
        choice.raw = (enum input_raw)(1 + bytes[0] / 8 % 4);
        choice.rate_hz = 48000;
        choice.channels = 1 + bytes[0] / 32;
    }
    struct error err = {0};
    struct input *input = input_open(&choice, &err);
    PROMISE(input != NULL || err.text[0] != '\0');
    if (input != NULL)
        read_all(input);
    input_close(input);
    return 0;
}
