#include "cli/read_rows.h"

#include "cli/table.h"
#include "wane/json.h"
#include "wane/sentence.h"

#include <math.h>
#include <string.h>

/* --- JSON --- */

static void append_json(struct text *text, const char *source, const struct read_row *row,
                        const struct judgement *judgement)
{
    struct json_writer json = {.text = text};
    json_open_object(&json, NULL);
    json_string(&json, "source", source);
    json_integer(&json, "strike", (int64_t)row->number);
    json_reading(&json, row->strike, row->reading);
    if (judgement != NULL) {
        json_string(&json, "part", judgement->part);
        json_string(&json, "decision", decision_name(judgement->all));
        limits_write_json(&json, "limits", judgement->limits, judgement->limit_count);
    }
    json_close_object(&json);
    text_append(text, "\n");
}

/* --- CSV --- */

static const char csv_head[] =
    "source,channel,strike,onset_s,window_begin_s,window_end_s,peak_dbfs,noise_dbfs,snr_db,verdict,"
    "reasons,remarks,mode,f_hz,f_u_hz,decay_per_s,decay_u_per_s,q,q_u,zeta,zeta_u,natural_f_hz,"
    "t60_s,t60_u_s,level_dbfs,phase_rad,decision\n";

static void append_quoted(struct text *text, const char *field)
{
    if (strpbrk(field, ",\"\r\n") == NULL) {
        text_append(text, field);
        return;
    }
    text_append(text, "\"");
    for (const char *at = field; *at != '\0'; at++)
        text_append_bytes(text, *at == '"' ? "\"\"" : at, *at == '"' ? 2 : 1);
    text_append(text, "\"");
}

/* Empty where the number is not known. */
static void append_field(struct text *text, double value, int digits)
{
    text_append(text, ",");
    if (isfinite(value))
        text_appendf(text, "%.*g", digits, value == 0 ? 0 : value);
}

static void append_measured_field(struct text *text, double value, double u)
{
    struct json_writer json = {.text = text};
    text_append(text, ",");
    if (isfinite(value))
        json_measured(&json, NULL, value, u);
}

static void append_words(struct text *text, unsigned bits, unsigned count, bool are_reasons)
{
    const char *between = ",";
    if (bits == 0)
        text_append(text, ",");
    for (unsigned i = 0; i < count; i++) {
        if ((bits & (1U << i)) == 0)
            continue;
        text_append(text, between);
        text_append(text, are_reasons ? reason_name((enum reason)i) : remark_name((enum remark)i));
        between = " ";
    }
}

static void append_csv_mode(struct text *text, const struct mode *mode)
{
    text_appendf(text, ",%s", mode->label);
    append_measured_field(text, mode->f_hz, mode->f_u_hz);
    append_field(text, mode->f_u_hz, 3);
    append_measured_field(text, mode->decay_per_s, mode->decay_u_per_s);
    append_field(text, mode->decay_u_per_s, 3);
    append_measured_field(text, mode->q, mode->q_u);
    append_field(text, mode->q_u, 3);
    append_measured_field(text, mode->zeta, mode->zeta_u);
    append_field(text, mode->zeta_u, 3);
    append_measured_field(text, mode->natural_f_hz, mode->f_u_hz);
    append_measured_field(text, mode->t60_s, mode->t60_u_s);
    append_field(text, mode->t60_u_s, 3);
    append_field(text, mode->level_dbfs, 5);
    append_field(text, mode->phase_rad, 5);
}

static double seconds_of(const struct strike *strike, double frame)
{
    return ((double)strike->first_frame + frame) / strike->rate_hz;
}

static void append_csv(struct text *text, const char *source, const struct read_row *row,
                       const struct judgement *judgement)
{
    const struct reading *reading = row->reading;
    unsigned rows = reading->mode_count > 0 ? reading->mode_count : 1;
    for (unsigned i = 0; i < rows; i++) {
        append_quoted(text, source);
        text_appendf(text, ",%d,%llu", row->strike->channel, (unsigned long long)row->number);
        append_field(text, seconds_of(row->strike, reading->onset_frame), 12);
        append_field(text, seconds_of(row->strike, reading->window_begin_frame), 12);
        append_field(text, seconds_of(row->strike, reading->window_end_frame), 12);
        append_field(text, reading->peak_dbfs, 5);
        append_field(text, reading->noise_dbfs, 5);
        append_field(text, reading->snr_db, 5);
        text_appendf(text, ",%s", verdict_name(reading->verdict));
        append_words(text, reading->reasons, REASON_COUNT, true);
        append_words(text, reading->remarks, REMARK_COUNT, false);
        if (reading->mode_count > 0)
            append_csv_mode(text, &reading->modes[i]);
        else
            text_append(text, ",,,,,,,,,,,,,,");
        const char *decision = judgement != NULL ? decision_name(judgement->all) : NULL;
        text_appendf(text, ",%s\n", decision != NULL ? decision : "");
    }
}

/* --- Table --- */

#define WIDTH_STRIKE  8
#define WIDTH_ONSET   10
#define WIDTH_VERDICT 10
#define WIDTH_MODE    5
#define WIDTH_F       25
#define WIDTH_DECAY   22
#define WIDTH_Q       20
#define WIDTH_T60     22

static void append_columns(struct text *text)
{
    table_text(text, "strike", WIDTH_STRIKE);
    table_text(text, "onset, s", WIDTH_ONSET);
    table_text(text, "verdict", WIDTH_VERDICT);
    table_text(text, "mode", WIDTH_MODE);
    table_text(text, "f, Hz", WIDTH_F);
    table_text(text, "decay, 1/s", WIDTH_DECAY);
    table_text(text, "Q", WIDTH_Q);
    table_text(text, "T60, s", WIDTH_T60);
    text_append(text, "dBFS\n");
}

