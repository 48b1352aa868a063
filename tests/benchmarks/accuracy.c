#include "benchmarks.h"

#include "families.h"
#include "quick.h"
#include "score.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void settings_of(const struct scene *scene, struct fit_settings *out)
{
    *out = (struct fit_settings){0};
    if (scene->coupling_known)
        out->coupling_hz = scene->coupling_hz;
}

static bool fit_timed(struct fit_workspace *workspace, const struct strike *strike,
                      const struct fit_settings *settings, struct reading *out, double *out_ms)
{
    struct error err = {0};
    double begin = benchmark_thread_s();
    bool fitted = fit_strike(workspace, strike, settings, out, &err);
    *out_ms = 1e3 * (benchmark_thread_s() - begin);
    if (!fitted)
        fprintf(stderr, "fit_strike failed: %s\n", err.text);
    return fitted;
}

/* The scene's own windows go to the fit; earlier modes are carried as the daemon carries them. */
static bool run_direct(const struct scene *scene, struct fit_workspace *workspace,
                       struct score *score, unsigned index, FILE *say)
{
    struct fit_settings settings;
    settings_of(scene, &settings);
    struct strike *before = NULL;
    struct reading last;
    bool done = true;
    for (unsigned i = 0; done && i < scene->take_count; i++) {
        struct strike *strike = bench_strike(scene, &scene->takes[i]);
        struct reading reading;
        double ms = 0.0;
        if (!strike)
            return false;
        if (before)
            fit_carry(before, &last, strike);
        done = fit_timed(workspace, strike, &settings, &reading, &ms) &&
               score_add(score, scene, &scene->takes[i], &reading, ms, index, say);
        strike_destroy(before);
        before = strike;
        last = reading;
    }
    strike_destroy(before);
    return done;
}

/* Through the program's own detector: nothing may be missed and nothing found that was not there.
 */
static bool run_detector(const struct scene *scene, struct fit_workspace *workspace,
                         struct score *score, unsigned index, FILE *say)
{
    struct fit_settings settings;
    settings_of(scene, &settings);
    struct strike *strikes[SCENE_TAKES_MAX + 8];
    size_t count = quick_detect(scene->samples, scene->frame_count, scene->rate_hz, 0, strikes,
                                sizeof strikes / sizeof strikes[0]);
    bool found[SCENE_TAKES_MAX] = {false};
    struct reading last;
    bool done = true;
    for (size_t s = 0; s < count; s++) {
        struct reading reading;
        reading_init(&reading);
        double ms = 0.0;
        if (s > 0)
            fit_carry(strikes[s - 1], &last, strikes[s]);
        done = done && fit_timed(workspace, strikes[s], &settings, &reading, &ms);
        last = reading;
        double onset = (double)strikes[s]->first_frame + reading.onset_frame;
        if (!isfinite(reading.onset_frame))
            onset = (double)(strikes[s]->first_frame + strikes[s]->trigger);
        unsigned i = 0;
        while (i < scene->take_count &&
               (found[i] || fabs(onset - scene->takes[i].onset_frame) > 0.03 * scene->rate_hz))
            i++;
        if (i == scene->take_count) {
            score->false_strikes++;
            if (say)
                fprintf(say, "  #%u (%s); false strike at %.4f s\n", index, scene->note,
                        onset / scene->rate_hz);
            continue;
        }
        found[i] = true;
        done = done && score_add(score, scene, &scene->takes[i], &reading, ms, index, say);
    }
    for (unsigned i = 0; i < scene->take_count; i++) {
        score->missed += !found[i];
        score->strikes += !found[i];
        if (!found[i] && say)
            fprintf(say, "  #%u (%s); strike %u missed by the detector\n", index, scene->note,
                    i + 1);
    }
    for (size_t s = 0; s < count; s++)
        strike_destroy(strikes[s]);
    return done;
}

static void print_head(void)
{
    printf("%-9s %-5s %5s  %7s %7s %6s %6s  %6s %6s %6s\n", "family", "", "modes", "/bound",
           "/oracle", "bias", "out %", "u/bnd", "u/rms", "in 2u");
}

static void print_row(const char *name, const char *quantity, const struct score_errors *errors)
{
    struct score_summary row;
    score_summarise(errors, &row);
    printf("%-9s %-5s %5zu  %7.3f %7.3f %6.2f %6.2f  %6.2f %6.2f %5.1f%%\n", name, quantity,
           errors->count, row.rms_over_bound, row.rms_over_oracle, row.bias_sd,
           100.0 * row.outliers, row.u_over_bound, row.u_over_rms, 100.0 * row.inside_2u);
}

