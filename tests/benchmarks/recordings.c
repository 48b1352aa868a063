#include "benchmarks.h"

#include "clips.h"
#include "quick.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define STRIKES_MAX 32

struct totals {
    unsigned asked, missing, f_wrong, decay_wrong;
    unsigned rings, rings_good, rejected, negatives, negatives_good;
    double worst_ms;
};

/* The nearest of two references, as a share of it. */
static double away(double value, const double reference[2])
{
    double a = value / reference[0] - 1.0, b = value / reference[1] - 1.0;
    return fabs(a) < fabs(b) ? a : b;
}

static void compare(const struct clips *clips, const struct clip *clip,
                    const struct reading *reading, struct totals *totals)
{
    for (size_t i = 0; i < clips->mode_count; i++) {
        const struct clip_mode *mode = &clips->modes[i];
        if (strcmp(mode->name, clip->name) != 0 || mode->grade != 'A' || mode->level_db < -30.0)
            continue;
        totals->asked++;
        /* The strongest of those that could be meant: modes are sorted so. */
        const struct mode *nearest = NULL;
        for (unsigned k = 0; !nearest && k < reading->mode_count; k++)
            if (fabs(away(reading->modes[k].f_hz, mode->f_hz)) < 0.002)
                nearest = &reading->modes[k];
        if (!nearest) {
            totals->missing++;
            printf("      %.6g Hz %.4g /s at %.0f dB: MISSING\n", mode->f_hz[0],
                   mode->decay_per_s[0], mode->level_db);
            continue;
        }
        double f_away = away(nearest->f_hz, mode->f_hz);
        double decay_away = away(nearest->decay_per_s, mode->decay_per_s);
        bool f_wrong = fabs(f_away) > 5e-4, decay_wrong = fabs(decay_away) > 0.15;
        totals->f_wrong += f_wrong;
        totals->decay_wrong += decay_wrong;
        printf("      %.6g Hz %.4g..%.4g /s at %.0f dB: %.6g(%.2g) Hz %+.4f %%%s, %.4g(%.2g) /s "
               "%+.1f %%%s\n",
               mode->f_hz[0], mode->decay_per_s[0], mode->decay_per_s[1], mode->level_db,
               nearest->f_hz, nearest->f_u_hz, 100.0 * f_away, f_wrong ? " WRONG" : "",
               nearest->decay_per_s, nearest->decay_u_per_s, 100.0 * decay_away,
               decay_wrong ? " WRONG" : "");
    }
}

static void print_reading(const struct reading *reading, double onset_s, double ms)
{
    printf("    at %.4f s %s", onset_s, verdict_name(reading->verdict));
    for (unsigned r = 0; r < REASON_COUNT; r++)
        if (reading->reasons & (1u << r))
            printf(" %s", reason_name((enum reason)r));
    printf(", %u modes, %.1f ms; early %.4g late %.4g /s, unexplained %.3f\n", reading->mode_count,
           ms, reading->why.early_per_s, reading->why.late_per_s, reading->why.unexplained);
}

static void read_clip(const struct clips *clips, const struct clip *clip, double lead_s,
                      struct fit_workspace *workspace, bool verbose, struct totals *totals)
{
    float *samples;
    size_t frame_count;
    double rate_hz;
    if (!clips_load(clips, clip, lead_s, &samples, &frame_count, &rate_hz)) {
        printf("  %s: cannot be read\n", clip->name);
        return;
    }
    struct strike *strikes[STRIKES_MAX];
    size_t count = quick_detect(samples, frame_count, rate_hz, 0, strikes, STRIKES_MAX);
    free(samples);
    bool is_negative = strcmp(clip->kind, "negative") == 0;
    struct fit_settings settings = {0};
    struct reading readings[2];
    unsigned good = 0;
    printf("  %s (%s, %u strikes): %zu found\n", clip->name, clip->kind, clip->strikes, count);
    for (size_t s = 0; s < count; s++) {
        struct error err = {0};
        struct reading *reading = &readings[s % 2];
        if (s > 0)
            fit_carry(strikes[s - 1], &readings[(s + 1) % 2], strikes[s]);
        double begin_s = benchmark_thread_s();
        if (!fit_strike(workspace, strikes[s], &settings, reading, &err))
            printf("    fit_strike failed: %s\n", err.text);
        double ms = 1e3 * (benchmark_thread_s() - begin_s);
        totals->worst_ms = fmax(totals->worst_ms, ms);
        good += reading->verdict == VERDICT_GOOD;
        print_reading(reading, ((double)strikes[s]->first_frame + reading->onset_frame) / rate_hz,
                      ms);
        for (unsigned k = 0; verbose && k < reading->mode_count; k++)
            printf("        %s %.7g(%.2g) Hz %.5g(%.2g) /s %.1f dBFS\n", reading->modes[k].label,
                   reading->modes[k].f_hz, reading->modes[k].f_u_hz, reading->modes[k].decay_per_s,
                   reading->modes[k].decay_u_per_s, reading->modes[k].level_dbfs);
        if (s == 0 && !is_negative) {
            totals->rings++;
            totals->rings_good += reading->verdict == VERDICT_GOOD;
            totals->rejected += reading->verdict == VERDICT_REJECTED;
            compare(clips, clip, reading, totals);
        }
    }
    totals->negatives += is_negative;
    totals->negatives_good += is_negative && good > 0;
    for (size_t s = 0; s < count; s++)
        strike_destroy(strikes[s]);
}

bool benchmark_recordings(const struct benchmark_words *words)
{
    const char *shared = getenv("WANE_SHARED");
    static struct clips clips;
    struct error err = {0};
    struct fit_workspace *workspace = fit_workspace_create(500000, &err);
    if (!workspace) {
        fprintf(stderr, "benchmarks: %s\n", err.text);
        return false;
    }
    if (!clips_open(&clips, shared ? shared : WANE_SHARED)) {
        fprintf(stderr, "benchmarks: no recordings in %s (WANE_SHARED names the folder)\n",
                shared ? shared : WANE_SHARED);
        fit_workspace_destroy(workspace);
        return false;
    }
    static const double leads_s[] = {0.3, 0.0};
    for (size_t i = 0; i < 2; i++) {
        struct totals totals = {0};
        printf("recordings, %s\n",
               leads_s[i] > 0.0 ? "0.3 s of dither (sd 1e-6) before each" : "as they are");
        for (size_t c = 0; c < clips.clip_count; c++)
            if (!words->family || strstr(clips.clips[c].name, words->family))
                read_clip(&clips, &clips.clips[c], leads_s[i], workspace, words->verbose, &totals);
        printf(
            "  rings found %u, good %u, rejected %u; negatives %u, with a good strike %u; grade A "
            "modes asked %u, missing %u, f over 0.05 %% %u, decay over 15 %% %u; worst %.1f ms\n",
            totals.rings, totals.rings_good, totals.rejected, totals.negatives,
            totals.negatives_good, totals.asked, totals.missing, totals.f_wrong, totals.decay_wrong,
            totals.worst_ms);
    }
    fit_workspace_destroy(workspace);
    return true;
}
