/* `wane series`: lists the series of a log, shows one, compares two. */
#include <jansson.h> /* before text.h, which renames what both define */

#include "cli/commands.h"

#include "cli/log_shelf.h"
#include "cli/table.h"

#include <errno.h>
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define WIDTH_LABEL 8
#define WIDTH_NAME  8
#define WIDTH_VALUE 28
#define WIDTH_SD    12

static const char *const names[QUANTITY_COUNT] = {"f", "decay", "Q", "zeta", "T60"};
static const char *const units[QUANTITY_COUNT] = {"Hz", "1/s", "", "", "s"};

static bool write_out(const struct text *text, struct error *err)
{
    if (text->failed)
        return error_set(err, ERROR_MEMORY, "out of memory");
    if (fwrite(text->data, 1, text->length, stdout) != text->length || fflush(stdout) != 0)
        return error_set(err, ERROR_STORAGE, "standard output: %s", strerror(errno));
    return true;
}

/* --- list --- */

static const char *text_of(json_t *object, const char *key)
{
    const char *value = json_string_value(json_object_get(object, key));
    return value != NULL ? value : "-";
}

static void append_series_row(struct text *text, json_t *series)
{
    char number[24];
    (void)snprintf(number, sizeof number, "%" JSON_INTEGER_FORMAT,
                   json_integer_value(json_object_get(series, "id")));
    table_text(text, number, 8);
    table_text(text, text_of(series, "opened"), 26);
    table_text(text, json_is_null(json_object_get(series, "closed")) ? "open" : "closed", 8);
    (void)snprintf(number, sizeof number, "%" JSON_INTEGER_FORMAT,
                   json_integer_value(json_object_get(series, "strikes")));
    table_text(text, number, 9);
    table_text(text, text_of(series, "part"), 16);
    table_text(text, text_of(series, "specimen"), 12);
    table_text(text, text_of(series, "name"), 0);
    table_end_line(text);
}

static bool list_series(struct log_reader *reader, struct text *out, struct error *err)
{
    struct text objects = {0}, array = {0};
    int64_t next = 0;
    bool is_good = log_list_series_json(reader, 0, LOG_PAGE_MAX, &objects, &next, err);
    text_append(&array, "[");
    text_append(&array, objects.data != NULL ? objects.data : "");
    text_append(&array, "]");
    json_t *list = is_good && array.data != NULL ? json_loads(array.data, 0, NULL) : NULL;
    table_text(out, "series", 8);
    table_text(out, "opened", 26);
    table_text(out, "", 8);
    table_text(out, "strikes", 9);
    table_text(out, "part", 16);
    table_text(out, "specimen", 12);
    text_append(out, "name\n");
    for (size_t i = 0; i < json_array_size(list); i++)
        append_series_row(out, json_array_get(list, i));
    if (next > 0)
        text_append(out, "(and older ones)\n");
    json_decref(list);
    text_done(&objects);
    text_done(&array);
    return is_good;
}

/* --- show --- */

static void append_stat(struct text *out, const struct series_mode *mode, enum quantity quantity)
{
    const struct series_stat *stat = &mode->stats[quantity];
    char words[40];
    table_text(out, mode->label, WIDTH_LABEL);
    (void)snprintf(words, sizeof words, "%s%s%s", names[quantity],
                   units[quantity][0] != '\0' ? " " : "", units[quantity]);
    table_text(out, words, 12);
    (void)snprintf(words, sizeof words, "%u", mode->n);
    table_text(out, words, 5);
    table_value(out, stat->spread.mean, stat->spread.half_width, WIDTH_VALUE);
    (void)snprintf(words, sizeof words, "%.3g", stat->spread.sd);
    table_text(out, isfinite(stat->spread.sd) ? words : "-", WIDTH_SD);
    (void)snprintf(words, sizeof words, "%.3g", stat->within_u);
    table_text(out, isfinite(stat->within_u) ? words : "-", WIDTH_SD);
    if (isfinite(stat->ratio))
        table_text(out, stat->ratio > 2 ? "tapping" : "noise", 9);
    if (stat->odd > 0)
        text_appendf(out, "%u odd ", stat->odd);
    if (stat->has_trend)
        text_append(out, "moves along the series ");
    if (stat->has_force)
        text_append(out, "goes with the force ");
    table_end_line(out);
}

