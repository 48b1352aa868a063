/* Samples as bytes, without loss. */
#ifndef WANE_LOG_WAVE_PACK_H
#define WANE_LOG_WAVE_PACK_H

#include "wane/error.h"
#include "wane/text.h"

/* Stored in the log: numbers never change. */
enum wave_packing {
    WAVE_RAW = 0,     /* float32, little-endian */
    WAVE_FLAC_16 = 1, /* FLAC of samples x 2^15 */
    WAVE_FLAC_24 = 2, /* FLAC of samples x 2^23 */
};

/* More frames are never stored: SQLite takes 10^9 bytes in one value. */
#define WAVE_FRAMES_MAX ((size_t)200 * 1000 * 1000)

/* Sound cards and most recordings give integers in disguise: those are FLAC-packed, and unpacked
 * again to see that each sample has the same bits. Everything else stays raw. samples
 * [frame_count], frame_count <= WAVE_FRAMES_MAX. About 5 ms for 3 s at 48 kHz. */
bool wave_pack(const float *samples, size_t frame_count, struct text *out_bytes,
               enum wave_packing *out_packing, struct error *err);

/* out_samples [frame_count]. ERROR_DATA when the bytes hold anything but frame_count samples. */
bool wave_unpack(const void *bytes, size_t size, int packing, size_t frame_count,
                 float *out_samples, struct error *err);

/* A WAV file in memory: 16 or 24 bit where exact, else float. */
bool wave_write_wav(const float *samples, size_t frame_count, double rate_hz,
                    struct text *out_bytes, struct error *err);

#endif
