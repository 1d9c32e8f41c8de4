/* A condition of the permit beside the pre-watch and the zones: what a start or the work needs. One file
 * each, condition_NAME.c, and one line in the table of watch_conditions.c. For the watch only. */
#ifndef RULE_CONDITION_H
#define RULE_CONDITION_H

#include "rule/watch_inner.h"

/* What a condition does not do is NULL. */
struct condition {
    const char *finding; /* the code of the finding when the source starts although it holds the start back */
    /* Whether it holds a start back now; then why, and watch time of its earliest end (-1: nobody knows). */
    bool (*holds)(const struct watch *watch, struct why *why, int64_t *until_ns);
    /* What it asks for while the source sounds, ACTION_LOG for nothing; else why. */
    enum permit_action (*asks)(const struct watch *watch, struct why *why);
    /* Watch time after now_ns at which an answer may change by time alone; INT64_MAX: never. */
    int64_t (*due_ns)(const struct watch *watch);
    void (*take_note)(struct watch *watch, const struct note *note);
    void (*take_impulse)(struct watch *watch, const struct event *event); /* ours, of the reference channel */
    void (*enter_phase)(struct watch *watch, enum phase from, enum phase to);
    void (*settle)(struct watch *watch); /* before phase and advice: what time alone brings */
    void (*follow)(struct watch *watch); /* after them */
    /* A timer for people, named and filled; false where there is none to show. */
    bool (*show)(const struct watch *watch, struct watch_timer *timer);
};

extern const struct condition condition_deterrent;
extern const struct condition condition_quieting;
extern const struct condition condition_soft_start;
extern const struct condition condition_start;
extern const struct condition condition_outage;
extern const struct condition condition_turn;
extern const struct condition condition_test;
extern const struct condition condition_staff;
extern const struct condition condition_override;
extern const struct condition condition_stop;
extern const struct condition condition_job;
extern const struct condition condition_quality;
extern const struct condition condition_charge;
extern const struct condition condition_limit;

#endif
