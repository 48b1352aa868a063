#include "recording_file.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define COPY_BYTES_MAX (INT64_C(4) << 30) /* 3 h of 48 kHz, two channels, float */
#define COPY_BLOCK     (1 << 20)
#define HEAD_BYTES     64
#define LOG_BYTES      16384
/* Writers that cannot seek back put 0xFFFFFFFF, 0x7FFFFFFF or something near into the size. */
#define SIZE_UNKNOWN_FROM UINT64_C(0x7FFFF000)
#define PRETENDED_BYTES   (INT64_C(1) << 40)
#define W64_CHUNK_HEAD    24
#define AIFF_SSND_HEAD    8

static int open_unnamed(const char *name, struct error *err)
{
    const char *folder = getenv("TMPDIR"); // NOLINT(concurrency-mt-unsafe): nothing here sets it
    char path[4096];
    int length = snprintf(path, sizeof path, "%s/wane-XXXXXX",
                          folder != NULL && folder[0] != '\0' ? folder : "/tmp");
    if (length < 0 || length >= (int)sizeof path) {
        (void)error_set(err, ERROR_LIMIT, "TMPDIR is too long");
        return -1;
    }
    int fd = mkstemp(path);
    if (fd < 0) {
        (void)error_set(err, ERROR_STORAGE, "%s: no room for a copy: %s: %s (set TMPDIR)", name,
                        path, strerror(errno));
        return -1;
    }
    (void)unlink(path);
    (void)fcntl(fd, F_SETFD, FD_CLOEXEC);
    return fd;
}

static bool write_all(int fd, const char *bytes, size_t count)
{
    while (count > 0) {
        ssize_t written = write(fd, bytes, count);
        if (written < 0 && errno == EINTR)
            continue;
        if (written <= 0)
            return false;
        bytes += written;
        count -= (size_t)written;
    }
    return true;
}

static bool copy_bytes(const char *name, int from, int to, char *block, struct error *err)
{
    int64_t total = 0;
    for (;;) {
        ssize_t count = read(from, block, COPY_BLOCK);
        if (count < 0 && errno == EINTR)
            continue;
        if (count < 0)
            return error_set(err, ERROR_DATA, "%s: %s", name, strerror(errno));
        if (count == 0)
            break;
        total += count;
        if (total > COPY_BYTES_MAX)
            return error_set(err, ERROR_LIMIT,
                             "%s: more than %lld GiB came through the pipe; give it as a file",
                             name, (long long)(COPY_BYTES_MAX >> 30));
        if (!write_all(to, block, (size_t)count))
            return error_set(err, ERROR_STORAGE, "%s: no room for a copy: %s (set TMPDIR)", name,
                             strerror(errno));
    }
    if (lseek(to, 0, SEEK_SET) != 0)
        return error_set(err, ERROR_STORAGE, "%s: %s", name, strerror(errno));
    return true;
}

/* Takes `from`: it is closed. */
static int copy_stream_take(const char *name, int from, struct error *err)
{
    int to = -1;
    char *block = malloc(COPY_BLOCK);
    if (block == NULL)
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", name);
    else
        to = open_unnamed(name, err);
    if (to >= 0 && !copy_bytes(name, from, to, block, err)) {
        (void)close(to);
        to = -1;
    }
    free(block);
    (void)close(from);
    return to;
}

static int open_seekable(const char *name, struct error *err)
{
    bool is_stdin = strcmp(name, "-") == 0;
    int fd = is_stdin ? fcntl(STDIN_FILENO, F_DUPFD_CLOEXEC, 3)
                      : open(name, O_RDONLY | O_CLOEXEC | O_NOCTTY);
    if (fd < 0) {
        (void)error_set(err, errno == ENOENT ? ERROR_NOT_FOUND : ERROR_DATA, "%s: %s", name,
                        errno == ENOENT ? "no such file" : strerror(errno));
        return -1;
    }
    struct stat file = {0};
    const char *wrong = NULL;
    if (fstat(fd, &file) != 0)
        wrong = strerror(errno);
    else if (S_ISDIR(file.st_mode))
        wrong = "is a folder; name the recordings in it";
    else if (S_ISCHR(file.st_mode) && isatty(fd))
        wrong = "is the keyboard; pipe a recording in, or name a file";
    else if (S_ISCHR(file.st_mode) || S_ISBLK(file.st_mode))
        wrong = "is a device, not a recording; a sound card is named as `wane inputs` shows it";
    if (wrong != NULL) {
        (void)error_set(err, ERROR_DATA, "%s: %s", is_stdin ? "standard input" : name, wrong);
        (void)close(fd);
        return -1;
    }
    return S_ISREG(file.st_mode) ? fd : copy_stream_take(name, fd, err);
}

