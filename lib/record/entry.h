/* An entry's stored text: from outcome to body, from body back to event, and the hash that chains entries.
 *
 * A body is one line of JSON, ASCII, keys in byte order, fixed decimals, no NaN (null instead), with "id".
 * The stored text is what is hashed; it is never written again from parsed data. */
#ifndef RECORD_ENTRY_H
#define RECORD_ENTRY_H

#include "base/status.h"
#include "base/text.h"
#include "flow.h"
#include <stddef.h>
#include <stdint.h>

#define ENTRY_HASH_SIZE 65 /* lower-case hex SHA-256 and its terminator */
#define ENTRY_KIND_SIZE 16

/* One line of the ledger. Texts are borrowed from whoever made it. */
struct entry {
    int64_t seq; /* from 1, no holes */
    const char *utc;
    const char *kind;
    const char *body;
    const char *hash;
};

/* The body of an outcome, as docs/ledger.md lists it. zero_unix_ns
 * is the UTC of watch time zero, for the few texts that are UTC. A `run` outcome gives only the outage: the
 * daemon and the scan write entry_body_run (record/marks.h) in its place. STATUS_NO_MEMORY leaves out
 * unusable.
 */
enum status entry_body(const struct outcome *outcome, int64_t zero_unix_ns, struct text *out);

/* The event behind the entry of an input kind (run, unheard, impulse, call, note, position); the watch is
 * rebuilt from these. watch_ns is the entry's time. STATUS_NOT_FOUND for a kind that is no input (level,
 * phase, advice
 * ...); STATUS_BAD_FORMAT for a body that this program did not write. */
enum status entry_event(const char *kind, const char *body, int64_t watch_ns, struct event *out);

/* The seconds of a `level` entry, which holds a minute: what they were, but for the moments and the time
 * weighted maxima, which no sum reads. STATUS_BAD_FORMAT for a body that this program did not write (then
 * *out is unusable), STATUS_NO_MEMORY. */
#define ENTRY_LEVELS_MAX 60
struct entry_levels {
    uint32_t run, stream, n;
    struct level seconds[ENTRY_LEVELS_MAX];
};
enum status entry_levels(const char *body, struct entry_levels *out);

/* The finding of a `finding` entry, but for its causes and its time. The same errors. */
enum status entry_finding(const char *body, struct outcome *out);

/* Makes an event what its entry will say of it: numbers and times rounded by base/round.h, bytes of texts
 * that are not UTF-8 replaced by '?'. For every event at the watch's door (before watch_push), so that the
 * watch at sea and a rerun work on the same event: after it, entry_event(entry_body(event)) is the event. */
void entry_round(struct event *event);

/* Whether an entry's texts have the form that this program writes: UTC, a known kind, one line of ASCII JSON
 * with keys in byte order, an id of that kind, and for an input kind a body that entry_event reads.
 * STATUS_BAD_FORMAT and a sentence for the first thing that is not so; STATUS_NO_MEMORY. Says nothing of the
 * hash. */
#define ENTRY_SENTENCE_SIZE 160
enum status entry_check(const struct entry *entry, char out_sentence[ENTRY_SENTENCE_SIZE]);

/* SHA-256, in lower-case hex, of: previous hash, newline, seq, newline, utc, newline, kind, newline, body.
 * The previous hash of the first entry is 64 zeros. */
void entry_hash(const char *previous_hash, int64_t seq, const char *utc, const char *kind, const char *body,
                char out[ENTRY_HASH_SIZE]);

#endif
