/* Which mode of a strike is which mode of the series.
 *
 * Tracks and modes, both sorted by frequency, are matched in order: a matching never crosses. First
 * within a tight gate, learned from how the track scatters; then what is left, within a wide one,
 * between the matches that stand. So a missing half of a doublet stays a gap although its other
 * half is near, and a part that was mounted anew is found again. */
#include "wane/series.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Shares of the frequency. Strikes of one mounting agree to some 1e-5; mounting anew, or a day's
 * warming, moves 1e-3; other modes are seldom nearer than 1 %. */
#define GATE_WIDE     0.012
#define GATE_WIDE_MAX 0.1 /* for heavy damping: two half widths, f / Q */
#define GATE_TIGHT    3e-4
#define TIGHT_SCATTER 8.0
#define TIGHT_SEEN    3
#define LEARNING      0.2 /* share by which a track's centre follows a strike */
#define NO_MATCH      1e9
#define SKIP          1.0 /* a match costs at most 1: it is always better than two skips */

struct matching {
    unsigned track_order[SERIES_TRACKS_MAX]; /* by frequency */
    unsigned mode_order[READING_MODES_MAX];
    unsigned track_count, mode_count;
    int mode_of[SERIES_TRACKS_MAX]; /* position in mode_order for each position in track_order */
    double shift;                   /* of ln f, common to all tracks */
};

void tracks_init(struct tracks *tracks, const struct part *part)
{
    memset(tracks, 0, sizeof *tracks);
    if (part == NULL)
        return;
    tracks->is_from_bands = part->mode_count > 0;
    for (unsigned i = 0; i < part->mode_count; i++) {
        struct track *track = &tracks->tracks[tracks->count++];
        memcpy(track->label, part->modes[i].label, sizeof track->label);
        track->band_low_hz = part->modes[i].band_low_hz;
        track->band_high_hz = part->modes[i].band_high_hz;
    }
}

static double track_place(const struct track *track)
{
    return track->centre_hz > 0 ? track->centre_hz : (track->band_low_hz + track->band_high_hz) / 2;
}

/* Insertion sort: few, and nearly sorted; equal ones keep their order. */
static void sort_by(const double *places, unsigned count, unsigned *order)
{
    for (unsigned i = 0; i < count; i++) {
        unsigned at = i;
        while (at > 0 && places[order[at - 1]] > places[i]) {
            order[at] = order[at - 1];
            at--;
        }
        order[at] = i;
    }
}

static double gate_of(const struct track *track, bool is_tight)
{
    if (is_tight && track->seen >= TIGHT_SEEN)
        return fmin(GATE_WIDE, fmax(GATE_TIGHT, TIGHT_SCATTER * track->scatter));
    if (track->band_high_hz > 0)
        return INFINITY; /* the band alone */
    return fmax(GATE_WIDE, fmin(GATE_WIDE_MAX, track->q > 0 ? 2 / track->q : 0));
}

/* 0 ... 1, or NO_MATCH. In a band where nothing has been seen yet the strongest is meant. */
static double match_cost(const struct track *track, const struct reading *reading, unsigned mode,
                         double shift, bool is_tight)
{
    double f = reading->modes[mode].f_hz;
    if (track->band_high_hz > 0 && (f < track->band_low_hz || f > track->band_high_hz))
        return NO_MATCH;
    if (!(track->centre_hz > 0)) {
        double weaker_db = reading->modes[0].level_dbfs - reading->modes[mode].level_dbfs;
        return fmin(1, fmax(0, isfinite(weaker_db) ? weaker_db / 100 : 1));
    }
    double away = fabs(log(f / track->centre_hz) - shift);
    double gate = gate_of(track, is_tight);
    if (away > gate)
        return NO_MATCH;
    return isinf(gate) ? fmin(1, away / GATE_WIDE) : away / gate;
}

static double cost_at(const struct tracks *tracks, const struct reading *reading,
                      const struct matching *matching, unsigned t, unsigned m, bool is_tight)
{
    return match_cost(&tracks->tracks[matching->track_order[t]], reading, matching->mode_order[m],
                      matching->shift, is_tight);
}

/* Positions in the orders: tracks [t0, t1), modes [m0, m1). */
struct span {
    unsigned t0, t1, m0, m1;
};

/* The cheapest matching in order of one span with the other, and its cost. */
static double match_span(const struct tracks *tracks, const struct reading *reading,
                         struct matching *matching, struct span span, bool is_tight)
{
    double best[SERIES_TRACKS_MAX + 1][READING_MODES_MAX + 1];
    for (unsigned t = span.t0; t <= span.t1; t++) {
        for (unsigned m = span.m0; m <= span.m1; m++) {
            double cost = t == span.t0 && m == span.m0 ? 0 : NO_MATCH;
            if (t > span.t0)
                cost = fmin(cost, best[t - 1][m] + SKIP);
            if (m > span.m0)
                cost = fmin(cost, best[t][m - 1] + SKIP);
            if (t > span.t0 && m > span.m0)
                cost = fmin(cost, best[t - 1][m - 1] +
                                      cost_at(tracks, reading, matching, t - 1, m - 1, is_tight));
            best[t][m] = cost;
        }
    }
    for (unsigned t = span.t1, m = span.m1; t > span.t0 && m > span.m0;) {
        double matched =
            best[t - 1][m - 1] + cost_at(tracks, reading, matching, t - 1, m - 1, is_tight);
        if (matched <= best[t][m] && matched < NO_MATCH)
            matching->mode_of[--t] = (int)--m;
        else if (best[t - 1][m] + SKIP <= best[t][m])
            t--;
        else
            m--;
    }
    return best[span.t1][span.m1];
}

