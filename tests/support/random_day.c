/* Random days at sea; see random_day.h. */
#include "support/random_day.h"
#include "base/time.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

const char *const random_people[RANDOM_PEOPLE] = {"Ann", "Bo", "Cleo", "Dora", "Ed", "Flo"};

#define PICK(random, list) ((list)[random_bits(random) % (sizeof(list) / sizeof(list)[0])])

void random_day_reset(struct random_day *day, const struct permit *permit, uint64_t seed)
{
    *day = (struct random_day){.permit = permit, .run = 1};
    day->pace_s = permit->pre_watches[0].minutes * 60 / 20;
    random_reset(&day->random, seed);
}

void random_day_number(struct random_day *day, struct event *event)
{
    event->run = day->run;
    event->counter = ++day->counters[event->kind];
}

static void set(char out[NOTE_NAME_SIZE], const char *text)
{
    snprintf(out, NOTE_NAME_SIZE, "%s", text);
}

static double some_distance_m(struct random *random)
{
    return round(exp(random_between(random, log(20), log(4000))));
}

static void sighting(struct random_day *day, struct note *note)
{
    struct random *random = &day->random;
    const struct permit_zone *zone = &day->permit->zones[random_bits(random) % day->permit->n_zones];
    note_reset(note, NOTE_SIGHTING);
    note->group = (enum group)(random_bits(random) % GROUP_COUNT);
    if (random_uniform(random) < 0.8)
        note->distance_m = some_distance_m(random);
    note->leaving = random_uniform(random) < 0.08;
    note->calf = random_uniform(random) < 0.1;
    if (random_uniform(random) < 0.1)
        note->number = 1 + (double)(random_bits(random) % 12);
    if (zone->n_species > 0 && random_uniform(random) < 0.3)
        set(note->species, zone->species[random_bits(random) % zone->n_species]);
}

/* What a contact is said to be or where. */
static void about_contact(struct random_day *day, struct note *note)
{
    static const char *const verdicts[] = {"confirm", "dismiss", "left"};
    struct random *random = &day->random;
    bool distance = random_uniform(random) < 0.5;
    note_reset(note, distance ? NOTE_DISTANCE : NOTE_VERDICT);
    note->contact = 1 + (uint32_t)(random_bits(random) % 40);
    note->distance_m = some_distance_m(random);
    if (distance)
        return;
    set(note->verdict, PICK(random, verdicts));
    snprintf(note->text, sizeof note->text, "reason");
}

/* Deterrent, quieting measure, weather, override, job: what conditions look at. */
static void around(struct random_day *day, struct note *note)
{
    static const char *const reasons[] = {"life", "refusal", "instability"};
    static const char *const job_words[] = {"open", "open", "begin", "end", "close"};
    struct random *random = &day->random;
    bool on = random_uniform(random) < 0.6;
    switch (random_bits(random) % 6) {
    case 0:
        note_reset(note, NOTE_DETERRENT);
        set(note->answer, on ? "on" : "off");
        break;
    case 1:
        note_reset(note, NOTE_QUIETING);
        set(note->answer, on ? "on" : "off");
        break;
    case 2:
        note_reset(note, NOTE_WEATHER);
        note->sea_state = (double)(random_bits(random) % 6);
        note->visibility_m = on ? 10000 : some_distance_m(random);
        note->depth_m = random_uniform(random) < 0.2 ? 20 + (double)(random_bits(random) % 400) : NAN;
        break;
    case 3:
        note_reset(note, NOTE_OVERRIDE);
        set(note->answer, random_uniform(random) < 0.3 ? "on" : "off");
        set(note->reason, PICK(random, reasons));
        snprintf(note->text, sizeof note->text, "why");
        break;
    default:
        note_reset(note, NOTE_JOB);
        set(note->answer, PICK(random, job_words));
        day->n_jobs += random_uniform(random) < 0.1;
        snprintf(note->job, sizeof note->job, "A%u", day->n_jobs);
        note->charge_kg = 10;
    }
}

