/* hushwatch report --sheet: one printable page about a watch, from its ledger alone. */
#include "ledger/verify.h"
#include "verb/sheet.h"
#include "verb/verb.h"
#include <errno.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static const char help[] =
    "usage: hushwatch report LEDGER --sheet FILE\n\n"
    "Writes one printable HTML page about the watch, from the ledger alone: effort, unheard time, advice and "
    "answers,\n"
    "phases, contacts, what people entered, impulses, findings, the permit with the values that nobody has "
    "checked, and\n"
    "whether the ledger is as it was written. The page needs nothing else to be shown or printed. FILE is "
    "replaced.\n"
    "Exit code: 0 written, 1 written and the ledger has faults, 2 wrong use, 3 the system failed.\n";

static const char head[] =
    "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"/>\n"
    "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"/>\n<style>\n"
    "@page { size: A4; margin: 14mm 13mm; }\n"
    "body { font: 10pt/1.35 \"Liberation Sans\", \"Noto Sans\", Arial, sans-serif; color: #111; background: "
    "#fff; "
    "max-width: 190mm; margin: 6mm auto; padding: 0 4mm; }\n"
    "h1 { font-size: 18pt; margin: 0; }\n"
    "h2 { font-size: 11.5pt; margin: 6mm 0 1mm; border-bottom: 1.5pt solid #111; break-after: avoid; }\n"
    "p { margin: 1mm 0; } .remark { color: #444; font-size: 8.5pt; break-after: avoid; }\n"
    ".lead { margin: 1mm 0 3mm; }\n"
    ".caution, .check { border: 1.5pt solid #111; padding: 2mm 3mm; margin: 3mm 0; break-inside: avoid; }\n"
    ".check { border-style: dashed; } .bad { border: 4pt double #111; font-weight: 700; }\n"
    ".caution ul { margin: 1mm 0 0; padding-left: 5mm; }\n"
    "code { font-size: 8pt; overflow-wrap: anywhere; }\n"
    "table { border-collapse: collapse; width: 100%; font-size: 8.5pt; font-variant-numeric: tabular-nums; "
    "}\n"
    "th, td { text-align: left; vertical-align: top; padding: .7mm 2.5mm .7mm 0; "
    "border-bottom: .4pt solid #999; overflow-wrap: break-word; }\n"
    "th { font-weight: 600; border-bottom: .8pt solid #111; } thead { display: table-header-group; }\n"
    "tr { break-inside: avoid; } .n { text-align: right; padding-right: 3mm; white-space: nowrap; } .t { "
    "white-space: nowrap; }\n"
    "svg { width: 100%; font-size: 9px; break-inside: avoid; } svg .tick { font-size: 8px; text-anchor: "
    "middle; }\n"
    "svg .in { font-size: 8px; } .bar { fill: #111; } .grey { fill: #bbb; stroke: #111; stroke-width: .5; }\n"
    ".open { fill: #fff; stroke: #111; stroke-width: .8; } .hatch { fill: url(#hatch); }\n"
    ".axis { stroke: #aaa; stroke-width: .5; fill: none; }\n"
    "</style>\n<title>";

static const char cautions[] =
    "<div class=\"caution\"><strong>To be read first</strong><ul>\n"
    "<li>The permit itself and the competent authority come first; this page does not replace either.</li>\n"
    "<li>Acoustic silence does not prove absence: animals may be silent, out of reach or masked by "
    "noise.</li>\n"
    "<li>A qualified observer decides; what the program advised is advice.</li>\n"
    "<li>Values of the permit that are not marked as read must be checked against the document.</li>\n"
    "</ul></div>\n";

#define MAX_SHOWN_FAULTS 20

struct fault_list {
    struct sheet *sheet;
    unsigned n;
};

static void show_fault(void *context, int64_t seq, const char *sentence)
{
    struct fault_list *list = context;
    if (list->n++ >= MAX_SHOWN_FAULTS)
        return;
    if (seq > 0)
        text_format(&list->sheet->html, "<br/>entry %" PRId64 ": ", seq);
    else
        text_append(&list->sheet->html, "<br/>");
    sheet_text(list->sheet, sentence);
}

/* Whether the ledger is as it was written: before anything that is read out of it. */
static enum status put_check(struct sheet *sheet)
{
    struct sheet faults = {.ledger = sheet->ledger};
    struct fault_list list = {&faults, 0};
    struct verify_facts facts;
    enum status status = ledger_verify(sheet->ledger, show_fault, &list, &facts);
    struct text *html = &sheet->html;
    if (status == STATUS_OK)
        text_append(
            html,
            "<div class=\"check\"><strong>The ledger is good:</strong> order, hashes, form, table and views "
            "are as the program writes them.");
    else
        text_format(html,
                    "<div class=\"check bad\">THE LEDGER IS NOT AS IT WAS WRITTEN (%" PRIu64
                    " faults): do not rely "
                    "on this page.",
                    facts.n_faults);
    text_append(html, faults.html.data ? faults.html.data : "");
    text_format(html, "<br/>%" PRId64 " entries; last hash <code>%s</code></div>\n", facts.n_entries,
                facts.last_hash);
    if (faults.html.failed)
        html->failed = true;
    text_destroy(&faults.html);
    return status;
}

