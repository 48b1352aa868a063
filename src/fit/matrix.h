/* Small symmetric positive definite systems. Own code, not LAPACK: up to 160 unknowns, no
 * allocation, no threads, and the same bits whatever BLAS and processor the machine has. */
#ifndef WANE_FIT_MATRIX_H
#define WANE_FIT_MATRIX_H

#include <stdbool.h>
#include <stddef.h>

/* Factors a [n x n, row-major, stride n], symmetric, in place into its Cholesky factor L (lower).
 * Rows and columns are scaled by `scale` [n] = 1/sqrt(diagonal), written here, so that seconds and
 * radians do not matter; `damping` is added to the scaled diagonal (Levenberg-Marquardt: an array
 * [n], or NULL). false when the matrix is not positive definite. */
bool matrix_factor(double *a, size_t n, double *scale, const double *damping);

/* Solves with what matrix_factor left; b [n] becomes the solution. */
void matrix_solve(const double *l, size_t n, const double *scale, double *b);

/* Column `column` of the inverse. out [n]. */
void matrix_inverse_column(const double *l, size_t n, const double *scale, size_t column,
                           double *out);

#endif
