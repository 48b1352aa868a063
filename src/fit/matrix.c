#include "fit/matrix.h"

#include <math.h>

bool matrix_factor(double *a, size_t n, double *scale, const double *damping)
{
    for (size_t i = 0; i < n; i++) {
        if (!(a[i * n + i] > 0))
            return false;
        scale[i] = 1 / sqrt(a[i * n + i]);
    }
    for (size_t i = 0; i < n; i++) {
        double *row = a + i * n;
        for (size_t j = 0; j <= i; j++) {
            const double *other = a + j * n;
            double sum =
                i == j ? 1 + (damping != NULL ? damping[i] : 0) : row[j] * scale[i] * scale[j];
            for (size_t k = 0; k < j; k++)
                sum -= row[k] * other[k];
            if (i != j)
                row[j] = sum / other[j];
            else if (sum > 1e-13)
                row[i] = sqrt(sum);
            else
                return false;
        }
    }
    return true;
}

void matrix_solve(const double *l, size_t n, const double *scale, double *b)
{
    for (size_t i = 0; i < n; i++) {
        double sum = b[i] * scale[i];
        for (size_t k = 0; k < i; k++)
            sum -= l[i * n + k] * b[k];
        b[i] = sum / l[i * n + i];
    }
    for (size_t i = n; i-- > 0;) {
        double sum = b[i];
        for (size_t k = i + 1; k < n; k++)
            sum -= l[k * n + i] * b[k];
        b[i] = sum / l[i * n + i];
    }
    for (size_t i = 0; i < n; i++)
        b[i] *= scale[i];
}

void matrix_inverse_column(const double *l, size_t n, const double *scale, size_t column,
                           double *out)
{
    for (size_t i = 0; i < n; i++)
        out[i] = i == column ? 1 : 0;
    matrix_solve(l, n, scale, out);
}
