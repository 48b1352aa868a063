/* Reads part sheets. One table of keys a section; what a value may be stands in the function that
 * reads its kind. */
#include "wane/part.h"
#include "wane/settings.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

struct sheet {
    struct part part;
    const char *file_name;
    /* A split names its modes before they may be known. */
    char split_labels[PART_SPLITS_MAX][2][READING_LABEL_MAX];
    int split_lines[PART_SPLITS_MAX];
    int mode_lines[READING_MODES_MAX];
    int body_line;
};

static const char *skip_blanks(const char *text)
{
    return text + strspn(text, " \t");
}

static bool read_text(const char *value, char *out, struct error *err)
{
    if (strlen(value) >= PART_TEXT_MAX)
        return error_set(err, ERROR_USAGE, "too long: at most %d bytes", PART_TEXT_MAX - 1);
    memcpy(out, value, strlen(value) + 1);
    return true;
}

/* A piece of a value as a number: what lies before `end`, blanks at either side left out. */
static bool read_piece(const char *begin, const char *end, double *out_number, struct error *err)
{
    char piece[64];
    begin += strspn(begin, " \t");
    while (end > begin && (end[-1] == ' ' || end[-1] == '\t'))
        end--;
    size_t length = end > begin ? (size_t)(end - begin) : 0;
    if (length >= sizeof piece)
        return error_set(err, ERROR_USAGE, "this number has too many digits");
    memcpy(piece, begin, length);
    piece[length] = '\0';
    return settings_number(piece, -1e300, 1e300, out_number, err);
}

/* "400 ... 440", "... 440", "400 ..."; the sign between may also be one character (U+2026). */
static bool read_range(const char *value, struct part_range *out_range, struct error *err)
{
    const char *dots = strstr(value, "...");
    size_t dots_length = 3;
    if (dots == NULL)
        dots = strstr(value, "\xE2\x80\xA6");
    if (dots == NULL)
        return error_set(err, ERROR_USAGE,
                         "\"%s\" is no range: write 400 ... 440, or ... 440, or 400 ...", value);
    const char *low = skip_blanks(value), *high = skip_blanks(dots + dots_length);
    struct part_range range = {low < dots, *high != '\0', 0, 0};
    if (!range.has_low && !range.has_high)
        return error_set(err, ERROR_USAGE, "a range needs a number on one side at least");
    if ((range.has_low && !read_piece(low, dots, &range.low, err)) ||
        (range.has_high && !read_piece(high, high + strlen(high), &range.high, err)))
        return false;
    if (range.has_low && range.has_high && !(range.low < range.high))
        return error_set(err, ERROR_USAGE, "the lower end must come first, and below the upper");
    if ((range.has_low && range.low < 0) || (range.has_high && range.high <= 0))
        return error_set(err, ERROR_USAGE, "this cannot be negative");
    *out_range = range;
    return true;
}

/* "12.00 +- 0.02" or "12.00", times the unit; more than 0, the tolerance at least 0. */
static bool read_size(const char *value, double unit, struct measured *out_size, struct error *err)
{
    size_t sign_length = 2;
    const char *sign = strstr(value, "+-");
    if (sign == NULL)
        sign = strstr(value, "\xC2\xB1"); /* the sign as one letter, also two bytes */
    const char *end = value + strlen(value);
    double size, tolerance = 0;
    if (!read_piece(value, sign == NULL ? end : sign, &size, err) ||
        (sign != NULL && !read_piece(sign + sign_length, end, &tolerance, err)))
        return false;
    if (!(size > 0))
        return error_set(err, ERROR_USAGE, "this must be more than 0");
    if (!(tolerance >= 0 && tolerance < size))
        return error_set(err, ERROR_USAGE, "the +- must be at least 0 and less than the value");
    out_size->value = size * unit;
    out_size->u = tolerance * unit / sqrt(3.0);
    return true;
}

/* "0.01 %": shares are always written with their sign. */
static bool read_share(const char *value, double *out_share, struct error *err)
{
    const char *sign = strchr(value, '%');
    if (sign == NULL || *skip_blanks(sign + 1) != '\0')
        return error_set(err, ERROR_USAGE, "\"%s\" is no share: write it as in 0.5 %%", value);
    double percent;
    if (!read_piece(value, sign, &percent, err))
        return false;
    if (!(percent > 0 && percent <= 100))
        return error_set(err, ERROR_USAGE, "a share lies over 0 and up to 100 %%");
    *out_share = percent / 100;
    return true;
}

