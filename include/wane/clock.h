/* The only door to a clock. Durations, deadlines and arrival stamps use the monotonic clock; the
 * time of day is attached to rows and lines, never used to measure. Any thread. */
#ifndef WANE_CLOCK_H
#define WANE_CLOCK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define CLOCK_TEXT_MAX 32
#define CLOCK_NS_PER_S INT64_C(1000000000)

/* CLOCK_MONOTONIC, ns. Grows, stops while the machine is suspended. Async-signal-safe. */
int64_t clock_monotonic_ns(void);

/* Time of day: ms since 1970-01-01T00:00:00Z, leap seconds not counted (POSIX time). May jump. */
int64_t clock_utc_ms(void);

/* The time of day that belongs to a monotonic stamp, ms, by the offset between the two clocks now:
 * call it when a row is written, so that a clock that was set meanwhile is heeded. */
int64_t clock_utc_ms_of(int64_t monotonic_ns);

/* RFC 3339 in UTC with milliseconds: 2026-12-01T14:07:38.123Z. out [>= CLOCK_TEXT_MAX].
 * Years 1970 ... 9999; times outside are put to the nearest end. */
void clock_format_utc(int64_t utc_ms, char *out, size_t out_size);

/* The other way: a date (YYYY-MM-DD, then midnight) or a full RFC 3339 time with Z or an offset,
 * with or without a fraction of a second. false for anything else; *out_utc_ms then untouched. */
bool clock_parse_utc(const char *text, int64_t *out_utc_ms);

/* Whether the kernel says that its time of day follows a reference (NTP or the like). */
bool clock_is_synced(void);

/* Sleeps until the monotonic clock shows deadline_ns; returns at once when it has passed. Goes on
 * sleeping after a signal. */
void clock_sleep_until(int64_t deadline_ns);

#endif
