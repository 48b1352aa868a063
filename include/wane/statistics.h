/* Statistics of plain numbers: what series, charts and gauge studies are made of. Pure, any thread,
 * no allocation unless said. Distribution functions are GSL's; quantiles are found on them here,
 * since GSL's own inverses may call its aborting error handler.
 *
 * A result that the data cannot give (a spread of one value) is NAN, never a guess. */
#ifndef WANE_STATISTICS_H
#define WANE_STATISTICS_H

#include <stdbool.h>
#include <stddef.h>

/* --- distributions; p and degrees of freedom outside their range give NAN --- */

/* x with P(X <= x) = p, 0 < p < 1, dof > 0 (need not be whole; INFINITY: normal). */
double student_quantile(double p, double dof);
double normal_quantile(double p);
double chi2_quantile(double p, double dof);
double fisher_quantile(double p, double dof_above, double dof_below);
/* Two-sided: P(|T| >= |t|). */
double student_p(double t, double dof);
/* P(F >= f). */
double fisher_p(double f, double dof_above, double dof_below);
/* Half-width of the two-sided interval with this coverage, in standard uncertainties: the t of GUM
 * table G.2. */
double coverage_factor(double coverage, double dof);

/* --- one sample --- */

struct sample_spread {
    size_t n;
    double mean;       /* NAN when n is 0 */
    double sd;         /* with n - 1; NAN below 2 */
    double mean_u;     /* sd / sqrt n */
    double half_width; /* Student interval of the mean, 95 % */
};

/* Two passes with the mean's own rounding taken out (Chan, Golub, LeVeque 1983, equation 1.7):
 * exact to the last digits where values share their leading ones. */
void sample_describe(const double *values, size_t n, struct sample_spread *out_spread);

/* Lag-1 autocorrelation, sum (y_i - m)(y_i+1 - m) / sum (y_i - m)^2. */
double sample_autocorrelation(const double *values, size_t n);

/* Median; reorders values. NAN when n is 0. */
double sample_median(double *values, size_t n);

#define ODD_SCORE_LIMIT 3.5
#define ODD_CHANCE      0.01
/* Marks values whose modified z-score, 0.6745 |x - median| / MAD, is over 3.5 (Iglewicz and Hoaglin
 * 1993; NIST/SEMATECH e-Handbook 1.3.5.17; the MAD corrected for few values). That rule alone marks
 * something in one of ten sound series of a few strikes: so a marked value must also be one that
 * the unmarked ones would not bring forth, at 1 % (measured: 1 to 3 % of sound series of 4 to 50
 * normal values have a mark). Spreads are floored at `floor_sd` (one standard uncertainty of a
 * single value, NAN: none). Nothing is marked below 4 values. scratch [n]; out_is_odd [n]. Gives
 * how many were marked. */
size_t sample_mark_odd(const double *values, size_t n, double floor_sd, double *scratch,
                       bool *out_is_odd);

/* --- a straight line y = intercept + slope x, ordinary least squares --- */

struct line_fit {
    size_t n;
    double intercept, intercept_u;
    double slope, slope_u;
    double residual_sd; /* with n - 2 */
    double p;           /* of a slope at least as steep by chance, Student with n - 2 */
};

/* Fails (false, *out_fit untouched) below 3 points or when all x are the same. */
bool line_fit(const double *x, const double *y, size_t n, struct line_fit *out_fit);

/* --- two samples --- */

struct sample_difference {
    double difference;     /* second mean minus first */
    double u, dof;         /* Welch 1947; Satterthwaite's degrees of freedom */
    double half_width;     /* 95 % */
    double p;              /* of a difference at least as large by chance */
    double ratio, ratio_u; /* second mean over first */
};

/* Fails when either has fewer than 2 values, or when both spreads are 0. */
bool sample_compare(const struct sample_spread *first, const struct sample_spread *second,
                    struct sample_difference *out_difference);

/* --- one-way analysis of variance, groups of any sizes --- */

struct one_way {
    size_t group_count, n;
    double between_ss, within_ss;
    double between_dof, within_dof;
    double f, p, r_squared, residual_sd;
};

/* values [n] with group[i] in 0 ... group_count - 1, each group at least once. Fails below 2 groups
 * or without a repeat in any. means: scratch [group_count]. */
bool one_way_anova(const double *values, const size_t *group, size_t n, size_t group_count,
                   double *means, struct one_way *out_result);

/* --- degrees of freedom of a sum (Welch-Satterthwaite, GUM G.2b) --- */

/* u [n]: contributions to the combined uncertainty; dof [n], INFINITY allowed. */
double effective_dof(const double *u, const double *dof, size_t n);

#endif
