#include "fit/model.h"

#include <math.h>

size_t pole_length(const struct pole *pole, size_t frame_count)
{
    double a = -creal(pole->p);
    double length = 16.0 / (a > 1e-12 ? a : 1e-12);
    return length < (double)frame_count ? (size_t)length + 1 : frame_count;
}

/* S(m + k) = S(m) + exp(q m) sum over n < k of (n + m)^i exp(q n): every term is added once, so
 * nothing cancels whatever q is. */
static void sums_by_doubling(double complex q, size_t count, double complex s[3])
{
    double complex part[3] = {1, 0, 0}; /* sums over 2^i samples */
    double complex step = cexp(q);      /* exp(q 2^i) */
    double size = 1, done = 0;
    s[0] = s[1] = s[2] = 0;
    double complex shift = 1; /* exp(q done) */
    for (; count > 0; count >>= 1) {
        if (count & 1) {
            s[0] += shift * part[0];
            s[1] += shift * (part[1] + done * part[0]);
            s[2] += shift * (part[2] + 2 * done * part[1] + done * done * part[0]);
            shift *= step;
            done += size;
        }
        part[2] += step * (part[2] + 2 * size * part[1] + size * size * part[0]);
        part[1] += step * (part[1] + size * part[0]);
        part[0] += step * part[0];
        step *= step;
        size *= 2;
    }
}

void geometric_sums(double complex q, size_t count, double complex s[3])
{
    double n = (double)count;
    double complex z = cexp(q);
    double complex d = 1 - z;
    /* The closed forms lose about (1 / (|d| n))^3 of their digits. */
    if (cabs(d) * n < 30) {
        sums_by_doubling(q, count, s);
        return;
    }
    double complex e = creal(q) * n < -700 ? 0 : cexp(q * n);
    double complex r = 1 / d;
    s[0] = (1 - e) * r;
    /* d/dq of s[0], then of s[1]; dz/dq = z. */
    s[1] = (z * s[0] - n * e) * r;
    s[2] = (2 * z * s[1] + z * s[0] - n * n * e) * r;
}
