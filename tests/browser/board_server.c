/* Serves the pages from filled structures, for tests of the pages and the server alone.
 *
 * board_server [PORT]: prints "port N", then obeys words on standard input, one a line:
 *   quiet | pre-watch | ready | delay | stop | hold | may-start | soft-start | carry-on | resume
 *                       show that situation
 *   deaf | hear         the stream hears nothing | hears again
 *   freeze | thaw       nothing is published any more | again
 *   disk-full | disk-ok entries do not reach the disk | do again
 *   unrecorded | recorded   the newest advice
 *   hostile             names and reasons carry markup
 *   no-answer           from now on notes wait 1.5 s and are not answered
 *   seconds N           watch time runs on by N seconds
 *   quit                ends (as does the end of input)
 * and prints a line "note KIND PERSON|STATION|ADVICE|ANSWER|TEXT" for each note that arrives. All figures are
 * invented: they show, they measure nothing. */
#include "base/random.h"
#include "base/time.h"
#include "http/board.h"
#include "http/server.h"
#include <inttypes.h>
#include <math.h>
#include <poll.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#define COLUMN_NS INT64_C(250000000)
#define UNIX_AT_ZERO (INT64_C(1780300800) * TIME_NS_PER_S) /* 2026-06-01T08:00:00Z */

struct server {
    struct board *board;
    pthread_mutex_t lock;
    struct watch_view watch;
    struct hearing_view hearing;
    struct random random;
    bool frozen, hostile, disk_full, no_answer;
    int64_t column_ns;
    uint64_t n_notes, n_advice, n_blows;
};

static struct permit permit = {
    .id = "demonstration-piling",
    .title = "Demonstration permit for piling: minutes instead of half hours, never for work",
    .document = "invented for demonstrations",
    .year = 2026,
    .demonstration = true,
    .activity = ACTIVITY_PILING,
    .n_pre_watches = 1,
    .pre_watches = {{.minutes = 3, .visual = true, .acoustic = true}},
    .confirm_countdown_s = 30,
    .n_zones = 2,
    .zones =
        {{.name = "mitigation zone", .radius_m = 500, .groups = (1U << GROUP_COUNT) - 1, .clause = "4.1"},
         {.name = "watch zone", .radius_m = 2000, .groups = 1U << GROUP_BALEEN_WHALE, .clause = "4.2"}},
    .n_values = 4,
    .values = {
        {.key = "pre_watch.minutes", .text = "3", .source = "invented", .mark = MARK_INVENTED},
        {.key = "zone.radius_m", .text = "500", .source = "guideline, paragraph 4", .mark = MARK_READ},
        {.key = "soft_start.least_minutes", .text = "2", .source = "invented", .mark = MARK_INVENTED},
        {.key = "break.minutes", .text = "1", .source = "a table seen once", .mark = MARK_MEMORY_LOW}}};

static void add_person(struct server *server, const char *name, const char *watch, const char *station)
{
    struct watch_view *view = &server->watch;
    if (view->n_people == WATCH_MAX_PEOPLE)
        return;
    struct watch_person *person = &view->people[view->n_people++];
    *person = (struct watch_person){.since_ns = view->watch_ns};
    snprintf(person->name, sizeof person->name, "%s", name);
    snprintf(person->watch, sizeof person->watch, "%s", watch);
    snprintf(person->station, sizeof person->station, "%s", station);
}

static void add_timer(struct server *server, const char *name, double elapsed_s, double needed_s,
                      const char *held_by)
{
    struct watch_timer *timer = &server->watch.timers[server->watch.n_timers++];
    *timer = (struct watch_timer){.elapsed_ns = time_from_s(elapsed_s),
                                  .needed_ns = time_from_s(needed_s),
                                  .running = *held_by == '\0'};
    snprintf(timer->name, sizeof timer->name, "%s", name);
    snprintf(timer->held_by, sizeof timer->held_by, "%s", held_by);
}

