/* The world breaks: kill -9, a full disk, a second writer, readers that sit in the way. */
#include "support/log_scene.h"
#include "support/scratch.h"

#include <errno.h>
#include <inttypes.h>
#include <pthread.h>
#include <setjmp.h>
#include <signal.h>
#include <sqlite3.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
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

/* Strike n of a run: everything follows from n, so that what comes back can be compared. */
static struct strike *nth_strike(int64_t n, size_t frame_count, struct reading *out_reading)
{
    uint64_t seed = (uint64_t)n * 77 + 5;
    struct strike *strike = log_scene_strike(&seed, (enum log_scene_samples)(n % 3), frame_count);
    log_scene_reading(&seed, VERDICT_GOOD, out_reading);
    return strike;
}

static bool append_nth(struct log_writer *writer, int64_t n, size_t frame_count, int64_t *out_id,
                       struct error *err)
{
    struct reading reading;
    struct strike *strike = nth_strike(n, frame_count, &reading);
    struct log_entry entry = {.strike = strike, .reading = &reading};
    log_scene_context(n, &entry.context);
    entry.context.strike_number = n;
    bool is_good = log_append(writer, &entry, 1, out_id, err);
    strike_destroy(strike);
    return is_good;
}

static void check_invariants(const char *path)
{
    struct error err = {0};
    struct text findings = {0};
    size_t violations = 0;
    struct log_reader *reader = log_reader_open(path, &err);
    if (reader == NULL || !log_check(reader, &findings, &violations, &err))
        fail_msg("%s", err.text);
    if (violations > 0)
        fail_msg("%s", findings.data);
    text_done(&findings);
    log_reader_close(reader);
}

/* ---- kill -9 ---- */

/* Child: writes strikes and tells each id once it is committed, until it is killed. */
static void write_until_killed(const char *path, int announce, int64_t first)
{
    struct log_writer *writer = log_writer_open(path, NULL, LOG_SCENE_MS, NULL, NULL);
    if (writer == NULL)
        _exit(3);
    for (int64_t n = first;; n++) {
        int64_t pair[2] = {n, 0};
        if (!append_nth(writer, n, 2000, &pair[1], NULL) ||
            write(announce, pair, sizeof pair) != (ssize_t)sizeof pair)
            _exit(4);
        if (n % 20 == 19)
            log_idle_step(writer);
    }
}

/* Reads `least` announcements, kills, then reads those that were still in the pipe. */
static size_t run_and_kill(const char *path, int64_t first, size_t least, long delay_ns,
                           int64_t (*pairs)[2], size_t capacity)
{
    int ends[2];
    assert_int_equal(pipe(ends), 0);
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        close(ends[0]);
        write_until_killed(path, ends[1], first);
    }
    close(ends[1]);
    size_t count = 0;
    while (count < least &&
           read(ends[0], pairs[count], sizeof pairs[count]) == (ssize_t)sizeof pairs[count])
        count++;
    /* Not a wait for an event: it makes the moment of death fall anywhere in a commit. */
    struct timespec delay = {.tv_nsec = delay_ns};
    nanosleep(&delay, NULL);
    kill(child, SIGKILL);
    while (count < capacity &&
           read(ends[0], pairs[count], sizeof pairs[count]) == (ssize_t)sizeof pairs[count])
        count++;
    close(ends[0]);
    int status = 0;
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_true(WIFSIGNALED(status));
    return count;
}

static void all_that_was_announced_survives_kill_9(void **state)
{
    struct bench *bench = *state;
    uint64_t seed = 4242;
    int64_t first = 0;
    int64_t newest_id = 0;
    static int64_t pairs[1000][2];
    print_message("seed %" PRIu64 "\n", seed);
    for (int round = 0; round < 8; round++) {
        long delay_ns = (long)(log_scene_next(&seed) % 8000000);
        size_t least = 1 + (size_t)(log_scene_next(&seed) % 30);
        size_t count = run_and_kill(bench->path, first, least, delay_ns, pairs, 1000);
        assert_true(count >= least);
        struct log_opening opening;
        struct error err = {0};
        struct log_writer *writer =
            log_writer_open(bench->path, NULL, LOG_SCENE_MS, &opening, &err);
        if (writer == NULL)
            fail_msg("%s", err.text);
        assert_true(opening.was_unclean);
        assert_false(opening.is_new);
        struct log_reader *reader = log_reader_open(bench->path, &err);
        assert_non_null(reader);
        for (size_t i = 0; i < count; i++) {
            struct reading reading;
            struct log_stored stored;
            struct strike *strike = nth_strike(pairs[i][0], 2000, &reading);
            assert_true(pairs[i][1] > newest_id);
            newest_id = pairs[i][1];
            if (!log_read_strike(reader, newest_id, &stored, &err))
                fail_msg("announced, then lost: %s", err.text);
            assert_int_equal(stored.context.strike_number, pairs[i][0]);
            log_scene_same_strike(strike, stored.strike);
            log_scene_same_reading(&reading, &stored.reading);
            log_stored_done(&stored);
            strike_destroy(strike);
        }
        first = pairs[count - 1][0] + 1;
        log_reader_close(reader);
        log_writer_close(writer);
    }
    check_invariants(bench->path);
}

