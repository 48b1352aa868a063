/* Constants of bodies and tanks against standards, handbooks and worked examples; the source stands
 * beside each number. */
#include "wane/constants.h"
#include "wane/series.h"
#include "wane/strike.h"

#include "support/near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

static struct body bar(double length_mm, double width_mm, double thickness_mm, double mass_g,
                       double mu)
{
    return (struct body){.shape = BODY_BAR,
                         .length_m = {length_mm / 1000, 0},
                         .width_m = {width_mm / 1000, 0},
                         .thickness_m = {thickness_mm / 1000, 0},
                         .mass_kg = {mass_g / 1000, 0},
                         .poisson = {mu, 0}};
}

static struct body rod(double length_mm, double diameter_mm, double mass_g, double mu)
{
    return (struct body){.shape = BODY_ROD,
                         .length_m = {length_mm / 1000, 0},
                         .diameter_m = {diameter_mm / 1000, 0},
                         .mass_kg = {mass_g / 1000, 0},
                         .poisson = {mu, 0}};
}

/* ASTM E1876's formulas worked with the standard's constants 0.9465 and 1.6067 (check values,
 * section 4.2, recomputed there in another language). */
static void e1876_worked_values_are_met(void **state)
{
    (void)state;
    struct body steel_bar = bar(100, 20, 5, 78.5, 0.29), steel_rod = rod(150, 10, 92.5, 0.29);
    struct constant c;
    assert_true(constant_youngs_modulus(&steel_bar, (struct measured){2600, 0}, &c, NULL));
    CHECK_SHARE(c.result.value, 2.04499154e11, 1e-8);
    assert_true(constant_youngs_modulus(&steel_rod, (struct measured){2000, 0}, &c, NULL));
    CHECK_SHARE(c.result.value, 2.05412801e11, 1e-8);
    assert_true(constant_shear_modulus(&steel_bar, (struct measured){7000, 0}, &c, NULL));
    CHECK_SHARE(c.result.value, 7.69037868e10, 1e-8);
    assert_true(constant_shear_modulus(&steel_rod, (struct measured){10300, 0}, &c, NULL));
    CHECK_SHARE(c.result.value, 7.49682807e10, 1e-8);
    assert_string_equal(c.remark, "");
}

/* Frequencies of an exact free-free Timoshenko bar, mu 0.3, shear coefficient (5 + 5 mu)/(6 + 5
 * mu): (f_EulerBernoulli / f)^2 at t/L = 1/30, 1/20, 1/10, 1/5 (check values, section 4.2). The
 * standard's T1 differs from them by what is said there. */
static void youngs_modulus_of_a_timoshenko_bar_comes_back(void **state)
{
    (void)state;
    const double slender[] = {30, 20, 10, 5};
    const double slowed[] = {1.0079841, 1.0179230, 1.0708542, 1.2726252};
    const double limit[] = {1.2e-4, 1.4e-4, 3.2e-4, 1.5e-3}; /* with the constant's 90 ppm */
    const double youngs = 69e9, density = 2700, t = 0.006, b = 0.02, root = 4.73004074486;
    for (size_t i = 0; i < COUNT(slender); i++) {
        double length = slender[i] * t;
        double plain =
            root * root / (2 * WANE_PI * length * length) * sqrt(youngs * t * t / (12 * density));
        struct body body =
            bar(length * 1000, b * 1000, t * 1000, density * b * t * length * 1000, 0.3);
        struct constant c;
        assert_true(constant_youngs_modulus(&body, (struct measured){plain / sqrt(slowed[i]), 0},
                                            &c, NULL));
        CHECK_SHARE(c.result.value, youngs, limit[i]);
    }
}

/* Rods of 0.5 m sound lengthwise at v_ext / 2L: CRC Handbook of Chemistry and Physics, "Speed of
 * Sound in Various Media". Moduli: the usual handbook ranges (common practice, no source): steel
 * 195
 * ... 215, aluminium 68 ... 72, brass 95 ... 110, glass 60 ... 75 GPa. */