static bool read_word(const char *value, const char *const words[], size_t count,
                      unsigned *out_index, struct error *err)
{
    for (size_t i = 0; i < count; i++) {
        if (words[i] != NULL && strcmp(words[i], value) == 0) {
            *out_index = (unsigned)i;
            return true;
        }
    }
    return settings_refuse_word("choice", value, words, count, err);
}

static bool take_part_key(struct part *part, const struct settings_entry *entry, struct error *err)
{
    static const char *const keys[] = {"name", "material", "hint", "picture"};
    char *const places[] = {part->name, part->material, part->hint, part->picture};
    for (size_t i = 0; i < COUNT(keys); i++)
        if (strcmp(entry->key, keys[i]) == 0)
            return read_text(entry->value, places[i], err);
    return settings_refuse_word("key", entry->key, keys, COUNT(keys), err);
}

static bool take_body_key(struct sheet *sheet, const struct settings_entry *entry,
                          struct error *err)
{
    static const char *const keys[] = {"shape",         "length_mm", "width_mm", "thickness_mm",
                                       "diameter_mm",   "mass_g",    "poisson",  "capacitance_uf",
                                       "inductance_uh", "input_ohm", "input_pf"};
    static const double units[] = {0, 1e-3, 1e-3, 1e-3, 1e-3, 1e-3, 1, 1e-6, 1e-6, 1, 1e-12};
    static const char *const shapes[] = {"bar", "rod", "tank"};
    struct body *body = &sheet->part.body;
    struct measured *const places[] = {NULL,
                                       &body->length_m,
                                       &body->width_m,
                                       &body->thickness_m,
                                       &body->diameter_m,
                                       &body->mass_kg,
                                       &body->poisson,
                                       &body->capacitance_f,
                                       &body->inductance_h,
                                       &body->input_ohm,
                                       &body->input_f};
    if (strcmp(entry->key, "shape") == 0) {
        unsigned shape;
        if (!read_word(entry->value, shapes, COUNT(shapes), &shape, err))
            return false;
        body->shape = (enum body_shape)(BODY_BAR + shape);
        sheet->body_line = entry->line;
        return true;
    }
    for (size_t i = 1; i < COUNT(keys); i++) {
        if (strcmp(entry->key, keys[i]) != 0)
            continue;
        if (!read_size(entry->value, units[i], places[i], err))
            return false;
        if (places[i] == &body->poisson && body->poisson.value >= 0.5)
            return error_set(err, ERROR_USAGE, "Poisson's ratio lies below 0.5");
        return true;
    }
    return settings_refuse_word("key", entry->key, keys, COUNT(keys), err);
}

static bool take_band(struct part_mode *mode, const char *value, struct error *err)
{
    struct part_range band;
    if (!read_range(value, &band, err))
        return false;
    if (!band.has_low || !band.has_high)
        return error_set(err, ERROR_USAGE, "a band needs both ends: write 400 ... 440");
    mode->band_low_hz = band.low;
    mode->band_high_hz = band.high;
    return true;
}

/* The quantity of "spread_q" or "wanted_q", whose names are short: "f" for f_hz. */
static bool share_place(const char *name, double shares[QUANTITY_COUNT], double **out_place)
{
    static const char *const short_names[QUANTITY_COUNT] = {"f", "decay", "q", "zeta", "t60"};
    for (size_t i = 0; i < QUANTITY_COUNT; i++) {
        if (strcmp(name, short_names[i]) == 0) {
            *out_place = &shares[i];
            return true;
        }
    }
    return false;
}

