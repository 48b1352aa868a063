/* The last minute heard, strike or no strike. The caller holds the pipeline's mutex. */
#ifndef WANE_DAEMON_RECENT_H
#define WANE_DAEMON_RECENT_H

#include "inner.h"

/* false when memory ran out: nothing is kept then, and all below do nothing. */
bool recent_begin(struct recent *recent, unsigned channels, double rate_hz);
void recent_done(struct recent *recent);
/* samples [frame_count] of the slot-th channel, then recent_advance once for all channels. Only
 * with recent->frames not NULL. */
void recent_write(struct recent *recent, unsigned slot, const float *samples, size_t frame_count);
void recent_advance(struct recent *recent, size_t frame_count);
/* The newest frame_count <= recent->count frames, interleaved. */
void recent_copy(const struct recent *recent, size_t frame_count, float *out_frames);

#endif
