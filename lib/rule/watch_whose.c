/* What a person says of whose impulses these are. A note names an impulse; the train that it is tied to is
 * ours or another's from then on, on every channel that hears it, and so are those impulses of it in the job
 * that were heard since the time that the note states. What was counted otherwise is said as corrections. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define AROUND_NS                                                                                            \
    (20 * TIME_NS_PER_S) /* impulses become known in the order of their times, but for this at most */
#define TOLD 64          /* last impulses by which the trains of a channel are told what they are */

/* What a note is about. */
struct speech {
    struct watch *watch;
    const struct note *note;
    enum impulse_whose whose;
    int64_t since_ns;
    bool flips;                /* not only counted */
    bool answers;              /* it takes away the impulse of the last contradiction */
    uint32_t n, n_corrections; /* impulses, and outcomes for them */
    int64_t first_ns;          /* of them */
    struct correction_outcome correction;
};

size_t whose_place(uint32_t stream, uint32_t channel)
{
    bool known = stream >= 1 && stream <= WATCH_MAX_STREAMS && channel >= 1 && channel <= FLOW_MAX_CHANNELS;
    return known ? (stream - 1) * FLOW_MAX_CHANNELS + channel - 1 : 0;
}

struct heard *whose_heard(const struct watch *watch, uint64_t token)
{
    return &watch->heard[token % WATCH_MAX_HEARD];
}

uint64_t whose_oldest(const struct watch *watch)
{
    return watch->n_heard > WATCH_MAX_HEARD ? watch->n_heard - WATCH_MAX_HEARD : 0;
}

static uint64_t first_of_job(const struct watch *watch)
{
    return watch->job_heard > whose_oldest(watch) ? watch->job_heard : whose_oldest(watch);
}

void whose_keep(struct watch *watch, const struct event *event, double level_db, int64_t struck_ns)
{
    const struct impulse *impulse = &event->as.impulse;
    *whose_heard(watch, watch->n_heard++) = (struct heard){.time_ns = impulse->time_ns,
                                                           .struck_ns = struck_ns,
                                                           .beside = impulse->beside,
                                                           .counter = event->counter,
                                                           .run = event->run,
                                                           .level_db = (float)level_db,
                                                           .stream = (uint8_t)event->stream,
                                                           .channel = (uint8_t)impulse->channel,
                                                           .whose = (uint8_t)impulse->whose};
}

/* Its place in the ring; false where it is not there. */
static bool find(const struct watch *watch, const char *id, uint64_t *out)
{
    uint32_t run, stream;
    uint64_t counter;
    if (sscanf(id, "%" SCNu32 ".%" SCNu32 ".impulse.%" SCNu64, &run, &stream, &counter) != 3)
        return false;
    for (*out = watch->n_heard; (*out)-- > whose_oldest(watch);) {
        const struct heard *heard = whose_heard(watch, *out);
        if (heard->counter == counter && heard->stream == stream && heard->run == run)
            return true;
    }
    return false;
}

static bool same_blow(int64_t a_ns, int64_t b_ns)
{
    return llabs(a_ns - b_ns) < BLOW_SAME_NS;
}

static size_t place_of(const struct heard *heard)
{
    return whose_place(heard->stream, heard->channel);
}

#define DELAY_NS (BLOW_SAME_NS / 20) /* a step of the delays between two channels */
#define DELAYS 40u
#define NEAR_NS (5 * DELAY_NS) /* one blow's delay is off the usual by at most this */

/* Two channels' delay of one hammer: the named blows of one, and what the other heard about then. */
struct pairing {
    struct watch *watch;
    size_t place;
    uint64_t from; /* what is earlier is too early for the blow, and for those after it */
    uint32_t votes[DELAYS];
};

/* The other channel's impulse that is nearest to a delay after a blow, within a limit; each has a vote for
 * its own delay. */
static struct heard *nearest(struct pairing *pairing, const struct heard *blow, int64_t delay_ns,
                             int64_t limit_ns)
{
    struct watch *watch = pairing->watch;
    struct heard *found = NULL;
    while (pairing->from < watch->n_heard &&
           whose_heard(watch, pairing->from)->time_ns < blow->time_ns - AROUND_NS)
        pairing->from++;
    for (uint64_t t = pairing->from; t < watch->n_heard; t++) {
        struct heard *heard = whose_heard(watch, t);
        int64_t after_ns = heard->struck_ns - blow->struck_ns;
        if (heard->time_ns > blow->time_ns + AROUND_NS)
            break;
        if (place_of(heard) != pairing->place || !same_blow(after_ns, 0))
            continue;
        pairing->votes[(after_ns + BLOW_SAME_NS) / DELAY_NS]++;
        if (llabs(after_ns - delay_ns) < limit_ns) {
            limit_ns = llabs(after_ns - delay_ns);
            found = heard;
        }
    }
    return found;
}