/* ---- a full disk ---- */

/* A limit on the size of files stands in for a disk that is full: writes fail the same way. */
static void limit_file_size(rlim_t bytes)
{
    struct rlimit limit;
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &limit), 0);
    limit.rlim_cur = bytes;
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &limit), 0);
}

static void a_full_disk_loses_nothing_and_heals(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    struct rlimit before;
    getrlimit(RLIMIT_FSIZE, &before);
    signal(SIGXFSZ, SIG_IGN);
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    struct log_reader *reader = log_reader_open(bench->path, &err);
    int64_t id = 0;
    int64_t kept = 0;
    int64_t n = 0;
    limit_file_size(1500000);
    while (n < 1000 && append_nth(writer, n, 5000, &id, &err)) {
        kept = id;
        n++;
    }
    print_message("after %" PRId64 " strikes: %s\n", n, err.text);
    assert_true(n > 5 && n < 1000);
    assert_int_equal(err.kind, ERROR_STORAGE);
    /* Again and again: the same answer, nothing half-written, reading goes on. */
    for (int i = 0; i < 3; i++) {
        assert_false(append_nth(writer, n, 5000, &id, &err));
        assert_int_equal(err.kind, ERROR_STORAGE);
        struct log_counts counts;
        if (!log_counts(reader, &counts, &err))
            fail_msg("%s", err.text);
        assert_int_equal(counts.newest_id, kept);
        assert_int_equal(counts.strikes, n);
    }
    limit_file_size(before.rlim_cur);
    /* There is room again: the batch that the caller kept goes in, under the next id. */
    if (!append_nth(writer, n, 5000, &id, &err))
        fail_msg("%s", err.text);
    assert_int_equal(id, kept + 1);
    struct log_stored stored;
    assert_true(log_read_strike(reader, id, &stored, &err));
    assert_int_equal(stored.context.strike_number, n);
    log_stored_done(&stored);
    log_reader_close(reader);
    log_writer_close(writer);
    signal(SIGXFSZ, SIG_DFL);
    check_invariants(bench->path);
}

/* ---- others at the same file ---- */

static void a_second_writer_is_refused(void **state)
{
    struct bench *bench = *state;
    int ends[2];
    assert_int_equal(pipe(ends), 0);
    struct log_writer *writer = NULL;
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) { /* holds the log until the parent has tried */
        char byte = 0;
        struct log_writer *mine = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, NULL);
        if (mine == NULL || write(ends[1], "r", 1) != 1)
            _exit(1);
        for (;;)
            (void)!read(ends[0], &byte, 0), pause();
    }
    char byte = 0;
    assert_int_equal(read(ends[0], &byte, 1), 1);
    struct error err = {0};
    writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    assert_null(writer);
    print_message("%s\n", err.text);
    assert_non_null(strstr(err.text, "another waned"));
    kill(child, SIGKILL);
    waitpid(child, NULL, 0);
    close(ends[0]);
    close(ends[1]);
    writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    assert_non_null(writer);
    log_writer_close(writer);
}

struct watcher {
    const char *path;
    atomic_bool *stop;
    size_t pages;
    bool has_failed;
    char text[256];
};

/* Reads the newest page over and over: ids fall by one, nothing is missing. */
static void *watch(void *to)
{
    struct watcher *watcher = to;
    struct error err = {0};
    struct log_reader *reader = log_reader_open(watcher->path, &err);
    int64_t newest = 0;
    watcher->has_failed = reader == NULL;
    while (!watcher->has_failed && !atomic_load(watcher->stop)) {
        struct log_selection selection = {.limit = 20};
        int64_t ids[20];
        static _Thread_local struct reading readings[20];
        struct log_page page;
        if (!log_read_readings(reader, &selection, ids, readings, NULL, &page, &err)) {
            watcher->has_failed = true;
            break;
        }
        for (size_t i = 1; i < page.count; i++)
            watcher->has_failed = watcher->has_failed || ids[i] != ids[i - 1] - 1;
        if (page.count > 0) {
            watcher->has_failed = watcher->has_failed || ids[0] < newest;
            newest = ids[0];
        }
        watcher->pages++;
    }
    memcpy(watcher->text, err.text, sizeof watcher->text);
    log_reader_close(reader);
    return NULL;
}

static void readers_see_whole_commits_while_the_writer_goes_on(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    atomic_bool stop = false;
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    struct watcher watchers[2] = {{.path = bench->path, .stop = &stop},
                                  {.path = bench->path, .stop = &stop}};
    pthread_t threads[2];
    for (int i = 0; i < 2; i++)
        assert_int_equal(pthread_create(&threads[i], NULL, watch, &watchers[i]), 0);
    for (int64_t n = 0; n < 150; n++) {
        int64_t id = 0;
        if (!append_nth(writer, n, 1000, &id, &err))
            fail_msg("%s", err.text);
        if (n % 10 == 0)
            log_idle_step(writer);
    }
    atomic_store(&stop, true);
    for (int i = 0; i < 2; i++) {
        pthread_join(threads[i], NULL);
        if (watchers[i].has_failed)
            fail_msg("reader %d: %s", i, watchers[i].text);
    }
    log_writer_close(writer);
    check_invariants(bench->path);
}

