/* Strikes, readings and contexts for tests of the log: invented, but with every field in use. */
#ifndef WANE_TESTS_LOG_SCENE_H
#define WANE_TESTS_LOG_SCENE_H

#include "wane/log.h"

/* 2026-12-01T08:00:00Z. */
#define LOG_SCENE_MS INT64_C(1796112000000)

enum log_scene_samples { SAMPLES_16_BIT, SAMPLES_24_BIT, SAMPLES_FLOAT, SAMPLES_NONE };

/* A generator of the test's own (splitmix64, Steele, Lea and Flood 2014). */
uint64_t log_scene_next(uint64_t *state);
double log_scene_uniform(uint64_t *state); /* 0 <= x < 1 */

/* Owned: strike_destroy. Ends the program when memory runs out. */
struct strike *log_scene_strike(uint64_t *state, enum log_scene_samples kind, size_t frame_count);
void log_scene_reading(uint64_t *state, enum verdict verdict, struct reading *out_reading);
/* The n-th strike of the scene, one a second. */
void log_scene_context(int64_t n, struct log_context *out_context);

/* Fails the running cmocka case when a field differs in one bit. */
void log_scene_same_strike(const struct strike *a, const struct strike *b);
void log_scene_same_reading(const struct reading *a, const struct reading *b);

#endif
