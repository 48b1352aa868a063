/* Repeat strikes on one specimen: modes followed from strike to strike, their statistics, whether
 * limits are met, and when to stop. No input or output, no clock, no samples: readings in, numbers
 * out. One series belongs to one thread at a time.
 *
 * What counts: strikes whose verdict is good and that nobody has set aside. Odd ones count too;
 * they are marked, and what would be without them is said. */
#ifndef WANE_SERIES_H
#define WANE_SERIES_H

#include "wane/error.h"
#include "wane/part.h"
#include "wane/reading.h"
#include "wane/statistics.h"
#include "wane/text.h"

#include <stdint.h>

#define SERIES_TRACKS_MAX  READING_MODES_MAX
#define SERIES_STRIKES_MAX 20000 /* the newest; older ones are forgotten here, not in the log */
#define SERIES_MORE_MAX    40    /* "40 or more": mend the set-up first */

/* --- following modes --- */

/* A mode as it is followed. Order: the part sheet's, else that of the first good strike. */
struct track {
    char label[READING_LABEL_MAX];
    double band_low_hz, band_high_hz; /* 0, 0: none */
    double centre_hz;                 /* 0: not seen yet */
    double scatter;                   /* mean |ln(f / centre)| from strike to strike */
    double q;                         /* of the last strike that had it */
    unsigned seen;                    /* good strikes that had it */
};

struct tracks {
    struct track tracks[SERIES_TRACKS_MAX];
    unsigned count;
    bool is_from_bands; /* the part sheet's bands: no further tracks are learned */
};

/* A sheet with modes gives the tracks by its bands; else (part NULL, or without modes) they are
 * learned from the good strikes, under the labels of the first. */
void tracks_init(struct tracks *tracks, const struct part *part);

/* Which mode of the reading is which track: out_modes [SERIES_TRACKS_MAX], an index in
 * reading->modes, or -1: a gap. Nearest in frequency, order kept (so that a doublet's halves never
 * change places), each mode once. learns: a good strike moves the tracks along with it (a part that
 * warms is followed) and adds tracks for new modes. */
void tracks_follow(struct tracks *tracks, const struct reading *reading, bool learns,
                   int out_modes[SERIES_TRACKS_MAX]);

/* --- limits --- */

enum decision {
    DECISION_NONE,   /* no limit, or nothing to hold against it */
    DECISION_INSIDE, /* with the guard band to spare */
    DECISION_OUTSIDE,
    DECISION_OPEN /* the limit lies within the uncertainty */
};

/* "inside" "outside" "not-decided"; NULL for NONE. */
const char *decision_name(enum decision decision);

/* A value against a range, with the half-width of its interval as guard band on both sides (after
 * ISO 14253-1: proving conformity and proving nonconformity alike; the standard's text was not
 * read). */
enum decision decide(const struct part_range *range, double value, double half_width);

/* Outside if any is, else open if any is, else inside if any is. */
enum decision decision_join(enum decision left, enum decision right);

enum limit_kind { LIMIT_VALUE, LIMIT_SPREAD, LIMIT_SPLIT };

struct limit_result {
    enum limit_kind kind;
    enum quantity quantity;
    char label[2 * READING_LABEL_MAX]; /* "1a"; of a split "1a 1b" */
    struct part_range range;
    double value,
        half_width; /* NAN: not read. Of a spread: sd / mean, and its upper 97.5 % end less it */
    enum decision decision;
    int more; /* strikes that would decide it if mean and spread hold; 0: decided; -1: not known or
                 over SERIES_MORE_MAX */
};

#define LIMITS_MAX (SERIES_TRACKS_MAX * 2 * QUANTITY_COUNT + PART_SPLITS_MAX)

/* One strike against a sheet's limits on values and splits (a spread needs a series). modes: from
 * tracks_follow with this sheet. clock_u_ppm: of the sample clock, 0 or NAN: left out. Gives how
 * many results were written; *out_all: all together. A mode that is missing leaves its limits open.
 */
unsigned decide_strike(const struct part *part, const int modes[SERIES_TRACKS_MAX],
                       const struct reading *reading, double clock_u_ppm,
                       struct limit_result out_results[LIMITS_MAX], enum decision *out_all);

/* --- a series --- */

struct series;

/* part: copied; NULL: none. clock_u_ppm as above. NULL when memory ran out. */
struct series *series_create(const struct part *part, double clock_u_ppm, struct error *err);
void series_destroy(struct series *series); /* NULL is allowed */

/* The next strike; ids grow. time_s: any steady scale, for drifts; NAN: not known. Fails
 * (ERROR_MEMORY) without having changed anything. */
bool series_add(struct series *series, int64_t id, double time_s, const struct reading *reading,
                bool is_set_aside, struct error *err);

/* A strike was set aside, taken back, or read again (reading not NULL). false: no such strike here.
 */
bool series_change(struct series *series, int64_t id, const struct reading *reading,
                   bool is_set_aside);

struct series_count {
    unsigned strikes, counted, doubtful, rejected, set_aside, forgotten;
};

struct series_stat {
    struct sample_spread spread; /* n: strikes that count and have the mode */
    double median;
    double within_u; /* root mean square of the strikes' own u */
    double ratio;    /* spread.sd / within_u: over 2 the tapping limits, near 1 the noise */
    unsigned odd;    /* how many are marked */
    double sd_without_odd;
    bool has_trend;        /* p < 0.001 with 6 strikes or more */
    struct line_fit trend; /* against the strike's place in the series: 0, 1, 2 ... */
    bool has_force;
    struct line_fit force; /* against the mode's level at the onset, dB */
    double wanted;         /* half-width that the sheet wants, of the mean; 0: none */
    int more; /* strikes until it is reached: 0 enough; -1 not known (no second strike, or
                 nothing wanted) */
    int more_without_odd;
};

