/* Bodies of what the watch says, one function a kind, and the hash that chains entries. */
#include "record/entry.h"
#include "base/round.h"
#include "base/time.h"
#include "record/body.h"
#include "record/level_body.h"
#include "record/marks.h"
#include <inttypes.h>
#include <math.h>
#include <sodium.h>
#include <stdio.h>
#include <string.h>

static enum status unheard_body(const struct event *event, struct text *out)
{
    const struct unheard *unheard = &event->as.unheard;
    struct body body;
    body_begin(&body, out);
    body_text(&body, "cause", unheard_cause_text(unheard->cause));
    body_integer(&body, "channel", unheard->channel);
    body_time(&body, "end_s", unheard->end_ns);
    body_number(&body, "high_hz", unheard->high_hz, ROUND_DECIMALS_HZ);
    body_id(&body, event->run, event->stream, "unheard", event->counter);
    body_number(&body, "low_hz", unheard->low_hz, ROUND_DECIMALS_HZ);
    body_time(&body, "start_s", unheard->start_ns);
    body_integer(&body, "stream", event->stream);
    return body_end(&body);
}

static enum status impulse_body(const struct event *event, struct text *out)
{
    const struct impulse *impulse = &event->as.impulse;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "background_db", impulse->background_db, ROUND_DECIMALS_DB);
    body_decibels(&body, "bands", impulse->band_sel_db,
                  impulse->n_bands < LEVEL_MAX_BANDS ? impulse->n_bands : LEVEL_MAX_BANDS);
    body_bool(&body, "beside", impulse->beside);
    body_integer(&body, "channel", impulse->channel);
    body_bool(&body, "clipped", impulse->clipped);
    body_number(&body, "effective_s", impulse->effective_s, ROUND_DECIMALS_S);
    body_id(&body, event->run, event->stream, "impulse", event->counter);
    body_text_or_null(&body, "job", impulse->job);
    body_number(&body, "kurtosis", impulse->kurtosis, ROUND_DECIMALS_KURTOSIS);
    body_bool(&body, "overlapped", impulse->overlapped);
    body_number(&body, "peak_db", impulse->peak_db, ROUND_DECIMALS_DB);
    body_number(&body, "peak_to_peak_db", impulse->peak_to_peak_db, ROUND_DECIMALS_DB);
    body_number(&body, "positive_impulse_pa_s", impulse->positive_impulse_pa_s, ROUND_DECIMALS_PA_S);
    body_text_or_null(&body, "range_from", range_from_text(impulse->range_from));
    body_number(&body, "range_m", impulse->range_m, ROUND_DECIMALS_M);
    body_bool(&body, "refused", impulse->refused);
    body_bool(&body, "relative", impulse->relative);
    body_number(&body, "rms90_db", impulse->rms90_db, ROUND_DECIMALS_DB);
    body_number(&body, "sel_db", impulse->sel_db, ROUND_DECIMALS_DB);
    body_integer(&body, "stream", event->stream);
    body_number(&body, "t90_s", impulse->t90_s, ROUND_DECIMALS_S);
    body_time(&body, "time_s", impulse->time_ns);
    body_bool(&body, "weak", impulse->weak);
    body_text(&body, "whose", impulse_whose_text(impulse->whose));
    body_number(&body, "window_s", impulse->window_s, ROUND_DECIMALS_S);
    return body_end(&body);
}

/* Ids of the calls that a sound speaks against. */
static void body_ids(struct body *body, const char *key, const struct event *event, const struct call *call)
{
    body_key(body, key);
    text_append(body->out, "[");
    for (uint32_t i = 0; i < call->n_against; i++) {
        char id[FLOW_ID_SIZE];
        flow_id(event->run, event->stream, "call", call->against[i], id);
        text_format(body->out, "%s\"%s\"", i ? "," : "", id);
    }
    text_append(body->out, "]");
}

