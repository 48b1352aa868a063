/* A file of the page, compressed as RFC 1952 says, for browsers that take it so. */
#ifndef WANE_SERVE_GZIP_H
#define WANE_SERVE_GZIP_H

#include <stdbool.h>
#include <stddef.h>

/* Whether an Accept-Encoding header (may be NULL) names gzip and does not refuse it. */
bool gzip_is_accepted(const char *accept_encoding);

/* Reads `size` bytes (at most 4 MiB) from fd and compresses them. *out: malloc'ed, the caller's.
 * false: too large, not readable, or no memory; fd then stands anywhere. */
bool gzip_read_file(int fd, size_t size, unsigned char **out, size_t *out_size);

#endif
