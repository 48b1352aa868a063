#include "cli/log_shelf.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

struct shelf *shelf_of_words(const struct log_words *words, struct error *err)
{
    char path[LOG_PATH_MAX];
    struct shelf *shelf = calloc(1, sizeof *shelf);
    if (shelf == NULL) {
        error_set(err, ERROR_MEMORY, "out of memory");
        return NULL;
    }
    if (!log_words_path(words, path, err)) {
        free(shelf);
        return NULL;
    }
    const char *slash = strrchr(path, '/');
    int length = slash != NULL ? (int)(slash - path) : 0;
    if (length < LOG_PATH_MAX - 8)
        (void)snprintf(shelf->folders[0], LOG_PATH_MAX, "%.*s/parts", slash != NULL ? length : 1,
                       slash != NULL ? path : ".");
    const char *own =
        access(WANE_INSTALLED_PARTS_DIR, R_OK) == 0 ? WANE_INSTALLED_PARTS_DIR : WANE_PARTS_DIR;
    (void)snprintf(shelf->folders[1], LOG_PATH_MAX, "%s", own);
    return shelf;
}