static void print_score(const struct family *family, struct score *score)
{
    print_row(family->name, "f", &score->f);
    print_row("", "decay", &score->decay);
    double worst = 0.0;
    for (size_t i = 0; i < score->ms_count; i++)
        worst = fmax(worst, score->ms[i]);
    printf(
        "          strikes %u missed %u false %u; modes asked %u missing %u spurious %u; good %u "
        "doubtful %u rejected %u; ms median %.2f worst %.1f\n",
        score->strikes, score->missed, score->false_strikes, score->asked, score->missing,
        score->spurious, score->verdicts[VERDICT_GOOD], score->verdicts[VERDICT_DOUBTFUL],
        score->verdicts[VERDICT_REJECTED], score_median(score->ms, score->ms_count), worst);
    if (score->hidden > 0)
        printf("          hidden doublets %u: honest %u, one mode and no word %u, confident and "
               "wrong %u\n",
               score->hidden, score->hidden_honest, score->hidden_one, score->hidden_wrong);
    bool any = false;
    for (unsigned r = 0; r < REASON_COUNT; r++)
        if (score->reasons[r] > 0) {
            printf("%s %s %u", any ? "," : "          reasons:", reason_name((enum reason)r),
                   score->reasons[r]);
            any = true;
        }
    printf("%s", any ? "\n" : "");
    fflush(stdout);
}

/* Limits of the short run. The fit sees the same noise as the oracle, so their ratio strays little
 * by chance: 1.25 times what is asked of the full run. Of outliers, missing and spurious modes one
 * is forgiven, or a share of many. */
struct limits {
    double over_oracle, outliers, missing, spurious;
};

static double one_or(double share, double count)
{
    return fmax(share, 1.0 / fmax(count, 1.0));
}

static bool is_within(const struct family *family, const struct score *score,
                      const struct limits *limits)
{
    struct score_summary f, decay;
    score_summarise(&score->f, &f);
    score_summarise(&score->decay, &decay);
    double asked = score->asked;
    struct {
        const char *what;
        double value, limit;
    } checks[] = {
        {"RMS of f over the oracle's", f.rms_over_oracle, limits->over_oracle * family->reach},
        {"RMS of decay over the oracle's", decay.rms_over_oracle,
         limits->over_oracle * family->reach},
        {"outliers in f", f.outliers, one_or(limits->outliers, asked)},
        {"outliers in decay", decay.outliers, one_or(limits->outliers, asked)},
        {"missing modes", score->missing / asked, one_or(limits->missing, asked)},
        {"spurious modes", score->spurious / asked, one_or(limits->spurious, asked)},
    };
    bool within = true;
    for (size_t i = 0; i < sizeof checks / sizeof checks[0]; i++)
        if (!(checks[i].value <= checks[i].limit)) {
            printf("FAILED: %s: %s is %.4f, limit %.4f\n", family->name, checks[i].what,
                   checks[i].value, checks[i].limit);
            within = false;
        }
    return within;
}

static bool run_family(const struct family *family, const struct benchmark_words *words,
                       struct fit_workspace *workspace, bool *within)
{
    static const struct limits short_limits = {1.25, 0.03, 0.02, 0.02};
    struct score score = {0};
    bool done = true;
    unsigned first = words->only >= 0 ? (unsigned)words->only : 0;
    unsigned last = words->only >= 0 ? first + 1 : words->count;
    for (unsigned i = first; done && i < last; i++) {
        struct scene scene;
        done = family_make(family, words->seed, i, &scene);
        if (done && words->only >= 0) {
            char name[128];
            (void)snprintf(name, sizeof name, "/tmp/bench-%s-%lu-%u", family->name, words->seed, i);
            done = bench_dump(&scene, name);
            printf("wrote %s.wav and %s.txt\n", name, name);
        }
        FILE *say = words->verbose ? stdout : NULL;
        if (done)
            done = words->through_detector ? run_detector(&scene, workspace, &score, i, say)
                                           : run_direct(&scene, workspace, &score, i, say);
        bench_done(&scene);
    }
    print_score(family, &score);
    if (words->is_short)
        *within = is_within(family, &score, &short_limits) && *within;
    score_done(&score);
    return done;
}

bool benchmark_accuracy(const struct benchmark_words *words)
{
    size_t count;
    const struct family *families = family_table(&count);
    if (words->family && !family_find(words->family)) {
        fprintf(stderr, "benchmarks: no family is called %s; there are", words->family);
        for (size_t i = 0; i < count; i++)
            fprintf(stderr, " %s", families[i].name);
        fprintf(stderr, "\n");
        return false;
    }
    struct error err = {0};
    struct fit_workspace *workspace = fit_workspace_create(500000, &err);
    if (!workspace) {
        fprintf(stderr, "benchmarks: %s\n", err.text);
        return false;
    }
    printf("accuracy, %u strikes a family, seed %lu, windows from %s\n", words->count, words->seed,
           words->through_detector ? "the detector" : "the scene");
    printf(
        "asked for: modes 10 sd over nothing whose decay the bound knows to 10 %% and f to 5 %%\n");
    print_head();
    bool done = true, within = true;
    for (size_t i = 0; done && i < count; i++)
        if (!words->family || strcmp(words->family, families[i].name) == 0)
            done = run_family(&families[i], words, workspace, &within);
    fit_workspace_destroy(workspace);
    return done && within;
}
