#include "serve/gzip.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <zlib.h>

#define GZIP_FILE_MAX    (4u << 20)
#define GZIP_WINDOW_BITS (15 + 16) /* 16: a gzip header, zlib.h */
#define GZIP_MEMORY      8

bool gzip_is_accepted(const char *accept_encoding)
{
    const char *at = accept_encoding != NULL ? strstr(accept_encoding, "gzip") : NULL;
    return at != NULL && strncmp(at + strlen("gzip"), ";q=0", 4) != 0;
}

static bool read_all(int fd, unsigned char *bytes, size_t size)
{
    for (size_t done = 0; done < size;) {
        ssize_t count = read(fd, bytes + done, size - done);
        if (count < 0 && errno == EINTR)
            continue;
        if (count <= 0)
            return false;
        done += (size_t)count;
    }
    return true;
}

static bool compress_bytes(unsigned char *in, size_t size, unsigned char **out, size_t *out_size)
{
    z_stream stream = {0};
    if (deflateInit2(&stream, Z_BEST_COMPRESSION, Z_DEFLATED, GZIP_WINDOW_BITS, GZIP_MEMORY,
                     Z_DEFAULT_STRATEGY) != Z_OK)
        return false;
    uLong bound = deflateBound(&stream, (uLong)size);
    *out = malloc(bound);
    stream.next_in = in;
    stream.avail_in = (uInt)size;
    stream.next_out = *out;
    stream.avail_out = (uInt)bound;
    bool is_done = *out != NULL && deflate(&stream, Z_FINISH) == Z_STREAM_END;
    *out_size = stream.total_out;
    (void)deflateEnd(&stream);
    if (!is_done) {
        free(*out);
        *out = NULL;
    }
    return is_done;
}

bool gzip_read_file(int fd, size_t size, unsigned char **out, size_t *out_size)
{
    *out = NULL;
    if (size == 0 || size > GZIP_FILE_MAX)
        return false;
    unsigned char *bytes = malloc(size);
    bool is_done =
        bytes != NULL && read_all(fd, bytes, size) && compress_bytes(bytes, size, out, out_size);
    free(bytes);
    return is_done;
}
