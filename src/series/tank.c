/* Coil-and-capacitor tanks, and the plain measures of a decay. Derivation (struct comments in
 * wane/constants.h): Kirchhoff's laws for R, L in series with C' || Rp give
 *   s^2 + (R/L + 1/(Rp C')) s + (1 + R/Rp)/(L C') = 0
 * whose roots are -a +- j w: 2 a and w^2 + a^2 are its coefficients. */
#include "wane/constants.h"

#include "series/formula.h"
#include "wane/strike.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char derived[] = "series RLC, exact (derived)";

/* Inputs of all models: f, decay, the known part, Rp (0: none), Cp. */
enum { X_F, X_DECAY, X_KNOWN, X_INPUT_OHM, X_INPUT_F, X_COUNT };

struct circuit {
    double l, c, r; /* c without the input's */
};

static double natural_square(const double *x)
{
    double w = 2 * WANE_PI * x[X_F];
    return w * w + x[X_DECAY] * x[X_DECAY];
}

static double leak(const double *x)
{
    return x[X_INPUT_OHM] > 0 ? 1 / x[X_INPUT_OHM] : 0;
}

static struct circuit with_known_c(const double *x)
{
    double c = x[X_KNOWN] + x[X_INPUT_F];
    double series_rate = 2 * x[X_DECAY] - leak(x) / c; /* R / L */
    double l = 1 / (natural_square(x) * c - series_rate * leak(x));
    return (struct circuit){l, x[X_KNOWN], l * series_rate};
}

/* w0^2 L C^2 - (1 + 2 a L / Rp) C + L / Rp^2 = 0; the larger root is the one that exists without
 * Rp. */
static struct circuit with_known_l(const double *x)
{
    double l = x[X_KNOWN];
    double square = natural_square(x) * l;
    double linear = 1 + 2 * x[X_DECAY] * l * leak(x);
    double rest = l * leak(x) * leak(x);
    double c = (linear + sqrt(linear * linear - 4 * square * rest)) / (2 * square);
    double series_rate = 2 * x[X_DECAY] - leak(x) / c;
    return (struct circuit){l, c - x[X_INPUT_F], l * series_rate};
}

static struct circuit solve(const double *x, const void *user)
{
    const struct body *body = user;
    return body->capacitance_f.value > 0 ? with_known_c(x) : with_known_l(x);
}

static double other_part(const double *x, const void *user)
{
    const struct body *body = user;
    struct circuit circuit = solve(x, user);
    return body->capacitance_f.value > 0 ? circuit.l : circuit.c;
}

static double loop_resistance(const double *x, const void *user)
{
    return solve(x, user).r;
}

static double tank_q(const double *x, const void *user)
{
    struct circuit circuit = solve(x, user);
    return sqrt(circuit.l / circuit.c) / circuit.r;
}

static double correlation_of(const struct ring *ring)
{
    double product = ring->f_hz.u * ring->decay_per_s.u;
    if (!(product > 0) || !isfinite(ring->f_decay_cov))
        return 0;
    return fmax(-1, fmin(1, ring->f_decay_cov / product));
}

static bool is_ring(const struct ring *ring, struct error *err)
{
    if (ring->f_hz.value > 0 && ring->decay_per_s.value > 0 && isfinite(ring->f_hz.value) &&
        isfinite(ring->decay_per_s.value))
        return true;
    return error_set(err, ERROR_DATA, "a tank's constants need a mode with f and decay rate");
}

bool constant_tank(const struct body *body, const struct ring *ring, struct tank *out_tank,
                   struct error *err)
{
    bool knows_c = body->capacitance_f.value > 0, knows_l = body->inductance_h.value > 0;
    if (knows_c == knows_l)
        return error_set(err, ERROR_DATA,
                         knows_c ? "capacitance and inductance are both given: the ring-down tells "
                                   "one from the other, leave one out"
                                 : "give the capacitance or the inductance in the part sheet: the "
                                   "ring-down tells the other");
    if (!is_ring(ring, err))
        return false;
    struct formula_input inputs[X_COUNT] = {
        [X_F] = {"frequency", ring->f_hz},
        [X_DECAY] = {"decay rate", ring->decay_per_s},
        [X_KNOWN] = {knows_c ? "capacitance" : "inductance",
                     knows_c ? body->capacitance_f : body->inductance_h},
        [X_INPUT_OHM] = {"input's resistance", body->input_ohm},
        [X_INPUT_F] = {"input's capacitance", body->input_f},
    };
    double correlation[X_COUNT * X_COUNT] = {0};
    correlation[X_F * X_COUNT + X_DECAY] = correlation_of(ring);
    correlation[X_DECAY * X_COUNT + X_F] = correlation_of(ring);
    struct formula formula = {other_part, inputs, X_COUNT, correlation, body, derived};
    struct tank tank;
    if (!formula_apply(&formula, &tank.other, err))
        return false;
    formula.model = loop_resistance;
    if (!formula_apply(&formula, &tank.loop_ohm, err))
        return false;
    if (!(tank.loop_ohm.result.value > 0) || !(tank.other.result.value > 0))
        return error_set(err, ERROR_DATA,
                         "the input's resistance alone would damp this tank more than was "
                         "measured: check input_ohm and the known part in the part sheet");
    formula.model = tank_q;
    if (!formula_apply(&formula, &tank.q, err))
        return false;
    *out_tank = tank;
    return true;
}

/* Two strikes: f, decay, C of each, then Rp and Cp. */
enum { Y_F1, Y_DECAY1, Y_C1, Y_F2, Y_DECAY2, Y_C2, Y_INPUT_OHM, Y_INPUT_F, Y_COUNT };

