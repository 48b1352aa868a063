/* A lock-free ring of sample blocks: one writer, one reader, in the caller's memory, which two
 * processes may share. Neither side ever waits, allocates or calls the system.
 *
 * Invariants:
 *  (1) only the writer moves `head`, only the reader moves `tail`; both only grow;
 *  (2) head - tail <= capacity; bytes [tail, head) are whole blocks, each a header and its samples;
 *  (3) a full ring refuses the new block; nothing that was written is ever overwritten.
 * A block that was refused shows as a jump of first_frame in the next one. */
#ifndef WANE_RING_H
#define WANE_RING_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define RING_OVERFLOW                                                                              \
    1u /* flag: the driver lost frames before this block, it does not say how many */

struct ring_block {
    uint64_t first_frame; /* position of its first frame, as the writer counts */
    int64_t stamp_ns;     /* monotonic clock when it was written */
    uint32_t frame_count; /* frames, not samples */
    uint32_t flags;
};

struct ring;

/* Bytes of memory for a ring that holds `seconds` of samples, 1 MiB at least, 128 MiB at most. */
size_t ring_bytes(double rate_hz, int channels, double seconds);

/* Makes an empty ring in memory [bytes], which must be aligned to 64 bytes and zeroed or scratch.
 * The capacity is the largest power of two that fits. NULL when bytes is too small or channels is
 * not 1 ... 64. Before any reader or writer starts. */
struct ring *ring_init(void *memory, size_t bytes, int channels);

/* The ring that another process made in this memory; NULL when there is none, or it does not fit.
 */
struct ring *ring_attach(void *memory, size_t bytes);

int ring_channels(const struct ring *ring);

/* Writer only. samples [block->frame_count x channels]. false: no room, nothing was written. Safe
 * in an audio callback: bounded time. */
bool ring_write(struct ring *ring, const struct ring_block *block, const float *samples);

/* Reader only. Takes the oldest block. samples [frames_max x channels]; a longer block is handed
 * out in parts, each with its own first_frame (flags with the first part only; all have the stamp
 * of the whole). false: empty. A ring whose other side wrote nonsense reads as empty. */
bool ring_read(struct ring *ring, struct ring_block *out_block, float *samples, size_t frames_max);

#endif
