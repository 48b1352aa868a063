/* door.json: who was invited. */
#include "serve/door.h"
#include "wane/clock.h"
#include "wane/log.h"

/* libjansson has functions of these names (text.h). */
#undef json_string
#undef json_integer
#undef json_null
#include <jansson.h>

#include <errno.h>
#include <fcntl.h>
#include <gnutls/crypto.h>
#include <gnutls/gnutls.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#define HASH_SIZE   32
#define GUESTS_MAX  200 /* codes and tokens that stand at once */
#define CODE_BYTES  16
#define TOKEN_BYTES 32

bool door_default_folder(char *out, size_t out_size, struct error *err)
{
    if (!log_default_path(false, out, out_size, err))
        return false;
    *strrchr(out, '/') = '\0';
    return true;
}

bool door_hash(const void *data, size_t size, unsigned char *out)
{
    return gnutls_hash_fast(GNUTLS_DIG_SHA256, data, size, out) == 0;
}

int door_lock(const char *folder, struct error *err)
{
    char path[LOG_PATH_MAX + 16];
    (void)mkdir(folder, 0700); /* the open below tells when it failed */
    snprintf(path, sizeof path, "%s/door.lock", folder);
    int fd = open(path, O_RDWR | O_CREAT | O_CLOEXEC, 0600);
    struct stat owner;
    if (fd >= 0 && geteuid() == 0 && stat(folder, &owner) == 0)
        (void)fchown(fd, owner.st_uid, owner.st_gid) /* so that waned can take it as well */;
    int failed = fd < 0 ? -1 : 0;
    while (failed == 0 && flock(fd, LOCK_EX) != 0)
        failed = errno == EINTR ? 0 : -1;
    if (failed == 0)
        return fd;
    error_set(err, ERROR_STORAGE, "%s: %s; the invitations are kept there", path, strerror(errno));
    if (fd >= 0)
        close(fd);
    return -1;
}

static bool write_and_sync(int fd, const char *data, size_t size)
{
    while (size > 0) {
        ssize_t written = write(fd, data, size);
        if (written < 0 && errno == EINTR)
            continue;
        if (written <= 0)
            return false;
        data += written;
        size -= (size_t)written;
    }
    return fsync(fd) == 0;
}

bool door_write_file(const char *folder, const char *name, const char *data, size_t size,
                     struct error *err)
{
    char path[LOG_PATH_MAX + 32], temporary[LOG_PATH_MAX + 40];
    struct stat owner;
    snprintf(path, sizeof path, "%s/%s", folder, name);
    snprintf(temporary, sizeof temporary, "%s.new", path);
    (void)unlink(temporary); /* of a process that was killed: we have the lock */
    int fd = open(temporary, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC | O_NOFOLLOW, 0600);
    if (fd < 0)
        return error_set(err, ERROR_STORAGE, "%s: %s", temporary, strerror(errno));
    bool is_kept = write_and_sync(fd, data, size);
    if (is_kept && geteuid() == 0 && stat(folder, &owner) == 0)
        is_kept = fchown(fd, owner.st_uid, owner.st_gid) == 0;
    if (close(fd) != 0 || !is_kept || rename(temporary, path) != 0) {
        error_set(err, ERROR_STORAGE, "%s: %s", path, strerror(errno));
        (void)unlink(temporary);
        return false;
    }
    return true;
}

/* --- the book: read, change, write, under the lock --- */

struct book {
    const char *folder;
    int lock;
    json_t *root, *guests; /* guests is root's */
};

static void book_close(struct book *book)
{
    json_decref(book->root);
    if (book->lock >= 0)
        close(book->lock);
}

static bool book_open(struct book *book, const char *folder, struct error *err)
{
    char path[LOG_PATH_MAX + 16];
    *book = (struct book){.folder = folder, .lock = door_lock(folder, err)};
    if (book->lock < 0)
        return false;
    snprintf(path, sizeof path, "%s/door.json", folder);
    json_error_t wrong;
    book->root = json_load_file(path, 0, &wrong);
    if (book->root == NULL && access(path, F_OK) != 0 && errno == ENOENT)
        book->root = json_pack("{s:I, s:I, s:[]}", "next_id", (json_int_t)1, "revoked",
                               (json_int_t)0, "guests");
    book->guests = json_object_get(book->root, "guests");
    if (json_is_array(book->guests))
        return true;
    book_close(book);
    return error_set(err, ERROR_STORAGE,
                     "%s cannot be read; move it away, and invite everybody anew", path);
}

