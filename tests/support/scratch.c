#define _XOPEN_SOURCE 700 /* nftw */

#include "support/scratch.h"

#include <ftw.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static void give_up(const char *what)
{
    perror(what);
    exit(EXIT_FAILURE);
}

void scratch_make(struct scratch *scratch)
{
    const char *root = getenv("TMPDIR");
    (void)snprintf(scratch->folder, sizeof scratch->folder, "%s/wane test XXXXXX",
                   root != NULL ? root : "/tmp");
    if (mkdtemp(scratch->folder) == NULL)
        give_up(scratch->folder);
}

static int remove_entry(const char *path, const struct stat *file, int kind, struct FTW *place)
{
    (void)file;
    (void)kind;
    (void)place;
    return remove(path);
}

void scratch_remove(const struct scratch *scratch)
{
    (void)nftw(scratch->folder, remove_entry, 16, FTW_DEPTH | FTW_PHYS);
}

const char *scratch_path(const struct scratch *scratch, const char *name, char *out)
{
    (void)snprintf(out, 512, "%s/%s", scratch->folder, name);
    return out;
}

void scratch_write(const char *path, const void *bytes, size_t count)
{
    FILE *file = fopen(path, "wb");
    if (file == NULL || fwrite(bytes, 1, count, file) != count || fclose(file) != 0)
        give_up(path);
}

void scratch_samples(uint64_t seed, unsigned bits, int32_t *samples, size_t count)
{
    uint64_t state = seed * UINT64_C(2862933555777941757) + 3037000493U;
    for (size_t i = 0; i < count; i++) {
        state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        uint32_t word = (uint32_t)(state >> 32) & ~(bits < 32 ? UINT32_MAX >> bits : 0U);
        memcpy(&samples[i], &word, sizeof word);
    }
}

static SNDFILE *create(const char *path, int format, int rate_hz, int channels)
{
    SF_INFO info = {.samplerate = rate_hz, .channels = channels, .format = format};
    SNDFILE *file = sf_open(path, SFM_WRITE, &info);
    if (file == NULL) {
        (void)fprintf(stderr, "%s: %s\n", path, sf_strerror(NULL));
        exit(EXIT_FAILURE);
    }
    return file;
}

void scratch_record(const char *path, int format, int rate_hz, int channels, const int32_t *samples,
                    size_t frame_count)
{
    SNDFILE *file = create(path, format, rate_hz, channels);
    if (sf_writef_int(file, samples, (sf_count_t)frame_count) != (sf_count_t)frame_count)
        give_up(path);
    (void)sf_close(file);
}

void scratch_record_floats(const char *path, int format, int rate_hz, int channels,
                           const float *samples, size_t frame_count)
{
    SNDFILE *file = create(path, format, rate_hz, channels);
    if (sf_writef_float(file, samples, (sf_count_t)frame_count) != (sf_count_t)frame_count)
        give_up(path);
    (void)sf_close(file);
}
