/* `wane`, the tool at the shell: one table of commands. */
#include "cli/commands.h"

#include "wane/input.h"
#include "wane/nearest.h"

#include <stdio.h>
#include <string.h>

static const struct {
    const char *name;
    int (*run)(int argc, char **argv);
    const char *help;
} commands[] = {
    {"read", cmd_read, "read every strike in recordings"},
    {"inputs", cmd_inputs, "list the sound-card inputs, and the words for them"},
    {"log", cmd_log, "look into a log"},
    {"export", cmd_export, "write a log out"},
    {"series", cmd_series, "list, show and compare series of strikes"},
    {"report", cmd_report, "make a page on a series or a strike, ready to print"},
    {"invite", cmd_invite, "let a browser in from another machine, and shut it out"},
    {"simulate", cmd_simulate, "write a recording of the simulated bench, and its truth"},
};

#define COMMAND_COUNT (sizeof commands / sizeof commands[0])

static void print_help(FILE *out)
{
    fputs("usage: wane COMMAND [OPTIONS] ...\n\n"
          "Reads ring-downs: which modes ring, how fast each dies, how sure that is.\n\n",
          out);
    for (size_t i = 0; i < COMMAND_COUNT; i++)
        fprintf(out, "  %-10s %s\n", commands[i].name, commands[i].help);
    fputs("\n`wane COMMAND --help` tells more. The daemon with its page is `waned`.\n", out);
}

static int fail_unknown(const char *word)
{
    const char *names[COMMAND_COUNT];
    for (size_t i = 0; i < COMMAND_COUNT; i++)
        names[i] = commands[i].name;
    const char *nearest = nearest_word(word, names, COMMAND_COUNT);
    if (nearest != NULL)
        fprintf(stderr, "wane: there is no command \"%s\"; did you mean \"%s\"?\n", word, nearest);
    else
        fprintf(stderr, "wane: there is no command \"%s\"; wane --help lists them\n", word);
    return 2;
}

int main(int argc, char **argv)
{
    if (input_is_capture_process(argc, argv))
        return input_capture_main(argc, argv);
    if (argc < 2) {
        print_help(stderr);
        return 2;
    }
    if (strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "-h") == 0 ||
        strcmp(argv[1], "help") == 0) {
        print_help(stdout);
        return 0;
    }
    if (strcmp(argv[1], "--version") == 0) {
        printf("wane %s\n", WANE_VERSION);
        return 0;
    }
    for (size_t i = 0; i < COMMAND_COUNT; i++) {
        if (strcmp(argv[1], commands[i].name) == 0)
            return commands[i].run(argc - 1, argv + 1);
    }
    return fail_unknown(argv[1]);
}
