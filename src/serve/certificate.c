/* The key pair and certificate of the TLS port: given as files, or made on first use. */
#include "serve/door.h"
#include "wane/clock.h"
#include "wane/log.h"

#include <arpa/inet.h>
#include <errno.h>
#include <gnutls/crypto.h>
#include <gnutls/x509.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define PEM_BYTES_MAX (1u << 18)
#define DAY_S         86400
#define YEARS_S       (10 * 365 * (int64_t)DAY_S)

static bool read_pem(const char *path, char **out, struct error *err)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        return error_set(err, ERROR_USAGE, "%s: %s", path, strerror(errno));
    char *text = calloc(1, PEM_BYTES_MAX + 1);
    size_t size = text != NULL ? fread(text, 1, PEM_BYTES_MAX, file) : 0;
    fclose(file);
    if (size == 0 || strstr(text, "-----BEGIN") == NULL) {
        free(text);
        return error_set(err, ERROR_USAGE, "%s: no PEM file", path);
    }
    *out = text;
    return true;
}

static void add_name(gnutls_x509_crt_t certificate, const char *name)
{
    struct in6_addr address;
    unsigned size = inet_pton(AF_INET, name, &address) == 1    ? 4
                    : inet_pton(AF_INET6, name, &address) == 1 ? 16
                                                               : 0;
    if (size > 0)
        (void)gnutls_x509_crt_set_subject_alt_name(certificate, GNUTLS_SAN_IPADDRESS, &address,
                                                   size, GNUTLS_FSAN_APPEND);
    else
        (void)gnutls_x509_crt_set_subject_alt_name(certificate, GNUTLS_SAN_DNSNAME, name,
                                                   (unsigned)strlen(name), GNUTLS_FSAN_APPEND);
}

static void add_names(gnutls_x509_crt_t certificate, const struct door_settings *settings)
{
    char name[256];
    for (size_t i = 0; door_name_at(settings->names, i, name, sizeof name); i++)
        add_name(certificate, name);
    if (gethostname(name, sizeof name - 8) == 0 && name[0] != '\0') {
        name[sizeof name - 8] = '\0';
        add_name(certificate, name);
        if (strchr(name, '.') == NULL) {
            strcat(name, ".local"); /* as mDNS knows it: RFC 6762, section 3 */
            add_name(certificate, name);
        }
    }
    if (door_own_address(name, sizeof name))
        add_name(certificate, name);
    add_name(certificate, settings->address);
    add_name(certificate, "localhost");
}

/* X.509 version 3 (RFC 5280), signed by itself, P-256. */
static int fill_certificate(gnutls_x509_privkey_t key, gnutls_x509_crt_t certificate,
                            const struct door_settings *settings)
{
    unsigned char serial[16];
    time_t now = (time_t)(clock_utc_ms() / 1000);
    int result = gnutls_rnd(GNUTLS_RND_NONCE, serial, sizeof serial);
    serial[0] = (unsigned char)((serial[0] & 0x3Fu) | 0x40u); /* positive */
    add_names(certificate, settings);
    if (result >= 0)
        result = gnutls_x509_privkey_generate(key, GNUTLS_PK_ECDSA,
                                              GNUTLS_CURVE_TO_BITS(GNUTLS_ECC_CURVE_SECP256R1), 0);
    if (result >= 0)
        result = gnutls_x509_crt_set_version(certificate, 3);
    if (result >= 0)
        result = gnutls_x509_crt_set_serial(certificate, serial, sizeof serial);
    if (result >= 0)
        result = gnutls_x509_crt_set_dn(certificate, "CN=Wane bench", NULL);
    if (result >= 0)
        result = gnutls_x509_crt_set_activation_time(certificate, now - DAY_S);
    if (result >= 0)
        result = gnutls_x509_crt_set_expiration_time(certificate, now + YEARS_S);
    if (result >= 0)
        result = gnutls_x509_crt_set_basic_constraints(certificate, 0, -1);
    if (result >= 0)
        result = gnutls_x509_crt_set_key_usage(certificate, GNUTLS_KEY_DIGITAL_SIGNATURE);
    if (result >= 0)
        result = gnutls_x509_crt_set_key_purpose_oid(certificate, GNUTLS_KP_TLS_WWW_SERVER, 0);
    if (result >= 0)
        result = gnutls_x509_crt_set_key(certificate, key);
    if (result >= 0)
        result = gnutls_x509_crt_sign2(certificate, certificate, key, GNUTLS_DIG_SHA256, 0);
    return result;
}

