/* The report of a series or a strike: what was measured and how, figures,
 * decisions, constants, cautions, every strike. */
#include "wane/report.h"
#include "log/log_inner.h"
#include "log/log_read.h"
#include "log/pack.h"
#include "log/report_html.h"
#include "wane/sentence.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct line {
    int64_t id, time_ms, series;
    bool is_set_aside, is_odd;
    char input[LOG_NAME_MAX], source[LOG_NAME_MAX], part[LOG_NAME_MAX];
    char settings[LOG_SETTINGS_MAX], version[LOG_VERSION_MAX];
    char said[600]; /* why it was set aside, and the note */
    double rate_hz;
    struct reading reading;
};

struct report {
    const struct report_choice *choice;
    struct text *out;
    struct tally tally;
    struct line *lines; /* oldest first */
    size_t count, capacity;
    bool has_part;
    struct part part;
};

/* --- reading the log --- */

static bool take_line(struct report *report, sqlite3_stmt *row, struct error *err)
{
    if (report->count == report->capacity) {
        size_t capacity = report->capacity == 0 ? 32 : 2 * report->capacity;
        struct line *lines = realloc(report->lines, capacity * sizeof *lines);
        if (lines == NULL)
            return error_set(err, ERROR_MEMORY, "no memory for a report of %zu strikes", capacity);
        report->lines = lines;
        report->capacity = capacity;
    }
    struct line *line = &report->lines[report->count];
    struct strike head = {0};
    memset(line, 0, sizeof *line);
    line->id = sqlite3_column_int64(row, 0);
    line->time_ms = sqlite3_column_int64(row, 1);
    line->series = sqlite3_column_int64(row, 2);
    line->is_set_aside = sqlite3_column_type(row, 3) != SQLITE_NULL;
    line->is_odd = sqlite3_column_int(row, 4) != 0;
    snprintf(line->said, sizeof line->said, "%s%.250s%s%.250s",
             line->is_set_aside ? "Set aside: " : "", sql_text(row, 3),
             sql_text(row, 5)[0] != '\0' ? " Note: " : "", sql_text(row, 5));
    sql_copy_text(row, 6, line->input, sizeof line->input);
    sql_copy_text(row, 7, line->source, sizeof line->source);
    sql_copy_text(row, 8, line->part, sizeof line->part);
    sql_copy_text(row, 9, line->settings, sizeof line->settings);
    sql_copy_text(row, 10, line->version, sizeof line->version);
    if (!unpack_reading(sqlite3_column_blob(row, 11), (size_t)sqlite3_column_bytes(row, 11),
                        &line->reading, err) ||
        !unpack_strike(sqlite3_column_blob(row, 12), (size_t)sqlite3_column_bytes(row, 12), &head,
                       err))
        return false;
    line->rate_hz = head.rate_hz;
    report->count++;
    return true;
}

static bool read_lines(struct report *report, struct log_reader *reader, struct error *err)
{
#define SELECT                                                                                     \
    "SELECT s.id, s.time_ms, s.series, s.set_aside, s.odd, s.note, s.input, "                      \
    "s.source, s.part,"                                                                            \
    " r.settings, r.version, s.fit, s.head FROM strike AS s"                                       \
    " CROSS JOIN recipe AS r ON r.id = s.recipe WHERE "
    bool is_series = report->choice->series != 0;
    sqlite3_stmt *statement = sql_prepare(
        reader->db, is_series ? SELECT "s.series = ?1 ORDER BY s.id" : SELECT "s.id = ?1", err);
#undef SELECT
    if (statement == NULL)
        return false;
    sqlite3_bind_int64(statement, 1, is_series ? report->choice->series : report->choice->strike);
    bool is_good = true;
    enum sql_row row = SQL_END;
    while (is_good && (row = sql_next(statement, err)) == SQL_ROW)
        is_good = take_line(report, statement, err);
    sqlite3_finalize(statement);
    if (is_good && row == SQL_END && report->count == 0 && !is_series)
        return error_set(err, ERROR_NOT_FOUND, "there is no strike %lld in the log",
                         (long long)report->choice->strike);
    return is_good && row == SQL_END;
}

static void read_part_of(struct report *report, struct log_reader *reader,
                         const struct shelf *shelf)
{
    struct text sheet = {0};
    struct error err;
    char etag[LOG_ETAG_MAX];
    const char *name = report->choice->series != 0 ? report->tally.about.part
                       : report->count > 0         ? report->lines[0].part
                                                   : "";
    if (name[0] != '\0' && shelf_read(reader, shelf, name, &sheet, etag, NULL, &err))
        report->has_part = part_read(name, sheet.data != NULL ? sheet.data : "", sheet.length,
                                     &report->part, NULL, &err);
    text_done(&sheet);
}