static bool take_mode_key(struct part_mode *mode, const struct settings_entry *entry,
                          struct error *err)
{
    static const char *const keys[] = {
        "band_hz",  "motion",       "f_hz",     "decay_per_s", "q",          "zeta",
        "t60_s",    "spread_f",     "spread_q", "spread_zeta", "spread_t60", "spread_decay",
        "wanted_f", "wanted_decay", "wanted_q", "wanted_zeta", "wanted_t60"};
    static const char *const motions[] = {"flexure", "torsion", "lengthwise"};
    if (strcmp(entry->key, "band_hz") == 0)
        return take_band(mode, entry->value, err);
    if (strcmp(entry->key, "motion") == 0) {
        unsigned motion;
        if (!read_word(entry->value, motions, COUNT(motions), &motion, err))
            return false;
        mode->motion = (enum body_motion)(MOTION_FLEXURE + motion);
        return true;
    }
    for (unsigned i = 0; i < QUANTITY_COUNT; i++)
        if (strcmp(entry->key, quantity_name((enum quantity)i)) == 0)
            return read_range(entry->value, &mode->limits[i], err);
    double *place;
    if ((strncmp(entry->key, "spread_", 7) == 0 &&
         share_place(entry->key + 7, mode->spread_max, &place)) ||
        (strncmp(entry->key, "wanted_", 7) == 0 &&
         share_place(entry->key + 7, mode->wanted, &place)))
        return read_share(entry->value, place, err);
    return settings_refuse_word("key", entry->key, keys, COUNT(keys), err);
}

static int find_mode(const struct part *part, const char *label)
{
    for (unsigned i = 0; i < part->mode_count; i++)
        if (strcmp(part->modes[i].label, label) == 0)
            return (int)i;
    return -1;
}

/* The mode of [mode LABEL], made at its first key. */
static struct part_mode *mode_of_section(struct sheet *sheet, const char *label, int line,
                                         struct error *err)
{
    struct part *part = &sheet->part;
    size_t length = strlen(label);
    if (length == 0 || length >= READING_LABEL_MAX || strpbrk(label, " \t") != NULL) {
        error_set(err, ERROR_USAGE, "a mode's label is one word of 1 to %d letters",
                  READING_LABEL_MAX - 1);
        return NULL;
    }
    int found = find_mode(part, label);
    if (found >= 0)
        return &part->modes[found];
    if (part->mode_count == READING_MODES_MAX) {
        error_set(err, ERROR_USAGE, "too many modes: at most %d", READING_MODES_MAX);
        return NULL;
    }
    struct part_mode *mode = &part->modes[part->mode_count];
    sheet->mode_lines[part->mode_count++] = line;
    memcpy(mode->label, label, length + 1);
    return mode;
}

static bool take_split_key(struct sheet *sheet, const char *labels,
                           const struct settings_entry *entry, struct error *err)
{
    static const char *const keys[] = {"f_hz"};
    struct part *part = &sheet->part;
    char first[READING_LABEL_MAX], second[READING_LABEL_MAX], more[2];
    if (sscanf(labels, "%7s %7s %1s", first, second, more) != 2)
        return error_set(err, ERROR_USAGE, "a split names two modes: write [split 1a 1b]");
    if (strcmp(entry->key, keys[0]) != 0)
        return settings_refuse_word("key", entry->key, keys, COUNT(keys), err);
    if (part->split_count == PART_SPLITS_MAX)
        return error_set(err, ERROR_USAGE, "too many splits: at most %d", PART_SPLITS_MAX);
    if (!read_range(entry->value, &part->splits[part->split_count].f_hz, err))
        return false;
    memcpy(sheet->split_labels[part->split_count][0], first, sizeof first);
    memcpy(sheet->split_labels[part->split_count][1], second, sizeof second);
    sheet->split_lines[part->split_count++] = entry->line;
    return true;
}

static bool take_decide_key(struct part *part, const struct settings_entry *entry,
                            struct error *err)
{
    static const char *const keys[] = {"guard"};
    if (strcmp(entry->key, keys[0]) != 0)
        return settings_refuse_word("key", entry->key, keys, COUNT(keys), err);
    return settings_number(entry->value, 0, 10, &part->guard, err);
}

