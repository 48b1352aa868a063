#include "wane/log.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const char *environment(const char *name)
{
    /* Nothing in Wane calls setenv: reading the environment is safe from any thread. */
    const char *value = getenv(name); // NOLINT(concurrency-mt-unsafe)
    return value == NULL || value[0] == '\0' ? NULL : value;
}

bool log_default_path(bool is_simulated, char *out_path, size_t out_size, struct error *err)
{
    const char *name = is_simulated ? "demo.sqlite" : "log.sqlite";
    const char *service = environment("STATE_DIRECTORY");
    const char *state = environment("XDG_STATE_HOME");
    const char *home = environment("HOME");
    int length = 0;
    if (service != NULL) /* systemd: the first of a list parted by colons */
        length = snprintf(out_path, out_size, "%.*s/%s", (int)strcspn(service, ":"), service, name);
    else if (state != NULL && state[0] == '/') /* XDG: a relative path is to be ignored */
        length = snprintf(out_path, out_size, "%s/wane/%s", state, name);
    else if (home != NULL)
        length = snprintf(out_path, out_size, "%s/.local/state/wane/%s", home, name);
    else
        return error_set(err, ERROR_USAGE,
                         "neither XDG_STATE_HOME nor HOME is set: name the log with --log FILE");
    if (length < 0 || (size_t)length >= out_size)
        return error_set(err, ERROR_USAGE,
                         "the default log's path is too long: name the log with --log FILE");
    return true;
}
