/* The recordings of real struck bodies in WANE_SHARED/recordings, with their reference. They are
 * not part of the project: where the folder is missing, the caller says so and skips. */
#ifndef BENCHMARKS_CLIPS_H
#define BENCHMARKS_CLIPS_H

#include <stdbool.h>
#include <stddef.h>

#define CLIPS_MAX      64
#define CLIP_MODES_MAX 256
#define CLIP_NAME_MAX  64

struct clip {
    char name[CLIP_NAME_MAX]; /* "clips/glock-1174.flac" */
    char kind[16];            /* "ring", "hard", "negative" */
    unsigned strikes;         /* 0: not known */
};

/* One mode by the reference's two methods. */
struct clip_mode {
    char name[CLIP_NAME_MAX];
    char grade;
    double level_db; /* below the clip's strongest */
    double f_hz[2], decay_per_s[2];
};

struct clips {
    char folder[512];
    struct clip clips[CLIPS_MAX];
    size_t clip_count;
    struct clip_mode modes[CLIP_MODES_MAX];
    size_t mode_count;
};

/* shared: the folder that holds recordings/. False: not there, or not readable. */
bool clips_open(struct clips *clips, const char *shared);

/* First channel with lead_s of very low dither (sd 1e-6) before it; *out_samples is the caller's to
 * free. False: the file cannot be read. */
bool clips_load(const struct clips *clips, const struct clip *clip, double lead_s,
                float **out_samples, size_t *out_frame_count, double *out_rate_hz);

#endif