static enum status call_body(const struct event *event, struct text *out)
{
    const struct call *call = &event->as.call;
    struct body body;
    body_begin(&body, out);
    if (call->n_sounds > 0)
        body_ids(&body, "against", event, call);
    body_number(&body, "bearing_deg", call->bearing_deg, ROUND_DECIMALS_DEG);
    body_text_or_null(&body, "bearing_from", bearing_from_text(call->bearing_from));
    body_number(&body, "certainty", call->certainty, ROUND_DECIMALS_PROBABILITY);
    body_integer(&body, "channel", call->channel);
    body_text(&body, "class", call->class_name);
    body_time(&body, "end_s", call->end_ns);
    body_number(&body, "evidence", call->evidence, ROUND_DECIMALS_EVIDENCE);
    body_text(&body, "form", call_form_text(call->form));
    body_text(&body, "group", group_text(call->group));
    body_number(&body, "high_hz", call->high_hz, ROUND_DECIMALS_HZ);
    body_id(&body, event->run, event->stream, "call", event->counter);
    body_number(&body, "interval_s", call->interval_s, ROUND_DECIMALS_S);
    body_number(&body, "level_db", call->level_db, ROUND_DECIMALS_DB);
    body_number(&body, "low_hz", call->low_hz, ROUND_DECIMALS_HZ);
    body_number(&body, "mirror_deg", call->mirror_deg, ROUND_DECIMALS_DEG);
    body_integer(&body, "n_pulses", call->n_pulses);
    if (call->n_sounds > 0)
        body_integer(&body, "n_sounds", call->n_sounds);
    body_bool(&body, "relative", call->relative);
    body_number(&body, "snr_db", call->snr_db, ROUND_DECIMALS_DB);
    body_time(&body, "start_s", call->start_ns);
    body_integer(&body, "stream", event->stream);
    return body_end(&body);
}

/* What no field of a note holds, in the place that the alphabet gives it. */
static void put_fixed(struct body *body, const struct event *event, const char *name)
{
    const struct note *note = &event->as.note;
    if (strcmp(name, "id") == 0)
        body_id(body, event->run, event->stream, "note", event->counter);
    else if (strcmp(name, "note") == 0)
        body_text(body, name, note_kind_text(note->kind));
    else
        body_time(body, name, strcmp(name, "known_s") == 0 ? note->known_ns : note->occurred_ns);
}

static void put_field(struct body *body, const struct note *note, const struct note_field *field)
{
    const void *member = (const char *)note + field->offset;
    char key[NOTE_NAME_SIZE];
    switch (field->form) {
    case NOTE_FORM_TEXT:
    case NOTE_FORM_WORD:
        body_text_if_given(body, field->name, member);
        break;
    case NOTE_FORM_GROUP:
        if (note->group != GROUP_UNKNOWN)
            body_text(body, field->name, group_text(note->group));
        break;
    case NOTE_FORM_WHOLE:
        if (*(const uint32_t *)member != 0)
            body_integer(body, field->name, *(const uint32_t *)member);
        break;
    case NOTE_FORM_NUMBER:
        body_number_if_given(body, field->name, *(const double *)member, field->decimals);
        break;
    case NOTE_FORM_FLAG:
        if (*(const bool *)member)
            body_bool(body, field->name, true);
        break;
    case NOTE_FORM_TIME: /* but occurred_s, which every note has */
        note_time_key(field, key);
        if (strcmp(key, "occurred_s") != 0 && *(const int64_t *)member > 0)
            body_time(body, key, *(const int64_t *)member);
        break;
    }
}

static enum status note_body(const struct event *event, struct text *out)
{
    static const char *const fixed[] = {"id", "known_s", "note", "occurred_s"};
    const size_t n_fixed = sizeof fixed / sizeof fixed[0];
    struct body body;
    size_t next = 0;
    body_begin(&body, out);
    const struct note_field *field;
    for (unsigned i = 0; (field = note_field_at(i)) != NULL; i++) {
        for (; next < n_fixed && strcmp(fixed[next], field->name) < 0; next++)
            put_fixed(&body, event, fixed[next]);
        put_field(&body, &event->as.note, field);
    }
    for (; next < n_fixed; next++)
        put_fixed(&body, event, fixed[next]);
    return body_end(&body);
}