static struct watch_contact *add_contact(struct server *server, uint32_t number, enum group group,
                                         enum contact_grade grade, double median_m, double log_spread)
{
    struct watch_view *view = &server->watch;
    memmove(view->contacts + 1, view->contacts, view->n_contacts * sizeof view->contacts[0]);
    view->n_contacts++;
    struct watch_contact *contact = &view->contacts[0];
    *contact = (struct watch_contact){
        .contact = {.contact = number,
                    .group = group,
                    .grade = grade,
                    .n_calls = 5 * number + 2,
                    .whereabouts = {.known = median_m > 0, .median_m = median_m, .log_spread = log_spread},
                    .bearing_deg = NAN,
                    .mirror_deg = NAN,
                    .p_inside = NAN},
        .first_ns = view->watch_ns - time_from_s(80),
        .last_ns = view->watch_ns - time_from_s(4),
        .clears_at_ns = -1,
        .evidence = grade == GRADE_ACT ? 5.2 : 1.4,
        .countdown_ends_ns = -1};
    contact->contact.p_inside = whereabouts_p_inside(&contact->contact.whereabouts, 500);
    return contact;
}

static void give(struct server *server, enum advice_word word, const char *station, bool confirmed,
                 const char *reason, const char *clause, double until_s, const char *requires)
{
    struct watch_view *view = &server->watch;
    for (uint32_t i = 0; i < view->n_advice; i++)
        if (strcmp(view->advice[i].advice.station, station) == 0)
            view->advice[i].in_force = false;
    uint32_t n = view->n_advice < WATCH_MAX_ADVICE ? view->n_advice : WATCH_MAX_ADVICE - 1;
    memmove(view->advice + 1, view->advice, n * sizeof view->advice[0]);
    view->n_advice = n + 1;
    struct watch_advice *shown = &view->advice[0];
    *shown = (struct watch_advice){.since_ns = view->watch_ns, .in_force = true};
    shown->advice.advice = word;
    shown->advice.confirmed = confirmed;
    shown->advice.until_ns = until_s > 0 ? view->watch_ns + time_from_s(until_s) : -1;
    snprintf(shown->advice.station, NOTE_NAME_SIZE, "%s", station);
    snprintf(shown->advice.reason, FLOW_TEXT_SIZE, "%s", reason);
    snprintf(shown->advice.clause, FLOW_TEXT_SIZE, "%s", clause);
    snprintf(shown->advice.requires, FLOW_TEXT_SIZE, "%s", requires);
    flow_id(1, 0, "advice", ++server->n_advice, shown->id);
}

static void both(struct server *server, enum advice_word word, const char *reason, const char *clause,
                 double until_s, const char *requires)
{
    give(server, word, "observer", true, reason, clause, until_s, requires);
    give(server, word, "crew", true, reason, clause, until_s, requires);
}

static void set_phase(struct server *server, enum phase phase, const char *reason, const char *clause)
{
    struct watch_view *view = &server->watch;
    view->phase = phase;
    view->phase_since_ns = view->watch_ns;
    snprintf(view->phase_reason, FLOW_TEXT_SIZE, "%s", reason);
    snprintf(view->phase_clause, FLOW_TEXT_SIZE, "%s", clause);
    snprintf(view->job, IMPULSE_JOB_SIZE, "pile A07");
    view->n_timers = 0;
    view->plan = (struct watch_plan){.planned_ns = -1, .earliest_ns = -1};
    view->release_possible = false;
    view->source_heard = phase == PHASE_SOFT_START || phase == PHASE_FULL_POWER;
    view->source_said = view->source_heard ? phase : PHASE_OFF;
}

static void show_contacts(struct server *server)
{
    server->watch.n_contacts = 0;
    struct watch_contact *whale = add_contact(server, 1, GROUP_BALEEN_WHALE, GRADE_ACT, 640, 0.35);
    whale->seen = true;
    whale->clears_at_ns = server->watch.watch_ns + time_from_s(20 * 60);
    add_contact(server, 2, GROUP_DELPHINID, GRADE_LOOK, 0, 0);
    struct watch_contact *porpoise = add_contact(server, 3, GROUP_PORPOISE, GRADE_ACT, 0, 0);
    porpoise->countdown_ends_ns = server->watch.watch_ns + time_from_s(30);
}