static void append_mode(struct text *text, const struct mode *mode)
{
    table_text(text, mode->label, WIDTH_MODE);
    table_value(text, mode->f_hz, mode->f_u_hz, WIDTH_F);
    table_value(text, mode->decay_per_s, mode->decay_u_per_s, WIDTH_DECAY);
    table_value(text, mode->q, mode->q_u, WIDTH_Q);
    table_value(text, mode->t60_s, mode->t60_u_s, WIDTH_T60);
    text_appendf(text, "%.1f\n", mode->level_dbfs);
}

static void append_note(struct text *text, const struct read_row *row)
{
    const struct reading *reading = row->reading;
    size_t begin = text->length;
    sentence_append(text, reading, row->strike->rate_hz, SENTENCE_STRUCK);
    for (unsigned i = 0; i < REMARK_COUNT; i++) {
        if ((reading->remarks & (1U << i)) != 0)
            text_appendf(text, "%s(%s)", text->length > begin ? " " : "",
                         remark_name((enum remark)i));
    }
    if (text->length > begin)
        text_append(text, "\n");
}

/* "limits: inside", or each limit that is not: what, the range, what was read. */
static void append_judgement(struct text *text, const struct judgement *judgement)
{
    const char *all = decision_name(judgement->all);
    if (all == NULL)
        return;
    table_pad(text, text->length, WIDTH_STRIKE);
    text_appendf(text, "limits: %s\n", all);
    for (unsigned i = 0; i < judgement->limit_count; i++) {
        const struct limit_result *limit = &judgement->limits[i];
        if (limit->decision != DECISION_OUTSIDE && limit->decision != DECISION_OPEN)
            continue;
        table_pad(text, text->length, WIDTH_STRIKE);
        text_appendf(text, "  mode %s %s ", limit->label,
                     limit->kind == LIMIT_SPLIT ? "split_hz" : quantity_name(limit->quantity));
        if (isfinite(limit->value))
            text_append_measured(text, limit->value, limit->half_width, 2);
        else
            text_append(text, "was not read");
        text_append(text, limit->decision == DECISION_OUTSIDE ? " is outside "
                                                              : ", not decided against ");
        if (limit->range.has_low)
            text_appendf(text, "%.10g ", limit->range.low);
        text_append(text, "...");
        if (limit->range.has_high)
            text_appendf(text, " %.10g", limit->range.high);
        text_append(text, "\n");
    }
}

static void append_table(struct text *text, bool has_channels, const struct read_row *row,
                         const struct judgement *judgement)
{
    const struct reading *reading = row->reading;
    const size_t indent = WIDTH_STRIKE + WIDTH_ONSET + WIDTH_VERDICT;
    if (row->number == 1)
        append_columns(text);
    size_t begin = text->length;
    text_appendf(text, "%llu", (unsigned long long)row->number);
    if (has_channels)
        text_appendf(text, " ch%d", row->strike->channel);
    table_pad(text, begin, WIDTH_STRIKE);
    begin = text->length;
    text_appendf(text, "%.4f", seconds_of(row->strike, reading->onset_frame));
    table_pad(text, begin, WIDTH_ONSET);
    table_text(text, verdict_name(reading->verdict), WIDTH_VERDICT);
    if (reading->mode_count == 0)
        text_append(text, "no mode\n");
    for (unsigned i = 0; i < reading->mode_count; i++) {
        if (i > 0)
            table_pad(text, text->length, indent);
        append_mode(text, &reading->modes[i]);
    }
    struct text note = {0};
    append_note(&note, row);
    if (note.length > 0) {
        table_pad(text, text->length, WIDTH_STRIKE);
        text_append(text, note.data);
    }
    text->failed = text->failed || note.failed;
    text_done(&note);
    if (judgement != NULL)
        append_judgement(text, judgement);
}

/* --- All forms --- */

void rows_append_head(struct text *text, enum rows_form form)
{
    if (form == ROWS_CSV)
        text_append(text, csv_head);
}

void rows_append(struct text *text, enum rows_form form, const char *source, bool has_channels,
                 const struct read_row *row, const struct judgement *judgement)
{
    if (form == ROWS_JSON)
        append_json(text, source, row, judgement);
    else if (form == ROWS_CSV)
        append_csv(text, source, row, judgement);
    else
        append_table(text, has_channels, row, judgement);
}

void rows_append_title(struct text *text, const char *source, const struct input_info *info,
                       int channel)
{
    text_appendf(text, "%s: %.0f Hz, ", source, info->rate_hz);
    if (channel > 0)
        text_appendf(text, "channel %d of %d\n", channel, info->channels);
    else
        text_appendf(text, "all %d channels\n", info->channels);
}

void rows_append_total(struct text *text, const uint64_t counts[3])
{
    uint64_t all = counts[VERDICT_GOOD] + counts[VERDICT_DOUBTFUL] + counts[VERDICT_REJECTED];
    const char *between = ": ";
    if (all == 0) {
        text_append(text, "no strike found\n\n");
        return;
    }
    text_appendf(text, "%llu strike%s", (unsigned long long)all, all == 1 ? "" : "s");
    for (int i = VERDICT_GOOD; i <= VERDICT_REJECTED; i++) {
        if (counts[i] == 0)
            continue;
        text_appendf(text, "%s%llu %s", between, (unsigned long long)counts[i],
                     verdict_name((enum verdict)i));
        between = ", ";
    }
    text_append(text, "\n\n");
}
