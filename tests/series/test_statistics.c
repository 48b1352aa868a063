/* Statistics against published figures; each source stands beside its numbers. */
#include "wane/statistics.h"

#include "support/near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])
#define NIST_FILES   "/usr/lib/python3/dist-packages/scipy/stats/tests/data/"

/* NIST StRD, univariate: NumAcc1 ... NumAcc4, certified mean and standard deviation. They are given
 * by a rule (base + 0.2 once, then pairs base + 0.1, base + 0.3), so no file is needed. */
static void nist_numerical_accuracy_sets_are_met(void **state)
{
    (void)state;
    const double first[] = {10000001, 10000003, 10000002};
    struct sample_spread spread;
    sample_describe(first, 3, &spread);
    CHECK_NEAR(spread.mean, 10000002, 0);
    CHECK_NEAR(spread.sd, 1, 1e-15);
    CHECK_NEAR(sample_autocorrelation(first, 3), -0.5, 1e-12);

    const double bases[] = {1, 1e6, 1e7};
    /* Of the standard deviation 0.1: how far the data themselves, rounded to doubles, miss it. */
    const double limits[] = {1e-14, 1e-10, 1e-9};
    static double values[1001];
    for (size_t set = 0; set < COUNT(bases); set++) {
        values[0] = bases[set] + 0.2;
        for (size_t i = 1; i < 1001; i++)
            values[i] = bases[set] + (i % 2 == 1 ? 0.1 : 0.3);
        sample_describe(values, 1001, &spread);
        CHECK_SHARE(spread.mean, bases[set] + 0.2, 1e-15);
        CHECK_NEAR(spread.sd, 0.1, limits[set]);
        CHECK_NEAR(sample_autocorrelation(values, 1001), -0.999, 1e-7);
    }
}

static size_t read_columns(const char *path, double *left, double *right, size_t capacity)
{
    FILE *file = fopen(path, "r");
    if (file == NULL)
        return 0;
    char line[256];
    size_t n = 0;
    bool is_data = false;
    while (fgets(line, sizeof line, file) != NULL && n < capacity) {
        double a, b;
        char rest[2];
        if (strncmp(line, "Data:", 5) == 0)
            is_data = strstr(line, "y") != NULL || strstr(line, "Resp") != NULL;
        else if (is_data && sscanf(line, " %lf %lf %1s", &a, &b, rest) == 2) {
            left[n] = a;
            right[n++] = b;
        }
    }
    (void)fclose(file);
    return n;
}

/* NIST StRD, linear regression, set Norris; the file is in Debian's python3-scipy. */
static void nist_norris_line_is_met(void **state)
{
    (void)state;
    double y[40], x[40];
    size_t n = read_columns(NIST_FILES "nist_linregress/Norris.dat", y, x, 40);
    if (n == 0) {
        print_message("skipped: no Norris.dat here (python3-scipy has it)\n");
        skip();
    }
    assert_int_equal(n, 36);
    struct line_fit line;
    assert_true(line_fit(x, y, n, &line));
    CHECK_NEAR(line.intercept, -0.262323073774029, 1e-12);
    CHECK_NEAR(line.slope, 1.00211681802045, 1e-13);
    CHECK_SHARE(line.intercept_u, 0.232818234301152, 1e-12);
    CHECK_SHARE(line.slope_u, 0.429796848199937e-3, 1e-12);
    CHECK_SHARE(line.residual_sd, 0.884796396144373, 1e-12);
}

/* GUM H.3, calibration of a thermometer (readings and results from memory: y1 -0.1712, u 0.0029,
 * y2 0.00218, u 0.00067, residual sd 0.0035; the readings reproduce them). x from 20 degrees C. */
static void gum_h3_thermometer_line_is_met(void **state)
{
    (void)state;
    const double t[] = {21.521, 22.012, 22.512, 23.003, 23.507, 23.999,
                        24.513, 25.002, 25.503, 26.010, 26.511};
    const double b[] = {-0.171, -0.169, -0.166, -0.159, -0.164, -0.165,
                        -0.156, -0.157, -0.159, -0.161, -0.160};
    double x[11];
    for (size_t i = 0; i < 11; i++)
        x[i] = t[i] - 20;
    struct line_fit line;
    assert_true(line_fit(x, b, 11, &line));
    CHECK_NEAR(line.intercept, -0.1712, 0.00005);
    CHECK_NEAR(line.intercept_u, 0.0029, 0.00005);
    CHECK_NEAR(line.slope, 0.00218, 0.000005);
    CHECK_NEAR(line.slope_u, 0.00067, 0.000005);
    CHECK_NEAR(line.residual_sd, 0.0035, 0.00005);
}

