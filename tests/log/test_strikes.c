/* What goes into the log comes out again, and can be found, changed and read anew. */
#include <jansson.h> /* before text.h, which renames what both define */

#include "support/log_scene.h"
#include "support/scratch.h"

#include <setjmp.h>
#include <sqlite3.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

struct bench {
    struct scratch scratch;
    char path[512];
    struct log_writer *writer;
    struct log_reader *reader;
    uint64_t seed;
};

static struct error err;

#define OK(call)                                                                                   \
    do {                                                                                           \
        if (!(call))                                                                               \
            fail_msg("%s: %s", #call, err.text);                                                   \
    } while (0)

static int begin(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    assert_non_null(bench);
    scratch_make(&bench->scratch);
    scratch_path(&bench->scratch, "log.sqlite", bench->path);
    bench->seed = 20261201;
    bench->writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    OK(bench->writer != NULL);
    bench->reader = log_reader_open(bench->path, &err);
    OK(bench->reader != NULL);
    *state = bench;
    return 0;
}

/* Every test ends with a log that keeps its invariants. */
static int end(void **state)
{
    struct bench *bench = *state;
    struct text findings = {0};
    size_t violations = 0;
    OK(log_check(bench->reader, &findings, &violations, &err));
    if (violations > 0)
        fail_msg("%s", findings.data);
    text_done(&findings);
    log_reader_close(bench->reader);
    log_writer_close(bench->writer);
    scratch_remove(&bench->scratch);
    free(bench);
    return 0;
}

/* Appends one strike of its own batch and gives its id. */
static int64_t append(struct bench *bench, int64_t n, enum verdict verdict,
                      const struct log_context *context)
{
    struct strike *strike = log_scene_strike(&bench->seed, SAMPLES_16_BIT, 300);
    struct reading reading;
    log_scene_reading(&bench->seed, verdict, &reading);
    struct log_entry entry = {.strike = strike, .reading = &reading};
    log_scene_context(n, &entry.context);
    if (context != NULL)
        entry.context = *context;
    int64_t id = 0;
    OK(log_append(bench->writer, &entry, 1, &id, &err));
    strike_destroy(strike);
    return id;
}

static json_t *object_of(struct bench *bench, int64_t id)
{
    struct text text = {0};
    OK(log_read_strike_json(bench->reader, id, &text, NULL, &err));
    json_error_t where;
    json_t *object = json_loads(text.data, JSON_REJECT_DUPLICATES, &where);
    if (object == NULL)
        fail_msg("%s in %s", where.text, text.data);
    assert_null(strchr(text.data, '\n'));
    text_done(&text);
    return object;
}

static void check_text(json_t *object, const char *key, const char *expected)
{
    json_t *value = json_object_get(object, key);
    if (value == NULL)
        fail_msg("there is no %s", key);
    if (expected == NULL && !json_is_null(value))
        fail_msg("%s is not null", key);
    if (expected != NULL && !json_is_string(value))
        fail_msg("%s is no text", key);
    if (expected != NULL)
        assert_string_equal(json_string_value(value), expected);
}

static void a_strike_and_its_reading_come_back_bit_for_bit(void **state)
{
    struct bench *bench = *state;
    print_message("seed %llu\n", (unsigned long long)bench->seed);
    for (int64_t n = 0; n < 60; n++) {
        enum log_scene_samples kind = (enum log_scene_samples)(n % 4);
        size_t frame_count = (size_t)(log_scene_next(&bench->seed) % (n < 30 ? 200 : 30000));
        struct strike *strike = log_scene_strike(&bench->seed, kind, frame_count);
        struct log_entry entry = {.strike = strike};
        struct reading reading;
        log_scene_reading(&bench->seed, n % 3 == 0 ? VERDICT_DOUBTFUL : VERDICT_GOOD, &reading);
        entry.reading = &reading;
        log_scene_context(n, &entry.context);
        entry.context.strike_number = n;
        snprintf(entry.context.part, LOG_NAME_MAX, "goblet");
        snprintf(entry.context.source, LOG_SOURCE_MAX, "/bench/%d.wav", (int)n);
        int64_t id = 0;
        OK(log_append(bench->writer, &entry, 1, &id, &err));
        struct log_stored stored;
        OK(log_read_strike(bench->reader, id, &stored, &err));
        assert_true(stored.has_samples);
        log_scene_same_strike(strike, stored.strike);
        log_scene_same_reading(&reading, &stored.reading);
        assert_memory_equal(&entry.context, &stored.context, sizeof stored.context);
        log_stored_done(&stored);
        strike_destroy(strike);
    }
}

static void the_object_has_the_keys_of_the_contract(void **state)
{
    struct bench *bench = *state;
    struct log_context context;
    log_scene_context(0, &context);
    snprintf(context.part, LOG_NAME_MAX, "goblet");
    context.strike_number = 7;
    int64_t id = append(bench, 0, VERDICT_DOUBTFUL, &context);
    json_t *object = object_of(bench, id);
    static const char *const keys[] = {
        "id",        "time",    "closed",   "input",    "part",      "specimen",   "series",
        "note",      "odd",     "revision", "settings", "version",   "channel",    "onset_s",
        "set_aside", "verdict", "reasons",  "window_s", "peak_dbfs", "noise_dbfs", "snr_db",
        "why",       "remarks", "modes",    "source",   "strike",
    };
    for (size_t i = 0; i < sizeof keys / sizeof keys[0]; i++) {
        if (json_object_get(object, keys[i]) == NULL)
            fail_msg("there is no %s", keys[i]);
    }
    assert_int_equal(json_integer_value(json_object_get(object, "id")), id);
    check_text(object, "time", "2026-12-01T08:00:00.000Z");
    check_text(object, "closed", "2026-12-01T08:00:00.700Z");
    check_text(object, "part", "goblet");
    check_text(object, "verdict", "doubtful");
    check_text(object, "specimen", NULL);
    check_text(object, "set_aside", NULL);
    check_text(object, "source", NULL);
    json_decref(object);
}

static void ids_grow_in_the_order_of_the_batch(void **state)
{
    struct bench *bench = *state;
    enum { BATCH = 40 };
    struct log_entry *entries = calloc(BATCH, sizeof *entries);
    struct strike *strike = log_scene_strike(&bench->seed, SAMPLES_24_BIT, 100);
    struct reading reading;
    int64_t ids[BATCH];
    assert_non_null(entries);
    log_scene_reading(&bench->seed, VERDICT_GOOD, &reading);
    for (int64_t i = 0; i < BATCH; i++) {
        entries[i].strike = strike;
        entries[i].reading = &reading;
        log_scene_context(i, &entries[i].context);
        entries[i].context.strike_number = i + 1;
    }
    OK(log_append(bench->writer, entries, BATCH, ids, &err));
    for (int64_t i = 0; i < BATCH; i++) {
        assert_int_equal(ids[i], i + 1);
        json_t *object = object_of(bench, ids[i]);
        assert_int_equal(json_integer_value(json_object_get(object, "strike")), i + 1);
        json_decref(object);
    }
    free(entries);
    strike_destroy(strike);
}

/* Reads all pages of a selection; gives how many strikes, and fails when they do not fall. */
static size_t walk_pages(struct bench *bench, struct log_selection selection, int64_t *out_first,
                         int64_t *out_last)
{
    size_t count = 0;
    int64_t last = INT64_MAX;
    for (;;) {
        struct text text = {0};
        struct log_page page;
        text_append(&text, "[");
        OK(log_read_page(bench->reader, &selection, &text, &page, &err));
        text_append(&text, "]");
        json_t *array = json_loads(text.data, 0, NULL);
        assert_non_null(array);
        assert_int_equal(json_array_size(array), page.count);
        for (size_t i = 0; i < page.count; i++) {
            int64_t id = json_integer_value(json_object_get(json_array_get(array, i), "id"));
            assert_true(id < last);
            if (count++ == 0 && out_first != NULL)
                *out_first = id;
            last = id;
        }
        json_decref(array);
        text_done(&text);
        if (page.next_before == 0)
            break;
        assert_int_equal(page.next_before, last);
        selection.before = page.next_before;
    }
    if (out_last != NULL)
        *out_last = last;
    return count;
}

static struct log_selection words(const char *first, ...)
{
    struct log_selection selection = {0};
    va_list list;
    va_start(list, first);
    for (const char *word = first; word != NULL; word = va_arg(list, const char *)) {
        const char *value = va_arg(list, const char *);
        OK(log_selection_set(&selection, word, value, &err));
    }
    va_end(list);
    return selection;
}

static void fill(struct bench *bench)
{
    struct log_series series = {.name = "first", .input = "bench"};
    int64_t series_id = 0;
    OK(log_series_create(bench->writer, &series, LOG_SCENE_MS, &series_id, &err));
    for (int64_t n = 0; n < 100; n++) {
        struct log_context context;
        log_scene_context(n, &context);
        snprintf(context.part, LOG_NAME_MAX, "%s", n % 2 == 0 ? "rod" : "panel");
        snprintf(context.specimen, LOG_NAME_MAX, "%d", (int)(n % 5));
        context.series = n >= 50 ? series_id : 0;
        append(bench, n, (enum verdict)(n % 3), &context);
    }
}

static void selections_find_what_they_name(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    int64_t first = 0;
    int64_t last = 0;
    assert_int_equal(walk_pages(bench, words(NULL), &first, &last), 100);
    assert_int_equal(first, 100);
    assert_int_equal(last, 1);
    assert_int_equal(walk_pages(bench, words("limit", "7", NULL), NULL, NULL), 100);
    assert_int_equal(walk_pages(bench, words("limit", "1000", NULL), NULL, NULL), 100);
    assert_int_equal(walk_pages(bench, words("limit", "50", NULL), NULL, NULL), 100);
    assert_int_equal(walk_pages(bench, words("before", "11", NULL), &first, NULL), 10);
    assert_int_equal(first, 10);
    assert_int_equal(walk_pages(bench, words("part", "rod", "limit", "3", NULL), NULL, NULL), 50);
    assert_int_equal(walk_pages(bench, words("specimen", "3", NULL), NULL, NULL), 20);
    assert_int_equal(walk_pages(bench, words("specimen", "3", "part", "rod", NULL), NULL, NULL),
                     10);
    assert_int_equal(walk_pages(bench, words("verdict", "good", NULL), NULL, NULL), 34);
    assert_int_equal(
        walk_pages(bench, words("verdict", "rejected", "limit", "4", NULL), NULL, NULL), 33);
    assert_int_equal(walk_pages(bench, words("verdict", "good,doubtful", NULL), NULL, NULL), 67);
    assert_int_equal(walk_pages(bench, words("series", "1", "limit", "9", NULL), NULL, NULL), 50);
    assert_int_equal(walk_pages(bench, words("series", "1", "verdict", "good", NULL), NULL, NULL),
                     17);
    assert_int_equal(walk_pages(bench, words("series", "99", NULL), NULL, NULL), 0);
    /* From 8:00:10 to before 8:00:20. */
    struct log_selection span = words("from", "2026-12-01T08:00:10Z", "to",
                                      "2026-12-01T09:00:20+01:00", "limit", "4", NULL);
    assert_int_equal(walk_pages(bench, span, &first, &last), 10);
    assert_int_equal(first, 20);
    assert_int_equal(last, 11);
    assert_int_equal(walk_pages(bench, words("from", "2026-12-01", NULL), NULL, NULL), 100);
    assert_int_equal(walk_pages(bench, words("to", "2026-12-01", NULL), NULL, NULL), 0);
    span = words("to", "2026-12-01T08:00:10Z", "part", "panel", "verdict", "good", NULL);
    assert_int_equal(walk_pages(bench, span, NULL, NULL), 2); /* n = 3, 9 */
}

static void wrong_words_are_refused_with_what_is_allowed(void **state)
{
    (void)state;
    static const char *const wrong[][2] = {
        {"limit", "0"},     {"limit", "1001"},
        {"limit", "-1"},    {"limit", "ten"},
        {"before", "0"},    {"before", "1e3"},
        {"before", ""},     {"series", "0x1"},
        {"verdict", "bad"}, {"verdict", "good,"},
        {"verdict", ""},    {"from", "yesterday"},
        {"to", "12:00"},    {"changed_since", "-1"},
        {"colour", "red"},  {"part", ""},
        {"from", ""},       {"before", "9223372036854775808"},
    };
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        struct log_selection selection = {0};
        struct error said = {0};
        if (log_selection_set(&selection, wrong[i][0], wrong[i][1], &said))
            fail_msg("%s=%s was taken", wrong[i][0], wrong[i][1]);
        assert_int_equal(said.kind, ERROR_USAGE);
        assert_true(strlen(said.text) > 10);
    }
}