static void rods_of_common_materials_have_handbook_moduli(void **state)
{
    (void)state;
    const struct {
        double f_hz, density, low_gpa, high_gpa;
    } rods[] = {
        {5200, 7850, 195, 215}, {5000, 2700, 67, 72}, {3480, 8500, 95, 110}, {5170, 2230, 55, 70}};
    for (size_t i = 0; i < COUNT(rods); i++) {
        double d = 0.008, length = 0.5;
        struct body body = rod(500, 8, rods[i].density * WANE_PI * d * d / 4 * length * 1000, 0.3);
        struct constant c;
        assert_true(
            constant_lengthwise_modulus(&body, (struct measured){rods[i].f_hz, 0}, &c, NULL));
        assert_true(c.result.value > rods[i].low_gpa * 1e9);
        assert_true(c.result.value < rods[i].high_gpa * 1e9);
        assert_true(constant_sound_speed(&body, (struct measured){rods[i].f_hz, 0}, &c, NULL));
        CHECK_SHARE(c.result.value, rods[i].f_hz, 1e-4);
    }
}

/* Rayleigh's correction: 0.99953887 at D/L 1/15, mu 0.29 (check values, section 4.2). */
static void rayleigh_correction_is_met(void **state)
{
    (void)state;
    struct body body = rod(150, 10, 92.5, 0.29);
    struct constant c;
    assert_true(constant_lengthwise_modulus(&body, (struct measured){16000, 0}, &c, NULL));
    double plain = 4 * 0.0925 * 0.15 * 16000.0 * 16000.0 / (WANE_PI * 25e-6);
    CHECK_NEAR(plain / c.result.value, 0.99953887, 5e-9);
}

/* Made by the formulas: E 105 GPa, mu 0.34 rod, back from its two frequencies. */
static void poisson_ratio_comes_back_from_flexure_and_torsion(void **state)
{
    (void)state;
    const double mu = 0.34, youngs = 105e9, shear = youngs / (2 * (1 + mu));
    struct body body = rod(300, 12, 288, mu);
    struct constant at_1000, c, e;
    assert_true(constant_youngs_modulus(&body, (struct measured){1000, 0}, &at_1000, NULL));
    double flexure = 1000 * sqrt(youngs / at_1000.result.value);
    assert_true(constant_shear_modulus(&body, (struct measured){1000, 0}, &at_1000, NULL));
    double torsion = 1000 * sqrt(shear / at_1000.result.value);
    body.poisson = (struct measured){0, 0};
    assert_true(constant_poisson(&body, (struct measured){flexure, 0.01},
                                 (struct measured){torsion, 0.01}, &c, &e, NULL));
    CHECK_NEAR(c.result.value, mu, 1e-10);
    CHECK_SHARE(e.result.value, youngs, 1e-10);
}

/* u(E)/E = sqrt((2 u_f)^2 + u_m^2 + u_b^2 + (3 u_L)^2 + (3 u_t)^2), relative (derived; slender,
 * where T1 adds nothing). */
static void modulus_uncertainty_is_the_sum_of_its_parts(void **state)
{
    (void)state;
    struct body body = bar(400, 20, 4, 250, 0.29);
    body.length_m.u = body.length_m.value * 1e-4;
    body.width_m.u = body.width_m.value * 5e-4;
    body.thickness_m.u = body.thickness_m.value * 1e-3;
    body.mass_kg.u = body.mass_kg.value * 2e-4;
    struct constant c;
    assert_true(constant_youngs_modulus(&body, (struct measured){130, 130 * 5e-5}, &c, NULL));
    double expected = sqrt(1e-8 + 4e-8 + 25e-8 + 9e-8 + 9e-6);
    CHECK_SHARE(c.result.u / c.result.value, expected, 2e-3);
    assert_string_equal(c.budget.lines[5].name, "thickness");
    CHECK_SHARE(c.budget.lines[5].share / c.result.value, 3e-3, 2e-3);
}

static void stout_bars_and_missing_sizes_are_refused_with_a_sentence(void **state)
{
    (void)state;
    struct error err;
    struct constant c;
    struct body body = bar(40, 20, 10, 60, 0.3);
    assert_false(constant_youngs_modulus(&body, (struct measured){9000, 0}, &c, &err));
    assert_non_null(strstr(err.text, "at least 5 times its thickness, and is 4 times"));
    body = rod(300, 12, 0, 0.3);
    assert_false(constant_youngs_modulus(&body, (struct measured){900, 0}, &c, &err));
    assert_non_null(strstr(err.text, "no mass"));
    body = rod(30, 12, 30, 0.3);
    assert_false(constant_lengthwise_modulus(&body, (struct measured){900, 0}, &c, &err));
    body.shape = BODY_NONE;
    assert_false(constant_shear_modulus(&body, (struct measured){900, 0}, &c, &err));
}

