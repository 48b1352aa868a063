/* Opening: what is refused, what is mended, and what people are told. */
#include "support/log_scene.h"
#include "support/scratch.h"

#include <errno.h>
#include <setjmp.h>
#include <sqlite3.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmocka.h>

struct bench {
    struct scratch scratch;
    char path[512];
};

static int begin(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    assert_non_null(bench);
    scratch_make(&bench->scratch);
    scratch_path(&bench->scratch, "log.sqlite", bench->path);
    *state = bench;
    return 0;
}

static int end(void **state)
{
    struct bench *bench = *state;
    scratch_remove(&bench->scratch);
    free(bench);
    return 0;
}

static void run_sql(const char *path, const char *sql)
{
    sqlite3 *db = NULL;
    char *text = NULL;
    assert_int_equal(sqlite3_open(path, &db), SQLITE_OK);
    if (sqlite3_exec(db, sql, NULL, NULL, &text) != SQLITE_OK)
        fail_msg("%s: %s", sql, text);
    sqlite3_close(db);
}

static int64_t ask_sql(const char *path, const char *sql)
{
    sqlite3 *db = NULL;
    sqlite3_stmt *statement = NULL;
    assert_int_equal(sqlite3_open(path, &db), SQLITE_OK);
    assert_int_equal(sqlite3_prepare_v2(db, sql, -1, &statement, NULL), SQLITE_OK);
    assert_int_equal(sqlite3_step(statement), SQLITE_ROW);
    int64_t value = sqlite3_column_int64(statement, 0);
    sqlite3_finalize(statement);
    sqlite3_close(db);
    return value;
}

/* Opens, appends `count` strikes, closes. */
static void make_log(const char *path, int count)
{
    struct error err = {0};
    struct log_writer *writer = log_writer_open(path, NULL, LOG_SCENE_MS, NULL, &err);
    if (writer == NULL)
        fail_msg("%s", err.text);
    uint64_t seed = 7;
    for (int n = 0; n < count; n++) {
        struct strike *strike = log_scene_strike(&seed, SAMPLES_24_BIT, 3000);
        struct reading reading;
        int64_t id = 0;
        log_scene_reading(&seed, VERDICT_GOOD, &reading);
        struct log_entry entry = {.strike = strike, .reading = &reading};
        log_scene_context(n, &entry.context);
        if (!log_append(writer, &entry, 1, &id, &err))
            fail_msg("%s", err.text);
        strike_destroy(strike);
    }
    log_writer_close(writer);
}

/* The writer and the reader refuse `path` with a sentence that has `word` in it. */
static void check_refused(const char *path, const char *word)
{
    struct error err = {0};
    assert_null(log_writer_open(path, NULL, LOG_SCENE_MS, NULL, &err));
    print_message("%s\n", err.text);
    if (strstr(err.text, word) == NULL || strchr(err.text, '\n') != NULL)
        fail_msg("expected \"%s\" in: %s", word, err.text);
}

static void a_new_log_has_the_pragmas_that_it_lives_by(void **state)
{
    struct bench *bench = *state;
    struct log_opening opening;
    struct error err = {0};
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, &opening, &err);
    assert_non_null(writer);
    assert_true(opening.is_new);
    assert_false(opening.was_unclean);
    assert_int_equal(strlen(log_writer_token(writer)), 32);
    assert_int_equal(ask_sql(bench->path, "PRAGMA application_id"), 0x57414E45);
    assert_int_equal(ask_sql(bench->path, "PRAGMA user_version"), 2);
    assert_int_equal(ask_sql(bench->path, "PRAGMA page_size"), 8192);
    assert_int_equal(ask_sql(bench->path, "PRAGMA auto_vacuum"), 2);
    assert_int_equal(ask_sql(bench->path, "SELECT journal_mode = 'wal' FROM pragma_journal_mode"),
                     1);
    log_writer_close(writer);
    /* Closed in order: everything is in the one file. */
    char wal[600];
    snprintf(wal, sizeof wal, "%s-wal", bench->path);
    assert_int_not_equal(access(wal, F_OK), 0);
}

static void the_token_stays_with_the_log(void **state)
{
    struct bench *bench = *state;
    char first[LOG_TOKEN_MAX];
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, NULL);
    snprintf(first, sizeof first, "%s", log_writer_token(writer));
    log_writer_close(writer);
    struct log_opening opening;
    writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, &opening, NULL);
    assert_string_equal(first, log_writer_token(writer));
    assert_false(opening.is_new);
    assert_false(opening.was_unclean);
    struct log_reader *reader = log_reader_open(bench->path, NULL);
    struct log_counts counts;
    assert_true(log_counts(reader, &counts, NULL));
    assert_string_equal(first, counts.token);
    assert_int_equal(counts.since_ms, LOG_SCENE_MS);
    log_reader_close(reader);
    log_writer_close(writer);
}