/* Key and certificate in one text, so that both come by one rename. */
static bool make_pair(const struct door_settings *settings, struct error *err)
{
    gnutls_x509_privkey_t key = NULL;
    gnutls_x509_crt_t certificate = NULL;
    gnutls_datum_t key_pem = {0}, pem = {0};
    struct text both = {0};
    int result = gnutls_x509_privkey_init(&key);
    if (result >= 0)
        result = gnutls_x509_crt_init(&certificate);
    if (result >= 0)
        result = fill_certificate(key, certificate, settings);
    if (result >= 0)
        result = gnutls_x509_privkey_export2(key, GNUTLS_X509_FMT_PEM, &key_pem);
    if (result >= 0)
        result = gnutls_x509_crt_export2(certificate, GNUTLS_X509_FMT_PEM, &pem);
    bool is_kept = false;
    if (result >= 0) {
        text_append_bytes(&both, (const char *)key_pem.data, key_pem.size);
        text_append_bytes(&both, (const char *)pem.data, pem.size);
        is_kept = !both.failed &&
                  door_write_file(settings->folder, "door.pem", both.data, both.length, err);
        gnutls_memset(key_pem.data, 0, key_pem.size);
        gnutls_memset(both.data, 0, both.length);
    } else {
        error_set(err, ERROR_INTERNAL, "no certificate could be made: %s", gnutls_strerror(result));
    }
    text_done(&both);
    gnutls_free(key_pem.data);
    gnutls_free(pem.data);
    if (certificate != NULL)
        gnutls_x509_crt_deinit(certificate);
    if (key != NULL)
        gnutls_x509_privkey_deinit(key);
    return is_kept;
}

/* Two that start at once make one pair. */
static bool read_own(const struct door_settings *settings, struct certificate *out,
                     struct error *err)
{
    char path[LOG_PATH_MAX + 16];
    snprintf(path, sizeof path, "%s/door.pem", settings->folder);
    int lock = door_lock(settings->folder, err);
    if (lock < 0)
        return false;
    bool is_there = access(path, F_OK) == 0 || make_pair(settings, err);
    close(lock);
    return is_there && read_pem(path, &out->key, err) && read_pem(path, &out->pem, err);
}

static bool parse(struct certificate *certificate, const char *shown, struct error *err)
{
    const char *at = strstr(certificate->pem, "-----BEGIN CERTIFICATE");
    gnutls_x509_crt_t parsed = NULL;
    unsigned char print[32];
    size_t size = sizeof print;
    char *pem = at != NULL ? strdup(at) : NULL;
    gnutls_datum_t data = {.data = (unsigned char *)pem,
                           .size = pem != NULL ? (unsigned)strlen(pem) : 0};
    bool is_parsed = pem != NULL && gnutls_x509_crt_init(&parsed) >= 0 &&
                     gnutls_x509_crt_import(parsed, &data, GNUTLS_X509_FMT_PEM) >= 0 &&
                     gnutls_x509_crt_get_fingerprint(parsed, GNUTLS_DIG_SHA256, print, &size) >= 0;
    free(pem);
    certificate->parsed = parsed;
    if (!is_parsed)
        return error_set(err, ERROR_USAGE, "%s: no certificate that can be read", shown);
    for (size_t i = 0; i < size; i++)
        snprintf(certificate->fingerprint + 3 * i, 4, i + 1 < size ? "%02X:" : "%02X", print[i]);
    return true;
}

bool certificate_open(const struct door_settings *settings, struct certificate *out,
                      struct error *err)
{
    struct certificate certificate = {0};
    bool has_key = settings->tls_key != NULL && settings->tls_key[0] != '\0';
    bool has_pem = settings->tls_certificate != NULL && settings->tls_certificate[0] != '\0';
    if (has_key != has_pem)
        return error_set(err, ERROR_USAGE, "give both tls_key and tls_certificate, or neither");
    bool is_read = has_key ? read_pem(settings->tls_key, &certificate.key, err) &&
                                 read_pem(settings->tls_certificate, &certificate.pem, err)
                           : read_own(settings, &certificate, err);
    if (!is_read || !parse(&certificate, has_pem ? settings->tls_certificate : "door.pem", err)) {
        certificate_done(&certificate);
        return false;
    }
    *out = certificate;
    return true;
}

void certificate_done(struct certificate *certificate)
{
    if (certificate->key != NULL)
        gnutls_memset(certificate->key, 0, strlen(certificate->key));
    free(certificate->key);
    free(certificate->pem);
    if (certificate->parsed != NULL)
        gnutls_x509_crt_deinit(certificate->parsed);
    *certificate = (struct certificate){0};
}

bool certificate_has_name(const struct certificate *certificate, const char *host)
{
    return gnutls_x509_crt_check_hostname(certificate->parsed, host) != 0;
}
