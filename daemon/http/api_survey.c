/* One row of the survey's picture: what lasted or happened in a span of time, a page at a time. */
#include "base/text.h"
#include "base/time.h"
#include "explanation_words.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* SQL reads in its own lines. */
/* clang-format off */
#define OF(name) "json_extract(body, '$." name "')"
#define WORK "('soft start', 'hold', 'full power', 'reduced', 'vibro', 'drilling', 'test')"
#define AGAINST "('stop', 'do not start', 'hold power', 'reduce power', 'prepare to stop')"
/* ?1: above this seq; ?2, ?3: the first and last seq of the span; ?4: its begin. Columns: seq (or a contact's number), begin, end (NULL:
 * it goes on), how it is drawn, title, id, job or group. {} stands for an entry's words. */
#define WATCHED(watch) \
    "SELECT * FROM (SELECT seq, utc, (SELECT utc FROM entry AS b WHERE b.kind = 'note' AND b.seq > a.seq AND" \
    " json_valid(b.body) AND json_extract(b.body, '$.note') = 'sign-off' AND json_extract(b.body, '$.person') =" \
    " json_extract(a.body, '$.person') ORDER BY b.seq LIMIT 1) AS off_utc, 'open', " OF("person") ", " OF("id") ", NULL" \
    " FROM entry AS a WHERE kind = 'note' AND seq > ?1 + 0 AND seq <= ?3 + 0 AND json_valid(body) AND " OF("note") \
    " = 'sign-on' AND " OF("watch") " = '" watch "') WHERE off_utc IS NULL OR off_utc >= ?4 ORDER BY seq"
#define PHASES(how, title) \
    "SELECT seq, utc, (SELECT utc FROM entry AS b WHERE b.kind = 'phase' AND b.seq > a.seq ORDER BY b.seq LIMIT 1)," \
    " " how ", " title ", " OF("id") ", " OF("job") " FROM entry AS a WHERE kind = 'phase' AND json_valid(body)" \
    " AND seq > ?1 + 0 AND seq <= ?3 + 0 AND seq >= coalesce((SELECT max(seq) FROM entry WHERE kind = 'phase'" \
    " AND seq < ?2 + 0), 0) ORDER BY seq"
#define MOMENTS(kind, how) \
    "SELECT seq, utc, utc, " how ", {}, " OF("id") ", " OF("job") " FROM entry WHERE kind = '" kind "'" \
    " AND json_valid(body) AND seq > ?1 + 0 AND seq BETWEEN ?2 + 0 AND ?3 + 0 ORDER BY seq"
static const struct {
    const char *row, *kind, *sql;
} rows[] = {
    {"visual watch", "note", WATCHED("visual")},
    {"acoustic watch", "note", WATCHED("acoustic")},
    {"phase", "phase", PHASES("iif(" OF("phase") " IN " WORK ", 'full', 'open')", OF("phase"))},
    {"job", "phase", PHASES("'open'", OF("job"))},
    {"contacts", "contact",
     "SELECT n, first_utc, iif(" OF("state") " = 'open', NULL, last_utc), iif(act, 'act', 'open'), 'contact ' || n || ', ' ||"
     " " OF("group") " || ', ' || " OF("state") ", " OF("id") ", " OF("group") " FROM (SELECT " OF("contact") " AS n,"
     " min(utc) AS first_utc, max(utc) AS last_utc, max(seq) AS last_seq, max(" OF("grade") " = 'act') AS act FROM entry"
     " WHERE kind = 'contact' AND seq <= ?3 + 0 AND ?2 = ?2 AND json_valid(body) GROUP BY n HAVING n > ?1 + 0) JOIN entry"
     " ON seq = last_seq WHERE last_utc >= ?4 OR " OF("state") " = 'open' ORDER BY n"},
    {"advice", "advice", MOMENTS("advice", "iif(" OF("advice") " IN " AGAINST ", 'act', 'open')")},
    {"findings", "finding", MOMENTS("finding", "iif(" OF("grade") " = 'firm', 'act', 'open')")},
};
/* clang-format on */

