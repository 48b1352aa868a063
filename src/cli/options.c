#include "cli/options.h"

#include "wane/nearest.h"
#include "wane/text.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#define SPECS_MAX 48

static const struct option_spec *find_spec(const struct options *options, const char *name,
                                           size_t name_length)
{
    for (size_t i = 0; i < options->count; i++) {
        const struct option_spec *spec = &options->specs[i];
        if (strlen(spec->name) == name_length && strncmp(spec->name, name, name_length) == 0)
            return spec;
    }
    return NULL;
}

static bool fail_unknown(const struct options *options, const char *name, size_t name_length,
                         struct error *err)
{
    const char *names[SPECS_MAX];
    size_t count = options->count < SPECS_MAX ? options->count : SPECS_MAX;
    char wrong[64] = "";
    for (size_t i = 0; i < count; i++)
        names[i] = options->specs[i].name;
    if (name_length < sizeof wrong)
        memcpy(wrong, name, name_length);
    const char *nearest = nearest_word(wrong, names, count);
    if (nearest != NULL)
        return error_set(err, ERROR_USAGE, "there is no option --%.*s; did you mean --%s?",
                         (int)name_length, name, nearest);
    return error_set(err, ERROR_USAGE, "there is no option --%.*s; %s --help lists them",
                     (int)name_length, name, options->program);
}

static bool parse_number(const struct option_spec *spec, const char *value, struct error *err)
{
    double number = 0;
    if (!text_parse_double(value, &number))
        return error_set(err, ERROR_USAGE, "--%s wants a number such as %g, not \"%s\"%s",
                         spec->name, spec->min > 0 ? spec->min : 0.5, value,
                         strchr(value, ',') != NULL ? "; use a point, not a comma" : "");
    if (number < spec->min || number > spec->max)
        return error_set(err, ERROR_USAGE, "--%s must lie between %g and %g, not %s", spec->name,
                         spec->min, spec->max, value);
    *spec->number = number;
    return true;
}

static bool parse_integer(const struct option_spec *spec, const char *value, struct error *err)
{
    char *end = NULL;
    errno = 0;
    unsigned long long number = strtoull(value, &end, 10);
    if (value[0] < '0' || value[0] > '9' || *end != '\0' || errno != 0)
        return error_set(err, ERROR_USAGE, "--%s wants a whole number, not \"%s\"", spec->name,
                         value);
    if (spec->max > 0 && ((double)number < spec->min || (double)number > spec->max))
        return error_set(err, ERROR_USAGE, "--%s must lie between %.0f and %.0f, not %s",
                         spec->name, spec->min, spec->max, value);
    *spec->integer = number;
    return true;
}

static bool take_value(const struct option_spec *spec, const char *value, struct error *err)
{
    switch (spec->kind) {
    case OPTION_TEXT:
        *spec->text = value;
        return true;
    case OPTION_NUMBER:
        return parse_number(spec, value, err);
    case OPTION_INTEGER:
        return parse_integer(spec, value, err);
    case OPTION_FLAG:
        break;
    }
    *spec->flag = true;
    return true;
}

/* One option at argv[at], its value perhaps in the next word: *out_used is 1 or 2. */
static bool parse_option(const struct options *options, int argc, char **argv, int at,
                         int *out_used, struct error *err)
{
    const char *name = argv[at] + 2;
    size_t name_length = strcspn(name, "=");
    const char *value = name[name_length] == '=' ? name + name_length + 1 : NULL;
    const struct option_spec *spec = find_spec(options, name, name_length);
    *out_used = 1;
    if (spec == NULL)
        return fail_unknown(options, name, name_length, err);
    if (spec->kind == OPTION_FLAG && value != NULL)
        return error_set(err, ERROR_USAGE, "--%s takes no value", spec->name);
    if (spec->kind != OPTION_FLAG && value == NULL) {
        if (at + 1 >= argc)
            return error_set(err, ERROR_USAGE, "--%s needs a value: --%s %s", spec->name,
                             spec->name, spec->value);
        value = argv[at + 1];
        *out_used = 2;
    }
    return take_value(spec, value, err);
}

bool options_parse(struct options *options, int argc, char **argv, int *out_word_count,
                   struct error *err)
{
    int words = 0;
    int used = 1;
    bool only_words = false;
    for (int at = 1; at < argc; at += used) {
        used = 1;
        if (only_words || argv[at][0] != '-' || argv[at][1] == '\0') {
            argv[words++] = argv[at];
        } else if (strcmp(argv[at], "--") == 0) {
            only_words = true;
        } else if (strcmp(argv[at], "--help") == 0 || strcmp(argv[at], "-h") == 0) {
            options->wants_help = true;
            break;
        } else if (argv[at][1] != '-') {
            return error_set(err, ERROR_USAGE,
                             "there is no option %s; options are whole words, %s --help lists them",
                             argv[at], options->program);
        } else if (!parse_option(options, argc, argv, at, &used, err)) {
            return false;
        }
    }
    *out_word_count = words;
    return true;
}

void options_print_help(const struct options *options, FILE *out)
{
    fprintf(out, "usage: %s %s\n\n%s\n\n", options->program, options->words, options->about);
    for (size_t i = 0; i < options->count; i++) {
        const struct option_spec *spec = &options->specs[i];
        char left[40];
        snprintf(left, sizeof left, "--%s %s", spec->name, spec->value != NULL ? spec->value : "");
        fprintf(out, "  %-22s %s\n", left, spec->help);
    }
}

int options_fail(const struct options *options, const struct error *err)
{
    fprintf(stderr, "%s: %s\n", options->program, err->text);
    return error_exit_status(err->kind);
}
