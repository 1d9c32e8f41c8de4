/* Whose impulse it is; see whose.h. */
#include "rule/whose.h"
#include "base/time.h"
#include <math.h>
#include <string.h>

/* An impulse of no train: once in 100 s, at any of 60 dB, as a logarithm. Rarer, and nothing would ever be
 * new; more frequent, and a blow out of step would be no hammer's. */
#define LOG_OF_NONE (-8.7)
#define ESTABLISHED 4    /* impulses: fewer are no train */
#define PROVEN 10        /* impulses: of a train that is compared with another */
#define ENOUGH_BESIDE 6  /* impulses of another train at a level that ours might have */
#define ALIKE_DB 3.0     /* levels closer than this do not tell two trains apart */
#define ALIKE_SHARE 0.05 /* and intervals by less than that share */
#define GROWN_DB 4.0     /* a soft start grows; another's work beside it rarely does at the same time */
#define FADED_DB 7.0     /* below ours by so much, a rival counts no more: WHOSE_BELOW_DB and a margin */
#define SILENT_S 60.0    /* and five intervals: then ours may go on at any level and time */
#define SILENT_INTERVALS 5.0
#define WAIT_INTERVALS 10.0 /* with nothing else heard for SILENT_S and so many, what is heard is ours */
#define REMEMBERED_S 1800.0 /* another's train that has fallen silent */

void whose_reset(struct whose *whose)
{
    memset(whose, 0, sizeof *whose);
    whose->on_ns = -1;
}

static struct whose_train *find_owner(struct whose *whose, enum whose_owner owner)
{
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++)
        if (whose->trains[i].owner == owner)
            return &whose->trains[i];
    return NULL;
}

static const struct whose_train no_train = {
    .slow_s = NAN, .slow_db = NAN, .first_db = NAN, .ours_then_db = NAN};

struct whose_train *whose_new_train(struct whose *whose, enum whose_owner owner)
{
    struct whose_train *oldest = NULL;
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        if (train->owner == OWNER_NONE) {
            oldest = train;
            break;
        }
        if (train->owner != OWNER_OURS && (!oldest || train->time_ns[0] < oldest->time_ns[0]))
            oldest = train;
    }
    *oldest = no_train;
    oldest->owner = owner;
    return oldest;
}

/* Silent for at least SILENT_S and so many of its intervals. */
static bool longer_than(const struct whose_train *train, int64_t since_ns, double n_intervals)
{
    double interval = whose_train_interval_s(train), since = time_to_s(since_ns);
    return since > SILENT_S && !(since <= n_intervals * interval);
}

static bool silent(const struct whose_train *train, int64_t now_ns)
{
    return longer_than(train, now_ns - train->time_ns[0], SILENT_INTERVALS);
}

/* Ours may be at another level and time now: it has been silent, or the crew has spoken since. */
static bool at_liberty(const struct whose_train *ours, const struct whose_said *said, int64_t now_ns)
{
    return silent(ours, now_ns) || said->said_ns > ours->time_ns[0];
}

static bool in_range(const struct whose_train *ours, double level_db)
{
    double off = level_db - whose_train_level_db(ours);
    return !(off < -WHOSE_BELOW_DB || off > WHOSE_ABOVE_DB);
}

/* The source is said to sound after silence: the rhythm of the work before is over. */
static void begin_work(struct whose *whose, int64_t on_ns)
{
    whose->on_ns = on_ns;
    whose->n_loose = 0;
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        bool of_work = train->owner == OWNER_OURS || train->owner == OWNER_RIVAL;
        if (of_work && silent(train, on_ns))
            train->owner = OWNER_NONE;
        if (!of_work)
            train->first_db = train->ours_then_db = NAN;
    }
}

static void forget(struct whose *whose, int64_t now_ns)
{
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        if (train->owner != OWNER_OURS && !train->told &&
            now_ns - train->time_ns[0] > time_from_s(REMEMBERED_S))
            train->owner = OWNER_NONE;
    }
}

/* ---- two trains beside each other: the one that grows is ours, the one far below ours is not */
static void note_levels(struct whose_train *train, double level, double ours_db)
{
    train->first_db = level;
    train->ours_then_db = ours_db;
}

