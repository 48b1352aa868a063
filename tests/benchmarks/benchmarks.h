/* The benchmark program's parts: accuracy, verdicts, speed, recordings. */
#ifndef BENCHMARKS_BENCHMARKS_H
#define BENCHMARKS_BENCHMARKS_H

#include <stdbool.h>

struct benchmark_words {
    const char *family; /* or defect; NULL: all */
    unsigned count;
    unsigned long seed;
    int only; /* one strike's index, dumped; -1: all */
    bool through_detector, verbose, is_short;
};

bool benchmark_accuracy(const struct benchmark_words *words);
bool benchmark_verdicts(const struct benchmark_words *words);
bool benchmark_speed(const struct benchmark_words *words);
bool benchmark_recordings(const struct benchmark_words *words);

/* Seconds: of the monotonic clock; of processor time of this thread, of the process. The cost of a
 * fit is thread time: what else runs on the machine does not count. */
double benchmark_clock_s(void);
double benchmark_thread_s(void);
double benchmark_process_s(void);

#endif
