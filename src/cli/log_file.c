#include "cli/log_file.h"

#include "wane/settings.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define CONFIG_BYTES_MAX 65536

void log_words_specs(struct log_words *words, struct option_spec *specs)
{
    const struct option_spec filled[LOG_WORDS_COUNT] = {
        {"log", OPTION_TEXT, "FILE", "the log (that of waned)", .text = &words->log},
        {"config", OPTION_TEXT, "FILE", "waned's settings, which name the log",
         .text = &words->config},
        {"demo", OPTION_FLAG, NULL, "the log of the simulated bench", .flag = &words->demo},
        {"verdict", OPTION_TEXT, "WORDS", "good, doubtful, rejected, or several with commas",
         .text = &words->verdict},
        {"series", OPTION_TEXT, "N", "strikes of this series", .text = &words->series},
        {"part", OPTION_TEXT, "NAME", "strikes of this part", .text = &words->part},
        {"specimen", OPTION_TEXT, "NAME", "strikes of this specimen", .text = &words->specimen},
        {"from", OPTION_TEXT, "TIME", "from this time on: 2026-12-01, or 2026-12-01T14:07:00Z",
         .text = &words->from},
        {"to", OPTION_TEXT, "TIME", "before this time", .text = &words->to},
        {"limit", OPTION_INTEGER, "N", "the newest so many", .integer = &words->limit, 1, 1e9},
    };
    memcpy(specs, filled, sizeof filled);
}

bool log_words_selection(const struct log_words *words, struct log_selection *out_selection,
                         struct error *err)
{
    const struct {
        const char *word, *value;
    } pairs[] = {
        {"verdict", words->verdict},   {"series", words->series}, {"part", words->part},
        {"specimen", words->specimen}, {"from", words->from},     {"to", words->to},
    };
    struct log_selection selection = {0};
    for (size_t i = 0; i < sizeof pairs / sizeof pairs[0]; i++) {
        if (pairs[i].value != NULL &&
            !log_selection_set(&selection, pairs[i].word, pairs[i].value, err))
            return false;
    }
    *out_selection = selection;
    return true;
}

/* ---- where the log is ---- */

static bool take_log_file(void *user, const struct settings_entry *entry, struct error *err)
{
    (void)err;
    char *path = user;
    if (strcmp(entry->section, "log") == 0 && strcmp(entry->key, "file") == 0)
        (void)snprintf(path, LOG_PATH_MAX, "%s", entry->value);
    return true;
}

/* Only [log] file matters here; waned itself judges the rest. */
static bool read_config(const char *path, char *out_log_path, struct error *err)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return error_set(err, ERROR_USAGE, "%s: cannot be read: %s", path, strerror(errno));
    char *text = malloc(CONFIG_BYTES_MAX);
    size_t size = text == NULL ? 0 : fread(text, 1, CONFIG_BYTES_MAX, file);
    bool is_good = text != NULL && ferror(file) == 0 && size < CONFIG_BYTES_MAX;
    (void)fclose(file);
    if (!is_good)
        error_set(err, ERROR_USAGE, "%s: cannot be read as settings", path);
    is_good = is_good && settings_read(path, text, size, take_log_file, out_log_path, NULL, err);
    free(text);
    return is_good;
}

/* The daemon's own settings file, where there is one: "" when not. */
static void find_config(char *out_path, size_t out_size)
{
    const char *folder = getenv("XDG_CONFIG_HOME");
    const char *home = getenv("HOME");
    out_path[0] = '\0';
    if (folder != NULL && folder[0] == '/')
        (void)snprintf(out_path, out_size, "%s/wane/waned.ini", folder);
    else if (home != NULL && home[0] != '\0')
        (void)snprintf(out_path, out_size, "%s/.config/wane/waned.ini", home);
    if (out_path[0] != '\0' && access(out_path, R_OK) == 0)
        return;
    (void)snprintf(out_path, out_size, "/etc/wane/waned.ini");
    if (access(out_path, R_OK) != 0)
        out_path[0] = '\0';
}

bool log_words_path(const struct log_words *words, char *out_path, struct error *err)
{
    char config[LOG_PATH_MAX] = "";
    out_path[0] = '\0';
    if (words->log != NULL) {
        (void)snprintf(out_path, LOG_PATH_MAX, "%s", words->log);
        return true;
    }
    if (words->config != NULL)
        (void)snprintf(config, sizeof config, "%s", words->config);
    else if (!words->demo)
        find_config(config, sizeof config);
    if (config[0] != '\0' && !read_config(config, out_path, err))
        return false;
    return out_path[0] != '\0' || log_default_path(words->demo, out_path, LOG_PATH_MAX, err);
}

struct log_reader *log_words_open(const struct log_words *words, struct error *err)
{
    char path[LOG_PATH_MAX];
    char demo[LOG_PATH_MAX];
    if (!log_words_path(words, path, err))
        return NULL;
    struct log_reader *reader = log_reader_open(path, err);
    if (reader == NULL && err->kind == ERROR_NOT_FOUND && words->log == NULL && !words->demo &&
        log_default_path(true, demo, sizeof demo, NULL) && access(demo, R_OK) == 0)
        error_set(err, ERROR_NOT_FOUND,
                  "%s: there is no log yet; the simulated bench's is shown with --demo", path);
    return reader;
}
