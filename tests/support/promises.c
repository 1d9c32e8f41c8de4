/* What must always hold of the watch; see promises.h. */
#include "support/promises.h"
#include "base/time.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

void promises_reset(struct promises *promises, const struct permit *permit)
{
    *promises = (struct promises){.permit = permit, .released_ns = -1};
}

static bool sounds(enum phase phase)
{
    static const enum phase sounding[] = {PHASE_SOFT_START, PHASE_HOLD,     PHASE_FULL_POWER, PHASE_REDUCED,
                                          PHASE_VIBRO,      PHASE_DRILLING, PHASE_LINE_TURN,  PHASE_TEST};
    for (size_t i = 0; i < sizeof sounding / sizeof sounding[0]; i++)
        if (phase == sounding[i])
            return true;
    return false;
}

bool promises_restrains(int word)
{
    return word == ADVICE_STOP || word == ADVICE_HOLD_POWER || word == ADVICE_REDUCE_POWER ||
           word == ADVICE_DO_NOT_START;
}

bool promises_is_fault(const struct event *event)
{
    return event->kind == EVENT_UNHEARD || event->kind == EVENT_LEVEL ||
           (event->kind == EVENT_NOTE && event->as.note.kind == NOTE_SIGN_OFF);
}

static int person_of(const char *name)
{
    for (int i = 0; i < RANDOM_PEOPLE; i++)
        if (strcmp(random_people[i], name) == 0)
            return i;
    return -1;
}

static bool on_watch(const struct promises *promises, const char *name)
{
    int i = person_of(name);
    return i >= 0 && (promises->visual[i] || promises->acoustic[i]);
}

static unsigned count(const bool on[RANDOM_PEOPLE])
{
    unsigned n = 0;
    for (int i = 0; i < RANDOM_PEOPLE; i++)
        n += on[i];
    return n;
}

/* By the least that any depth asks for. */
static bool watch_is_kept(const struct promises *promises)
{
    const struct permit *permit = promises->permit;
    bool visual = true, acoustic = true;
    for (uint32_t i = 0; i < permit->n_pre_watches; i++) {
        visual = visual && permit->pre_watches[i].visual;
        acoustic = acoustic && permit->pre_watches[i].acoustic;
    }
    unsigned least_visual = permit->staff.least_visual > 1 ? permit->staff.least_visual : 1;
    unsigned least_acoustic = permit->staff.least_acoustic > 1 ? permit->staff.least_acoustic : 1;
    return (!visual || count(promises->visual) >= least_visual) &&
           (!acoustic || count(promises->acoustic) >= least_acoustic);
}

static int64_t least_pre_watch_ns(const struct permit *permit)
{
    double least = INFINITY;
    for (uint32_t i = 0; i < permit->n_pre_watches; i++)
        least = fmin(least, permit->pre_watches[i].minutes);
    return time_from_minutes(least);
}

/* The shortest that any species of the group has. */
static int64_t clearance_ns(const struct permit *permit, enum group group)
{
    double least = INFINITY;
    for (uint32_t i = 0; i < permit->n_clearances; i++)
        if (permit->clearances[i].groups & PERMIT_GROUP_BIT(group))
            least = fmin(least, permit->clearances[i].minutes);
    return isfinite(least) ? time_from_minutes(least) : 0;
}

/* Zones for any animal of the group that is found that way. */
static bool is_plain(const struct permit_zone *zone, enum group group, uint32_t found)
{
    return (zone->groups & PERMIT_GROUP_BIT(group)) && (zone->found & found) && !zone->calf_only &&
           !(zone->least_number > 1) && zone->n_species == 0;
}

/* Seen at no more than half the zone's radius: inside with P above 0.99, the spread of distances being 0.2.
 */
static void take_sighting(struct promises *promises, const struct note *note, int64_t now_ns)
{
    const struct permit *permit = promises->permit;
    int64_t clears = now_ns + clearance_ns(permit, note->group);
    int64_t told =
        on_watch(promises, note->person) ? now_ns : now_ns + time_from_s(permit->confirm_countdown_s);
    for (uint32_t z = 0; z < permit->n_zones; z++)
        if (is_plain(&permit->zones[z], note->group, PERMIT_SEEN) &&
            note->distance_m <= permit->zones[z].radius_m / 2) {
            promises->seen_until_ns[z][note->group] = clears;
            promises->told_from_ns[z][note->group] = told;
        }
}

static void expect_nothing(struct promises *promises)
{
    memset(promises->seen_until_ns, 0, sizeof promises->seen_until_ns);
}

