/* Questions of the review page to the ledger: read from the request, asked on the pool of readers while the
 * connection waits, answered as JSON. */
#ifndef HTTP_REVIEW_H
#define HTTP_REVIEW_H

#include "ledger/readers.h"
#include <microhttpd.h>
#include <stdbool.h>

#define REVIEW_WORD_SIZE 128
#define REVIEW_MAX_LIMIT 500
#define REVIEW_MAX_STEPS 1000
#define REVIEW_MAX_LOOKED 20000 /* entries that one answer looks at; `next` says where to go on */

/* SQL, for a WITH: which sounds kept (id) are of which contact (n), by what they were kept for: a change of
 * the contact, a verdict, or an advice that names one. Of the entries up to ?1. */
#define REVIEW_ID_OF(entry)                                                                                  \
    "CASE WHEN json_valid(" entry ".body) THEN json_extract(" entry ".body, '$.id') END"
#define REVIEW_CLIPS_SQL                                                                                     \
    "kept AS MATERIALIZED (SELECT json_extract(body, '$.id') AS id, value AS cause FROM (SELECT body FROM "  \
    "entry WHERE kind = 'sound' AND seq <= ?1 + 0 AND json_valid(body)), json_each(body, '$.causes')), "     \
    "clip AS MATERIALIZED (SELECT kept.id, json_extract(e.body, '$.contact') AS n FROM kept JOIN entry AS "  \
    "e ON " REVIEW_ID_OF(                                                                                    \
        "e") " = kept.cause WHERE e.kind IN ('contact', 'note') UNION SELECT kept.id, "                      \
             "json_extract(e.body, '$.contact') FROM kept JOIN entry AS a ON " REVIEW_ID_OF(                 \
                 "a") " = kept.cause "                                                                       \
                      "AND a.kind = 'advice' JOIN json_each(a.body, '$.causes') AS c JOIN entry AS e "       \
                      "ON " REVIEW_ID_OF("e") " = c.value AND e.kind = 'contact')"

struct request;

/* One question, part of its request. Numbers that were not given have the values said. */
struct review {
    struct question question; /* first: the one is the other */
    struct MHD_Connection *connection;
    char kind[REVIEW_WORD_SIZE];  /* "" */
    char id[REVIEW_WORD_SIZE];    /* "" */
    char job[REVIEW_WORD_SIZE];   /* "" */
    char group[REVIEW_WORD_SIZE]; /* "" */
    char row[REVIEW_WORD_SIZE];   /* "" */
    char words[REVIEW_WORD_SIZE]; /* "" */
    double from_s, to_s;          /* UTC in seconds since 1970; 0 and 9e9 */
    double after;                 /* a seq or a contact's number; 0 */
    double limit;                 /* 200 */
    double steps;                 /* 500 */
    double depth;                 /* 6 */
    double seed;                  /* 1 */
    bool lead, dismissed;
    const char *clips; /* the folder of the sounds kept */
};

/* Puts nothing into it yet. */
void review_reset(struct review *review);
/* Frees what an answer holds. */
void review_end(struct review *review);

/* Reads the question and hands it to the pool; called again with its answer. ask writes JSON. */
enum MHD_Result review_put(struct request *request,
                           enum status (*ask)(struct ledger *ledger, struct question *question));

/* The seq from which on, and up to which (both included), entries lie from from_s to to_s. */
enum status review_range(struct ledger *ledger, const struct review *review, int64_t *out_first,
                         int64_t *out_last);

/* A stored body as JSON: itself where it is that, else as a text. */
void review_body(struct text *text, const char *body);

/* Watch time zero of each run as seconds since 1970, for entries that say watch time. */
struct review_zeros {
    uint32_t n, capacity;
    struct review_zero {
        int64_t run;
        double unix_s;
    } * zeros;
};
enum status review_zeros_read(struct ledger *ledger, struct review_zeros *out);
/* Of a run; of the last one before it where it has none of its own. */
double review_zero(const struct review_zeros *zeros, int64_t run);
void review_zeros_destroy(struct review_zeros *zeros);

#endif