/* The delay that most have; what our own hammer strikes meanwhile has any. */
static int64_t usual_delay_ns(const struct pairing *pairing)
{
    uint32_t best = 0, most = 0;
    for (uint32_t i = 0; i + 1 < DELAYS; i++)
        if (pairing->votes[i] + pairing->votes[i + 1] > most) {
            most = pairing->votes[i] + pairing->votes[i + 1];
            best = i;
        }
    return (int64_t)(best + 1) * DELAY_NS - BLOW_SAME_NS;
}

/* The same hammer on another channel: of each blow the impulse at its usual delay, where most blows have one.
 * The delay is found in three steps: to the step of votes, by the mean about it, and then gone by. */
static void name_elsewhere(struct watch *watch, size_t named_place, size_t place)
{
    int64_t delay_ns = 0, limit_ns = BLOW_SAME_NS;
    for (int pass = 0; pass < 3; pass++) {
        struct pairing pairing = {.watch = watch, .place = place, .from = whose_oldest(watch)};
        int64_t n_blows = 0, n_found = 0, sum_ns = 0;
        for (uint64_t token = whose_oldest(watch); token < watch->n_heard; token++) {
            const struct heard *blow = whose_heard(watch, token);
            if (!blow->named || place_of(blow) != named_place)
                continue;
            struct heard *found = nearest(&pairing, blow, delay_ns, limit_ns);
            n_blows++;
            if (!found)
                continue;
            n_found++;
            sum_ns += found->struck_ns - blow->struck_ns;
            if (pass == 2)
                found->named = true;
        }
        if (2 * n_found <= n_blows)
            return;
        delay_ns = pass == 0 ? usual_delay_ns(&pairing) : sum_ns / n_found;
        limit_ns = NEAR_NS;
    }
}

/* Tells the channel's trains. */
static void tell(struct watch *watch, size_t place, bool ours)
{
    int64_t times_ns[TOLD];
    double levels_db[TOLD];
    uint32_t n = 0;
    for (uint64_t token = watch->n_heard; token-- > whose_oldest(watch) && n < TOLD;) {
        const struct heard *heard = whose_heard(watch, token);
        if (heard->named && place_of(heard) == place) {
            n++;
            times_ns[TOLD - n] = heard->time_ns;
            levels_db[TOLD - n] = (double)heard->level_db;
        }
    }
    if (n >= 2) /* one impulse is no train */
        whose_tell(&watch->source.whose[place], n, times_ns + TOLD - n, levels_db + TOLD - n, ours);
}

static void give(struct speech *speech)
{
    if (speech->correction.n == 0)
        return;
    if (speech->flips) {
        speech->correction.n_following = --speech->n_corrections;
        watch_say_correction(speech->watch, &speech->correction);
    } else
        speech->n_corrections++;
    speech->correction.n = 0;
}

static void correct(struct speech *speech, struct heard *heard)
{
    struct correction_outcome *correction = &speech->correction;
    struct source *source = &speech->watch->source;
    char id[FLOW_ID_SIZE];
    if (correction->n == FLOW_MAX_CORRECTED || correction->run != heard->run)
        give(speech);
    correction->run = heard->run;
    correction->stream = heard->stream;
    correction->channel = heard->channel;
    correction->counters[correction->n++] = heard->counter;
    speech->first_ns =
        speech->n == 0 || heard->time_ns < speech->first_ns ? heard->time_ns : speech->first_ns;
    speech->n++;
    flow_id(heard->run, heard->stream, "impulse", heard->counter, id);
    speech->answers = speech->answers || strcmp(id, source->contradicting) == 0;
    if (speech->flips)
        heard->whose = (uint8_t)speech->whose;
}