/* --- what was measured, and how --- */

static void write_times(char *out, size_t size, int64_t from_ms, int64_t to_ms)
{
    struct text text = {0};
    struct json_writer json = {.text = &text};
    log_write_time(&json, NULL, from_ms);
    struct json_writer more = {.text = &text};
    text_append(&text, " to ");
    log_write_time(&more, NULL, to_ms);
    size_t at = 0;
    for (size_t i = 0; text.data != NULL && i < text.length && at + 1 < size; i++) {
        if (text.data[i] != '"')
            out[at++] = text.data[i];
    }
    out[at] = '\0';
    if (from_ms == to_ms && strstr(out, " to ") != NULL)
        *strstr(out, " to ") = '\0';
    text_done(&text);
}

static void write_subject(struct report *report)
{
    struct text *out = report->out;
    char words[200] = "";
    const struct line *first = report->count > 0 ? &report->lines[0] : NULL;
    text_append(out, "<h2>What was measured, and how</h2>\n<table>\n");
    if (report->choice->series != 0) {
        html_row(out, "Series", report->tally.about.name);
        html_row(out, "Specimen", report->tally.about.specimen);
        html_row(out, "Part", report->tally.about.part);
        html_row(out, "Part sheet not used", report->tally.part_problem);
        html_row(out, "Input", report->tally.about.input);
    }
    if (report->has_part) {
        html_row(out, "Material", report->part.material);
        html_row(out, "Struck so", report->part.hint);
    }
    if (first != NULL) {
        html_row(out, report->choice->series != 0 ? "First strike's input" : "Input", first->input);
        html_row(out, "Recording", first->source);
        snprintf(words, sizeof words, "%.9g Hz", first->rate_hz);
        html_row(out, "Sample rate", words);
        write_times(words, sizeof words, first->time_ms, report->lines[report->count - 1].time_ms);
        html_row(out, "Struck", words);
        html_row(out, "Settings of the fit",
                 first->settings[0] != '\0' ? first->settings : "as they come");
        snprintf(words, sizeof words, "Wane %s", first->version);
        html_row(out, "Read with", words);
    }
    const char *clock = first != NULL ? strstr(first->settings, "clock_ppm=") : NULL;
    clock = clock != NULL ? clock + strlen("clock_ppm=") : "0";
    snprintf(words, sizeof words, "corrected by %.*s ppm", (int)strcspn(clock, " "), clock);
    html_row(out, "Sample clock",
             strtod(clock, NULL) != 0
                 ? words
                 : "not compared with a standard: no correction was made, and its own uncertainty "
                   "is not in the figures (a crystal is commonly within 100 ppm; common practice, "
                   "no source)");
    html_row(out, "Method",
             "Each strike's ring-down is fitted with damped sinusoids from the "
             "samples themselves; "
             "u is one standard uncertainty (JCGM 100:2008, GUM).");
    text_append(out, "</table>\n");
}

/* --- statistics --- */

static void write_statistics_row(struct report *report, const struct series_mode *mode,
                                 enum quantity quantity)
{
    struct text *out = report->out;
    const struct series_stat *stat = &mode->stats[quantity];
    text_append(out, "<tr><th scope=\"row\">");
    html_text(out, mode->label);
    text_append(out, "</th><td class=\"w\">");
    text_append(out, html_quantity(quantity));
    if (html_unit(quantity)[0] != '\0')
        text_appendf(out, " (%s)", html_unit(quantity));
    text_appendf(out, "</td><td>%u</td><td>", mode->n);
    html_measured(out, stat->spread.mean, stat->spread.half_width);
    text_append(out, "</td><td>");
    html_number(out, stat->spread.sd, 3);
    text_append(out, "</td><td>");
    html_number(out, stat->within_u, 3);
    text_append(out, "</td><td>");
    html_number(out, stat->spread.mean_u, 3);
    text_append(out, "</td><td class=\"w\">");
    if (isfinite(stat->ratio))
        text_append(out, stat->ratio > 2 ? "tapping" : "noise");
    if (stat->has_trend)
        text_append(out, "; moves along the series");
    if (stat->has_force)
        text_append(out, "; goes with the strike's force");
    text_append(out, "</td></tr>\n");
}