/* OpenStax University Physics 2, section 14.6, and check values, section 5: f', a of circuits made
 * by the formulas there; L and R come back exactly at any damping. */
static void tanks_come_back_exactly_at_any_damping(void **state)
{
    (void)state;
    const struct {
        double l, c, r, f_hz, decay_per_s;
    } tanks[] = {{680e-6, 0.47e-6, 0.9, 8901.97462, 661.764706},
                 {2.2e-3, 22e-6, 6.0, 690.109724, 1363.63636},
                 {2.2e-3, 22e-6, 12.0, 578.745248, 2727.27273},
                 {1.0e-3, 330e-6, 3.0, 140.589141, 1500},
                 {10e-3, 100e-9, 20, 5030.40412, 1000},
                 {470e-6, 1000e-6, 1.2, 112.310049, 1276.59574}};
    for (size_t i = 0; i < COUNT(tanks); i++) {
        struct ring ring = {{tanks[i].f_hz, 0}, {tanks[i].decay_per_s, 0}, 0};
        struct body body = {.shape = BODY_TANK, .capacitance_f = {tanks[i].c, 0}};
        struct tank tank;
        assert_true(constant_tank(&body, &ring, &tank, NULL));
        CHECK_SHARE(tank.other.result.value, tanks[i].l, 1e-8);
        CHECK_SHARE(tank.loop_ohm.result.value, tanks[i].r, 1e-8);
        CHECK_SHARE(tank.q.result.value, sqrt(tanks[i].l / tanks[i].c) / tanks[i].r, 1e-8);
        body = (struct body){.shape = BODY_TANK, .inductance_h = {tanks[i].l, 0}};
        assert_true(constant_tank(&body, &ring, &tank, NULL));
        CHECK_SHARE(tank.other.result.value, tanks[i].c, 1e-8);
        CHECK_SHARE(tank.loop_ohm.result.value, tanks[i].r, 1e-8);
    }
}

/* Check values, section 5: 10 kohm across 0.47 uF adds 212.765957 1/s to 2 a; w0^2 = (1 +
 * R/Rp)/(LC). */
static struct ring ring_of(double l, double c, double r, double input_ohm)
{
    double twice = r / l + 1 / (input_ohm * c);
    double square = (1 + r / input_ohm) / (l * c);
    return (struct ring){
        {sqrt(square - twice * twice / 4) / (2 * WANE_PI), 1e-3}, {twice / 2, 1e-2}, 0};
}

static void input_across_a_tank_is_taken_out(void **state)
{
    (void)state;
    CHECK_NEAR(1 / (10e3 * 0.47e-6), 212.765957, 1e-6);
    struct ring ring = ring_of(680e-6, 0.47e-6, 0.9, 10e3);
    struct body body = {.shape = BODY_TANK,
                        .capacitance_f = {0.47e-6 - 200e-12, 0},
                        .input_ohm = {10e3, 0},
                        .input_f = {200e-12, 0}};
    struct tank tank;
    assert_true(constant_tank(&body, &ring, &tank, NULL));
    CHECK_SHARE(tank.other.result.value, 680e-6, 1e-10);
    CHECK_SHARE(tank.loop_ohm.result.value, 0.9, 1e-9);
    body.capacitance_f = (struct measured){0, 0};
    body.inductance_h = (struct measured){680e-6, 0};
    assert_true(constant_tank(&body, &ring, &tank, NULL));
    CHECK_SHARE(tank.other.result.value, 0.47e-6 - 200e-12, 1e-10);
    CHECK_SHARE(tank.loop_ohm.result.value, 0.9, 1e-9);

    struct error err;
    body.input_ohm = (struct measured){100, 0};
    assert_false(constant_tank(&body, &ring, &tank, &err));
    assert_non_null(strstr(err.text, "input_ohm"));
    body.capacitance_f = (struct measured){1e-6, 0};
    assert_false(constant_tank(&body, &ring, &tank, &err));
}

