/* Series, part sheets, measurements, events; and that the check finds what is broken. */
#include <jansson.h> /* before text.h, which renames what both define */

#include "support/log_scene.h"
#include "support/scratch.h"

#include <math.h>
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
    bench->writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    assert_non_null(bench->writer);
    bench->reader = log_reader_open(bench->path, &err);
    assert_non_null(bench->reader);
    *state = bench;
    return 0;
}

static int end(void **state)
{
    struct bench *bench = *state;
    log_reader_close(bench->reader);
    log_writer_close(bench->writer);
    scratch_remove(&bench->scratch);
    free(bench);
    return 0;
}

static json_t *parse(struct text *text, const char *before, const char *after)
{
    struct text whole = {0};
    text_append(&whole, before);
    text_append(&whole, text->data == NULL ? "" : text->data);
    text_append(&whole, after);
    json_t *value = json_loads(whole.data, JSON_REJECT_DUPLICATES, NULL);
    if (value == NULL)
        fail_msg("no JSON: %s", whole.data);
    text_done(&whole);
    text_done(text);
    return value;
}

static const char *text_at(json_t *value, const char *key)
{
    return json_string_value(json_object_get(value, key));
}

static void append_strikes(struct bench *bench, int count, int64_t series)
{
    uint64_t seed = 1;
    for (int n = 0; n < count; n++) {
        struct strike *strike = log_scene_strike(&seed, SAMPLES_16_BIT, 300);
        struct reading reading;
        int64_t id = 0;
        log_scene_reading(&seed, VERDICT_GOOD, &reading);
        struct log_entry entry = {.strike = strike, .reading = &reading};
        log_scene_context(n, &entry.context);
        entry.context.series = series;
        OK(log_append(bench->writer, &entry, 1, &id, &err));
        strike_destroy(strike);
    }
}

