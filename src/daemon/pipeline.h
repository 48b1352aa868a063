/* The daemon's threads and queues: from the input to the log and the pages. */
#ifndef WANE_DAEMON_PIPELINE_H
#define WANE_DAEMON_PIPELINE_H

#include "options.h"

struct pipeline;

struct pipeline_places {
    const char *web_dir, *vendor_dir; /* NULL: none */
    const char *parts_dir;            /* part sheets that came with the program */
};

/* Opens log, server and input, and starts all threads; signals must be blocked. NULL and *err on
 * failure (nothing runs then). */
struct pipeline *pipeline_start(const struct options *options, const struct pipeline_places *places,
                                struct error *err);
const char *pipeline_url(const struct pipeline *pipeline);
/* Of the certificate that pages from other machines see; NULL: there are none. */
const char *pipeline_fingerprint(const struct pipeline *pipeline);
/* A line for the service manager: what is listened to. */
void pipeline_status(struct pipeline *pipeline, char *out, size_t out_size);
/* Grows as long as the listener is alive: the watchdog's proof. */
uint64_t pipeline_progress(struct pipeline *pipeline);
/* Once a second: heartbeats. */
void pipeline_tick(struct pipeline *pipeline);
/* A sentence about the start that people should see (a log that was renamed), or NULL. */
const char *pipeline_notice(const struct pipeline *pipeline);
/* In the order of the data: input, strike at hand, fits, log, server. Within 2 s. */
void pipeline_stop(struct pipeline *pipeline);

#endif