static void coil_and_capacitor_losses_are_told_apart_by_two_capacitors(void **state)
{
    (void)state;
    const double l = 1e-3, coil = 0.8, tangent = 0.02, c[2] = {10e-6, 0.47e-6};
    struct ring rings[2];
    for (int i = 0; i < 2; i++) {
        double r = coil;
        double f = 0;
        /* The series resistance depends on f, which depends on it a little: iterate. */
        for (int k = 0; k < 60; k++) {
            double a = r / (2 * l);
            f = sqrt(1 / (l * c[i]) - a * a) / (2 * WANE_PI);
            r = coil + tangent / (2 * WANE_PI * f * c[i]);
        }
        rings[i] = (struct ring){{f, 1e-3}, {r / (2 * l), 1e-2}, 0};
    }
    struct body body = {.shape = BODY_TANK, .capacitance_f = {c[0], c[0] * 1e-3}};
    struct tank_parts parts;
    assert_true(constant_tank_parts(&body, &rings[0], (struct measured){c[1], c[1] * 1e-3},
                                    &rings[1], &parts, NULL));
    CHECK_SHARE(parts.inductance_h.result.value, l, 1e-9);
    CHECK_SHARE(parts.coil_ohm.result.value, coil, 1e-8);
    CHECK_SHARE(parts.loss_tangent.result.value, tangent, 1e-8);
    assert_true(parts.loss_tangent.result.u > 0);
    struct error err;
    assert_false(
        constant_tank_parts(&body, &rings[0], body.capacitance_f, &rings[1], &parts, &err));
}

/* Check values, section 4.6, set A: f 1000, a 20. */
static void decay_measures_are_those_of_the_table(void **state)
{
    (void)state;
    struct ring ring = {{1000, 0}, {20, 0.1}, 0};
    struct decay_measures measures;
    constant_decay_measures(&ring, &measures);
    CHECK_NEAR(measures.log_decrement.value, 0.02, 1e-15);
    CHECK_SHARE(1 / measures.loss_factor.value, 157.080428, 1e-8);
    CHECK_NEAR(measures.t60_s.value, 0.345387764, 1e-9);
    CHECK_NEAR(measures.db_per_s.value, 173.717793, 1e-6);
    CHECK_NEAR(measures.tau_s.value, 0.05, 1e-15);
    CHECK_NEAR(measures.half_width_hz.value, 6.366198, 1e-6);
    CHECK_SHARE(measures.t60_s.u / measures.t60_s.value, 0.005, 1e-12);
    CHECK_SHARE(measures.loss_factor.u / measures.loss_factor.value, 0.005, 1e-4);
}

/* GUM H.2: R, X, Z from V, I, phi with their correlations. Means, u and r as in its table; results
 * as recomputed in check values, section 6 (127.732170 (71071e-6), 219.846512, 254.259702). */
static double gum_r(const double *x, const void *user)
{
    (void)user;
    return x[0] / x[1] * cos(x[2]);
}

static double gum_x(const double *x, const void *user)
{
    (void)user;
    return x[0] / x[1] * sin(x[2]);
}

static double gum_z(const double *x, const void *user)
{
    (void)user;
    return x[0] / x[1];
}

static void gum_h2_resistance_and_reactance_are_met(void **state)
{
    (void)state;
    const struct measured inputs[] = {
        {4.9990, 3.209361e-3}, {19.6610e-3, 9.471008e-6}, {1.04446, 7.520638e-4}};
    const double r[9] = {1, -0.355311, 0.857624, -0.355311, 1, -0.645111, 0.857624, -0.645111, 1};
    struct measured result;
    double shares[3];
    assert_true(propagate(gum_r, NULL, inputs, 3, r, &result, shares, NULL));
    CHECK_NEAR(result.value, 127.732170, 1e-6);
    CHECK_NEAR(result.u, 0.071071, 2e-6);
    assert_true(propagate(gum_x, NULL, inputs, 3, r, &result, NULL, NULL));
    CHECK_NEAR(result.value, 219.846512, 1e-6);
    CHECK_NEAR(result.u, 0.295582, 2e-6);
    assert_true(propagate(gum_z, NULL, inputs, 3, r, &result, NULL, NULL));
    CHECK_NEAR(result.value, 254.259702, 1e-6);
    CHECK_NEAR(result.u, 0.236336, 2e-6);
}

