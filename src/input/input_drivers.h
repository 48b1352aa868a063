/* What a driver of an input is, for input.c and the drivers only. */
#ifndef INPUT_DRIVERS_H
#define INPUT_DRIVERS_H

#include "wane/input.h"

#define INPUT_BLOCK_FRAMES_MAX 65536

/* A driver's open fills all of *info but lost_frames (it comes zeroed, with kind and name set from
 * the table and the choice) and returns its state, NULL with *err on failure. read and close work
 * on that state; read may change state, bits and warnings in *info and fills *out_block, which
 * comes zeroed: event INPUT_NOTHING, no frames. input.c counts lost_frames and fills
 * out_block->first_frame for every driver: frames and lost frames passed on so far. close takes
 * NULL. */
struct input_driver {
    enum input_kind kind;
    void *(*open)(const struct input_choice *choice, struct input_info *info, struct error *err);
    bool (*read)(void *state, int timeout_ms, struct input_info *info,
                 struct input_block *out_block, struct error *err);
    void (*close)(void *state);
};

/* src/input/simulated.c */
void *simulated_open(const struct input_choice *choice, struct input_info *info, struct error *err);
bool simulated_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err);
void simulated_close(void *state);

/* src/input/recording.c */
void *recording_open(const struct input_choice *choice, struct input_info *info, struct error *err);
bool recording_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err);
void recording_close(void *state);

/* src/input/soundcard.c */
void *soundcard_open(const struct input_choice *choice, struct input_info *info, struct error *err);
bool soundcard_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err);
void soundcard_close(void *state);

/* Adds one sentence to info->warnings, unless it stands there already or the list is full. */
void input_warn(struct input_info *info, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

/* Pace of an input that makes or reads its frames itself: frame n is due at start + n / rate.
 * = {0} is a valid start; the clock starts with the first call. */
struct input_pacer {
    int64_t start_ns;
    double rate_hz;
    enum input_pace pace;
};

/* Waits until the block that ends before frame `end_frame` (counted from the opening) is due, but
 * timeout_ms at most. true: it is due (always, at fast pace); *out_arrived_ns then is when. false:
 * the time was over first. When the reader has fallen behind by more than a second (a machine that
 * slept, a stopped program) the pacer starts anew instead of rushing. */
bool input_pacer_wait(struct input_pacer *pacer, uint64_t end_frame, int timeout_ms,
                      int64_t *out_arrived_ns);

/* Frames in a block at live pace: 10 ms, at least 1. */
size_t input_live_block_frames(double rate_hz);

#endif
