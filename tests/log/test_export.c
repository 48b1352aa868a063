/* A selection as CSV and JSON, and the samples as WAV. */
#include <jansson.h> /* before text.h, which renames what both define */

#include "support/log_scene.h"
#include "support/scratch.h"

#include <setjmp.h>
#include <sndfile.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#define COLUMNS 38

struct bench {
    struct scratch scratch;
    char path[512];
    struct log_writer *writer;
    struct log_reader *reader;
};

static struct error err;

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

static void fill(struct bench *bench, int64_t count, const char *note)
{
    enum { BATCH = 100 };
    struct log_entry *entries = calloc(BATCH, sizeof *entries);
    struct reading *readings = calloc(BATCH, sizeof *readings);
    struct strike *strikes[BATCH];
    int64_t ids[BATCH];
    uint64_t seed = 99;
    assert_true(entries != NULL && readings != NULL);
    for (int64_t done = 0; done < count; done += BATCH) {
        size_t n = count - done < BATCH ? (size_t)(count - done) : BATCH;
        for (size_t i = 0; i < n; i++) {
            strikes[i] = log_scene_strike(&seed, SAMPLES_16_BIT, 50);
            log_scene_reading(&seed, (enum verdict)((done + (int64_t)i) % 3), &readings[i]);
            entries[i].strike = strikes[i];
            entries[i].reading = &readings[i];
            log_scene_context(done + (int64_t)i, &entries[i].context);
        }
        if (!log_append(bench->writer, entries, n, ids, &err))
            fail_msg("%s", err.text);
        for (size_t i = 0; i < n; i++)
            strike_destroy(strikes[i]);
    }
    struct log_change change = {.note = note, .set_aside = LOG_SET, .reason = ""};
    if (note != NULL && !log_change_strike(bench->writer, 1, &change, NULL, &err))
        fail_msg("%s", err.text);
    free(entries);
    free(readings);
}

static void export_all(struct bench *bench, const struct log_selection *selection,
                       enum log_export_format format, struct text *out)
{
    struct log_export *export = log_export_begin(bench->reader, selection, format, &err);
    if (export == NULL)
        fail_msg("%s", err.text);
    bool is_done = false;
    while (!is_done) {
        if (!log_export_next(export, out, &is_done, &err))
            fail_msg("%s", err.text);
    }
    log_export_end(export);
}

/* A reader of CSV by RFC 4180 that shares no code with the writer: cells of one row, or 0. */
static size_t read_row(const char **at, char cells[COLUMNS + 1][600])
{
    size_t count = 0;
    if (**at == '\0')
        return 0;
    for (;;) {
        assert_true(count <= COLUMNS);
        char *to = cells[count++];
        bool is_quoted = **at == '"';
        *at += is_quoted;
        while (is_quoted ? !((*at)[0] == '"' && (*at)[1] != '"')
                         : **at != ',' && **at != '\n' && **at != '\0') {
            *at += is_quoted && **at == '"';
            *to++ = *(*at)++;
        }
        *to = '\0';
        *at += is_quoted;
        if (*(*at)++ == '\n')
            return count;
    }
}

static size_t column_of(char heads[COLUMNS + 1][600], const char *name)
{
    for (size_t i = 0; i < COLUMNS; i++) {
        if (strcmp(heads[i], name) == 0)
            return i;
    }
    fail_msg("there is no column %s", name);
    return 0;
}

static char heads[COLUMNS + 1][600];
static char cells[COLUMNS + 1][600];

static void csv_has_a_row_for_each_mode_with_the_values_of_the_reading(void **state)
{
    struct bench *bench = *state;
    fill(bench, 300, NULL);
    struct log_selection all = {0};
    struct text csv = {0};
    export_all(bench, &all, LOG_EXPORT_CSV, &csv);
    const char *at = csv.data;
    assert_int_equal(read_row(&at, heads), COLUMNS);
    size_t f = column_of(heads, "f_hz");
    size_t decay_u = column_of(heads, "decay_u_per_s");
    for (int64_t id = 1; id <= 300; id++) {
        struct log_stored stored;
        assert_true(log_read_strike(bench->reader, id, &stored, &err));
        unsigned rows = stored.reading.mode_count > 0 ? stored.reading.mode_count : 1;
        for (unsigned i = 0; i < rows; i++) {
            assert_int_equal(read_row(&at, cells), COLUMNS);
            assert_int_equal(strtoll(cells[0], NULL, 10), id);
            if (stored.reading.mode_count == 0) {
                assert_string_equal(cells[f], "");
                continue;
            }
            const struct mode *mode = &stored.reading.modes[i];
            /* The last digit is at most u/100 (json_measured). */
            assert_true(strtod(cells[f], NULL) - mode->f_hz <= mode->f_u_hz / 100);
            assert_true(mode->f_hz - strtod(cells[f], NULL) <= mode->f_u_hz / 100);
            assert_true(strtod(cells[decay_u], NULL) <= 1.01 * mode->decay_u_per_s);
            assert_string_equal(cells[column_of(heads, "mode")], mode->label);
        }
        log_stored_done(&stored);
    }
    assert_int_equal(read_row(&at, cells), 0);
    text_done(&csv);
}