struct two_strikes {
    struct circuit circuit[2];
    double esr_share[2]; /* 1 / (2 pi f C): the capacitor's series resistance over tan(delta) */
};

static struct two_strikes split(const double *y)
{
    struct two_strikes both;
    for (size_t i = 0; i < 2; i++) {
        const double *own = y + 3 * i;
        double x[X_COUNT] = {own[0], own[1], own[2], y[Y_INPUT_OHM], y[Y_INPUT_F]};
        both.circuit[i] = with_known_c(x);
        both.esr_share[i] = 1 / (2 * WANE_PI * own[0] * own[2]);
    }
    return both;
}

static double loss_tangent(const double *y, const void *user)
{
    (void)user;
    struct two_strikes both = split(y);
    return (both.circuit[0].r - both.circuit[1].r) / (both.esr_share[0] - both.esr_share[1]);
}

static double coil_resistance(const double *y, const void *user)
{
    struct two_strikes both = split(y);
    return both.circuit[0].r - loss_tangent(y, user) * both.esr_share[0];
}

static double mean_inductance(const double *y, const void *user)
{
    (void)user;
    struct two_strikes both = split(y);
    return (both.circuit[0].l + both.circuit[1].l) / 2;
}

bool constant_tank_parts(const struct body *body, const struct ring *first,
                         struct measured second_capacitance_f, const struct ring *second,
                         struct tank_parts *out_parts, struct error *err)
{
    if (!(body->capacitance_f.value > 0) || !(second_capacitance_f.value > 0))
        return error_set(err, ERROR_DATA, "both capacitances must be known");
    if (!is_ring(first, err) || !is_ring(second, err))
        return false;
    if (fabs(log(body->capacitance_f.value / second_capacitance_f.value)) < 0.2)
        return error_set(err, ERROR_DATA,
                         "the two capacitors are too much alike: take one at least a quarter "
                         "larger than the other, better ten times");
    struct formula_input inputs[Y_COUNT] = {
        [Y_F1] = {"first frequency", first->f_hz},
        [Y_DECAY1] = {"first decay rate", first->decay_per_s},
        [Y_C1] = {"first capacitance", body->capacitance_f},
        [Y_F2] = {"second frequency", second->f_hz},
        [Y_DECAY2] = {"second decay rate", second->decay_per_s},
        [Y_C2] = {"second capacitance", second_capacitance_f},
        [Y_INPUT_OHM] = {"input's resistance", body->input_ohm},
        [Y_INPUT_F] = {"input's capacitance", body->input_f},
    };
    double correlation[Y_COUNT * Y_COUNT] = {0};
    correlation[Y_F1 * Y_COUNT + Y_DECAY1] = correlation_of(first);
    correlation[Y_DECAY1 * Y_COUNT + Y_F1] = correlation_of(first);
    correlation[Y_F2 * Y_COUNT + Y_DECAY2] = correlation_of(second);
    correlation[Y_DECAY2 * Y_COUNT + Y_F2] = correlation_of(second);
    struct formula formula = {mean_inductance, inputs, Y_COUNT, correlation, NULL, derived};
    struct tank_parts parts;
    if (!formula_apply(&formula, &parts.inductance_h, err))
        return false;
    formula.model = coil_resistance;
    if (!formula_apply(&formula, &parts.coil_ohm, err))
        return false;
    formula.model = loss_tangent;
    if (!formula_apply(&formula, &parts.loss_tangent, err))
        return false;
    if (parts.loss_tangent.result.value < -2 * parts.loss_tangent.result.u)
        snprintf(parts.loss_tangent.remark, sizeof parts.loss_tangent.remark,
                 "negative: the coil's resistance grows with frequency, or a capacitance is wrong");
    *out_parts = parts;
    return true;
}

void constant_decay_measures(const struct ring *ring, struct decay_measures *out_measures)
{
    const double ln_1000 = 6.90775527898213705; /* 60 dB is a factor 1000 in amplitude */
    double f = ring->f_hz.value, a = ring->decay_per_s.value, a_u = ring->decay_per_s.u;
    double w = 2 * WANE_PI * f, natural = hypot(w, a);
    double zeta = a / natural;
    /* d zeta = (w / natural^3)(w da - a dw) */
    double w_u = 2 * WANE_PI * ring->f_hz.u, cross = 2 * WANE_PI * ring->f_decay_cov;
    if (!isfinite(cross))
        cross = 0;
    double zeta_variance = w * w * a_u * a_u + a * a * w_u * w_u - 2 * w * a * cross;
    double zeta_u = w / (natural * natural * natural) * sqrt(fmax(0, zeta_variance));
    double decrement = a / f;
    double decrement_variance = a_u * a_u + decrement * decrement * ring->f_hz.u * ring->f_hz.u -
                                2 * decrement * cross / (2 * WANE_PI);
    out_measures->log_decrement =
        (struct measured){decrement, sqrt(fmax(0, decrement_variance)) / f};
    out_measures->loss_factor = (struct measured){2 * zeta, 2 * zeta_u};
    out_measures->t60_s = (struct measured){ln_1000 / a, ln_1000 / (a * a) * a_u};
    out_measures->half_width_hz = (struct measured){a / WANE_PI, a_u / WANE_PI};
    out_measures->tau_s = (struct measured){1 / a, a_u / (a * a)};
    out_measures->db_per_s = (struct measured){20 / log(10) * a, 20 / log(10) * a_u};
}