static const struct part_constant *named(const struct part_constant *constants, unsigned count,
                                         const char *name)
{
    for (unsigned i = 0; i < count; i++)
        if (strcmp(constants[i].name, name) == 0)
            return &constants[i];
    fail_msg("no %s", name);
    return NULL;
}

/* The rod of e1876_worked_values_are_met, through a part sheet. */
static void a_sheet_with_sizes_gives_its_constants(void **state)
{
    (void)state;
    static const char sheet[] = "[part]\nname = rod\n[body]\nshape = rod\nlength_mm = 150\n"
                                "diameter_mm = 10\nmass_g = 92.5 +- 0.1\npoisson = 0.29\n"
                                "[mode 1]\nband_hz = 1900 ... 2100\nmotion = flexure\n"
                                "[mode 2]\nband_hz = 10000 ... 11000\nmotion = torsion\n";
    struct part part;
    assert_true(part_read("rod.ini", sheet, strlen(sheet), &part, NULL, NULL));
    struct ring rings[2] = {{{2000, 0.01}, {3, 0.01}, 0}, {{0, 0}, {0, 0}, 0}};
    struct part_constant constants[PART_CONSTANTS_MAX];
    unsigned count = part_constants(&part, rings, constants);
    assert_int_equal(count, 1);
    assert_true(constants[0].is_known);
    CHECK_SHARE(constants[0].constant.result.value, 2.05412801e11, 1e-8);

    rings[1].f_hz = (struct measured){10300, 0.05};
    count = part_constants(&part, rings, constants);
    assert_int_equal(count, 3);
    CHECK_SHARE(named(constants, count, "shear modulus")->constant.result.value, 7.49682807e10,
                1e-8);
    double youngs = named(constants, count, "Young's modulus")->constant.result.value;
    CHECK_NEAR(named(constants, count, "Poisson's ratio")->constant.result.value,
               youngs / (2 * 7.49682807e10) - 1, 1e-7);
}

static void a_constant_that_is_not_known_says_why(void **state)
{
    (void)state;
    static const char sheet[] = "[part]\nname = rod\n[body]\nshape = rod\nlength_mm = 150\n"
                                "diameter_mm = 10\n"
                                "[mode 1]\nband_hz = 1900 ... 2100\nmotion = flexure\n";
    struct part part;
    assert_true(part_read("rod.ini", sheet, strlen(sheet), &part, NULL, NULL));
    const struct ring ring = {{2000, 0.01}, {3, 0.01}, 0};
    struct part_constant constants[PART_CONSTANTS_MAX];
    assert_int_equal(part_constants(&part, &ring, constants), 1);
    assert_false(constants[0].is_known);
    assert_non_null(strstr(constants[0].constant.remark, "mass"));
    struct text text = {0};
    struct json_writer json = {.text = &text};
    json_open_object(&json, NULL);
    constants_write_json(&json, "constants", constants, 1);
    json_close_object(&json);
    assert_non_null(strstr(text.data, "\"value\":null"));
    text_done(&text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(e1876_worked_values_are_met),
        cmocka_unit_test(youngs_modulus_of_a_timoshenko_bar_comes_back),
        cmocka_unit_test(rods_of_common_materials_have_handbook_moduli),
        cmocka_unit_test(rayleigh_correction_is_met),
        cmocka_unit_test(poisson_ratio_comes_back_from_flexure_and_torsion),
        cmocka_unit_test(modulus_uncertainty_is_the_sum_of_its_parts),
        cmocka_unit_test(stout_bars_and_missing_sizes_are_refused_with_a_sentence),
        cmocka_unit_test(tanks_come_back_exactly_at_any_damping),
        cmocka_unit_test(input_across_a_tank_is_taken_out),
        cmocka_unit_test(coil_and_capacitor_losses_are_told_apart_by_two_capacitors),
        cmocka_unit_test(decay_measures_are_those_of_the_table),
        cmocka_unit_test(a_sheet_with_sizes_gives_its_constants),
        cmocka_unit_test(a_constant_that_is_not_known_says_why),
        cmocka_unit_test(gum_h2_resistance_and_reactance_are_met),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
