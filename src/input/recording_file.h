/* Getting at a recording's bytes, before and beside libsndfile. For recording.c only. */
#ifndef RECORDING_FILE_H
#define RECORDING_FILE_H

#include "wane/error.h"
#include <sndfile.h>
#include <stdbool.h>
#include <stdint.h>

#define RECORDING_FORMATS "WAV, WAVEX, RF64, W64, AIFF, CAF, FLAC"

/* A seekable, open file at its start. name "-" is standard input; it and pipes are copied to a file
 * without a name first, because FLAC and RF64 cannot be read from a pipe. Refuses folders, devices,
 * empty files and, unless is_raw, whatever does not begin like one of our formats.
 * -1 and *err on failure; the caller closes it. */
int recording_file_open(const char *name, bool is_raw, struct error *err);

/* An open recording. = {.fd = -1} is none. */
struct recording_file {
    SNDFILE *sound;
    int fd;
};

/* Hands fd (taken: it is closed with the file, also on failure) to libsndfile. *info is zeroed, or
 * filled for raw samples. A CAF file that was cut off, which libsndfile refuses outright, is read
 * as far as it goes. false and *err when the header is damaged. */
bool recording_file_read_header_take(struct recording_file *file, int fd, const char *name,
                                     SF_INFO *info, struct error *err);

/* Closes both. A file that is not open is allowed. */
void recording_file_close(struct recording_file *file);

/* How many frames the header promises. libsndfile trims `frames` to what the file has, so a file
 * that was cut off is only told by what its header said. 0: the header does not know (written to a
 * pipe). */
uint64_t recording_file_claim(SNDFILE *sound, const SF_INFO *info);

#endif