static void write_statistics(struct report *report)
{
    struct text *out = report->out;
    const struct series_summary *summary = &report->tally.summary;
    text_append(out, "<h2>Statistics</h2>\n");
    text_appendf(out,
                 "<p>%u strikes: %u count, %u doubtful, %u rejected, %u set "
                 "aside. After each mean "
                 "stands the half-width of its 95 %% interval (Student).</p>\n",
                 summary->count.strikes, summary->count.counted, summary->count.doubtful,
                 summary->count.rejected, summary->count.set_aside);
    text_append(out, "<table><thead><tr><th>mode</th><th "
                     "class=\"w\">figure</th><th>n</th><th>mean</th>"
                     "<th>between strikes, sd</th><th>within a strike, "
                     "u</th><th>of the mean, u</th>"
                     "<th class=\"w\">limited by</th></tr></thead><tbody>\n");
    for (unsigned i = 0; i < summary->mode_count; i++) {
        for (unsigned q = 0; q < QUANTITY_COUNT; q++)
            write_statistics_row(report, &summary->modes[i], (enum quantity)q);
    }
    text_append(out, "</tbody></table>\n<p class=\"s\">Uncertainty budget of a "
                     "mean: strikes among "
                     "themselves give sd / √n, which holds each strike's own "
                     "noise already; the sample "
                     "clock adds its share to f, decay and T60 (none is known "
                     "here), and none to Q and "
                     "ζ.</p>\n");
}

static void write_limits(struct report *report, const struct limit_result *limits, unsigned count)
{
    struct text *out = report->out;
    if (count == 0)
        return;
    text_append(out, "<h2>Limits of the part sheet</h2>\n<table><thead><tr><th>mode</th><th "
                     "class=\"w\">figure</th><th>low</th><th>high</th><th>found</th><th "
                     "class=\"w\">"
                     "decision</th></tr></thead><tbody>\n");
    for (unsigned i = 0; i < count; i++) {
        const struct limit_result *limit = &limits[i];
        const char *decision = decision_name(limit->decision);
        text_append(out, "<tr><th scope=\"row\">");
        html_text(out, limit->label);
        text_appendf(out, "</th><td class=\"w\">%s%s</td><td>",
                     limit->kind == LIMIT_SPLIT ? "difference, Hz" : html_quantity(limit->quantity),
                     limit->kind == LIMIT_SPREAD ? ", sd over mean" : "");
        html_number(out, limit->range.has_low ? limit->range.low : (double)NAN, 9);
        text_append(out, "</td><td>");
        html_number(out, limit->range.has_high ? limit->range.high : (double)NAN, 9);
        text_append(out, "</td><td>");
        html_measured(out, limit->value, limit->half_width);
        text_appendf(out, "</td><td class=\"w%s\">%s</td></tr>\n",
                     limit->decision == DECISION_OUTSIDE ? " out" : "",
                     limit->decision == DECISION_OPEN ? "not decided"
                     : decision != NULL               ? decision
                                                      : "–");
    }
    text_append(out, "</tbody></table>\n<p class=\"s\">A limit counts as met, or "
                     "missed, only when "
                     "the interval lies wholly on one side of it.</p>\n");
}

/* --- constants --- */

static void write_budget(struct report *report, const struct constant *constant)
{
    for (size_t i = 0; i < constant->budget.count; i++) {
        text_append(report->out, i > 0 ? "; " : "");
        html_text(report->out, constant->budget.lines[i].name);
        text_append(report->out, " ");
        html_number(report->out, constant->budget.lines[i].share, 3);
    }
}

static void write_constants(struct report *report, const struct ring *rings)
{
    struct text *out = report->out;
    struct part_constant constants[PART_CONSTANTS_MAX];
    unsigned count = report->has_part ? part_constants(&report->part, rings, constants) : 0;
    if (count == 0)
        return;
    text_append(out, "<h2>Constants</h2>\n<table><thead><tr><th>constant</"
                     "th><th>value ± u</th><th "
                     "class=\"w\">unit</th><th class=\"w\">budget (share of u, "
                     "same unit)</th><th "
                     "class=\"w\">formula, remark</th></tr></thead><tbody>\n");
    for (unsigned i = 0; i < count; i++) {
        const struct part_constant *entry = &constants[i];
        const char *unit = NULL;
        struct measured shown = constant_for_people(entry, &unit);
        text_append(out, "<tr><th scope=\"row\">");
        html_text(out, entry->name);
        text_append(out, "</th><td>");
        if (entry->is_known)
            html_measured(out, shown.value, shown.u);
        else
            text_append(out, "–");
        text_append(out, "</td><td class=\"w\">");
        html_text(out, unit);
        text_append(out, "</td><td class=\"w\">");
        if (entry->is_known)
            write_budget(report, &entry->constant);
        text_append(out, "</td><td class=\"w\">");
        if (entry->is_known && entry->constant.source != NULL)
            html_text(out, entry->constant.source);
        text_append(out, " ");
        html_text(out, entry->constant.remark);
        text_append(out, "</td></tr>\n");
    }
    text_append(out, "</tbody></table>\n");
}

