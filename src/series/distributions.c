#include "wane/statistics.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

/* A distribution's lower and upper tail at x. Both, so that a quantile keeps its digits at either
 * end. */
struct tails {
    double (*below)(double x, double dof_1, double dof_2);
    double (*above)(double x, double dof_1, double dof_2);
    double dof_1, dof_2;
};

static double student_below(double x, double dof, double unused)
{
    (void)unused;
    return isinf(dof) ? gsl_cdf_ugaussian_P(x) : gsl_cdf_tdist_P(x, dof);
}

static double student_above(double x, double dof, double unused)
{
    (void)unused;
    return isinf(dof) ? gsl_cdf_ugaussian_Q(x) : gsl_cdf_tdist_Q(x, dof);
}

static double chi2_below(double x, double dof, double unused)
{
    (void)unused;
    return gsl_cdf_chisq_P(x, dof);
}

static double chi2_above(double x, double dof, double unused)
{
    (void)unused;
    return gsl_cdf_chisq_Q(x, dof);
}

/* How far the tail at x is from the wanted one; grows with x. */
static double beyond(const struct tails *tails, double p, double x)
{
    if (p < 0.5)
        return tails->below(x, tails->dof_1, tails->dof_2) - p;
    return (1 - p) - tails->above(x, tails->dof_1, tails->dof_2);
}

/* Regula falsi, Illinois variant (Dowell and Jarratt 1971): the bracket holds at every step, so it
 * cannot fail; every third step halves it, so it cannot creep. */
static double close_in(const struct tails *tails, double p, double low, double high)
{
    double at_low = beyond(tails, p, low), at_high = beyond(tails, p, high);
    int side = 0;
    for (int i = 0; i < 200 && high - low > 4e-16 * high; i++) {
        double x = i % 3 == 2 ? low + (high - low) / 2
                              : high - at_high * (high - low) / (at_high - at_low);
        if (!(x > low && x < high))
            x = low + (high - low) / 2;
        if (!(x > low && x < high))
            break;
        double at_x = beyond(tails, p, x);
        if (at_x == 0)
            return x;
        if (at_x < 0) {
            low = x;
            at_low = at_x;
            at_high *= side < 0 ? 0.5 : 1;
            side = -1;
        } else {
            high = x;
            at_high = at_x;
            at_low *= side > 0 ? 0.5 : 1;
            side = 1;
        }
    }
    return low + (high - low) / 2;
}

/* For x from 0 on. */
static double positive_quantile(const struct tails *tails, double p)
{
    double high = 1;
    while (high < 1e300 && beyond(tails, p, high) < 0)
        high *= 2;
    return close_in(tails, p, 0, high);
}

static bool is_share(double p)
{
    return p > 0 && p < 1;
}

double student_quantile(double p, double dof)
{
    if (!is_share(p) || !(dof > 0))
        return NAN;
    struct tails tails = {student_below, student_above, dof, 0};
    if (p == 0.5)
        return 0;
    return p > 0.5 ? positive_quantile(&tails, p) : -positive_quantile(&tails, 1 - p);
}

double normal_quantile(double p)
{
    return student_quantile(p, INFINITY);
}

double chi2_quantile(double p, double dof)
{
    if (!is_share(p) || !(dof > 0) || isinf(dof))
        return NAN;
    struct tails tails = {chi2_below, chi2_above, dof, 0};
    return positive_quantile(&tails, p);
}

double fisher_quantile(double p, double dof_above, double dof_below)
{
    if (!is_share(p) || !(dof_above > 0) || !(dof_below > 0) || isinf(dof_above) ||
        isinf(dof_below))
        return NAN;
    struct tails tails = {gsl_cdf_fdist_P, gsl_cdf_fdist_Q, dof_above, dof_below};
    return positive_quantile(&tails, p);
}

double student_p(double t, double dof)
{
    if (isnan(t) || !(dof > 0))
        return NAN;
    if (isinf(t))
        return 0;
    return fmin(1, 2 * student_above(fabs(t), dof, 0));
}

double fisher_p(double f, double dof_above, double dof_below)
{
    if (!(f >= 0) || !(dof_above > 0) || !(dof_below > 0))
        return NAN;
    if (isinf(f))
        return 0;
    return gsl_cdf_fdist_Q(f, dof_above, dof_below);
}

double coverage_factor(double coverage, double dof)
{
    return is_share(coverage) ? student_quantile(0.5 + coverage / 2, dof) : (double)NAN;
}
