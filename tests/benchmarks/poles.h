/* Sums of complex exponentials: the linear algebra behind the bound and the oracle. Written apart
 * from src/fit on purpose: a benchmark that shared code with what it judges would agree with it.
 *
 * A signal is a sum of elements Re(c z^n), z = e^q, n = 0 ... frame_count-1. q is per sample:
 * q = -decay/rate + j 2 pi f/rate. */
#ifndef BENCHMARKS_POLES_H
#define BENCHMARKS_POLES_H

#include <complex.h>
#include <stdbool.h>
#include <stddef.h>

#define ELEMENTS_MAX 40
#define COLUMNS_MAX  (4 * ELEMENTS_MAX)

enum element_kind {
    ELEMENT_MODE,       /* unknown: amplitude, phase, decay, frequency */
    ELEMENT_TONE,       /* steady; unknown: amplitude, phase, frequency */
    ELEMENT_REAL,       /* a real exponential; unknown: amplitude, decay */
    ELEMENT_REAL_KNOWN, /* the same with its decay known */
};

struct element {
    enum element_kind kind;
    double complex q;
    double complex c;
};

/* One column of the Jacobian: Re(x n^power e^(q n)) of an element. */
struct column {
    size_t element;
    double complex x;
    int power;
};

/* out[m] = sum over n < count of n^m e^(q n), m = 0, 1, 2. By doubling the length: exact to
 * rounding for any q, where the closed form loses (1-z)^3. */
void poles_sums(double complex q, size_t count, double complex out[3]);

/* out[m] = sum over n of samples[n] n^m e^(q n), m = 0, 1. */
void poles_project(const double *samples, size_t count, double complex q, double complex out[2]);

/* Columns in the order amplitude (Re, Im), pole (Re, Im) of each element, what is unknown only.
 * Returns how many. first_column [element_count] may be NULL. */
size_t poles_columns(const struct element *elements, size_t element_count,
                     struct column columns[COLUMNS_MAX], size_t *first_column);

/* gram [column_count x column_count], J^T J over `count` samples; model [column_count], J^T m with
 * m the elements' own sum (may be NULL). Returns m^T m. */
double poles_gram(const struct element *elements, size_t element_count,
                  const struct column *columns, size_t column_count, size_t count, double *gram,
                  double *model);

/* Inverse of a symmetric positive definite matrix in place, scaled first. False: not definite. */
bool poles_invert(double *matrix, size_t n);

/* Solves (gram + damping diag(gram)) x = rhs; gram is left alone. n <= COLUMNS_MAX. */
bool poles_solve(const double *gram, const double *rhs, size_t n, double damping, double *out_x);

#endif
