/* Elastic moduli of free bars and rods. Formulas of ASTM E1876 as other programs and handbooks
 * quote them; the leading constants are the standard's rounded ones. */
#include "wane/constants.h"

#include "series/formula.h"
#include "wane/strike.h"

#include <math.h>
#include <stdio.h>

#define LENGTH_TO_DEPTH_MIN                                                                        \
    5.0 /* below, T1 is off by more than 0.13 % (against a Timoshenko bar) */
#define DEPTH_TO_LENGTH_MAX 0.2 /* Rayleigh's K: the next term is then some 1e-4 */
#define POISSON_ASSUMED     0.29
#define POISSON_ASSUMED_U   0.03

static const char e1876[] = "ASTM E1876";
static const char rayleigh[] = "Rayleigh, Theory of Sound, section 157";

/* T1 of a bar (r = thickness / length) and T1' of a rod (r = diameter / length). */
static double bar_correction(double r, double mu)
{
    double r2 = r * r, r4 = r2 * r2;
    return 1 + 6.585 * (1 + 0.0752 * mu + 0.8109 * mu * mu) * r2 - 0.868 * r4 -
           8.340 * (1 + 0.2023 * mu + 2.173 * mu * mu) * r4 /
               (1 + 6.338 * (1 + 0.1408 * mu + 1.536 * mu * mu) * r2);
}

static double rod_correction(double r, double mu)
{
    double r2 = r * r, r4 = r2 * r2;
    return 1 + 4.939 * (1 + 0.0752 * mu + 0.8109 * mu * mu) * r2 - 0.4883 * r4 -
           4.691 * (1 + 0.2023 * mu + 2.173 * mu * mu) * r4 /
               (1 + 4.754 * (1 + 0.1408 * mu + 1.536 * mu * mu) * r2);
}

/* Inputs of all models on bars: f, m, L, mu, b, t; of rods: f, m, L, mu, D. */
static double bar_youngs(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], mu = x[3], b = x[4], t = x[5];
    double slender = length / t;
    return 0.9465 * m * f * f / b * slender * slender * slender * bar_correction(t / length, mu);
}

static double rod_youngs(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], mu = x[3], d = x[4];
    return 1.6067 * length * length * length / (d * d * d * d) * m * f * f *
           rod_correction(d / length, mu);
}

static double bar_shear(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], b = x[4], t = x[5];
    double wide = b / t;
    double shape = (1 + wide * wide) / (4 - 2.521 / wide * (1 - 1.991 / (exp(WANE_PI * wide) + 1)));
    double r = shape * (1 + 0.00851 * b * b / (length * length)) -
               0.060 * pow(b / length, 1.5) * (wide - 1) * (wide - 1);
    return 4 * length * m * f * f / (b * t) * r;
}

static double rod_shear(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], d = x[4];
    return 16 * m * f * f * length / (WANE_PI * d * d);
}

static double lengthwise_correction(double d, double length, double mu)
{
    double slip = WANE_PI * mu * d / length;
    return 1 - slip * slip / 8;
}

static double bar_lengthwise(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], mu = x[3], b = x[4], t = x[5];
    double d = sqrt(2 * (b * b + t * t) / 3);
    return 4 * m * length * f * f / (b * t * lengthwise_correction(d, length, mu));
}

static double rod_lengthwise(const double *x, const void *user)
{
    (void)user;
    double f = x[0], m = x[1], length = x[2], mu = x[3], d = x[4];
    double area = WANE_PI * d * d / 4;
    return 4 * m * length * f * f / (area * lengthwise_correction(d, length, mu));
}

/* The mass does not matter to the speed; x[1] is not used. */
static double bar_speed(const double *x, const void *user)
{
    (void)user;
    double d = sqrt(2 * (x[4] * x[4] + x[5] * x[5]) / 3);
    return 2 * x[2] * x[0] / sqrt(lengthwise_correction(d, x[2], x[3]));
}

static double rod_speed(const double *x, const void *user)
{
    (void)user;
    return 2 * x[2] * x[0] / sqrt(lengthwise_correction(x[4], x[2], x[3]));
}