static void compare(struct whose_train *ours, struct whose_train *other)
{
    double level = whose_train_level_db(other), ours_db = whose_train_level_db(ours);
    if (other->told || !(fabs(level - ours_db) < 1000))
        return;
    if (!isfinite(other->first_db) || !isfinite(other->ours_then_db)) {
        note_levels(other, level, ours_db);
        return;
    }
    bool grown = level - other->first_db >= GROWN_DB, ours_grown = ours_db - other->ours_then_db >= GROWN_DB;
    if (other->owner == OWNER_OTHERS && grown && level > ours_db - WHOSE_BELOW_DB)
        other->owner = OWNER_RIVAL;
    if (other->owner != OWNER_RIVAL)
        return;
    if (level < ours_db - FADED_DB || (ours_grown && !grown && level < ours_db - ALIKE_DB)) {
        other->owner = OWNER_OTHERS;
        note_levels(other, level, ours_db);
    } else if (level > ours_db + WHOSE_BELOW_DB && grown && !ours->told) {
        other->owner = OWNER_OURS;
        ours->owner = OWNER_OTHERS;
        note_levels(ours, ours_db, level);
    }
}

static void compare_all(struct whose *whose, int64_t now_ns)
{
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *ours = find_owner(whose, OWNER_OURS), *train = &whose->trains[i];
        if (!ours)
            return;
        if (train->owner == OWNER_RIVAL && !ours->told && silent(ours, now_ns) && !silent(train, now_ns)) {
            train->owner = OWNER_OURS;
            ours->owner = OWNER_NONE;
        }
        if (train->owner == OWNER_UNSETTLED && ours->n >= ESTABLISHED && !ours->adopted)
            train->owner = OWNER_OTHERS;
        bool beside = train->owner == OWNER_OTHERS || train->owner == OWNER_RIVAL;
        if (beside && ours->n >= ESTABLISHED)
            compare(ours, train);
    }
}

/* ---- loose impulses, and the trains found among them */
static void add_loose(struct whose *whose, const struct whose_impulse *impulse)
{
    uint32_t kept = whose->n_loose < WHOSE_MAX_LOOSE ? whose->n_loose : WHOSE_MAX_LOOSE - 1;
    memmove(whose->loose_ns + 1, whose->loose_ns, kept * sizeof whose->loose_ns[0]);
    memmove(whose->loose_db + 1, whose->loose_db, kept * sizeof whose->loose_db[0]);
    whose->loose_ns[0] = impulse->time_ns;
    whose->loose_db[0] = impulse->level_db;
    whose->n_loose = kept + 1;
}

/* Moves the loose impulses at the places (the newest first) into the train; into none where it is NULL. */
static void take_loose(struct whose *whose, struct whose_train *train, uint32_t n, const uint32_t *places)
{
    for (uint32_t i = n; train && i-- > 0;)
        whose_train_add(train, whose->loose_ns[places[i]], whose->loose_db[places[i]]);
    uint32_t left = 0, next = 0;
    for (uint32_t i = 0; i < whose->n_loose; i++) {
        if (next < n && places[next] == i) {
            next++;
            continue;
        }
        whose->loose_ns[left] = whose->loose_ns[i];
        whose->loose_db[left++] = whose->loose_db[i];
    }
    whose->n_loose = left;
}

/* How much of what ours must have struck since then was heard, from 0 to 1; NAN while that is under three. */
static double kept_up(const struct whose_train *ours, int64_t since_ns, int64_t now_ns)
{
    double expected = time_to_s(now_ns - since_ns) / whose_train_interval_s(ours);
    uint32_t heard = 0;
    for (uint32_t i = 0; i < WHOSE_KEPT && i < ours->n; i++)
        heard += ours->time_ns[i] >= since_ns;
    if (!(expected >= 3))
        return NAN;
    return heard / (expected < WHOSE_KEPT ? expected : WHOSE_KEPT);
}

static enum whose_owner owner_beside(const struct whose_train *ours, double off_db)
{
    if (off_db < -WHOSE_BELOW_DB)
        return OWNER_OTHERS;
    return ours->n < PROVEN || ours->adopted || off_db > 0 ? OWNER_RIVAL : OWNER_OTHERS;
}

/* Another's that is known by level, and by rhythm where that is asked for: it was out of step for a while. */
static struct whose_train *known_as(struct whose *whose, const struct whose_train *found, bool by_rhythm)
{
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        double ratio = whose_train_interval_s(found) / whose_train_interval_s(train);
        if (train->owner == OWNER_OTHERS && fabs(found->slow_db - train->slow_db) <= ALIKE_DB &&
            (!by_rhythm || fabs(ratio - 1) < ALIKE_SHARE))
            return train;
    }
    return NULL;
}

