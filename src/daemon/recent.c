#include "recent.h"
#include "inner.h"

#include <stdlib.h>
#include <string.h>

bool recent_begin(struct recent *recent, unsigned channels, double rate_hz)
{
    recent_done(recent);
    size_t capacity = (size_t)(RECENT_S * rate_hz) + 1;
    recent->frames = malloc(capacity * channels * sizeof *recent->frames);
    if (recent->frames == NULL)
        return false;
    recent->channels = channels;
    recent->rate_hz = rate_hz;
    recent->capacity = capacity;
    return true;
}

void recent_done(struct recent *recent)
{
    free(recent->frames);
    *recent = (struct recent){0};
}

/* One channel of a block at the ring's end; recent_advance makes it count. */
void recent_write(struct recent *recent, unsigned slot, const float *samples, size_t frame_count)
{
    size_t skipped = frame_count > recent->capacity ? frame_count - recent->capacity : 0;
    size_t end = recent->begin + recent->count;
    for (size_t i = skipped; i < frame_count; i++)
        recent->frames[(end + i) % recent->capacity * recent->channels + slot] = samples[i];
}

void recent_advance(struct recent *recent, size_t frame_count)
{
    size_t end = (recent->begin + recent->count + frame_count) % recent->capacity;
    recent->count += frame_count;
    if (recent->count > recent->capacity)
        recent->count = recent->capacity;
    recent->begin = (end + recent->capacity - recent->count) % recent->capacity;
}

void recent_copy(const struct recent *recent, size_t frame_count, float *out_frames)
{
    size_t begin = recent->begin + recent->count - frame_count;
    for (size_t i = 0; i < frame_count; i++)
        memcpy(out_frames + i * recent->channels,
               recent->frames + (begin + i) % recent->capacity * recent->channels,
               recent->channels * sizeof *out_frames);
}
