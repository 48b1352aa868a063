/* Constants of a material or a circuit from its modes, each with its uncertainty by the law of
 * propagation (JCGM 100:2008 (GUM), equations 10 and 13) and its range of validity checked. SI
 * units. Pure, any thread. */
#ifndef WANE_CONSTANTS_H
#define WANE_CONSTANTS_H

#include "wane/error.h"

#include <stddef.h>

/* A value and its standard uncertainty (one sigma), same unit. u 0: taken as exact. */
struct measured {
    double value, u;
};

/* --- propagation --- */

#define PROPAGATE_INPUTS_MAX 16

/* The measurement equation: inputs x [n] to output. NAN: not defined there. */
typedef double propagate_model(const double *x, const void *user);

/* Output and its u by first-order propagation, partial derivatives by central differences.
 *   n 1 ... PROPAGATE_INPUTS_MAX
 *   correlation [n x n], symmetric, 1 on the diagonal; NULL: none
 *   out_shares [n]: each input's own part |dy/dx| u, same unit as the output; NULL: not wanted
 * Fails (ERROR_DATA) when the model is not defined at the inputs or a step beside them. */
bool propagate(propagate_model *model, const void *user, const struct measured *inputs, size_t n,
               const double *correlation, struct measured *out_result, double *out_shares,
               struct error *err);

/* --- bars and rods, free at both ends --- */

enum body_shape {
    BODY_NONE,
    BODY_BAR, /* rectangular: width across, thickness along the flexure */
    BODY_ROD, /* round: diameter */
    BODY_TANK /* a coil and a capacitor */
};

enum body_motion { MOTION_NONE, MOTION_FLEXURE, MOTION_TORSION, MOTION_LENGTHWISE };

struct body {
    enum body_shape shape;
    struct measured length_m, width_m, thickness_m, diameter_m, mass_kg;
    struct measured poisson; /* used where it cannot be measured; value 0: 0.29 +- 0.03 (common
                                metals, common practice, no source) */
    struct measured capacitance_f, inductance_h; /* tanks: one of them known, the other 0 */
    struct measured input_ohm;                   /* resistance across the capacitor; 0: none */
    struct measured input_f;                     /* capacitance across it; 0: none */
};

/* Which input makes how much of an uncertainty: the report's budget. */
#define BUDGET_LINES_MAX 12
struct budget {
    struct {
        const char *name; /* "frequency" "mass" "length" ... static text */
        double share;     /* same unit as the result */
    } lines[BUDGET_LINES_MAX];
    size_t count;
};

struct constant {
    struct measured result;
    struct budget budget;
    const char *source; /* of the formula; static text */
    char remark[256];   /* what to keep in mind; "" when nothing */
};

/* The three below fail (ERROR_DATA, one sentence) when a dimension that they need is missing, and
 * when the body is too stout for the formula.
 *
 * Young's modulus, Pa, from the first flexural mode: bar of rectangular section or round rod, free,
 * held at its nodes (0.224 of the length from each end). ASTM E1876: E = 0.9465 (m f^2 / b)(L^3 /
 * t^3) T1, and 1.6067 (L^3 / D^4) m f^2 T1' (the standard's rounded constants; the exact ones are
 * 90 and 10 ppm lower). Bars and rods down to L = 5 t. */
bool constant_youngs_modulus(const struct body *body, struct measured f_hz,
                             struct constant *out_constant, struct error *err);

/* Shear modulus, Pa, from the first torsional mode: bar, G = (4 L m f^2 / (b t)) R as in ASTM
 * E1876; rod, G = 16 m f^2 L / (pi D^2), exact. */
bool constant_shear_modulus(const struct body *body, struct measured f_hz,
                            struct constant *out_constant, struct error *err);

/* Young's modulus, Pa, from the first lengthwise mode: E = 4 m L f^2 / (A K), K = 1 - (pi mu D /
 * L)^2 / 8 (Rayleigh, Theory of Sound, section 157); a bar with D^2 = 2 (b^2 + t^2) / 3, from the
 * polar moment of its section. Slender ones only, D/L <= 0.2. */
bool constant_lengthwise_modulus(const struct body *body, struct measured f_hz,
                                 struct constant *out_constant, struct error *err);

/* Speed of sound in the slender rod, m/s, sqrt(E / rho), from the same mode: 2 L f / sqrt(K). */
bool constant_sound_speed(const struct body *body, struct measured f_hz,
                          struct constant *out_constant, struct error *err);

/* Poisson's ratio E / (2 G) - 1 from flexure and torsion together; E's own correction with it, by
 * iteration. out_youngs is E with that ratio instead of the assumed one. Remarks when the ratio is
 * outside 0 ... 0.5 (the material is not isotropic, or a mode is another than it is taken for). */
bool constant_poisson(const struct body *body, struct measured flexure_hz,
                      struct measured torsion_hz, struct constant *out_poisson,
                      struct constant *out_youngs, struct error *err);

/* --- tanks --- */

/* One mode of a tank: f and decay with their covariance (Hz/s), as in struct mode. */
struct ring {
    struct measured f_hz, decay_per_s;
    double f_decay_cov;
};

struct tank {
    struct constant other;    /* the inductance, H, when the capacitance is known, else it, F */
    struct constant loop_ohm; /* resistance of the loop: coil, leads, switch, capacitor's own */
    struct constant q;        /* of the tank without the input: sqrt(L / C) / R */
};

/* Series R, L, C with a resistance Rp and a capacitance Cp of the input across the capacitor; exact
 * at any damping below critical (derived; OpenStax University Physics 2, section 14.6, for the case
 * without input):  2 a = R/L + 1/(Rp C'),  (2 pi f)^2 + a^2 = (1 + R/Rp)/(L C'),  C' = C + Cp.
 * Fails (ERROR_DATA) without a known L or C, with both, or when the input alone would damp more. */
bool constant_tank(const struct body *body, const struct ring *ring, struct tank *out_tank,
                   struct error *err);

struct tank_parts {
    struct constant inductance_h;
    struct constant coil_ohm; /* and leads, and switch: what does not change with the capacitor */
    struct constant loss_tangent; /* of the capacitors, taken as the same for both */
};

/* Tells the coil's resistance from the capacitors' own by two strikes with two known capacitors of
 * the same kind: loop resistance R_i = R_coil + tan(delta) / (2 pi f_i C_i) (series resistance of a
 * capacitor with loss tangent tan(delta)). body.capacitance_f goes with `first`. Fails (ERROR_DATA)
 * when the two are too much alike to tell. */
bool constant_tank_parts(const struct body *body, const struct ring *first,
                         struct measured second_capacitance_f, const struct ring *second,
                         struct tank_parts *out_parts, struct error *err);

/* --- other measures of the same decay; exact, from f and decay --- */

struct decay_measures {
    struct measured log_decrement; /* a / f, per cycle */
    struct measured loss_factor;   /* 1 / Q = 2 zeta */
    struct measured t60_s;         /* ln(1000) / a */
    struct measured half_width_hz; /* half-power width a / pi (small damping) */
    struct measured tau_s;         /* 1 / a */
    struct measured db_per_s;      /* 20 log10(e) a */
};

void constant_decay_measures(const struct ring *ring, struct decay_measures *out_measures);

#endif