static bool begins_like_a_recording(const unsigned char *head, ssize_t count)
{
    static const char *const begins[] = {"RIFF", "RIFX", "RF64", "riff", "FORM", "caff", "fLaC"};
    for (size_t i = 0; i < sizeof begins / sizeof begins[0]; i++) {
        if (count >= 4 && memcmp(head, begins[i], 4) == 0)
            return true;
    }
    return false;
}

static bool looks_like_text(const unsigned char *head, ssize_t count)
{
    for (ssize_t i = 0; i < count; i++) {
        if (head[i] < ' ' && head[i] != '\n' && head[i] != '\r' && head[i] != '\t')
            return false;
    }
    return true;
}

int recording_file_open(const char *name, bool is_raw, struct error *err)
{
    int fd = open_seekable(name, err);
    if (fd < 0)
        return -1;
    unsigned char head[HEAD_BYTES];
    off_t start = lseek(fd, 0, SEEK_CUR);
    ssize_t count = pread(fd, head, sizeof head, start);
    bool is_usable = false;
    if (count < 0)
        (void)error_set(err, ERROR_DATA, "%s: %s", name, strerror(errno));
    else if (count == 0)
        (void)error_set(err, ERROR_DATA, "%s: the file is empty", name);
    else if (!is_raw && !begins_like_a_recording(head, count))
        (void)error_set(err, ERROR_DATA,
                        "%s: %s, not a recording that Wane reads (" RECORDING_FORMATS
                        "; samples without a header need --raw, --rate, --channels)",
                        name, looks_like_text(head, count) ? "text" : "unknown bytes");
    else
        is_usable = true;
    if (is_usable)
        return fd;
    (void)close(fd);
    return -1;
}

/* Bytes of a file that was cut off, as if they went on: what lies past the end reads as nothing. */
static sf_count_t pretend_length(void *state)
{
    (void)state;
    return PRETENDED_BYTES;
}

static sf_count_t pretend_seek(sf_count_t offset, int whence, void *state)
{
    const struct recording_file *file = state;
    if (whence == SEEK_END)
        return lseek(file->fd, PRETENDED_BYTES + offset, SEEK_SET);
    return lseek(file->fd, offset, whence);
}

static sf_count_t pretend_read(void *bytes, sf_count_t count, void *state)
{
    const struct recording_file *file = state;
    sf_count_t done = 0;
    while (done < count) {
        ssize_t got = read(file->fd, (char *)bytes + done, (size_t)(count - done));
        if (got < 0 && errno == EINTR)
            continue;
        if (got <= 0)
            break;
        done += got;
    }
    return done;
}

static sf_count_t pretend_write(const void *bytes, sf_count_t count, void *state)
{
    (void)bytes;
    (void)count;
    (void)state;
    return 0;
}

static sf_count_t pretend_tell(void *state)
{
    const struct recording_file *file = state;
    return lseek(file->fd, 0, SEEK_CUR);
}

