/* Opening and closing: refusals, the one writer's lock, what to do with a damaged file. */
#include "log/log_inner.h"
#include "log/schema.h"
#include "wane/clock.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <unistd.h>

#define BUSY_TIMEOUT_MS 5000
/* The larger the page, the fewer overflow pages a wave needs; 8 KiB keeps a row of text in one. */
#define PAGE_SIZE 8192
/* quick_check costs 0.3 ms a MiB: below this it is done at once after an unclean exit. */
#define VERIFY_AT_ONCE_BYTES ((int64_t)256 << 20)
#define DISK_LOW_BYTES       ((int64_t)100 << 20)

bool log_text_fits(const char *text, size_t size, const char *what, struct error *err)
{
    if (text == NULL || strlen(text) < size)
        return true;
    return error_set(err, ERROR_LIMIT, "%s is longer than %zu bytes: shorten it", what, size - 1);
}

/* ---- files and folders ---- */

static bool make_folders(const char *path, struct error *err)
{
    char folder[LOG_PATH_MAX];
    snprintf(folder, sizeof folder, "%s", path);
    for (char *at = strchr(folder + 1, '/'); at != NULL; at = strchr(at + 1, '/')) {
        *at = '\0';
        if (mkdir(folder, 0755) != 0 && errno != EEXIST && access(folder, F_OK) != 0)
            return error_set(err, ERROR_STORAGE, "%s: the folder cannot be made: %s", folder,
                             strerror(errno));
        *at = '/';
    }
    return true;
}

static bool folder_is_writable(const char *path, struct error *err)
{
    char folder[LOG_PATH_MAX];
    snprintf(folder, sizeof folder, "%s", path);
    char *slash = strrchr(folder, '/');
    if (slash == NULL)
        snprintf(folder, sizeof folder, ".");
    else
        slash[slash == folder ? 1 : 0] = '\0';
    struct stat file;
    if (stat(folder, &file) == 0 && !S_ISDIR(file.st_mode))
        return error_set(err, ERROR_STORAGE, "%s: is no folder: choose another with --log FILE",
                         folder);
    if (access(folder, W_OK | X_OK) != 0)
        return error_set(err, ERROR_STORAGE,
                         "%s: the folder cannot be written (%s): choose another with --log FILE",
                         folder, strerror(errno));
    if (stat(path, &file) == 0 && !S_ISREG(file.st_mode))
        return error_set(err, ERROR_STORAGE, "%s: is no file: choose another with --log FILE",
                         path);
    if (access(path, F_OK) == 0 && access(path, R_OK | W_OK) != 0)
        return error_set(err, ERROR_STORAGE,
                         "%s: cannot be written (%s): check who owns it, or choose another with "
                         "--log FILE",
                         path, strerror(errno));
    return true;
}

/* A lock that dies with the process. SQLite alone would let two daemons write by turns, and their
 * strikes would mix. Returns -1 on failure. */
static int take_writer_lock(const char *path, struct error *err)
{
    char lock_path[LOG_PATH_MAX + 8];
    snprintf(lock_path, sizeof lock_path, "%s.lock", path);
    int fd = open(lock_path, O_RDWR | O_CREAT | O_CLOEXEC, 0644);
    if (fd < 0) {
        error_set(err, ERROR_STORAGE, "%s: cannot be made: %s", lock_path, strerror(errno));
        return -1;
    }
    struct flock lock = {.l_type = F_WRLCK, .l_whence = SEEK_SET};
    if (fcntl(fd, F_SETLK, &lock) != 0) {
        error_set(err, ERROR_STORAGE,
                  "%s: another waned writes this log: stop it, or choose another with --log FILE",
                  path);
        close(fd);
        return -1;
    }
    return fd;
}

/* Whether a file that SQLite cannot read was a log of ours: by its name, or by the mark that still
 * stands in its header (offset 68, SQLite file format section 1.3.9). Any other file is a
 * stranger's and stays where it is. */
static bool was_a_log(const char *path)
{
    size_t length = strlen(path);
    if (length > 7 && strcmp(path + length - 7, ".sqlite") == 0)
        return true;
    unsigned char header[72] = {0};
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return false;
    size_t got = fread(header, 1, sizeof header, file);
    fclose(file);
    return got == sizeof header && memcmp(header + 68, "WANE", 4) == 0;
}