struct series_mode {
    char label[READING_LABEL_MAX];
    unsigned n, gaps;
    bool is_rare; /* in under a fifth of five strikes or more */
    struct series_stat stats[QUANTITY_COUNT];
};

struct series_summary {
    struct series_count count;
    /* modes[0] leads: the part sheet's first, else the strongest of the first good strike. */
    struct series_mode modes[SERIES_TRACKS_MAX];
    unsigned mode_count;
    int more,
        more_without_odd; /* the largest of all that are wanted; -1: not known or none wanted */
    struct limit_result limits[LIMITS_MAX];
    unsigned limit_count;
    enum decision decision;
};

/* All figures anew. Some 2 ms for 1000 strikes of 8 modes. Fails (ERROR_MEMORY). */
bool series_summarize(struct series *series, struct series_summary *out_summary, struct error *err);

/* Whether the lead mode's f or Q of this strike is odd among the others. Of the last summary. */
bool series_is_odd(const struct series *series, int64_t id);

/* Further strikes n -> N with coverage_factor(0.95, N - 1) sd / sqrt N <= half_width, at most
 * SERIES_MORE_MAX; 0: reached. At least 3 strikes in all: a spread of two is luck. -1 below 2. */
int strikes_more(size_t n, double sd, double half_width);

/* The modes as they are followed now. */
const struct tracks *series_tracks(const struct series *series);

/* Follows the reading and gives its modes the tracks' labels; "other" for those that no track has.
 * Without any track yet the labels stay as they are. */
void tracks_label(struct tracks *tracks, struct reading *reading, bool learns);

/* decide_strike for a reading that carries the sheet's labels. A rejected strike has no values to
 * decide on: 0. */
unsigned part_decide(const struct part *part, const struct reading *reading, double clock_u_ppm,
                     struct limit_result out_results[LIMITS_MAX], enum decision *out_all);

/* The odd strikes of the last summary, ids growing; gives how many were written. */
unsigned series_odd_ids(const struct series *series, int64_t *out_ids, unsigned ids_max);

/* The lead mode of a strike that counts: f, decay, their u, level, label; the rest 0. false: no
 * such strike, it does not count, or it lacks the mode. */
bool series_lead(const struct series *series, int64_t id, struct mode *out_mode);

/* --- comparing --- */

struct mode_difference {
    char label[READING_LABEL_MAX];
    enum quantity quantity;
    struct sample_difference difference;
    bool is_more; /* they differ more than strikes do among themselves: p < 0.01 */
};

/* Second less first, for every label and quantity that both have twice or more. out
 * [SERIES_TRACKS_MAX x QUANTITY_COUNT]; gives how many were written. */
unsigned series_compare(const struct series_summary *first, const struct series_summary *second,
                        struct mode_difference *out_differences);

/* --- constants of a part --- */

#define PART_CONSTANTS_MAX 8

struct part_constant {
    const char *name, *unit; /* "Young's modulus", "Pa"; static text */
    bool is_known;           /* false: constant.remark says why not */
    struct constant constant;
};

/* A mode's f and decay for constants: of one strike, or the means of a series, with the sample
 * clock's uncertainty combined. f 0 when there is none (a gap, or a spread that is not known yet).
 */
struct ring ring_of_mode(const struct mode *mode, double clock_u_ppm);
struct ring ring_of_series(const struct series_mode *mode, double clock_u_ppm);

/* All constants that the sheet's body and the motions of its modes allow; rings [part->mode_count].
 * Gives how many were written; 0 for a sheet without a body. */
unsigned part_constants(const struct part *part, const struct ring *rings,
                        struct part_constant out_constants[PART_CONSTANTS_MAX]);

/* For people: value and u with the prefix that the unit is read with (Pa: GPa; H: mH; F: nF).
 * *out_unit: static text. */
struct measured constant_for_people(const struct part_constant *constant, const char **out_unit);

/* The array [{"name","unit","value","u","source","remark","budget":[{"of","share"}]}]; value and u
 * are null, and the remark says why, where a constant is not known. share: in the constant's unit.
 */
void constants_write_json(struct json_writer *json, const char *key,
                          const struct part_constant *constants, unsigned count);

/* --- JSON, the `statistics` of GET /series/ID --- */

/* The value of `key`, an object:
 * {"strikes":12,"counted":9,"doubtful":1,"rejected":1,"set_aside":1,"forgotten":0,"lead":"1a",
 *  "more":4|null,"more_without_odd":0|null,"more_is_over":false (true: 40 or more),
 *  "odd":[ids],"decision":"inside"|"outside"|"not-decided"|null,
 *  "modes":[{"label":"1a","n":9,"gaps":0,"rare":false,
 *            "f_hz":{"mean","sd","half_width" (95 %, of the mean),"median","within_u","ratio",
 *                    "limited_by":"tapping"|"noise"|null,"odd":1,"sd_without_odd",
 *                    "trend_per_strike","trend_u","has_trend","per_db","per_db_u","has_force",
 *                    "wanted" (half-width as a share) or null,"more" or null},
 *            "decay_per_s":{...},"q":{...},"zeta":{...},"t60_s":{...}}],
 *  "limits":[{"label":"1a","of":"f_hz"|"spread_q"|"split_hz","low","high","value","half_width",
 *             "decision","more"}]} */
void series_write_json(struct json_writer *json, const char *key, const struct series *series,
                       const struct series_summary *summary);

/* The array of a strike's limits as above, for `wane read --part` and the stream. */
void limits_write_json(struct json_writer *json, const char *key,
                       const struct limit_result *results, unsigned count);

#endif
