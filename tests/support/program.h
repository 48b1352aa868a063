/* Runs a program to its end as a shell would, and keeps what it said. */
#ifndef WANE_TESTS_PROGRAM_H
#define WANE_TESTS_PROGRAM_H

#include <stddef.h>

#define PROGRAM_WORDS_MAX 24

struct program_result {
    int status; /* exit status; 128 + number when a signal ended it */
    char *out;  /* stdout and stderr, NUL-terminated; program_done frees them */
    char *err;
    size_t out_length, err_length;
};

/* A program beside the tests: `name` in the build's folder (WANE_PROGRAMS, else the folder over
 * that of the running test). words: NULL-terminated, without the program's own name. stdin comes
 * from the file in_path, or is empty when NULL. Ends the test program when it cannot be run. */
void program_run(const char *name, const char *const words[], const char *in_path,
                 struct program_result *out_result);
void program_done(struct program_result *result);

/* Lines in a text (newlines). */
size_t program_count_lines(const char *text);

#endif
