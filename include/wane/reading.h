/* What a fit says of one strike. Plain data, no pointers: copies are safe. Unknown numbers are NAN.
 */
#ifndef WANE_READING_H
#define WANE_READING_H

#include <stdbool.h>
#include <stddef.h>

#define READING_MODES_MAX 16
#define READING_TONES_MAX 16
#define READING_LABEL_MAX 8

enum verdict { VERDICT_GOOD, VERDICT_DOUBTFUL, VERDICT_REJECTED };

/* In the order in which the sentence on the page picks the first. Bits: 1u << REASON_x. */
enum reason {
    REASON_SAMPLES_LOST,
    REASON_CLIPPED,
    REASON_DOUBLE_HIT,
    REASON_RESTRUCK,
    REASON_NOISY,
    REASON_TOO_SOFT,
    REASON_TOO_SHORT,
    REASON_NOT_A_RING,
    REASON_NOT_EXPONENTIAL,
    REASON_GLIDING,
    REASON_INPUT_STEERED,
    REASON_UNRESOLVED,
    REASON_COUNT
};

enum remark { REMARK_BLOW_CLIPPED, REMARK_HUM, REMARK_CUT, REMARK_COUNT };

/* One damped sinusoid, amplitude exp(-decay_per_s t) cos(2 pi f_hz t + phase_rad), t from the
 * onset.
 * *_u: one standard uncertainty, same unit. */
struct mode {
    char label[READING_LABEL_MAX];
    double f_hz, f_u_hz;
    double decay_per_s, decay_u_per_s;
    double f_decay_cov; /* covariance of f_hz and decay_per_s, Hz/s */
    double q, q_u;      /* pi natural_f_hz / decay_per_s */
    double zeta, zeta_u;
    double natural_f_hz;
    double t60_s, t60_u_s;
    double level_dbfs; /* 20 log10(amplitude at the onset) */
    double phase_rad;  /* at the onset, -pi ... pi */
};

/* A steady tone that was fitted and left out (mains hum). */
struct steady_tone {
    double f_hz, level_dbfs;
};

/* The numbers behind the reasons; NAN where a reason does not apply. Names as in the JSON. */
struct why {
    double lost_frames, lost_at_s;
    double clipped_for_s;
    double after_s;        /* double-hit */
    double cut_s;          /* restruck: ring time until the cut */
    double noise_dbfs;     /* noisy: the noise during the ring */
    double over_noise_db;  /* too-soft */
    double cycles, span_s; /* too-short */
    double unexplained;    /* not-a-ring: share of the energy after the attack, 0 ... 1 */
    double early_per_s, late_per_s;
    double early_hz, late_hz;
    double gain_db;
    double near_hz;
};

struct reading {
    /* Positions in frames from the strike's samples[0]; fractions are meant. */
    double onset_frame;
    double window_begin_frame, window_end_frame; /* the span that was fitted */
    double peak_dbfs, noise_dbfs, snr_db;
    enum verdict verdict;
    unsigned reasons; /* bits, see enum reason */
    unsigned remarks; /* bits, see enum remark */
    struct why why;
    struct mode modes[READING_MODES_MAX]; /* strongest first */
    unsigned mode_count;
    struct steady_tone tones[READING_TONES_MAX];
    unsigned tone_count;
    double fit_ms; /* not measured by the fit (it has no clock): the caller's, NAN if not taken */
};

/* The contract's words: "good", "double-hit", "blow-clipped" ... */
const char *verdict_name(enum verdict verdict);
const char *reason_name(enum reason reason);
const char *remark_name(enum remark remark);
/* The other way; false when the word is none of them. */
bool verdict_from_name(const char *name, enum verdict *out_verdict);

/* Empty: no modes, numbers NAN, verdict rejected, no reasons. */
void reading_init(struct reading *reading);

#endif
