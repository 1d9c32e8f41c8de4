/* Compares what a ledger holds with what follows from its inputs, one by one: kind, id, time and body. */
#ifndef RERUN_H
#define RERUN_H

#include "base/status.h"
#include "ledger/ledger.h"
#include "replay.h"
#include <stddef.h>
#include <stdint.h>

#define RERUN_MAX_KINDS 16

enum rerun_difference_kind {
    RERUN_OTHER,       /* both, and not the same */
    RERUN_NOT_DERIVED, /* the ledger holds it, and it does not follow */
    RERUN_NOT_RECORDED /* it follows, and the ledger does not hold it */
};

/* One difference; texts are borrowed for the call. NULL: not there. */
struct rerun_difference {
    enum rerun_difference_kind kind;
    int64_t seq;            /* of the recorded entry; 0 where there is none */
    const char *entry_kind; /* "advice" ... */
    const char *id;
    const char *recorded_utc, *recorded;
    const char *derived_utc, *derived;
};

struct rerun_facts {
    struct replay_facts replay;
    uint64_t n_different;
    uint64_t n_same, n_inputs_same;
    uint64_t n_cut;   /* follow from the last entries of a run that was not ended, and were lost with it */
    uint32_t n_kinds; /* conclusions that are the same, by kind */
    struct {
        char kind[24];
        uint64_t n;
    } kinds[RERUN_MAX_KINDS];
};

/* STATUS_OK when all is the same, STATUS_MISMATCH when anything was different; others as replay_run, with a
 * sentence. take is called for each difference; outcome (may be NULL) for each that was derived. */
struct rerun_setup {
    struct ledger *ledger; /* borrowed */
    void (*take)(void *context, const struct rerun_difference *difference);
    void (*outcome)(void *context, const struct outcome *outcome);
    void *context;
};
enum status rerun_compare(const struct rerun_setup *setup, struct rerun_facts *out,
                          char problem[LEDGER_PROBLEM_SIZE]);

#endif