static void add_step(struct watch_plan *plan, const char *name, int64_t latest_ns, const char *text)
{
    struct watch_plan_step *step = &plan->steps[plan->n_steps++];
    step->earliest_ns = -1;
    step->latest_ns = latest_ns;
    snprintf(step->name, sizeof step->name, "%s", name);
    snprintf(step->text, sizeof step->text, "%s", text);
}

/* A start in 10 min that a delay of 20 min pushes back. */
static void show_plan(struct server *server)
{
    struct watch_plan *plan = &server->watch.plan;
    int64_t now_ns = server->watch.watch_ns;
    *plan = (struct watch_plan){.planned_ns = now_ns + time_from_s(600),
                                .earliest_ns = now_ns + time_from_s(1200),
                                .slips_ns = time_from_s(600)};
    add_step(plan, "pre-watch begins", now_ns + time_from_s(600), "0 min are left of 3");
    plan->steps[0].done = true;
    add_step(plan, "deterrent on", now_ns - time_from_s(300), "for at least 15 min");
    plan->steps[1].late = true;
    add_step(plan, "day ends", now_ns + time_from_s(7200), "");
    plan->steps[2].fact = true;
}

static const char *held(void)
{
    return "contact 1, baleen whale, was last heard inside the mitigation zone";
}

static bool show_calm(struct server *server, const char *word)
{
    if (strcmp(word, "quiet") == 0) {
        server->watch.n_contacts = server->watch.n_advice = 0;
        set_phase(server, PHASE_OFF, "no watch has begun", "");
    } else if (strcmp(word, "pre-watch") == 0) {
        set_phase(server, PHASE_PRE_WATCH, "visual and acoustic watch are kept", "clause 3.1");
        add_timer(server, "pre-watch", 74, 180, "");
        both(server, ADVICE_DO_NOT_START, "The pre-watch is not complete", "clause 3.1", 106,
             "an unbroken pre-watch and the observer's release");
    } else if (strcmp(word, "ready") == 0) {
        set_phase(server, PHASE_READY, "the pre-watch is complete", "clause 3.1");
        server->watch.release_possible = true;
        add_timer(server, "pre-watch", 180, 180, "");
        both(server, ADVICE_DO_NOT_START, "A named observer has not released the start yet", "clause 3.4", 0,
             "the observer's release");
    } else if (strcmp(word, "may-start") == 0) {
        set_phase(server, PHASE_READY, "released by Ada Lind", "clause 3.4");
        both(server, ADVICE_MAY_START, "Pre-watch complete; released by Ada Lind", "clause 3.4", 0,
             "a soft start of at least 2 minutes");
    } else if (strcmp(word, "soft-start") == 0) {
        set_phase(server, PHASE_SOFT_START, "the crew says: soft start", "clause 5.1");
        add_timer(server, "soft start", 31, 120, "");
        both(server, ADVICE_CARRY_ON, "Soft start: nothing asks for a change", "clause 5.1", 0, "");
    } else if (strcmp(word, "resume") == 0) {
        set_phase(server, PHASE_BREAK, "the source is silent", "clause 6.1");
        both(server, ADVICE_RESUME,
             "The zone is clear: the source may resume while the silence is at most 10 min", "clause 6.1",
             480, "");
    } else if (strcmp(word, "carry-on") == 0) {
        set_phase(server, PHASE_FULL_POWER, "the soft start is complete", "clause 5.1");
        both(server, ADVICE_CARRY_ON, "Nothing is heard or seen inside the zone", "clause 5.1", 0, "");
    } else
        return false;
    return true;
}

