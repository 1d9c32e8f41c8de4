/* What is worth keeping; see keeper.h. */
#include "sound/keeper.h"
#include "base/time.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_CALLS 512
#define MAX_CONTACTS 64
#define MOST_OF_DISMISSED 3 /* clips of a contact that was dismissed: its clearest calls */

struct heard_call {
    char id[FLOW_ID_SIZE];
    uint32_t stream, channel;
    enum group group;
    int64_t start_ns, end_ns, known_ns;
    double low_hz, high_hz, snr_db;
    bool kept;
};

struct known_contact {
    uint32_t number;
    int64_t since_ns; /* watch time at which it was first said */
    bool dismissed;
};

struct keeper {
    struct keeper_setup setup;
    uint64_t n_calls, n_contacts; /* all so far; the n-th is at n % MAX */
    struct heard_call calls[MAX_CALLS];
    struct known_contact contacts[MAX_CONTACTS];
};

enum status keeper_create(const struct keeper_setup *setup, struct keeper **out)
{
    struct keeper *keeper = calloc(1, sizeof *keeper);
    if (!keeper)
        return STATUS_NO_MEMORY;
    keeper->setup = *setup;
    *out = keeper;
    return STATUS_OK;
}

void keeper_destroy(struct keeper *keeper)
{
    free(keeper);
}

static void remember_call(struct keeper *keeper, const struct outcome *outcome)
{
    const struct call *call = &outcome->as.event.as.call;
    if (call->n_sounds > 0)
        return;
    struct heard_call *heard = &keeper->calls[keeper->n_calls++ % MAX_CALLS];
    *heard = (struct heard_call){.stream = outcome->stream,
                                 .channel = call->channel,
                                 .group = call->group,
                                 .start_ns = call->start_ns,
                                 .end_ns = call->end_ns,
                                 .known_ns = outcome->watch_ns,
                                 .low_hz = call->low_hz,
                                 .high_hz = call->high_hz,
                                 .snr_db = call->snr_db};
    flow_id(outcome->run, outcome->stream, "call", outcome->counter, heard->id);
}

static struct heard_call *find_call(struct keeper *keeper, const char *id)
{
    uint64_t n = keeper->n_calls < MAX_CALLS ? keeper->n_calls : MAX_CALLS;
    for (uint64_t i = 0; i < n; i++)
        if (strcmp(keeper->calls[i].id, id) == 0)
            return &keeper->calls[i];
    return NULL;
}

static void ask_for_call(struct keeper *keeper, struct heard_call *call, enum sound_reason reason,
                         const char *cause)
{
    int64_t around_ns = time_from_s(keeper->setup.around_s);
    struct clip_request request = {.stream = call->stream,
                                   .channel = call->channel,
                                   .start_ns = call->start_ns - around_ns,
                                   .end_ns = call->end_ns + around_ns,
                                   .reason = reason,
                                   .low_hz = call->low_hz,
                                   .high_hz = call->high_hz,
                                   .n_causes = 2};
    memcpy(request.causes[0], call->id, FLOW_ID_SIZE);
    snprintf(request.causes[1], FLOW_ID_SIZE, "%s", cause);
    call->kept = true; /* what cannot be kept is said once */
    clips_ask(keeper->setup.clips, &request);
}

/* The calls that an advice names; one clip a call. */
static void take_advice(struct keeper *keeper, const struct outcome *outcome)
{
    const struct advice_outcome *advice = &outcome->as.advice;
    char id[FLOW_ID_SIZE];
    flow_id(outcome->run, outcome->stream, "advice", outcome->counter, id);
    for (uint32_t i = 0; i < advice->n_causes; i++) {
        struct heard_call *call = find_call(keeper, advice->causes[i]);
        if (call && !call->kept)
            ask_for_call(keeper, call, SOUND_ADVICE, id);
    }
}

/* The contact's clearest call that is not kept yet, or NULL. */
static struct heard_call *clearest(struct keeper *keeper, enum group group, int64_t since_ns)
{
    struct heard_call *best = NULL;
    uint64_t n = keeper->n_calls < MAX_CALLS ? keeper->n_calls : MAX_CALLS;
    for (uint64_t i = 0; i < n; i++) {
        struct heard_call *call = &keeper->calls[i];
        if (call->group == group && call->known_ns >= since_ns && !call->kept &&
            !(best && best->snr_db >= call->snr_db))
            best = call;
    }
    return best;
}

/* Calls of one group that are near in time are one contact: what was heard of its group since it was first
 * said is its own. */
static void take_contact(struct keeper *keeper, const struct outcome *outcome)
{
    const struct contact_outcome *contact = &outcome->as.contact;
    struct known_contact *known = NULL;
    char id[FLOW_ID_SIZE];
    for (uint32_t i = 0; i < MAX_CONTACTS && !known; i++)
        if (keeper->contacts[i].number == contact->contact)
            known = &keeper->contacts[i];
    if (!known) {
        known = &keeper->contacts[keeper->n_contacts++ % MAX_CONTACTS];
        *known = (struct known_contact){.number = contact->contact, .since_ns = outcome->watch_ns};
    }
    bool dismissed = contact->state == CONTACT_DISMISSED;
    flow_id(outcome->run, outcome->stream, "contact", outcome->counter, id);
    for (int n = 0; dismissed && !known->dismissed && n < MOST_OF_DISMISSED; n++) {
        struct heard_call *call = clearest(keeper, contact->group, known->since_ns);
        if (!call)
            break;
        ask_for_call(keeper, call, SOUND_DISMISSED, id);
    }
    known->dismissed = dismissed;
}

void keeper_ask_mark(struct keeper *keeper, const char *note_id, int64_t occurred_ns)
{
    for (uint32_t i = 0; i < keeper->setup.n_streams; i++) {
        struct clip_request request = {.stream = i + 1,
                                       .channel = keeper->setup.listening[i],
                                       .start_ns = occurred_ns - time_from_s(KEEPER_MARK_S),
                                       .end_ns = occurred_ns + time_from_s(KEEPER_MARK_AFTER_S),
                                       .reason = SOUND_MARK,
                                       .low_hz = NAN,
                                       .high_hz = NAN,
                                       .n_causes = 1};
        snprintf(request.causes[0], FLOW_ID_SIZE, "%s", note_id);
        if (request.channel > 0)
            clips_ask(keeper->setup.clips, &request);
    }
}

void keeper_take(struct keeper *keeper, const struct outcome *outcome)
{
    char id[FLOW_ID_SIZE];
    if (outcome->kind == OUTCOME_ADVICE)
        take_advice(keeper, outcome);
    else if (outcome->kind == OUTCOME_CONTACT)
        take_contact(keeper, outcome);
    else if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_CALL)
        remember_call(keeper, outcome);
    else if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_NOTE &&
             outcome->as.event.as.note.kind == NOTE_MARK) {
        flow_id(outcome->run, outcome->stream, "note", outcome->counter, id);
        keeper_ask_mark(keeper, id, outcome->as.event.as.note.occurred_ns);
    }
}
