/* `wane report`: a page on a series or a strike of the log. */
#include "cli/commands.h"

#include "cli/log_file.h"
#include "cli/log_shelf.h"
#include "wane/clock.h"
#include "wane/report.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

/* Under another name first: a file of that name is whole or not there. */
static bool write_file(const char *path, const struct text *page, struct error *err)
{
    char unfinished[LOG_PATH_MAX];
    if (snprintf(unfinished, sizeof unfinished, "%s.part", path) >= (int)sizeof unfinished)
        return error_set(err, ERROR_USAGE, "the file's name is too long");
    FILE *file = fopen(unfinished, "wb");
    if (file == NULL)
        return error_set(err, ERROR_STORAGE, "%s: cannot be made: %s", unfinished, strerror(errno));
    bool is_good = fwrite(page->data, 1, page->length, file) == page->length;
    is_good = fclose(file) == 0 && is_good;
    is_good = is_good && rename(unfinished, path) == 0;
    if (!is_good) {
        error_set(err, ERROR_STORAGE, "%s: %s", path, strerror(errno));
        (void)unlink(unfinished);
    }
    return is_good;
}

/* "12": a series; "strike 12": a strike. */
static bool pick_subject(int count, char **words, struct report_choice *choice, struct error *err)
{
    bool is_strike = count == 2 && strcmp(words[0], "strike") == 0;
    bool is_series = count == 1 || (count == 2 && strcmp(words[0], "series") == 0);
    if (!is_strike && !is_series)
        return error_set(err, ERROR_USAGE,
                         "which series? wane report N, or wane report strike N for one strike");
    char *end = NULL;
    const char *number = words[count - 1];
    int64_t id = strtoll(number, &end, 10);
    if (*number == '\0' || *end != '\0' || id < 1)
        return error_set(err, ERROR_USAGE, "\"%.40s\" is no number of a series or a strike",
                         number);
    choice->series = is_strike ? 0 : id;
    choice->strike = is_strike ? id : 0;
    return true;
}

static bool make_report(const struct log_words *words, struct report_choice *choice,
                        const char *path, struct error *err)
{
    struct text page = {0};
    struct shelf *shelf = shelf_of_words(words, err);
    struct log_reader *reader = shelf != NULL ? log_words_open(words, err) : NULL;
    bool is_good = reader != NULL && report_write(reader, shelf, choice, &page, err);
    if (is_good && path != NULL && strcmp(path, "-") != 0)
        is_good = write_file(path, &page, err);
    else if (is_good &&
             (fwrite(page.data, 1, page.length, stdout) != page.length || fflush(stdout) != 0))
        is_good = error_set(err, ERROR_STORAGE, "standard output: %s", strerror(errno));
    text_done(&page);
    log_reader_close(reader);
    free(shelf);
    return is_good;
}

int cmd_report(int argc, char **argv)
{
    struct log_words words = {0};
    const char *path = NULL;
    static char out_word[] = "--out";
    const struct option_spec specs[] = {
        {"log", OPTION_TEXT, "FILE", "the log (that of waned)", .text = &words.log},
        {"config", OPTION_TEXT, "FILE", "waned's settings, which name the log",
         .text = &words.config},
        {"demo", OPTION_FLAG, NULL, "the log of the simulated bench", .flag = &words.demo},
        {"out", OPTION_TEXT, "FILE", "or -o FILE: write to this file (standard output)",
         .text = &path},
    };
    struct options options = {
        .program = "wane report",
        .words = "[OPTIONS] SERIES | strike STRIKE",
        .about = "Makes one HTML file on a series, or on a strike, ready to print.",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0],
    };
    struct error err = {0};
    struct report_choice choice = {.version = WANE_VERSION, .now_ms = clock_utc_ms()};
    int word_count = 0;
    for (int i = 1; i < argc && strcmp(argv[i], "--") != 0; i++) {
        if (strcmp(argv[i], "-o") == 0)
            argv[i] = out_word;
    }
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    bool is_good =
        pick_subject(word_count, argv, &choice, &err) && make_report(&words, &choice, path, &err);
    return is_good ? 0 : options_fail(&options, &err);
}
