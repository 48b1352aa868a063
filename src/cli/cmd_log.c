/* `wane log`: looks into a log. */
#include <jansson.h> /* before text.h, which renames what both define */

#include "cli/commands.h"

#include "cli/log_file.h"
#include "cli/table.h"
#include "wane/clock.h"
#include "wane/sentence.h"

#include <errno.h>
#include <inttypes.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SHOWN_STRIKES 20

static bool write_out(const struct text *text, struct error *err)
{
    if (text->failed)
        return error_set(err, ERROR_MEMORY, "memory ran out");
    if (fwrite(text->data, 1, text->length, stdout) != text->length || fflush(stdout) != 0)
        return error_set(err, ERROR_STORAGE, "standard output: %s", strerror(errno));
    return true;
}

/* ---- the table ---- */

#define WIDTH_ID      8
#define WIDTH_TIME    25
#define WIDTH_VERDICT 10
#define WIDTH_F       26
#define WIDTH_Q       20
#define WIDTH_T60     22
#define WIDTH_MODES   6

static void append_heading(struct text *text)
{
    table_text(text, "strike", WIDTH_ID);
    table_text(text, "time", WIDTH_TIME);
    table_text(text, "verdict", WIDTH_VERDICT);
    table_text(text, "f (Hz)", WIDTH_F);
    table_text(text, "Q", WIDTH_Q);
    table_text(text, "T60 (s)", WIDTH_T60);
    table_text(text, "modes", WIDTH_MODES);
    text_append(text, "remarks\n");
}

/* NAN for null. */
static double number_of(json_t *object, const char *key)
{
    json_t *value = json_object_get(object, key);
    return json_is_number(value) ? json_number_value(value) : (double)NAN;
}

/* "" for null. */
static const char *text_of(json_t *object, const char *key)
{
    const char *value = json_string_value(json_object_get(object, key));
    return value == NULL ? "" : value;
}

static void append_mode_cells(struct text *text, json_t *modes)
{
    json_t *strongest = json_array_get(modes, 0);
    char count[24];
    (void)snprintf(count, sizeof count, "%zu", json_array_size(modes));
    table_value(text, number_of(strongest, "f_hz"), number_of(strongest, "f_u_hz"), WIDTH_F);
    table_value(text, number_of(strongest, "q"), number_of(strongest, "q_u"), WIDTH_Q);
    table_value(text, number_of(strongest, "t60_s"), number_of(strongest, "t60_u_s"), WIDTH_T60);
    table_text(text, count, WIDTH_MODES);
}

/* What is not "good" about it, and what people said: separated by semicolons. */
static void append_remarks(struct text *text, json_t *strike)
{
    static const char *const lists[] = {"reasons", "remarks"};
    const char *between = "";
    for (size_t i = 0; i < 2; i++) {
        json_t *words = json_object_get(strike, lists[i]);
        for (size_t k = 0; k < json_array_size(words); k++) {
            text_append(text, between);
            text_append(text, json_string_value(json_array_get(words, k)));
            between = ", ";
        }
    }
    between = between[0] == '\0' ? "" : "; ";
    if (json_is_true(json_object_get(strike, "odd"))) {
        text_appendf(text, "%sodd", between);
        between = "; ";
    }
    if (json_is_string(json_object_get(strike, "set_aside"))) {
        text_appendf(text, "%sset aside: ", between);
        table_text(text, text_of(strike, "set_aside"), 0);
        between = "; ";
    }
    if (text_of(strike, "note")[0] != '\0') {
        text_append(text, between);
        table_text(text, text_of(strike, "note"), 0);
    }
}

static void append_row(struct text *text, json_t *strike)
{
    char id[24];
    (void)snprintf(id, sizeof id, "%" JSON_INTEGER_FORMAT,
                   json_integer_value(json_object_get(strike, "id")));
    table_text(text, id, WIDTH_ID);
    table_text(text, text_of(strike, "time"), WIDTH_TIME);
    table_text(text, text_of(strike, "verdict"), WIDTH_VERDICT);
    append_mode_cells(text, json_object_get(strike, "modes"));
    append_remarks(text, strike);
    table_end_line(text);
}

/* One line of a page: an object, a comma after it unless it is the last. */
static bool append_line(struct text *text, const char *line, size_t length, bool as_json,
                        struct error *err)
{
    if (length > 0 && line[length - 1] == ',')
        length--;
    if (as_json) {
        text_append_bytes(text, line, length);
        text_append(text, "\n");
        return true;
    }
    json_error_t where;
    json_t *strike = json_loadb(line, length, 0, &where);
    if (strike == NULL)
        return error_set(err, ERROR_DATA, "the log holds a reading that is no JSON: %.120s",
                         where.text);
    append_row(text, strike);
    json_decref(strike);
    return true;
}