static struct measured poisson_of(const struct body *body)
{
    if (body->poisson.value > 0)
        return body->poisson;
    return (struct measured){POISSON_ASSUMED, POISSON_ASSUMED_U};
}

static bool need(const char *name, struct measured size, struct error *err)
{
    if (size.value > 0 && isfinite(size.value))
        return true;
    return error_set(err, ERROR_DATA, "the part sheet gives no %s, which this constant needs",
                     name);
}

static bool need_all(const struct body *body, bool needs_mass, struct error *err)
{
    if (body->shape != BODY_BAR && body->shape != BODY_ROD)
        return error_set(err, ERROR_DATA,
                         "this constant is for a bar or a rod: set shape in the part sheet");
    bool is_there =
        need("length", body->length_m, err) && (!needs_mass || need("mass", body->mass_kg, err));
    if (body->shape == BODY_ROD)
        return is_there && need("diameter", body->diameter_m, err);
    return is_there && need("width", body->width_m, err) &&
           need("thickness", body->thickness_m, err);
}

/* One formula for bars, one for rods, on the same list of inputs. */
static bool apply(const struct body *body, struct measured f_hz, propagate_model *for_bar,
                  propagate_model *for_rod, const char *source, struct constant *out_constant,
                  struct error *err)
{
    bool is_bar = body->shape == BODY_BAR;
    struct formula_input inputs[] = {
        {"frequency", f_hz},
        {"mass", body->mass_kg},
        {"length", body->length_m},
        {"Poisson's ratio", poisson_of(body)},
        {is_bar ? "width" : "diameter", is_bar ? body->width_m : body->diameter_m},
        {"thickness", body->thickness_m},
    };
    struct formula formula = {
        .model = is_bar ? for_bar : for_rod,
        .inputs = inputs,
        .count = is_bar ? 6 : 5,
        .source = source,
    };
    return need("frequency", f_hz, err) && formula_apply(&formula, out_constant, err);
}

static bool is_slender(const struct body *body, struct error *err)
{
    double depth = body->shape == BODY_BAR ? body->thickness_m.value : body->diameter_m.value;
    if (body->length_m.value >= LENGTH_TO_DEPTH_MIN * depth)
        return true;
    return error_set(err, ERROR_DATA,
                     "the %s is too stout for this formula: its length must be at least 5 times "
                     "its %s, and is %.3g times",
                     body->shape == BODY_BAR ? "bar" : "rod",
                     body->shape == BODY_BAR ? "thickness" : "diameter",
                     body->length_m.value / depth);
}

static void remark_assumed(const struct body *body, struct constant *constant)
{
    if (body->poisson.value > 0)
        return;
    snprintf(
        constant->remark, sizeof constant->remark,
        "Poisson's ratio was taken as %.2f ± %.2f: name it in the part sheet, or measure it by "
        "torsion",
        POISSON_ASSUMED, POISSON_ASSUMED_U);
}

bool constant_youngs_modulus(const struct body *body, struct measured f_hz,
                             struct constant *out_constant, struct error *err)
{
    if (!need_all(body, true, err) || !is_slender(body, err) ||
        !apply(body, f_hz, bar_youngs, rod_youngs, e1876, out_constant, err))
        return false;
    remark_assumed(body, out_constant);
    return true;
}

bool constant_shear_modulus(const struct body *body, struct measured f_hz,
                            struct constant *out_constant, struct error *err)
{
    if (!need_all(body, true, err))
        return false;
    if (body->shape == BODY_BAR && body->width_m.value < body->thickness_m.value)
        return error_set(err, ERROR_DATA,
                         "the bar is thicker than wide: exchange width and thickness in the part "
                         "sheet for torsion");
    return apply(body, f_hz, bar_shear, rod_shear, e1876, out_constant, err);
}