/* A train has come up beside ours, or ours has changed its interval and level, or a known one its phase. */
static void form_beside(struct whose *whose, struct whose_train *ours, const struct whose_said *said,
                        const struct whose_train *found, uint32_t n, const uint32_t *places)
{
    int64_t now_ns = whose->loose_ns[0];
    double level = whose_train_level_db(found), off = level - whose_train_level_db(ours);
    double share = kept_up(ours, whose->loose_ns[places[n - 1]], now_ns);
    bool overdue = !(time_to_s(now_ns - ours->time_ns[0]) < 2.5 * whose_train_interval_s(ours));
    bool near = in_range(ours, level), changed = near && !(share >= 0.5);
    struct whose_train *into = known_as(whose, found, near || overdue);
    if (!into && overdue && (changed || at_liberty(ours, said, now_ns)))
        into = ours;
    bool beside = !near || (share >= 0.7 && n >= ENOUGH_BESIDE && fabs(off) > ALIKE_DB);
    if (!into && !overdue && beside) {
        into = whose_new_train(whose, owner_beside(ours, off));
        into->first_db = level;
        into->ours_then_db = whose_train_level_db(ours);
    }
    if (into)
        into->slow_s = NAN; /* learnt anew */
    if (into || (!overdue && near && !(fabs(off) > ALIKE_DB)))
        take_loose(whose, into, n, places);
}

static void gather(const struct whose *whose, uint32_t n, const uint32_t *places, struct whose_train *out)
{
    *out = no_train;
    for (uint32_t i = n; i-- > 0;)
        whose_train_add(out, whose->loose_ns[places[i]], whose->loose_db[places[i]]);
}

static void form(struct whose *whose, const struct whose_said *said)
{
    struct whose_train found;
    uint32_t places[WHOSE_MAX_LOOSE], n = whose_find_train(whose, places);
    struct whose_train *ours = find_owner(whose, OWNER_OURS);
    if (n < ESTABLISHED)
        return;
    gather(whose, n, places, &found);
    if (said->on && ours) {
        form_beside(whose, ours, said, &found, n, places);
        return;
    }
    struct whose_train *into = known_as(whose, &found, true);
    if (into)
        into->slow_s = NAN; /* learnt anew */
    else
        into = whose_new_train(whose, said->on ? OWNER_OURS : said->job ? OWNER_UNSETTLED : OWNER_OTHERS);
    take_loose(whose, into, n, places);
}

/* ---- decisions */
static struct whose_train *best_train(struct whose *whose, const struct whose_impulse *impulse,
                                      enum whose_phase *out_phase)
{
    struct whose_train *best = NULL;
    double highest = LOG_OF_NONE;
    for (uint32_t i = 0; i < WHOSE_MAX_TRAINS; i++) {
        struct whose_train *train = &whose->trains[i];
        if (train->owner == OWNER_NONE)
            continue;
        struct whose_fit fit = whose_train_fit(train, impulse->time_ns, impulse->level_db);
        if (fit.log_likelihood > highest) {
            highest = fit.log_likelihood;
            best = train;
            *out_phase = fit.phase;
        }
    }
    return best;
}

static enum impulse_whose add_to(struct whose_train *train, const struct whose_impulse *impulse,
                                 enum impulse_whose decision)
{
    whose_train_add(train, impulse->time_ns, impulse->level_db);
    if (train->owner == OWNER_OURS && train->n == ESTABLISHED)
        train->first_db = whose_train_level_db(train);
    return decision;
}

static enum impulse_whose take_loosely(struct whose *whose, const struct whose_said *said,
                                       const struct whose_impulse *impulse, enum impulse_whose decision)
{
    add_loose(whose, impulse);
    form(whose, said);
    return decision;
}

