/* Who stands at the door: tokens as waned has them in memory, names, wrong tries. */
#include "serve/door.h"
#include "wane/clock.h"
#include "wane/log.h"

/* libjansson has functions of these names (text.h). */
#undef json_string
#undef json_integer
#undef json_null
#include <jansson.h>

#include <arpa/inet.h>
#include <gnutls/gnutls.h>
#include <ifaddrs.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/stat.h>

#define HASH_SIZE  32
#define TOKENS_MAX 200
#define PEERS_MAX  64
#define MINUTE_NS  (60 * CLOCK_NS_PER_S)

struct token {
    char sha256[2 * HASH_SIZE + 1];
    enum door_right right;
};

struct peer {
    char address[64];
    int64_t since_ns;
    unsigned wrong;
};

struct door {
    char folder[LOG_PATH_MAX], address[64], names[1024];
    double code_valid_s;
    struct certificate certificate;
    struct token tokens[TOKENS_MAX]; /* HTTP thread only, like all down to told_ns */
    size_t token_count;
    struct stat read; /* of door.json when it was read: a rename gives another one */
    struct peer peers[PEERS_MAX];
    int64_t told_ns;
    unsigned untold;
    int64_t revoked; /* the ticking thread's own */
    struct stat ticked;
};

bool door_name_at(const char *names, size_t index, char *out, size_t out_size)
{
    const char *at = names != NULL ? names : "";
    for (;;) {
        at += strspn(at, ", \t");
        size_t length = strcspn(at, ", \t");
        if (length == 0)
            return false;
        if (index-- == 0) {
            snprintf(out, out_size, "%.*s", (int)length, at);
            return true;
        }
        at += length;
    }
}

bool door_own_address(char *out, size_t out_size)
{
    struct ifaddrs *list = NULL;
    bool is_found = false;
    if (getifaddrs(&list) != 0)
        return false;
    for (const struct ifaddrs *one = list; one != NULL && !is_found; one = one->ifa_next) {
        struct sockaddr_in v4;
        if (one->ifa_addr == NULL || one->ifa_addr->sa_family != AF_INET)
            continue;
        memcpy(&v4, one->ifa_addr, sizeof v4);
        if ((ntohl(v4.sin_addr.s_addr) >> 24) == 127)
            continue;
        is_found = inet_ntop(AF_INET, &v4.sin_addr, out, (socklen_t)out_size) != NULL;
    }
    freeifaddrs(list);
    return is_found;
}

