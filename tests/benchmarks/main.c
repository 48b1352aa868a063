/* benchmarks accuracy|verdicts|speed|recordings [words]: measures the readings, see the usage. */
#include "benchmarks.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static double read_clock(clockid_t clock)
{
    struct timespec now;
    if (clock_gettime(clock, &now) != 0)
        return 0.0;
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

double benchmark_clock_s(void)
{
    return read_clock(CLOCK_MONOTONIC);
}

double benchmark_thread_s(void)
{
    return read_clock(CLOCK_THREAD_CPUTIME_ID);
}

double benchmark_process_s(void)
{
    return read_clock(CLOCK_PROCESS_CPUTIME_ID);
}

static const char usage[] =
    "usage: benchmarks accuracy|verdicts|speed|recordings\n"
    "         [--family NAME] [--n COUNT] [--seed SEED] [--through direct|detector]\n"
    "         [--dump INDEX] [--verbose] [--short]\n"
    "  accuracy    errors of f and decay over the bound and over an oracle, family by family\n"
    "  verdicts    right and wrong verdicts, defect by defect (--family names one)\n"
    "  speed       cost of detector and fit beside a baseline of the same run\n"
    "  recordings  real struck bodies (WANE_SHARED) beside their reference\n"
    "  --n         strikes a family, scenes a defect, minutes of the long recording\n"
    "  --dump      reads one scene only and writes it to /tmp as a float WAV with its truth\n"
    "  --short     few strikes, with limits: exit status 1 when one is broken\n";

static bool read_words(int argc, char **argv, struct benchmark_words *words)
{
    for (int i = 2; i < argc; i++) {
        const char *word = argv[i];
        const char *value = i + 1 < argc ? argv[i + 1] : NULL;
        if (strcmp(word, "--verbose") == 0) {
            words->verbose = true;
            continue;
        }
        if (strcmp(word, "--short") == 0) {
            words->is_short = true;
            continue;
        }
        if (!value)
            return false;
        i++;
        if (strcmp(word, "--family") == 0)
            words->family = value;
        else if (strcmp(word, "--n") == 0)
            words->count = (unsigned)strtoul(value, NULL, 10);
        else if (strcmp(word, "--seed") == 0)
            words->seed = strtoul(value, NULL, 10);
        else if (strcmp(word, "--dump") == 0)
            words->only = (int)strtol(value, NULL, 10);
        else if (strcmp(word, "--through") == 0)
            words->through_detector = strcmp(value, "detector") == 0;
        else
            return false;
    }
    return true;
}

int main(int argc, char **argv)
{
    static const struct {
        const char *name;
        bool (*run)(const struct benchmark_words *words);
    } benchmarks[] = {
        {"accuracy", benchmark_accuracy},
        {"verdicts", benchmark_verdicts},
        {"speed", benchmark_speed},
        {"recordings", benchmark_recordings},
    };
    struct benchmark_words words = {.count = 200, .seed = 1, .only = -1};
    if (argc < 2 || !read_words(argc, argv, &words)) {
        fputs(usage, stderr);
        return 2;
    }
    for (size_t i = 0; i < sizeof benchmarks / sizeof benchmarks[0]; i++)
        if (strcmp(argv[1], benchmarks[i].name) == 0)
            return benchmarks[i].run(&words) ? 0 : 1;
    fputs(usage, stderr);
    return 2;
}