static void write_constants_of_series(struct report *report)
{
    struct ring rings[READING_MODES_MAX] = {{{0, 0}, {0, 0}, 0}};
    const struct series_summary *summary = &report->tally.summary;
    for (unsigned i = 0; i < report->part.mode_count; i++) {
        for (unsigned k = 0; k < summary->mode_count; k++) {
            if (strcmp(report->part.modes[i].label, summary->modes[k].label) == 0)
                rings[i] = ring_of_series(&summary->modes[k], report->tally.clock_u_ppm);
        }
    }
    write_constants(report, rings);
}

static void write_constants_of_strike(struct report *report, const struct reading *reading)
{
    struct ring rings[READING_MODES_MAX] = {{{0, 0}, {0, 0}, 0}};
    for (unsigned i = 0; i < report->part.mode_count; i++) {
        for (unsigned k = 0; k < reading->mode_count; k++) {
            if (strcmp(report->part.modes[i].label, reading->modes[k].label) == 0)
                rings[i] = ring_of_mode(&reading->modes[k], 0);
        }
    }
    write_constants(report, rings);
}

/* --- strikes --- */

static const struct mode *find_mode(const struct reading *reading, const char *label)
{
    for (unsigned i = 0; i < reading->mode_count; i++) {
        if (label == NULL || strcmp(reading->modes[i].label, label) == 0)
            return &reading->modes[i];
    }
    return NULL;
}

static void write_charts(struct report *report, const char *label)
{
    struct html_point *points = calloc(report->count + 1, sizeof *points);
    static const enum quantity drawn[2] = {QUANTITY_F_HZ, QUANTITY_Q};
    if (points == NULL)
        return;
    text_append(report->out, "<h2>Strike by strike</h2>\n");
    for (unsigned i = 0; i < 2; i++) {
        size_t count = 0;
        for (size_t k = 0; k < report->count; k++) {
            const struct line *line = &report->lines[k];
            const struct mode *mode = find_mode(&line->reading, label);
            if (mode == NULL || line->reading.verdict == VERDICT_REJECTED)
                continue;
            struct measured value = quantity_of_mode(mode, drawn[i]);
            points[count++] = (struct html_point){
                line->id, value.value, value.u,
                line->reading.verdict == VERDICT_GOOD && !line->is_set_aside, line->is_odd};
        }
        char title[40];
        snprintf(title, sizeof title, "%s of mode %s", html_quantity(drawn[i]), label);
        html_chart(report->out, title, html_unit(drawn[i]), points, count,
                   report->tally.summary.modes[0].stats[drawn[i]].spread.mean);
    }
    free(points);
    text_append(report->out,
                "<p class=\"s\">Bars: two standard uncertainties of the strike itself. "
                "Hollow: does not count. Red ring: odd. Dashed: the mean.</p>\n");
}

static void write_strikes(struct report *report, const char *label)
{
    struct text *out = report->out;
    text_append(out, "<h2>Every strike</h2>\n<table><thead><tr><th>strike</th><th "
                     "class=\"w\">time "
                     "(UTC)</th><th class=\"w\">verdict</th><th>f "
                     "(Hz)</th><th>Q</th><th>T60 (s)</th>"
                     "<th class=\"w\">what is said of it</th></tr></thead><tbody>\n");
    for (size_t i = 0; i < report->count; i++) {
        const struct line *line = &report->lines[i];
        const struct mode *mode = find_mode(&line->reading, label);
        char time[80];
        struct text said = {0};
        write_times(time, sizeof time, line->time_ms, line->time_ms);
        bool counts = line->reading.verdict == VERDICT_GOOD && !line->is_set_aside;
        text_appendf(out,
                     "<tr%s><th scope=\"row\">%lld</th><td class=\"w\">%s</td><td "
                     "class=\"w\">%s",
                     counts ? "" : " class=\"off\"", (long long)line->id, time,
                     verdict_name(line->reading.verdict));
        text_append(out, line->is_odd ? ", odd</td><td>" : "</td><td>");
        if (mode != NULL)
            html_measured(out, mode->f_hz, mode->f_u_hz);
        text_append(out, "</td><td>");
        if (mode != NULL)
            html_measured(out, mode->q, mode->q_u);
        text_append(out, "</td><td>");
        if (mode != NULL)
            html_measured(out, mode->t60_s, mode->t60_u_s);
        text_append(out, "</td><td class=\"w\">");
        sentence_append(&said, &line->reading, line->rate_hz,
                        report->has_part && report->part.body.shape == BODY_TANK ? SENTENCE_TANK
                                                                                 : SENTENCE_STRUCK);
        html_text(out, said.data != NULL ? said.data : "");
        text_append(out, said.length > 0 ? " " : "");
        html_text(out, line->said);
        text_append(out, "</td></tr>\n");
        text_done(&said);
    }
    text_append(out, "</tbody></table>\n");
}

