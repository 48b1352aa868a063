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

enum break_kind { BREAK_NONE, BREAK_HIT, BREAK_LOST, BREAK_GAIN };

/* A pole's early and late value; u of their difference. */
struct curvature {
    bool is_known;
    double complex early, late;
    double u_a, u_w;
};

/* Positions are indices into the strike's samples. */
struct fit {
    struct fit_workspace *workspace;
    const struct strike *strike;
    struct fit_settings settings; /* automatic values filled in */
    struct segment *segment;      /* the workspace's */
    struct noise noise;           /* with the part's misfit, once that is known */
    struct noise plain;           /* as measured */
    double w_low, w_high;         /* rad a sample */
    double tones_w[READING_TONES_MAX];
    unsigned tone_count;
    double tone_variance; /* of all tones together */
    size_t quiet_end;     /* samples before it are noise */
    size_t blow;          /* first loud sample */
    size_t first_begin;   /* of the first fit, before the walk back */
    size_t begin, end;    /* the fitted span; the segment's first sample is samples[begin] */
    double onset;
    bool is_clean_onset;       /* the ring begins at the onset, no blow between */
    double unresolved_w;       /* 0: none */
    unsigned lead_pole;        /* the ring pole with most energy */
    bool is_curved[POLES_MAX]; /* the residual says that this pole is not all there is */
    struct curvature curvature[POLES_MAX];
    enum break_kind break_kind;
    size_t break_at;
    double lost_frames;
    double gain_db;                                 /* by how much the input moved its gain */
    size_t clipped, clipped_early, clipped_in_blow; /* samples */
    double clipped_share;                           /* of the window's first third */
    bool was_restless;                              /* the noise before the strike came in bursts */
    bool is_noise_from_tail; /* nothing before the strike to measure it from */
    size_t lost_at;          /* where the driver says that frames are missing; 0: nowhere */
    double
        quietest; /* quietest 10 ms of the ring over the quietest before it, powers; 0: unknown */
    double noise_after;  /* variance in the window's last part over the noise before; 0: unknown */
    double misfit;       /* by how much what the modes leave exceeds the noise, 1: not at all */
    double misfit_share; /* of the ring's energy */
    double lead_noise_u; /* relative, of the lead's decay, before it is widened by its misfit */
    double lead_u;       /* the same, widened */
    double unexplained;  /* share of the energy */
};

/* noise and window: window.c */
void window_prepare(struct fit *fit);
/* Was a line as strong as this mode there before the strike? Then it is no mode of it. */
bool window_was_there_before(const struct fit *fit, const struct pole *pole);
/* Mean square of the samples [from, from + count) less the model. */
double window_left(const struct fit *fit, size_t from, size_t count);
size_t window_first_begin(const struct fit *fit);
/* Walks fit->begin back towards the onset as far as the ring found so far explains the samples.
 * WALK_CLEAN: silence was reached and fit->onset is the sample-exact change point. After WALK_MOVED
 * fit again and walk on; after WALK_ENDED nothing has changed. */
enum walk { WALK_ENDED, WALK_MOVED, WALK_CLEAN };
enum walk window_walk_back(struct fit *fit);

/* modes: candidates.c. Fits all modes from fit->begin on; false when nothing could be solved. */
bool candidates_fit(struct fit *fit);
/* The same modes from a new fit->begin or to a new fit->end on, refined. */
void candidates_refit(struct fit *fit);
/* The last of it: quick modes that only now show, those that were the blow dropped, doublets split.
 */
bool candidates_finish(struct fit *fit);
/* residual = samples - model over the fitted span. */
void candidates_residual(struct fit *fit);

/* Splits poles that want to be two. Sets unresolved_w where one does but the record cannot tell
 * how, and is_curved where it is a decay that is no exponential. Needs a settled segment. */
void doublets_resolve(struct fit *fit);

/* Best heavily damped mode, or slow real decay (the input's AC coupling), of the residual, which it
 * spoils: lowq.c. statistic as in spectrum.h. false when there is nothing at all. */
bool lowq_search(struct fit *fit, struct candidate *out, bool *out_is_real);

/* uncertainty.c: fills modes (unsorted, unlabelled) with values and uncertainties at the onset. */
void uncertainty_fill(struct fit *fit, struct reading *reading);

/* Second blows and silent losses: breaks.c. */
void breaks_find(struct fit *fit);

/* Early and late part apart, for all poles: curvature.c. Leaves the segment as it was. */
void curvature_measure(struct fit *fit);

/* By how much the residual (candidates_residual) beside a pole exceeds the noise; at least 1. */
double curvature_excess(struct fit *fit, const struct pole *pole);

/* clip.c */
void clip_count(struct fit *fit);
bool clip_is_bent(struct fit *fit, double loss);

/* verdict.c: what is left unexplained, the noise after; then reasons, remarks, why, verdict. */
void verdict_measure(struct fit *fit);
void verdict_judge(struct fit *fit, struct reading *reading);

#endif