static void pages_step_over_deleted_strikes(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    /* The oldest 30 go. */
    struct log_pruning pruning = {.strikes_before_ms = LOG_SCENE_MS + 30000};
    bool more = true;
    while (more)
        OK(log_prune_step(bench->writer, &pruning, &more, &err));
    int64_t last = 0;
    assert_int_equal(walk_pages(bench, words("limit", "9", NULL), NULL, &last), 70);
    assert_int_equal(last, 31);
    struct log_counts counts;
    OK(log_counts(bench->reader, &counts, &err));
    assert_int_equal(counts.strikes, 70);
    /* The newest one too: its id must not come again. */
    pruning.strikes_before_ms = LOG_SCENE_MS + 1000000;
    more = true;
    while (more)
        OK(log_prune_step(bench->writer, &pruning, &more, &err));
    assert_int_equal(walk_pages(bench, words(NULL), NULL, NULL), 0);
    assert_int_equal(append(bench, 200, VERDICT_GOOD, NULL), 101);
}

static void pruned_samples_leave_their_readings(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    struct log_pruning pruning = {.samples_before_ms = LOG_SCENE_MS + 70000};
    bool more = true;
    while (more)
        OK(log_prune_step(bench->writer, &pruning, &more, &err));
    struct log_stored stored;
    OK(log_read_strike(bench->reader, 1, &stored, &err));
    assert_false(stored.has_samples);
    assert_int_equal(stored.strike->frame_count, 0);
    assert_int_equal(stored.frame_count, 300);
    log_stored_done(&stored);
    unsigned char *bytes = NULL;
    size_t size = 0;
    assert_false(log_read_wav(bench->reader, 1, &bytes, &size, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
    OK(log_read_wav(bench->reader, 100, &bytes, &size, &err));
    free(bytes);
    assert_int_equal(walk_pages(bench, words(NULL), NULL, NULL), 100);
}

static void the_replay_gives_every_later_strike_once(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    int64_t after = 42;
    int64_t expected = 43;
    for (;;) {
        struct text lines = {0};
        int64_t ids[25];
        size_t count = 0;
        OK(log_read_after(bench->reader, after, 25, &lines, ids, &count, &err));
        char *line = lines.data;
        for (size_t i = 0; i < count; i++) {
            assert_int_equal(ids[i], expected++);
            char *newline = strchr(line, '\n');
            assert_non_null(newline);
            *newline = '\0';
            json_t *object = json_loads(line, 0, NULL);
            assert_int_equal(json_integer_value(json_object_get(object, "id")), ids[i]);
            json_decref(object);
            line = newline + 1;
        }
        text_done(&lines);
        if (count == 0)
            break;
        after = ids[count - 1];
    }
    assert_int_equal(expected, 101);
}

static void a_change_gives_a_new_revision_and_no_change_none(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    struct log_counts before;
    OK(log_counts(bench->reader, &before, &err));
    assert_int_equal(before.revision, 100);
    int64_t revision = 0;
    struct log_change change = {.note = "loose on its mount", .set_aside = LOG_SET, .reason = ""};
    OK(log_change_strike(bench->writer, 5, &change, &revision, &err));
    assert_int_equal(revision, 101);
    OK(log_change_strike(bench->writer, 5, &change, &revision, &err));
    assert_int_equal(revision, 101);
    json_t *object = object_of(bench, 5);
    check_text(object, "note", "loose on its mount");
    check_text(object, "set_aside", "");
    json_decref(object);
    change = (struct log_change){.odd = LOG_SET, .set_aside = LOG_CLEAR, .note = ""};
    OK(log_change_strike(bench->writer, 5, &change, &revision, &err));
    assert_int_equal(revision, 102);
    object = object_of(bench, 5);
    check_text(object, "note", NULL);
    check_text(object, "set_aside", NULL);
    assert_true(json_is_true(json_object_get(object, "odd")));
    json_decref(object);
    change = (struct log_change){.series = LOG_SET, .series_id = 1};
    OK(log_change_strike(bench->writer, 9, &change, &revision, &err));
    int64_t first = 0;
    int64_t last = 0;
    assert_int_equal(walk_pages(bench, words("changed_since", "100", NULL), &first, &last), 2);
    assert_int_equal(first, 9);
    assert_int_equal(last, 5);
    assert_int_equal(walk_pages(bench, words("changed_since", "0", NULL), NULL, NULL), 100);
    assert_int_equal(walk_pages(bench, words("changed_since", "103", NULL), NULL, NULL), 0);
    change.series_id = 77;
    assert_false(log_change_strike(bench->writer, 9, &change, NULL, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
    assert_false(log_change_strike(bench->writer, 1234, &change, NULL, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
}

static void a_new_reading_leaves_the_old_one_as_history(void **state)
{
    struct bench *bench = *state;
    int64_t id = append(bench, 0, VERDICT_DOUBTFUL, NULL);
    struct reading reading;
    int64_t revision = 0;
    log_scene_reading(&bench->seed, VERDICT_GOOD, &reading);
    OK(log_replace_reading(bench->writer, id, &reading, "modes_max=3", "0.2.0", LOG_SCENE_MS + 9,
                           &revision, &err));
    assert_int_equal(revision, 2);
    struct log_stored stored;
    OK(log_read_strike(bench->reader, id, &stored, &err));
    log_scene_same_reading(&reading, &stored.reading);
    assert_string_equal(stored.context.settings, "modes_max=3");
    log_stored_done(&stored);
    json_t *object = object_of(bench, id);
    check_text(object, "verdict", "good");
    check_text(object, "version", "0.2.0");
    json_decref(object);
    struct text text = {0};
    OK(log_read_history_json(bench->reader, id, &text, &err));
    json_t *answer = json_loads(text.data, 0, NULL);
    json_t *history = json_object_get(answer, "readings");
    assert_int_equal(json_array_size(history), 1);
    check_text(json_array_get(history, 0), "verdict", "doubtful");
    check_text(json_array_get(history, 0), "version", "0.1.0");
    json_decref(answer);
    text_done(&text);
    assert_false(log_replace_reading(bench->writer, 99, &reading, "", "", 0, NULL, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
}

static void hostile_notes_come_back_as_they_were(void **state)
{
    struct bench *bench = *state;
    int64_t id = append(bench, 0, VERDICT_GOOD, NULL);
    static const char *const notes[] = {
        "'; DROP TABLE strike; --",
        "<script>alert(1)</script>",
        "\"quoted\" \\ back\\slash \n new line \t tab \x01 \x7f",
        "=HYPERLINK(\"x\")",
        "\xD8\xA3\xD9\x87\xD9\x84\xD8\xA7 \xE2\x80\xAE right to left",
        "%s%n%d ?1 :name $x",
    };
    for (size_t i = 0; i < sizeof notes / sizeof notes[0]; i++) {
        struct log_change change = {.note = notes[i], .set_aside = LOG_SET, .reason = notes[i]};
        OK(log_change_strike(bench->writer, id, &change, NULL, &err));
        json_t *object = object_of(bench, id);
        check_text(object, "note", notes[i]);
        check_text(object, "set_aside", notes[i]);
        json_decref(object);
    }
    char *large = malloc(LOG_NOTE_MAX + 1);
    assert_non_null(large);
    memset(large, 'x', LOG_NOTE_MAX);
    large[LOG_NOTE_MAX] = '\0';
    struct log_change change = {.note = large};
    assert_false(log_change_strike(bench->writer, id, &change, NULL, &err));
    assert_int_equal(err.kind, ERROR_LIMIT);
    free(large);
}

static void at_most_sixty_rejected_strikes_an_hour_keep_their_samples(void **state)
{
    struct bench *bench = *state;
    int kept = 0;
    for (int64_t n = 0; n < 90; n++) {
        int64_t id = append(bench, n, VERDICT_REJECTED, NULL);
        json_t *object = object_of(bench, id);
        kept += json_is_true(json_object_get(object, "samples_kept"));
        json_decref(object);
    }
    assert_int_equal(kept, 60);
    /* A good one keeps its own, and an hour later there is room again. */
    json_t *good = object_of(bench, append(bench, 91, VERDICT_GOOD, NULL));
    json_t *later = object_of(bench, append(bench, 3700, VERDICT_REJECTED, NULL));
    assert_true(json_is_true(json_object_get(good, "samples_kept")));
    assert_true(json_is_true(json_object_get(later, "samples_kept")));
    json_decref(good);
    json_decref(later);
}

static void spilled_strikes_wait_in_order_and_leave_with_their_commit(void **state)
{
    struct bench *bench = *state;
    struct strike *strikes[3];
    int64_t keys[3];
    for (int i = 0; i < 3; i++) {
        struct log_context context;
        log_scene_context(i, &context);
        context.settings[0] = context.version[0] = '\0';
        strikes[i] = log_scene_strike(&bench->seed, (enum log_scene_samples)i, 2000);
        OK(log_spill(bench->writer, strikes[i], &context, &keys[i], &err));
    }
    struct log_counts counts;
    OK(log_counts(bench->reader, &counts, &err));
    assert_int_equal(counts.spilled, 3);
    assert_int_equal(counts.strikes, 0);
    for (int i = 0; i < 3; i++) {
        int64_t key = 0;
        int64_t id = 0;
        struct log_stored stored;
        struct reading reading;
        OK(log_read_spilled(bench->reader, 0, &key, &stored, &err));
        assert_int_equal(key, keys[i]);
        log_scene_same_strike(strikes[i], stored.strike);
        log_scene_reading(&bench->seed, VERDICT_GOOD, &reading);
        struct log_entry entry = {stored.strike, &reading, stored.context, key};
        OK(log_append(bench->writer, &entry, 1, &id, &err));
        assert_int_equal(id, i + 1);
        log_stored_done(&stored);
        strike_destroy(strikes[i]);
    }
    int64_t key = -1;
    struct log_stored stored;
    OK(log_read_spilled(bench->reader, 0, &key, &stored, &err));
    assert_int_equal(key, 0);
}

static void a_strike_with_an_unknown_series_is_not_lost_for_it(void **state)
{
    struct bench *bench = *state;
    struct log_context context;
    log_scene_context(0, &context);
    context.series = 4711;
    json_t *object = object_of(bench, append(bench, 0, VERDICT_GOOD, &context));
    assert_true(json_is_null(json_object_get(object, "series")));
    json_decref(object);
}

static void readings_come_without_samples_for_statistics(void **state)
{
    struct bench *bench = *state;
    fill(bench);
    struct log_change change = {.set_aside = LOG_SET, .reason = "cough"};
    OK(log_change_strike(bench->writer, 60, &change, NULL, &err));
    struct log_selection selection = words("series", "1", "limit", "100", NULL);
    int64_t ids[100];
    bool aside[100];
    struct reading *readings = calloc(100, sizeof *readings);
    struct log_page page;
    OK(log_read_readings(bench->reader, &selection, ids, readings, aside, &page, &err));
    assert_int_equal(page.count, 50);
    assert_int_equal(ids[0], 100);
    assert_int_equal(page.next_before, 0);
    for (size_t i = 0; i < page.count; i++) {
        struct log_stored stored;
        OK(log_read_strike(bench->reader, ids[i], &stored, &err));
        log_scene_same_reading(&stored.reading, &readings[i]);
        assert_int_equal(aside[i], ids[i] == 60);
        log_stored_done(&stored);
    }
    free(readings);
}

/* Copies strike 1 until there are 30,000, a second apart; from the 20,001st on the clock was set
 * back by `back_s`. */
static void make_many(struct bench *bench, int back_s)
{
    char sql[1600];
    char *text = NULL;
    sqlite3 *db = NULL;
    append(bench, 0, VERDICT_GOOD, NULL);
    (void)snprintf(
        sql, sizeof sql,
        "BEGIN; WITH RECURSIVE n (i) AS (SELECT 2 UNION ALL SELECT i + 1 FROM n WHERE i < 30000)"
        " INSERT INTO strike (revision, time_ms, closed_ms, clock_synced, verdict, frame_count,"
        " has_samples, recipe, head, fit, reading)"
        " SELECT i, time_ms + 1000 * (i - 1) - (i > 20000) * %d * 1000, closed_ms, 1, verdict,"
        " frame_count, 0, recipe, head, fit, reading FROM n, strike WHERE id = 1;"
        "UPDATE state SET strikes = 30000, revision = 30000,"
        " latest_ms = (SELECT max(time_ms) FROM strike), disordered = (SELECT coalesce(max(id), 0)"
        " FROM (SELECT id, time_ms, max(time_ms) OVER (ORDER BY id) AS latest FROM strike)"
        " WHERE time_ms < latest); COMMIT",
        back_s);
    assert_int_equal(sqlite3_open(bench->path, &db), SQLITE_OK);
    if (sqlite3_exec(db, sql, NULL, NULL, &text) != SQLITE_OK)
        fail_msg("%s", text);
    sqlite3_close(db);
}

/* As walk_pages, without the JSON, which would take a minute for so many. */
static int64_t walk_ids(struct bench *bench, struct log_selection selection, int64_t *out_first,
                        int64_t *out_last)
{
    int64_t count = 0;
    int64_t last = INT64_MAX;
    int64_t *ids = calloc(LOG_PAGE_MAX, sizeof *ids);
    struct reading *readings = calloc(LOG_PAGE_MAX, sizeof *readings);
    assert_true(ids != NULL && readings != NULL);
    selection.limit = LOG_PAGE_MAX;
    for (bool more = true; more;) {
        struct log_page page;
        OK(log_read_readings(bench->reader, &selection, ids, readings, NULL, &page, &err));
        for (size_t i = 0; i < page.count; i++) {
            assert_true(ids[i] < last);
            last = ids[i];
            if (count++ == 0)
                *out_first = last;
        }
        more = page.next_before != 0;
        selection.before = page.next_before;
    }
    *out_last = last;
    free(ids);
    free(readings);
    return count;
}

/* The ids of a span of time, page by page, against plain SQL on every row. */
static void check_span(struct bench *bench, int64_t from_s, int64_t to_s)
{
    struct log_selection selection = {.has_from = true, .has_to = true};
    sqlite3 *db = NULL;
    sqlite3_stmt *statement = NULL;
    selection.from_ms = LOG_SCENE_MS + 1000 * from_s;
    selection.to_ms = LOG_SCENE_MS + 1000 * to_s;
    assert_int_equal(sqlite3_open(bench->path, &db), SQLITE_OK);
    assert_int_equal(sqlite3_prepare_v2(db,
                                        "SELECT count(*), max(id), min(id) FROM strike NOT INDEXED"
                                        " WHERE time_ms >= ?1 AND time_ms < ?2",
                                        -1, &statement, NULL),
                     SQLITE_OK);
    sqlite3_bind_int64(statement, 1, selection.from_ms);
    sqlite3_bind_int64(statement, 2, selection.to_ms);
    assert_int_equal(sqlite3_step(statement), SQLITE_ROW);
    int64_t first = 0;
    int64_t last = 0;
    assert_int_equal(walk_ids(bench, selection, &first, &last), sqlite3_column_int64(statement, 0));
    assert_int_equal(first, sqlite3_column_int64(statement, 1));
    assert_int_equal(last, sqlite3_column_int64(statement, 2));
    sqlite3_finalize(statement);
    sqlite3_close(db);
}

static void times_are_found_in_a_large_log_in_order(void **state)
{
    struct bench *bench = *state;
    make_many(bench, 0);
    check_span(bench, -10, 25000); /* wide: walked by ids */
    check_span(bench, 3000, 29000);
    check_span(bench, 3000, 4000); /* narrow: gathered */
    int64_t first = 0;
    int64_t last = 0;
    assert_int_equal(walk_ids(bench, words("changed_since", "3", NULL), &first, &last), 29997);
    assert_int_equal(last, 4);
}

static void times_are_found_after_the_clock_was_set_back(void **state)
{
    struct bench *bench = *state;
    make_many(bench, 15000);
    check_span(bench, -10, 25000);
    check_span(bench, -10, 14000); /* its newest id is the last, though it ends early */
    check_span(bench, 4000, 19000);
    check_span(bench, 5000, 6000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(a_strike_and_its_reading_come_back_bit_for_bit),
        CASE(the_object_has_the_keys_of_the_contract),
        CASE(ids_grow_in_the_order_of_the_batch),
        CASE(selections_find_what_they_name),
        CASE(wrong_words_are_refused_with_what_is_allowed),
        CASE(pages_step_over_deleted_strikes),
        CASE(pruned_samples_leave_their_readings),
        CASE(the_replay_gives_every_later_strike_once),
        CASE(a_change_gives_a_new_revision_and_no_change_none),
        CASE(a_new_reading_leaves_the_old_one_as_history),
        CASE(hostile_notes_come_back_as_they_were),
        CASE(at_most_sixty_rejected_strikes_an_hour_keep_their_samples),
        CASE(spilled_strikes_wait_in_order_and_leave_with_their_commit),
        CASE(a_strike_with_an_unknown_series_is_not_lost_for_it),
        CASE(readings_come_without_samples_for_statistics),
        CASE(times_are_found_in_a_large_log_in_order),
        CASE(times_are_found_after_the_clock_was_set_back),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
