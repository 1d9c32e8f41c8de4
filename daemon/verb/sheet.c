/* HTML that is also well-formed XML, so that any tool can read the page. */
#include "verb/sheet.h"
#include <stdlib.h>
#include <string.h>

void sheet_text(struct sheet *sheet, const char *text)
{
    for (; text && *text; text++) {
        char piece[2] = {*text, '\0'};
        unsigned char c = (unsigned char)*text;
        text_append(&sheet->html, c == '&'                             ? "&amp;"
                                  : c == '<'                           ? "&lt;"
                                  : c == '>'                           ? "&gt;"
                                  : c == '"'                           ? "&quot;"
                                  : c == '\n'                          ? "<br/>"
                                  : c < 0x20 && c != '\t' && c != '\r' ? "?"
                                                                       : piece);
    }
}

void sheet_heading(struct sheet *sheet, const char *title)
{
    text_append(&sheet->html, "<h2>");
    sheet_text(sheet, title);
    text_append(&sheet->html, "</h2>\n");
}

void sheet_rows(struct sheet *sheet, const char *sql,
                enum status (*take)(void *context, int n, const char *const *columns), void *context)
{
    enum status status = ledger_select(sheet->ledger, sql, 0, NULL, take, context);
    if (status != STATUS_OK && sheet->status == STATUS_OK)
        sheet->status = status;
}

static enum status take_number(void *context, int n, const char *const *columns)
{
    (void)n;
    if (columns[0])
        *(double *)context = strtod(columns[0], NULL);
    return STATUS_OK;
}

double sheet_number(struct sheet *sheet, const char *sql, double otherwise)
{
    double number = otherwise;
    sheet_rows(sheet, sql, take_number, &number);
    return number;
}

struct table_state {
    struct sheet *sheet;
    const struct sheet_table *table;
    unsigned rows;
};

static void open_table(struct table_state *state)
{
    struct text *html = &state->sheet->html;
    text_append(html, "<table><thead><tr>");
    for (int i = 0; state->table->heads[i]; i++) {
        const char *head = state->table->heads[i];
        text_append(html, *head == '#' ? "<th class=\"n\">" : "<th>");
        sheet_text(state->sheet, head + (*head == '#' || *head == '@'));
        text_append(html, "</th>");
    }
    text_append(html, "</tr></thead><tbody>\n");
}

static enum status take_row(void *context, int n, const char *const *columns)
{
    struct table_state *state = context;
    struct text *html = &state->sheet->html;
    if (state->rows++ == 0)
        open_table(state);
    text_append(html, "<tr>");
    for (int i = 0; i < n && state->table->heads[i]; i++) {
        char mark = state->table->heads[i][0];
        text_append(html, mark == '#' ? "<td class=\"n\">" : mark == '@' ? "<td class=\"t\">" : "<td>");
        sheet_text(state->sheet, columns[i]);
        text_append(html, "</td>");
    }
    text_append(html, "</tr>\n");
    return html->failed ? STATUS_NO_MEMORY : STATUS_OK;
}

void sheet_table(struct sheet *sheet, const struct sheet_table *table)
{
    struct table_state state = {sheet, table, 0};
    sheet_heading(sheet, table->title);
    if (table->remark) {
        text_append(&sheet->html, "<p class=\"remark\">");
        sheet_text(sheet, table->remark);
        text_append(&sheet->html, "</p>\n");
    }
    sheet_rows(sheet, table->sql, take_row, &state);
    if (state.rows > 0) {
        text_append(&sheet->html, "</tbody></table>\n");
        return;
    }
    text_append(&sheet->html, "<p>");
    sheet_text(sheet, table->empty);
    text_append(&sheet->html, "</p>\n");
}
