/* The part sheets that go with a log, as waned finds them. */
#ifndef WANE_CLI_LOG_SHELF_H
#define WANE_CLI_LOG_SHELF_H

#include "cli/log_file.h"
#include "wane/tally.h"

/* Folders: beside the log, then those that came with the program. free() it. NULL and *err. */
struct shelf *shelf_of_words(const struct log_words *words, struct error *err);

#endif