static bool show_grave(struct server *server, const char *word)
{
    if (strcmp(word, "delay") == 0) {
        set_phase(server, PHASE_DELAY, "a porpoise is heard, distance unknown", "clause 4.1");
        show_contacts(server);
        add_timer(server, "pre-watch", 180, 180, "");
        show_plan(server);
        add_timer(server, "clearance of contact 1", 212, 1200, "");
        add_timer(server, "clearance of contact 3", 0, 1200, "contact 3 is still heard");
        both(server, ADVICE_DO_NOT_START, "Baleen whale heard at about 640 m, likely inside the watch zone",
             "clause 4.2", 988, "20 minutes without a detection inside the zone, and the observer's release");
    } else if (strcmp(word, "stop") == 0) {
        set_phase(server, PHASE_SHUTDOWN, held(), "clause 4.1");
        show_contacts(server);
        add_timer(server, "clearance of contact 1", 12, 1200, "contact 1 is still heard");
        both(server, ADVICE_STOP, "Porpoise heard inside the 500 m zone while piling", "clause 4.1", 1200,
             "20 minutes without a detection inside the zone, the observer's release, a new soft start");
        server->watch.advice[0].advice.confirmed = server->watch.advice[1].advice.confirmed = false;
    } else if (strcmp(word, "hold") == 0) {
        set_phase(server, PHASE_HOLD, "a dolphin was sighted during the soft start", "clause 5.3");
        both(server, ADVICE_HOLD_POWER, "Dolphins sighted at 430 m during the soft start", "clause 5.3", 300,
             "the animals seen leaving the zone, or 5 minutes without a detection");
    } else
        return false;
    return true;
}

/* Markup in every text that a person can enter; none of it may do anything. */
static void make_hostile(struct server *server)
{
    static const char markup[] = "<img src=x onerror='window.owned=1'><script>window.owned=1</script>";
    server->hostile = true;
    add_person(server, markup, "visual", "");
    snprintf(server->watch.phase_reason, FLOW_TEXT_SIZE, "%s", markup);
    for (uint32_t i = 0; i < server->watch.n_advice; i++) {
        snprintf(server->watch.advice[i].advice.reason, FLOW_TEXT_SIZE, "%s", markup);
        snprintf(server->watch.advice[i].advice.requires, FLOW_TEXT_SIZE, "%s", markup);
    }
    snprintf(server->hearing.faults[0], BOARD_LINE_SIZE, "%s", markup);
    server->hearing.n_faults = 1;
    snprintf(server->watch.job, IMPULSE_JOB_SIZE, "<b>pile</b>");
}

static void obey(struct server *server, const char *word)
{
    struct hearing_view *hearing = &server->hearing;
    if (show_calm(server, word) || show_grave(server, word))
        return;
    if (strcmp(word, "deaf") == 0 || strcmp(word, "hear") == 0) {
        hearing->streams[0].hearing = strcmp(word, "hear") == 0;
        snprintf(hearing->streams[0].health, BOARD_LINE_SIZE, "%s",
                 hearing->streams[0].hearing ? "capturing" : "no block for 4.2 s, starting again");
    } else if (strcmp(word, "freeze") == 0 || strcmp(word, "thaw") == 0)
        server->frozen = strcmp(word, "freeze") == 0;
    else if (strcmp(word, "disk-full") == 0 || strcmp(word, "disk-ok") == 0) {
        server->disk_full = strcmp(word, "disk-full") == 0;
        hearing->recording = !server->disk_full;
        snprintf(hearing->recording_text, BOARD_LINE_SIZE, "%s", server->disk_full ? "the disk is full" : "");
    } else if (strcmp(word, "unrecorded") == 0 && server->watch.n_advice > 0) {
        hearing->n_unrecorded = 1;
        snprintf(hearing->unrecorded[0], FLOW_ID_SIZE, "%s", server->watch.advice[0].id);
    } else if (strcmp(word, "recorded") == 0)
        hearing->n_unrecorded = 0;
    else if (strcmp(word, "no-answer") == 0)
        server->no_answer = true;
    else if (strcmp(word, "hostile") == 0)
        make_hostile(server);
}

