/* Who is on watch, what could not be heard, and how much of the pre-watch is done. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

/* Deafness that lasts this long is said; pieces of unheard time come at least every 10 s while it lasts. */
#define LONG_UNHEARD_NS (10 * TIME_NS_PER_S)
#define NEXT_PIECE_NS (11 * TIME_NS_PER_S)
/* A complete pre-watch goes on for this part of its length, so that a crackle does not undo it. */
#define SLACK_PART 100

bool effort_on_watch(const struct watch *watch, const char *person)
{
    for (uint32_t i = 0; i < watch->effort.n_people; i++)
        if (strcmp(watch->effort.people[i].name, person) == 0 &&
            strcmp(watch->effort.people[i].watch, "crew") != 0)
            return true;
    return false;
}

static uint32_t count_as(const struct watch *watch, const char *as)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < watch->effort.n_people; i++)
        n += strcmp(watch->effort.people[i].watch, as) == 0;
    return n;
}

bool effort_kept_as(const struct watch *watch, const char *as)
{
    const struct permit_staff *staff = &watch->permit->staff;
    uint32_t least = strcmp(as, "visual") == 0 ? staff->least_visual : staff->least_acoustic;
    return count_as(watch, as) >= (least > 1 ? least : 1);
}

const char *effort_missing_as(const struct watch *watch, const char *as)
{
    bool visual = strcmp(as, "visual") == 0;
    if (count_as(watch, as) > 0)
        return visual ? "too few visual observers are on watch" : "too few acoustic observers are on watch";
    return visual ? "no visual observer is on watch" : "no acoustic observer is on watch";
}

bool effort_anybody(const struct watch *watch)
{
    return count_as(watch, "visual") > 0 || count_as(watch, "acoustic") > 0;
}

const struct permit_pre_watch *effort_pre_watch(const struct watch *watch)
{
    return permit_pre_watch_at(watch->permit, watch->surroundings.depth_m);
}

bool effort_kept(const struct watch *watch, const char **out_missing)
{
    bool visual = !effort_pre_watch(watch)->visual || effort_kept_as(watch, "visual");
    bool acoustic = !effort_pre_watch(watch)->acoustic || effort_kept_as(watch, "acoustic");
    bool some = count_as(watch, "visual") + count_as(watch, "acoustic") > 0;
    const char *missing = visual && acoustic ? ""
                          : visual           ? effort_missing_as(watch, "acoustic")
                          : acoustic         ? effort_missing_as(watch, "visual")
                          : some             ? "too few visual and acoustic observers are on watch"
                                             : "neither a visual nor an acoustic observer is on watch";
    if (out_missing)
        *out_missing = missing;
    return visual && acoustic;
}

void effort_names(const struct watch *watch, char out[FLOW_TEXT_SIZE])
{
    size_t used = 0;
    out[0] = '\0';
    for (uint32_t i = 0; i < watch->effort.n_people && used < FLOW_TEXT_SIZE; i++) {
        const struct watch_person *person = &watch->effort.people[i];
        if (strcmp(person->watch, "crew") != 0)
            used += (size_t)snprintf(out + used, FLOW_TEXT_SIZE - used, "%s%s (%s)", used ? ", " : "",
                                     person->name, person->watch);
    }
}

void effort_sign_on(struct watch *watch, const struct note *note)
{
    struct effort *effort = &watch->effort;
    uint32_t i = 0;
    while (i < effort->n_people && (strcmp(effort->people[i].name, note->person) != 0 ||
                                    strcmp(effort->people[i].watch, note->watch) != 0))
        i++;
    if (i == WATCH_MAX_PEOPLE) {
        note_without_effect(watch, "%.60s cannot sign on: %d people are on watch already", note->person,
                            WATCH_MAX_PEOPLE);
        return;
    }
    if (i == effort->n_people) {
        effort->n_people++;
        memcpy(effort->people[i].name, note->person, sizeof effort->people[i].name);
        memcpy(effort->people[i].watch, note->watch, sizeof effort->people[i].watch);
        effort->people[i].since_ns = watch->now_ns;
    }
    memcpy(effort->people[i].station, note->station, sizeof effort->people[i].station);
}

void effort_sign_off(struct watch *watch, const struct note *note)
{
    struct effort *effort = &watch->effort;
    for (uint32_t i = 0; i < effort->n_people; i++)
        if (strcmp(effort->people[i].name, note->person) == 0 &&
            strcmp(effort->people[i].watch, note->watch) == 0) {
            memmove(&effort->people[i], &effort->people[i + 1],
                    (effort->n_people - i - 1) * sizeof effort->people[0]);
            effort->n_people--;
            return;
        }
    note_without_effect(watch, "%.60s signs off a watch (%s) that nobody of that name keeps", note->person,
                        note->watch);
}

