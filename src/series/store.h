/* How a series keeps its strikes; private to series/. */
#ifndef WANE_SERIES_STORE_H
#define WANE_SERIES_STORE_H

#include "wane/series.h"

/* One mode in one strike; f 0: a gap. */
struct cell {
    double f_hz, decay_per_s, cov;
    float f_u_hz, decay_u_per_s, level_dbfs;
};

struct row {
    int64_t id;
    double time_s;
    enum verdict verdict;
    bool is_set_aside, is_odd;
    struct cell cells[SERIES_TRACKS_MAX];
};

struct series {
    bool has_part;
    struct part part;
    double clock_u_ppm;
    struct tracks tracks;
    struct row *rows;
    size_t row_count, row_capacity;
    unsigned forgotten;
};

#endif
