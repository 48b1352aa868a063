/* Joint least squares of all poles on one segment: Gauss-Newton with Levenberg-Marquardt damping,
 * amplitudes eliminated after every step (variable projection; Golub and Pereyra 1973, the step as
 * in Kaufman 1975). Pure, no allocation. */
#ifndef WANE_FIT_REFINE_H
#define WANE_FIT_REFINE_H

#include "fit/model.h"
#include "fit/moments.h"

#include <stdbool.h>

/* One real parameter: it moves the model by Re(d n^order exp(p n)) per unit. */
struct parameter {
    unsigned pole, order;
    enum { PARAMETER_RE, PARAMETER_IM, PARAMETER_A, PARAMETER_W } what;
    double complex d;
};

struct segment {
    const float *y; /* [frame_count] */
    size_t frame_count;
    struct pole poles[POLES_MAX];
    unsigned pole_count;
    size_t work,
        work_max; /* cost so far, in units of about half a microsecond, and its bound (0: none) */
    double negligible; /* gain of energy that means nothing beside the noise: where refining ends */
    double explained;  /* energy of the model's projection; filled by refine_* */

    /* Scratch, lent by the workspace. */
    struct moments moments[POLES_MAX];
    bool has_moments[POLES_MAX];
    double complex *moment_pool; /* [POLES_MAX x pool_blocks x MOMENT_ORDERS] */
    size_t pool_blocks;
    double complex *spare_moments;     /* [pool_blocks x MOMENT_ORDERS], the doublet test's */
    float *table;                      /* [MOMENT_TABLE_FLOATS] */
    double *matrix;                    /* [PARAMETERS_MAX x PARAMETERS_MAX] */
    double complex (*pair_sums)[2][3]; /* [POLES_MAX x POLES_MAX][conjugate or not][n^m] */
};

/* Is less than `share` of the allowance spent? An allowance of 0 has no bound. */
bool segment_may_work(const struct segment *segment, double share);

/* Starts a segment with no poles; the scratch pointers stay. */
void segment_begin(struct segment *segment, const float *y, size_t frame_count);

/* Adds a pole, its amplitude not yet solved. false when there is no room. */
bool segment_add_pole(struct segment *segment, enum pole_kind kind, double complex p);
void segment_remove_pole(struct segment *segment, unsigned index);

/* Puts back poles [count] that a trial has changed; their moments are gathered anew when needed. */
void segment_restore(struct segment *segment, const struct pole *poles, unsigned count);

/* Solves all amplitudes for the poles as they stand. false when they are not independent. */
bool refine_amplitudes(struct segment *segment);

/* Refines all poles; at most `steps_max` steps. Gathers moments anew where a pole has moved far.
 * false when the poles are not independent (then they stay as they came). */
bool refine_poles(struct segment *segment, unsigned steps_max);

/* Covariance of the parameters for white noise of variance 1 a sample: the inverse of the Fisher
 * matrix of all parameters. Lists the parameters in out_parameters [PARAMETERS_MAX] and leaves the
 * factor in segment->matrix, its scales in out_scale [PARAMETERS_MAX]; returns their count, 0 when
 * singular. Use matrix_inverse_column. */
unsigned refine_information(struct segment *segment, struct parameter *out_parameters,
                            double *out_scale);

#endif
