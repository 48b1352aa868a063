/* Compares readings with the truth and with the oracle's answer, and keeps the sums. */
#ifndef BENCHMARKS_SCORE_H
#define BENCHMARKS_SCORE_H

#include "scene.h"
#include "wane/reading.h"

#include <stdio.h>

/* Errors of one quantity in units of its bound. */
struct score_errors {
    double *fit, *oracle, *u; /* u: the stated one over the bound */
    size_t count, size;
};

struct score {
    struct score_errors f, decay;
    unsigned strikes, missed, false_strikes; /* missed: no mode at all, or rejected */
    unsigned asked, missing, spurious;       /* modes */
    unsigned verdicts[3];
    unsigned reasons[REASON_COUNT];
    unsigned hidden, hidden_honest, hidden_one, hidden_wrong; /* doublets that the bound hides */
    double *ms;
    size_t ms_count, ms_size;
};

void score_done(struct score *score);

/* Adds one strike. `say` (may be NULL) gets a line when anything is wrong with it. */
bool score_add(struct score *score, const struct scene *scene, const struct scene_take *take,
               const struct reading *reading, double ms, unsigned index, FILE *say);

/* What a table's row holds, for f or for decay. Outliers (over 6 bounds where the oracle is within
 * 6) are counted apart, so that one blunder does not hide the rest. */
struct score_summary {
    double rms_over_bound, rms_over_oracle, bias_sd;
    double u_over_bound, u_over_rms; /* median u */
    double inside_2u;                /* share of all, outliers too */
    double outliers;                 /* share */
};
void score_summarise(const struct score_errors *errors, struct score_summary *out);

double score_median(double *values, size_t count); /* sorts them */

#endif
