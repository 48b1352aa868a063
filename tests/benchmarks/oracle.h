/* Least squares that is told the truth: it starts at the true poles, knows how many there are and
 * the first sample at which only the ring is left. What it gets wrong is the noise's doing alone.
 */
#ifndef BENCHMARKS_ORACLE_H
#define BENCHMARKS_ORACLE_H

#include "poles.h"

/* elements: in the truth, out the solution. samples [frame_count] from the free ring's first
 * sample. Returns the iterations used, 0 when it could not be solved. */
unsigned oracle_solve(const double *samples, size_t frame_count, struct element *elements,
                      size_t element_count);

#endif
