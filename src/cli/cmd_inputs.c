/* `wane inputs`: which sound-card inputs there are, and the words that choose each. */
#include "commands.h"
#include "options.h"
#include "wane/input.h"
#include "wane/text.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static void append_rates(struct text *text, const struct input_card *card)
{
    if (card->is_behind_server) {
        text_appendf(
            text, "any, resampled where the card has another; %.9g Hz unless --rate says otherwise",
            card->rate_hz);
        return;
    }
    for (unsigned i = 0; i < card->rate_count; i++)
        text_appendf(text, "%s%.9g", i > 0 ? ", " : "", card->rates_hz[i]);
    if (card->rate_count > 0)
        text_appendf(text, " Hz; %.9g Hz unless --rate says otherwise", card->rate_hz);
    else
        text_append(text, "not known");
}

static void append_card(struct text *text, const struct input_card *card)
{
    text_appendf(text, "%s%s\n", card->name, card->is_default ? "  (the system's default)" : "");
    text_appendf(text, "    input = %s\n", card->words);
    text_appendf(text, "    host      %s%s\n", card->host,
                 card->is_behind_server ? ", through a sound server or plug-in" : ", hardware");
    if (card->channels > 0)
        text_appendf(text, "    channels  up to %d\n", card->channels);
    text_append(text, "    rates     ");
    append_rates(text, card);
    text_append(text, "\n");
    for (unsigned i = 0; i < card->warning_count; i++)
        text_appendf(text, "    note      %s\n", card->warnings[i]);
}

static void append_json(struct text *text, const struct input_card *card)
{
    struct json_writer json = {.text = text};
    json_open_object(&json, NULL);
    json_string(&json, "name", card->name);
    json_string(&json, "input", card->words);
    json_string(&json, "host", card->host);
    json_bool(&json, "behind_server", card->is_behind_server);
    json_bool(&json, "default", card->is_default);
    if (card->channels > 0)
        json_integer(&json, "channels", card->channels);
    else
        json_null(&json, "channels");
    json_number(&json, "rate_hz", card->rate_hz > 0.0 ? card->rate_hz : (double)NAN, 9);
    json_open_array(&json, "rates_hz");
    for (unsigned i = 0; i < card->rate_count; i++)
        json_number(&json, NULL, card->rates_hz[i], 9);
    json_close_array(&json);
    json_open_array(&json, "warnings");
    for (unsigned i = 0; i < card->warning_count; i++)
        json_string(&json, NULL, card->warnings[i]);
    json_close_array(&json);
    json_close_object(&json);
    text_append(text, "\n");
}

static int print(const struct options *options, const struct input_card *cards, size_t count,
                 bool is_json)
{
    struct text text = {0};
    for (size_t i = 0; i < count; i++) {
        if (is_json)
            append_json(&text, &cards[i]);
        else
            append_card(&text, &cards[i]);
    }
    if (text.failed) {
        struct error err = {.kind = ERROR_MEMORY, .text = "out of memory"};
        text_done(&text);
        return options_fail(options, &err);
    }
    if (text.data != NULL)
        (void)fwrite(text.data, 1, text.length, stdout);
    text_done(&text);
    if (count == 0)
        (void)fputs("wane inputs: no sound-card input on this machine; `--input simulated` is the "
                    "bench that needs none\n",
                    stderr);
    return EXIT_SUCCESS;
}

int cmd_inputs(int argc, char **argv)
{
    bool is_json = false;
    const struct option_spec specs[] = {
        {"json", OPTION_FLAG, NULL, "one JSON object a line", .flag = &is_json},
    };
    struct options options = {
        .program = "wane inputs",
        .words = "[--json]",
        .about = "Lists the sound-card inputs, and the words that choose each in a config file or "
                 "after --input.",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0]};
    struct error err = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return EXIT_SUCCESS;
    }
    if (word_count > 0) {
        (void)error_set(&err, ERROR_USAGE, "`%s` is too much: it takes no words", argv[0]);
        return options_fail(&options, &err);
    }
    struct input_card *cards = NULL;
    size_t count = 0;
    if (!input_list_cards(&cards, &count, &err))
        return options_fail(&options, &err);
    int status = print(&options, cards, count, is_json);
    free(cards);
    return status;
}