static void forget_matches(struct matching *matching)
{
    for (unsigned t = 0; t < matching->track_count; t++)
        matching->mode_of[t] = -1;
}

static unsigned count_matches(const struct matching *matching)
{
    unsigned count = 0;
    for (unsigned t = 0; t < matching->track_count; t++)
        count += matching->mode_of[t] >= 0;
    return count;
}

/* Tight matching without a shift, or with the one that explains more: it must save more than one
 * skip beyond its own size, and bring two modes to agree. */
static void match_tightly(const struct tracks *tracks, const struct reading *reading,
                          struct matching *matching)
{
    struct span all = {0, matching->track_count, 0, matching->mode_count};
    forget_matches(matching);
    double least = match_span(tracks, reading, matching, all, true) - SKIP;
    unsigned matches = count_matches(matching);
    if (matches == matching->track_count || matches == matching->mode_count)
        return;
    struct matching shifted = *matching;
    for (unsigned t = 0; t < matching->track_count; t++) {
        const struct track *track = &tracks->tracks[matching->track_order[t]];
        for (unsigned m = 0; m < matching->mode_count && track->seen >= TIGHT_SEEN; m++) {
            shifted.shift = log(reading->modes[matching->mode_order[m]].f_hz / track->centre_hz);
            if (fabs(shifted.shift) > GATE_WIDE)
                continue;
            forget_matches(&shifted);
            double cost =
                match_span(tracks, reading, &shifted, all, true) + fabs(shifted.shift) / GATE_WIDE;
            if (cost < least && count_matches(&shifted) >= 2) {
                least = cost;
                *matching = shifted;
            }
        }
    }
}

static void match_all(const struct tracks *tracks, const struct reading *reading,
                      struct matching *matching)
{
    match_tightly(tracks, reading, matching);
    unsigned t = 0, m = 0;
    while (t < matching->track_count) {
        if (matching->mode_of[t] >= 0) {
            m = (unsigned)matching->mode_of[t++] + 1;
            continue;
        }
        struct span left = {t, t, m, matching->mode_count};
        while (left.t1 < matching->track_count && matching->mode_of[left.t1] < 0)
            left.t1++;
        if (left.t1 < matching->track_count)
            left.m1 = (unsigned)matching->mode_of[left.t1];
        match_span(tracks, reading, matching, left, false);
        t = left.t1;
    }
}

static void learn_from(struct track *track, const struct mode *mode)
{
    if (!(track->centre_hz > 0))
        track->centre_hz = mode->f_hz;
    double away = log(mode->f_hz / track->centre_hz);
    /* The first strike has no scatter to tell. */
    if (track->seen > 0)
        track->scatter += (fabs(away) - track->scatter) / fmin(track->seen, 10);
    track->centre_hz *= exp(LEARNING * away);
    track->q = mode->q;
    track->seen++;
}

static bool has_label(const struct tracks *tracks, const char *label)
{
    for (unsigned i = 0; i < tracks->count; i++)
        if (strcmp(tracks->tracks[i].label, label) == 0)
            return true;
    return false;
}

/* The first strike's own labels; later ones count on from there. */
static void name_new_track(const struct tracks *tracks, const struct mode *mode, bool is_first,
                           char label[READING_LABEL_MAX])
{
    memcpy(label, mode->label, READING_LABEL_MAX);
    if (is_first && label[0] != '\0')
        return;
    unsigned number = tracks->count;
    do
        snprintf(label, READING_LABEL_MAX, "%u", ++number % 1000);
    while (has_label(tracks, label));
}

static void learn_new(struct tracks *tracks, const struct reading *reading, const bool *is_matched,
                      int out_modes[SERIES_TRACKS_MAX])
{
    bool is_first = tracks->count == 0;
    for (unsigned i = 0; i < reading->mode_count && tracks->count < SERIES_TRACKS_MAX; i++) {
        if (is_matched[i] || !(reading->modes[i].f_hz > 0))
            continue;
        struct track *track = &tracks->tracks[tracks->count];
        name_new_track(tracks, &reading->modes[i], is_first, track->label);
        out_modes[tracks->count++] = (int)i;
        learn_from(track, &reading->modes[i]);
    }
}

void tracks_follow(struct tracks *tracks, const struct reading *reading, bool learns,
                   int out_modes[SERIES_TRACKS_MAX])
{
    struct matching matching = {.track_count = tracks->count, .mode_count = reading->mode_count};
    double track_places[SERIES_TRACKS_MAX], mode_places[READING_MODES_MAX];
    for (unsigned i = 0; i < tracks->count; i++)
        track_places[i] = track_place(&tracks->tracks[i]);
    for (unsigned i = 0; i < reading->mode_count; i++)
        mode_places[i] = reading->modes[i].f_hz;
    sort_by(track_places, tracks->count, matching.track_order);
    sort_by(mode_places, reading->mode_count, matching.mode_order);
    match_all(tracks, reading, &matching);

    for (unsigned t = 0; t < tracks->count && learns; t++)
        tracks->tracks[t].centre_hz *= exp(matching.shift);
    bool is_matched[READING_MODES_MAX] = {false};
    for (unsigned i = 0; i < SERIES_TRACKS_MAX; i++)
        out_modes[i] = -1;
    for (unsigned t = 0; t < matching.track_count; t++) {
        if (matching.mode_of[t] < 0)
            continue;
        unsigned mode = matching.mode_order[matching.mode_of[t]];
        out_modes[matching.track_order[t]] = (int)mode;
        is_matched[mode] = true;
        if (learns)
            learn_from(&tracks->tracks[matching.track_order[t]], &reading->modes[mode]);
    }
    if (learns && !tracks->is_from_bands)
        learn_new(tracks, reading, is_matched, out_modes);
}
