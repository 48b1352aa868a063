/* `wane export`: writes a selection of the log out, as CSV or JSON. */
#include "cli/commands.h"

#include "cli/log_file.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static bool export_to(struct log_reader *reader, const struct log_selection *selection,
                      enum log_export_format format, FILE *file, const char *name,
                      struct error *err)
{
    struct log_export *export = log_export_begin(reader, selection, format, err);
    struct text piece = {0};
    bool is_done = false;
    bool is_good = export != NULL;
    while (is_good && !is_done) {
        text_clear(&piece);
        is_good = log_export_next(export, &piece, &is_done, err);
        if (is_good && fwrite(piece.data, 1, piece.length, file) != piece.length)
            is_good = error_set(err, ERROR_STORAGE, "%s: %s", name, strerror(errno));
    }
    if (is_good && fflush(file) != 0)
        is_good = error_set(err, ERROR_STORAGE, "%s: %s", name, strerror(errno));
    text_done(&piece);
    log_export_end(export);
    return is_good;
}

/* Under another name first: a file of that name is whole or not there. */
static bool export_to_file(struct log_reader *reader, const struct log_selection *selection,
                           enum log_export_format format, const char *path, struct error *err)
{
    char unfinished[LOG_PATH_MAX];
    if (snprintf(unfinished, sizeof unfinished, "%s.part", path) >= (int)sizeof unfinished)
        return error_set(err, ERROR_USAGE, "the file's name is too long");
    FILE *file = fopen(unfinished, "wb");
    if (file == NULL)
        return error_set(err, ERROR_STORAGE, "%s: cannot be made: %s", unfinished, strerror(errno));
    bool is_good = export_to(reader, selection, format, file, unfinished, err);
    if (fclose(file) != 0 && is_good)
        is_good = error_set(err, ERROR_STORAGE, "%s: %s", unfinished, strerror(errno));
    if (is_good && rename(unfinished, path) != 0)
        is_good = error_set(err, ERROR_STORAGE, "%s: %s", path, strerror(errno));
    if (!is_good)
        (void)unlink(unfinished);
    return is_good;
}

/* By the words, else by the file's ending, else CSV. */
static bool pick_format(bool csv, bool json, const char *path, enum log_export_format *out_format,
                        struct error *err)
{
    if (csv && json)
        return error_set(err, ERROR_USAGE, "--csv or --json, not both");
    size_t length = path == NULL ? 0 : strlen(path);
    bool ends_in_json = length > 5 && strcmp(path + length - 5, ".json") == 0;
    *out_format = json || (ends_in_json && !csv) ? LOG_EXPORT_JSON : LOG_EXPORT_CSV;
    return true;
}

/* The one short option of wane, because the fingers know it: -o FILE. */
static void spell_out(int argc, char **argv)
{
    static char out_word[] = "--out";
    for (int i = 1; i < argc && strcmp(argv[i], "--") != 0; i++) {
        if (strcmp(argv[i], "-o") == 0)
            argv[i] = out_word;
    }
}

int cmd_export(int argc, char **argv)
{
    struct log_words words = {0};
    bool csv = false;
    bool json = false;
    const char *path = NULL;
    struct option_spec specs[LOG_WORDS_COUNT + 3];
    log_words_specs(&words, specs);
    specs[LOG_WORDS_COUNT] =
        (struct option_spec){"csv", OPTION_FLAG, NULL, "one row a mode", .flag = &csv};
    specs[LOG_WORDS_COUNT + 1] = (struct option_spec){
        "json", OPTION_FLAG, NULL, "one document, its strikes as GET /strikes/ID gives them",
        .flag = &json};
    specs[LOG_WORDS_COUNT + 2] =
        (struct option_spec){"out", OPTION_TEXT, "FILE",
                             "or -o FILE: write to this file (standard output)", .text = &path};
    struct options options = {
        .program = "wane export",
        .words = "[--csv | --json] [OPTIONS]",
        .about = "Writes strikes of the log out, oldest first, with units and uncertainties.",
        .specs = specs,
        .count = LOG_WORDS_COUNT + 3,
    };
    struct error err = {0};
    int word_count = 0;
    struct log_selection selection;
    enum log_export_format format = LOG_EXPORT_CSV;
    spell_out(argc, argv);
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    bool is_good =
        word_count == 0 || error_set(&err, ERROR_USAGE, "\"%.40s\" is one word too many", argv[0]);
    is_good = is_good && pick_format(csv, json, path, &format, &err) &&
              log_words_selection(&words, &selection, &err);
    struct log_reader *reader = is_good ? log_words_open(&words, &err) : NULL;
    if (reader != NULL) {
        selection.limit = (unsigned)words.limit;
        is_good = path == NULL || strcmp(path, "-") == 0
                      ? export_to(reader, &selection, format, stdout, "standard output", &err)
                      : export_to_file(reader, &selection, format, path, &err);
    }
    is_good = is_good && reader != NULL;
    log_reader_close(reader);
    return is_good ? 0 : options_fail(&options, &err);
}
