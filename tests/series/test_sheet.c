/* Part sheets: what is taken, and that every complaint has its file, line and advice. */
#include "wane/part.h"

#include "support/near.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

static const char rod_sheet[] = "; a rod of our own shelf\n"
                                "[part]\n"
                                "name = Brass rod 300\n"
                                "material = CuZn37\n"
                                "hint = Hang it on two threads, tap the middle\n"
                                "\n"
                                "[body]\n"
                                "shape = rod\n"
                                "length_mm = 300.0 +- 0.1\n"
                                "diameter_mm = 12.00 \xC2\xB1 0.02\n"
                                "mass_g = 288.1\n"
                                "\n"
                                "[mode 1a]\n"
                                "band_hz = 400 ... 420\n"
                                "motion = flexure ; the first\n"
                                "q = 900 ...\n"
                                "wanted_q = 1 %\n"
                                "spread_f = 0.02 %\n"
                                "[mode 1b]\n"
                                "band_hz = 420 \xE2\x80\xA6 440\n"
                                "f_hz = ... 430\n"
                                "[split 1a 1b]\n"
                                "f_hz = 2.300 ... 2.322\n"
                                "[decide]\n"
                                "guard = 1.645\n";

static bool read_sheet(const char *text, struct part *part, struct text *complaints,
                       struct error *err)
{
    return part_read("rod.ini", text, strlen(text), part, complaints, err);
}

static void a_whole_sheet_is_taken(void **state)
{
    (void)state;
    struct part part;
    struct error err = {0};
    if (!read_sheet(rod_sheet, &part, NULL, &err))
        fail_msg("%s", err.text);
    assert_string_equal(part.name, "Brass rod 300");
    assert_int_equal(part.body.shape, BODY_ROD);
    CHECK_NEAR(part.body.length_m.value, 0.3, 1e-15);
    CHECK_NEAR(part.body.length_m.u, 1e-4 / sqrt(3), 1e-15);
    CHECK_NEAR(part.body.diameter_m.u, 2e-5 / sqrt(3), 1e-15);
    assert_true(part.body.mass_kg.u == 0);
    assert_int_equal(part.mode_count, 2);
    assert_string_equal(part.modes[0].label, "1a");
    assert_int_equal(part.modes[0].motion, MOTION_FLEXURE);
    assert_true(part.modes[0].limits[QUANTITY_Q].has_low);
    assert_false(part.modes[0].limits[QUANTITY_Q].has_high);
    CHECK_NEAR(part.modes[0].wanted[QUANTITY_Q], 0.01, 1e-15);
    CHECK_NEAR(part.modes[0].spread_max[QUANTITY_F_HZ], 2e-4, 1e-15);
    CHECK_NEAR(part.modes[1].band_high_hz, 440, 0);
    assert_int_equal(part.split_count, 1);
    assert_int_equal(part.splits[0].second, 1);
    CHECK_NEAR(part.guard, 1.645, 0);
}

