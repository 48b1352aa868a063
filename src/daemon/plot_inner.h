/* What plot.c (trace, decay, residual) and plot_spectrum.c share. */
#ifndef WANE_DAEMON_PLOT_INNER_H
#define WANE_DAEMON_PLOT_INNER_H

#include "plot.h"

#include <complex.h>

#define SYNC_FRAMES 4096 /* a running phasor is set exactly again after so many steps */
#define UNIT_I      ((double complex)I) /* I itself is a float */

struct plot {
    const struct strike *strike;
    const struct reading *reading;
    const struct plot_choice *choice;
    double zero;     /* frame of the onset, or of the trigger */
    size_t from, to; /* frames drawn */
    size_t window_begin, window_end;
    size_t noise_end; /* samples before are noise */
    float *rest;      /* [frame_count] samples less all modes */
    struct json_writer json;
};

double plot_db(double amplitude);
/* One value of an array. */
void plot_put(struct plot *plot, double value, int digits);
void plot_put_db(struct plot *plot, double db);

/* plot_spectrum.c: the keys `spectrum` and `near`. ERROR_MEMORY. */
bool plot_write_spectrum(struct plot *plot, struct error *err);
bool plot_write_near(struct plot *plot, struct error *err);

#endif
