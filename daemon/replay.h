/* Derives a watch again from its ledger: every recorded input is pushed again, in order, as at sea. What a
 * restart rebuilds itself by and what `hushwatch rerun` compares is this one piece of code.
 *
 * Each run is judged by its own permit and settings, as its entries hold them: a permit that changed between
 * two runs holds from the later one's beginning on, and what was concluded before stays. */
#ifndef REPLAY_H
#define REPLAY_H

#include "base/status.h"
#include "ledger/ledger.h"
#include "recorded.h"
#include "rule/tally.h"
#include "rule/watch.h"
#include <stdbool.h>
#include <stdint.h>

struct replay;

struct replay_setup {
    struct ledger *ledger; /* borrowed: the tally of a run with other settings is made from its beginning */
    /* A watch that is rebuilt, and its tally (NULL: none), which then sums and says nothing: both borrowed,
     * made by the settings that hold now. NULL: both are made by each run's own rules. */
    struct watch *watch;
    struct tally *tally;
    const struct permit *permit; /* instead of the recorded ones; NULL; borrowed. Then there is no tally */
    /* Each outcome, the events themselves too, of the watch and of the tally. */
    enum status (*derived)(void *context, const struct outcome *outcome);
    /* An entry that says what was concluded, after all that follows until its time was derived; an input,
     * after it was taken; and a `permit` entry, with the body that its own text gives again, else NULL. NULL:
     * nobody asks. */
    enum status (*met)(void *context, const struct entry *entry, int64_t watch_ns, const char *permit_body);
    /* A run begins, or (run 0) the ledger has ended: nothing more follows from the one before. NULL: none. */
    enum status (*turned)(void *context, uint32_t run);
    void *context;
};

/* What is known of the ledger so far. */
struct replay_facts {
    uint32_t last_run;    /* 0: none */
    int64_t zero_unix_ns; /* UTC of watch time zero: the first entry's */
    int64_t last_ns;      /* watch time of the last entry */
    uint64_t n_inputs;
    uint32_t n_permits; /* different ones, one after the other */
    bool sums;          /* a tally says its sums */
    bool other_defaults;
};

/* STATUS_NO_MEMORY. The caller owns *out. */
enum status replay_create(const struct replay_setup *setup, struct replay **out);
void replay_destroy(struct replay *replay);
/* Reads the whole ledger, or (before_seq > 0) what stands before that entry. STATUS_BAD_FORMAT and others
 * with a sentence in problem that names the entry; what a callback returns ends it. */
enum status replay_run(struct replay *replay, int64_t before_seq, char problem[LEDGER_PROBLEM_SIZE]);
void replay_get_facts(const struct replay *replay, struct replay_facts *out);
/* From `turned`: sums of the run that ended are missing at its end, so the next run's are those of a tally
 * that does not know of them. */
void replay_set_cut(struct replay *replay);
/* The id of the permit in force, and the tally's say at a time (see tally_say); "" and nothing without. */
const char *replay_permit(const struct replay *replay);
void replay_say_sums(struct replay *replay, int64_t watch_ns);

/* Whether entries of that kind are concluded by the watch (and not by the tally). */
bool replay_is_conclusion(const char *kind);

#endif