static bool take_entry(void *user, const struct settings_entry *entry, struct error *err)
{
    static const char *const sections[] = {"part", "body", "mode 1", "split 1a 1b", "decide"};
    struct sheet *sheet = user;
    const char *section = entry->section;
    if (strcmp(section, "part") == 0)
        return take_part_key(&sheet->part, entry, err);
    if (strcmp(section, "body") == 0)
        return take_body_key(sheet, entry, err);
    if (strcmp(section, "decide") == 0)
        return take_decide_key(&sheet->part, entry, err);
    if (strncmp(section, "split ", 6) == 0)
        return take_split_key(sheet, section + 6, entry, err);
    if (strncmp(section, "mode ", 5) == 0) {
        struct part_mode *mode = mode_of_section(sheet, skip_blanks(section + 5), entry->line, err);
        return mode != NULL && take_mode_key(mode, entry, err);
    }
    return section[0] == '\0'
               ? error_set(err, ERROR_USAGE, "a sheet begins with [part]")
               : settings_refuse_word("section", section, sections, COUNT(sections), err);
}

static bool complain(struct sheet *sheet, int line, struct text *complaints, struct error *err,
                     const char *sentence)
{
    if (complaints != NULL)
        text_appendf(complaints, "%s:%d: %s\n", sheet->file_name, line, sentence);
    if (err != NULL && err->kind == ERROR_NONE)
        error_set(err, ERROR_USAGE, "%s:%d: %s", sheet->file_name, line, sentence);
    return false;
}

static bool check_body(struct sheet *sheet, struct text *complaints, struct error *err)
{
    const struct body *body = &sheet->part.body;
    bool has_tank = body->capacitance_f.value > 0 || body->inductance_h.value > 0;
    if (body->shape == BODY_TANK && !has_tank)
        return complain(sheet, sheet->body_line, complaints, err,
                        "a tank needs capacitance_uf or inductance_uh, the one that is known");
    if (body->shape == BODY_TANK && body->capacitance_f.value > 0 && body->inductance_h.value > 0)
        return complain(sheet, sheet->body_line, complaints, err,
                        "give capacitance_uf or inductance_uh, not both: the ring tells the other");
    if (body->shape == BODY_ROD && !(body->length_m.value > 0 && body->diameter_m.value > 0))
        return complain(sheet, sheet->body_line, complaints, err,
                        "a rod needs length_mm and diameter_mm");
    if (body->shape == BODY_BAR &&
        !(body->length_m.value > 0 && body->width_m.value > 0 && body->thickness_m.value > 0))
        return complain(sheet, sheet->body_line, complaints, err,
                        "a bar needs length_mm, width_mm and thickness_mm");
    return true;
}

/* What only the whole sheet can tell. */
static bool check_whole(struct sheet *sheet, struct text *complaints, struct error *err)
{
    struct part *part = &sheet->part;
    bool is_right = check_body(sheet, complaints, err);
    if (part->name[0] == '\0')
        is_right = complain(sheet, 1, complaints, err,
                            "the sheet has no name: add name = ... under [part]");
    for (unsigned i = 0; i < part->mode_count; i++) {
        if (!(part->modes[i].band_high_hz > 0))
            is_right = complain(sheet, sheet->mode_lines[i], complaints, err,
                                "this mode needs a band_hz to be found by, as in 400 ... 440");
    }
    for (unsigned i = 0; i < part->split_count; i++) {
        int first = find_mode(part, sheet->split_labels[i][0]);
        int second = find_mode(part, sheet->split_labels[i][1]);
        if (first < 0 || second < 0 || first == second) {
            is_right = complain(sheet, sheet->split_lines[i], complaints, err,
                                "a split names two modes that the sheet has");
            continue;
        }
        part->splits[i].first = (unsigned)first;
        part->splits[i].second = (unsigned)second;
    }
    return is_right;
}

bool part_read(const char *file_name, const char *text, size_t size, struct part *out_part,
               struct text *out_complaints, struct error *err)
{
    if (size > PART_SHEET_MAX)
        return error_set(err, ERROR_LIMIT, "%s: a part sheet has at most %d bytes", file_name,
                         PART_SHEET_MAX);
    struct sheet *sheet = calloc(1, sizeof *sheet);
    if (sheet == NULL)
        return error_set(err, ERROR_MEMORY, "memory ran out while reading %s", file_name);
    sheet->file_name = file_name;
    sheet->part.guard = 2;
    struct error first = {0};
    bool is_right = settings_read(file_name, text, size, take_entry, sheet, out_complaints, &first);
    is_right = check_whole(sheet, out_complaints, &first) && is_right;
    if (is_right)
        *out_part = sheet->part;
    else if (err != NULL)
        *err = first;
    free(sheet);
    return is_right;
}