static void sync_folder_of(const char *path)
{
    char folder[LOG_PATH_MAX];
    snprintf(folder, sizeof folder, "%s", path);
    char *slash = strrchr(folder, '/');
    if (slash != NULL)
        *slash = '\0';
    int fd = open(slash == NULL ? "." : slash == folder ? "/" : folder, O_RDONLY | O_CLOEXEC);
    if (fd >= 0) {
        (void)fsync(fd);
        close(fd);
    }
}

/* PATH, PATH-wal and PATH-shm go aside together: a database without its WAL has lost data. */
static bool set_damaged_aside(const char *path, int64_t now_ms, char *out_name, size_t out_size,
                              struct error *err)
{
    static const char *const tails[] = {"", "-wal", "-shm"};
    char time_text[CLOCK_TEXT_MAX];
    clock_format_utc(now_ms, time_text, sizeof time_text);
    for (char *at = strchr(time_text, ':'); at != NULL; at = strchr(at, ':'))
        *at = '-'; /* some file systems refuse colons */
    snprintf(out_name, out_size, "%s.corrupt-%s", path, time_text);
    for (size_t i = 0; i < sizeof tails / sizeof tails[0]; i++) {
        char from[LOG_PATH_MAX + 8];
        char to[LOG_PATH_MAX + 64];
        snprintf(from, sizeof from, "%s%s", path, tails[i]);
        snprintf(to, sizeof to, "%s%s", out_name, tails[i]);
        if (rename(from, to) != 0 && errno != ENOENT)
            return error_set(err, ERROR_STORAGE, "%s: damaged, and cannot be renamed: %s", from,
                             strerror(errno));
    }
    sync_folder_of(path);
    return true;
}

/* ---- connections ---- */

static void harden(sqlite3 *db)
{
    sqlite3_busy_timeout(db, BUSY_TIMEOUT_MS);
    sqlite3_extended_result_codes(db, 1);
    sqlite3_db_config(db, SQLITE_DBCONFIG_DEFENSIVE, 1, NULL);
    sqlite3_db_config(db, SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0, NULL);
    sqlite3_db_config(db, SQLITE_DBCONFIG_ENABLE_FKEY, 1, NULL);
    sqlite3_exec(db, "PRAGMA cell_size_check = ON", NULL, NULL, NULL);
}

static bool check_state(const char *path, enum schema_state state, int version, struct error *err)
{
    if (state == SCHEMA_FOREIGN)
        return error_set(err, ERROR_STORAGE,
                         "%s: is another program's database: choose another with --log FILE", path);
    if (state == SCHEMA_NEWER)
        return error_set(err, ERROR_STORAGE,
                         "%s: was made by a newer Wane (log version %d, this one knows %d): update "
                         "Wane or choose another with --log FILE",
                         path, version, SCHEMA_VERSION);
    return true;
}

static bool use_wal(sqlite3 *db, const char *path, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, "PRAGMA journal_mode = WAL", err);
    if (statement == NULL)
        return false;
    enum sql_row row = sql_next(statement, err);
    bool is_wal = row == SQL_ROW && strcmp(sql_text(statement, 0), "wal") == 0;
    sqlite3_finalize(statement);
    if (row == SQL_FAILED)
        return false;
    if (!is_wal)
        return error_set(err, ERROR_STORAGE,
                         "%s: this file system cannot hold a log (no shared memory, as on network "
                         "drives): choose a local folder with --log FILE",
                         path);
    return sql_exec(db,
                    "PRAGMA synchronous = FULL;"
                    "PRAGMA journal_size_limit = 16777216;"
                    "PRAGMA wal_autocheckpoint = 1000;",
                    err);
}

static bool read_token(sqlite3 *db, char out_token[LOG_TOKEN_MAX], struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, "SELECT token FROM state", err);
    if (statement == NULL)
        return false;
    enum sql_row row = sql_next(statement, err);
    if (row == SQL_ROW)
        sql_copy_text(statement, 0, out_token, LOG_TOKEN_MAX);
    sqlite3_finalize(statement);
    if (row == SQL_END)
        return error_set(err, ERROR_DATA, "the log has lost its state");
    return row == SQL_ROW;
}