void watch_check_put(struct watch_check *checks, uint32_t *n, const struct note *note, int64_t now_ns)
{
    uint32_t i = 0;
    while (i < *n &&
           (strcmp(checks[i].check, note->check) != 0 || strcmp(checks[i].station, note->station) != 0))
        i++;
    if (i == WATCH_MAX_CHECKS) { /* a station too many: the check that is oldest makes room */
        i = 0;
        for (uint32_t k = 1; k < WATCH_MAX_CHECKS; k++)
            if (checks[k].known_ns < checks[i].known_ns)
                i = k;
    }
    if (i == *n)
        ++*n;
    memcpy(checks[i].check, note->check, sizeof checks[i].check);
    memcpy(checks[i].station, note->station, sizeof checks[i].station);
    memcpy(checks[i].person, note->person, sizeof checks[i].person);
    checks[i].good = strcmp(note->answer, "good") == 0;
    checks[i].known_ns = now_ns;
}

int64_t effort_needed_ns(const struct watch *watch)
{
    return time_from_s(effort_pre_watch(watch)->minutes * 60);
}

static int64_t hole_limit_ns(const struct watch *watch)
{
    double minutes = watch->permit->pre_watch_hole_minutes;
    if (!(minutes > 0))
        minutes = source_break(watch)->minutes;
    return minutes < 1e6 ? time_from_s(minutes * 60) : INT64_MAX / 4;
}

bool effort_complete(const struct watch *watch)
{
    return watch->effort.credit_ns >= effort_needed_ns(watch) && effort_kept(watch, NULL);
}

void effort_accrue(struct watch *watch, int64_t to_ns)
{
    struct effort *effort = &watch->effort;
    if (effort->accruing) {
        int64_t most = effort_needed_ns(watch) + effort_needed_ns(watch) / SLACK_PART;
        effort->credit_ns += to_ns - effort->mark_ns;
        if (effort->credit_ns > most)
            effort->credit_ns = most;
    }
    effort->mark_ns = to_ns;
}

void effort_begin_anew(struct watch *watch)
{
    watch->effort.credit_ns = 0;
    watch->effort.kept.n = 0;
    watch->effort.from_ns = watch->now_ns;
}

/* Whether the source lets the pre-watch accrue in the present phase. */
static bool phase_lets_accrue(const struct watch *watch)
{
    if (source_sounds(watch->phase))
        return watch->permit->break_watch == BREAK_WATCH_STANDS;
    if (watch->phase == PHASE_BREAK || watch->phase == PHASE_SHUTDOWN || watch->phase == PHASE_POST_WATCH)
        return watch->permit->break_watch != BREAK_WATCH_NOTHING;
    return true;
}

/* Makes a stretch longer by one that touches it. Whether it did. */
static bool join(struct span *run, const struct span *other)
{
    bool touches = other->start_ns <= run->end_ns && other->end_ns >= run->start_ns;
    bool longer = touches && (other->start_ns < run->start_ns || other->end_ns > run->end_ns);
    if (longer && other->start_ns < run->start_ns)
        run->start_ns = other->start_ns;
    if (longer && other->end_ns > run->end_ns)
        run->end_ns = other->end_ns;
    return longer;
}

/* The whole hole that this one is of: somebody missing, the program down and nothing heard may follow each
 * other. */
static struct span whole_hole(const struct watch *watch, int64_t start_ns, int64_t end_ns)
{
    const struct effort *effort = &watch->effort;
    const struct span present = {effort->hole_ns, watch->now_ns};
    struct span run = {start_ns, end_ns};
    bool longer, ears = effort_pre_watch(watch)->acoustic;
    do {
        longer = effort->hole_ns >= 0 && join(&run, &present);
        for (uint32_t i = 0; i < effort->missed.n; i++)
            longer = join(&run, &effort->missed.all[i]) || longer;
        for (uint32_t i = 0; ears && i < effort->deaf.n; i++)
            longer = join(&run, &effort->deaf.all[i]) || longer;
    } while (longer);
    return run;
}

/* The stretches that make up the credit: the newest of those that were kept. */
static struct spans counted(const struct watch *watch)
{
    const struct effort *effort = &watch->effort;
    struct spans all = effort->kept;
    if (effort->accruing)
        spans_add(&all, effort->from_ns, watch->now_ns);
    spans_newest(&all, effort->credit_ns);
    return all;
}

static void count_only(struct watch *watch, const struct spans *counted)
{
    struct effort *effort = &watch->effort;
    effort->kept = *counted;
    effort->from_ns = watch->now_ns;
    effort->credit_ns = spans_total_ns(counted);
}

/* After a hole that is too long only what was kept since counts. */
static void begin_after_hole(struct watch *watch, int64_t start_ns, int64_t end_ns)
{
    struct span hole = whole_hole(watch, start_ns, end_ns);
    if (hole.end_ns - hole.start_ns < hole_limit_ns(watch))
        return;
    struct spans since = {0}, left = counted(watch);
    spans_add(&since, hole.end_ns, watch->now_ns);
    spans_common(&left, &since, &left);
    count_only(watch, &left);
}

