/* The board's fixed text and the watch's part; see board_hearing.c for what is heard. */
#include "http/board_json.h"
#include "base/time.h"
#include <math.h>
#include <string.h>

void json_next(struct text *text)
{
    char last = text->length > 0 ? text->data[text->length - 1] : '{';
    if (last != '{' && last != '[')
        text_append(text, ",");
}

void json_name(struct text *text, const char *name)
{
    json_next(text);
    text_append(text, "\"");
    text_append(text, name);
    text_append(text, "\":");
}

void json_text(struct text *text, const char *name, const char *value)
{
    json_name(text, name);
    text_json_string(text, value);
}

void json_number(struct text *text, const char *name, double value, int decimals)
{
    json_name(text, name);
    text_json_number(text, value, decimals);
}

void json_time(struct text *text, const char *name, int64_t watch_ns)
{
    json_number(text, name, watch_ns < 0 ? NAN : time_to_s(watch_ns), 3);
}

void json_flag(struct text *text, const char *name, bool value)
{
    json_name(text, name);
    text_append(text, value ? "true" : "false");
}

static void groups_of(struct text *text, const char *name, uint32_t groups)
{
    json_name(text, name);
    text_append(text, "[");
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        if (groups & (1U << g)) {
            json_next(text);
            text_json_string(text, group_text((enum group)g));
        }
    text_append(text, "]");
}

static void zones(struct text *text, const struct permit *permit)
{
    json_name(text, "zones");
    text_append(text, "[");
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        const struct permit_zone *zone = &permit->zones[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "name", zone->name);
        json_number(text, "radius_m", zone->radius_m, 1);
        groups_of(text, "groups", zone->groups);
        json_text(text, "clause", zone->clause);
        text_append(text, "}");
    }
    text_append(text, "]");
}

