/* The door for people from other machines: who was invited, and with which right.
 *
 * All of it is kept in one file, door.json (0600) in the state folder. waned reads it and `wane
 * invite` writes it, at the same time: every change is made under a lock on door.lock and comes as
 * a whole by rename. Of codes and tokens only SHA-256 hashes are kept: they are random and long
 * (128 and 256 bits), so no salt or slow hash is needed. */
#ifndef WANE_SERVE_DOOR_H
#define WANE_SERVE_DOOR_H

#include "wane/error.h"
#include "wane/text.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define DOOR_SECRET_MAX      65 /* a token or a code as hexadecimal digits, with its NUL */
#define DOOR_URL_MAX         300
#define DOOR_FINGERPRINT_MAX 96 /* "AB:CD:..." of SHA-256 */
#define DOOR_CODE_VALID_S    600.0

enum door_right { DOOR_NONE, DOOR_LOOK, DOOR_CHANGE };

/* --- the file, for waned and wane; any thread, any process (door_book.c) --- */

/* The folder of the default log, without a slash at its end. */
bool door_default_folder(char *out, size_t out_size, struct error *err);

/* What waned tells `wane invite`: where the page is, and how long a code is good. */
struct door_bench {
    char url[DOOR_URL_MAX]; /* "https://...:9263/" */
    char fingerprint[DOOR_FINGERPRINT_MAX];
    double code_valid_s;
};
bool door_announce(const char *folder, const struct door_bench *bench, struct error *err);

struct door_invitation {
    struct door_bench bench;
    int64_t id; /* what door_revoke takes */
    char secret[DOOR_SECRET_MAX];
};
/* A one-time code, or (is_token) a token at once, for scripts. ERROR_NOT_FOUND when no waned has
 * announced itself in this folder. */
bool door_invite(const char *folder, bool is_token, bool is_look_only,
                 struct door_invitation *out_invitation, struct error *err);
/* Lines for people: who may come in. */
bool door_list(const char *folder, struct text *out, struct error *err);
/* ERROR_NOT_FOUND when there is no such invitation. */
bool door_revoke(const char *folder, int64_t id, struct error *err);
/* Turns a code into a token, once. ERROR_DENIED: a wrong, used or expired code. */
bool door_redeem(const char *folder, const char *code, char *out_token /* [DOOR_SECRET_MAX] */,
                 struct error *err);

/* --- what waned asks (door.c) --- */

struct door_settings {
    const char *folder;
    const char *address;                   /* numeric, that is listened on */
    const char *names;                     /* of this machine, with commas between; NULL: none */
    const char *tls_key, *tls_certificate; /* PEM files; NULL or "": made by itself */
    double code_valid_s;                   /* 0: DOOR_CODE_VALID_S */
};
struct door;

/* Reads or makes the certificate. NULL and *err on failure. */
struct door *door_open(const struct door_settings *settings, struct error *err);
void door_close(struct door *door);
const char *door_folder(const struct door *door);
/* PEM texts, and the certificate's SHA-256 fingerprint. They live as long as the door. */
const char *door_key(const struct door *door);
const char *door_certificate(const struct door *door);
const char *door_fingerprint(const struct door *door);
/* Writes the address that people come by, and tells it to `wane invite`. */
bool door_set_port(struct door *door, unsigned port, char *out_url, size_t out_url_size,
                   struct error *err);
/* Whether this host (without a port, brackets or not) is a name of this machine's: a configured
 * one, or one of the certificate's. */
bool door_is_named(const struct door *door, const char *host);
/* HTTP thread. */
enum door_right door_check(struct door *door, const char *token);
/* Whether somebody was shut out since the last call. One thread. */
bool door_take_revoked(struct door *door);

/* Wrong tries of one peer (a numeric address): after DOOR_TRIES_MAX within a minute it waits. HTTP
 * thread. */
#define DOOR_TRIES_MAX 10
bool door_is_slowed(struct door *door, const char *peer);
/* true: this one is to be told of (at most one line a second, with how many were not told). */
bool door_note_wrong(struct door *door, const char *peer, unsigned *out_untold);

/* --- certificate.c --- */

struct certificate {
    char *key, *pem; /* NUL-terminated PEM texts */
    char fingerprint[DOOR_FINGERPRINT_MAX];
    void *parsed; /* gnutls_x509_crt_t */
};
bool certificate_open(const struct door_settings *settings, struct certificate *out,
                      struct error *err);
void certificate_done(struct certificate *certificate);
bool certificate_has_name(const struct certificate *certificate, const char *host);

/* --- shared by the files above --- */

/* The n-th name of "a, b"; false when there is none. */
bool door_name_at(const char *names, size_t index, char *out, size_t out_size);
/* The machine's first address off the loopback, or false. */
bool door_own_address(char *out, size_t out_size);
/* SHA-256. out [32]. */
bool door_hash(const void *data, size_t size, unsigned char *out);
/* Takes the folder's lock; a descriptor to close, or -1 and *err. Makes the folder (0700). */
int door_lock(const char *folder, struct error *err);
/* Replaces folder/name by rename; 0600, of the folder's owner. */
bool door_write_file(const char *folder, const char *name, const char *data, size_t size,
                     struct error *err);

#endif