void effort_update(struct watch *watch)
{
    struct effort *effort = &watch->effort;
    bool kept = effort_kept(watch, NULL) && !effort->outage;
    bool accrues = kept && phase_lets_accrue(watch);
    if (!kept && effort->hole_ns < 0)
        effort->hole_ns = watch->now_ns;
    if (effort->hole_ns >= 0)
        begin_after_hole(watch, effort->hole_ns, watch->now_ns);
    if (kept && effort->hole_ns >= 0) {
        spans_add(&effort->missed, effort->hole_ns, watch->now_ns);
        effort->hole_ns = -1;
    }
    if (accrues && !effort->accruing)
        effort->from_ns = watch->now_ns;
    if (!accrues && effort->accruing)
        spans_add(&effort->kept, effort->from_ns, watch->now_ns);
    effort->accruing = accrues;
}

void effort_outage(struct watch *watch, bool outage)
{
    watch->effort.outage = outage;
    effort_update(watch);
}

static uint32_t listening(const struct watch *watch, uint32_t stream)
{
    bool any = false;
    for (uint32_t i = 0; i < WATCH_MAX_STREAMS; i++)
        any = any || watch->setup.listening[i] != 0;
    return any ? watch->setup.listening[stream] : stream == 0 ? 1U : 0U;
}

/* The part of a piece in which no listening channel of any stream heard. */
static struct spans unheard_by_all(const struct watch *watch, const struct unheard *piece)
{
    struct spans common = {0};
    spans_add(&common, piece->start_ns, piece->end_ns);
    for (uint32_t stream = 0; stream < WATCH_MAX_STREAMS; stream++)
        for (uint32_t channel = 0; channel < FLOW_MAX_CHANNELS; channel++)
            if (listening(watch, stream) & (UINT32_C(1) << channel))
                spans_common(&common, &watch->effort.unheard[stream * FLOW_MAX_CHANNELS + channel], &common);
    return common;
}

/* Takes back what was accrued while nothing was heard, and begins anew after too long a hole. */
static void take_back(struct watch *watch, const struct spans *newly)
{
    struct spans left = counted(watch);
    spans_without(&left, newly, &left);
    count_only(watch, &left);
    for (uint32_t i = 0; i < newly->n; i++)
        begin_after_hole(watch, newly->all[i].start_ns, newly->all[i].end_ns);
}

void effort_unheard(struct watch *watch, const struct event *event)
{
    struct effort *effort = &watch->effort;
    const struct unheard *piece = &event->as.unheard;
    bool deaf = piece->cause == UNHEARD_GAP || piece->cause == UNHEARD_DEAD_CHANNEL ||
                piece->cause == UNHEARD_TOO_QUIET;
    if (!deaf || event->stream < 1 || event->stream > WATCH_MAX_STREAMS)
        return;
    for (uint32_t channel = 1; channel <= FLOW_MAX_CHANNELS; channel++)
        if (piece->channel == 0 || piece->channel == channel)
            spans_add(&effort->unheard[(event->stream - 1) * FLOW_MAX_CHANNELS + channel - 1],
                      piece->start_ns, piece->end_ns);
    struct spans newly = unheard_by_all(watch, piece);
    spans_without(&newly, &effort->deaf, &newly);
    if (newly.n == 0)
        return;
    for (uint32_t i = 0; i < newly.n; i++)
        spans_add(&effort->deaf, newly.all[i].start_ns, newly.all[i].end_ns);
    flow_id(event->run, event->stream, "unheard", event->counter, effort->deaf_id);
    if (effort_pre_watch(watch)->acoustic)
        take_back(watch, &newly);
}

/* The newest that was long; short ones after it do not end it sooner. */
static const struct span *last_deaf(const struct watch *watch)
{
    const struct spans *deaf = &watch->effort.deaf;
    for (uint32_t i = deaf->n; i > 0; i--)
        if (deaf->all[i - 1].end_ns - deaf->all[i - 1].start_ns >= LONG_UNHEARD_NS)
            return &deaf->all[i - 1];
    return NULL;
}

bool effort_deaf(const struct watch *watch)
{
    const struct span *last = last_deaf(watch);
    return effort_pre_watch(watch)->acoustic && last && watch->now_ns < last->end_ns + NEXT_PIECE_NS;
}

static void earlier(int64_t *due, int64_t now_ns, int64_t at_ns)
{
    if (at_ns > now_ns && at_ns < *due)
        *due = at_ns;
}

int64_t effort_due_ns(const struct watch *watch)
{
    const struct effort *effort = &watch->effort;
    int64_t due = INT64_MAX;
    if (effort_ready_ns(watch) >= 0)
        earlier(&due, watch->now_ns, effort_ready_ns(watch));
    if (effort->hole_ns >= 0)
        earlier(&due, watch->now_ns,
                whole_hole(watch, effort->hole_ns, watch->now_ns).start_ns + hole_limit_ns(watch));
    if (last_deaf(watch))
        earlier(&due, watch->now_ns, last_deaf(watch)->end_ns + NEXT_PIECE_NS);
    return due;
}

int64_t effort_ready_ns(const struct watch *watch)
{
    int64_t left = effort_needed_ns(watch) - watch->effort.credit_ns;
    if (left <= 0)
        return watch->now_ns;
    return watch->effort.accruing ? watch->effort.mark_ns + left : -1;
}
