/* The simulated bench as an input. */
#include "input/simulated.h"

#include "input/input_drivers.h"

#include <stdlib.h>

#define FAST_BLOCK_FRAMES 4096

struct simulated {
    struct sim_bench *bench;
    struct input_pacer pacer;
    size_t block_frames;
    uint64_t next_frame;
    float *frames; /* [block_frames x channels] */
};

void *simulated_open(const struct input_choice *choice, struct input_info *info, struct error *err)
{
    struct sim_settings settings;
    simulated_defaults(&settings);
    if (choice->seed > 0)
        settings.seed = choice->seed;
    if (choice->rate_hz > 0)
        settings.rate_hz = choice->rate_hz;
    if (choice->channels != 0)
        settings.channels = choice->channels;
    struct simulated *simulated = calloc(1, sizeof *simulated);
    struct sim_bench *bench = sim_bench_create(&settings, err);
    if (simulated == NULL || bench == NULL)
        goto fail;
    simulated->bench = bench;
    simulated->pacer = (struct input_pacer){.rate_hz = settings.rate_hz, .pace = choice->pace};
    simulated->block_frames = choice->pace == INPUT_PACE_LIVE
                                  ? input_live_block_frames(settings.rate_hz)
                                  : FAST_BLOCK_FRAMES;
    simulated->frames =
        calloc(simulated->block_frames * (size_t)settings.channels, sizeof *simulated->frames);
    if (simulated->frames == NULL)
        goto fail;
    info->state = INPUT_LISTENING;
    info->rate_hz = settings.rate_hz;
    info->channels = settings.channels;
    info->bits = 24; /* what a float holds */
    return simulated;
fail:
    if (bench != NULL)
        error_set(err, ERROR_MEMORY, "no memory for the simulated bench");
    sim_bench_destroy(bench);
    free(simulated);
    return NULL;
}

bool simulated_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err)
{
    struct simulated *simulated = state;
    uint64_t end_frame = simulated->next_frame + simulated->block_frames;
    (void)info;
    if (!input_pacer_wait(&simulated->pacer, end_frame, timeout_ms, &out_block->arrived_ns))
        return true;
    if (!sim_bench_render(simulated->bench, simulated->frames, simulated->block_frames, err))
        return false;
    simulated->next_frame = end_frame;
    out_block->event = INPUT_FRAMES;
    out_block->frames = simulated->frames;
    out_block->frame_count = simulated->block_frames;
    return true;
}

void simulated_close(void *state)
{
    struct simulated *simulated = state;
    if (simulated == NULL)
        return;
    sim_bench_destroy(simulated->bench);
    free(simulated->frames);
    free(simulated);
}