static bool print_page(const struct text *objects, bool as_json, struct error *err)
{
    struct text out = {0};
    bool is_good = true;
    const char *line = objects->data == NULL ? "" : objects->data;
    while (is_good && *line != '\0') {
        size_t length = strcspn(line, "\n");
        is_good = append_line(&out, line, length, as_json, err);
        line += length + (line[length] == '\n');
    }
    is_good = is_good && write_out(&out, err);
    text_done(&out);
    return is_good;
}

static bool print_heading(struct error *err)
{
    struct text heading = {0};
    append_heading(&heading);
    bool is_good = write_out(&heading, err);
    text_done(&heading);
    return is_good;
}

static bool list_strikes(struct log_reader *reader, const struct log_words *words, bool as_json,
                         struct error *err)
{
    struct log_selection selection;
    uint64_t wanted = words->limit > 0 ? words->limit : SHOWN_STRIKES;
    uint64_t shown = 0;
    if (!log_words_selection(words, &selection, err))
        return false;
    bool is_good = true;
    for (bool more = true; is_good && more && shown < wanted;) {
        struct text objects = {0};
        struct log_page page = {0};
        selection.limit = (unsigned)(wanted - shown < LOG_PAGE_MAX ? wanted - shown : LOG_PAGE_MAX);
        is_good = log_read_page(reader, &selection, &objects, &page, err);
        if (is_good && !as_json && shown == 0 && page.count > 0)
            is_good = print_heading(err);
        is_good = is_good && print_page(&objects, as_json, err);
        shown += page.count;
        more = page.next_before != 0;
        selection.before = page.next_before;
        text_done(&objects);
    }
    if (is_good && !as_json && shown == 0)
        fputs("wane log: no strike found\n", stderr);
    return is_good;
}

/* ---- one strike ---- */

static void append_line_of(struct text *text, const char *name, const char *value)
{
    if (value[0] == '\0')
        return;
    table_text(text, name, 12);
    table_text(text, value, 0);
    table_end_line(text);
}

static void append_modes(struct text *text, const struct reading *reading)
{
    if (reading->mode_count == 0)
        return;
    text_append(text, "\n");
    table_text(text, "mode", 6);
    table_text(text, "f (Hz)", WIDTH_F);
    table_text(text, "decay (1/s)", 24);
    table_text(text, "Q", WIDTH_Q);
    table_text(text, "T60 (s)", WIDTH_T60);
    text_append(text, "level (dBFS)\n");
    for (unsigned i = 0; i < reading->mode_count; i++) {
        const struct mode *mode = &reading->modes[i];
        table_text(text, mode->label, 6);
        table_value(text, mode->f_hz, mode->f_u_hz, WIDTH_F);
        table_value(text, mode->decay_per_s, mode->decay_u_per_s, 24);
        table_value(text, mode->q, mode->q_u, WIDTH_Q);
        table_value(text, mode->t60_s, mode->t60_u_s, WIDTH_T60);
        text_appendf(text, "%.1f\n", mode->level_dbfs);
    }
}

static void append_stored(struct text *text, int64_t id, const struct log_stored *stored,
                          json_t *strike)
{
    const struct reading *reading = &stored->reading;
    char value[120];
    (void)snprintf(value, sizeof value, "%" PRId64, id);
    append_line_of(text, "strike", value);
    append_line_of(text, "time", text_of(strike, "time"));
    (void)snprintf(value, sizeof value, ", channel %d, %.6g Hz, %" PRIu64 " frames%s",
                   stored->strike->channel, stored->strike->rate_hz, stored->frame_count,
                   stored->has_samples ? "" : " (samples not kept)");
    table_text(text, "input", 12);
    table_text(text, stored->context.input, 0);
    text->length -= text->length > 0; /* the blank */
    text_append(text, value);
    text_append(text, "\n");
    append_line_of(text, "source", stored->context.source);
    append_line_of(text, "part", stored->context.part);
    append_line_of(text, "specimen", stored->context.specimen);
    append_line_of(text, "verdict", verdict_name(reading->verdict));
    struct text sentence = {0};
    sentence_append(&sentence, reading, stored->strike->rate_hz, SENTENCE_STRUCK);
    append_line_of(text, "", sentence.length > 0 ? sentence.data : "");
    text_done(&sentence);
    if (stored->is_set_aside)
        append_line_of(text, "set aside",
                       text_of(strike, "set_aside")[0] == '\0' ? "(no reason given)"
                                                               : text_of(strike, "set_aside"));
    append_line_of(text, "note", text_of(strike, "note"));
    append_line_of(text, "settings", stored->context.settings);
    append_line_of(text, "version", stored->context.version);
    append_modes(text, reading);
}

static bool parse_id(const char *word, int64_t *out_id, struct error *err)
{
    struct log_selection selection = {0};
    if (!log_selection_set(&selection, "before", word, NULL))
        return error_set(err, ERROR_USAGE, "\"%.40s\" is no strike's number", word);
    *out_id = selection.before;
    return true;
}