static void append_limit(struct text *out, const struct limit_result *limit)
{
    char words[80];
    const char *what = limit->kind == LIMIT_SPLIT    ? "difference"
                       : limit->kind == LIMIT_SPREAD ? "spread"
                                                     : "";
    (void)snprintf(words, sizeof words, "%s %s", what,
                   limit->kind == LIMIT_SPLIT ? "Hz" : names[limit->quantity]);
    table_text(out, limit->label, WIDTH_LABEL);
    table_text(out, what[0] == '\0' ? names[limit->quantity] : words, 18);
    table_value(out, limit->value, limit->half_width, WIDTH_VALUE);
    const char *low = limit->range.has_low ? "" : "-", *high = limit->range.has_high ? "" : "-";
    (void)snprintf(words, sizeof words, "%.*g", low[0] == '\0' ? 9 : 1, limit->range.low);
    table_text(out, low[0] == '\0' ? words : low, 12);
    (void)snprintf(words, sizeof words, "%.*g", high[0] == '\0' ? 9 : 1, limit->range.high);
    table_text(out, high[0] == '\0' ? words : high, 12);
    const char *decision = decision_name(limit->decision);
    text_append(out, decision != NULL ? decision : "-");
    text_append(out, "\n");
}

static void append_constants(struct text *out, const struct tally *tally)
{
    struct ring rings[READING_MODES_MAX] = {{{0, 0}, {0, 0}, 0}};
    struct part_constant constants[PART_CONSTANTS_MAX];
    for (unsigned i = 0; tally->has_part && i < tally->part.mode_count; i++) {
        for (unsigned k = 0; k < tally->summary.mode_count; k++) {
            if (strcmp(tally->part.modes[i].label, tally->summary.modes[k].label) == 0)
                rings[i] = ring_of_series(&tally->summary.modes[k], tally->clock_u_ppm);
        }
    }
    unsigned count = tally->has_part ? part_constants(&tally->part, rings, constants) : 0;
    for (unsigned i = 0; i < count; i++) {
        if (i == 0)
            text_append(out, "\nconstant                  value ± u\n");
        table_text(out, constants[i].name, 26);
        if (constants[i].is_known) {
            const char *unit = NULL;
            struct measured shown = constant_for_people(&constants[i], &unit);
            text_append_measured(out, shown.value, shown.u, 2);
            text_append(out, " ± ");
            text_append_measured(out, shown.u, shown.u, 2);
            text_appendf(out, " %s  ", unit);
        }
        table_text(out, constants[i].constant.remark, 0);
        table_end_line(out);
    }
}

static void append_stop(struct text *out, const struct series_summary *summary)
{
    if (summary->more == 0)
        text_append(out, "\nEnough: all that is wanted is known.\n");
    else if (summary->more >= SERIES_MORE_MAX)
        text_appendf(out, "\n%d more strikes or over: mend the set-up first.\n", SERIES_MORE_MAX);
    else if (summary->more > 0)
        text_appendf(out, "\nMore strikes wanted: %d\n", summary->more);
}

static void append_series(struct text *out, const struct tally *tally)
{
    const struct series_summary *summary = &tally->summary;
    const struct series_count *count = &summary->count;
    text_appendf(
        out, "series %" PRId64 ": %u strikes, %u count, %u doubtful, %u rejected, %u set aside\n",
        tally->id, count->strikes, count->counted, count->doubtful, count->rejected,
        count->set_aside);
    if (tally->part_problem[0] != '\0')
        text_appendf(out, "part sheet not used: %s\n", tally->part_problem);
    text_append(out, "\n");
    table_text(out, "mode", WIDTH_LABEL);
    table_text(out, "figure", 12);
    table_text(out, "n", 5);
    table_text(out, "mean ± 95 % half-width", WIDTH_VALUE);
    table_text(out, "sd", WIDTH_SD);
    table_text(out, "u of one", WIDTH_SD);
    text_append(out, "limited by\n");
    for (unsigned i = 0; i < summary->mode_count; i++) {
        append_stat(out, &summary->modes[i], QUANTITY_F_HZ);
        append_stat(out, &summary->modes[i], QUANTITY_Q);
        append_stat(out, &summary->modes[i], QUANTITY_T60_S);
    }
    if (summary->limit_count > 0)
        text_append(out, "\nmode    limit             found                       "
                         "low         high        decision\n");
    for (unsigned i = 0; i < summary->limit_count; i++)
        append_limit(out, &summary->limits[i]);
    append_constants(out, tally);
    append_stop(out, summary);
}

/* --- compare --- */

