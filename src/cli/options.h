/* The words after a command: long options from one table, and the rest. Shared by all commands.
 *
 *     bool json = false;
 *     double rate_hz = 0;
 *     const struct option_spec specs[] = {
 *         {"json", OPTION_FLAG, NULL, "one JSON object a line", .flag = &json},
 *         {"rate", OPTION_NUMBER, "HZ", "rate of raw samples", .number = &rate_hz, 1000, 768000},
 *     };
 *     struct options options = {"wane read", "[--json] FILE...", specs, 2};
 */
#ifndef WANE_CLI_OPTIONS_H
#define WANE_CLI_OPTIONS_H

#include "wane/error.h"

#include <stddef.h>
#include <stdint.h>
#include <stdio.h>

enum option_kind {
    OPTION_FLAG,    /* --name          sets *flag */
    OPTION_TEXT,    /* --name VALUE    borrows argv's string into *text */
    OPTION_NUMBER,  /* --name 12.5     a number with a point, min ... max */
    OPTION_INTEGER, /* --name 12       a whole number, min ... max; min 0, max 0: any from 0 on */
};

struct option_spec {
    const char *name; /* without the two dashes */
    enum option_kind kind;
    const char *value; /* the word that help shows for the value: "HZ"; NULL for a flag */
    const char *help;
    union {
        bool *flag;
        const char **text;
        double *number;
        uint64_t *integer;
    };
    double min, max;
};

struct options {
    const char *program; /* "wane read" */
    const char *words;   /* what follows it in the usage line */
    const char *about;   /* one sentence */
    const struct option_spec *specs;
    size_t count;
    bool wants_help; /* set by options_parse on --help or -h; the rest is then not looked at */
};

/* argv[0] is the command. `--name VALUE` and `--name=VALUE` are the same; `--` ends the options;
 * `-` is a word. Words are moved to argv[0 ...] in their order, *out_word_count of them.
 * ERROR_USAGE, with the nearest option, for anything that the table does not know. */
bool options_parse(struct options *options, int argc, char **argv, int *out_word_count,
                   struct error *err);

/* Usage line, sentence and the table of options. */
void options_print_help(const struct options *options, FILE *out);

/* Says "wane read: TEXT" on stderr in one line and gives the exit status that fits. */
int options_fail(const struct options *options, const struct error *err);

#endif
