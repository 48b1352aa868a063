/* The workshop's parts against textbook values worked out here another way. */
#include "input/sim_parts.h"
#include "support/near.h"
#include "wane/strike.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

/* i-th positive root of cos b cosh b = 1 (free-free bar, Rayleigh, Theory of Sound, section 173),
 * by bisection of cos b - 1/cosh b, which stays small. */
static double bar_root(int i)
{
    double low = (i + 0.5) * WANE_PI - 0.5;
    double high = (i + 0.5) * WANE_PI + 0.5;
    double sign = cos(low) - 1 / cosh(low) > 0 ? 1 : -1;
    for (int step = 0; step < 60; step++) {
        double middle = (low + high) / 2;
        if (sign * (cos(middle) - 1 / cosh(middle)) > 0)
            low = middle;
        else
            high = middle;
    }
    return low;
}

static void the_rod_bends_as_a_thin_free_bar(void **state)
{
    (void)state;
    struct sim_part_data rod;
    sim_part_make(SIM_ROD, 1, &rod);
    assert_int_equal(rod.mode_count, 4);
    for (int i = 1; i < 4; i++) {
        double expected = pow(bar_root(i + 1) / bar_root(1), 2);
        CHECK_SHARE(rod.modes[i].f_hz / rod.modes[0].f_hz, expected, 1e-6);
    }
    /* f_1 = b_1^2 d / (8 pi L^2) sqrt(E/rho); pieces differ by 0.3 % (one sigma). */
    double f_hz = pow(bar_root(1), 2) * 0.01 / (8 * WANE_PI * 0.09) * sqrt(101e9 / 8500);
    CHECK_SHARE(rod.modes[0].f_hz, f_hz, 0.012);
}

static void the_tank_rings_as_its_loop_says(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 20; seed++) {
        struct sim_part_data tank;
        sim_part_make(SIM_TANK, seed, &tank);
        /* L from alpha = R/2L; then C from omega^2 + alpha^2 = 1/LC must be near its label. */
        double l_h = 18 / (2 * tank.modes[0].decay_per_s);
        double omega = 2 * WANE_PI * tank.modes[0].f_hz;
        double c_f = 1 / (l_h * (omega * omega + pow(tank.modes[0].decay_per_s, 2)));
        CHECK_SHARE(l_h, 22e-3, 0.045);
        CHECK_SHARE(c_f, 100e-9, 0.045);
        assert_true(tank.contact_s == 0);
    }
}

static void pieces_of_different_seeds_differ_and_doublets_stay(void **state)
{
    (void)state;
    struct sim_part_data one;
    struct sim_part_data other;
    sim_part_make(SIM_GOBLET, 1, &one);
    sim_part_make(SIM_GOBLET, 2, &other);
    assert_true(fabs(one.modes[0].f_hz - other.modes[0].f_hz) > 1e-3);
    for (uint64_t seed = 1; seed <= 50; seed++) {
        sim_part_make(SIM_GOBLET, seed, &one);
        double split_hz = one.modes[1].f_hz - one.modes[0].f_hz;
        CHECK_NEAR(split_hz, 1.7, 0.05);
        assert_true(one.modes[0].decay_per_s > 1 && one.modes[0].decay_per_s < 2.5);
    }
}

static void names_go_both_ways(void **state)
{
    (void)state;
    for (int part = SIM_GOBLET; part <= SIM_ALL; part++) {
        enum sim_part back = SIM_MODE;
        assert_true(sim_part_from_name(sim_part_name((enum sim_part)part), &back));
        assert_int_equal(back, part);
    }
    enum sim_part untouched = SIM_TANK;
    assert_false(sim_part_from_name("plank", &untouched));
    assert_false(sim_part_from_name("mode", &untouched));
    assert_int_equal(untouched, SIM_TANK);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_rod_bends_as_a_thin_free_bar),
        cmocka_unit_test(the_tank_rings_as_its_loop_says),
        cmocka_unit_test(pieces_of_different_seeds_differ_and_doublets_stay),
        cmocka_unit_test(names_go_both_ways),
    };
    return cmocka_run_group_tests_name("simulated.parts", tests, NULL, NULL);
}