static void take_note(struct promises *promises, const struct note *note, int64_t now_ns)
{
    int i = person_of(note->person);
    bool sign = note->kind == NOTE_SIGN_ON || note->kind == NOTE_SIGN_OFF;
    if (sign && i >= 0)
        *(strcmp(note->watch, "visual") == 0 ? &promises->visual[i] : &promises->acoustic[i]) =
            note->kind == NOTE_SIGN_ON;
    if (note->kind == NOTE_RELEASE && on_watch(promises, note->person))
        promises->released_ns = now_ns;
    if (note->kind == NOTE_SOURCE && strcmp(note->source_state, "off") != 0 &&
        strcmp(note->source_state, "stopped") != 0)
        promises->released_ns = -1;
    if (note->kind == NOTE_OVERRIDE)
        promises->overridden = promises->overridden || strcmp(note->answer, "on") == 0;
    /* What a person may loosen: then nothing is expected of any group. */
    if (note->kind == NOTE_VERDICT || note->kind == NOTE_DISTANCE ||
        (note->kind == NOTE_SIGHTING && note->leaving))
        expect_nothing(promises);
    else if (note->kind == NOTE_SIGHTING)
        take_sighting(promises, note, now_ns);
    /* A distance may be one outside, and it is believed for as long as calls belong together. */
    if (note->kind == NOTE_SIGHTING || note->kind == NOTE_DISTANCE || note->kind == NOTE_VERDICT) {
        memset(promises->heard_until_ns, 0, sizeof promises->heard_until_ns);
        promises->placed_ns = now_ns;
    }
}

static void take_call(struct promises *promises, const struct call *call, int64_t now_ns)
{
    const struct permit *permit = promises->permit;
    bool counts =
        permit->unknown[call->group] != UNKNOWN_IGNORE && now_ns > promises->placed_ns + 600 * TIME_NS_PER_S;
    if (!counts || call->evidence < 20)
        return;
    promises->heard_until_ns[call->group] = call->end_ns + clearance_ns(permit, call->group);
    promises->heard_told_ns[call->group] = now_ns + time_from_s(permit->confirm_countdown_s);
}

void promises_take(struct promises *promises, const struct event *event)
{
    int64_t now_ns = event->known_ns;
    if (watch_is_kept(promises))
        promises->kept_ns += now_ns - promises->mark_ns;
    promises->mark_ns = now_ns;
    if (event->kind == EVENT_NOTE)
        take_note(promises, &event->as.note, now_ns);
    if (event->kind == EVENT_CALL)
        take_call(promises, &event->as.call, now_ns);
}

/* What the crew is told of an animal inside: false where it may go ahead, or is told less than the zone asks
 * for. */
static bool word_fits(const struct promises *promises, enum phase phase, int word, enum permit_action action,
                      bool told)
{
    static const enum advice_word least[] = {[ACTION_PREPARE] = ADVICE_PREPARE_TO_STOP,
                                             [ACTION_DELAY] = ADVICE_PREPARE_TO_STOP,
                                             [ACTION_HOLD] = ADVICE_HOLD_POWER,
                                             [ACTION_REDUCE] = ADVICE_REDUCE_POWER,
                                             [ACTION_STOP] = ADVICE_STOP};
    bool go = word == ADVICE_MAY_START || word == ADVICE_RESUME || word == ADVICE_NEW_SOFT_START;
    bool asked = sounds(phase) && action >= ACTION_PREPARE && told && !promises->overridden;
    return !(asked && word < (int)least[action]) && !(go && action >= ACTION_DELAY);
}

static bool animals_are_heeded(const struct promises *promises, enum phase phase, int64_t since_ns, int word,
                               int64_t now_ns, char problem[256])
{
    const struct permit *permit = promises->permit;
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        for (uint32_t z = 0; z < permit->n_zones; z++) {
            const struct permit_zone *zone = &permit->zones[z];
            bool seen = promises->seen_until_ns[z][g] > now_ns;
            bool heard = promises->heard_until_ns[g] > now_ns && is_plain(zone, (enum group)g, PERMIT_HEARD);
            bool told = now_ns > since_ns + time_from_s(permit->confirm_countdown_s) &&
                        ((seen && now_ns > promises->told_from_ns[z][g]) ||
                         (heard && now_ns > promises->heard_told_ns[g]));
            if (!(seen || heard) || word_fits(promises, phase, word, zone->action[phase], told))
                continue;
            snprintf(problem, 256, "'%s' in phase %s at %.3f s while a %s is %s inside %.40s",
                     word < 0 ? "nothing" : advice_text((enum advice_word)word), phase_text(phase),
                     time_to_s(now_ns), group_text((enum group)g), seen ? "seen" : "heard", zone->name);
            return false;
        }
    return true;
}

bool promises_kept(const struct promises *promises, enum phase phase, int64_t since_ns, int crew_word,
                   int64_t now_ns, char problem[256])
{
    if (!animals_are_heeded(promises, phase, since_ns, crew_word, now_ns, problem))
        return false;
    if (crew_word != ADVICE_MAY_START)
        return true;
    const char *wrong = !watch_is_kept(promises)    ? "the watch is not kept"
                        : promises->released_ns < 0 ? "nobody has released it"
                        : promises->kept_ns < least_pre_watch_ns(promises->permit)
                            ? "the watch was not kept long enough"
                        : phase != PHASE_READY ? "the phase is another"
                                               : NULL;
    if (wrong)
        snprintf(problem, 256, "'may start' at %.3f s, and %s", time_to_s(now_ns), wrong);
    return !wrong;
}
