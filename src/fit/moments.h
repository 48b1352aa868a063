/* Products of the samples with exp(p n) and n exp(p n) for any p near a reference p0, from one
 * pass.
 *
 * The segment is cut into blocks of `block` samples. Of each, four moments about its centre c are
 * kept: m[k] = sum over i of y[i] ((i - c) / block)^k exp(p0 (i - c)). For p = p0 + d,
 *   sum y exp(p n) = sum over blocks exp(p centre) (m0 + x m1 + x^2/2 m2 + x^3/6 m3), x = d block,
 * with a relative error of (|x|/2)^4 / 24 (Taylor). */
#ifndef WANE_FIT_MOMENTS_H
#define WANE_FIT_MOMENTS_H

#include "fit/model.h"

#include <complex.h>
#include <stddef.h>

#define MOMENT_ORDERS    4
#define MOMENT_BLOCK_MIN 16
#define MOMENT_BLOCK_MAX 2048

struct moments {
    double complex p0;
    size_t block, block_count, length;
    double complex (*m)[MOMENT_ORDERS]; /* [block_count] borrowed from the workspace */
};

/* Floats that moments_gather needs as scratch, aligned to 32 bytes. */
#define MOMENT_TABLE_FLOATS (2 * MOMENT_ORDERS * MOMENT_BLOCK_MAX)

/* Block size for a term of `length` samples: about a hundred blocks, a power of two in the bounds.
 */
size_t moments_block_for(size_t length);

/* Fills `out` from y [length]. out->m has room for length / block + 1 blocks. Pure. */
void moments_gather(const float *y, size_t length, double complex p0, size_t block, float *table,
                    struct moments *out);

/* out_s[0] = sum y exp(p n), out_s[1] = sum n y exp(p n), n = 0 ... length - 1. */
void moments_evaluate(const struct moments *moments, double complex p, double complex out_s[2]);

/* |x|/2 of the Taylor series at p: below 0.02 its error is under 1e-8. */
double moments_strain(const struct moments *moments, double complex p);

/* y[n] -= Re(c exp(p n)), n = 0 ... length - 1, in blocks. table as above. */
void moments_subtract(float *y, size_t length, double complex p, double complex c, float *table);

#endif