/* Once to count, once to correct; a channel after the other. */
static void walk(struct speech *speech, bool flips)
{
    struct watch *watch = speech->watch;
    speech->flips = flips;
    speech->n = 0;
    for (size_t place = 0; place < WATCH_MAX_CHANNELS; place++) {
        for (uint64_t token = first_of_job(watch); token < watch->n_heard; token++) {
            struct heard *heard = whose_heard(watch, token);
            if (heard->named && place_of(heard) == place && heard->whose != speech->whose &&
                heard->time_ns >= speech->since_ns)
                correct(speech, heard);
        }
        give(speech);
    }
}

/* Blows of ours in the job, counted once however many channels hear them; and the last that may be ours. */
static uint32_t count_blows(const struct watch *watch, int64_t *out_last_ns)
{
    uint32_t n = 0;
    int64_t blow_ns = -1;
    *out_last_ns = -1;
    for (uint64_t token = first_of_job(watch); token < watch->n_heard; token++) {
        const struct heard *heard = whose_heard(watch, token);
        if (heard->whose == IMPULSE_OTHERS || heard->beside)
            continue;
        bool same = blow_ns >= 0 && same_blow(heard->struck_ns, blow_ns);
        if (!same)
            blow_ns = heard->struck_ns;
        n += heard->whose == IMPULSE_OURS && !same;
        *out_last_ns = heard->time_ns > *out_last_ns ? heard->time_ns : *out_last_ns;
    }
    return n;
}

/* The finding stays; this one answers it. */
static void answer(struct speech *speech)
{
    struct watch *watch = speech->watch;
    struct source *source = &watch->source;
    struct why why;
    why_reset(&why, watch->permit->soft_start.clause, "finding %s: impulse %s was another's, says %.60s",
              source->contradiction, source->contradicting, speech->note->person);
    why_add_cause(&why, source->contradiction);
    why_add_cause(&why, watch->recent.causes[0]);
    watch_say_finding(watch, "finding answered", "firm", &why);
    source->contradiction[0] = source->contradicting[0] = '\0';
    source->contradicted = false;
}

static void correct_all(struct speech *speech)
{
    struct watch *watch = speech->watch;
    struct source *source = &watch->source;
    int64_t last_ns;
    uint32_t before = count_blows(watch, &last_ns);
    walk(speech, false);
    walk(speech, true);
    source->n_impulses += count_blows(watch, &last_ns) - before;
    if (speech->n == 0 || speech->whose != IMPULSE_OTHERS)
        return;
    if (source->heard)
        source->impulse_ns = last_ns >= 0 ? last_ns : speech->first_ns;
    source->n_unsaid = last_ns >= 0 ? source->n_unsaid : 0;
    if (speech->answers && *source->contradiction)
        answer(speech);
}

/* Names what the note is about, on all channels, and tells their trains. */
static void name_all(struct watch *watch, uint64_t token, bool ours)
{
    size_t named_place = place_of(whose_heard(watch, token));
    bool present[WATCH_MAX_CHANNELS] = {false};
    for (uint64_t t = whose_oldest(watch); t < watch->n_heard; t++) {
        whose_heard(watch, t)->named = false;
        present[place_of(whose_heard(watch, t))] = true;
    }
    whose_name_train(watch, token);
    for (size_t place = 0; place < WATCH_MAX_CHANNELS; place++)
        if (present[place] && place != named_place)
            name_elsewhere(watch, named_place, place);
    for (size_t place = 0; place < WATCH_MAX_CHANNELS; place++)
        if (present[place])
            tell(watch, place, ours);
}

void whose_note(struct watch *watch, const struct note *note)
{
    bool ours = strcmp(note->answer, "ours") == 0;
    struct speech speech = {.watch = watch,
                            .note = note,
                            .whose = ours ? IMPULSE_OURS : IMPULSE_OTHERS,
                            .since_ns = note->occurred_ns < note->known_ns ? note->occurred_ns : INT64_MIN};
    uint64_t token;
    if (!find(watch, note->impulse, &token)) {
        note_without_effect(watch, "no impulse %.60s has been heard lately", note->impulse);
        return;
    }
    if (!ours && !effort_on_watch(watch, note->person)) {
        note_without_effect(watch,
                            "%.60s is not on watch as an observer and cannot say that impulses are another's",
                            note->person);
        return;
    }
    snprintf(speech.correction.job, sizeof speech.correction.job, "%s", watch->source.job);
    snprintf(speech.correction.note, sizeof speech.correction.note, "%s", watch->recent.causes[0]);
    speech.correction.whose = speech.whose;
    name_all(watch, token, ours);
    if (*watch->source.job)
        correct_all(&speech);
}
