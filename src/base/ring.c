#include "wane/ring.h"

#include <stdalign.h>
#include <stdatomic.h>
#include <string.h>

#define RING_MARK      UINT32_C(0x57524e47)
#define RING_LINE      64 /* head and tail on cache lines of their own */
#define RING_BYTES_MIN ((size_t)1 << 20)
#define RING_BYTES_MAX ((size_t)1 << 27)
#define RING_CHANNELS  64
#define RING_ALIGNMENT 8

_Static_assert(ATOMIC_LLONG_LOCK_FREE == 2, "a lock would not be shared between processes");

struct ring {
    uint32_t mark, channels;
    uint64_t capacity; /* bytes, a power of two */
    alignas(RING_LINE) _Atomic uint64_t head;
    alignas(RING_LINE) _Atomic uint64_t tail;
    /* The reader's own: frames of the block at tail that were handed out already. */
    uint64_t taken_frames;
    alignas(RING_LINE) unsigned char bytes[];
};

size_t ring_bytes(double rate_hz, int channels, double seconds)
{
    double wanted = rate_hz * (double)channels * seconds * (double)sizeof(float);
    size_t capacity = RING_BYTES_MIN;
    while (capacity < RING_BYTES_MAX && (double)capacity < wanted)
        capacity *= 2;
    return sizeof(struct ring) + capacity;
}

struct ring *ring_init(void *memory, size_t bytes, int channels)
{
    if (bytes < sizeof(struct ring) + RING_LINE || channels < 1 || channels > RING_CHANNELS)
        return NULL;
    struct ring *ring = memory;
    uint64_t capacity = RING_LINE;
    while (capacity * 2 <= bytes - sizeof(struct ring))
        capacity *= 2;
    ring->channels = (uint32_t)channels;
    ring->capacity = capacity;
    ring->taken_frames = 0;
    atomic_init(&ring->head, 0);
    atomic_init(&ring->tail, 0);
    ring->mark = RING_MARK;
    return ring;
}

struct ring *ring_attach(void *memory, size_t bytes)
{
    struct ring *ring = memory;
    if (bytes < sizeof(struct ring) || ring->mark != RING_MARK)
        return NULL;
    if (ring->channels < 1 || ring->channels > RING_CHANNELS || ring->capacity < RING_LINE ||
        (ring->capacity & (ring->capacity - 1)) != 0 ||
        ring->capacity > bytes - sizeof(struct ring))
        return NULL;
    return ring;
}

int ring_channels(const struct ring *ring)
{
    return (int)ring->channels;
}

static uint64_t block_bytes(const struct ring *ring, uint32_t frame_count)
{
    uint64_t samples = (uint64_t)frame_count * ring->channels * sizeof(float);
    uint64_t bytes = sizeof(struct ring_block) + samples;
    return (bytes + RING_ALIGNMENT - 1) & ~(uint64_t)(RING_ALIGNMENT - 1);
}

/* A block may lie across the end of the ring: two pieces. */
static void copy_in(struct ring *ring, uint64_t at, const void *from, size_t count)
{
    size_t start = (size_t)(at & (ring->capacity - 1));
    size_t first = (size_t)ring->capacity - start;
    if (first > count)
        first = count;
    memcpy(ring->bytes + start, from, first);
    memcpy(ring->bytes, (const unsigned char *)from + first, count - first);
}

static void copy_out(const struct ring *ring, uint64_t at, void *to, size_t count)
{
    size_t start = (size_t)(at & (ring->capacity - 1));
    size_t first = (size_t)ring->capacity - start;
    if (first > count)
        first = count;
    memcpy(to, ring->bytes + start, first);
    memcpy((unsigned char *)to + first, ring->bytes, count - first);
}

bool ring_write(struct ring *ring, const struct ring_block *block, const float *samples)
{
    uint64_t head = atomic_load_explicit(&ring->head, memory_order_relaxed);
    uint64_t tail = atomic_load_explicit(&ring->tail, memory_order_acquire);
    uint64_t bytes = block_bytes(ring, block->frame_count);
    if (bytes > ring->capacity - (head - tail))
        return false;
    copy_in(ring, head, block, sizeof *block);
    copy_in(ring, head + sizeof *block, samples,
            (size_t)block->frame_count * ring->channels * sizeof(float));
    atomic_store_explicit(&ring->head, head + bytes, memory_order_release);
    return true;
}

bool ring_read(struct ring *ring, struct ring_block *out_block, float *samples, size_t frames_max)
{
    uint64_t tail = atomic_load_explicit(&ring->tail, memory_order_relaxed);
    uint64_t head = atomic_load_explicit(&ring->head, memory_order_acquire);
    struct ring_block block;
    if (head - tail < sizeof block || head - tail > ring->capacity)
        return false;
    copy_out(ring, tail, &block, sizeof block);
    uint64_t bytes = block_bytes(ring, block.frame_count);
    if (bytes > head - tail || ring->taken_frames > block.frame_count || frames_max == 0)
        return false;
    uint64_t left = block.frame_count - ring->taken_frames;
    uint64_t count = left < frames_max ? left : frames_max;
    size_t frame_bytes = ring->channels * sizeof(float);
    copy_out(ring, tail + sizeof block + ring->taken_frames * frame_bytes, samples,
             (size_t)count * frame_bytes);
    out_block->first_frame = block.first_frame + ring->taken_frames;
    out_block->stamp_ns = block.stamp_ns;
    out_block->frame_count = (uint32_t)count;
    out_block->flags = ring->taken_frames == 0 ? block.flags : 0;
    ring->taken_frames += count;
    if (ring->taken_frames == block.frame_count) {
        ring->taken_frames = 0;
        atomic_store_explicit(&ring->tail, tail + bytes, memory_order_release);
    }
    return true;
}
