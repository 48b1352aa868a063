#include "clips.h"

#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define FIELDS_MAX 32

/* Cuts a line of comma-separated values in place; quoted fields may hold commas. */
static size_t cut_fields(char *line, char *fields[FIELDS_MAX])
{
    size_t count = 0;
    char *at = line;
    while (count < FIELDS_MAX) {
        bool is_quoted = *at == '"';
        fields[count++] = is_quoted ? ++at : at;
        if (is_quoted) {
            at += strcspn(at, "\"");
            if (*at)
                *at++ = '\0';
        }
        at += strcspn(at, ",\r\n");
        char end = *at;
        *at = '\0';
        if (end != ',')
            break;
        at++;
    }
    return count;
}

static void add_clip(struct clips *clips, char *fields[FIELDS_MAX])
{
    struct clip *clip = &clips->clips[clips->clip_count++];
    (void)snprintf(clip->name, sizeof clip->name, "%s", fields[0]);
    (void)snprintf(clip->kind, sizeof clip->kind, "%s", fields[1]);
    clip->strikes = (unsigned)strtoul(fields[7], NULL, 10);
}

static void add_mode(struct clips *clips, char *fields[FIELDS_MAX])
{
    struct clip_mode *mode = &clips->modes[clips->mode_count++];
    (void)snprintf(mode->name, sizeof mode->name, "%s", fields[0]);
    mode->level_db = strtod(fields[3], NULL);
    for (size_t i = 0; i < 2; i++) {
        mode->f_hz[i] = strtod(fields[9 + i], NULL);
        mode->decay_per_s[i] = strtod(fields[12 + i], NULL);
    }
    mode->grade = fields[17][0];
}

static bool read_table(struct clips *clips, const char *file, size_t fields_needed,
                       void (*add)(struct clips *, char **))
{
    char path[640], line[4096];
    (void)snprintf(path, sizeof path, "%s/%s", clips->folder, file);
    FILE *in = fopen(path, "r");
    if (!in)
        return false;
    bool is_head = true;
    while (fgets(line, sizeof line, in)) {
        char *fields[FIELDS_MAX];
        if (!is_head && cut_fields(line, fields) >= fields_needed &&
            clips->clip_count < CLIPS_MAX && clips->mode_count < CLIP_MODES_MAX)
            add(clips, fields);
        is_head = false;
    }
    return fclose(in) == 0;
}

bool clips_open(struct clips *clips, const char *shared)
{
    memset(clips, 0, sizeof *clips);
    (void)snprintf(clips->folder, sizeof clips->folder, "%s/recordings", shared);
    return read_table(clips, "manifest.csv", 8, add_clip) &&
           read_table(clips, "reference.csv", 18, add_mode);
}

bool clips_load(const struct clips *clips, const struct clip *clip, double lead_s,
                float **out_samples, size_t *out_frame_count, double *out_rate_hz)
{
    char path[640];
    (void)snprintf(path, sizeof path, "%s/%s", clips->folder, clip->name);
    SF_INFO info = {0};
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    if (!file)
        return false;
    size_t lead = (size_t)(lead_s * info.samplerate), frames = (size_t)info.frames;
    size_t channels = (size_t)info.channels;
    float *all = malloc(frames * channels * sizeof *all);
    float *samples = malloc((lead + frames) * sizeof *samples);
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    bool done = all && samples && rng && sf_readf_float(file, all, info.frames) == info.frames;
    for (size_t n = 0; done && n < lead; n++)
        samples[n] = (float)gsl_ran_gaussian_ziggurat(rng, 1e-6);
    for (size_t n = 0; done && n < frames; n++)
        samples[lead + n] = all[n * channels];
    free(all);
    if (rng)
        gsl_rng_free(rng);
    done = sf_close(file) == 0 && done;
    if (!done) {
        free(samples);
        return false;
    }
    *out_samples = samples;
    *out_frame_count = lead + frames;
    *out_rate_hz = info.samplerate;
    return true;
}
