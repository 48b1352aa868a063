#include "options.h"

#include "wane/nearest.h"
#include "wane/settings.h"

#include <errno.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define CONFIG_BYTES_MAX (1u << 20)
#define KEYS_MAX         64

enum value_kind { VALUE_TEXT, VALUE_NUMBER, VALUE_WHOLE, VALUE_CHANNELS, VALUE_LISTEN, VALUE_YES };

/* Every setting there is: its place in the file, and its word on the command line (or NULL). */
struct setting {
    const char *section, *key, *word;
    enum value_kind kind;
    size_t offset, size;
    double least, most;
};

#define AT(field) offsetof(struct options, field), sizeof((struct options *)0)->field

static const struct setting settings[] = {
    {"input", "name", "--input", VALUE_TEXT, AT(input), 0, 0},
    {"input", "rate_hz", "--rate", VALUE_NUMBER, AT(rate_hz), 1000, 768000},
    {"input", "channels", "--channels", VALUE_WHOLE, AT(channels), 1, 64},
    {"input", "channel", "--channel", VALUE_CHANNELS, AT(channels_heard), 0, 0},
    {"input", "seed", "--seed", VALUE_WHOLE, AT(seed), 0, 9e15},
    {NULL, NULL, "--fast", VALUE_YES, AT(is_fast), 0, 0},
    {"trigger", "over_noise_db", NULL, VALUE_NUMBER, AT(trigger.trigger_db), 6, 60},
    {"trigger", "f_low_hz", NULL, VALUE_NUMBER, AT(trigger.f_low_hz), 1, 400e3},
    {"trigger", "f_high_hz", NULL, VALUE_NUMBER, AT(trigger.f_high_hz), 1, 400e3},
    {"trigger", "hold_off_s", NULL, VALUE_NUMBER, AT(trigger.hold_off_s), 0, 60},
    {"trigger", "window_max_s", NULL, VALUE_NUMBER, AT(trigger.window_max_s), 0.05, 600},
    {"fit", "f_low_hz", NULL, VALUE_NUMBER, AT(fit.f_low_hz), 1, 400e3},
    {"fit", "f_high_hz", NULL, VALUE_NUMBER, AT(fit.f_high_hz), 1, 400e3},
    {"fit", "coupling_hz", NULL, VALUE_NUMBER, AT(fit.coupling_hz), 0, 1000},
    {"fit", "not_exponential", NULL, VALUE_NUMBER, AT(fit.not_exponential), 0.001, 1},
    {"fit", "gliding", NULL, VALUE_NUMBER, AT(fit.gliding), 1e-7, 1},
    {"fit", "modes_max", NULL, VALUE_WHOLE, AT(modes_max), 1, READING_MODES_MAX},
    {"serve", "listen", "--listen", VALUE_LISTEN, 0, 0, 0, 0},
    {"serve", "watchers_max", NULL, VALUE_WHOLE, AT(watchers_max), 1, 1000},
    {"serve", "names", NULL, VALUE_TEXT, AT(names), 0, 0},
    {"serve", "tls_key", NULL, VALUE_TEXT, AT(tls_key), 0, 0},
    {"serve", "tls_certificate", NULL, VALUE_TEXT, AT(tls_certificate), 0, 0},
    {"serve", "invite_valid_s", NULL, VALUE_NUMBER, AT(invite_valid_s), 0.001, 86400},
    {"log", "file", "--log", VALUE_TEXT, AT(log_path), 0, 0},
    {"log", "rejected_waves_per_hour", NULL, VALUE_WHOLE, AT(rejected_waves_per_hour), 0, 1e6},
    {"watch", "silent_minutes", NULL, VALUE_NUMBER, AT(silent_minutes), 0, 1e5},
    {"log", "keep_samples_days", NULL, VALUE_NUMBER, AT(samples_days), 0, 1e5},
    {"log", "keep_strikes_days", NULL, VALUE_NUMBER, AT(strikes_days), 0, 1e5},
    {"log", "megabytes_max", NULL, VALUE_NUMBER, AT(log_megabytes), 0, 1e9},
};
#define SETTING_COUNT (sizeof settings / sizeof settings[0])

