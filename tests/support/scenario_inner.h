/* What the files of the scenario player share. */
#ifndef SUPPORT_SCENARIO_INNER_H
#define SUPPORT_SCENARIO_INNER_H

#include "rule/watch.h"
#include "support/again.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define LINE_SIZE 512
#define MAX_PENDING 64

struct player {
    const char *path;
    unsigned line;
    bool writes_all, failed;
    char *problem;
    size_t problem_size;
    struct watch_setup setup;
    struct watch *watch;
    struct again *again; /* what came out, to be derived again at the end */
    struct outcome_sink sink;
    uint32_t run;
    uint64_t counters[8];
    int64_t now_ns;
    unsigned n_outcomes;
    /* phase, advice and finding outcomes that no line has expected yet */
    unsigned n_pending;
    struct outcome pending[MAX_PENDING];
    double sel_db, sel_step_db; /* of the first impulse of the present row, and from each to the next */
    unsigned n_blows;
    int64_t zero_unix_ns; /* with has_clock */
    bool has_clock;
    struct permit permit;                                       /* placed for the source's extent */
    int64_t next_impulse_ns, impulse_step_ns, impulse_until_ns; /* step 0: none */
};

/* Keeps the first thing that went wrong, with file and line. */
void player_complain(struct player *player, const char *format, ...) __attribute__((format(printf, 2, 3)));
/* "1:02:03", "1:02:03.500"; "+" behind it is a microsecond more. */
void player_clock_text(int64_t ns, char out[32]);
/* Reads the same; gives where the rest begins, NULL when it is none. */
const char *player_read_clock(const char *text, int64_t *out_ns);
/* The rest of text after a prefix, NULL where it has another beginning. */
const char *player_after(const char *text, const char *prefix);
/* ", by sound", ", by both", "". */
const char *player_basis_text(enum finding_basis basis);
/* An outcome in the words of the file. */
void player_outcome_text(const struct outcome *outcome, char *out, size_t size);

/* scenario_events.c: what happens */
void player_pass_to(struct player *player, int64_t to_ns); /* time, and the blows that fall meanwhile */
void player_restart(struct player *player, const char *text, int64_t at_ns);
void player_event(struct player *player, const char *text);
void player_push(struct player *player, struct event *event, int64_t known_ns);
void player_push_note(struct player *player, struct note *note);
/* A field of a note from text; complains where it is not allowed. */
bool player_set(struct player *player, struct note *note, const char *field, const char *value);
/* What stands before the fields " (FIELD VALUE; ...)" of a line; those are set. */
void player_split_fields(struct player *player, struct note *note, const char *text, char *out, size_t size);

/* scenario_work.c: what the work and the sea do; false where it is another line */
bool player_work(struct player *player, const char *text);

/* scenario_expect.c: what must follow */
void player_expect(struct player *player, int64_t at_ns, const char *text);
void player_check(struct player *player, const char *text);

#endif