/* Codes that nobody used in time go whenever the book is written. */
static bool book_write(struct book *book, struct error *err)
{
    for (size_t i = json_array_size(book->guests); i-- > 0;) {
        json_t *until = json_object_get(json_array_get(book->guests, i), "until_ms");
        if (until != NULL && json_integer_value(until) <= clock_utc_ms())
            json_array_remove(book->guests, i);
    }
    char *text = json_dumps(book->root, JSON_INDENT(1));
    if (text == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory");
    bool is_kept = door_write_file(book->folder, "door.json", text, strlen(text), err);
    free(text);
    return is_kept;
}

static int64_t integer_at(const json_t *object, const char *key)
{
    return json_integer_value(json_object_get(object, key));
}

bool door_announce(const char *folder, const struct door_bench *bench, struct error *err)
{
    struct book book;
    if (!book_open(&book, folder, err))
        return false;
    json_object_set_new(book.root, "bench",
                        json_pack("{s:s, s:s, s:f}", "url", bench->url, "fingerprint",
                                  bench->fingerprint, "code_valid_s", bench->code_valid_s));
    bool is_kept = book_write(&book, err);
    book_close(&book);
    return is_kept;
}

static bool read_bench(const struct book *book, struct door_bench *out, struct error *err)
{
    const json_t *bench = json_object_get(book->root, "bench");
    const char *url = json_string_value(json_object_get(bench, "url"));
    const char *fingerprint = json_string_value(json_object_get(bench, "fingerprint"));
    if (url == NULL || fingerprint == NULL)
        return error_set(err, ERROR_NOT_FOUND,
                         "no waned serves other machines from %.80s: set listen = 0.0.0.0:9263 "
                         "under [serve] in waned.ini and start it (its log elsewhere: --state)",
                         book->folder);
    snprintf(out->url, sizeof out->url, "%s", url);
    snprintf(out->fingerprint, sizeof out->fingerprint, "%s", fingerprint);
    out->code_valid_s = json_number_value(json_object_get(bench, "code_valid_s"));
    return true;
}

/* --- guests --- */

static bool make_secret(size_t bytes, char *out, char *out_hash_hex, struct error *err)
{
    unsigned char random[TOKEN_BYTES], hash[HASH_SIZE];
    if (gnutls_rnd(GNUTLS_RND_KEY, random, bytes) != 0)
        return error_set(err, ERROR_INTERNAL, "no random numbers are to be had");
    for (size_t i = 0; i < bytes; i++)
        snprintf(out + 2 * i, 3, "%02x", random[i]);
    if (!door_hash(out, 2 * bytes, hash))
        return error_set(err, ERROR_INTERNAL, "SHA-256 failed");
    for (size_t i = 0; i < HASH_SIZE; i++)
        snprintf(out_hash_hex + 2 * i, 3, "%02x", hash[i]);
    return true;
}

/* valid_s 0: a token, which is good until it is revoked. */
static bool add_guest(struct book *book, bool is_look_only, double valid_s, int64_t *out_id,
                      char *out_secret, struct error *err)
{
    char hash[2 * HASH_SIZE + 1];
    if (json_array_size(book->guests) >= GUESTS_MAX)
        return error_set(err, ERROR_LIMIT,
                         "%d invitations stand already: revoke some, wane invite --list shows them",
                         GUESTS_MAX);
    if (!make_secret(valid_s > 0 ? CODE_BYTES : TOKEN_BYTES, out_secret, hash, err))
        return false;
    int64_t now_ms = clock_utc_ms();
    json_t *guest = json_pack("{s:I, s:s, s:b, s:I}", "id", (json_int_t)*out_id, "sha256", hash,
                              "look_only", is_look_only, "made_ms", (json_int_t)now_ms);
    if (valid_s > 0)
        json_object_set_new(guest, "until_ms", json_integer(now_ms + (int64_t)(1000.0 * valid_s)));
    json_array_append_new(book->guests, guest);
    return true;
}

bool door_invite(const char *folder, bool is_token, bool is_look_only,
                 struct door_invitation *out_invitation, struct error *err)
{
    struct book book;
    if (!book_open(&book, folder, err))
        return false;
    struct door_invitation invitation = {.id = integer_at(book.root, "next_id")};
    bool is_kept =
        read_bench(&book, &invitation.bench, err) &&
        add_guest(&book, is_look_only, is_token ? 0.0 : invitation.bench.code_valid_s,
                  &invitation.id, invitation.secret, err) &&
        json_object_set_new(book.root, "next_id", json_integer(invitation.id + 1)) == 0 &&
        book_write(&book, err);
    book_close(&book);
    if (is_kept)
        *out_invitation = invitation;
    return is_kept;
}

bool door_list(const char *folder, struct text *out, struct error *err)
{
    struct book book;
    if (!book_open(&book, folder, err))
        return false;
    for (size_t i = 0; i < json_array_size(book.guests); i++) {
        const json_t *guest = json_array_get(book.guests, i);
        const json_t *until = json_object_get(guest, "until_ms");
        char made[CLOCK_TEXT_MAX], end[CLOCK_TEXT_MAX];
        if (until != NULL && json_integer_value(until) <= clock_utc_ms())
            continue;
        clock_format_utc(integer_at(guest, "made_ms"), made, sizeof made);
        clock_format_utc(json_integer_value(until), end, sizeof end);
        text_appendf(out, "%4lld  %-15s  %s  %s%s\n", (long long)integer_at(guest, "id"),
                     json_is_true(json_object_get(guest, "look_only")) ? "look" : "look and change",
                     made, until != NULL ? "not used yet, good until " : "came in",
                     until != NULL ? end : "");
    }
    book_close(&book);
    return true;
}

bool door_revoke(const char *folder, int64_t id, struct error *err)
{
    struct book book;
    if (!book_open(&book, folder, err))
        return false;
    size_t at = 0, count = json_array_size(book.guests);
    while (at < count && integer_at(json_array_get(book.guests, at), "id") != id)
        at++;
    bool is_kept = at < count && json_array_remove(book.guests, at) == 0 &&
                   json_object_set_new(book.root, "revoked",
                                       json_integer(integer_at(book.root, "revoked") + 1)) == 0;
    if (!is_kept)
        error_set(err, ERROR_NOT_FOUND,
                  "there is no invitation %lld; wane invite --list shows those there are",
                  (long long)id);
    is_kept = is_kept && book_write(&book, err);
    book_close(&book);
    return is_kept;
}

static bool is_hash(const json_t *guest, const unsigned char *hash)
{
    const char *kept = json_string_value(json_object_get(guest, "sha256"));
    char hex[2 * HASH_SIZE + 1];
    for (size_t i = 0; i < HASH_SIZE; i++)
        snprintf(hex + 2 * i, 3, "%02x", hash[i]);
    return kept != NULL && strlen(kept) == 2 * (size_t)HASH_SIZE &&
           gnutls_memcmp(kept, hex, 2 * (size_t)HASH_SIZE) == 0;
}

/* All are compared, so that the time does not tell which one was near. */
static size_t find_code(const struct book *book, const char *code)
{
    unsigned char hash[HASH_SIZE];
    size_t found = SIZE_MAX;
    if (!door_hash(code, strlen(code), hash))
        return found;
    for (size_t i = 0; i < json_array_size(book->guests); i++) {
        const json_t *guest = json_array_get(book->guests, i);
        const json_t *until = json_object_get(guest, "until_ms");
        if (is_hash(guest, hash) && until != NULL && json_integer_value(until) > clock_utc_ms())
            found = i;
    }
    return found;
}

bool door_redeem(const char *folder, const char *code, char *out_token, struct error *err)
{
    struct book book;
    if (!book_open(&book, folder, err))
        return false;
    size_t at = find_code(&book, code);
    bool is_kept = at != SIZE_MAX;
    if (is_kept) {
        const json_t *guest = json_array_get(book.guests, at);
        int64_t id = integer_at(guest, "id");
        bool is_look_only = json_is_true(json_object_get(guest, "look_only"));
        json_array_remove(book.guests, at);
        is_kept =
            add_guest(&book, is_look_only, 0.0, &id, out_token, err) && book_write(&book, err);
    } else {
        error_set(err, ERROR_DENIED,
                  "this invitation is wrong, used or too old; wane invite on the bench's machine "
                  "makes a new one");
    }
    book_close(&book);
    return is_kept;
}