static enum status position_body(const struct event *event, struct text *out)
{
    const struct position *position = &event->as.position;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "accuracy_m", position->accuracy_m, ROUND_DECIMALS_M);
    body_number(&body, "course_deg", position->course_deg, ROUND_DECIMALS_DEG);
    body_number(&body, "heading_deg", position->heading_deg, ROUND_DECIMALS_DEG);
    body_id(&body, event->run, event->stream, "position", event->counter);
    body_number(&body, "latitude_deg", position->latitude_deg, ROUND_DECIMALS_POSITION);
    body_number(&body, "longitude_deg", position->longitude_deg, ROUND_DECIMALS_POSITION);
    body_time(&body, "occurred_s", position->occurred_ns);
    body_text(&body, "source", position_from_text(position->from));
    body_number(&body, "speed_m_s", position->speed_m_s, ROUND_DECIMALS_M_S);
    body_text(&body, "whose", position_of_text(position->of));
    return body_end(&body);
}

static enum status event_body(const struct event *event, int64_t zero_unix_ns, struct text *out)
{
    switch (event->kind) {
    case EVENT_RUN:
        return entry_body_run(event->run, &event->as.run_mark, zero_unix_ns, NULL, out);
    case EVENT_UNHEARD:
        return unheard_body(event, out);
    case EVENT_LEVEL:
        return level_body(event->run, event->stream, event->counter, &event->as.level, 1, NULL, out);
    case EVENT_IMPULSE:
        return impulse_body(event, out);
    case EVENT_CALL:
        return call_body(event, out);
    case EVENT_NOTE:
        return note_body(event, out);
    case EVENT_POSITION:
        return position_body(event, out);
    }
    return STATUS_BAD_ARGUMENT;
}

static enum status contact_body(const struct outcome *outcome, struct text *out)
{
    const struct contact_outcome *contact = &outcome->as.contact;
    const struct whereabouts *where = &contact->whereabouts;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "against", contact->against, ROUND_DECIMALS_EVIDENCE);
    body_number(&body, "bearing_deg", contact->bearing_deg, ROUND_DECIMALS_DEG);
    body_text_or_null(&body, "bearing_from", bearing_from_text(contact->bearing_from));
    body_integer(&body, "contact", contact->contact);
    body_number(&body, "distance_p05_m", whereabouts_quantile_m(where, 0.05), ROUND_DECIMALS_M);
    body_number(&body, "distance_p50_m", whereabouts_quantile_m(where, 0.50), ROUND_DECIMALS_M);
    body_number(&body, "distance_p95_m", whereabouts_quantile_m(where, 0.95), ROUND_DECIMALS_M);
    body_text(&body, "grade", grade_text(contact->grade));
    body_text(&body, "group", group_text(contact->group));
    body_id(&body, outcome->run, outcome->stream, "contact", outcome->counter);
    body_number(&body, "mirror_deg", contact->mirror_deg, ROUND_DECIMALS_DEG);
    body_integer(&body, "n_calls", contact->n_calls);
    body_integer(&body, "n_taken_back", contact->n_taken_back);
    body_number(&body, "p_inside", contact->p_inside, ROUND_DECIMALS_PROBABILITY);
    body_text(&body, "state", contact_state_text(contact->state));
    return body_end(&body);
}

static enum status phase_body(const struct outcome *outcome, struct text *out)
{
    const struct phase_outcome *phase = &outcome->as.phase;
    struct body body;
    body_begin(&body, out);
    body_causes(&body, phase->n_causes, phase->causes);
    body_text_or_null(&body, "clause", phase->clause);
    body_id(&body, outcome->run, outcome->stream, "phase", outcome->counter);
    body_text_or_null(&body, "job", phase->job);
    body_text(&body, "phase", phase_text(phase->phase));
    body_text(&body, "reason", phase->reason);
    return body_end(&body);
}