struct door *door_open(const struct door_settings *settings, struct error *err)
{
    struct door *door = calloc(1, sizeof *door);
    if (door == NULL) {
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    snprintf(door->folder, sizeof door->folder, "%s", settings->folder);
    snprintf(door->address, sizeof door->address, "%s", settings->address);
    snprintf(door->names, sizeof door->names, "%s", settings->names != NULL ? settings->names : "");
    door->code_valid_s = settings->code_valid_s > 0 ? settings->code_valid_s : DOOR_CODE_VALID_S;
    if (!certificate_open(settings, &door->certificate, err)) {
        free(door);
        return NULL;
    }
    return door;
}

void door_close(struct door *door)
{
    if (door == NULL)
        return;
    certificate_done(&door->certificate);
    free(door);
}

const char *door_folder(const struct door *door)
{
    return door->folder;
}

const char *door_key(const struct door *door)
{
    return door->certificate.key;
}

const char *door_certificate(const struct door *door)
{
    return door->certificate.pem;
}

const char *door_fingerprint(const struct door *door)
{
    return door->certificate.fingerprint;
}

bool door_set_port(struct door *door, unsigned port, char *out_url, size_t out_url_size,
                   struct error *err)
{
    struct door_bench bench = {.code_valid_s = door->code_valid_s};
    char host[256];
    bool is_any = strcmp(door->address, "0.0.0.0") == 0 || strcmp(door->address, "::") == 0;
    if (!door_name_at(door->names, 0, host, sizeof host) &&
        !(is_any && door_own_address(host, sizeof host)))
        snprintf(host, sizeof host, "%s", door->address);
    snprintf(bench.url, sizeof bench.url,
             strchr(host, ':') != NULL ? "https://[%s]:%u/" : "https://%s:%u/", host, port);
    snprintf(bench.fingerprint, sizeof bench.fingerprint, "%s", door->certificate.fingerprint);
    snprintf(out_url, out_url_size, "%s", bench.url);
    return door_announce(door->folder, &bench, err);
}

bool door_is_named(const struct door *door, const char *host)
{
    char name[256];
    for (size_t i = 0; door_name_at(door->names, i, name, sizeof name); i++) {
        if (strcasecmp(name, host) == 0)
            return true;
    }
    return certificate_has_name(&door->certificate, host);
}

/* --- tokens --- */

static bool is_same_file(const struct stat *a, const struct stat *b)
{
    return a->st_ino == b->st_ino && a->st_dev == b->st_dev && a->st_size == b->st_size &&
           a->st_mtim.tv_sec == b->st_mtim.tv_sec && a->st_mtim.tv_nsec == b->st_mtim.tv_nsec;
}

/* The book when it is another one than *seen; NULL else, or when it cannot be read. */
static json_t *read_changed(const struct door *door, struct stat *seen, bool *out_is_gone)
{
    char path[LOG_PATH_MAX + 16];
    struct stat now;
    snprintf(path, sizeof path, "%s/door.json", door->folder);
    *out_is_gone = stat(path, &now) != 0;
    if (*out_is_gone || is_same_file(&now, seen))
        return NULL;
    json_t *root = json_load_file(path, 0, NULL);
    *out_is_gone = root == NULL; /* nobody comes in by a book that cannot be read */
    if (root != NULL)
        *seen = now;
    return root;
}

static void reload(struct door *door)
{
    bool is_gone = false;
    json_t *root = read_changed(door, &door->read, &is_gone);
    if (root != NULL || is_gone)
        door->token_count = 0;
    if (is_gone)
        door->read = (struct stat){0};
    const json_t *guests = json_object_get(root, "guests");
    for (size_t i = 0; i < json_array_size(guests) && door->token_count < TOKENS_MAX; i++) {
        const json_t *guest = json_array_get(guests, i);
        const char *hash = json_string_value(json_object_get(guest, "sha256"));
        if (hash == NULL || strlen(hash) != 2 * (size_t)HASH_SIZE ||
            json_object_get(guest, "until_ms") != NULL)
            continue;
        struct token *token = &door->tokens[door->token_count++];
        memcpy(token->sha256, hash, sizeof token->sha256);
        token->right = json_is_true(json_object_get(guest, "look_only")) ? DOOR_LOOK : DOOR_CHANGE;
    }
    json_decref(root);
}

enum door_right door_check(struct door *door, const char *token)
{
    unsigned char hash[HASH_SIZE];
    char hex[2 * HASH_SIZE + 1];
    enum door_right right = DOOR_NONE;
    reload(door);
    if (!door_hash(token, strlen(token), hash))
        return DOOR_NONE;
    for (size_t i = 0; i < HASH_SIZE; i++)
        snprintf(hex + 2 * i, 3, "%02x", hash[i]);
    for (size_t i = 0; i < door->token_count; i++) {
        if (gnutls_memcmp(door->tokens[i].sha256, hex, 2 * (size_t)HASH_SIZE) == 0)
            right = door->tokens[i].right;
    }
    return right;
}

bool door_take_revoked(struct door *door)
{
    bool is_gone = false;
    json_t *root = read_changed(door, &door->ticked, &is_gone);
    if (root == NULL)
        return false;
    int64_t revoked = json_integer_value(json_object_get(root, "revoked"));
    json_decref(root);
    bool is_more = revoked != door->revoked;
    door->revoked = revoked;
    return is_more;
}

/* --- wrong tries --- */

/* The peer's place, or the oldest one, emptied for it. */
static struct peer *find_peer(struct door *door, const char *address)
{
    struct peer *oldest = &door->peers[0];
    for (size_t i = 0; i < PEERS_MAX; i++) {
        struct peer *peer = &door->peers[i];
        if (strcmp(peer->address, address) == 0) {
            oldest = peer;
            break;
        }
        if (peer->since_ns < oldest->since_ns)
            oldest = peer;
    }
    int64_t now_ns = clock_monotonic_ns();
    if (strcmp(oldest->address, address) != 0 || now_ns - oldest->since_ns > MINUTE_NS) {
        *oldest = (struct peer){.since_ns = now_ns};
        snprintf(oldest->address, sizeof oldest->address, "%s", address);
    }
    return oldest;
}

bool door_is_slowed(struct door *door, const char *peer)
{
    for (size_t i = 0; i < PEERS_MAX; i++) {
        if (strcmp(door->peers[i].address, peer) == 0)
            return door->peers[i].wrong >= DOOR_TRIES_MAX &&
                   clock_monotonic_ns() - door->peers[i].since_ns <= MINUTE_NS;
    }
    return false;
}

bool door_note_wrong(struct door *door, const char *peer, unsigned *out_untold)
{
    find_peer(door, peer)->wrong++;
    int64_t now_ns = clock_monotonic_ns();
    if (door->told_ns != 0 && now_ns - door->told_ns < CLOCK_NS_PER_S) {
        door->untold++;
        return false;
    }
    door->told_ns = now_ns;
    *out_untold = door->untold;
    door->untold = 0;
    return true;
}
