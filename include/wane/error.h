/* Errors as values. A function that can fail returns bool and takes a struct error last; its
 * outputs stay untouched on failure. A poor strike is not an error: it is a verdict. */
#ifndef WANE_ERROR_H
#define WANE_ERROR_H

#include <stdbool.h>

enum error_kind {
    ERROR_NONE,
    ERROR_USAGE,     /* the words or settings are wrong: exit 2, HTTP 400 */
    ERROR_DATA,      /* what was read is not what it should be: exit 1, HTTP 422 */
    ERROR_NOT_FOUND, /* exit 1, HTTP 404 */
    ERROR_CONFLICT,  /* somebody else changed it first: exit 1, HTTP 412 */
    ERROR_LIMIT,     /* larger than a stated bound: exit 1, HTTP 413 */
    ERROR_DENIED,    /* exit 1, HTTP 403 */
    ERROR_DEVICE,    /* the sound card or its driver: exit 1, HTTP 503 */
    ERROR_STORAGE,   /* disk or log: exit 1, HTTP 503 */
    ERROR_MEMORY,    /* exit 1, HTTP 503 */
    ERROR_INTERNAL,  /* ours: exit 1, HTTP 500 */
};

/* text: one sentence a person can act on, with file and position, no full stop, no newline. */
struct error {
    enum error_kind kind;
    char text[256];
};

/* Fills *err (which may be NULL) and returns false, so that `return error_set(...)` reads well.
 * A text that is too long is cut at a character's end. Any thread. */
bool error_set(struct error *err, enum error_kind kind, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

#ifdef __clang_analyzer__
/* The analyzer reads one file at a time and would not know that it returns false. */
#define error_set(...) ((void)(error_set)(__VA_ARGS__), false)
#endif

/* Puts "prefix: " before the text, for a caller that knows more (a file's name, a line). */
void error_prefix(struct error *err, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* Exit status (1 or 2) and HTTP status of a kind: one table each. */
int error_exit_status(enum error_kind kind);
unsigned error_http_status(enum error_kind kind);

#endif
