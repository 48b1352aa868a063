/* What the steps of one fit hand to each other. Private to fit/. */
#ifndef WANE_FIT_STATE_H
#define WANE_FIT_STATE_H

#include "fit/refine.h"
#include "fit/spectrum.h"
#include "wane/fit.h"

struct fit_workspace {
    size_t frames_max;
    struct spectrum *spectrum;
    float *y;     /* [frames_max] the strike's samples less the card's offset */
    float *quiet; /* [frames_max] the span before the strike, tones and earlier rings taken out */
    float *residual; /* [frames_max] */
    struct segment segment;
};

/* Positions are indices into the strike's samples. */
struct fit {
    struct fit_workspace *workspace;
    const struct strike *strike;
    struct fit_settings settings; /* automatic values filled in */
    struct segment *segment;      /* the workspace's */
    struct noise noise;
    double w_low, w_high; /* rad a sample */
    double tones_w[READING_TONES_MAX];
    unsigned tone_count;
    double tone_variance; /* of all tones together */
    size_t quiet_end;     /* samples before it are noise */
    size_t blow;          /* first loud sample */
    size_t begin, end;    /* the fitted span; the segment's first sample is samples[begin] */
    double onset;
    bool is_clean_onset; /* the ring begins at the onset, no blow between */
    double unresolved_w; /* 0: none */
    int curved_pole;     /* -1: none */
    double unexplained;  /* share of the energy */
};

/* noise and window: window.c */
void window_prepare(struct fit *fit);
/* Was a line as strong as this mode there before the strike? Then it is no mode of it. */
bool window_was_there_before(const struct fit *fit, const struct pole *pole);
size_t window_first_begin(const struct fit *fit);
/* Walks fit->begin back towards the onset as far as the ring found so far explains the samples.
 * WALK_CLEAN: silence was reached and fit->onset is the sample-exact change point. After WALK_MOVED
 * fit again and walk on; after WALK_ENDED nothing has changed. */
enum walk { WALK_ENDED, WALK_MOVED, WALK_CLEAN };
enum walk window_walk_back(struct fit *fit);

/* modes: candidates.c. Fits all modes from fit->begin on; false when nothing could be solved. */
bool candidates_fit(struct fit *fit);
/* residual = samples - model over the fitted span. */
void candidates_residual(struct fit *fit);

/* Splits poles that want to be two. Sets unresolved_w where one does but the record cannot tell
 * how, and curved_pole where it is a decay that is no exponential. Needs a settled segment. */
void doublets_resolve(struct fit *fit);

/* Best heavily damped mode, or slow real decay (the input's AC coupling), of the residual, which it
 * spoils: lowq.c. statistic as in spectrum.h. false when there is nothing at all. */
bool lowq_search(struct fit *fit, struct candidate *out, bool *out_is_real);

/* uncertainty.c: fills modes (unsorted, unlabelled) with values and uncertainties at the onset. */
void uncertainty_fill(struct fit *fit, struct reading *reading);

/* verdict.c: reasons, remarks, why, verdict. */
void verdict_judge(struct fit *fit, struct reading *reading);

#endif