bool recording_file_read_header_take(struct recording_file *file, int fd, const char *name,
                                     SF_INFO *info, struct error *err)
{
    SF_VIRTUAL_IO pretended = {pretend_length, pretend_seek, pretend_read, pretend_write,
                               pretend_tell};
    char begin[4] = "";
    off_t start = lseek(fd, 0, SEEK_CUR);
    bool is_caf = pread(fd, begin, sizeof begin, start) == (ssize_t)sizeof begin &&
                  memcmp(begin, "caff", sizeof begin) == 0;
    file->fd = fd;
    /* A second one: libsndfile closes what it was given when it refuses the file. */
    file->sound = sf_open_fd(fcntl(fd, F_DUPFD_CLOEXEC, 3), SFM_READ, info, SF_TRUE);
    if (file->sound == NULL && is_caf && lseek(fd, start, SEEK_SET) == start) {
        *info = (SF_INFO){0};
        file->sound = sf_open_virtual(&pretended, SFM_READ, info, file);
    }
    if (file->sound != NULL)
        return true;
    (void)error_set(err, ERROR_DATA, "%s: damaged or cut off in its header (%s)", name,
                    sf_strerror(NULL));
    recording_file_close(file);
    return false;
}

void recording_file_close(struct recording_file *file)
{
    if (file->sound != NULL)
        (void)sf_close(file->sound);
    if (file->fd >= 0)
        (void)close(file->fd);
    *file = (struct recording_file){.fd = -1};
}

/* The number after `word` in libsndfile's account of the header; 0: not there, or no number. */
static uint64_t number_after(const char *account, const char *word)
{
    const char *at = strstr(account, word);
    if (at == NULL)
        return 0;
    at += strlen(word);
    while (*at == ' ' || *at == ':')
        at++;
    if (at[0] == '0' && (at[1] == 'x' || at[1] == 'X'))
        return 0;
    return strtoull(at, NULL, 10);
}

static unsigned bytes_of_sample(int format)
{
    switch (format & SF_FORMAT_SUBMASK) {
    case SF_FORMAT_PCM_S8:
    case SF_FORMAT_PCM_U8:
        return 1;
    case SF_FORMAT_PCM_16:
        return 2;
    case SF_FORMAT_PCM_24:
        return 3;
    case SF_FORMAT_PCM_32:
    case SF_FORMAT_FLOAT:
        return 4;
    case SF_FORMAT_DOUBLE:
        return 8;
    default:
        return 0;
    }
}

static uint64_t claimed_bytes(const char *account, int type)
{
    uint64_t bytes = 0;
    switch (type) {
    case SF_FORMAT_WAV:
    case SF_FORMAT_WAVEX:
        bytes = number_after(account, "\ndata : ");
        return bytes < SIZE_UNKNOWN_FROM ? bytes : 0;
    case SF_FORMAT_RF64:
        return number_after(account, "Data size : ");
    case SF_FORMAT_W64:
        bytes = number_after(account, "\ndata : ");
        return bytes > W64_CHUNK_HEAD ? bytes - W64_CHUNK_HEAD : 0;
    case SF_FORMAT_AIFF:
        bytes = number_after(account, " SSND : ");
        return bytes > AIFF_SSND_HEAD && bytes < SIZE_UNKNOWN_FROM ? bytes - AIFF_SSND_HEAD : 0;
    default:
        return 0;
    }
}

uint64_t recording_file_claim(SNDFILE *sound, const SF_INFO *info)
{
    if (info->frames <= 0)
        return 0;
    int type = info->format & SF_FORMAT_TYPEMASK;
    uint64_t frames = (uint64_t)info->frames;
    uint64_t width = (uint64_t)bytes_of_sample(info->format) * (uint64_t)info->channels;
    char *account = malloc(LOG_BYTES);
    if (account != NULL && width > 0) {
        int length = sf_command(sound, SFC_GET_LOG_INFO, account, LOG_BYTES);
        account[length > 0 && length < LOG_BYTES ? length : LOG_BYTES - 1] = '\0';
        uint64_t claimed = length > 0 ? claimed_bytes(account, type) / width : 0;
        if (claimed > frames)
            frames = claimed;
    }
    free(account);
    /* A header from a pipe promises some 2^31 bytes or 2^63 frames. */
    bool is_unknown = width > 0 ? frames >= SIZE_UNKNOWN_FROM * UINT64_C(1024)
                                : frames >= SIZE_UNKNOWN_FROM * UINT64_C(1024) * UINT64_C(1024);
    return is_unknown ? 0 : frames;
}