static void some_note(struct random_day *day, struct note *note)
{
    static const char *const states[] = {"off",        "off",   "stopped",    "stopped",    "soft start",
                                         "soft start", "vibro", "full power", "full power", "line turn",
                                         "reduced",    "hold",  "drilling",   "test"};
    struct random *random = &day->random;
    double dice = random_uniform(random);
    if (dice < 0.22) {
        note_reset(note, random_uniform(random) < 0.85 ? NOTE_SIGN_ON : NOTE_SIGN_OFF);
        set(note->watch, random_uniform(random) < 0.6 ? "visual" : "acoustic");
    } else if (dice < 0.34)
        sighting(day, note);
    else if (dice < 0.44)
        about_contact(day, note);
    else if (dice < 0.58)
        note_reset(note, NOTE_RELEASE);
    else if (dice < 0.76) {
        note_reset(note, NOTE_SOURCE);
        set(note->source_state, PICK(random, states));
        note->minutes = 10;
    } else if (dice < 0.97)
        around(day, note);
    else {
        note_reset(note, NOTE_REMARK);
        snprintf(note->text, sizeof note->text, "remark");
    }
    set(note->person, PICK(random, random_people));
}

static void some_call(struct random *random, int64_t now_ns, struct call *call)
{
    call->group = (enum group)(random_bits(random) % GROUP_COUNT);
    call->evidence = random_uniform(random) < 0.3 ? 20 : random_between(random, -1, 6);
    call->end_ns = now_ns - time_from_s(random_between(random, 0, 3));
    call->start_ns = call->end_ns - TIME_NS_PER_S;
    call->bearing_deg = call->mirror_deg = NAN;
}

static void fault(struct random *random, int64_t now_ns, struct unheard *unheard)
{
    int64_t end_ns = now_ns - time_from_s(random_between(random, 0, 2));
    *unheard = (struct unheard){.start_ns = end_ns - time_from_s(random_between(random, 0.1, 10)),
                                .end_ns = end_ns,
                                .high_hz = 1000,
                                .cause = (enum unheard_cause)(random_bits(random) % 5)};
}

/* The cable to the hydrophones is lost: adjoining pieces of 10 s, whatever else happens meanwhile. */
static bool link_is_lost(struct random_day *day, struct event *out)
{
    if (day->lost_link == 0 && random_uniform(&day->random) < 0.003)
        day->lost_link = 6 + (unsigned)(random_bits(&day->random) % 200);
    if (day->lost_link == 0 || random_uniform(&day->random) < 0.2)
        return false;
    day->lost_link--;
    day->now_ns += 10 * TIME_NS_PER_S;
    *out = (struct event){.kind = EVENT_UNHEARD, .stream = 1, .known_ns = day->now_ns};
    out->as.unheard = (struct unheard){
        .start_ns = day->now_ns - 10 * TIME_NS_PER_S, .end_ns = day->now_ns, .cause = UNHEARD_GAP};
    return true;
}

void random_day_next(struct random_day *day, struct event *out)
{
    struct random *random = &day->random;
    if (link_is_lost(day, out)) {
        random_day_number(day, out);
        return;
    }
    int64_t from_ns = day->now_ns;
    double stretch = random_uniform(random) < 0.1 ? 10 : 1;
    day->now_ns += time_from_s((day->lost_link ? 1 : day->pace_s) * random_exponential(random) * stretch);
    double dice = random_uniform(random);
    *out = (struct event){.stream = 1, .known_ns = day->now_ns};
    if (dice < 0.12) {
        out->kind = EVENT_CALL;
        some_call(random, day->now_ns, &out->as.call);
    } else if (dice < 0.26) {
        out->kind = EVENT_IMPULSE;
        out->as.impulse = (struct impulse){.channel = 1, .time_ns = day->now_ns - TIME_NS_PER_S / 10};
    } else if (dice < 0.32) {
        out->kind = EVENT_UNHEARD;
        fault(random, day->now_ns, &out->as.unheard);
    } else if (dice < 0.35)
        out->kind = EVENT_LEVEL;
    else if (dice < 0.36) {
        out->kind = EVENT_RUN;
        out->stream = 0;
        out->as.run_mark = (struct run_mark){from_ns + (day->now_ns - from_ns) / 2, day->now_ns};
        memset(day->counters, 0, sizeof day->counters);
        day->run++;
    } else {
        out->kind = EVENT_NOTE;
        out->stream = 0;
        some_note(day, &out->as.note);
    }
    random_day_number(day, out);
}