static void apply_note(struct server *server, const struct note *note)
{
    struct watch_view *view = &server->watch;
    if (note->kind == NOTE_SIGN_ON)
        add_person(server, note->person, note->watch, note->station);
    if (note->kind == NOTE_CHECK)
        watch_check_put(view->checks, &view->n_checks, note, view->watch_ns);
    for (uint32_t i = 0; i < view->n_advice && note->kind == NOTE_ACKNOWLEDGEMENT; i++)
        if (strcmp(view->advice[i].id, note->advice) == 0)
            watch_advice_answer(&view->advice[i], note, view->watch_ns);
    for (uint32_t i = 0; i < view->n_contacts; i++) {
        struct watch_contact *contact = &view->contacts[i];
        if (contact->contact.contact != note->contact)
            continue;
        if (note->kind == NOTE_DISTANCE) {
            contact->contact.whereabouts =
                (struct whereabouts){.known = true, .median_m = note->distance_m, .log_spread = 0.2};
            contact->contact.p_inside = whereabouts_p_inside(&contact->contact.whereabouts, 500);
        }
        if (note->kind == NOTE_VERDICT) {
            contact->countdown_ends_ns = -1;
            if (strcmp(note->verdict, "dismiss") == 0)
                contact->contact.state = CONTACT_DISMISSED;
        }
    }
}

static enum status take_note(void *context, const struct note *note, char out_id[FLOW_ID_SIZE])
{
    struct server *server = context;
    pthread_mutex_lock(&server->lock);
    if (server->no_answer) {
        pthread_mutex_unlock(&server->lock);
        nanosleep(&(struct timespec){.tv_sec = 1, .tv_nsec = 500000000}, NULL);
        return STATUS_TIMEOUT;
    }
    apply_note(server, note);
    flow_id(1, 0, "note", ++server->n_notes, out_id);
    printf("note %s %s|%s|%s|%s|%s\n", note_kind_text(note->kind), note->person, note->station, note->advice,
           note->answer, note->text);
    fflush(stdout);
    board_publish(server->board, &server->watch, &server->hearing);
    pthread_mutex_unlock(&server->lock);
    return STATUS_OK;
}

static void add_call(struct server *server, uint32_t n, enum group group, const char *name,
                     enum call_form form, double ago_s, double length_s, double low_hz, double high_hz)
{
    struct hearing_call *heard = &server->hearing.calls[n];
    int64_t start = server->watch.watch_ns - time_from_s(ago_s);
    *heard = (struct hearing_call){.stream = 1,
                                   .call = {.channel = 1 + n % 2,
                                            .group = group,
                                            .form = form,
                                            .start_ns = start,
                                            .end_ns = start + time_from_s(length_s),
                                            .low_hz = low_hz,
                                            .high_hz = high_hz,
                                            .n_pulses = form == CALL_TRAIN ? 24 : 0,
                                            .interval_s = form == CALL_TRAIN ? 0.06 : NAN,
                                            .snr_db = 11.4 + n,
                                            .level_db = 118.2 - n,
                                            .bearing_deg = NAN,
                                            .mirror_deg = NAN,
                                            .certainty = 0.8}};
    snprintf(heard->call.class_name, CALL_CLASS_SIZE, "%s", name);
    flow_id(1, 1, "call", 100 - n, heard->id);
}

static void fill_hearing(struct server *server)
{
    struct hearing_view *hearing = &server->hearing;
    hearing->unix_at_zero_ns = UNIX_AT_ZERO;
    hearing->recording = true;
    hearing->n_streams = 1;
    struct hearing_stream *stream = &hearing->streams[0];
    *stream = (struct hearing_stream){
        .rate_hz = 384000, .n_channels = 2, .hearing = true, .block_age_s = 0.04, .unheard_s = 41.5};
    snprintf(stream->name, sizeof stream->name, "port array");
    snprintf(stream->input, sizeof stream->input, "scene");
    snprintf(stream->health, sizeof stream->health, "capturing");
    add_call(server, 0, GROUP_PORPOISE, "porpoise clicks", CALL_TRAIN, 6, 1.5, 110000, 150000);
    add_call(server, 1, GROUP_BALEEN_WHALE, "humpback song", CALL_TONE, 21, 2.2, 180, 640);
    add_call(server, 2, GROUP_DELPHINID, "whistle", CALL_TONE, 33, 0.8, 6000, 14000);
    add_call(server, 3, GROUP_BALEEN_WHALE, "humpback song", CALL_TONE, 52, 1.9, 220, 480);
    hearing->n_calls = 4;
    stream->n_accounts = 4;
    stream->accounts[0] =
        (struct class_account){.name = "porpoise click train",
                               .group = GROUP_PORPOISE,
                               .hearable = true,
                               .n_found = 2,
                               .rejected = {[REJECT_TOO_WEAK] = 1204, [REJECT_NO_RHYTHM] = 7310}};
    stream->accounts[1] =
        (struct class_account){.name = "humpback song", .group = GROUP_BALEEN_WHALE, .hearable = true};
    stream->accounts[2] = (struct class_account){.name = "sonar above the rate", .hearable = false};
    stream->accounts[3] = (struct class_account){.name = "seal trill", .group = GROUP_PHOCID};
    hearing->n_unheard = 1;
    hearing->unheard[0] =
        (struct hearing_unheard){.stream = 1,
                                 .unheard = {.channel = 2,
                                             .low_hz = 20,
                                             .high_hz = 180000,
                                             .start_ns = server->watch.watch_ns - time_from_s(70),
                                             .end_ns = server->watch.watch_ns - time_from_s(62),
                                             .cause = UNHEARD_OWN_SOURCE}};
}