const char *options_help(void)
{
    return "usage: waned [--input simulated | RECORDING [--fast] | CARD] [--rate HZ]\n"
           "             [--channels N] [--channel K[,K...]] [--listen ADDRESS:PORT]\n"
           "             [--log FILE] [--config FILE] [--seed N]\n"
           "Listens for strikes, reads their modes, keeps them in a log, and shows them to any\n"
           "browser at the address that it prints. `wane inputs` lists the sound cards.\n"
           "  --input     the simulated bench, a recording (a path), or a card by its name\n"
           "  --fast      a recording as fast as it can be read\n"
           "  --channel   which channels to hear, from 1; the first without this word\n"
           "  --listen    127.0.0.1:9263 without this word; port 0 takes a free one. 0.0.0.0:9263 "
           "lets\n"
           "              in from other machines whom `wane invite` invites, by TLS\n"
           "  --log       the log's file; else log.sqlite (demo.sqlite for the simulated bench)\n"
           "              under $XDG_STATE_HOME/wane\n"
           "  --config    settings; else $XDG_CONFIG_HOME/wane/waned.ini or /etc/wane/waned.ini\n";
}

/* --- values --- */

static bool set_number(const struct setting *setting, const char *value, double *out,
                       struct error *err)
{
    double number = 0;
    if (!settings_number(value, setting->least, setting->most, &number, err))
        return false;
    if (setting->kind == VALUE_WHOLE && number != (double)(long long)number)
        return error_set(err, ERROR_USAGE, "%s: must be a whole number", value);
    *out = number;
    return true;
}

/* "1" or "1,3". */
static bool set_channels(const char *value, unsigned *out, struct error *err)
{
    unsigned bits = 0;
    const char *at = value;
    for (;;) {
        char *end = NULL;
        long channel = strtol(at, &end, 10);
        if (end == at || channel < 1 || channel > OPTIONS_CHANNELS_MAX ||
            (*end != ',' && *end != '\0'))
            return error_set(err, ERROR_USAGE,
                             "%s: must be channels from 1 to %d with commas between", value,
                             OPTIONS_CHANNELS_MAX);
        bits |= 1u << (channel - 1);
        if (*end == '\0')
            break;
        at = end + 1;
    }
    *out = bits;
    return true;
}

/* "127.0.0.1:9263", "[::1]:9263". */
static bool set_listen(const char *value, struct options *options, struct error *err)
{
    const char *colon = strrchr(value, ':');
    double port = 0;
    size_t length = colon != NULL ? (size_t)(colon - value) : 0;
    bool has_brackets = length > 2 && value[0] == '[' && value[length - 1] == ']';
    if (has_brackets) {
        value++;
        length -= 2;
    }
    if (length == 0 || length >= sizeof options->address || !text_parse_double(colon + 1, &port) ||
        port < 0 || port > 65535 || port != (double)(unsigned)port)
        return error_set(err, ERROR_USAGE, "%s: must be an address and a port, like 127.0.0.1:9263",
                         value);
    memcpy(options->address, value, length);
    options->address[length] = '\0';
    if (strcmp(options->address, "localhost") == 0)
        snprintf(options->address, sizeof options->address, "127.0.0.1");
    options->port = (unsigned)port;
    return true;
}

