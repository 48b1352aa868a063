/* Strikes and readings as bytes, little-endian, bit for bit, the same on every machine. */
#ifndef WANE_LOG_PACK_H
#define WANE_LOG_PACK_H

#include "wane/error.h"
#include "wane/reading.h"
#include "wane/strike.h"
#include "wane/text.h"

/* All of a strike but its samples. Appends to out_bytes; memory trouble shows in its `failed`. */
void pack_strike(const struct strike *strike, struct text *out_bytes);
/* out_strike: samples NULL, frame_count as packed. ERROR_DATA for bytes that are none. */
bool unpack_strike(const void *bytes, size_t size, struct strike *out_strike, struct error *err);

void pack_reading(const struct reading *reading, struct text *out_bytes);
bool unpack_reading(const void *bytes, size_t size, struct reading *out_reading, struct error *err);

#endif