static bool show_strike(struct log_reader *reader, char **words, bool as_json, struct error *err)
{
    int64_t id = 0;
    struct text object = {0};
    struct text out = {0};
    struct log_stored stored = {0};
    if (!parse_id(words[0], &id, err))
        return false;
    bool is_good = log_read_strike_json(reader, id, &object, NULL, err);
    if (is_good && as_json) {
        text_append(&object, "\n");
        is_good = write_out(&object, err);
    } else if (is_good) {
        json_t *strike = json_loadb(object.data, object.length, 0, NULL);
        is_good = log_read_strike(reader, id, &stored, err);
        if (is_good)
            append_stored(&out, id, &stored, strike);
        is_good = is_good && write_out(&out, err);
        json_decref(strike);
        log_stored_done(&stored);
    }
    text_done(&object);
    text_done(&out);
    return is_good;
}

/* ---- the other words ---- */

static bool check_log(struct log_reader *reader, char **words, bool as_json, struct error *err)
{
    (void)words;
    (void)as_json;
    struct text findings = {0};
    struct log_counts counts;
    size_t violations = 0;
    bool is_good = log_counts(reader, &counts, err) &&
                   log_check(reader, &findings, &violations, err) && write_out(&findings, err);
    text_done(&findings);
    if (is_good && violations > 0)
        return error_set(err, ERROR_DATA, "%zu findings: keep a copy of the file and its -wal",
                         violations);
    if (is_good)
        printf("sound: %" PRId64 " strikes, %.1f MB\n", counts.strikes, (double)counts.bytes / 1e6);
    return is_good;
}

static bool write_wave(struct log_reader *reader, char **words, bool as_json, struct error *err)
{
    (void)as_json;
    int64_t id = 0;
    unsigned char *bytes = NULL;
    size_t size = 0;
    if (!parse_id(words[0], &id, err) || !log_read_wav(reader, id, &bytes, &size, err))
        return false;
    bool to_stdout = strcmp(words[1], "-") == 0;
    /* "x": a file that exists is not overwritten. */
    FILE *file = to_stdout ? stdout : fopen(words[1], "wbx");
    bool is_good = file != NULL && fwrite(bytes, 1, size, file) == size && fflush(file) == 0;
    int reason = errno;
    free(bytes);
    if (file != NULL && !to_stdout && fclose(file) != 0)
        is_good = false;
    if (!is_good)
        return error_set(err, ERROR_STORAGE, "%s: %s", words[1], strerror(reason));
    return true;
}

static bool back_up(struct log_reader *reader, char **words, bool as_json, struct error *err)
{
    (void)as_json;
    return log_backup(reader, words[0], err);
}

static const struct {
    const char *word;
    int word_count; /* after it */
    bool (*run)(struct log_reader *reader, char **words, bool as_json, struct error *err);
} actions[] = {
    {"show", 1, show_strike},
    {"check", 0, check_log},
    {"wave", 2, write_wave},
    {"backup", 1, back_up},
};

static bool run_action(struct log_reader *reader, int word_count, char **words, bool as_json,
                       struct error *err)
{
    for (size_t i = 0; i < sizeof actions / sizeof actions[0]; i++) {
        if (strcmp(actions[i].word, words[0]) != 0)
            continue;
        if (word_count - 1 != actions[i].word_count)
            return error_set(err, ERROR_USAGE, "%s wants %d word%s after it: see wane log --help",
                             words[0], actions[i].word_count,
                             actions[i].word_count == 1 ? "" : "s");
        return actions[i].run(reader, words + 1, as_json, err);
    }
    return error_set(err, ERROR_USAGE, "\"%.40s\": use show, check, wave or backup, or no word",
                     words[0]);
}

int cmd_log(int argc, char **argv)
{
    struct log_words words = {0};
    bool as_json = false;
    struct option_spec specs[LOG_WORDS_COUNT + 1];
    log_words_specs(&words, specs);
    specs[LOG_WORDS_COUNT] = (struct option_spec){
        "json", OPTION_FLAG, NULL, "one JSON object a line, as GET /strikes/ID gives it",
        .flag = &as_json};
    struct options options = {
        .program = "wane log",
        .words = "[OPTIONS] [show ID | wave ID OUT.wav | check | backup FILE]",
        .about = "Lists the newest strikes of the log, newest first; or shows one, writes its "
                 "samples,\nchecks the log, or copies it while waned runs.",
        .specs = specs,
        .count = LOG_WORDS_COUNT + 1,
    };
    struct error err = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return 0;
    }
    struct log_reader *reader = log_words_open(&words, &err);
    bool is_good = reader != NULL;
    if (is_good && word_count == 0)
        is_good = list_strikes(reader, &words, as_json, &err);
    else if (is_good)
        is_good = run_action(reader, word_count, argv, as_json, &err);
    log_reader_close(reader);
    return is_good ? 0 : options_fail(&options, &err);
}