static void add_impulse(struct server *server, int64_t time_ns)
{
    struct hearing_view *hearing = &server->hearing;
    uint32_t n = hearing->n_impulses < BOARD_MAX_IMPULSES ? hearing->n_impulses : BOARD_MAX_IMPULSES - 1;
    memmove(hearing->impulses + 1, hearing->impulses, n * sizeof hearing->impulses[0]);
    hearing->n_impulses = n + 1;
    struct hearing_impulse *heard = &hearing->impulses[0];
    double wobble = random_normal(&server->random);
    *heard = (struct hearing_impulse){.stream = 1,
                                      .impulse = {.channel = 1,
                                                  .time_ns = time_ns,
                                                  .sel_db = 171 + wobble,
                                                  .peak_db = 196 + 1.4 * wobble,
                                                  .rms90_db = 181 + wobble,
                                                  .t90_s = 0.09 + 0.01 * fabs(wobble)}};
    flow_id(1, 1, "impulse", ++server->n_blows, heard->id);
    server->watch.n_impulses++;
}

static void fill_levels(struct server *server)
{
    struct hearing_view *hearing = &server->hearing;
    hearing->n_levels = 2;
    for (uint32_t i = 0; i < 2; i++) {
        struct level level = {.channel = i + 1,
                              .start_ns = server->watch.watch_ns - TIME_NS_PER_S,
                              .seconds = 1,
                              .spl_db = 112 + 0.5 * random_normal(&server->random),
                              .peak_db = 128 + random_normal(&server->random),
                              .n_bands = 43,
                              .relative = i == 1};
        if (level.relative) {
            level.spl_db -= 160;
            level.peak_db -= 160;
        }
        for (uint32_t k = 0; k < level.n_bands; k++)
            level.band_db[k] = level.spl_db - 8 - 0.4 * k;
        hearing->levels[i] = (struct hearing_level){.stream = 1, .level = level};
    }
}

/* Noise, a gliding tone now and then, and blows while the source works. */
static void push_columns(struct server *server)
{
    for (; server->column_ns <= server->watch.watch_ns; server->column_ns += COLUMN_NS) {
        double at_s = time_to_s(server->column_ns), in_song = fmod(at_s, 31);
        bool blow = server->watch.source_heard && fmod(at_s, 2) < 0.25;
        for (uint32_t band = 0; band < COLUMN_BANDS; band++) {
            static const double edges[] = {20, 2000, 20000, 172800};
            struct column column = {.band = band,
                                    .start_ns = server->column_ns,
                                    .low_hz = edges[band],
                                    .high_hz = edges[band + 1]};
            for (int row = 0; row < COLUMN_ROWS; row++) {
                double level = 120 - 30.0 * band - row + 5 * random_normal(&server->random);
                double glide = 14 + 4 * sin(in_song * 2) - row;
                if (band == 0 && in_song < 2.5)
                    level += 60 * exp(-glide * glide);
                if (band == 2 && fmod(at_s, 17) < 1.5 && row > 17)
                    level += 45;
                if (blow)
                    level += 70 - 20 * band;
                column.levels[row] = (uint8_t)fmin(255, fmax(0, level));
            }
            board_push_column(server->board, 1, &column);
        }
    }
}

