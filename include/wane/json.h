/* The JSON form of a reading, the same in `wane read --json`, the log, the HTTP calls and the
 * stream. */
#ifndef WANE_JSON_H
#define WANE_JSON_H

#include "wane/reading.h"
#include "wane/strike.h"
#include "wane/text.h"

/* Writes the keys that every form shares, into an object that is already open: channel, onset_s,
 * window_s, peak_dbfs, noise_dbfs, snr_db, verdict, reasons, why, remarks, modes, tones.
 * The keys before (source, strike, id, time ...) and after are the caller's.
 * f and decay are counted from the strike's first_frame at rate_hz. */
void json_reading(struct json_writer *json, const struct strike *strike,
                  const struct reading *reading);

#endif