/* NIST StRD, analysis of variance, set SiRstv: silicon resistivity, five instruments. */
static void nist_silicon_resistivity_anova_is_met(void **state)
{
    (void)state;
    const double ohm_cm[25] = {196.3052, 196.1240, 196.1890, 196.2569, 196.3403, 196.3042, 196.3825,
                               196.1669, 196.3257, 196.0422, 196.1303, 196.2005, 196.2889, 196.0343,
                               196.1811, 196.2795, 196.1748, 196.1494, 196.1485, 195.9885, 196.2119,
                               196.1051, 196.1850, 196.0052, 196.2090};
    size_t instrument[25];
    for (size_t i = 0; i < 25; i++)
        instrument[i] = i / 5;
    double means[5];
    struct one_way result;
    assert_true(one_way_anova(ohm_cm, instrument, 25, 5, means, &result));
    CHECK_SHARE(result.between_ss, 5.11462616e-2, 1e-8);
    CHECK_SHARE(result.within_ss, 2.16636560e-1, 1e-8);
    CHECK_SHARE(result.f, 1.18046237440255, 1e-9);
    CHECK_SHARE(result.r_squared, 1.90999039051129e-1, 1e-9);
    CHECK_SHARE(result.residual_sd, 1.04076068334656e-1, 1e-9);
    assert_true(result.between_dof == 4 && result.within_dof == 20);
}

/* NIST StRD, SmLs01, 04, 07 (1, 7 and 13 shared leading digits): F exactly 21. The limits are what
 * the sets' values, rounded to doubles, still hold. */
static void nist_stiff_anova_sets_are_met(void **state)
{
    (void)state;
    const struct {
        const char *path;
        double limit;
    } sets[] = {{NIST_FILES "nist_anova/SmLs01.dat", 1e-12},
                {NIST_FILES "nist_anova/SmLs04.dat", 1e-8},
                {NIST_FILES "nist_anova/SmLs07.dat", 1e-2}};
    static double treatment[200], values[200];
    static size_t group[200];
    for (size_t set = 0; set < COUNT(sets); set++) {
        size_t n = read_columns(sets[set].path, treatment, values, 200);
        if (n == 0) {
            print_message("skipped: no SmLs files here (python3-scipy has them)\n");
            skip();
        }
        assert_int_equal(n, 189);
        for (size_t i = 0; i < n; i++)
            group[i] = (size_t)treatment[i] - 1;
        double means[9];
        struct one_way result;
        assert_true(one_way_anova(values, group, n, 9, means, &result));
        CHECK_SHARE(result.f, 21.0, sets[set].limit);
        CHECK_SHARE(result.residual_sd, 0.1, sets[set].limit);
    }
}

/* GUM table G.2 (recomputed to six decimals in our check values; the GUM prints two). */
static void student_factors_are_those_of_gum_table_g2(void **state)
{
    (void)state;
    const struct {
        double dof, t95, t99, t9545;
    } rows[] = {{1, 12.706205, 63.656741, 13.967811}, {2, 4.302653, 9.924843, 4.526551},
                {5, 2.570582, 4.032143, 2.648654},    {9, 2.262157, 3.249836, 2.319809},
                {19, 2.093024, 2.860935, 2.140497},   {30, 2.042272, 2.749996, 2.086847},
                {100, 1.983972, 2.625891, 2.025312},  {INFINITY, 1.959964, 2.575829, 2.000002}};
    for (size_t i = 0; i < COUNT(rows); i++) {
        CHECK_NEAR(coverage_factor(0.95, rows[i].dof), rows[i].t95, 1e-6);
        CHECK_NEAR(coverage_factor(0.99, rows[i].dof), rows[i].t99, 1e-6);
        CHECK_NEAR(coverage_factor(0.9545, rows[i].dof), rows[i].t9545, 2e-6);
    }
    CHECK_NEAR(student_p(2.093024, 19), 0.05, 1e-7);
    CHECK_NEAR(student_quantile(0.025, 9), -2.262157, 1e-6);
}

/* chi2(0.01; 42): e-Handbook 7.2.6.3. F: the standard tables' 95 % points, two decimals (F(0.95; 4,
 * 20) 2.87, F(0.95; 8, 180) 1.99, from memory), and F(1, n) = t(n)^2, exact. */
