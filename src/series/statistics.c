#include "wane/statistics.h"

#include <math.h>
#include <string.h>

/* sum (x - about), compensated (Kahan 1965): values that share thirteen leading digits keep the
 * rest. */
static double sum_about(const double *values, size_t n, double about)
{
    double sum = 0, lost = 0;
    for (size_t i = 0; i < n; i++) {
        double term = values[i] - about - lost;
        double next = sum + term;
        lost = (next - sum) - term;
        sum = next;
    }
    return sum;
}

static double mean_of(const double *values, size_t n)
{
    double count = (double)n;
    double first = values[0] + sum_about(values, n, values[0]) / count;
    return first + sum_about(values, n, first) / count;
}

/* sum (x - mean)^2 less what the mean's own rounding adds. */
static double squares_about(const double *values, size_t n, double mean)
{
    double squares = 0, rest = 0;
    for (size_t i = 0; i < n; i++) {
        double away = values[i] - mean;
        squares += away * away;
        rest += away;
    }
    return fmax(0, squares - rest * rest / (double)n);
}

void sample_describe(const double *values, size_t n, struct sample_spread *out_spread)
{
    *out_spread = (struct sample_spread){n, NAN, NAN, NAN, NAN};
    if (n == 0)
        return;
    double count = (double)n;
    out_spread->mean = mean_of(values, n);
    if (n == 1)
        return;
    out_spread->sd = sqrt(squares_about(values, n, out_spread->mean) / (count - 1));
    out_spread->mean_u = out_spread->sd / sqrt(count);
    out_spread->half_width = coverage_factor(0.95, count - 1) * out_spread->mean_u;
}

double sample_autocorrelation(const double *values, size_t n)
{
    if (n < 2)
        return NAN;
    double mean = mean_of(values, n);
    double squares = 0, products = 0;
    for (size_t i = 0; i < n; i++) {
        squares += (values[i] - mean) * (values[i] - mean);
        if (i + 1 < n)
            products += (values[i] - mean) * (values[i + 1] - mean);
    }
    return products / squares;
}

/* Puts the k-th smallest at its place, smaller ones before it: C. A. R. Hoare's FIND, 1961. */
static void select_kth(double *values, size_t n, size_t k)
{
    size_t low = 0, high = n - 1;
    while (low < high) {
        double pivot = values[k];
        size_t i = low, j = high;
        while (i <= j) {
            while (values[i] < pivot)
                i++;
            while (pivot < values[j])
                j--;
            if (i <= j) {
                double value = values[i];
                values[i++] = values[j];
                values[j] = value;
                if (j == 0)
                    break;
                j--;
            }
        }
        if (j < k)
            low = i;
        if (k < i)
            high = j;
    }
}

double sample_median(double *values, size_t n)
{
    if (n == 0)
        return NAN;
    size_t middle = n / 2;
    select_kth(values, n, middle);
    if (n % 2 == 1)
        return values[middle];
    double below = values[0];
    for (size_t i = 1; i < middle; i++)
        below = fmax(below, values[i]);
    return below / 2 + values[middle] / 2;
}

/* What makes the median absolute deviation of a few values unbiased: Croux and Rousseeuw 1992 (from
 * memory; within 1.2 % in a simulation of ours). */
static double few_values_factor(size_t n)
{
    static const double factors[] = {1, 1, 1.196, 1.495, 1.363, 1.206, 1.200, 1.140, 1.129, 1.107};
    if (n < sizeof factors / sizeof factors[0])
        return factors[n];
    return (double)n / ((double)n - 0.8);
}

/* Takes back marks that chance would make among so few: a marked value must lie outside the
 * interval in which the unmarked ones predict the most outlying of n further values, 99 %. */
static size_t confirm_odd(const double *values, size_t n, double floor_sd, double *scratch,
                          bool *is_odd)
{
    size_t kept = 0;
    for (size_t i = 0; i < n; i++)
        if (!is_odd[i])
            scratch[kept++] = values[i];
    struct sample_spread rest;
    sample_describe(scratch, kept, &rest);
    double share = ODD_CHANCE / (2 * (double)n); /* Bonferroni, two-sided */
    double reach = kept < 3 ? (double)INFINITY
                            : student_quantile(1 - share, (double)kept - 1) *
                                  fmax(rest.sd, floor_sd) * sqrt(1 + 1 / (double)kept);
    size_t marked = 0;
    for (size_t i = 0; i < n; i++) {
        is_odd[i] = is_odd[i] && fabs(values[i] - rest.mean) > reach;
        marked += is_odd[i];
    }
    return marked;
}