/* Said to be silent: what is heard is another's or unknown. */
static enum impulse_whose take_unsaid(struct whose *whose, const struct whose_said *said,
                                      const struct whose_impulse *impulse)
{
    enum whose_phase phase = WHOSE_NO_RHYTHM;
    struct whose_train *best = best_train(whose, impulse, &phase);
    bool others = best && best->owner == OWNER_OTHERS, rhythm = phase == WHOSE_IN_RHYTHM;
    bool level = !others || !(fabs(impulse->level_db - best->slow_db) > GROWN_DB);
    if (others && level && phase != WHOSE_OFF_RHYTHM)
        return add_to(best, impulse, rhythm ? IMPULSE_OTHERS : IMPULSE_UNKNOWN);
    if (best && !others && (best->owner == OWNER_UNSETTLED || phase != WHOSE_NO_RHYTHM))
        return add_to(best, impulse, IMPULSE_UNKNOWN);
    return take_loosely(whose, said, impulse, IMPULSE_UNKNOWN);
}

/* What was heard before the source was said to sound is all that has been heard for long since: it is ours.
 */
static bool adopt(struct whose *whose, struct whose_train *train, const struct whose_impulse *impulse)
{
    struct whose_train *ours = find_owner(whose, OWNER_OURS);
    if (train->told || (ours && ours->n >= ESTABLISHED) ||
        !longer_than(train, impulse->time_ns - whose->on_ns, WAIT_INTERVALS))
        return false;
    if (ours)
        ours->owner = OWNER_NONE;
    train->owner = OWNER_OURS;
    train->adopted = true;
    return true;
}

static enum impulse_whose take_as_others(struct whose *whose, struct whose_train *train,
                                         const struct whose_said *said, const struct whose_impulse *impulse,
                                         enum whose_phase phase)
{
    struct whose_train *ours = find_owner(whose, OWNER_OURS);
    bool maybe_ours = !ours || in_range(ours, impulse->level_db) ||
                      (phase != WHOSE_IN_RHYTHM && at_liberty(ours, said, impulse->time_ns));
    if (adopt(whose, train, impulse))
        return add_to(train, impulse, IMPULSE_OURS);
    if (phase == WHOSE_OFF_RHYTHM && maybe_ours) {
        return take_loosely(whose, said, impulse, IMPULSE_OURS);
    }
    /* Of one that a person has named, its level is enough where it begins again after a rest. */
    bool known = train->told && fabs(impulse->level_db - train->slow_db) <= ALIKE_DB;
    bool sure = phase == WHOSE_IN_RHYTHM || !maybe_ours || (known && phase == WHOSE_NO_RHYTHM);
    return add_to(train, impulse, sure ? IMPULSE_OTHERS : IMPULSE_OURS);
}

static enum impulse_whose take_said(struct whose *whose, const struct whose_said *said,
                                    const struct whose_impulse *impulse)
{
    enum whose_phase phase = WHOSE_NO_RHYTHM;
    struct whose_train *best = best_train(whose, impulse, &phase);
    struct whose_train *ours = find_owner(whose, OWNER_OURS);
    if (best && best->owner == OWNER_OTHERS)
        return take_as_others(whose, best, said, impulse, phase);
    if (best && best->owner == OWNER_UNSETTLED)
        adopt(whose, best, impulse);
    if (best)
        return add_to(best, impulse, IMPULSE_OURS);
    if (!ours)
        return add_to(whose_new_train(whose, OWNER_OURS), impulse, IMPULSE_OURS);
    bool maybe = in_range(ours, impulse->level_db) || at_liberty(ours, said, impulse->time_ns);
    return take_loosely(whose, said, impulse, maybe ? IMPULSE_OURS : IMPULSE_UNKNOWN);
}

static bool expected(const struct whose_impulse *impulse)
{
    double away = time_to_s(impulse->time_ns - impulse->expected_ns);
    return impulse->expected_ns >= 0 && fabs(away) <= 3 * impulse->expected_spread_s;
}

enum impulse_whose whose_take(struct whose *whose, const struct whose_said *said,
                              const struct whose_impulse *impulse)
{
    enum impulse_whose decision;
    if (said->on && said->on_ns != whose->on_ns)
        begin_work(whose, said->on_ns);
    forget(whose, impulse->time_ns);
    if (said->on && expected(impulse)) {
        struct whose_train *ours = find_owner(whose, OWNER_OURS);
        decision = add_to(ours ? ours : whose_new_train(whose, OWNER_OURS), impulse, IMPULSE_OURS);
    } else
        decision = said->on ? take_said(whose, said, impulse) : take_unsaid(whose, said, impulse);
    compare_all(whose, impulse->time_ns);
    return decision == IMPULSE_OURS && !said->job ? IMPULSE_UNKNOWN : decision;
}
