#include "input/sim_parts.h"

#include "input/sim_random.h"
#include "wane/strike.h"

#include <math.h>
#include <string.h>

static const char *const part_names[] = {"goblet", "rod", "panel", "tank", "all", "mode"};

const char *sim_part_name(enum sim_part part)
{
    return part_names[part];
}

bool sim_part_from_name(const char *name, enum sim_part *out_part)
{
    for (int part = SIM_GOBLET; part <= (int)SIM_ALL; part++) {
        if (strcmp(name, part_names[part]) == 0) {
            *out_part = (enum sim_part)part;
            return true;
        }
    }
    return false;
}

/* Invented: a thin bowl whose wall is thinner on one side. */
static const struct sim_part_data goblet = {
    .modes = {{641.3, 1.58, 0, 2, false},
              {643.0, 1.71, 0, 2, true},
              {1502.6, 3.2, -6, 3, false},
              {1506.9, 3.5, -6, 3, true},
              {2744.1, 6.3, -13, 0, false},
              {4391.5, 11.8, -19, 0, false}},
    .mode_count = 6,
    .contact_s = 0.35e-3,
    .blow_db = -14,
    .angle_rad = 0.3,
};

/* Invented: 400 mm x 300 mm, 3 mm thick, on four corks. */
static const struct sim_part_data panel = {
    .modes = {{92.4, 6.9, -4, 0, false},
              {171.8, 9.1, 0, 0, false},
              {214.0, 11.4, -3, 0, false},
              {301.5, 14.2, -7, 0, false},
              {388.2, 19.0, -5, 0, false},
              {517.6, 24.5, -11, 0, false}},
    .mode_count = 6,
    .contact_s = 1.6e-3,
    .blow_db = -10,
};

/* A thin free bar in bending: f_i = b_i^2 / (2 pi L^2) sqrt(E I / (rho A)), b_i the roots of
 * cos b cosh b = 1, sqrt(I / A) = d/4 for a round one (Rayleigh, Theory of Sound, ch. VIII).
 * E and rho of common brass: handbook values from memory. Decay rates invented. */
static void make_rod(struct sim_part_data *out)
{
    static const double roots[] = {4.730041, 7.853205, 10.995608, 14.137165};
    static const double decays_per_s[] = {1.35, 2.5, 4.9, 8.8};
    static const double levels_db[] = {0, -2, -6, -12};
    const double length_m = 0.3;
    const double diameter_m = 0.01;
    double speed = sqrt(101e9 / 8500.0); /* of sound along the rod, m/s */
    for (size_t i = 0; i < 4; i++) {
        double f_hz =
            roots[i] * roots[i] / (2 * WANE_PI * length_m * length_m) * speed * diameter_m / 4;
        out->modes[i] = (struct sim_part_mode){f_hz, decays_per_s[i], levels_db[i], 0, false};
    }
    out->mode_count = 4;
    out->contact_s = 0.15e-3;
    out->blow_db = -16;
}

/* A series resonant loop: alpha = R / 2L, omega^2 = 1 / LC - alpha^2 (any circuit textbook). */
static void make_tank(double l_spread, double c_spread, struct sim_part_data *out)
{
    double l_h = 22e-3 * (1 + l_spread);
    double c_f = 100e-9 * (1 + c_spread);
    double r_ohm = 18;
    double decay_per_s = r_ohm / (2 * l_h);
    double omega = sqrt(1 / (l_h * c_f) - decay_per_s * decay_per_s);
    out->modes[0] = (struct sim_part_mode){omega / (2 * WANE_PI), decay_per_s, 0, 0, false};
    out->mode_count = 1;
}

void sim_part_make(enum sim_part part, uint64_t seed, struct sim_part_data *out_data)
{
    struct sim_random random = {.key = sim_key(seed, 'P', (uint64_t)part)};
    double size = 0.01 * sim_normal(&random);
    double c_spread = 0.01 * sim_normal(&random);
    *out_data = part == SIM_GOBLET ? goblet : part == SIM_PANEL ? panel : (struct sim_part_data){0};
    if (part == SIM_ROD)
        make_rod(out_data);
    if (part == SIM_TANK) {
        make_tank(size, c_spread, out_data);
        return;
    }
    for (size_t i = 0; i < out_data->mode_count; i++) {
        /* One factor for all modes: a piece that is larger is lower as a whole, doublets stay. */
        out_data->modes[i].f_hz *= 1 + 0.3 * size;
        out_data->modes[i].decay_per_s *= 1 + 0.03 * sim_normal(&random);
    }
}