static void no_note_becomes_a_formula(void **state)
{
    struct bench *bench = *state;
    static const char *const notes[] = {"=1+1", "+1", "-1", "@SUM(A1)", "\t=1", "\r=1"};
    fill(bench, 1, NULL);
    for (size_t i = 0; i < sizeof notes / sizeof notes[0]; i++) {
        struct log_change change = {.note = notes[i]};
        assert_true(log_change_strike(bench->writer, 1, &change, NULL, &err));
        struct log_selection all = {0};
        struct text csv = {0};
        export_all(bench, &all, LOG_EXPORT_CSV, &csv);
        const char *at = csv.data;
        read_row(&at, heads);
        assert_int_equal(read_row(&at, cells), COLUMNS);
        const char *cell = cells[column_of(heads, "note")];
        assert_int_equal(cell[0], '\'');
        assert_string_equal(cell + 1, notes[i]);
        text_done(&csv);
    }
}

static void quotes_commas_and_new_lines_stay_in_their_cell(void **state)
{
    struct bench *bench = *state;
    static const char note[] = "he said \"tap it\", then\nleft, \"\"";
    fill(bench, 1, note);
    struct log_selection all = {0};
    struct text csv = {0};
    export_all(bench, &all, LOG_EXPORT_CSV, &csv);
    const char *at = csv.data;
    read_row(&at, heads);
    read_row(&at, cells);
    assert_string_equal(cells[column_of(heads, "note")], note);
    assert_string_equal(cells[column_of(heads, "set_aside")], "(no reason given)");
    text_done(&csv);
}

static void json_is_one_document_with_every_strike_oldest_first(void **state)
{
    struct bench *bench = *state;
    fill(bench, 600, "n");
    struct log_selection all = {0};
    struct text text = {0};
    export_all(bench, &all, LOG_EXPORT_JSON, &text);
    json_error_t where;
    json_t *document = json_loadb(text.data, text.length, JSON_REJECT_DUPLICATES, &where);
    if (document == NULL)
        fail_msg("%s", where.text);
    json_t *strikes = json_object_get(document, "strikes");
    assert_int_equal(json_array_size(strikes), 600);
    for (size_t i = 0; i < 600; i++) {
        json_t *id = json_object_get(json_array_get(strikes, i), "id");
        assert_int_equal(json_integer_value(id), i + 1);
    }
    json_decref(document);
    text_done(&text);
}

static size_t count_exported(struct bench *bench, const struct log_selection *selection,
                             int64_t *out_first)
{
    struct text text = {0};
    export_all(bench, selection, LOG_EXPORT_JSON, &text);
    json_t *document = json_loadb(text.data, text.length, 0, NULL);
    json_t *strikes = json_object_get(document, "strikes");
    size_t count = json_array_size(strikes);
    *out_first = json_integer_value(json_object_get(json_array_get(strikes, 0), "id"));
    json_decref(document);
    text_done(&text);
    return count;
}

static void an_export_takes_what_is_selected(void **state)
{
    struct bench *bench = *state;
    int64_t first = 0;
    fill(bench, 600, NULL);
    struct log_selection selection = {.limit = 7};
    assert_int_equal(count_exported(bench, &selection, &first), 7);
    assert_int_equal(first, 594);
    selection = (struct log_selection){.verdicts = 1u << VERDICT_GOOD, .limit = 7};
    assert_int_equal(count_exported(bench, &selection, &first), 7);
    assert_int_equal(first, 580);
    selection = (struct log_selection){.has_from = true, .from_ms = LOG_SCENE_MS + 100000};
    assert_int_equal(count_exported(bench, &selection, &first), 500);
    assert_int_equal(first, 101);
    selection = (struct log_selection){.has_to = true, .to_ms = LOG_SCENE_MS + 100000};
    assert_int_equal(count_exported(bench, &selection, &first), 100);
    selection = (struct log_selection){.series = 5};
    assert_int_equal(count_exported(bench, &selection, &first), 0);
    selection = (struct log_selection){.before = 11};
    assert_int_equal(count_exported(bench, &selection, &first), 10);
    selection = (struct log_selection){.has_changed_since = true, .changed_since = 590};
    assert_int_equal(count_exported(bench, &selection, &first), 10);
}

