/* A sample for a second listener: contacts drawn by a seed, without what the program or anybody said of them.
 */
#include "base/random.h"
#include "base/text.h"
#include "base/time.h"
#include "http/board_json.h"
#include "http/request.h"
#include "http/routes.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_POPULATION 100000
#define MAX_SOUNDS 12 /* of one contact */

/* SQL reads in its own lines. */
/* clang-format off */
static const char population_sql[] =
    "SELECT DISTINCT json_extract(body, '$.contact') FROM entry WHERE kind = 'contact' AND seq <= ?1 + 0"
    " AND json_valid(body) AND json_extract(body, '$.n_calls') > 0 ORDER BY 1";
/* The calls at whose moment the contact changed, oldest first: when and where to listen, and nothing of what it was. */
static const char sounds_sql[] =
    "SELECT DISTINCT CAST(json_extract(call.body, '$.id') AS INTEGER), json_extract(call.body, '$.stream'),"
    " json_extract(call.body, '$.channel'), json_extract(call.body, '$.start_s'), json_extract(call.body, '$.end_s')"
    " FROM (SELECT seq, utc FROM (SELECT * FROM entry WHERE kind = 'contact' AND seq <= ?1 + 0 AND json_valid(body))"
    " WHERE json_extract(body, '$.contact') = ?2 + 0) AS contact JOIN entry AS call"
    " ON call.seq BETWEEN contact.seq - 40 AND contact.seq - 1 AND call.utc = contact.utc AND call.kind = 'call'"
    " AND json_valid(call.body) ORDER BY call.seq LIMIT ?3 + 0";
static const char clips_sql[] = "WITH " REVIEW_CLIPS_SQL " SELECT id FROM clip WHERE n = ?2 + 0 LIMIT ?3 + 0";
/* clang-format on */

struct population {
    uint32_t n;
    uint32_t contacts[MAX_POPULATION];
};

static enum status take_contact(void *context, int n, const char *const *columns)
{
    struct population *population = context;
    (void)n;
    if (population->n == MAX_POPULATION)
        return STATUS_END;
    population->contacts[population->n++] = columns[0] ? (uint32_t)strtoul(columns[0], NULL, 10) : 0;
    return STATUS_OK;
}

/* The first n of the contacts become a draw without replacement (Durstenfeld's shuffle, CACM 7, 1964, as far
 * as it is needed), in the order drawn. */
static uint32_t draw(struct population *population, uint32_t n, uint64_t seed)
{
    struct random random;
    random_reset(&random, seed);
    for (uint32_t i = 0; i < n && i < population->n; i++) {
        uint32_t at = i + (uint32_t)(random_uniform(&random) * (population->n - i));
        uint32_t contact = population->contacts[i];
        population->contacts[i] = population->contacts[at];
        population->contacts[at] = contact;
    }
    return n < population->n ? n : population->n;
}

struct sounds {
    struct text *text;
    struct text words; /* of one contact: when and where to listen */
    struct review_zeros zeros;
};

static enum status take_sound(void *context, int n, const char *const *columns)
{
    struct sounds *sounds = context;
    struct text *text = sounds->text;
    double numbers[5];
    for (int i = 0; i < 5 && i < n; i++)
        numbers[i] = columns[i] ? strtod(columns[i], NULL) : 0;
    double zero_s = review_zero(&sounds->zeros, (int64_t)numbers[0]);
    char utc[TIME_UTC_SIZE];
    time_format_utc((int64_t)llround((zero_s + numbers[3]) * 1e6) * TIME_NS_PER_US, utc);
    text_format(&sounds->words, "%.10s %.12s, %.1f s, channel %.0f.%.0f. ", utc, utc + 11,
                numbers[4] - numbers[3], numbers[1], numbers[2]);
    json_next(text);
    text_append(text, "{");
    json_number(text, "stream", numbers[1], 0);
    json_number(text, "channel", numbers[2], 0);
    json_number(text, "start_unix_s", zero_s + numbers[3], 3);
    json_number(text, "end_unix_s", zero_s + numbers[4], 3);
    text_append(text, "}");
    return STATUS_OK;
}

static enum status take_clip(void *context, int n, const char *const *columns)
{
    struct sounds *sounds = context;
    (void)n;
    json_next(sounds->text);
    text_json_string(sounds->text, columns[0] ? columns[0] : "");
    return STATUS_OK;
}

static enum status ask_with(struct ledger *ledger, struct question *question, struct population *population,
                            struct sounds *sounds)
{
    const struct review *review = (struct review *)question;
    struct text *text = &question->text;
    struct ledger_tail tail;
    char last[24], contact[24], most[8];
    const char *parameters[] = {last, contact, most};
    enum status status = ledger_get_tail(ledger, &tail);
    if (review->after > 0 && review->after < (double)tail.seq)
        tail.seq = (int64_t)review->after;
    snprintf(last, sizeof last, "%" PRId64, tail.seq);
    snprintf(most, sizeof most, "%d", MAX_SOUNDS);
    if (status == STATUS_OK)
        status = review_zeros_read(ledger, &sounds->zeros);
    if (status == STATUS_OK)
        status = ledger_select(ledger, population_sql, 1, parameters, take_contact, population);
    uint32_t n_population = population->n,
             n = draw(population, (uint32_t)review->limit, (uint64_t)review->seed);
    text_append(text, "{");
    json_number(text, "seed", review->seed, 0);
    json_number(text, "last_seq", (double)tail.seq, 0);
    json_number(text, "population", n_population, 0);
    json_name(text, "sample");
    text_append(text, "[");
    for (uint32_t i = 0; i < n && (status == STATUS_OK || status == STATUS_END); i++) {
        snprintf(contact, sizeof contact, "%u", population->contacts[i]);
        json_next(text);
        text_append(text, "{");
        json_number(text, "contact", population->contacts[i], 0);
        json_name(text, "sounds");
        text_append(text, "[");
        status = ledger_select(ledger, sounds_sql, 3, parameters, take_sound, sounds);
        text_append(text, "]");
        json_text(text, "words", sounds->words.data && !sounds->words.failed ? sounds->words.data : "");
        text_reset(&sounds->words);
        json_name(text, "clips");
        text_append(text, "[");
        if (status == STATUS_OK)
            status = ledger_select(ledger, clips_sql, 3, parameters, take_clip, sounds);
        text_append(text, "]}");
    }
    text_append(text, "]}\n");
    return status == STATUS_END ? STATUS_OK : status;
}

static enum status ask(struct ledger *ledger, struct question *question)
{
    struct population *population = calloc(1, sizeof *population);
    struct sounds sounds = {.text = &question->text};
    enum status status = population ? ask_with(ledger, question, population, &sounds) : STATUS_NO_MEMORY;
    review_zeros_destroy(&sounds.zeros);
    text_destroy(&sounds.words);
    free(population);
    return status;
}

enum MHD_Result api_sample(struct request *request)
{
    return review_put(request, ask);
}
