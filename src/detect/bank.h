/* A bank of Hann frames of one length: the level of each bin, the floor each
 * bin had before, and the test for a strike. The detector owns two, of about 10
 * ms and 40 ms.
 *
 * Frame j covers samples [j hop - length, j hop). Its row holds one level for
 * each lane: first the bins, then the means of groups of eight bins (a short
 * pulse lifts many bins a little).
 *
 *         floor: 32 rows       row m - near    row m, under test     row m +
 * look, the newest
 *   |<------------------------------>|<- near hops ->|<------- look hops
 * ------->|
 *
 * Levels are whole numbers, so that sliding sums stay exact however long the
 * input runs: the upper bits of a float are a piecewise linear log2, 64 steps
 * to a factor of 2 in power. */
#ifndef WANE_DETECT_BANK_H
#define WANE_DETECT_BANK_H

#include <fftw3.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define BANK_ROWS         64      /* kept; a power of two, over look + near + BANK_FLOOR */
#define BANK_FLOOR        32      /* rows in the floor */
#define BANK_GROUP        8       /* bins in a group */
#define BANK_STEPS_PER_DB 21.2603 /* 64 / (10 log10 2) */

struct bank_settings {
    double rate_hz, trigger_db, f_low_hz, f_high_hz;
};

struct bank {
    size_t length, hop; /* samples */
    int near;           /* hops back to "itself a while ago": a frame and a half */
    int look;           /* hops of hindsight: two frames */
    size_t bins;        /* length / 2 + 1 */
    size_t lanes;       /* bins and groups, padded to a multiple of 16 */
    double rate_hz;
    float *window;           /* [length] */
    float *frame;            /* [length] */
    fftwf_complex *spectrum; /* [bins] */
    fftwf_plan plan;
    float silence;        /* power added to each bin: what counts as nothing */
    int16_t *rows;        /* [BANK_ROWS x lanes] */
    int16_t *sum;         /* [lanes] of level / 32 over the floor's 32 rows: their mean level */
    int16_t *young;       /* [lanes] the same while the rows are fewer */
    const int16_t *floor; /* [lanes] one of the two: mean level of the rows before newest - look */
    int16_t *need, *rise; /* [lanes] steps over the floor, over the row `near` back */
    int64_t newest;       /* frame number of the newest row */
    int64_t first;        /* first frame that the floor may use */
    int64_t quiet_until;  /* frames below this one are not tested: they hold a joint */
    unsigned floor_count; /* rows in sum */
    int doubt;            /* steps that floor lies too high because its rows are few */
};

/* Fills *bank (zeroed) for frames of `length` samples, a power of two >= 16,
 * `overlap` of them over each sample. False: no memory. */
bool bank_init(struct bank *bank, size_t length, int overlap, const struct bank_settings *settings);
void bank_done(struct bank *bank);

/* New thresholds; the floors stay. */
void bank_set(struct bank *bank, const struct bank_settings *settings);

/* Frame bank->newest + 1: samples [length], `offset` is taken off each. */
void bank_push(struct bank *bank, const float *samples, float offset);

/* The input (or sound after digital silence) begins at sample `start`: the
 * floor is learned anew.
 */
void bank_restart(struct bank *bank, int64_t start);

/* Samples are missing before sample `joint`: no frame across it is tested. */
void bank_mark_joint(struct bank *bank, int64_t joint);

/* Row of frame j; newest - BANK_ROWS < j <= newest. */
const int16_t *bank_row(const struct bank *bank, int64_t frame);

/* Does frame newest - look show a strike? *out_lane: the lane that stands out
 * most. */
bool bank_test(const struct bank *bank, size_t *out_lane);

/* The same for a strike while another rings, whose first frame clear of its own
 * blow is `since`: once more over a floor of that ring alone. */
bool bank_test_over_ring(const struct bank *bank, int64_t since);

/* The same after a strike that may have died, whose rows are still in the floor: over `calm`
 * [lanes], the floor before it, in bins that have come back to it. */
bool bank_test_over_calm(const struct bank *bank, const int16_t *calm, size_t *out_lane);

/* Centre frequency of a lane (bin or group), Hz. */
double bank_lane_hz(const struct bank *bank, size_t lane);

/* Power of a level; the unit is that of the transform. And the sum over the
 * bins that are heeded and stand over_db over noise [lanes] (NULL: all of
 * them). */
float bank_power(int level);
double bank_power_over(const struct bank *bank, const int16_t *row, const int16_t *noise,
                       double over_db);

/* Mean square of the signal that the floor stands for (full scale 1), and the
 * amplitude a tone needs in the median bin to trigger. */
double bank_noise_power(const struct bank *bank);
double bank_trigger_amplitude(const struct bank *bank);

/* Median level of the bins that are heeded; INT16_MAX when there is no memory.
 */
int bank_median_level(const struct bank *bank, const int16_t *row);

/* Mean power in a bin of white noise of that mean square. */
double bank_white_power(const struct bank *bank, double mean_square);

static inline int bank_steps(double db)
{
    return (int)(db * BANK_STEPS_PER_DB + (db < 0 ? -0.5 : 0.5));
}

#endif