static enum status advice_body(const struct outcome *outcome, int64_t zero_unix_ns, struct text *out)
{
    const struct advice_outcome *advice = &outcome->as.advice;
    char until[TIME_UTC_SIZE] = "";
    if (advice->until_ns >= 0)
        time_format_utc(zero_unix_ns + advice->until_ns, until);
    struct body body;
    body_begin(&body, out);
    body_text(&body, "advice", advice_text(advice->advice));
    body_causes(&body, advice->n_causes, advice->causes);
    body_text_or_null(&body, "clause", advice->clause);
    body_bool(&body, "confirmed", advice->confirmed);
    body_id(&body, outcome->run, outcome->stream, "advice", outcome->counter);
    body_text_or_null(&body, "job", advice->job);
    body_text(&body, "reason", advice->reason);
    body_text_or_null(&body, "requires", advice->requires);
    body_text(&body, "station", advice->station);
    body_text_or_null(&body, "until", until);
    if (advice->until_ns >= 0)
        body_time(&body, "until_s", advice->until_ns);
    return body_end(&body);
}

static enum status finding_body(const struct outcome *outcome, struct text *out)
{
    const struct finding_outcome *finding = &outcome->as.finding;
    struct body body;
    body_begin(&body, out);
    body_text(&body, "basis", finding_basis_text(finding->basis));
    body_causes(&body, finding->n_causes, finding->causes);
    body_text_or_null(&body, "clause", finding->clause);
    body_text(&body, "code", finding->code);
    body_text(&body, "detail", finding->detail);
    body_text(&body, "grade", finding->grade);
    body_id(&body, outcome->run, outcome->stream, "finding", outcome->counter);
    body_text_or_null(&body, "job", finding->job);
    return body_end(&body);
}

static enum status correction_body(const struct outcome *outcome, struct text *out)
{
    const struct correction_outcome *correction = &outcome->as.correction;
    struct body body;
    body_begin(&body, out);
    body_causes(&body, 1, &correction->note);
    body_integer(&body, "channel", correction->channel);
    body_id(&body, outcome->run, outcome->stream, "correction", outcome->counter);
    body_key(&body, "impulses");
    for (uint32_t i = 0; i < correction->n; i++) {
        char id[FLOW_ID_SIZE];
        flow_id(correction->run, correction->stream, "impulse", correction->counters[i], id);
        text_format(body.out, "%s\"%s\"", i ? "," : "[", id);
    }
    text_append(body.out, correction->n ? "]" : "[]");
    body_text_or_null(&body, "job", correction->job);
    body_integer(&body, "stream", correction->stream);
    body_text(&body, "whose", impulse_whose_text(correction->whose));
    return body_end(&body);
}

enum status entry_body(const struct outcome *outcome, int64_t zero_unix_ns, struct text *out)
{
    switch (outcome->kind) {
    case OUTCOME_EVENT:
        return event_body(&outcome->as.event, zero_unix_ns, out);
    case OUTCOME_CONTACT:
        return contact_body(outcome, out);
    case OUTCOME_PHASE:
        return phase_body(outcome, out);
    case OUTCOME_ADVICE:
        return advice_body(outcome, zero_unix_ns, out);
    case OUTCOME_FINDING:
        return finding_body(outcome, out);
    case OUTCOME_CORRECTION:
        return correction_body(outcome, out);
    case OUTCOME_EXPOSURE:
        return body_of_exposure(outcome, out);
    case OUTCOME_SOURCE:
        return body_of_source(outcome, out);
    }
    return STATUS_BAD_ARGUMENT;
}

static void hash_piece(crypto_hash_sha256_state *state, const char *piece)
{
    crypto_hash_sha256_update(state, (const unsigned char *)piece, strlen(piece));
}

static void hash_line(crypto_hash_sha256_state *state, const char *line)
{
    hash_piece(state, line);
    hash_piece(state, "\n");
}

void entry_hash(const char *previous_hash, int64_t seq, const char *utc, const char *kind, const char *body,
                char out[ENTRY_HASH_SIZE])
{
    char number[24];
    snprintf(number, sizeof number, "%" PRId64, seq);
    crypto_hash_sha256_state state;
    crypto_hash_sha256_init(&state);
    hash_line(&state, previous_hash);
    hash_line(&state, number);
    hash_line(&state, utc);
    hash_line(&state, kind);
    hash_piece(&state, body);
    unsigned char digest[crypto_hash_sha256_BYTES];
    crypto_hash_sha256_final(&state, digest);
    sodium_bin2hex(out, ENTRY_HASH_SIZE, digest, sizeof digest);
}