static void another_programs_database_is_refused_untouched(void **state)
{
    struct bench *bench = *state;
    run_sql(bench->path, "CREATE TABLE songs (name TEXT); INSERT INTO songs VALUES ('one')");
    check_refused(bench->path, "another program's database");
    assert_int_equal(ask_sql(bench->path, "SELECT count(*) FROM songs"), 1);
    assert_null(log_reader_open(bench->path, NULL));
    run_sql(bench->path, "PRAGMA application_id = 77");
    check_refused(bench->path, "another program's database");
}

static void a_newer_log_is_refused_untouched(void **state)
{
    struct bench *bench = *state;
    make_log(bench->path, 3);
    run_sql(bench->path, "PRAGMA user_version = 99");
    check_refused(bench->path, "newer Wane");
    struct error err = {0};
    assert_null(log_reader_open(bench->path, &err));
    assert_non_null(strstr(err.text, "newer Wane"));
    assert_int_equal(ask_sql(bench->path, "SELECT count(*) FROM strike"), 3);
}

static void a_file_that_is_no_database_is_refused_untouched(void **state)
{
    struct bench *bench = *state;
    char path[512];
    static const char text[] = "glaze recipe: two parts ash, one part feldspar, and patience. "
                               "Fire slowly; let it cool overnight before you tap it.";
    scratch_path(&bench->scratch, "notes.txt", path);
    scratch_write(path, text, sizeof text);
    check_refused(path, "is not a log");
    struct stat file;
    assert_int_equal(stat(path, &file), 0);
    assert_int_equal(file.st_size, sizeof text);
}

static void check_begun_anew(const struct bench *bench)
{
    struct log_opening opening;
    struct error err = {0};
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, &opening, &err);
    if (writer == NULL)
        fail_msg("%s", err.text);
    assert_true(opening.is_new);
    print_message("%s\n", opening.notice);
    assert_non_null(strstr(opening.notice, "log.sqlite.corrupt-2026-12-01T08-00-00.000Z"));
    log_writer_close(writer);
    char aside[700];
    snprintf(aside, sizeof aside, "%s.corrupt-2026-12-01T08-00-00.000Z", bench->path);
    assert_int_equal(access(aside, F_OK), 0);
}

static void a_log_that_was_cut_short_goes_aside_and_a_new_one_begins(void **state)
{
    struct bench *bench = *state;
    make_log(bench->path, 30);
    struct stat file;
    assert_int_equal(stat(bench->path, &file), 0);
    assert_int_equal(truncate(bench->path, file.st_size / 2 - 100), 0);
    check_begun_anew(bench);
}

static void a_log_with_a_ruined_header_goes_aside(void **state)
{
    struct bench *bench = *state;
    make_log(bench->path, 3);
    FILE *file = fopen(bench->path, "r+b");
    assert_non_null(file);
    for (int i = 0; i < 40; i++)
        fputc(0xA5, file);
    fclose(file);
    check_begun_anew(bench);
}

static void a_page_ruined_before_an_unclean_exit_is_found_at_opening(void **state)
{
    struct bench *bench = *state;
    make_log(bench->path, 30);
    run_sql(bench->path, "UPDATE state SET is_open = 1");
    int64_t page = ask_sql(bench->path, "SELECT rootpage FROM sqlite_schema WHERE name = 'strike'");
    FILE *file = fopen(bench->path, "r+b");
    assert_non_null(file);
    fseek(file, (long)((page - 1) * 8192), SEEK_SET);
    for (int i = 0; i < 64; i++)
        fputc(0x5A, file);
    fclose(file);
    check_begun_anew(bench);
}

static void an_unclean_exit_is_told_and_checked(void **state)
{
    struct bench *bench = *state;
    make_log(bench->path, 3);
    run_sql(bench->path, "UPDATE state SET is_open = 1");
    struct log_opening opening;
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, &opening, NULL);
    assert_non_null(writer);
    assert_true(opening.was_unclean);
    assert_true(opening.was_verified);
    log_writer_close(writer);
}

static void an_older_log_is_brought_up_to_date(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    make_log(bench->path, 3);
    run_sql(bench->path, "PRAGMA user_version = 1; ALTER TABLE state DROP COLUMN latest_ms;"
                         " ALTER TABLE state DROP COLUMN disordered");
    assert_null(log_reader_open(bench->path, &err));
    print_message("%s\n", err.text);
    assert_non_null(strstr(err.text, "older Wane"));
    make_log(bench->path, 2);
    assert_int_equal(ask_sql(bench->path, "SELECT count(*) FROM strike"), 5);
    struct log_reader *reader = log_reader_open(bench->path, &err);
    struct text findings = {0};
    size_t violations = 0;
    assert_true(log_check(reader, &findings, &violations, &err));
    if (violations > 0)
        fail_msg("%s", findings.data);
    log_reader_close(reader);
}

