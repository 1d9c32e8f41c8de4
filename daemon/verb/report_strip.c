/* The watch at a glance: one time axis, a row each for who watched, what was unheard, contacts, phases,
 * advice and impulses. Drawn in black on white with shapes, for paper. */
#include "verb/sheet.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define LEFT 92.0
#define WIDTH 600.0
#define ROW 20.0

/* SQL reads in its own lines. */
/* clang-format off */

/* Watch time of a UTC text, by the first run's zero. */
#define ZERO_UTC \
    "coalesce((SELECT watch_zero_utc FROM run ORDER BY seq LIMIT 1)," \
    " (SELECT utc FROM entry ORDER BY seq LIMIT 1))"
#define WATCH_S(utc) "((julianday(" utc ") - julianday(" ZERO_UTC ")) * 86400)"
#define END_S "(SELECT " WATCH_S("utc") " FROM entry ORDER BY seq DESC LIMIT 1)"
#define WATCHED(watch) \
    "SELECT " WATCH_S("utc") ", (SELECT min(" WATCH_S("b.utc") ") FROM note AS b WHERE b.note = 'sign-off'" \
    " AND b.person = a.person AND (b.watch IS NULL OR b.watch = a.watch) AND b.seq > a.seq), 'bar'" \
    " FROM note AS a WHERE a.note = 'sign-on' AND a.watch = '" watch "'"

static const char visual_sql[] = WATCHED("visual");
static const char acoustic_sql[] = WATCHED("acoustic");
static const char unheard_sql[] =
    "SELECT start_s, end_s, 'hatch' FROM unheard UNION ALL"
    " SELECT outage_start_s, outage_end_s, 'hatch' FROM run WHERE outage_end_s > outage_start_s";
static const char phase_sql[] =
    "SELECT " WATCH_S("utc") ", lead(" WATCH_S("utc") ") OVER (ORDER BY seq),"
    " CASE WHEN phase IN ('soft start', 'hold', 'full power', 'reduced', 'vibro', 'drilling', 'test')"
    " THEN 'grey' ELSE 'open' END, phase FROM phase";
/* Entries of a contact are its changes, so that one which is open last is open to the end. */
static const char contact_sql[] =
    "SELECT min(" WATCH_S("utc") "), CASE WHEN (SELECT state FROM contact AS last"
    " WHERE last.contact = c.contact ORDER BY seq DESC LIMIT 1) <> 'open' THEN max(" WATCH_S("utc") ") END,"
    " CASE WHEN max(grade = 'act') THEN 'bar' ELSE 'open' END FROM contact AS c GROUP BY contact";
static const char advice_sql[] =
    "SELECT " WATCH_S("utc") ", CASE WHEN advice IN ('stop', 'do not start', 'hold power', 'reduce power',"
    " 'prepare to stop') THEN 'stop' ELSE '' END FROM advice WHERE station <> 'observer' ORDER BY 2, 1";
/* As many marks as the picture is wide, however many impulses there were. */
static const char impulse_sql[] =
    "SELECT min(time_s), min(time_s), 'bar' FROM impulse, (SELECT max(1e-6, " END_S ") / 600 AS step)"
    " GROUP BY CAST(time_s / step AS INTEGER)";

/* clang-format on */

struct strip {
    struct sheet *sheet;
    double start_s, end_s;
    double y; /* of the row that is drawn */
};

static double x_of(const struct strip *strip, const char *seconds)
{
    double s = seconds ? strtod(seconds, NULL) : strip->end_s;
    double part = (s - strip->start_s) / (strip->end_s - strip->start_s);
    return LEFT + WIDTH * (part < 0 ? 0 : part > 1 ? 1 : part);
}

/* Rows: start, end, css class, label or NULL. */
static enum status draw_bar(void *context, int n, const char *const *columns)
{
    struct strip *strip = context;
    struct text *html = &strip->sheet->html;
    double x = x_of(strip, columns[0]), end = x_of(strip, columns[1]);
    double width = end - x < 1 ? 1 : end - x;
    text_format(html, "<rect class=\"%s\" x=\"%.1f\" y=\"%.1f\" width=\"%.1f\" height=\"%.1f\"/>",
                columns[2] ? columns[2] : "bar", x, strip->y + 4, width, ROW - 8);
    /* A label only where it fits: about 4.6 units a letter at this size. */
    if (n > 3 && columns[3] && (double)strlen(columns[3]) * 4.6 < width) {
        text_format(html, "<text class=\"in\" x=\"%.1f\" y=\"%.1f\">", x + 2, strip->y + ROW - 7);
        sheet_text(strip->sheet, columns[3]);
        text_append(html, "</text>");
    }
    text_append(html, "\n");
    return STATUS_OK;
}