static enum status take_lead(void *context, int n, const char *const *columns)
{
    struct sheet *sheet = context;
    (void)n;
    text_append(&sheet->html, "<p class=\"lead\">");
    for (int i = 0; i < 2; i++) {
        sheet_text(sheet, columns[i]);
        text_append(&sheet->html, i == 0 ? "<br/>" : "");
    }
    text_append(&sheet->html, "</p>\n");
    return STATUS_OK;
}

/* The whole page; STATUS_MISMATCH when it is complete and the ledger has faults. */
static enum status make_page(struct sheet *sheet)
{
    static const char lead[] =
        "SELECT coalesce((SELECT group_concat(DISTINCT site) FROM run), 'site not named') || ', ' || "
        "replace(substr(min(utc), 1, 19), 'T', ' ') || ' to ' || replace(substr(max(utc), 1, 19), 'T', ' ') "
        "|| ' UTC', "
        "'Written from the ledger alone by hushwatch " HUSHWATCH_VERSION
        "; recorded by version ' || coalesce((SELECT "
        "group_concat(DISTINCT version) FROM run), 'unknown') || '.' FROM entry";
    text_append(&sheet->html, head);
    text_append(&sheet->html, "Report of a watch</title></head>\n<body><h1>Report of a watch</h1>\n");
    sheet_rows(sheet, lead, take_lead, sheet);
    text_append(&sheet->html, cautions);
    enum status check = put_check(sheet);
    if (check != STATUS_OK && check != STATUS_MISMATCH)
        return check;
    sheet_strip(sheet);
    for (const struct sheet_table *table = report_tables; table->title; table++)
        sheet_table(sheet, table);
    text_append(&sheet->html, "</body></html>\n");
    if (sheet->html.failed)
        return STATUS_NO_MEMORY;
    /* A ledger with faults may hold bodies that no query can read: the page then says what it could. */
    return sheet->status != STATUS_OK && check == STATUS_OK ? sheet->status : check;
}

/* Written beside and put in place at once, so that nobody ever sees half a page. */
static int write_page(const char *path, const struct text *html)
{
    char part[4096];
    if ((size_t)snprintf(part, sizeof part, "%s.part", path) >= sizeof part) {
        fprintf(stderr, "hushwatch report: the path is too long\n");
        return VERB_WRONG_USE;
    }
    FILE *file = fopen(part, "w");
    if (!file) {
        fprintf(stderr, "hushwatch report: %s: cannot be written (%s)\n", part, strerror(errno));
        return VERB_SYSTEM;
    }
    bool good = fwrite(html->data, 1, html->length, file) == html->length;
    good = fclose(file) == 0 && good;
    if (!good || rename(part, path) != 0) {
        fprintf(stderr, "hushwatch report: %s: cannot be written (%s)\n", path, strerror(errno));
        unlink(part);
        return VERB_SYSTEM;
    }
    return VERB_GOOD;
}

static int report(const char *ledger_path, const char *page_path)
{
    struct sheet sheet = {0};
    struct stat ledger_facts, page_facts;
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = ledger_open(ledger_path, LEDGER_READ, &sheet.ledger, problem);
    if (status != STATUS_OK) {
        fprintf(stderr, "hushwatch report: %s\n", problem);
        return status == STATUS_SYSTEM || status == STATUS_NO_MEMORY || status == STATUS_BUSY
                   ? VERB_SYSTEM
                   : VERB_WRONG_USE;
    }
    if (stat(ledger_path, &ledger_facts) == 0 && stat(page_path, &page_facts) == 0 &&
        ledger_facts.st_ino == page_facts.st_ino && ledger_facts.st_dev == page_facts.st_dev) {
        fprintf(stderr, "hushwatch report: %s is the ledger itself\n", page_path);
        ledger_close(sheet.ledger);
        return VERB_WRONG_USE;
    }
    status = make_page(&sheet);
    int result = VERB_SYSTEM;
    if (status == STATUS_OK || status == STATUS_MISMATCH)
        result = write_page(page_path, &sheet.html);
    else
        fprintf(stderr, "hushwatch report: %s: %s\n", ledger_path, status_text(status));
    ledger_close(sheet.ledger);
    text_destroy(&sheet.html);
    if (result != VERB_GOOD)
        return result;
    printf("%s: written%s\n", page_path, status == STATUS_MISMATCH ? "; the ledger has faults" : "");
    return status == STATUS_MISMATCH ? VERB_FOUND_WRONG : VERB_GOOD;
}

int verb_report(int argc, char **argv)
{
    const char *ledger = NULL, *page = NULL;
    bool good = true;
    if (argc == 2 && strcmp(argv[1], "--help") == 0) {
        fputs(help, stdout);
        return VERB_GOOD;
    }
    for (int i = 1; i < argc; i++) {
        if (strcmp(argv[i], "--sheet") == 0 && i + 1 < argc && !page)
            page = argv[++i];
        else if (argv[i][0] != '-' && !ledger)
            ledger = argv[i];
        else
            good = false;
    }
    if (!good || !ledger || !page) {
        fputs(help, stderr);
        return VERB_WRONG_USE;
    }
    return report(ledger, page);
}