/* Watch time goes on by the clock, or by more when asked. */
static void go_on(struct server *server, int64_t ns)
{
    int64_t before = server->watch.watch_ns;
    server->watch.watch_ns += ns;
    for (uint32_t i = 0; i < server->watch.n_timers; i++)
        if (server->watch.timers[i].running &&
            server->watch.timers[i].elapsed_ns < server->watch.timers[i].needed_ns)
            server->watch.timers[i].elapsed_ns += ns;
    if (server->watch.source_heard &&
        before / (2 * TIME_NS_PER_S) != server->watch.watch_ns / (2 * TIME_NS_PER_S))
        add_impulse(server, server->watch.watch_ns);
    push_columns(server);
    fill_levels(server);
    server->hearing.streams[0].heard_ns = server->watch.watch_ns;
    if (server->disk_full)
        return;
    server->hearing.committed_seq++;
    server->hearing.committed_ns = server->watch.watch_ns;
}

static int64_t now_ns(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (int64_t)now.tv_sec * TIME_NS_PER_S + now.tv_nsec;
}

static void serve(struct server *server)
{
    char line[256];
    size_t length = 0;
    int64_t last = now_ns();
    for (;;) {
        struct pollfd input = {.fd = STDIN_FILENO, .events = POLLIN};
        bool more = poll(&input, 1, 100) > 0;
        pthread_mutex_lock(&server->lock);
        if (more) {
            if (read(STDIN_FILENO, line + length, 1) != 1)
                break;
            bool whole = line[length] == '\n';
            line[length] = whole ? '\0' : line[length];
            length = whole || length == sizeof line - 2 ? 0 : length + 1;
            if (whole && strcmp(line, "quit") == 0)
                break;
            if (whole && strncmp(line, "seconds ", 8) == 0)
                go_on(server, time_from_s(atof(line + 8)));
            else if (whole)
                obey(server, line);
            if (whole && !server->frozen)
                board_publish(server->board, &server->watch, &server->hearing);
        } else if (!server->frozen) {
            int64_t now = now_ns();
            go_on(server, now - last);
            last = now;
            board_publish(server->board, &server->watch, &server->hearing);
        } else
            last = now_ns();
        pthread_mutex_unlock(&server->lock);
    }
    pthread_mutex_unlock(&server->lock);
}

int main(int argc, char **argv)
{
    static struct server server = {.lock = PTHREAD_MUTEX_INITIALIZER};
    random_reset(&server.random, 1);
    server.watch.watch_ns = 300 * TIME_NS_PER_S;
    server.column_ns = 120 * TIME_NS_PER_S;
    struct board_setup board_setup = {.site = "Demonstration",
                                      .permit = &permit,
                                      .run = 1,
                                      .unix_at_zero_ns = UNIX_AT_ZERO,
                                      .n_stations = 2,
                                      .stations = {"hammer cab", "bridge"},
                                      .n_streams = 1};
    if (board_create(&board_setup, &server.board) != STATUS_OK)
        return 1;
    fill_hearing(&server);
    add_person(&server, "Ada Lind", "visual", "");
    add_person(&server, "Bo Sand", "acoustic", "");
    go_on(&server, 0);
    board_publish(server.board, &server.watch, &server.hearing);
    struct http_setup setup = {
        .address = "127.0.0.1", .port = argc > 1 ? (uint32_t)atoi(argv[1]) : 0, .board = server.board};
    struct http_callbacks callbacks = {.take_note = take_note, .context = &server};
    struct problems problems = {0};
    struct http *http = NULL;
    if (http_start(&setup, &callbacks, &problems, &http) != STATUS_OK) {
        fprintf(stderr, "%s", problems.lines.data);
        return 1;
    }
    printf("port %" PRIu32 "\n", http_port(http));
    fflush(stdout);
    serve(&server);
    int64_t start = now_ns();
    http_stop(http);
    printf("stopped %.3f\n", time_to_s(now_ns() - start));
    board_destroy(server.board);
    problems_destroy(&problems);
    return 0;
}