static void append_difference(struct text *out, const struct mode_difference *found)
{
    char words[24];
    const struct sample_difference *difference = &found->difference;
    (void)snprintf(words, sizeof words, "%s%s%s", names[found->quantity],
                   units[found->quantity][0] != '\0' ? " " : "", units[found->quantity]);
    table_text(out, found->label, WIDTH_LABEL);
    table_text(out, words, 12);
    table_value(out, difference->difference, difference->half_width, WIDTH_VALUE);
    (void)snprintf(words, sizeof words, "%.7g", difference->ratio);
    table_text(out, words, 14);
    (void)snprintf(words, sizeof words, "%.2g", difference->p);
    table_text(out, words, 10);
    text_append(out, found->is_more ? "more than strikes differ among themselves\n"
                                    : "no more than strikes differ among themselves\n");
}

static void append_comparison(struct text *out, const struct tally *first,
                              const struct tally *second)
{
    struct mode_difference differences[SERIES_TRACKS_MAX * QUANTITY_COUNT];
    unsigned count = series_compare(&first->summary, &second->summary, differences);
    text_appendf(out, "series %" PRId64 " less series %" PRId64 " (Welch, 95 %%)\n\n", second->id,
                 first->id);
    if (count == 0) {
        text_append(out, "They share no mode that both have twice or more.\n");
        return;
    }
    table_text(out, "mode", WIDTH_LABEL);
    table_text(out, "figure", 12);
    table_text(out, "difference ± half-width", WIDTH_VALUE);
    table_text(out, "ratio", 14);
    table_text(out, "by chance", 10);
    text_append(out, "they differ\n");
    for (unsigned i = 0; i < count; i++) {
        if (differences[i].quantity == QUANTITY_F_HZ || differences[i].quantity == QUANTITY_Q)
            append_difference(out, &differences[i]);
    }
}

/* --- the command --- */

static bool parse_id(const char *word, int64_t *out_id, struct error *err)
{
    char *end = NULL;
    *out_id = strtoll(word, &end, 10);
    if (*word != '\0' && *end == '\0' && *out_id > 0)
        return true;
    return error_set(err, ERROR_USAGE, "\"%.40s\" is no number of a series", word);
}

static bool run(struct log_reader *reader, const struct shelf *shelf, int count, char **words,
                bool as_json, struct text *out, struct error *err)
{
    const char *verb = count > 0 ? words[0] : "list";
    bool is_show = strcmp(verb, "show") == 0 && count == 2;
    bool is_compare = strcmp(verb, "compare") == 0 && count == 3;
    int64_t ids[2] = {0, 0};
    if (strcmp(verb, "list") == 0 && count <= 1)
        return list_series(reader, out, err);
    if (!is_show && !is_compare)
        return error_set(err, ERROR_USAGE,
                         "say: wane series, wane series show N, or wane series compare A B");
    struct tally *tallies = calloc(2, sizeof *tallies);
    bool is_good = tallies != NULL || error_set(err, ERROR_MEMORY, "out of memory");
    for (int i = 0; is_good && i < count - 1; i++)
        is_good = parse_id(words[i + 1], &ids[i], err) &&
                  tally_update(&tallies[i], reader, shelf, ids[i], err);
    if (is_good && is_show && as_json) {
        is_good = tally_read_json(&tallies[0], reader, out, err);
        text_append(out, "\n");
    } else if (is_good && is_show) {
        append_series(out, &tallies[0]);
    } else if (is_good) {
        append_comparison(out, &tallies[0], &tallies[1]);
    }
    for (int i = 0; tallies != NULL && i < 2; i++)
        tally_done(&tallies[i]);
    free(tallies);
    return is_good;
}

int cmd_series(int argc, char **argv)
{
    struct log_words words = {0};
    bool as_json = false;
    const struct option_spec specs[] = {
        {"log", OPTION_TEXT, "FILE", "the log (that of waned)", .text = &words.log},
        {"config", OPTION_TEXT, "FILE", "waned's settings, which name the log",
         .text = &words.config},
        {"demo", OPTION_FLAG, NULL, "the log of the simulated bench", .flag = &words.demo},
        {"json", OPTION_FLAG, NULL, "show: the object that GET /series/ID gives", .flag = &as_json},
    };
    struct options options = {
        .program = "wane series",
        .words = "[OPTIONS] [list | show N | compare A B]",
        .about = "Lists the series of the log, shows one with its statistics, "
                 "compares two.",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0],
    };
    struct error err = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    struct text out = {0};
    struct shelf *shelf = shelf_of_words(&words, &err);
    struct log_reader *reader = shelf != NULL ? log_words_open(&words, &err) : NULL;
    bool is_good = reader != NULL && run(reader, shelf, word_count, argv, as_json, &out, &err) &&
                   write_out(&out, &err);
    log_reader_close(reader);
    free(shelf);
    text_done(&out);
    return is_good ? 0 : options_fail(&options, &err);
}
