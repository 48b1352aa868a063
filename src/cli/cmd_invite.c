/* `wane invite`: lets people in from other machines, and shuts them out again. */
#include "commands.h"
#include "options.h"
#include "serve/door.h"

#include <qrencode.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define QUIET_MODULES 2 /* ISO/IEC 18004 asks for 4; on a terminal 2 are read well */

struct wishes {
    bool is_look_only, is_list, is_token, has_qr;
    uint64_t revoke;
    const char *state;
};

static bool is_dark(const QRcode *code, int row, int column)
{
    return row >= 0 && row < code->width && column >= 0 && column < code->width &&
           (code->data[row * code->width + column] & 1u) != 0;
}

/* Two rows a line by half blocks, black on white whatever the terminal's own colours are. */
static void print_code(const char *text)
{
    static const char *const blocks[] = {" ", "\xE2\x96\x84", "\xE2\x96\x80", "\xE2\x96\x88"};
    QRcode *code = QRcode_encodeString8bit(text, 0, QR_ECLEVEL_L);
    if (code == NULL)
        return; /* the address stands above it */
    for (int row = -QUIET_MODULES; row < code->width + QUIET_MODULES; row += 2) {
        printf("\x1B[30;107m");
        for (int column = -QUIET_MODULES; column < code->width + QUIET_MODULES; column++)
            printf("%s", blocks[2 * is_dark(code, row, column) + is_dark(code, row + 1, column)]);
        printf("\x1B[0m\n");
    }
    QRcode_free(code);
}

static bool invite(const char *folder, const struct wishes *wishes, struct error *err)
{
    struct door_invitation made;
    char address[DOOR_URL_MAX + DOOR_SECRET_MAX + 16];
    if (!door_invite(folder, wishes->is_token, wishes->is_look_only, &made, err))
        return false;
    const char *rights = wishes->is_look_only ? "look" : "look and change";
    if (wishes->is_token) {
        printf("%s\n", made.secret);
        fprintf(stderr,
                "token %lld, to %s, at %s; it is not shown again. Send it as\n"
                "Authorization: Bearer TOKEN\n",
                (long long)made.id, rights, made.bench.url);
        return true;
    }
    snprintf(address, sizeof address, "%sjoin?code=%s", made.bench.url, made.secret);
    printf("%s\n", address);
    if (wishes->has_qr || isatty(STDOUT_FILENO))
        print_code(address);
    fprintf(stderr,
            "Invitation %lld, to %s: opens once, within %.0f s.\n"
            "The browser warns of a certificate it does not know. Go on only if it shows this\n"
            "SHA-256 fingerprint:\n%s\n",
            (long long)made.id, rights, made.bench.code_valid_s, made.bench.fingerprint);
    return true;
}

static bool list(const char *folder, struct error *err)
{
    struct text lines = {0};
    if (!door_list(folder, &lines, err))
        return false;
    printf("%s", lines.data != NULL ? lines.data : "nobody is invited\n");
    text_done(&lines);
    return true;
}

static bool do_wishes(const struct wishes *wishes, struct error *err)
{
    char folder[4096];
    if (wishes->state == NULL && !door_default_folder(folder, sizeof folder, err))
        return false;
    if (wishes->state != NULL)
        snprintf(folder, sizeof folder, "%s", wishes->state);
    if (access(folder, X_OK) != 0)
        return error_set(err, ERROR_NOT_FOUND,
                         "%s cannot be entered: has waned run here, as you? Its folder elsewhere "
                         "is named by --state",
                         folder);
    if (wishes->is_list)
        return list(folder, err);
    if (wishes->revoke == 0)
        return invite(folder, wishes, err);
    if (!door_revoke(folder, (int64_t)wishes->revoke, err))
        return false;
    printf("invitation %llu is revoked\n", (unsigned long long)wishes->revoke);
    return true;
}

int cmd_invite(int argc, char **argv)
{
    struct wishes wishes = {0};
    const struct option_spec specs[] = {
        {"look-only", OPTION_FLAG, NULL, "may look, not change", .flag = &wishes.is_look_only},
        {"token", OPTION_FLAG, NULL, "a token for scripts instead of a one-time address",
         .flag = &wishes.is_token},
        {"qr", OPTION_FLAG, NULL, "the QR code also when the output is no terminal",
         .flag = &wishes.has_qr},
        {"list", OPTION_FLAG, NULL, "who may come in", .flag = &wishes.is_list},
        {"revoke", OPTION_INTEGER, "ID", "shut out who came by this invitation",
         .integer = &wishes.revoke, .min = 1, .max = 1e15},
        {"state", OPTION_TEXT, "FOLDER", "waned's state folder, when it is not your own's",
         .text = &wishes.state},
    };
    struct options options = {
        .program = "wane invite",
        .words = "[--look-only] [--token] | --list | --revoke ID",
        .about = "Prints an address that lets one browser in from another machine, once.",
        .specs = specs,
        .count = sizeof specs / sizeof specs[0]};
    struct error err = {0};
    int word_count = 0;
    if (!options_parse(&options, argc, argv, &word_count, &err))
        return options_fail(&options, &err);
    if (options.wants_help) {
        options_print_help(&options, stdout);
        return EXIT_SUCCESS;
    }
    if (word_count > 0) {
        (void)error_set(&err, ERROR_USAGE, "`%s` is too much: it takes no words", argv[0]);
        return options_fail(&options, &err);
    }
    return do_wishes(&wishes, &err) ? EXIT_SUCCESS : options_fail(&options, &err);
}
