/* Gauge study: how much of what strikes differ by is the strike, the set-up, the part. Balanced
 * nested analysis of variance: set-ups within parts, strikes within set-ups. Pure, any thread. */
#ifndef WANE_GAUGE_H
#define WANE_GAUGE_H

#include "wane/error.h"
#include "wane/statistics.h"

#define GAUGE_PARTS_MAX   100
#define GAUGE_SETUPS_MAX  100
#define GAUGE_STRIKES_MAX 1000

/* A standard deviation with its 95 % interval. NAN: not told by this study. */
struct component {
    double sd, low, high;
    double share; /* of the total variance, 0 ... 1 */
};

struct gauge_study {
    size_t parts, setups, strikes; /* set-ups a part, strikes a set-up */
    double mean;
    double part_ms, setup_ms, strike_ms; /* mean squares */
    double part_dof, setup_dof, strike_dof;
    double setup_f, setup_p;        /* do set-ups differ more than strikes do? */
    double part_f, part_p;          /* do parts differ more than set-ups do? */
    struct component repeatability; /* strike to strike in one set-up */
    struct component setup;         /* set-up to set-up beyond that */
    struct component
        reproducibility;   /* one strike in one set-up: both together (s_R of ISO 5725-2) */
    struct component part; /* part to part; NAN with one part */
    double categories; /* groups of parts that can be told apart, whole part of sqrt(2) part.sd /
                          reproducibility.sd (common practice, no source); NAN with one part */
};

/* values [parts x setups x strikes], strikes fastest, then set-ups. 1 part or more, 2 set-ups or
 * more, 2 strikes or more. Variance components by the method of moments, a negative one taken as 0;
 * intervals from the chi-square distribution, with Satterthwaite's degrees of freedom (1946) for
 * sums and differences. Fails (ERROR_USAGE) with what is missing. */
bool gauge_analyze(const double *values, size_t parts, size_t setups, size_t strikes,
                   struct gauge_study *out_study, struct error *err);

#endif
