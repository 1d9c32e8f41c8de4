/* A span of time in steps: how much unheard time, how many and how loud impulses, how loud the sea, or how
 * many entries of a kind lie in each. What a picture of any length needs of kinds with many entries. */
#include "base/text.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include "record/views.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_ROWS 24
#define ROW_SIZE 32
#define BEFORE 64 /* entries before the page, to know what was counted already */

/* One piece of unheard time, seconds since 1970. */
struct piece {
    uint32_t row;
    double start_s, end_s;
    bool counts;
};

struct timeline {
    const struct review *review;
    struct review_zeros zeros;
    double step_s;
    uint32_t steps, n_rows, n_looked;
    int64_t counted_from, last_seq;
    bool more;
    struct timeline_row {
        char name[ROW_SIZE];
        double *count, *most;
    } rows[MAX_ROWS];
    uint32_t n_pieces;
    struct piece pieces[REVIEW_MAX_LOOKED + BEFORE];
};

/* Columns: seq, run, row, start_s, end_s, level; the last three as watch time or NULL, then utc counts. */
static const struct {
    const char *kind, *columns;
} kinds[] = {
    {"unheard",
     "json_extract(body, '$.cause'), json_extract(body, '$.start_s'), json_extract(body, '$.end_s'), "
     "NULL"},
    {"impulse",
     "iif(json_extract(body, '$.beside'), 'beside', json_extract(body, '$.whose')), json_extract(body, "
     "'$.time_s'), NULL, json_extract(body, '$.sel_db')"},
    {"level", "json_extract(body, '$.stream') || '.' || json_extract(body, '$.channel'), json_extract(body, "
              "'$.start_s[0]'), NULL, json_extract(body, '$.minute.mean_db')"},
};

static struct timeline_row *row_of(struct timeline *timeline, const char *name)
{
    struct timeline_row *rows = timeline->rows;
    uint32_t i = 0;
    while (i < timeline->n_rows && strncmp(rows[i].name, name, ROW_SIZE - 1) != 0)
        i++;
    if (i < timeline->n_rows || i == MAX_ROWS)
        return i < MAX_ROWS ? &rows[i] : NULL;
    rows[i].count = calloc(timeline->steps, sizeof(double));
    rows[i].most = calloc(timeline->steps, sizeof(double));
    timeline->n_rows++;
    snprintf(rows[i].name, ROW_SIZE, "%s", name);
    for (uint32_t step = 0; rows[i].most && step < timeline->steps; step++)
        rows[i].most[step] = NAN;
    return rows[i].count && rows[i].most ? &rows[i] : NULL;
}

static int by_row_and_start(const void *one, const void *other)
{
    const struct piece *a = one, *b = other;
    if (a->row != b->row)
        return a->row < b->row ? -1 : 1;
    return a->start_s < b->start_s ? -1 : a->start_s > b->start_s;
}

/* Seconds of the pieces into the steps that they lie in; where pieces of a row overlap it counts once. */
static void add_pieces(struct timeline *timeline)
{
    double from = timeline->review->from_s, covered_s = 0;
    qsort(timeline->pieces, timeline->n_pieces, sizeof timeline->pieces[0], by_row_and_start);
    for (uint32_t i = 0; i < timeline->n_pieces; i++) {
        const struct piece *piece = &timeline->pieces[i];
        if (i > 0 && piece->row != timeline->pieces[i - 1].row)
            covered_s = 0;
        double begin = fmax(fmax(piece->start_s, covered_s), from);
        covered_s = fmax(covered_s, piece->end_s);
        for (double at = floor((begin - from) / timeline->step_s);
             piece->counts && begin < piece->end_s && at < timeline->steps; at++) {
            double next = fmin(from + (at + 1) * timeline->step_s, piece->end_s);
            timeline->rows[piece->row].count[(uint32_t)at] += next - begin;
            begin = next;
        }
    }
}

static void add_moment(const struct timeline *timeline, struct timeline_row *row, double at_s, double level)
{
    double at = floor((at_s - timeline->review->from_s) / timeline->step_s);
    if (!(at >= 0 && at < timeline->steps))
        return;
    double *most = &row->most[(uint32_t)at];
    row->count[(uint32_t)at] += 1;
    *most = isnan(*most) || level > *most ? level : *most;
}

