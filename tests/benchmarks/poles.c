#include "poles.h"

#include <lapacke.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

void poles_sums(double complex q, size_t count, double complex out[3])
{
    double complex s0 = 0.0, s1 = 0.0, s2 = 0.0;
    double length = 0.0;
    unsigned bit = 0;
    while (count >> bit)
        bit++;
    while (bit-- > 0) {
        double complex shift = cexp(q * length);
        s2 += shift * (s2 + 2.0 * length * s1 + length * length * s0);
        s1 += shift * (s1 + length * s0);
        s0 += shift * s0;
        length *= 2.0;
        if ((count >> bit) & 1u) {
            double complex last = cexp(q * length);
            s0 += last;
            s1 += length * last;
            s2 += length * length * last;
            length += 1.0;
        }
    }
    out[0] = s0;
    out[1] = s1;
    out[2] = s2;
}

void poles_project(const double *samples, size_t count, double complex q, double complex out[2])
{
    enum { BLOCK = 256 };
    double table_re[BLOCK], table_im[BLOCK];
    for (size_t j = 0; j < BLOCK; j++) {
        double complex z = cexp(q * (double)j);
        table_re[j] = creal(z);
        table_im[j] = cimag(z);
    }
    out[0] = out[1] = 0.0;
    for (size_t n = 0; n < count; n += BLOCK) {
        size_t length = count - n < BLOCK ? count - n : BLOCK;
        double re0 = 0.0, im0 = 0.0, re1 = 0.0, im1 = 0.0;
        for (size_t j = 0; j < length; j++) {
            double re = samples[n + j] * table_re[j], im = samples[n + j] * table_im[j];
            re0 += re;
            im0 += im;
            re1 += (double)j * re;
            im1 += (double)j * im;
        }
        double complex start = cexp(q * (double)n);
        double complex p0 = CMPLX(re0, im0), p1 = CMPLX(re1, im1);
        out[0] += start * p0;
        out[1] += start * (p1 + (double)n * p0);
        if (cabs(start) < 1e-60)
            break;
    }
}

size_t poles_columns(const struct element *elements, size_t element_count,
                     struct column columns[COLUMNS_MAX], size_t *first_column)
{
    size_t n = 0;
    for (size_t e = 0; e < element_count; e++) {
        double complex c = elements[e].c;
        if (first_column)
            first_column[e] = n;
        columns[n++] = (struct column){e, 1.0, 0};
        switch (elements[e].kind) {
        case ELEMENT_MODE:
            columns[n++] = (struct column){e, CMPLX(0.0, 1.0), 0};
            columns[n++] = (struct column){e, c, 1};
            columns[n++] = (struct column){e, CMPLX(0.0, 1.0) * c, 1};
            break;
        case ELEMENT_TONE:
            columns[n++] = (struct column){e, CMPLX(0.0, 1.0), 0};
            columns[n++] = (struct column){e, CMPLX(0.0, 1.0) * c, 1};
            break;
        case ELEMENT_REAL:
            columns[n++] = (struct column){e, creal(c), 1};
            break;
        case ELEMENT_REAL_KNOWN:
            break;
        }
    }
    return n;
}

struct pair_sums {
    double complex plain[3], conjugate[3]; /* of q + q' and of q + conj(q') */
};

/* sum over n of Re(x n^m z^n) Re(x' n^m' z'^n) */
static double inner(const struct pair_sums *pair, double complex x, int m, double complex y, int k)
{
    return 0.5 * creal(x * y * pair->plain[m + k] + x * conj(y) * pair->conjugate[m + k]);
}

double poles_gram(const struct element *elements, size_t element_count,
                  const struct column *columns, size_t column_count, size_t count, double *gram,
                  double *model)
{
    double energy = 0.0;
    size_t first[ELEMENTS_MAX + 1];
    size_t next = 0;
    for (size_t e = 0; e < element_count; e++) {
        first[e] = next;
        while (next < column_count && columns[next].element == e)
            next++;
    }
    first[element_count] = column_count;
    if (model)
        memset(model, 0, column_count * sizeof *model);
    for (size_t e = 0; e < element_count; e++) {
        for (size_t g = 0; g < element_count; g++) {
            struct pair_sums pair;
            poles_sums(elements[e].q + elements[g].q, count, pair.plain);
            poles_sums(elements[e].q + conj(elements[g].q), count, pair.conjugate);
            energy += inner(&pair, elements[e].c, 0, elements[g].c, 0);
            for (size_t i = first[e]; i < first[e + 1]; i++) {
                if (model)
                    model[i] += inner(&pair, columns[i].x, columns[i].power, elements[g].c, 0);
                for (size_t k = first[g]; k < first[g + 1]; k++)
                    gram[i * column_count + k] = inner(&pair, columns[i].x, columns[i].power,
                                                       columns[k].x, columns[k].power);
            }
        }
    }
    return energy;
}

static bool scale_of(const double *matrix, size_t n, double *scale)
{
    for (size_t i = 0; i < n; i++) {
        double d = matrix[i * n + i];
        if (!(d > 0.0) || !isfinite(d))
            return false;
        scale[i] = 1.0 / sqrt(d);
    }
    return true;
}

bool poles_invert(double *matrix, size_t n)
{
    double scale[COLUMNS_MAX];
    if (!scale_of(matrix, n, scale))
        return false;
    for (size_t i = 0; i < n; i++)
        for (size_t k = 0; k < n; k++)
            matrix[i * n + k] *= scale[i] * scale[k];
    lapack_int order = (lapack_int)n;
    if (LAPACKE_dpotrf(LAPACK_COL_MAJOR, 'L', order, matrix, order) != 0 ||
        LAPACKE_dpotri(LAPACK_COL_MAJOR, 'L', order, matrix, order) != 0)
        return false;
    for (size_t i = 0; i < n; i++)
        for (size_t k = 0; k <= i; k++) {
            double value = matrix[k * n + i] * scale[i] * scale[k];
            matrix[k * n + i] = matrix[i * n + k] = value;
        }
    return true;
}

bool poles_solve(const double *gram, const double *rhs, size_t n, double damping, double *out_x)
{
    double scale[COLUMNS_MAX];
    if (!scale_of(gram, n, scale))
        return false;
    double *work = malloc(n * n * sizeof *work);
    if (!work)
        return false;
    for (size_t i = 0; i < n; i++) {
        out_x[i] = rhs[i] * scale[i];
        for (size_t k = 0; k < n; k++)
            work[i * n + k] = gram[i * n + k] * scale[i] * scale[k];
        work[i * n + i] += damping;
    }
    lapack_int order = (lapack_int)n;
    bool solved = LAPACKE_dposv(LAPACK_COL_MAJOR, 'L', order, 1, work, order, out_x, order) == 0;
    free(work);
    for (size_t i = 0; i < n; i++)
        out_x[i] *= scale[i];
    return solved;
}