/* A file shorter than its header says was cut. */
static bool is_cut(sqlite3 *db, const char *path, bool *out_is_cut, struct error *err)
{
    int64_t pages = 0;
    int64_t page_size = 0;
    struct stat file;
    if (!sql_integer(db, "PRAGMA page_count", 0, 0, &pages, err) ||
        !sql_integer(db, "PRAGMA page_size", 0, 0, &page_size, err))
        return false;
    char wal[LOG_PATH_MAX + 8];
    snprintf(wal, sizeof wal, "%s-wal", path);
    struct stat wal_file;
    bool has_wal = stat(wal, &wal_file) == 0 && wal_file.st_size > 0;
    *out_is_cut = !has_wal && stat(path, &file) == 0 && file.st_size < pages * page_size;
    return true;
}

static bool quick_check(sqlite3 *db, struct error *err)
{
    sqlite3_stmt *statement = sql_prepare(db, "PRAGMA quick_check(1)", err);
    if (statement == NULL)
        return false;
    enum sql_row row = sql_next(statement, err);
    bool is_good = row == SQL_ROW && strcmp(sql_text(statement, 0), "ok") == 0;
    if (row == SQL_ROW && !is_good)
        error_set(err, ERROR_DATA, "%s: damaged (%.120s)", sqlite3_db_filename(db, "main"),
                  sql_text(statement, 0));
    sqlite3_finalize(statement);
    return is_good;
}

/* After an unclean exit, or where the file is too short. */
static bool verify_at_open(sqlite3 *db, const char *path, struct log_opening *opening,
                           struct error *err)
{
    int64_t is_open = 0;
    bool cut = false;
    if (!sql_integer(db, "SELECT is_open FROM state", 0, 0, &is_open, err) ||
        !is_cut(db, path, &cut, err))
        return false;
    opening->was_unclean = is_open != 0;
    if (cut)
        return error_set(err, ERROR_DATA, "%s: damaged (the file was cut short)", path);
    struct stat file;
    if (!opening->was_unclean || stat(path, &file) != 0 || file.st_size > VERIFY_AT_ONCE_BYTES)
        return true;
    opening->was_verified = true;
    return quick_check(db, err);
}

static bool prepare_database(sqlite3 *db, const char *path, int64_t now_ms,
                             struct log_opening *opening, struct error *err)
{
    enum schema_state state = SCHEMA_EMPTY;
    int version = 0;
    harden(db);
    if (!schema_look(db, &state, &version, err) || !check_state(path, state, version, err))
        return false;
    opening->is_new = state == SCHEMA_EMPTY;
    char layout[80];
    snprintf(layout, sizeof layout, "PRAGMA page_size = %d; PRAGMA auto_vacuum = INCREMENTAL",
             PAGE_SIZE);
    if (opening->is_new && !sql_exec(db, layout, err))
        return false;
    return use_wal(db, path, err) && schema_migrate(db, version, now_ms, err) &&
           verify_at_open(db, path, opening, err) &&
           sql_exec(db, "UPDATE state SET is_open = 1", err);
}

static sqlite3 *open_file(const char *path, int flags, struct error *err)
{
    sqlite3 *db = NULL;
    if (sqlite3_open_v2(path, &db, flags | SQLITE_OPEN_NOMUTEX, NULL) != SQLITE_OK) {
        if (db == NULL)
            error_set(err, ERROR_MEMORY, "%s: memory ran out", path);
        else
            sql_fail(db, err);
        sqlite3_close(db);
        return NULL;
    }
    return db;
}

static sqlite3 *open_for_writing(const char *path, int64_t now_ms, struct log_opening *opening,
                                 struct error *err)
{
    sqlite3 *db = open_file(path, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE, err);
    if (db == NULL || prepare_database(db, path, now_ms, opening, err))
        return db;
    sqlite3_close(db);
    return NULL;
}

static void warn_of_a_full_disk(const char *path, struct log_opening *opening)
{
    struct statvfs disk;
    if (statvfs(path, &disk) != 0)
        return;
    int64_t free_bytes = (int64_t)disk.f_bavail * (int64_t)disk.f_frsize;
    size_t used = strlen(opening->notice);
    if (free_bytes < DISK_LOW_BYTES)
        snprintf(opening->notice + used, sizeof opening->notice - used,
                 "%sonly %" PRId64 " MB are free on the log's disk", used > 0 ? "; " : "",
                 free_bytes >> 20);
}