static void strikes_that_come_during_an_export_are_left_out(void **state)
{
    struct bench *bench = *state;
    fill(bench, 300, NULL);
    struct log_selection all = {0};
    struct log_export *export = log_export_begin(bench->reader, &all, LOG_EXPORT_JSON, &err);
    struct text text = {0};
    bool is_done = false;
    assert_true(log_export_next(export, &text, &is_done, &err));
    assert_false(is_done);
    fill(bench, 10, NULL);
    while (!is_done)
        assert_true(log_export_next(export, &text, &is_done, &err));
    log_export_end(export);
    json_t *document = json_loadb(text.data, text.length, 0, NULL);
    assert_int_equal(json_array_size(json_object_get(document, "strikes")), 300);
    json_decref(document);
    text_done(&text);
}

/* ---- WAV, read back by libsndfile ---- */

struct memory {
    const unsigned char *bytes;
    sf_count_t size, at;
};

static sf_count_t memory_length(void *user)
{
    return ((struct memory *)user)->size;
}

static sf_count_t memory_seek(sf_count_t offset, int whence, void *user)
{
    struct memory *memory = user;
    memory->at = offset + (whence == SEEK_SET ? 0 : whence == SEEK_CUR ? memory->at : memory->size);
    return memory->at;
}

static sf_count_t memory_read(void *out, sf_count_t count, void *user)
{
    struct memory *memory = user;
    count = count < memory->size - memory->at ? count : memory->size - memory->at;
    memcpy(out, memory->bytes + memory->at, (size_t)count);
    memory->at += count;
    return count;
}

static sf_count_t memory_tell(void *user)
{
    return ((struct memory *)user)->at;
}

static void the_wav_file_holds_the_very_samples(void **state)
{
    struct bench *bench = *state;
    static const int formats[] = {SF_FORMAT_PCM_16, SF_FORMAT_PCM_24, SF_FORMAT_FLOAT};
    uint64_t seed = 3;
    for (int kind = 0; kind < 3; kind++) {
        struct strike *strike = log_scene_strike(&seed, (enum log_scene_samples)kind, 5000);
        struct reading reading;
        int64_t id = 0;
        strike->rate_hz = 96000;
        log_scene_reading(&seed, VERDICT_GOOD, &reading);
        struct log_entry entry = {.strike = strike, .reading = &reading};
        log_scene_context(0, &entry.context);
        assert_true(log_append(bench->writer, &entry, 1, &id, &err));
        struct memory memory = {0};
        unsigned char *bytes = NULL;
        size_t size = 0;
        assert_true(log_read_wav(bench->reader, id, &bytes, &size, &err));
        memory.bytes = bytes;
        memory.size = (sf_count_t)size;
        SF_VIRTUAL_IO io = {memory_length, memory_seek, memory_read, NULL, memory_tell};
        SF_INFO info = {0};
        SNDFILE *file = sf_open_virtual(&io, SFM_READ, &info, &memory);
        assert_non_null(file);
        assert_int_equal(info.format, SF_FORMAT_WAV | formats[kind]);
        assert_int_equal(info.samplerate, 96000);
        static float samples[5001];
        assert_int_equal(sf_readf_float(file, samples, 5001), 5000);
        assert_memory_equal(samples, strike->samples, 5000 * sizeof *samples);
        sf_close(file);
        free(bytes);
        strike_destroy(strike);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(csv_has_a_row_for_each_mode_with_the_values_of_the_reading),
        CASE(no_note_becomes_a_formula),
        CASE(quotes_commas_and_new_lines_stay_in_their_cell),
        CASE(json_is_one_document_with_every_strike_oldest_first),
        CASE(an_export_takes_what_is_selected),
        CASE(strikes_that_come_during_an_export_are_left_out),
        CASE(the_wav_file_holds_the_very_samples),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