static void other_quantiles_are_those_of_the_tables(void **state)
{
    (void)state;
    CHECK_NEAR(chi2_quantile(0.01, 42), 23.650095, 1e-6);
    CHECK_NEAR(fisher_quantile(0.95, 4, 20), 2.87, 0.005);
    CHECK_NEAR(fisher_quantile(0.95, 8, 180), 1.99, 0.005);
    double t = coverage_factor(0.95, 12);
    CHECK_SHARE(fisher_quantile(0.95, 1, 12), t * t, 1e-12);
    CHECK_NEAR(normal_quantile(0.975), 1.959964, 1e-6);
    assert_true(isnan(chi2_quantile(0, 5)) && isnan(student_quantile(0.9, 0)) &&
                isnan(fisher_quantile(1, 2, 3)) && isnan(coverage_factor(0.95, -1)));
}

/* GUM G.4.1: y = b x1 x2 x3, n 10, 5, 15, relative u 0.25, 0.57, 0.82 %: the GUM gives 19.0 degrees
 * of freedom and t95 2.09. We keep the fraction, G.4.1 would also allow 18. */
static void gum_g41_degrees_of_freedom_are_met(void **state)
{
    (void)state;
    const double u[] = {0.25, 0.57, 0.82}, dof[] = {9, 4, 14};
    CHECK_NEAR(effective_dof(u, dof, 3), 18.998742, 1e-6);
    CHECK_NEAR(coverage_factor(0.95, effective_dof(u, dof, 3)), 2.093, 0.0005);
}

/* A made example whose answer follows by hand: 1 2 3 4 5 against 3 4 5 6 7: difference 2, u 1, 8
 * degrees of freedom; p of t = 2 there is 0.0805 (t tables). */
static void welch_of_equal_spreads_is_the_textbook_case(void **state)
{
    (void)state;
    const double a[] = {1, 2, 3, 4, 5}, b[] = {3, 4, 5, 6, 7};
    struct sample_spread first, second;
    sample_describe(a, 5, &first);
    sample_describe(b, 5, &second);
    struct sample_difference difference;
    assert_true(sample_compare(&first, &second, &difference));
    CHECK_NEAR(difference.difference, 2, 1e-15);
    CHECK_NEAR(difference.u, 1, 1e-15);
    CHECK_NEAR(difference.dof, 8, 1e-12);
    CHECK_NEAR(difference.p, 0.0805, 0.00005);
    CHECK_NEAR(difference.half_width, 2.306004, 1e-6);
    CHECK_NEAR(difference.ratio, 5.0 / 3, 1e-15);
}

static void one_value_far_from_many_is_odd_and_none_of_a_few_is(void **state)
{
    (void)state;
    const double q[] = {1440, 1443, 1438, 1445, 1441, 1279, 1442, 1439};
    double scratch[8];
    bool is_odd[8];
    assert_int_equal(sample_mark_odd(q, 8, 1.0, scratch, is_odd), 1);
    assert_true(is_odd[5]);
    /* Three values agree by chance: without the floor the fourth would be marked. */
    const double chance[] = {100.0, 100.0, 100.0, 100.5};
    assert_int_equal(sample_mark_odd(chance, 4, 0.2, scratch, is_odd), 0);
    assert_int_equal(sample_mark_odd(q, 3, 0, scratch, is_odd), 0);
}

static void too_few_values_give_unknown_not_a_guess(void **state)
{
    (void)state;
    struct sample_spread spread;
    sample_describe(NULL, 0, &spread);
    assert_true(isnan(spread.mean) && isnan(spread.sd));
    const double one = 5;
    sample_describe(&one, 1, &spread);
    assert_true(spread.mean == 5 && isnan(spread.sd) && isnan(spread.half_width));
    struct line_fit line;
    const double x[] = {1, 1, 1}, y[] = {1, 2, 3};
    assert_false(line_fit(x, y, 3, &line));
    assert_false(line_fit(y, y, 2, &line));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(nist_numerical_accuracy_sets_are_met),
        cmocka_unit_test(nist_norris_line_is_met),
        cmocka_unit_test(gum_h3_thermometer_line_is_met),
        cmocka_unit_test(nist_silicon_resistivity_anova_is_met),
        cmocka_unit_test(nist_stiff_anova_sets_are_met),
        cmocka_unit_test(student_factors_are_those_of_gum_table_g2),
        cmocka_unit_test(other_quantiles_are_those_of_the_tables),
        cmocka_unit_test(gum_g41_degrees_of_freedom_are_met),
        cmocka_unit_test(welch_of_equal_spreads_is_the_textbook_case),
        cmocka_unit_test(one_value_far_from_many_is_odd_and_none_of_a_few_is),
        cmocka_unit_test(too_few_values_give_unknown_not_a_guess),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