/* The database of a writer that holds the lock. A damaged log goes aside and a new one begins. */
static sqlite3 *open_or_begin_anew(const char *path, int64_t now_ms, struct log_opening *opening,
                                   struct error *err)
{
    struct error first = {0};
    sqlite3 *db = open_for_writing(path, now_ms, opening, &first);
    if (db != NULL)
        return db;
    if (first.kind != ERROR_DATA || !was_a_log(path)) {
        if (first.kind == ERROR_DATA)
            error_set(&first, ERROR_STORAGE,
                      "%s: is not a log: choose another file with --log FILE", path);
        if (err != NULL)
            *err = first;
        return NULL;
    }
    char aside[LOG_PATH_MAX + 64];
    if (!set_damaged_aside(path, now_ms, aside, sizeof aside, err))
        return NULL;
    *opening = (struct log_opening){0};
    db = open_for_writing(path, now_ms, opening, err);
    snprintf(opening->notice, sizeof opening->notice,
             "the log was damaged: it is kept as %.400s and a new one was begun", aside);
    return db;
}

struct log_writer *log_writer_open(const char *path, const struct log_options *options,
                                   int64_t now_ms, struct log_opening *out_opening,
                                   struct error *err)
{
    struct log_opening opening = {0};
    if (!log_text_fits(path, LOG_PATH_MAX - 80, "the log's path", err) ||
        !make_folders(path, err) || !folder_is_writable(path, err))
        return NULL;
    struct log_writer *writer = calloc(1, sizeof *writer);
    if (writer == NULL) {
        error_set(err, ERROR_MEMORY, "%s: memory ran out", path);
        return NULL;
    }
    int wanted = options == NULL ? 0 : options->rejected_waves_per_hour;
    writer->rejected_waves_per_hour = wanted == 0 ? 60 : wanted < 0 ? 0 : wanted;
    writer->lock_fd = take_writer_lock(path, err);
    if (writer->lock_fd >= 0)
        writer->db = open_or_begin_anew(path, now_ms, &opening, err);
    if (writer->db == NULL || !read_token(writer->db, writer->token, err)) {
        log_writer_close(writer);
        return NULL;
    }
    if (opening.is_new)
        sync_folder_of(path);
    warn_of_a_full_disk(path, &opening);
    if (out_opening != NULL)
        *out_opening = opening;
    return writer;
}

void log_writer_close(struct log_writer *writer)
{
    if (writer == NULL)
        return;
    if (writer->db != NULL) {
        sqlite3_exec(writer->db, "UPDATE state SET is_open = 0", NULL, NULL, NULL);
        /* A reader that is busy now does not hold the exit up: its own close cleans up. */
        sqlite3_busy_timeout(writer->db, 0);
        sqlite3_wal_checkpoint_v2(writer->db, NULL, SQLITE_CHECKPOINT_TRUNCATE, NULL, NULL);
        sqlite3_close(writer->db);
    }
    if (writer->lock_fd >= 0)
        close(writer->lock_fd);
    free(writer);
}

const char *log_writer_token(const struct log_writer *writer)
{
    return writer->token;
}

static bool check_for_reading(sqlite3 *db, const char *path, struct error *err)
{
    enum schema_state state = SCHEMA_EMPTY;
    int version = 0;
    harden(db);
    if (!schema_look(db, &state, &version, err) || !check_state(path, state, version, err))
        return false;
    if (state == SCHEMA_EMPTY)
        return error_set(err, ERROR_STORAGE, "%s: is empty: waned fills it when it runs", path);
    if (version < SCHEMA_VERSION)
        return error_set(err, ERROR_STORAGE,
                         "%s: was made by an older Wane: start waned once, it brings the log up to "
                         "date",
                         path);
    return sql_exec(db, "PRAGMA query_only = ON", err);
}

struct log_reader *log_reader_open(const char *path, struct error *err)
{
    if (access(path, F_OK) != 0) {
        error_set(err, ERROR_NOT_FOUND,
                  "%s: there is no log: start waned, or name another with --log FILE", path);
        return NULL;
    }
    struct log_reader *reader = calloc(1, sizeof *reader);
    if (reader == NULL) {
        error_set(err, ERROR_MEMORY, "%s: memory ran out", path);
        return NULL;
    }
    reader->db = open_file(path, SQLITE_OPEN_READONLY, err);
    if (reader->db == NULL || !check_for_reading(reader->db, path, err) ||
        !read_token(reader->db, reader->token, err)) {
        log_reader_close(reader);
        return NULL;
    }
    return reader;
}

void log_reader_close(struct log_reader *reader)
{
    if (reader == NULL)
        return;
    sqlite3_close(reader->db);
    free(reader);
}

bool log_verify(struct log_reader *reader, struct error *err)
{
    return quick_check(reader->db, err);
}