/* Rows: time, class: "stop" (a filled triangle downwards) or another (an open circle). */
static enum status draw_mark(void *context, int n, const char *const *columns)
{
    struct strip *strip = context;
    double x = x_of(strip, columns[0]), y = strip->y;
    (void)n;
    if (columns[1] && strcmp(columns[1], "stop") == 0)
        text_format(&strip->sheet->html, "<path class=\"bar\" d=\"M%.1f %.1fl8 0l-4 9z\"/>\n", x - 4, y + 5);
    else
        text_format(&strip->sheet->html, "<circle class=\"open\" cx=\"%.1f\" cy=\"%.1f\" r=\"3.5\"/>\n", x,
                    y + ROW / 2);
    return STATUS_OK;
}

struct row {
    const char *label;
    enum status (*draw)(void *context, int n, const char *const *columns);
    const char *sql;
};

static const struct row rows[] = {
    {"visual watch", draw_bar, visual_sql}, {"acoustic watch", draw_bar, acoustic_sql},
    {"unheard", draw_bar, unheard_sql},     {"phase", draw_bar, phase_sql},
    {"contacts", draw_bar, contact_sql},    {"advice", draw_mark, advice_sql},
    {"impulses", draw_bar, impulse_sql},
};
#define N_ROWS (sizeof rows / sizeof rows[0])

static double step_of(double span_s)
{
    static const double steps[] = {1, 5, 10, 30, 60, 300, 600, 1800, 3600, 7200, 21600, 43200};
    for (size_t i = 0; i < sizeof steps / sizeof steps[0]; i++)
        if (span_s / steps[i] <= 8)
            return steps[i];
    return 86400 * (double)(1 + (long)(span_s / 86400 / 8));
}

static enum status take_label(void *context, int n, const char *const *columns)
{
    (void)n;
    sheet_text(context, columns[0]);
    return STATUS_OK;
}

/* Lines at round times since watch time zero, labelled with the UTC there. */
static void draw_axis(struct strip *strip, double bottom)
{
    struct text *html = &strip->sheet->html;
    double step = step_of(strip->end_s - strip->start_s);
    for (double s = step * (double)(long)(strip->start_s / step); s <= strip->end_s; s += step) {
        char seconds[40], sql[400];
        if (s < strip->start_s)
            continue;
        snprintf(seconds, sizeof seconds, "%.3f", s);
        double x = x_of(strip, seconds);
        text_format(html,
                    "<path class=\"axis\" d=\"M%.1f 0V%.1f\"/><text x=\"%.1f\" y=\"%.1f\" class=\"tick\">", x,
                    bottom, x, bottom + 11);
        snprintf(sql, sizeof sql, "SELECT strftime('%s', " ZERO_UTC ", '%.3f seconds')",
                 step < 60 ? "%H:%M:%S" : "%H:%M", s);
        sheet_rows(strip->sheet, sql, take_label, strip->sheet);
        text_append(html, "</text>\n");
    }
}

void sheet_strip(struct sheet *sheet)
{
    struct text *html = &sheet->html;
    struct strip strip = {.sheet = sheet};
    strip.start_s = sheet_number(sheet, "SELECT " WATCH_S("utc") " FROM entry ORDER BY seq LIMIT 1", 0);
    strip.end_s = sheet_number(sheet, "SELECT " END_S, 0);
    if (!(strip.end_s > strip.start_s))
        return;
    double bottom = ROW * (double)N_ROWS;
    sheet_heading(sheet, "The watch at a glance");
    text_append(
        html,
        "<p class=\"remark\">UTC. Filled: a watch was kept, an act contact, advice against work, impulses. "
        "Grey: the source worked. Hatched: unheard. A circle: other advice to the crew.</p>\n");
    text_format(html, "<svg viewBox=\"0 0 %.0f %.0f\" role=\"img\" aria-label=\"The watch at a glance\">\n",
                LEFT + WIDTH + 12, bottom + 16);
    text_append(html,
                "<defs><pattern id=\"hatch\" width=\"4\" height=\"4\" patternUnits=\"userSpaceOnUse\" "
                "patternTransform=\"rotate(45)\"><path d=\"M0 0V4\" stroke=\"#000\" stroke-width=\"2.4\"/>"
                "</pattern></defs>\n");
    draw_axis(&strip, bottom);
    for (size_t i = 0; i < N_ROWS; i++) {
        strip.y = ROW * (double)i;
        text_format(html, "<text x=\"0\" y=\"%.1f\">%s</text><path class=\"axis\" d=\"M%.1f %.1fh%.1f\"/>\n",
                    strip.y + ROW - 6, rows[i].label, LEFT, strip.y + ROW, WIDTH);
        sheet_rows(sheet, rows[i].sql, rows[i].draw, &strip);
    }
    text_append(html, "</svg>\n");
}
