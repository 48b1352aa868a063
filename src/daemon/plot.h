/* What the page draws of one strike, computed from its stored samples and its reading. Display
 * only: nothing here is a result. The JSON stands in serve.h. */
#ifndef WANE_DAEMON_PLOT_H
#define WANE_DAEMON_PLOT_H

#include "wane/error.h"
#include "wane/reading.h"
#include "wane/strike.h"
#include "wane/text.h"

struct plot_choice {
    int64_t id;
    unsigned width;      /* pixel columns, 50 ... 4000 */
    double from_s, to_s; /* seconds after the onset; cut to what is stored */
};

/* Appends one JSON object. Plans FFTs (FFTW's planner must be made thread-safe). Takes 10 ms for a
 * few seconds at 48 kHz, seconds for a minute at 768 kHz. */
bool plot_write(const struct strike *strike, const struct reading *reading,
                const struct plot_choice *choice, struct text *out, struct error *err);

#endif
