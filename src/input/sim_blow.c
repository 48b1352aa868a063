#include "input/sim_blow.h"

#include "wane/strike.h"

#include <math.h>

double complex sim_mode_pole(double f_hz, double decay_per_s)
{
    return -decay_per_s + 2 * WANE_PI * f_hz * SIM_I;
}

double complex sim_blow_during(double complex s, double contact_s, double t_s)
{
    double complex turn = 2 * WANE_PI / contact_s * SIM_I;
    double complex ring = cexp(s * t_s);
    double complex steady = (ring - 1) / s;
    double complex ahead = (ring - cexp(turn * t_s)) / (s - turn);
    double complex behind = (ring - cexp(-turn * t_s)) / (s + turn);
    return (steady - (ahead + behind) / 2) / contact_s;
}

double complex sim_blow_total(double complex s, double contact_s)
{
    if (contact_s <= 0)
        return 1;
    double turn = 2 * WANE_PI / contact_s;
    return (1 - cexp(-s * contact_s)) / contact_s * turn * turn / (s * (s * s + turn * turn));
}

double complex sim_coupling_gain(double complex s, double corner_hz, double rate_hz)
{
    if (corner_hz <= 0)
        return 1;
    double p = exp(-2 * WANE_PI * corner_hz / rate_hz);
    double complex z = cexp(s / rate_hz);
    return (1 + p) / 2 * (z - 1) / (z - p);
}
