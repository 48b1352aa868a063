/* What is heard besides the part: the room, hum, a cough. */
#ifndef SIM_NOISE_H
#define SIM_NOISE_H

#include "input/simulated.h"

/* Frames are made in chunks of this many, aligned to the start of the input. */
#define SIM_CHUNK 256

/* 1/f noise is a sum of first-order low-passes at corners two octaves apart. */
#define SIM_PINK_POLES 6

struct sim_room {
    uint64_t key;
    double white, pink; /* gains on the normal numbers */
    double wander_db;   /* the level moves by at most this much, over quarter minutes */
    double rate_hz;
    double poles[SIM_PINK_POLES], feeds[SIM_PINK_POLES], state[SIM_PINK_POLES];
};

void sim_room_init(struct sim_room *room, const struct sim_settings *settings, int channel);
/* Adds the chunk that begins at first_frame; chunks come in order. */
void sim_room_add(struct sim_room *room, uint64_t first_frame, double out[SIM_CHUNK]);

/* Adds what of the hum falls into the chunk: 50 Hz and its next two harmonics, swelling up and
 * fading within 0.8 s. */
void sim_hum_add(const struct sim_event *hum, double rate_hz, uint64_t first_frame,
                 double out[SIM_CHUNK]);

/* Noise through three resonances of a throat, two pushes. */
struct sim_cough {
    struct sim_event event;
    uint64_t key;
    double past[3][2];
};

void sim_cough_add(struct sim_cough *cough, double rate_hz, uint64_t first_frame,
                   double out[SIM_CHUNK]);

#endif
