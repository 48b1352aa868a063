/* Cramer-Rao bound of damped sinusoids in white noise, from the full Fisher matrix of all that is
 * unknown (S. Kay, Fundamentals of Statistical Signal Processing: Estimation Theory, 1993,
 * sec. 3.9: J^T J / sd^2 for a mean in white Gaussian noise). */
#ifndef BENCHMARKS_BOUND_H
#define BENCHMARKS_BOUND_H

#include "poles.h"

struct bound {
    double f_sd_hz, decay_sd_per_s;
    double amplitude_sd, phase_sd_rad; /* of the element's |c| and arg c, at the first sample */
};

/* out [element_count]; fields that an element does not have are 0. noise_sd of a sample. False when
 * the matrix is singular to working accuracy: nothing is knowable. */
bool bound_of(const struct element *elements, size_t element_count, size_t frame_count,
              double rate_hz, double noise_sd, struct bound *out);

#endif