size_t sample_mark_odd(const double *values, size_t n, double floor_sd, double *scratch,
                       bool *out_is_odd)
{
    for (size_t i = 0; i < n; i++)
        out_is_odd[i] = false;
    if (n < 4)
        return 0;
    floor_sd = isfinite(floor_sd) ? floor_sd : 0;
    memcpy(scratch, values, n * sizeof *values);
    double median = sample_median(scratch, n);
    for (size_t i = 0; i < n; i++)
        scratch[i] = fabs(values[i] - median);
    /* 0.6745: the MAD of a normal distribution in standard deviations. */
    double spread = sample_median(scratch, n) / 0.6745 * few_values_factor(n);
    spread = fmax(spread, floor_sd);
    size_t marked = 0;
    for (size_t i = 0; i < n; i++) {
        out_is_odd[i] = fabs(values[i] - median) > ODD_SCORE_LIMIT * spread;
        marked += out_is_odd[i];
    }
    return marked == 0 ? 0 : confirm_odd(values, n, floor_sd, scratch, out_is_odd);
}

bool line_fit(const double *x, const double *y, size_t n, struct line_fit *out_fit)
{
    if (n < 3)
        return false;
    double count = (double)n;
    double x_mean = mean_of(x, n), y_mean = mean_of(y, n);
    double xx = squares_about(x, n, x_mean), xy = 0, squares = 0;
    if (!(xx > 0))
        return false;
    for (size_t i = 0; i < n; i++)
        xy += (x[i] - x_mean) * (y[i] - y_mean);
    double slope = xy / xx;
    for (size_t i = 0; i < n; i++) {
        double off = (y[i] - y_mean) - slope * (x[i] - x_mean);
        squares += off * off;
    }
    double sd = sqrt(squares / (count - 2));
    out_fit->n = n;
    out_fit->slope = slope;
    out_fit->intercept = y_mean - slope * x_mean;
    out_fit->residual_sd = sd;
    out_fit->slope_u = sd / sqrt(xx);
    out_fit->intercept_u = sd * sqrt(1 / count + x_mean * x_mean / xx);
    double t = out_fit->slope_u > 0 ? slope / out_fit->slope_u : slope == 0 ? 0 : (double)INFINITY;
    out_fit->p = student_p(t, count - 2);
    return true;
}

bool sample_compare(const struct sample_spread *first, const struct sample_spread *second,
                    struct sample_difference *out_difference)
{
    if (first->n < 2 || second->n < 2)
        return false;
    double u[2] = {first->mean_u, second->mean_u};
    double dof[2] = {(double)first->n - 1, (double)second->n - 1};
    double combined = hypot(u[0], u[1]);
    if (!(combined > 0))
        return false;
    out_difference->difference = second->mean - first->mean;
    out_difference->u = combined;
    out_difference->dof = effective_dof(u, dof, 2);
    out_difference->half_width = coverage_factor(0.95, out_difference->dof) * combined;
    out_difference->p = student_p(out_difference->difference / combined, out_difference->dof);
    out_difference->ratio = second->mean / first->mean;
    out_difference->ratio_u =
        fabs(out_difference->ratio) * hypot(u[0] / first->mean, u[1] / second->mean);
    return true;
}

/* Each group's mean into means; false when a group is empty. Values are taken about the first, so
 * that shared leading digits cost nothing. */
static bool group_means(const double *values, const size_t *group, size_t n, size_t group_count,
                        double *means)
{
    for (size_t g = 0; g < group_count; g++) {
        double sum = 0, lost = 0;
        size_t members = 0;
        for (size_t i = 0; i < n; i++) {
            if (group[i] != g)
                continue;
            double term = values[i] - values[0] - lost;
            double next = sum + term;
            lost = (next - sum) - term;
            sum = next;
            members++;
        }
        if (members == 0)
            return false;
        means[g] = sum / (double)members; /* less values[0] */
    }
    return true;
}

bool one_way_anova(const double *values, const size_t *group, size_t n, size_t group_count,
                   double *means, struct one_way *out_result)
{
    if (group_count < 2 || n <= group_count || !group_means(values, group, n, group_count, means))
        return false;
    double grand = sum_about(values, n, values[0]) / (double)n;
    double between = 0, within = 0;
    for (size_t i = 0; i < n; i++) {
        double apart = means[group[i]] - grand;
        double off = (values[i] - values[0]) - means[group[i]];
        between += apart * apart;
        within += off * off;
    }
    for (size_t g = 0; g < group_count; g++)
        means[g] += values[0];
    out_result->group_count = group_count;
    out_result->n = n;
    out_result->between_ss = between;
    out_result->within_ss = within;
    out_result->between_dof = (double)(group_count - 1);
    out_result->within_dof = (double)(n - group_count);
    double within_ms = within / out_result->within_dof;
    out_result->f = between / out_result->between_dof / within_ms;
    out_result->p = fisher_p(out_result->f, out_result->between_dof, out_result->within_dof);
    out_result->r_squared = between / (between + within);
    out_result->residual_sd = sqrt(within_ms);
    return true;
}

double effective_dof(const double *u, const double *dof, size_t n)
{
    double square = 0, shares = 0;
    for (size_t i = 0; i < n; i++) {
        square += u[i] * u[i];
        shares += u[i] * u[i] * u[i] * u[i] / dof[i];
    }
    return shares > 0 ? square * square / shares : (double)INFINITY;
}
