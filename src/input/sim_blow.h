/* The motion of one mode under one blow, in closed form. A mode is written as a turning arrow z,
 * z' = s z + F(t), s = -decay_per_s + 2 pi i f_hz; what is heard of it is the real part.
 * F is a raised cosine of unit area, F(t) = (1 - cos(2 pi t / contact)) / contact. */
#ifndef SIM_BLOW_H
#define SIM_BLOW_H

#include <complex.h>

/* I without the float in its type. */
#define SIM_I ((double complex)I)

double complex sim_mode_pole(double f_hz, double decay_per_s);

/* z(t) for 0 <= t <= contact_s, z(0) = 0, contact_s > 0. */
double complex sim_blow_during(double complex s, double contact_s, double t_s);

/* What is left of the blow, carried back to its beginning: z(t) = this * exp(s t) for
 * t >= contact_s. 1 for contact_s = 0 (a sudden release). */
double complex sim_blow_total(double complex s, double contact_s);

/* Gain and phase that a mode sees in a first-order high-pass of corner_hz, sampled at rate_hz:
 * H(z) = (1 + p)/2 (z - 1)/(z - p), p = exp(-2 pi corner / rate), at z = exp(s / rate). The
 * filter's own pole rings beside it and is not part of this. 1 for corner_hz = 0. */
double complex sim_coupling_gain(double complex s, double corner_hz, double rate_hz);

#endif