static bool set_value(const struct setting *setting, const char *value, struct options *options,
                      struct error *err)
{
    char *field = (char *)options + setting->offset;
    double number = 0;
    unsigned bits = 0;
    switch (setting->kind) {
    case VALUE_TEXT:
        if (value[0] == '\0' || strlen(value) >= setting->size)
            return error_set(err, ERROR_USAGE, "%.60s: must have 1 to %zu bytes", value,
                             setting->size - 1);
        memcpy(field, value, strlen(value) + 1);
        return true;
    case VALUE_NUMBER:
    case VALUE_WHOLE:
        if (!set_number(setting, value, &number, err))
            return false;
        memcpy(field, &number, sizeof number);
        return true;
    case VALUE_CHANNELS:
        if (!set_channels(value, &bits, err))
            return false;
        memcpy(field, &bits, sizeof bits);
        return true;
    case VALUE_LISTEN:
        return set_listen(value, options, err);
    case VALUE_YES:
        options->is_fast = true;
        return true;
    }
    return true;
}

/* --- the settings file --- */

struct config {
    struct options *options;
};

/* For a wrong key: those of its section, or of all when there is no such section. */
static bool refuse_key(const struct settings_entry *entry, struct error *err)
{
    const char *words[SETTING_COUNT];
    size_t count = 0;
    for (int pass = 0; pass < 2 && count == 0; pass++) {
        for (size_t i = 0; i < SETTING_COUNT; i++) {
            if (settings[i].section != NULL &&
                (pass == 1 || strcmp(settings[i].section, entry->section) == 0))
                words[count++] = settings[i].key;
        }
    }
    return settings_refuse_word("key", entry->key, words, count, err);
}

static bool is_section(const char *word)
{
    for (size_t i = 0; i < SETTING_COUNT; i++) {
        if (settings[i].section != NULL && strcmp(settings[i].section, word) == 0)
            return true;
    }
    return false;
}

static bool take_entry(void *user, const struct settings_entry *entry, struct error *err)
{
    static const char *const sections[] = {"input", "trigger", "fit", "serve", "log"};
    struct config *config = user;
    if (!is_section(entry->section))
        return settings_refuse_word("section", entry->section, sections,
                                    sizeof sections / sizeof sections[0], err);
    for (size_t i = 0; i < SETTING_COUNT; i++) {
        if (settings[i].section == NULL || strcmp(settings[i].section, entry->section) != 0 ||
            strcmp(settings[i].key, entry->key) != 0)
            continue;
        if (set_value(&settings[i], entry->value, config->options, err))
            return true;
        error_prefix(err, "%s", entry->key);
        return false;
    }
    return refuse_key(entry, err);
}

/* The whole file; *out_text is the caller's to free. */
static bool read_file(const char *path, char **out_text, size_t *out_size, struct error *err)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return error_set(err, ERROR_USAGE, "%s: %s", path, strerror(errno));
    char *text = malloc(CONFIG_BYTES_MAX + 1);
    size_t size = text != NULL ? fread(text, 1, CONFIG_BYTES_MAX + 1, file) : 0;
    bool is_read = text != NULL && !ferror(file) && size <= CONFIG_BYTES_MAX;
    if (!is_read) {
        error_set(err, ERROR_USAGE, "%s: %s", path,
                  size > CONFIG_BYTES_MAX ? "too large for a settings file"
                                          : "cannot be read; is it a folder?");
        free(text);
    }
    fclose(file);
    if (!is_read)
        return false;
    *out_text = text;
    *out_size = size;
    return true;
}

static void read_config(const char *path, struct options *options, struct text *problems)
{
    struct config config = {.options = options};
    struct error err;
    char *text = NULL;
    size_t size = 0;
    if (!read_file(path, &text, &size, &err)) {
        text_appendf(problems, "%s\n", err.text);
        return;
    }
    (void)settings_read(path, text, size, take_entry, &config, problems, &err);
    free(text);
    snprintf(options->config_path, sizeof options->config_path, "%s", path);
}

static bool is_readable(const char *path)
{
    FILE *file = fopen(path, "r");
    if (file != NULL)
        fclose(file);
    return file != NULL;
}