static void an_empty_file_becomes_a_log(void **state)
{
    struct bench *bench = *state;
    scratch_write(bench->path, "", 0);
    struct error err = {0};
    assert_null(log_reader_open(bench->path, &err));
    assert_non_null(strstr(err.text, "is empty"));
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, NULL);
    assert_non_null(writer);
    log_writer_close(writer);
}

static void a_missing_log_is_not_found(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    assert_null(log_reader_open(bench->path, &err));
    assert_int_equal(err.kind, ERROR_NOT_FOUND);
}

static void missing_folders_are_made(void **state)
{
    struct bench *bench = *state;
    char path[600];
    snprintf(path, sizeof path, "%s/a/b/log.sqlite", bench->scratch.folder);
    struct log_writer *writer = log_writer_open(path, NULL, LOG_SCENE_MS, NULL, NULL);
    assert_non_null(writer);
    log_writer_close(writer);
    /* scratch_remove takes files alone. */
    static const char *const tails[] = {"/a/b/log.sqlite", "/a/b/log.sqlite.lock", "/a/b", "/a"};
    for (size_t i = 0; i < sizeof tails / sizeof tails[0]; i++) {
        snprintf(path, sizeof path, "%s%s", bench->scratch.folder, tails[i]);
        assert_int_equal(remove(path), 0);
    }
}

static void places_that_cannot_hold_a_log_are_refused(void **state)
{
    struct bench *bench = *state;
    check_refused("/proc/nowhere/log.sqlite", "cannot be made");
    check_refused(bench->scratch.folder, "is no file");
    char path[600];
    snprintf(path, sizeof path, "%s/file", bench->scratch.folder);
    scratch_write(path, "x", 1);
    snprintf(path, sizeof path, "%s/file/log.sqlite", bench->scratch.folder);
    check_refused(path, "folder");
    if (geteuid() == 0) {
        print_message("(root may write everywhere: read-only folders are not tried)\n");
        return;
    }
    assert_int_equal(chmod(bench->scratch.folder, 0500), 0);
    check_refused(bench->path, "cannot be written");
    assert_int_equal(chmod(bench->scratch.folder, 0700), 0);
}

static void the_default_path_follows_the_environment(void **state)
{
    (void)state;
    char path[LOG_PATH_MAX];
    unsetenv("STATE_DIRECTORY");
    setenv("XDG_STATE_HOME", "/s", 1);
    assert_true(log_default_path(false, path, sizeof path, NULL));
    assert_string_equal(path, "/s/wane/log.sqlite");
    assert_true(log_default_path(true, path, sizeof path, NULL));
    assert_string_equal(path, "/s/wane/demo.sqlite");
    unsetenv("XDG_STATE_HOME");
    setenv("HOME", "/h", 1);
    assert_true(log_default_path(false, path, sizeof path, NULL));
    assert_string_equal(path, "/h/.local/state/wane/log.sqlite");
    setenv("STATE_DIRECTORY", "/var/lib/wane:/other", 1);
    assert_true(log_default_path(false, path, sizeof path, NULL));
    assert_string_equal(path, "/var/lib/wane/log.sqlite");
    unsetenv("STATE_DIRECTORY");
    unsetenv("HOME");
    struct error err = {0};
    assert_false(log_default_path(false, path, sizeof path, &err));
    assert_non_null(strstr(err.text, "--log FILE"));
    assert_false(log_default_path(false, path, 3, &err));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(a_new_log_has_the_pragmas_that_it_lives_by),
        CASE(the_token_stays_with_the_log),
        CASE(another_programs_database_is_refused_untouched),
        CASE(a_newer_log_is_refused_untouched),
        CASE(a_file_that_is_no_database_is_refused_untouched),
        CASE(a_log_that_was_cut_short_goes_aside_and_a_new_one_begins),
        CASE(a_log_with_a_ruined_header_goes_aside),
        CASE(a_page_ruined_before_an_unclean_exit_is_found_at_opening),
        CASE(an_unclean_exit_is_told_and_checked),
        CASE(an_older_log_is_brought_up_to_date),
        CASE(an_empty_file_becomes_a_log),
        CASE(a_missing_log_is_not_found),
        CASE(missing_folders_are_made),
        CASE(places_that_cannot_hold_a_log_are_refused),
        CASE(the_default_path_follows_the_environment),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
