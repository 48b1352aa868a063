/* The model of a ring and its least-squares algebra, private to fit/.
 *
 * y[n] = sum over poles of Re(c_k exp(p_k n)), n counted from the segment's first sample, p per
 * sample. p = -a + j w; a = decay_per_s / rate, w = 2 pi f_hz / rate.
 *
 * All products of model terms with one another are geometric sums in closed form; all products with
 * data come from block moments (moments.c). So an iteration touches some hundred blocks, not the
 * samples. Derivation: DEVELOPERS.md, "The fit". */
#ifndef WANE_FIT_MODEL_H
#define WANE_FIT_MODEL_H

#include <complex.h>
#include <stdbool.h>
#include <stddef.h>

/* The imaginary unit as a double: <complex.h>'s I is a float. */
#define J CMPLX(0.0, 1.0)

#define POLES_MAX      40
#define PARAMETERS_MAX (4 * POLES_MAX)

enum pole_kind {
    POLE_RING, /* c, a and w free */
    POLE_TONE, /* steady: a = 0; c and w free */
    POLE_REAL, /* the input's AC coupling, an offset: w = 0, c real; c and a free */
};

struct pole {
    enum pole_kind kind;
    bool is_carried;     /* an earlier strike left this mode ringing: `tail` of it */
    bool is_half;        /* of a doublet: not split again */
    bool is_fixed;       /* p is known, only c is free */
    double complex p;    /* per sample */
    double complex c;    /* at the segment's first sample */
    double complex tail; /* what the earlier strike predicts for c */
};

/* Length, in samples, over which a pole's term is kept: exp(-16) = 1e-7 beyond is nothing beside
 * the float samples' own grain, and short terms make short passes. */
size_t pole_length(const struct pole *pole, size_t frame_count);

/* s[m] = sum over n = 0 ... count-1 of n^m exp(q n), m = 0, 1, 2. Closed form where it is well
 * conditioned, else doubling. */
void geometric_sums(double complex q, size_t count, double complex s[3]);

#endif