/* $XDG_CONFIG_HOME (else ~/.config), then /etc: the first that exists. */
static void read_default_config(struct options *options, struct text *problems)
{
    char path[LOG_PATH_MAX];
    const char *folder = getenv("XDG_CONFIG_HOME");
    const char *home = getenv("HOME");
    int length = -1;
    if (folder != NULL && folder[0] == '/')
        length = snprintf(path, sizeof path, "%s/wane/waned.ini", folder);
    else if (home != NULL && home[0] == '/')
        length = snprintf(path, sizeof path, "%s/.config/wane/waned.ini", home);
    if (length > 0 && length < (int)sizeof path && is_readable(path))
        read_config(path, options, problems);
    else if (is_readable("/etc/wane/waned.ini"))
        read_config("/etc/wane/waned.ini", options, problems);
}

/* --- the command line --- */

static const struct setting config_word = {NULL, NULL, "--config", VALUE_TEXT, AT(config_path),
                                           0,    0};

static const struct setting *find_word(const char *word, size_t length)
{
    for (size_t i = 0; i < SETTING_COUNT; i++) {
        if (settings[i].word != NULL && strlen(settings[i].word) == length &&
            strncmp(settings[i].word, word, length) == 0)
            return &settings[i];
    }
    return length == strlen(config_word.word) && strncmp(config_word.word, word, length) == 0
               ? &config_word
               : NULL;
}

static void tell_wrong_word(const char *word, struct text *problems)
{
    const char *words[KEYS_MAX] = {"--help", "--version", "--config"};
    size_t count = 3;
    for (size_t i = 0; i < SETTING_COUNT && count < KEYS_MAX; i++) {
        if (settings[i].word != NULL)
            words[count++] = settings[i].word;
    }
    const char *near = nearest_word(word, words, count);
    if (near != NULL)
        text_appendf(problems, "waned: no such word: %s; the nearest is %s\n", word, near);
    else
        text_appendf(problems, "waned: no such word: %s; --help lists them\n", word);
}

/* One pass over the words: --config alone, or all others. */
static void read_words(int argc, char **argv, bool is_for_config, struct options *options,
                       struct text *problems)
{
    struct error err;
    for (int i = 1; i < argc; i++) {
        const char *word = argv[i];
        if (strcmp(word, "--help") == 0 || strcmp(word, "-h") == 0) {
            options->wants_help = true;
            continue;
        }
        if (strcmp(word, "--version") == 0) {
            options->wants_version = true;
            continue;
        }
        size_t length = strcspn(word, "=");
        const struct setting *setting = find_word(word, length);
        if (setting == NULL) {
            if (!is_for_config)
                tell_wrong_word(word, problems);
            continue;
        }
        const char *value = word[length] == '=' ? word + length + 1 : NULL;
        if (value == NULL && setting->kind != VALUE_YES) {
            if (i + 1 == argc) {
                if (!is_for_config)
                    text_appendf(problems, "waned: %s: a value is wanted after it\n",
                                 setting->word);
                continue;
            }
            value = argv[++i];
        }
        if ((setting == &config_word) != is_for_config)
            continue;
        if (!set_value(setting, value, options, &err))
            text_appendf(problems, "waned: %s: %s\n", setting->word, err.text);
    }
}

bool options_read(int argc, char **argv, struct options *out_options, struct text *out_problems)
{
    struct options options = {.address = "127.0.0.1", .port = 9263, .rejected_waves_per_hour = 60};
    read_words(argc, argv, true, &options, out_problems);
    char path[LOG_PATH_MAX];
    memcpy(path, options.config_path, sizeof path);
    options.config_path[0] = '\0';
    if (!options.wants_help && !options.wants_version) {
        if (path[0] != '\0')
            read_config(path, &options, out_problems);
        else
            read_default_config(&options, out_problems);
    }
    read_words(argc, argv, false, &options, out_problems);
    options.fit.modes_max = (unsigned)options.modes_max;
    *out_options = options;
    return out_problems->length == 0;
}
