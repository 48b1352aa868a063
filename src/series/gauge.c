#include "wane/gauge.h"

#include <math.h>
#include <string.h>

struct sums {
    double parts, setups, strikes;
};

static double mean_of(const double *values, size_t n)
{
    struct sample_spread spread;
    sample_describe(values, n, &spread);
    return spread.mean;
}

/* Sums of squares of each level about the level above; differences are taken first, so that shared
 * leading digits cost nothing. */
static struct sums squares(const double *values, const struct gauge_study *study)
{
    struct sums sums = {0, 0, 0};
    size_t per_part = study->setups * study->strikes;
    for (size_t p = 0; p < study->parts; p++) {
        const double *part = values + p * per_part;
        double part_mean = mean_of(part, per_part);
        double off = part_mean - study->mean;
        sums.parts += (double)per_part * off * off;
        for (size_t s = 0; s < study->setups; s++) {
            const double *setup = part + s * study->strikes;
            double setup_mean = mean_of(setup, study->strikes);
            off = setup_mean - part_mean;
            sums.setups += (double)study->strikes * off * off;
            for (size_t k = 0; k < study->strikes; k++)
                sums.strikes += (setup[k] - setup_mean) * (setup[k] - setup_mean);
        }
    }
    return sums;
}

/* A variance that is sum of weights x mean squares, with its interval. */
static struct component component_of(const double *weights, const double *mean_squares,
                                     const double *dof, size_t n)
{
    double variance = 0, spread = 0;
    for (size_t i = 0; i < n; i++) {
        double part = weights[i] * mean_squares[i];
        variance += part;
        spread += part * part / dof[i];
    }
    struct component component = {0, 0, (double)NAN, (double)NAN};
    if (!(variance > 0))
        return component;
    double effective = variance * variance / spread;
    component.sd = sqrt(variance);
    component.low = sqrt(variance * effective / chi2_quantile(0.975, effective));
    component.high = sqrt(variance * effective / chi2_quantile(0.025, effective));
    return component;
}

static bool check_sizes(size_t parts, size_t setups, size_t strikes, struct error *err)
{
    if (setups < 2)
        return error_set(err, ERROR_USAGE,
                         "a gauge study needs two set-ups a part: take each part out and mount it "
                         "anew");
    if (strikes < 2)
        return error_set(err, ERROR_USAGE, "a gauge study needs two strikes a set-up");
    if (parts < 1 || parts > GAUGE_PARTS_MAX || setups > GAUGE_SETUPS_MAX ||
        strikes > GAUGE_STRIKES_MAX)
        return error_set(err, ERROR_LIMIT,
                         "a gauge study has up to %d parts, %d set-ups a part and %d strikes a "
                         "set-up",
                         GAUGE_PARTS_MAX, GAUGE_SETUPS_MAX, GAUGE_STRIKES_MAX);
    return true;
}

static void find_components(struct gauge_study *study)
{
    double n = (double)study->strikes, per_part = (double)(study->setups * study->strikes);
    const double ms[] = {study->strike_ms, study->setup_ms, study->part_ms};
    const double dof[] = {study->strike_dof, study->setup_dof, study->part_dof};
    study->repeatability = component_of((const double[]){1}, ms, dof, 1);
    study->setup = component_of((const double[]){-1 / n, 1 / n}, ms, dof, 2);
    /* A negative set-up component is taken as 0: then a strike alone is what one set-up tells. */
    study->reproducibility = study->setup.sd > 0
                                 ? component_of((const double[]){1 - 1 / n, 1 / n}, ms, dof, 2)
                                 : study->repeatability;
    const double not_known = (double)NAN;
    study->part = (struct component){not_known, not_known, not_known, not_known};
    study->categories = not_known;
    if (study->parts > 1) {
        study->part =
            component_of((const double[]){-1 / per_part, 1 / per_part}, ms + 1, dof + 1, 2);
        study->categories = floor(sqrt(2.0) * study->part.sd / study->reproducibility.sd);
    }
    double total = study->reproducibility.sd * study->reproducibility.sd;
    if (study->parts > 1)
        total += study->part.sd * study->part.sd;
    struct component *const all[] = {&study->repeatability, &study->setup, &study->reproducibility,
                                     &study->part};
    for (size_t i = 0; i < 4; i++)
        all[i]->share = all[i]->sd * all[i]->sd / total;
}

bool gauge_analyze(const double *values, size_t parts, size_t setups, size_t strikes,
                   struct gauge_study *out_study, struct error *err)
{
    if (!check_sizes(parts, setups, strikes, err))
        return false;
    struct gauge_study study = {.parts = parts, .setups = setups, .strikes = strikes};
    study.mean = mean_of(values, parts * setups * strikes);
    struct sums sums = squares(values, &study);
    study.part_dof = (double)parts - 1;
    study.setup_dof = (double)(parts * (setups - 1));
    study.strike_dof = (double)(parts * setups * (strikes - 1));
    study.part_ms = parts > 1 ? sums.parts / study.part_dof : (double)NAN;
    study.setup_ms = sums.setups / study.setup_dof;
    study.strike_ms = sums.strikes / study.strike_dof;
    if (!(study.strike_ms > 0))
        return error_set(err, ERROR_DATA,
                         "the strikes of each set-up are all the same: they tell no "
                         "repeatability");
    study.setup_f = study.setup_ms / study.strike_ms;
    study.setup_p = fisher_p(study.setup_f, study.setup_dof, study.strike_dof);
    study.part_f = study.part_ms / study.setup_ms;
    study.part_p =
        parts > 1 ? fisher_p(study.part_f, study.part_dof, study.setup_dof) : (double)NAN;
    find_components(&study);
    *out_study = study;
    return true;
}
