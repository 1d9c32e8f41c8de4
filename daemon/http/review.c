/* Questions to the ledger; see review.h. */
#include "http/review.h"
#include "base/time.h"
#include "http/request.h"
#include "record/views.h"
#include <jansson.h>
#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* ---- from the request */

/* What may be asked, and from where to where. */
static const struct {
    const char *name;
    size_t offset;
    double otherwise, min, max;
} numbers[] = {{"from", offsetof(struct review, from_s), 0, 0, 9e9},
               {"to", offsetof(struct review, to_s), 9e9, 0, 9e9},
               {"after", offsetof(struct review, after), 0, 0, 9e15},
               {"limit", offsetof(struct review, limit), 200, 1, REVIEW_MAX_LIMIT},
               {"steps", offsetof(struct review, steps), 500, 1, REVIEW_MAX_STEPS},
               {"depth", offsetof(struct review, depth), 6, 0, 20},
               {"seed", offsetof(struct review, seed), 1, 0, 4294967295.0}};
static const struct {
    const char *name;
    size_t offset;
} texts[] = {{"kind", offsetof(struct review, kind)}, {"id", offsetof(struct review, id)},
             {"job", offsetof(struct review, job)},   {"group", offsetof(struct review, group)},
             {"row", offsetof(struct review, row)},   {"words", offsetof(struct review, words)}};

static const char *argument(struct MHD_Connection *connection, const char *name)
{
    return MHD_lookup_connection_value(connection, MHD_GET_ARGUMENT_KIND, name);
}

/* NULL, or the name of what is wrong. */
static const char *read_review(struct MHD_Connection *connection, struct review *out)
{
    char *at = (char *)out;
    for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
        const char *value = argument(connection, texts[i].name);
        if (value && strlen(value) >= REVIEW_WORD_SIZE)
            return texts[i].name;
        snprintf(at + texts[i].offset, REVIEW_WORD_SIZE, "%s", value ? value : "");
    }
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
        const char *value = argument(connection, numbers[i].name);
        double number = numbers[i].otherwise;
        char *end = NULL;
        if (value) {
            number = strtod(value, &end);
            if (*value == '\0' || *end != '\0' || !(number >= numbers[i].min && number <= numbers[i].max))
                return numbers[i].name;
        }
        memcpy(at + numbers[i].offset, &number, sizeof number);
    }
    const char *lead = argument(connection, "lead"), *dismissed = argument(connection, "dismissed");
    out->lead = lead && strcmp(lead, "1") == 0;
    out->dismissed = dismissed && strcmp(dismissed, "1") == 0;
    return NULL;
}

/* ---- to the pool and back */

void review_reset(struct review *review)
{
    memset(review, 0, sizeof *review);
}

void review_end(struct review *review)
{
    text_destroy(&review->question.text);
}

static void resume(struct question *question)
{
    MHD_resume_connection(((struct review *)question)->connection); /* then the request may be gone */
}

static enum MHD_Result answer(struct request *request)
{
    const struct question *question = &request->review.question;
    switch (question->status) {
    case STATUS_OK:
        return http_answer(request->connection, MHD_HTTP_OK, "application/json", question->text.data,
                           question->text.length);
    case STATUS_NOT_FOUND:
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "the ledger does not have it", NULL,
                           NULL);
    case STATUS_BAD_ARGUMENT:
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "there is no such kind", "kind",
                           "docs/http.md says which");
    case STATUS_TIMEOUT:
        return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE,
                           "this took longer than 2 s; ask for less", NULL, NULL);
    default:
        return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE, status_text(question->status),
                           NULL, NULL);
    }
}

enum MHD_Result review_put(struct request *request,
                           enum status (*ask)(struct ledger *ledger, struct question *question))
{
    struct review *review = &request->review;
    if (request->submitted)
        return answer(request);
    if (!request->http->readers)
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "there is no ledger here", NULL, NULL);
    const char *wrong = read_review(request->connection, review);
    if (wrong)
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "this value is not allowed", wrong,
                           NULL);
    review->connection = request->connection;
    review->clips = request->http->clips_folder;
    review->question.ask = ask;
    review->question.done = resume;
    request->submitted = true;
    MHD_suspend_connection(request->connection);
    if (readers_put(request->http->readers, &review->question) == STATUS_OK)
        return MHD_YES; /* called again when it is answered */
    review->question.status = STATUS_BUSY;
    MHD_resume_connection(request->connection);
    return MHD_YES;
}

/* ---- what the questions share */

enum status review_range(struct ledger *ledger, const struct review *review, int64_t *out_first,
                         int64_t *out_last)
{
    char from[TIME_UTC_SIZE], to[TIME_UTC_SIZE];
    time_format_utc((int64_t)(review->from_s * 1e6) * TIME_NS_PER_US, from);
    time_format_utc((int64_t)(review->to_s * 1e6) * TIME_NS_PER_US, to);
    enum status status = ledger_find_time(ledger, from, out_first);
    if (status == STATUS_OK)
        status = ledger_find_time(ledger, to, out_last);
    *out_last -= 1;
    return status;
}

void review_body(struct text *text, const char *body)
{
    json_t *value = json_loads(body, 0, NULL);
    if (json_is_object(value))
        text_append(text, body);
    else
        text_json_string(text, body);
    json_decref(value);
}

static enum status take_zero(void *context, int n, const char *const *columns)
{
    struct review_zeros *zeros = context;
    int64_t ns;
    (void)n;
    if (!columns[0] || !columns[1] || time_parse_utc(columns[1], &ns) != STATUS_OK)
        return STATUS_OK;
    if (zeros->n == zeros->capacity) {
        uint32_t capacity = zeros->capacity ? 2 * zeros->capacity : 16;
        struct review_zero *more = realloc(zeros->zeros, capacity * sizeof *more);
        if (!more)
            return STATUS_NO_MEMORY;
        zeros->zeros = more;
        zeros->capacity = capacity;
    }
    zeros->zeros[zeros->n++] = (struct review_zero){strtoll(columns[0], NULL, 10), (double)ns / 1e9};
    return STATUS_OK;
}

enum status review_zeros_read(struct ledger *ledger, struct review_zeros *out)
{
    return ledger_select(
        ledger,
        "SELECT 0, utc FROM (SELECT utc FROM entry ORDER BY seq LIMIT 1) UNION ALL "
        "SELECT * FROM (SELECT CAST(json_extract(body, '$.id') AS INTEGER), json_extract(body, "
        "'$.watch_zero_utc') FROM entry WHERE kind = 'run' AND json_valid(body) ORDER BY seq)",
        0, NULL, take_zero, out);
}

double review_zero(const struct review_zeros *zeros, int64_t run)
{
    double unix_s = 0;
    for (uint32_t i = 0; i < zeros->n && zeros->zeros[i].run <= run; i++)
        unix_s = zeros->zeros[i].unix_s;
    return unix_s;
}

void review_zeros_destroy(struct review_zeros *zeros)
{
    free(zeros->zeros);
    zeros->zeros = NULL;
}