/* Values with their marks, so that people see what must be checked against the document. */
static void values(struct text *text, const struct permit *permit)
{
    json_name(text, "values");
    text_append(text, "[");
    for (uint32_t i = 0; i < permit->n_values; i++) {
        const struct permit_value *value = &permit->values[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "key", value->key);
        json_text(text, "value", value->text);
        json_text(text, "mark", permit_mark_text(value->mark));
        json_flag(text, "unverified", mark_unverified(value->mark));
        json_text(text, "source", value->source);
        json_text(text, "who", value->who);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void unwatched(struct text *text, const struct permit *permit)
{
    char asked[PERMIT_TEXT_SIZE];
    json_name(text, "unwatched");
    text_append(text, "[");
    for (uint32_t i = 0; permit_get_unwatched(permit, i, asked); i++) {
        json_next(text);
        text_json_string(text, asked);
    }
    text_append(text, "]");
}

static void permit_object(struct text *text, const struct permit *permit)
{
    static const char *const activities[] = {
        [ACTIVITY_PILING] = "piling", [ACTIVITY_SEISMIC] = "airguns", [ACTIVITY_EXPLOSIVES] = "explosives"};
    json_name(text, "permit");
    text_append(text, "{");
    json_text(text, "id", permit->id);
    json_text(text, "title", permit->title);
    json_text(text, "document", permit->document);
    json_text(text, "revision", permit->revision);
    json_text(text, "ended", permit->ended);
    json_number(text, "year", permit->year, 0);
    json_flag(text, "demonstration", permit->demonstration);
    json_text(text, "activity", (unsigned)permit->activity < 3 ? activities[permit->activity] : "unknown");
    json_flag(text, "visual_needed", permit->pre_watches[0].visual);
    json_flag(text, "acoustic_needed", permit->pre_watches[0].acoustic);
    json_number(text, "confirm_countdown_s", permit->confirm_countdown_s, 1);
    zones(text, permit);
    values(text, permit);
    unwatched(text, permit);
    text_append(text, "}");
}

void board_json_fixed(struct text *text, const struct board_setup *setup)
{
    text_append(text, "{");
    json_text(text, "site", setup->site ? setup->site : "");
    json_number(text, "run", setup->run, 0);
    json_text(text, "version", HUSHWATCH_VERSION);
    permit_object(text, setup->permit);
    json_name(text, "stations");
    text_append(text, "[");
    for (uint32_t i = 0; i < setup->n_stations; i++) {
        json_next(text);
        text_json_string(text, setup->stations[i]);
    }
    text_append(text, "]");
    groups_of(text, "groups", (1U << GROUP_COUNT) - 1);
    text_append(text, "}");
}

static bool is_recorded(const struct hearing_view *hearing, const char *id)
{
    for (uint32_t i = 0; i < hearing->n_unrecorded; i++)
        if (strcmp(hearing->unrecorded[i], id) == 0)
            return false;
    return true;
}

_Static_assert(WATCH_MAX_ACKNOWLEDGEMENTS >= 2 * SITE_MAX_STATIONS, "each station's answer has a place");

/* One a crew station: each answers for itself. */
static void acknowledgements(struct text *text, const struct watch_advice *shown)
{
    json_name(text, "acknowledgements");
    text_append(text, "[");
    for (uint32_t i = 0; i < shown->n_acknowledgements; i++) {
        const struct watch_acknowledgement *answer = &shown->acknowledgements[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "station", answer->station);
        json_text(text, "person", answer->person);
        json_text(text, "answer", answer->answer);
        json_time(text, "time_s", answer->known_ns);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void one_advice(struct text *text, const struct watch_advice *shown, bool recorded)
{
    const struct advice_outcome *advice = &shown->advice;
    text_append(text, "{");
    json_text(text, "id", shown->id);
    json_text(text, "advice", advice_text(advice->advice));
    json_text(text, "station", advice->station);
    json_flag(text, "in_force", shown->in_force);
    json_flag(text, "confirmed", advice->confirmed);
    json_flag(text, "recorded", recorded);
    json_text(text, "reason", advice->reason);
    json_text(text, "clause", advice->clause);
    json_text(text, "job", advice->job);
    json_time(text, "since_s", shown->since_ns);
    json_time(text, "until_s", advice->until_ns);
    json_text(text, "requires", advice->requires);
    json_flag(text, "acknowledged", shown->acknowledged);
    json_text(text, "acknowledged_by", shown->acknowledged_by);
    json_text(text, "answer", shown->answer);
    acknowledgements(text, shown);
    json_name(text, "causes");
    text_append(text, "[");
    for (uint32_t i = 0; i < advice->n_causes; i++) {
        json_next(text);
        text_json_string(text, advice->causes[i]);
    }
    text_append(text, "]}");
}

void board_json_urgent(struct text *text, const struct watch_view *watch, const struct hearing_view *hearing)
{
    json_name(text, "phase");
    text_append(text, "{");
    json_text(text, "phase", phase_text(watch->phase));
    json_time(text, "since_s", watch->phase_since_ns);
    json_text(text, "reason", watch->phase_reason);
    json_text(text, "clause", watch->phase_clause);
    json_text(text, "job", watch->job);
    json_flag(text, "source_heard", watch->source_heard);
    /* People enter 'stopped'; what becomes of it, a break or a shutdown, is the phase's to say. */
    json_text(text, "source_said",
              watch->source_said == PHASE_BREAK ? "stopped" : phase_text(watch->source_said));
    json_flag(text, "release_possible", watch->release_possible);
    json_text(text, "released_by", watch->released_by);
    text_append(text, "}");
    json_name(text, "advice");
    text_append(text, "[");
    for (uint32_t i = 0; i < watch->n_advice; i++) {
        json_next(text);
        one_advice(text, &watch->advice[i], is_recorded(hearing, watch->advice[i].id));
    }
    text_append(text, "]");
}

static void one_contact(struct text *text, const struct watch_contact *shown)
{
    const struct contact_outcome *contact = &shown->contact;
    const struct whereabouts *where = &contact->whereabouts;
    text_append(text, "{");
    json_number(text, "contact", contact->contact, 0);
    json_text(text, "group", group_text(contact->group));
    json_text(text, "grade", grade_text(contact->grade));
    json_text(text, "state", contact_state_text(contact->state));
    json_number(text, "n_calls", contact->n_calls, 0);
    json_flag(text, "seen", shown->seen);
    json_number(text, "distance_p05_m", whereabouts_quantile_m(where, 0.05), 1);
    json_number(text, "distance_p50_m", whereabouts_quantile_m(where, 0.5), 1);
    json_number(text, "distance_p95_m", whereabouts_quantile_m(where, 0.95), 1);
    json_number(text, "p_inside", contact->p_inside, 3);
    json_number(text, "bearing_deg", contact->bearing_deg, 1);
    json_number(text, "mirror_deg", contact->mirror_deg, 1);
    json_text(text, "bearing_from", bearing_from_text(contact->bearing_from));
    json_number(text, "evidence", shown->evidence, 2);
    json_number(text, "n_taken_back", contact->n_taken_back, 0);
    json_number(text, "against", contact->against, 2);
    json_time(text, "first_s", shown->first_ns);
    json_time(text, "last_s", shown->last_ns);
    json_time(text, "clears_at_s", shown->clears_at_ns);
    json_time(text, "countdown_ends_s", shown->countdown_ends_ns);
    text_append(text, "}");
}

static void timers(struct text *text, const struct watch_view *watch)
{
    json_name(text, "timers");
    text_append(text, "[");
    for (uint32_t i = 0; i < watch->n_timers; i++) {
        const struct watch_timer *timer = &watch->timers[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "name", timer->name);
        json_time(text, "elapsed_s", timer->elapsed_ns);
        json_time(text, "needed_s", timer->needed_ns);
        json_flag(text, "running", timer->running);
        json_text(text, "held_by", timer->held_by);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void step(struct text *text, const struct watch_plan_step *step)
{
    text_append(text, "{");
    json_text(text, "name", step->name);
    json_time(text, "earliest_s", step->earliest_ns);
    json_time(text, "latest_s", step->latest_ns);
    json_flag(text, "fact", step->fact);
    json_flag(text, "done", step->done);
    json_flag(text, "late", step->late);
    json_text(text, "text", step->text);
    text_append(text, "}");
}

/* What the planned start needs by when; planned_s is null where nothing is planned. */
static void plan_object(struct text *text, const struct watch_plan *plan)
{
    json_name(text, "plan");
    text_append(text, "{");
    json_time(text, "planned_s", plan->planned_ns);
    json_time(text, "earliest_s", plan->earliest_ns);
    json_time(text, "slips_s", plan->slips_ns);
    json_name(text, "steps");
    text_append(text, "[");
    for (uint32_t i = 0; i < plan->n_steps; i++) {
        json_next(text);
        step(text, &plan->steps[i]);
    }
    text_append(text, "]}");
}

static void people(struct text *text, const struct watch_view *watch)
{
    json_name(text, "people");
    text_append(text, "[");
    for (uint32_t i = 0; i < watch->n_people; i++) {
        const struct watch_person *person = &watch->people[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "name", person->name);
        json_text(text, "watch", person->watch);
        json_text(text, "station", person->station);
        json_time(text, "since_s", person->since_ns);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void checks(struct text *text, const struct watch_view *watch)
{
    json_name(text, "checks");
    text_append(text, "[");
    for (uint32_t i = 0; i < watch->n_checks; i++) {
        const struct watch_check *check = &watch->checks[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "check", check->check);
        json_text(text, "station", check->station);
        json_text(text, "person", check->person);
        json_flag(text, "good", check->good);
        json_time(text, "time_s", check->known_ns);
        text_append(text, "}");
    }
    text_append(text, "]");
}

void board_json_watch(struct text *text, const struct watch_view *watch)
{
    timers(text, watch);
    checks(text, watch);
    plan_object(text, &watch->plan);
    people(text, watch);
    json_number(text, "n_impulses", watch->n_impulses, 0);
    json_name(text, "contacts");
    text_append(text, "[");
    for (uint32_t i = 0; i < watch->n_contacts; i++) {
        json_next(text);
        one_contact(text, &watch->contacts[i]);
    }
    text_append(text, "]");
}
