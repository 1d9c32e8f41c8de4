/* Entries of some kinds and a span of time, a page at a time. */
#include "base/text.h"
#include "explanation_words.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include "record/views.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_KINDS 6
#define MAX_BYTES 400000
#define MAX_LOOKED 5000 /* where words are looked for; `next` says where to go on */

struct page {
    struct text *text;
    char needle[2][8 * REVIEW_WORD_SIZE]; /* what the body must hold; "" is nothing */
    uint32_t n, n_looked, limit;
    int64_t last_seq; /* the last one looked at */
    bool more;
};

static enum status take_entry(void *context, int n, const char *const *columns)
{
    struct page *page = context;
    const char *body = columns[3] ? columns[3] : "";
    (void)n;
    if (page->n == page->limit || page->n_looked == MAX_LOOKED || page->text->length > MAX_BYTES) {
        page->more = true;
        return STATUS_END;
    }
    page->n_looked++;
    page->last_seq = columns[0] ? strtoll(columns[0], NULL, 10) : 0;
    if (!strcasestr(body, page->needle[0]) || !strstr(body, page->needle[1]))
        return STATUS_OK;
    page->n++;
    json_next(page->text);
    text_append(page->text, "{");
    json_number(page->text, "seq", (double)page->last_seq, 0);
    json_text(page->text, "utc", columns[1]);
    json_text(page->text, "kind", columns[2]);
    json_text(page->text, "words", columns[4] ? columns[4] : body);
    json_name(page->text, "body");
    review_body(page->text, body);
    text_append(page->text, "}");
    return STATUS_OK;
}

/* Entries of a kind in the order of seq, with what they say in words. */
static void add_select(const char *kind, const char *where, const char *order, int limit, struct text *sql)
{
    text_format(sql, "SELECT * FROM (SELECT seq, utc, kind, body, CASE WHEN json_valid(body) THEN ");
    explanation_words(kind, sql);
    text_format(sql, " END FROM entry WHERE kind = '%s' AND %s ORDER BY seq%s LIMIT %d)", kind, where, order,
                limit);
}

/* One SELECT a kind, so that no kind is read whole to be sorted. */
static enum status make_sql(const struct review *review, int64_t first, int64_t last, struct text *sql)
{
    char kinds[REVIEW_WORD_SIZE], where[96], before[64], *rest = kinds;
    const char *kind;
    unsigned n = 0;
    snprintf(kinds, sizeof kinds, "%s", review->kind);
    snprintf(where, sizeof where, "seq BETWEEN %" PRId64 " AND %" PRId64, first, last);
    snprintf(before, sizeof before, "seq < %" PRId64, first);
    while ((kind = strsep(&rest, ","))) {
        if ((!views_has_kind(kind) && strcmp(kind, "sound") != 0) || ++n > MAX_KINDS)
            return STATUS_BAD_ARGUMENT;
        text_append(sql, n > 1 ? " UNION ALL " : "");
        add_select(kind, where, "", *review->job || *review->words ? MAX_LOOKED + 1 : (int)review->limit + 1,
                   sql);
        if (review->lead && review->after < 1) {
            text_append(sql, " UNION ALL ");
            add_select(kind, before, " DESC", 1, sql);
        }
    }
    text_append(sql, " ORDER BY seq");
    return sql->failed ? STATUS_NO_MEMORY : STATUS_OK;
}

static void make_needles(const struct review *review, struct page *page)
{
    struct text text = {0};
    text_json_string(&text, review->words);
    if (!text.failed) /* without its quotes */
        snprintf(page->needle[0], sizeof page->needle[0], "%.*s", (int)text.length - 2, text.data + 1);
    text_reset(&text);
    text_append(&text, "\"job\":");
    text_json_string(&text, review->job);
    if (!text.failed && *review->job)
        snprintf(page->needle[1], sizeof page->needle[1], "%s", text.data);
    text_destroy(&text);
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    const struct review *review = (struct review *)question;
    struct page *page = calloc(1, sizeof *page);
    struct text sql = {0};
    int64_t first, last;
    if (!page)
        return STATUS_NO_MEMORY;
    page->text = &question->text;
    page->limit = (uint32_t)review->limit;
    make_needles(review, page);
    enum status status = review_range(ledger, review, &first, &last);
    if (status == STATUS_OK && review->after >= (double)first)
        first = (int64_t)review->after + 1;
    if (status == STATUS_OK)
        status = make_sql(review, first, last, &sql);
    text_append(page->text, "{\"entries\":[");
    if (status == STATUS_OK)
        status = ledger_select(ledger, sql.data, 0, NULL, take_entry, page);
    text_append(page->text, "]");
    json_name(page->text, "next");
    text_json_number(page->text, page->more ? (double)page->last_seq : NAN, 0);
    text_append(page->text, "}\n");
    text_destroy(&sql);
    free(page);
    return status == STATUS_END ? STATUS_OK : status;
}

enum MHD_Result api_entries(struct request *request)
{
    return review_put(request, ask);
}
