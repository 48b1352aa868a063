/* A folder of its own for a test, and recordings made on the spot. */
#ifndef WANE_TESTS_SCRATCH_H
#define WANE_TESTS_SCRATCH_H

#include <stddef.h>
#include <stdint.h>

struct scratch {
    char folder[256];
};

/* Makes the folder under TMPDIR (or /tmp); ends the program when it cannot. */
void scratch_make(struct scratch *scratch);

/* Removes the folder and all in it. */
void scratch_remove(const struct scratch *scratch);

/* folder/name, in out [512]. */
const char *scratch_path(const struct scratch *scratch, const char *name, char *out);

/* Writes bytes [count] to path, or ends the program. */
void scratch_write(const char *path, const void *bytes, size_t count);

/* Whole numbers that use all of `bits` bits, the same for the same seed, left-justified in 32 bits:
 * samples [count]. */
void scratch_samples(uint64_t seed, unsigned bits, int32_t *samples, size_t count);

/* A recording by libsndfile: `format` is its number, samples [frame_count x channels] 32-bit whole
 * numbers, left-justified. */
void scratch_record(const char *path, int format, int rate_hz, int channels, const int32_t *samples,
                    size_t frame_count);

/* The same from floats (for samples that are no numbers). */
void scratch_record_floats(const char *path, int format, int rate_hz, int channels,
                           const float *samples, size_t frame_count);

#endif
