/* Which log the commands look into, and the words that select strikes in it. */
#ifndef WANE_CLI_LOG_FILE_H
#define WANE_CLI_LOG_FILE_H

#include "cli/options.h"
#include "wane/log.h"

struct log_words {
    const char *config, *log;
    bool demo;
    const char *series, *part, *specimen, *verdict, *from, *to;
    uint64_t limit; /* 0: not given */
};

#define LOG_WORDS_COUNT 10

/* Fills specs [LOG_WORDS_COUNT], which point into *words. */
void log_words_specs(struct log_words *words, struct option_spec *specs);

/* The selection that the words name; its limit stays 0. */
bool log_words_selection(const struct log_words *words, struct log_selection *out_selection,
                         struct error *err);

/* --log, else [log] file of the config (--config, else the daemon's own), else the default log.
 * out_path [LOG_PATH_MAX]. */
bool log_words_path(const struct log_words *words, char *out_path, struct error *err);

/* Opens that log. NULL and *err on failure. */
struct log_reader *log_words_open(const struct log_words *words, struct error *err);

#endif
