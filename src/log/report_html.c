#include "log/report_html.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

void html_text(struct text *out, const char *string)
{
    for (; *string != '\0'; string++) {
        char c = *string;
        if (c == '&')
            text_append(out, "&amp;");
        else if (c == '<')
            text_append(out, "&lt;");
        else if (c == '>')
            text_append(out, "&gt;");
        else if (c == '"')
            text_append(out, "&quot;");
        else if (c == '\'')
            text_append(out, "&#39;");
        else if ((unsigned char)c < 0x20 && c != '\n' && c != '\t')
            text_append(out, "?");
        else
            text_append_bytes(out, &c, 1);
    }
}

void html_measured(struct text *out, double value, double u)
{
    if (!isfinite(value)) {
        text_append(out, "–");
    } else if (isfinite(u) && u > 0) {
        text_append_measured(out, value, u, 2);
        text_append(out, " ± ");
        text_append_measured(out, u, u, 2);
    } else {
        html_number(out, value, 8);
    }
}

void html_number(struct text *out, double value, int digits)
{
    struct json_writer json = {.text = out};
    if (isfinite(value))
        json_number(&json, NULL, value, digits);
    else
        text_append(out, "–");
}

void html_row(struct text *out, const char *name, const char *value)
{
    if (value == NULL || value[0] == '\0')
        return;
    text_append(out, "<tr><th scope=\"row\">");
    html_text(out, name);
    text_append(out, "</th><td class=\"w\">");
    html_text(out, value);
    text_append(out, "</td></tr>\n");
}

void html_head(struct text *out, const char *title)
{
    text_append(out, "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\">\n<title>");
    html_text(out, title);
    text_append(
        out, "</title>\n<meta name=\"viewport\" content=\"width=device-width\">\n<style>\n"
             "@page{margin:18mm 16mm}\n"
             "body{font:10.5pt/1.45 Georgia,'DejaVu Serif',serif;color:#111;background:#fff;"
             "max-width:178mm;margin:0 auto;padding:1em}\n"
             "h1{font-size:17pt;margin:0 0 .2em}h2{font-size:12.5pt;margin:1.5em 0 .4em;"
             "break-after:avoid}\n"
             "table{border-collapse:collapse;width:100%;font-size:9pt;font-variant-numeric:"
             "tabular-nums}\n"
             "th,td{text-align:right;padding:.18em .5em;border-bottom:1px solid #ccc;"
             "vertical-align:top}\n"
             "th:first-child,.w{text-align:left}thead{display:table-header-group}tr{break-inside:"
             "avoid}\n"
             "svg{width:100%;height:auto;break-inside:avoid}p.s{font-size:9pt;color:#444}\n"
             ".off td,.off th{color:#666;font-style:italic}.out{font-weight:bold}\n"
             "</style></head><body>\n");
}

void html_end(struct text *out)
{
    text_append(out, "</body></html>\n");
}

const char *html_quantity(enum quantity quantity)
{
    static const char *const names[QUANTITY_COUNT] = {"f", "decay", "Q", "ζ", "T60"};
    return names[quantity];
}

const char *html_unit(enum quantity quantity)
{
    static const char *const units[QUANTITY_COUNT] = {"Hz", "1/s", "", "", "s"};
    return units[quantity];
}

#define CHART_WIDTH  680.0
#define CHART_HEIGHT 190.0
#define CHART_LEFT   92.0
#define CHART_BOTTOM 160.0
#define CHART_TOP    12.0

static void spread_of(const struct html_point *points, size_t count, double *out_low,
                      double *out_high)
{
    double low = HUGE_VAL, high = -HUGE_VAL;
    for (size_t i = 0; i < count; i++) {
        double half = isfinite(points[i].u) ? 2 * points[i].u : 0;
        low = fmin(low, points[i].value - half);
        high = fmax(high, points[i].value + half);
    }
    double pad = high > low ? 0.08 * (high - low) : fmax(fabs(high), 1) * 1e-6;
    *out_low = low - pad;
    *out_high = high + pad;
}

void html_chart(struct text *out, const char *title, const char *unit,
                const struct html_point *points, size_t count, double mean)
{
    double low, high;
    if (count == 0)
        return;
    spread_of(points, count, &low, &high);
    double scale = (CHART_BOTTOM - CHART_TOP) / (high - low);
    text_append(out, "<svg viewBox=\"0 0 680 190\" role=\"img\" aria-label=\"");
    html_text(out, title);
    text_append(out, " over the strikes\" font-family=\"sans-serif\" font-size=\"11\">\n");
    text_appendf(out,
                 "<path d=\"M%.0f %.0fV%.0fH%.0f\" fill=\"none\" stroke=\"#555\"/>\n"
                 "<text x=\"%.0f\" y=\"%.0f\">",
                 CHART_LEFT, CHART_TOP, CHART_BOTTOM, CHART_WIDTH - 8, CHART_LEFT + 8,
                 CHART_TOP + 6);
    html_text(out, title);
    text_append(out, unit[0] != '\0' ? ", " : "");
    html_text(out, unit);
    text_append(out, "</text>\n");
    const double ticks[3] = {low + 0.1 * (high - low), (low + high) / 2, high - 0.1 * (high - low)};
    for (unsigned i = 0; i < 3; i++) {
        text_appendf(out, "<text x=\"%.0f\" y=\"%.1f\" text-anchor=\"end\">", CHART_LEFT - 6,
                     CHART_BOTTOM - scale * (ticks[i] - low) + 4);
        text_append_measured(out, ticks[i], (high - low) / 10, 2);
        text_append(out, "</text>\n");
    }
    if (isfinite(mean))
        text_appendf(out,
                     "<path d=\"M%.0f %.1fH%.0f\" stroke=\"#888\" stroke-dasharray=\"5 4\"/>\n",
                     CHART_LEFT, CHART_BOTTOM - scale * (mean - low), CHART_WIDTH - 8);
    for (size_t i = 0; i < count; i++) {
        const struct html_point *point = &points[i];
        double x = CHART_LEFT + (CHART_WIDTH - 8 - CHART_LEFT) * ((double)i + 0.5) / (double)count;
        double y = CHART_BOTTOM - scale * (point->value - low);
        double half = isfinite(point->u) ? 2 * point->u * scale : 0;
        text_appendf(out,
                     "<path d=\"M%.1f %.1fV%.1f\" stroke=\"#333\"/><circle cx=\"%.1f\" cy=\"%.1f\" "
                     "r=\"3\" fill=\"%s\" stroke=\"%s\"/>\n",
                     x, y - half, y + half, x, y, point->is_counted ? "#14506e" : "#fff",
                     point->is_odd ? "#b3261e" : "#14506e");
        if (i == 0 || i + 1 == count || point->is_odd)
            text_appendf(out, "<text x=\"%.1f\" y=\"178\" text-anchor=\"middle\">%lld</text>\n", x,
                         (long long)point->id);
    }
    text_append(out, "</svg>\n");
}
