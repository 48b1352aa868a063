/* A part sheet: what a kind of part is, its modes, its limits, its sizes. Plain data, no pointers.
 *
 * The sheet is a settings file (wane/settings.h), for example
 *
 *     [part]
 *     name = Brass rod 300
 *     material = CuZn37
 *     hint = Hang it on two threads a quarter from each end, tap the middle with a wooden stick
 *
 *     [body]
 *     shape = rod                 ; rod, bar or tank
 *     length_mm = 300.0 +- 0.1    ; +-: the size is known to lie within this (a tolerance)
 *     diameter_mm = 12.00 +- 0.02
 *     mass_g = 288.1 +- 0.1
 *
 *     [mode 1]                    ; the label; the first mode is the lead mode
 *     band_hz = 400 ... 440       ; where to look for it; without: learned from the first good
 * strike motion = flexure            ; flexure, torsion or lengthwise: for the constants f_hz = 415
 * ... 421          ; a limit; "... 421" and "415 ..." are open on one side q = 900 ... spread_q = 3
 * %              ; a limit on the standard deviation of a series, of the mean wanted_f = 0.01 % ;
 * known well enough when the 95 % interval is within this wanted_q = 1 %
 *
 *     [split 1a 1b]               ; the doublet's difference, second minus first
 *     f_hz = 2.300 ... 2.322
 *
 *     [decide]
 *     guard = 2                   ; guard band, in standard uncertainties
 */
#ifndef WANE_PART_H
#define WANE_PART_H

#include "wane/constants.h"
#include "wane/error.h"
#include "wane/reading.h"
#include "wane/text.h"

#include <stdbool.h>
#include <stddef.h>

#define PART_TEXT_MAX   200 /* bytes with the NUL */
#define PART_SPLITS_MAX 8
#define PART_SHEET_MAX  65536 /* bytes of a sheet */

/* What is followed, limited and charted of a mode. Names as in the JSON: f_hz, decay_per_s ... */
enum quantity {
    QUANTITY_F_HZ,
    QUANTITY_DECAY_PER_S,
    QUANTITY_Q,
    QUANTITY_ZETA,
    QUANTITY_T60_S,
    QUANTITY_COUNT
};

const char *quantity_name(enum quantity quantity);
/* Value and u of a quantity of a mode. */
struct measured quantity_of_mode(const struct mode *mode, enum quantity quantity);

/* = {0}: no limit. */
struct part_range {
    bool has_low, has_high;
    double low, high;
};

struct part_mode {
    char label[READING_LABEL_MAX];
    double band_low_hz, band_high_hz;
    enum body_motion motion;
    struct part_range limits[QUANTITY_COUNT];
    double spread_max[QUANTITY_COUNT]; /* sd / mean; 0: no limit */
    double wanted[QUANTITY_COUNT];     /* half-width of the 95 % interval / mean; 0: none wanted */
};

struct part_split {
    unsigned first, second; /* indices in modes */
    struct part_range f_hz; /* of second minus first */
};

struct part {
    char name[PART_TEXT_MAX], material[PART_TEXT_MAX], hint[PART_TEXT_MAX], picture[PART_TEXT_MAX];
    struct body body;
    struct part_mode modes[READING_MODES_MAX];
    unsigned mode_count;
    struct part_split splits[PART_SPLITS_MAX];
    unsigned split_count;
    double guard; /* guard band, in standard uncertainties; 2 unless the sheet says otherwise */
};

/* Reads a sheet, text [size]. A "+-" is taken as a tolerance, evenly likely within: u = tolerance /
 * sqrt 3 (GUM 4.3.7). All complaints, one a line with file and line, go to out_complaints (may be
 * NULL); fails (ERROR_USAGE) with the first. out_part is untouched on failure. Pure. */
bool part_read(const char *file_name, const char *text, size_t size, struct part *out_part,
               struct text *out_complaints, struct error *err);

#endif
