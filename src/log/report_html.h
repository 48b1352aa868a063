/* Pieces of a report's HTML; private to log/. */
#ifndef WANE_LOG_REPORT_HTML_H
#define WANE_LOG_REPORT_HTML_H

#include "wane/series.h"
#include "wane/text.h"

/* Text, with the characters that mean something in HTML as entities, control characters as '?'. */
void html_text(struct text *out, const char *string);
/* value ± u, u to two digits, or an en dash. */
void html_measured(struct text *out, double value, double u);
/* A plain number with so many digits, or an en dash. */
void html_number(struct text *out, double value, int digits);
void html_row(struct text *out, const char *name, const char *value);
void html_head(struct text *out, const char *title);
void html_end(struct text *out);
/* "f" "decay" "Q" "zeta" "T60" and their units. */
const char *html_quantity(enum quantity quantity);
const char *html_unit(enum quantity quantity);

struct html_point {
    int64_t id;
    double value, u;
    bool is_counted, is_odd;
};

/* Values over their place in the series, bars of 2 u, the mean as a line. */
void html_chart(struct text *out, const char *title, const char *unit,
                const struct html_point *points, size_t count, double mean);

#endif