struct page {
    struct text *text;
    const char *of; /* a job, or a group of contacts; "": any */
    uint32_t n, limit;
    int64_t last_seq;
    bool more;
};

static void add_time(struct text *text, const char *utc)
{
    int64_t ns;
    json_next(text);
    text_json_number(text, utc && time_parse_utc(utc, &ns) == STATUS_OK ? (double)ns / 1e9 : NAN, 3);
}

static enum status take_item(void *context, int n, const char *const *columns)
{
    struct page *page = context;
    struct text *text = page->text;
    (void)n;
    if (page->n == page->limit) {
        page->more = true;
        return STATUS_END;
    }
    page->last_seq = columns[0] ? strtoll(columns[0], NULL, 10) : 0;
    if (!columns[4] || (*page->of && columns[6] && strcmp(columns[6], page->of) != 0))
        return STATUS_OK;
    page->n++;
    json_next(text);
    text_append(text, "[");
    add_time(text, columns[1]);
    add_time(text, columns[2]);
    for (int i = 3; i < 6; i++) {
        json_next(text);
        text_json_string(text, columns[i] ? columns[i] : "");
    }
    text_append(text, "]");
    return STATUS_OK;
}

/* {} in the SQL becomes the expression of the words. */
static enum status make_sql(const char *row, struct text *sql)
{
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
        if (strcmp(rows[i].row, row) != 0)
            continue;
        const char *words = strstr(rows[i].sql, "{}");
        text_format(sql, "%.*s", words ? (int)(words - rows[i].sql) : 0, rows[i].sql);
        if (words)
            explanation_words(rows[i].kind, sql);
        text_append(sql, words ? words + 2 : rows[i].sql);
        return sql->failed ? STATUS_NO_MEMORY : STATUS_OK;
    }
    return STATUS_BAD_ARGUMENT;
}

static enum status take_end(void *context, int n, const char *const *columns)
{
    struct text *text = context;
    static const char *const names[] = {"first_unix_s", "last_unix_s"};
    for (int i = 0; i < 2 && i < n; i++) {
        int64_t ns;
        bool known = columns[i] && time_parse_utc(columns[i], &ns) == STATUS_OK;
        json_number(text, names[i], known ? (double)ns / 1e9 : NAN, 3);
    }
    return STATUS_OK;
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    const struct review *review = (struct review *)question;
    struct page page = {.text = &question->text,
                        .of = strcmp(review->row, "contacts") == 0 ? review->group : review->job,
                        .limit = (uint32_t)review->limit};
    struct text sql = {0};
    int64_t first = 0, last = 0;
    char numbers[3][24], from[TIME_UTC_SIZE];
    const char *parameters[] = {numbers[0], numbers[1], numbers[2], from};
    enum status status = make_sql(review->row, &sql);
    if (status == STATUS_OK)
        status = review_range(ledger, review, &first, &last);
    snprintf(numbers[0], sizeof numbers[0], "%.0f", review->after);
    snprintf(numbers[1], sizeof numbers[1], "%" PRId64, first);
    snprintf(numbers[2], sizeof numbers[2], "%" PRId64, last);
    time_format_utc((int64_t)(review->from_s * 1e6) * TIME_NS_PER_US, from);
    text_append(page.text, "{");
    if (status == STATUS_OK)
        status = ledger_select(ledger,
                               "SELECT (SELECT utc FROM entry ORDER BY seq LIMIT 1), (SELECT utc FROM entry "
                               "ORDER BY seq DESC LIMIT 1)",
                               0, NULL, take_end, page.text);
    json_name(page.text, "items");
    text_append(page.text, "[");
    if (status == STATUS_OK)
        status = ledger_select(ledger, sql.data, 4, parameters, take_item, &page);
    text_append(page.text, "]");
    json_name(page.text, "next");
    text_json_number(page.text, page.more ? (double)page.last_seq : NAN, 0);
    text_append(page.text, "}\n");
    text_destroy(&sql);
    return status == STATUS_END ? STATUS_OK : status;
}

enum MHD_Result api_survey(struct request *request)
{
    return review_put(request, ask);
}