static void every_complaint_has_file_line_and_what_is_allowed(void **state)
{
    (void)state;
    const struct {
        const char *sheet, *complaint;
    } cases[] = {
        {"[part]\nname = a\nmateral = x\n",
         "rod.ini:3: there is no key \"materal\": did you mean \"material\"?"},
        {"[prat]\nname = a\n", "rod.ini:2: there is no section \"prat\": did you mean \"part\"?"},
        {"[part]\nname = a\n[mode 1]\nband_hz = 400,5 ... 410\n",
         "rod.ini:4: \"400,5\" is no number (with a point, as in 0.5)"},
        {"[part]\nname = a\n[mode 1]\nband_hz = 410 ... 400\n",
         "rod.ini:4: the lower end must come first, and below the upper"},
        {"[part]\nname = a\n[mode 1]\nband_hz = 400 - 410\n",
         "rod.ini:4: \"400 - 410\" is no range: write 400 ... 440, or ... 440, or 400 ..."},
        {"[part]\nname = a\n[mode 1]\nq = 10 ...\n",
         "rod.ini:4: this mode needs a band_hz to be found by, as in 400 ... 440"},
        {"[part]\nname = a\n[mode 1]\nband_hz = 1 ... 2\nwanted_q = 1\n",
         "rod.ini:5: \"1\" is no share: write it as in 0.5 %"},
        {"[part]\nname = a\n[body]\nshape = cube\n",
         "rod.ini:4: there is no choice \"cube\": there are bar, rod, tank"},
        {"[part]\nname = a\n[body]\nshape = rod\nlength_mm = 3\n",
         "rod.ini:4: a rod needs length_mm and diameter_mm"},
        {"[part]\nname = a\n[body]\nmass_g = 3 +- 4\n",
         "rod.ini:4: the +- must be at least 0 and less than the value"},
        {"[part]\nname = a\n[split 1a 1b]\nf_hz = 1 ...\n",
         "rod.ini:4: a split names two modes that the sheet has"},
        {"[part]\nname = a\nname = b\n",
         "rod.ini:3: this key was given before in this section: keep one"},
        {"[part]\n  name = a\n",
         "rod.ini:2: a line must not begin with a blank: it would be joined to the one before"},
        {"[part]\nname\n", "rod.ini:2: this is neither [section] nor key = value"},
        {"[part\nname = a\n", "rod.ini:1: this section has no closing ]"},
        {"[part]\nname = \xFF\n", "rod.ini:2: this line is no text in UTF-8"},
        {"name = a\n", "rod.ini:1: a sheet begins with [part]"},
        {"", "rod.ini:1: the sheet has no name: add name = ... under [part]"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct part part;
        struct error err = {0};
        assert_false(read_sheet(cases[i].sheet, &part, NULL, &err));
        assert_string_equal(err.text, cases[i].complaint);
        assert_int_equal(err.kind, ERROR_USAGE);
    }
}

static void all_complaints_are_collected_and_the_part_is_untouched(void **state)
{
    (void)state;
    struct part part = {.name = "as before"};
    struct text complaints = {0};
    struct error err = {0};
    assert_false(read_sheet("[part]\nnam = a\n[body]\nlength_mm = x\n[mode 1]\nq = 1\n", &part,
                            &complaints, &err));
    assert_string_equal(part.name, "as before");
    unsigned lines = 0;
    for (const char *at = complaints.data; (at = strchr(at, '\n')) != NULL; at++)
        lines++;
    assert_int_equal(lines, 5); /* three wrong lines, no name, no band */
    assert_int_equal(strncmp(complaints.data, err.text, strlen(err.text)), 0);
    text_done(&complaints);
}

/* libinih cuts a line at 199 bytes in silence and takes the rest for a further line. */
static void a_line_too_long_is_refused_not_cut(void **state)
{
    (void)state;
    for (size_t length = 190; length < 420; length++) {
        char sheet[512] = "[part]\nhint = ";
        size_t begin = strlen("[part]\n");
        size_t at = strlen(sheet);
        memset(sheet + at, 'x', begin + length - at);
        strcpy(sheet + begin + length, "\nname = a\n");
        struct part part;
        struct error err = {0};
        bool is_taken = read_sheet(sheet, &part, NULL, &err);
        if (is_taken != (length <= 198))
            fail_msg("a line of %zu bytes: %s", length, is_taken ? "taken" : err.text);
        if (is_taken)
            assert_int_equal(strlen(part.hint), length - strlen("hint = "));
        else
            assert_string_equal(err.text, "rod.ini:2: this line is too long: at most 198 bytes");
    }
}

static void a_sheet_with_a_byte_order_mark_and_dos_line_ends_is_taken(void **state)
{
    (void)state;
    struct part part;
    struct error err = {0};
    if (!read_sheet("\xEF\xBB\xBF[part]\r\nname = a\r\n", &part, NULL, &err))
        fail_msg("%s", err.text);
    assert_string_equal(part.name, "a");
}

static void a_sheet_cut_anywhere_is_taken_or_refused_with_a_line(void **state)
{
    (void)state;
    for (size_t size = 0; size < sizeof rod_sheet; size++) {
        char *cut = malloc(size + 1); /* its own memory: a byte too far is seen by ASan */
        assert_non_null(cut);
        memcpy(cut, rod_sheet, size);
        struct part part;
        struct error err = {0};
        if (!part_read("cut", cut, size, &part, NULL, &err))
            assert_int_equal(strncmp(err.text, "cut:", 4), 0);
        free(cut);
    }
}

/* The sheets that come with the program, as they stand in configs/parts. */
static void the_sheets_that_we_ship_are_in_order(void **state)
{
    (void)state;
    const char *const names[] = {"goblet", "rod", "panel", "tank"};
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        char path[4096], text[8192];
        const char *end = strstr(__FILE__, "tests/series/");
        assert_non_null(end);
        snprintf(path, sizeof path, "%.*sconfigs/parts/%s.ini", (int)(end - __FILE__), __FILE__,
                 names[i]);
        FILE *file = fopen(path, "r");
        assert_non_null(file);
        size_t size = fread(text, 1, sizeof text, file);
        (void)fclose(file);
        struct part part;
        struct error err = {0};
        if (!part_read(path, text, size, &part, NULL, &err))
            fail_msg("%s", err.text);
        assert_string_equal(part.name, names[i]);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_whole_sheet_is_taken),
        cmocka_unit_test(every_complaint_has_file_line_and_what_is_allowed),
        cmocka_unit_test(all_complaints_are_collected_and_the_part_is_untouched),
        cmocka_unit_test(a_line_too_long_is_refused_not_cut),
        cmocka_unit_test(a_sheet_with_a_byte_order_mark_and_dos_line_ends_is_taken),
        cmocka_unit_test(the_sheets_that_we_ship_are_in_order),
        cmocka_unit_test(a_sheet_cut_anywhere_is_taken_or_refused_with_a_line),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