static enum status take_row(void *context, int n, const char *const *columns)
{
    struct timeline *timeline = context;
    (void)n;
    int64_t seq = columns[0] ? strtoll(columns[0], NULL, 10) : 0;
    bool counts = seq >= timeline->counted_from;
    if (timeline->n_looked == REVIEW_MAX_LOOKED) {
        timeline->more = true;
        return STATUS_END;
    }
    timeline->n_looked += counts;
    timeline->last_seq = seq;
    struct timeline_row *row = row_of(timeline, columns[2] ? columns[2] : "unknown");
    double zero_s = columns[1] ? review_zero(&timeline->zeros, strtoll(columns[1], NULL, 10)) : 0;
    if (!row || !columns[3])
        return STATUS_OK;
    double start_s = zero_s + strtod(columns[3], NULL);
    if (columns[4] && timeline->n_pieces < REVIEW_MAX_LOOKED + BEFORE)
        timeline->pieces[timeline->n_pieces++] = (struct piece){(uint32_t)(row - timeline->rows), start_s,
                                                                zero_s + strtod(columns[4], NULL), counts};
    else if (counts)
        add_moment(timeline, row, start_s, columns[5] ? strtod(columns[5], NULL) : NAN);
    return STATUS_OK;
}

static void timeline_json(const struct timeline *timeline, struct text *text)
{
    text_append(text, "{");
    json_number(text, "from", timeline->review->from_s, 3);
    json_number(text, "step_s", timeline->step_s, 6);
    json_name(text, "rows");
    text_append(text, "{");
    for (uint32_t i = 0; i < timeline->n_rows; i++) {
        const struct timeline_row *row = &timeline->rows[i];
        json_next(text);
        text_json_string(text, row->name);
        text_append(text, ":[");
        for (uint32_t step = 0; row->count && row->most && step < timeline->steps; step++) {
            if (!(row->count[step] > 0))
                continue;
            json_next(text);
            text_format(text, "[%u,%.3f,", step, row->count[step]);
            text_json_number(text, row->most[step], 2);
            text_append(text, "]");
        }
        text_append(text, "]");
    }
    text_append(text, "}");
    json_name(text, "next");
    text_json_number(text, timeline->more ? (double)timeline->last_seq : NAN, 0);
    text_append(text, "}\n");
}

/* Where the reading begins: some entries of the kind before the first that counts. */
static enum status take_seq(void *context, int n, const char *const *columns)
{
    (void)n;
    if (columns[0])
        *(int64_t *)context = strtoll(columns[0], NULL, 10);
    return STATUS_OK;
}

static enum status read_rows(struct ledger *ledger, struct timeline *timeline, const char *columns,
                             int64_t last)
{
    struct text sql = {0};
    const char *kind = timeline->review->kind;
    int64_t begin = timeline->counted_from;
    text_format(&sql,
                "SELECT seq FROM entry WHERE kind = ?1 AND seq < %" PRId64 " ORDER BY seq DESC LIMIT %d",
                begin, BEFORE);
    enum status status =
        sql.failed ? STATUS_NO_MEMORY : ledger_select(ledger, sql.data, 1, &kind, take_seq, &begin);
    text_reset(&sql);
    text_format(&sql,
                "SELECT seq, CAST(" VIEWS_ID_SQL
                " AS INTEGER), %s FROM entry WHERE kind = ?1 AND seq BETWEEN "
                "%" PRId64 " AND %" PRId64 " AND json_valid(body) ORDER BY seq",
                columns, begin, last);
    if (status == STATUS_OK)
        status =
            sql.failed ? STATUS_NO_MEMORY : ledger_select(ledger, sql.data, 1, &kind, take_row, timeline);
    text_destroy(&sql);
    return status == STATUS_END ? STATUS_OK : status;
}

/* Pieces end in a span's first entries and begin before it: a little more than the span is read. */
static enum status ask(struct ledger *ledger, struct question *question)
{
    struct review *review = (struct review *)question;
    const char *columns = NULL;
    int64_t first, last;
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++)
        if (strcmp(kinds[i].kind, review->kind) == 0)
            columns = kinds[i].columns;
    if (!columns || !(review->to_s > review->from_s))
        return STATUS_BAD_ARGUMENT;
    struct timeline *timeline = calloc(1, sizeof *timeline);
    if (!timeline)
        return STATUS_NO_MEMORY;
    timeline->review = review;
    timeline->steps = (uint32_t)review->steps;
    timeline->step_s = (review->to_s - review->from_s) / timeline->steps;
    enum status status = review_zeros_read(ledger, &timeline->zeros);
    double asked_s = review->to_s;
    review->to_s +=
        70; /* a minute of levels is written when it is over, a piece of unheard time up to 10 s */
    if (status == STATUS_OK)
        status = review_range(ledger, review, &first, &last);
    review->to_s = asked_s;
    if (status == STATUS_OK) {
        timeline->counted_from = review->after >= (double)first ? (int64_t)review->after + 1 : first;
        status = read_rows(ledger, timeline, columns, last);
    }
    add_pieces(timeline);
    if (status == STATUS_OK)
        timeline_json(timeline, &question->text);
    for (uint32_t i = 0; i < timeline->n_rows; i++) {
        free(timeline->rows[i].count);
        free(timeline->rows[i].most);
    }
    review_zeros_destroy(&timeline->zeros);
    free(timeline);
    return status;
}

enum MHD_Result api_timeline(struct request *request)
{
    return review_put(request, ask);
}
