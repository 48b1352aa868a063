/* Results of limits, as strikes and series make them alike; private to series/. */
#ifndef WANE_SERIES_LIMITS_H
#define WANE_SERIES_LIMITS_H

#include "wane/series.h"

/* Appends an undecided result for one limit of the sheet to results [*count]. */
struct limit_result *limit_of_value(struct limit_result *results, unsigned *count,
                                    const struct part_mode *mode, enum quantity quantity);
struct limit_result *limit_of_spread(struct limit_result *results, unsigned *count,
                                     const struct part_mode *mode, enum quantity quantity);
struct limit_result *limit_of_split(struct limit_result *results, unsigned *count,
                                    const struct part *part, const struct part_split *split);

/* What the sample clock adds to the uncertainty of a value, same unit. */
double clock_u(enum quantity quantity, double value, double clock_u_ppm);

#endif