static int64_t size_of(const char *path)
{
    struct stat file;
    return stat(path, &file) == 0 ? (int64_t)file.st_size : 0;
}

static void the_wal_is_emptied_however_much_is_read(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    struct log_reader *reader = log_reader_open(bench->path, &err);
    char wal[600];
    snprintf(wal, sizeof wal, "%s-wal", bench->path);
    int64_t largest = 0;
    for (int64_t n = 0; n < 200; n++) {
        int64_t id = 0;
        struct log_stored stored;
        if (!append_nth(writer, n, 60000, &id, &err) || !log_read_strike(reader, id, &stored, &err))
            fail_msg("%s", err.text);
        log_stored_done(&stored);
        largest = size_of(wal) > largest ? size_of(wal) : largest;
    }
    print_message("log %" PRId64 " bytes, its WAL at most %" PRId64 "\n", size_of(bench->path),
                  largest);
    /* 1000 pages of 8 KiB begin a checkpoint; one strike more may be in it. */
    assert_true(largest < INT64_C(10) << 20);
    assert_true(log_idle_step(writer));
    assert_int_equal(size_of(wal), 0);
    log_reader_close(reader);
    log_writer_close(writer);
}

static void a_reader_in_the_way_does_not_hold_the_writer_up(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    int64_t id = 0;
    assert_true(append_nth(writer, 0, 1000, &id, &err));
    /* Another program keeps an old snapshot open. */
    sqlite3 *other = NULL;
    assert_int_equal(sqlite3_open(bench->path, &other), SQLITE_OK);
    assert_int_equal(sqlite3_exec(other, "BEGIN; SELECT count(*) FROM strike", NULL, NULL, NULL),
                     SQLITE_OK);
    for (int64_t n = 1; n < 20; n++) {
        if (!append_nth(writer, n, 1000, &id, &err))
            fail_msg("%s", err.text);
        (void)log_idle_step(writer);
    }
    assert_false(log_idle_step(writer));
    sqlite3_exec(other, "COMMIT", NULL, NULL, NULL);
    sqlite3_close(other);
    assert_true(log_idle_step(writer));
    log_writer_close(writer);
}

static void free_pages_are_given_back_after_pruning(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    for (int64_t n = 2; n < 300; n += 3) { /* floats: 200 kB each */
        int64_t id = 0;
        if (!append_nth(writer, n, 50000, &id, &err))
            fail_msg("%s", err.text);
    }
    while (!log_idle_step(writer))
        ;
    int64_t before = size_of(bench->path);
    struct log_pruning pruning = {.bytes_max = 2000000};
    bool more = true;
    while (more) {
        if (!log_prune_step(writer, &pruning, &more, &err))
            fail_msg("%s", err.text);
    }
    while (!log_idle_step(writer))
        ;
    print_message("%" PRId64 " bytes before, %" PRId64 " after\n", before, size_of(bench->path));
    assert_true(before > 20000000);
    /* 1024 free pages are kept for the next strikes. */
    assert_true(size_of(bench->path) < 2000000 + 1100 * 8192);
    log_writer_close(writer);
    check_invariants(bench->path);
}

static void a_copy_made_while_writing_is_whole(void **state)
{
    struct bench *bench = *state;
    struct error err = {0};
    char copy[600];
    scratch_path(&bench->scratch, "copy.sqlite", copy);
    struct log_writer *writer = log_writer_open(bench->path, NULL, LOG_SCENE_MS, NULL, &err);
    struct log_reader *reader = log_reader_open(bench->path, &err);
    int64_t id = 0;
    for (int64_t n = 0; n < 20; n++)
        assert_true(append_nth(writer, n, 1000, &id, &err));
    if (!log_backup(reader, copy, &err))
        fail_msg("%s", err.text);
    assert_false(log_backup(reader, copy, &err));
    assert_non_null(strstr(err.text, "exists already"));
    assert_true(append_nth(writer, 20, 1000, &id, &err));
    log_reader_close(reader);
    log_writer_close(writer);
    check_invariants(copy);
    reader = log_reader_open(copy, &err);
    struct log_counts counts;
    assert_true(log_counts(reader, &counts, &err));
    assert_int_equal(counts.strikes, 20);
    log_reader_close(reader);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
#define CASE(name) cmocka_unit_test_setup_teardown(name, begin, end)
        CASE(all_that_was_announced_survives_kill_9),
        CASE(a_full_disk_loses_nothing_and_heals),
        CASE(a_second_writer_is_refused),
        CASE(readers_see_whole_commits_while_the_writer_goes_on),
        CASE(the_wal_is_emptied_however_much_is_read),
        CASE(a_reader_in_the_way_does_not_hold_the_writer_up),
        CASE(free_pages_are_given_back_after_pruning),
        CASE(a_copy_made_while_writing_is_whole),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