static bool is_thin(const struct body *body, struct error *err)
{
    double b = body->width_m.value, t = body->thickness_m.value;
    double depth = body->shape == BODY_BAR ? sqrt(2 * (b * b + t * t) / 3) : body->diameter_m.value;
    if (depth <= DEPTH_TO_LENGTH_MAX * body->length_m.value)
        return true;
    return error_set(err, ERROR_DATA,
                     "too stout for the lengthwise formula: its length must be at least 5 times "
                     "its diameter, and is %.3g times",
                     body->length_m.value / depth);
}

bool constant_lengthwise_modulus(const struct body *body, struct measured f_hz,
                                 struct constant *out_constant, struct error *err)
{
    if (!need_all(body, true, err) || !is_thin(body, err) ||
        !apply(body, f_hz, bar_lengthwise, rod_lengthwise, rayleigh, out_constant, err))
        return false;
    remark_assumed(body, out_constant);
    return true;
}

bool constant_sound_speed(const struct body *body, struct measured f_hz,
                          struct constant *out_constant, struct error *err)
{
    if (!need_all(body, false, err) || !is_thin(body, err) ||
        !apply(body, f_hz, bar_speed, rod_speed, rayleigh, out_constant, err))
        return false;
    remark_assumed(body, out_constant);
    return true;
}

/* Poisson's ratio from both frequencies: a fixed point, since T1 hardly feels it. Inputs: flexural
 * f, m, L, torsional f, b or D, t. */
static double solve_poisson(const double *x, const void *user)
{
    const struct body *body = user;
    bool is_bar = body->shape == BODY_BAR;
    double flexure[6] = {x[0], x[1], x[2], POISSON_ASSUMED, x[4], is_bar ? x[5] : 0};
    double torsion[6] = {x[3], x[1], x[2], 0, x[4], is_bar ? x[5] : 0};
    double shear = is_bar ? bar_shear(torsion, NULL) : rod_shear(torsion, NULL);
    for (int i = 0; i < 100; i++) {
        double youngs = is_bar ? bar_youngs(flexure, NULL) : rod_youngs(flexure, NULL);
        double next = youngs / (2 * shear) - 1;
        double step = fabs(next - flexure[3]);
        flexure[3] = next;
        if (step < 1e-14)
            return next;
        if (!(fabs(next) < 10))
            break;
    }
    return NAN;
}

static double youngs_with_poisson(const double *x, const void *user)
{
    const struct body *body = user;
    bool is_bar = body->shape == BODY_BAR;
    double flexure[6] = {x[0], x[1], x[2], solve_poisson(x, user), x[4], is_bar ? x[5] : 0};
    return is_bar ? bar_youngs(flexure, NULL) : rod_youngs(flexure, NULL);
}

bool constant_poisson(const struct body *body, struct measured flexure_hz,
                      struct measured torsion_hz, struct constant *out_poisson,
                      struct constant *out_youngs, struct error *err)
{
    if (!need_all(body, true, err) || !is_slender(body, err) ||
        !need("flexural frequency", flexure_hz, err) ||
        !need("torsional frequency", torsion_hz, err))
        return false;
    bool is_bar = body->shape == BODY_BAR;
    struct formula_input inputs[] = {
        {"flexural frequency", flexure_hz},
        {"mass", body->mass_kg},
        {"length", body->length_m},
        {"torsional frequency", torsion_hz},
        {is_bar ? "width" : "diameter", is_bar ? body->width_m : body->diameter_m},
        {"thickness", body->thickness_m},
    };
    struct formula formula = {
        .model = solve_poisson,
        .inputs = inputs,
        .count = is_bar ? 6 : 5,
        .user = body,
        .source = e1876,
    };
    struct constant poisson, youngs;
    if (!formula_apply(&formula, &poisson, err))
        return false;
    formula.model = youngs_with_poisson;
    if (!formula_apply(&formula, &youngs, err))
        return false;
    double mu = poisson.result.value;
    if (mu < 0 || mu > 0.5)
        snprintf(poisson.remark, sizeof poisson.remark,
                 "outside 0 to 0.5: the material is not the same in all directions, or a mode is "
                 "another than it is taken for");
    *out_poisson = poisson;
    *out_youngs = youngs;
    return true;
}