static void write_modes(struct report *report, const struct reading *reading)
{
    struct text *out = report->out;
    text_append(out, "<h2>Modes</h2>\n<table><thead><tr><th>mode</th><th>f (Hz)</th><th>decay "
                     "(1/s)</th><th>Q</th><th>ζ</th><th>T60 (s)</th></tr></thead><tbody>\n");
    for (unsigned i = 0; i < reading->mode_count; i++) {
        text_append(out, "<tr><th scope=\"row\">");
        html_text(out, reading->modes[i].label);
        text_append(out, "</th>");
        for (unsigned q = 0; q < QUANTITY_COUNT; q++) {
            struct measured value = quantity_of_mode(&reading->modes[i], (enum quantity)q);
            text_append(out, "<td>");
            html_measured(out, value.value, value.u);
            text_append(out, "</td>");
        }
        text_append(out, "</tr>\n");
    }
    text_append(out, "</tbody></table>\n");
}

static void write_cautions(struct report *report)
{
    text_append(report->out, "<h2>Cautions</h2>\n<p>Figures hold for this "
                             "specimen, held and struck as it was. "
                             "Glass can break: wear eye protection. ");
    if (report->has_part && report->part.body.shape == BODY_TANK)
        text_append(report->out, "Never ring a circuit that is tied to mains; discharge capacitors "
                                 "first, and leave high voltage to licensed people. ");
    text_append(report->out, "Where a code or a standard governs the part, it comes before this "
                             "report.</p>\n");
}

static void write_series(struct report *report)
{
    const struct series_summary *summary = &report->tally.summary;
    const char *label = summary->mode_count > 0 ? summary->modes[0].label : NULL;
    write_subject(report);
    write_statistics(report);
    if (label != NULL)
        write_charts(report, label);
    write_limits(report, summary->limits, summary->limit_count);
    write_constants_of_series(report);
    write_cautions(report);
    write_strikes(report, label);
}

static void write_strike(struct report *report)
{
    struct limit_result *limits = calloc(LIMITS_MAX, sizeof *limits);
    const struct reading *reading = &report->lines[0].reading;
    enum decision all;
    write_subject(report);
    write_modes(report, reading);
    if (limits != NULL && report->has_part)
        write_limits(report, limits, part_decide(&report->part, reading, 0, limits, &all));
    free(limits);
    write_constants_of_strike(report, reading);
    write_cautions(report);
    write_strikes(report, NULL);
}

static void write_page(struct report *report)
{
    char title[300], time[80];
    if (report->choice->series != 0)
        snprintf(title, sizeof title, "Ring-down of series %lld%s%s",
                 (long long)report->choice->series, report->tally.about.name[0] != '\0' ? ": " : "",
                 report->tally.about.name);
    else
        snprintf(title, sizeof title, "Ring-down of strike %lld",
                 (long long)report->choice->strike);
    html_head(report->out, title);
    text_append(report->out, "<h1>");
    html_text(report->out, title);
    write_times(time, sizeof time, report->choice->now_ms, report->choice->now_ms);
    text_appendf(report->out, "</h1>\n<p class=\"s\">Report of %s, by Wane ", time);
    html_text(report->out, report->choice->version);
    text_append(report->out, "</p>\n");
    if (report->choice->series != 0)
        write_series(report);
    else
        write_strike(report);
    html_end(report->out);
}

bool report_write(struct log_reader *reader, const struct shelf *shelf,
                  const struct report_choice *choice, struct text *out, struct error *err)
{
    struct report *report = calloc(1, sizeof *report);
    if (report == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for a report");
    report->choice = choice;
    report->out = out;
    bool is_good =
        (choice->series == 0 || tally_update(&report->tally, reader, shelf, choice->series, err)) &&
        read_lines(report, reader, err);
    if (is_good) {
        read_part_of(report, reader, shelf);
        write_page(report);
        is_good = !out->failed || error_set(err, ERROR_MEMORY, "no memory for a report");
    }
    tally_done(&report->tally);
    free(report->lines);
    free(report);
    return is_good;
}
