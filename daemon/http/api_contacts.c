/* Contacts as they stood at their last change, with the verdict of a person; a page at a time. */
#include "base/text.h"
#include "base/time.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include <inttypes.h>
#include <jansson.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* SQL reads in its own lines. */
/* clang-format off */
#define OF(name) "json_extract(body, '$." name "')"
/* ?1: the last seq; ?2: numbers above; ?3: the earliest last change; ?4: '1' for dismissed act contacts alone. */
static const char contacts_sql[] =
    "WITH " REVIEW_CLIPS_SQL ", change AS (SELECT seq, utc, " OF("contact") " AS n, " OF("grade") " AS grade, " OF("n_calls") " AS n_calls"
    " FROM entry WHERE kind = 'contact' AND seq <= ?1 + 0 AND json_valid(body)),"
    " sums AS (SELECT n, min(seq) AS first_seq, max(seq) AS last_seq, min(utc) AS first_utc, max(utc) AS last_utc,"
    " max(n_calls) AS n_calls, CASE max(CASE grade WHEN 'act' THEN 2 WHEN 'look' THEN 1 ELSE 0 END) WHEN 2 THEN 'act'"
    " WHEN 1 THEN 'look' ELSE '' END AS grade FROM change GROUP BY n HAVING n > ?2 + 0)"
    " SELECT sums.n, first_utc, last_utc, sums.grade, sums.n_calls, last.id, last.\"group\", last.state, last.distance_p05_m,"
    " last.distance_p50_m, last.distance_p95_m,"
    " (SELECT body FROM entry WHERE kind = 'note' AND seq <= last_seq AND seq >= first_seq AND json_valid(body)"
    "  AND " OF("note") " = 'verdict' AND " OF("contact") " = sums.n ORDER BY seq DESC LIMIT 1),"
    " (SELECT json_group_array(clip.id) FROM clip WHERE clip.n = sums.n)"
    " FROM sums JOIN contact AS last ON last.seq = last_seq"
    " WHERE (last_utc >= ?3 OR last.state = 'open') AND (?4 <> '1' OR (last.state = 'dismissed' AND sums.grade = 'act'))"
    " ORDER BY sums.n";
/* clang-format on */

struct page {
    struct text *text;
    const char *group; /* "": any */
    uint32_t n, limit;
    double last;
    bool more;
};

static void add_number(struct text *text, const char *name, const char *value, int decimals)
{
    json_number(text, name, value ? strtod(value, NULL) : NAN, decimals);
}

static void add_text(struct text *text, const char *name, const char *value)
{
    json_text(text, name, value ? value : "");
}

static void words_json(struct text *text, const char *const *columns)
{
    struct text words = {0};
    json_t *verdict = columns[11] ? json_loads(columns[11], 0, NULL) : NULL;
    const char *person = json_string_value(json_object_get(verdict, "person"));
    const char *why = json_string_value(json_object_get(verdict, "text"));
    const char *known[9];
    for (int i = 0; i < 9; i++)
        known[i] = columns[i] ? columns[i] : "?";
    text_format(&words, "contact %s, %s, %s, %s, %.10s %.8s to %.8s, %s calls, ", known[0], known[6],
                *known[3] ? known[3] : "no grade", known[7], known[1],
                strlen(known[1]) > 19 ? known[1] + 11 : "", strlen(known[2]) > 19 ? known[2] + 11 : known[2],
                known[4]);
    if (columns[8] && columns[10])
        text_format(&words, "%.0f to %.0f m", strtod(columns[8], NULL), strtod(columns[10], NULL));
    else
        text_append(&words, "range unknown");
    if (verdict)
        text_format(&words, "; %s: %s", person ? person : "?", why ? why : "no reason");
    json_text(text, "words", words.failed ? "" : words.data);
    text_destroy(&words);
    json_decref(verdict);
}

static enum status take_contact(void *context, int n, const char *const *columns)
{
    struct page *page = context;
    struct text *text = page->text;
    (void)n;
    if (*page->group && (!columns[6] || strcmp(columns[6], page->group) != 0))
        return STATUS_OK;
    if (page->n == page->limit) {
        page->more = true;
        return STATUS_END;
    }
    page->n++;
    page->last = columns[0] ? strtod(columns[0], NULL) : 0;
    json_next(text);
    text_append(text, "{");
    add_number(text, "contact", columns[0], 0);
    add_text(text, "first_utc", columns[1]);
    add_text(text, "last_utc", columns[2]);
    add_text(text, "grade", columns[3]);
    add_number(text, "n_calls", columns[4], 0);
    add_text(text, "id", columns[5]);
    add_text(text, "group", columns[6]);
    add_text(text, "state", columns[7]);
    add_number(text, "distance_p05_m", columns[8], 1);
    add_number(text, "distance_p50_m", columns[9], 1);
    add_number(text, "distance_p95_m", columns[10], 1);
    words_json(text, columns);
    json_name(text, "verdict");
    if (columns[11])
        review_body(text, columns[11]);
    else
        text_append(text, "null");
    json_name(text, "clips");
    text_append(text, columns[12] ? columns[12] : "[]");
    text_append(text, "}");
    return STATUS_OK;
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    const struct review *review = (struct review *)question;
    struct page page = {.text = &question->text, .group = review->group, .limit = (uint32_t)review->limit};
    char after[24], last_text[24], from[TIME_UTC_SIZE];
    const char *parameters[] = {last_text, after, from, review->dismissed ? "1" : "0"};
    int64_t first, last;
    enum status status = review_range(ledger, review, &first, &last);
    snprintf(after, sizeof after, "%.0f", review->after);
    snprintf(last_text, sizeof last_text, "%" PRId64, last);
    time_format_utc((int64_t)(review->from_s * 1e6) * TIME_NS_PER_US, from);
    text_append(page.text, "{\"contacts\":[");
    if (status == STATUS_OK)
        status = ledger_select(ledger, contacts_sql, 4, parameters, take_contact, &page);
    text_append(page.text, "]");
    json_name(page.text, "next");
    text_json_number(page.text, page.more ? page.last : NAN, 0);
    text_append(page.text, "}\n");
    return status == STATUS_END ? STATUS_OK : status;
}

enum MHD_Result api_contacts(struct request *request)
{
    return review_put(request, ask);
}