static void a_series_opens_takes_strikes_gets_a_name_and_closes(void **state)
{
    struct bench *bench = *state;
    struct log_series series = {.name = "", .input = "bench", .part = "rod", .specimen = "7"};
    struct log_series found;
    struct text text = {0};
    int64_t id = 0;
    int64_t open_id = -1;
    OK(log_read_open_series(bench->reader, "bench", &open_id, &found, &err));
    assert_int_equal(open_id, 0);
    OK(log_series_create(bench->writer, &series, LOG_SCENE_MS, &id, &err));
    append_strikes(bench, 3, id);
    OK(log_series_rename(bench->writer, id, "after the glue dried", &err));
    OK(log_read_open_series(bench->reader, "bench", &open_id, &found, &err));
    assert_int_equal(open_id, id);
    assert_string_equal(found.specimen, "7");
    OK(log_read_open_series(bench->reader, "other input", &open_id, &found, &err));
    assert_int_equal(open_id, 0);
    OK(log_series_close(bench->writer, id, LOG_SCENE_MS + 5000, &err));
    OK(log_series_close(bench->writer, id, LOG_SCENE_MS + 9000, &err));
    OK(log_read_series_json(bench->reader, id, &text, &err));
    json_t *value = parse(&text, "", "");
    assert_string_equal(text_at(value, "name"), "after the glue dried");
    assert_string_equal(text_at(value, "closed"), "2026-12-01T08:00:05.000Z");
    assert_int_equal(json_integer_value(json_object_get(value, "strikes")), 3);
    json_decref(value);
    assert_false(log_series_rename(bench->writer, 99, "x", &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
    assert_false(log_series_close(bench->writer, 99, 0, &err));
    assert_false(log_read_series_json(bench->reader, 99, &text, &err));
}

static void series_are_listed_newest_first_in_pages(void **state)
{
    struct bench *bench = *state;
    struct log_series series = {.name = "s"};
    int64_t id = 0;
    for (int i = 0; i < 25; i++)
        OK(log_series_create(bench->writer, &series, LOG_SCENE_MS, &id, &err));
    int64_t before = 0;
    size_t count = 0;
    for (;;) {
        struct text text = {0};
        OK(log_list_series_json(bench->reader, before, 10, &text, &before, &err));
        json_t *value = parse(&text, "[", "]");
        for (size_t i = 0; i < json_array_size(value); i++) {
            json_t *number = json_object_get(json_array_get(value, i), "id");
            assert_int_equal(json_integer_value(number), 25 - (int64_t)count++);
        }
        json_decref(value);
        if (before == 0)
            break;
    }
    assert_int_equal(count, 25);
}

static void a_sheet_is_changed_only_on_top_of_the_newest(void **state)
{
    struct bench *bench = *state;
    char first[LOG_ETAG_MAX];
    char second[LOG_ETAG_MAX];
    char etag[LOG_ETAG_MAX];
    struct text text = {0};
    OK(log_part_put(bench->writer, "rod", "[part]\nname = rod\n", NULL, 1, first, &err));
    assert_false(log_part_put(bench->writer, "rod", "x", NULL, 1, second, &err));
    assert_int_equal(err.kind, ERROR_CONFLICT);
    OK(log_part_put(bench->writer, "rod", "second", first, 2, second, &err));
    assert_string_not_equal(first, second);
    assert_false(log_part_put(bench->writer, "rod", "third", first, 3, etag, &err));
    assert_int_equal(err.kind, ERROR_CONFLICT);
    assert_false(log_part_put(bench->writer, "new", "x", first, 3, etag, &err));
    assert_int_equal(err.kind, ERROR_CONFLICT);
    OK(log_read_part(bench->reader, "rod", 0, &text, etag, &err));
    assert_string_equal(text.data, "second");
    assert_string_equal(etag, second);
    text_clear(&text);
    OK(log_read_part(bench->reader, "rod", 1, &text, etag, &err));
    assert_string_equal(text.data, "[part]\nname = rod\n");
    assert_string_equal(etag, first);
    text_clear(&text);
    assert_false(log_read_part(bench->reader, "rod", 9, &text, etag, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
    static const char *const names[] = {"", "../etc", ".hidden", "a b", "a/b", "a\nb"};
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        assert_false(log_part_put(bench->writer, names[i], "x", NULL, 1, etag, &err));
        assert_int_equal(err.kind, ERROR_USAGE);
    }
    OK(log_part_put(bench->writer, "goblet", "x", NULL, 1, etag, &err));
    text_clear(&text);
    OK(log_list_parts_json(bench->reader, &text, &err));
    json_t *value = parse(&text, "[", "]");
    assert_int_equal(json_array_size(value), 2);
    assert_string_equal(text_at(json_array_get(value, 1), "etag"), second);
    json_decref(value);
}

static void measurements_and_events_come_back_in_time_order(void **state)
{
    struct bench *bench = *state;
    struct text text = {0};
    int64_t id = 0;
    for (int i = 0; i < 10; i++) {
        OK(log_measurement_add(bench->writer, 1000 * i, "temperature", 20.1 + i, "°C", &id, &err));
        OK(log_measurement_add(bench->writer, 1000 * i, "humidity", 40, "%", &id, &err));
    }
    OK(log_list_measurements_json(bench->reader, "temperature", 2000, 8000, 100, &text, &err));
    json_t *value = parse(&text, "[", "]");
    assert_int_equal(json_array_size(value), 6);
    assert_true(json_real_value(json_object_get(json_array_get(value, 0), "value")) == 22.1);
    assert_string_equal(text_at(json_array_get(value, 0), "unit"), "°C");
    json_decref(value);
    OK(log_list_measurements_json(bench->reader, NULL, 0, INT64_MAX, 3, &text, &err));
    value = parse(&text, "[", "]");
    assert_int_equal(json_array_size(value), 3);
    assert_string_equal(text_at(json_array_get(value, 2), "time"), "1970-01-01T00:00:09.000Z");
    json_decref(value);
    assert_false(log_measurement_add(bench->writer, 0, "", 1, "", &id, &err));
    assert_false(log_measurement_add(bench->writer, 0, "x", (double)NAN, "", &id, &err));
    assert_int_equal(err.kind, ERROR_USAGE);

    OK(log_input_event(bench->writer, 10, "USB mic", "lost", 0, &err));
    OK(log_notice(bench->writer, 20, "drift", "f falls: \"0.1 Hz\" a day", &err));
    OK(log_input_event(bench->writer, 30, "USB mic", "listening", 2500, &err));
    OK(log_list_events_json(bench->reader, "input", 0, INT64_MAX, 100, &text, &err));
    value = parse(&text, "[", "]");
    assert_int_equal(json_array_size(value), 2);
    assert_string_equal(text_at(json_array_get(value, 1), "input"), "USB mic");
    assert_true(json_real_value(json_object_get(json_array_get(value, 1), "gap_s")) == 2.5);
    json_decref(value);
    OK(log_list_events_json(bench->reader, NULL, 0, INT64_MAX, 100, &text, &err));
    value = parse(&text, "[", "]");
    assert_int_equal(json_array_size(value), 3);
    json_decref(value);
}

/* Breaks the log as `sql` says; the check must name the invariant. */
static void check_finds(struct bench *bench, const char *sql, const char *invariant)
{
    sqlite3 *db = NULL;
    assert_int_equal(sqlite3_open(bench->path, &db), SQLITE_OK);
    assert_int_equal(sqlite3_exec(db, "BEGIN", NULL, NULL, NULL), SQLITE_OK);
    if (sqlite3_exec(db, sql, NULL, NULL, NULL) != SQLITE_OK)
        fail_msg("%s: %s", sql, sqlite3_errmsg(db));
    sqlite3_exec(db, "COMMIT", NULL, NULL, NULL);
    sqlite3_close(db);
    struct text findings = {0};
    size_t violations = 0;
    OK(log_check(bench->reader, &findings, &violations, &err));
    if (violations == 0 || strncmp(findings.data, invariant, strlen(invariant)) != 0)
        fail_msg("%s: expected %s, got: %s", sql, invariant, violations == 0 ? "" : findings.data);
    print_message("%s", findings.data);
    text_done(&findings);
}

static void the_check_finds_each_broken_invariant(void **state)
{
    struct bench *bench = *state;
    static const char *const breaks[][2] = {
        {"UPDATE sqlite_sequence SET seq = 5 WHERE name = 'strike'", "(1)"},
        {"UPDATE strike SET revision = 1000 WHERE id = 3", "(2)"},
        {"UPDATE state SET strikes = 9", "(3)"},
        {"DELETE FROM wave WHERE strike = 4", "(4)"},
        {"UPDATE strike SET has_samples = 0 WHERE id = 4", "(4)"},
        {"UPDATE wave SET data = x'00' WHERE strike = 4", "(4)"},
        {"UPDATE strike SET fit = x'0100' WHERE id = 4", "(5)"},
        {"UPDATE strike SET reading = '{' WHERE id = 4", "(5)"},
        {"UPDATE strike SET verdict = 1 WHERE id = 4", "(5)"},
        {"UPDATE strike SET series = 99 WHERE id = 4", "(6)"},
        {"INSERT INTO history SELECT id, 2, 0, recipe, fit, reading FROM strike WHERE id = 4",
         "(7)"},
        {"INSERT INTO spill (time_ms, closed_ms, clock_synced, keep_samples, settings, version,"
         " head, packing, data) VALUES (0, 0, 0, 1, '', '', x'01', 0, x'')",
         "(8)"},
    };
    append_strikes(bench, 10, 0);
    for (size_t i = 0; i < sizeof breaks / sizeof breaks[0]; i++) {
        /* Each on a fresh copy. */
        char copy[512];
        char name[40];
        snprintf(name, sizeof name, "copy%zu.sqlite", i);
        scratch_path(&bench->scratch, name, copy);
        OK(log_backup(bench->reader, copy, &err));
        struct bench broken = {.reader = log_reader_open(copy, &err)};
        snprintf(broken.path, sizeof broken.path, "%s", copy);
        OK(broken.reader != NULL);
        check_finds(&broken, breaks[i][0], breaks[i][1]);
        log_reader_close(broken.reader);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(a_series_opens_takes_strikes_gets_a_name_and_closes),
        CASE(series_are_listed_newest_first_in_pages),
        CASE(a_sheet_is_changed_only_on_top_of_the_newest),
        CASE(measurements_and_events_come_back_in_time_order),
        CASE(the_check_finds_each_broken_invariant),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
