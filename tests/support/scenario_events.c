/* What happens in a scenario: each function reads one kind of line and pushes its events. */
#include "base/time.h"
#include "support/scenario_inner.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void push(struct player *player, struct event *event, int64_t known_ns)
{
    event->run = player->run;
    event->known_ns = known_ns;
    event->counter = ++player->counters[event->kind];
    if (watch_push(player->watch, event, &player->sink) != STATUS_OK)
        player_complain(player, "the watch refuses the event");
}

static void push_impulse(struct player *player, int64_t at_ns)
{
    struct event event = {.kind = EVENT_IMPULSE, .stream = 1};
    event.as.impulse.channel = 1;
    event.as.impulse.time_ns = at_ns;
    push(player, &event, at_ns);
}

/* The blows that fall by then. */
static void push_blows(struct player *player, int64_t to_ns)
{
    while (player->impulse_step_ns && player->next_impulse_ns <= to_ns) {
        if (player->next_impulse_ns >= player->impulse_until_ns) {
            player->impulse_step_ns = 0;
            break;
        }
        push_impulse(player, player->next_impulse_ns);
        player->next_impulse_ns += player->impulse_step_ns;
    }
}

void player_pass_to(struct player *player, int64_t to_ns)
{
    push_blows(player, to_ns);
    if (watch_advance(player->watch, to_ns, &player->sink) != STATUS_OK)
        player_complain(player, "time runs backwards");
    player->now_ns = to_ns;
}

/* Cuts the name of a group off the text. */
static const char *read_group(const char *text, enum group *out)
{
    for (unsigned i = 0; text && i < GROUP_COUNT; i++) {
        const char *rest = player_after(text, group_text((enum group)i));
        if (rest) {
            *out = (enum group)i;
            return rest;
        }
    }
    return NULL;
}

static bool set(struct player *player, struct note *note, const char *field, const char *value)
{
    const char *allowed = "";
    if (note_set(note, field, value, &allowed) == STATUS_OK)
        return true;
    player_complain(player, "%s cannot be '%s'; allowed: %s", field, value, allowed);
    return false;
}

static void push_note(struct player *player, struct note *note)
{
    struct event event = {.kind = EVENT_NOTE};
    event.as.note = *note;
    if (!player->failed)
        push(player, &event, player->now_ns);
}

/* NAME signs on as visual observer | as acoustic observer | as crew at STATION */
static bool play_sign(struct player *player, const char *who, const char *rest)
{
    struct note note;
    const char *as = player_after(rest, "signs on as ");
    note_reset(&note, as ? NOTE_SIGN_ON : NOTE_SIGN_OFF);
    as = as ? as : player_after(rest, "signs off as ");
    const char *station = player_after(as, "crew at ");
    if (!as)
        return false;
    set(player, &note, "person", who);
    set(player, &note, "station", station ? station : "");
    set(player, &note, "watch",
        station                              ? "crew"
        : strcmp(as, "visual observer") == 0 ? "visual"
                                             : "acoustic");
    if (!station && strcmp(as, "visual observer") != 0 && strcmp(as, "acoustic observer") != 0)
        player_complain(player, "nobody signs on as '%s'", as);
    push_note(player, &note);
    return true;
}

/* NAME sights [an unknown animal | GROUP] [at D m] [with calf] [leaving] [as contact N] */
static bool play_sighting(struct player *player, const char *who, const char *rest)
{
    struct note note;
    note_reset(&note, NOTE_SIGHTING);
    const char *text = read_group(player_after(rest, "sights "), &note.group);
    if (!text)
        return false;
    set(player, &note, "person", who);
    char number[32];
    int used;
    while (*text && !player->failed) {
        if (sscanf(text, " at %31[0-9.] m%n", number, &used) == 1)
            set(player, &note, "distance_m", number);
        else if (sscanf(text, " as contact %31[0-9]%n", number, &used) == 1)
            set(player, &note, "contact", number);
        else if (player_after(text, " with calf")) {
            used = 10;
            note.calf = true;
        } else if (player_after(text, " leaving")) {
            used = 8;
            note.leaving = true;
        } else
            player_complain(player, "cannot read '%s' of the sighting", text);
        text += player->failed ? 0 : used;
    }
    push_note(player, &note);
    return true;
}

/* NAME says contact N is at D m | NAME confirms | dismisses contact N: REASON | NAME says contact N left:
 * REASON | NAME releases the start */
static bool play_word(struct player *player, const char *who, const char *rest)
{
    struct note note;
    char number[32], distance[32];
    int used = 0;
    if (sscanf(rest, "says contact %31[0-9] is at %31[0-9.] m%n", number, distance, &used) == 2 && used) {
        note_reset(&note, NOTE_DISTANCE);
        set(player, &note, "distance_m", distance);
    } else if (sscanf(rest, "confirms contact %31[0-9]: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        set(player, &note, "verdict", "confirm");
        set(player, &note, "text", rest + used);
    } else if (sscanf(rest, "dismisses contact %31[0-9]: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        set(player, &note, "verdict", "dismiss");
        set(player, &note, "text", rest + used);
    } else if (sscanf(rest, "says contact %31[0-9] left: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        set(player, &note, "verdict", "left");
        set(player, &note, "text", rest + used);
    } else if (strcmp(rest, "releases the start") == 0) {
        note_reset(&note, NOTE_RELEASE);
        number[0] = '\0';
    } else
        return false;
    set(player, &note, "person", who);
    if (*number)
        set(player, &note, "contact", number);
    push_note(player, &note);
    return true;
}

/* NAME at STATION answers ANSWER: to the advice in force for the crew */
static bool play_answer(struct player *player, const char *who, const char *rest)
{
    struct note note;
    static struct watch_view view;
    char text[LINE_SIZE];
    const char *at = player_after(rest, "at ");
    if (!at)
        return false;
    snprintf(text, sizeof text, "%s", at);
    char *answer = strstr(text, " answers ");
    if (!answer)
        return false;
    *answer = '\0';
    note_reset(&note, NOTE_ACKNOWLEDGEMENT);
    set(player, &note, "person", who);
    set(player, &note, "station", text);
    set(player, &note, "answer", answer + 9);
    set(player, &note, "advice", "none");
    watch_get_view(player->watch, &view);
    for (uint32_t i = view.n_advice; i-- > 0;)
        if (view.advice[i].in_force && strcmp(view.advice[i].advice.station, "crew") == 0)
            set(player, &note, "advice", view.advice[i].id);
    push_note(player, &note);
    return true;
}

/* GROUP calls [, evidence E] [, ended S s ago] */
static bool play_call(struct player *player, const char *text)
{
    struct event event = {.kind = EVENT_CALL, .stream = 1};
    struct call *call = &event.as.call;
    double ago_s = 0;
    const char *rest = player_after(read_group(text, &call->group), " calls");
    if (!rest)
        return false;
    call->evidence = 10;
    for (int used = 0; *rest; rest += used) {
        double number;
        used = 0;
        if (sscanf(rest, ", evidence %lf%n", &number, &used) == 1 && used)
            call->evidence = number;
        else if (sscanf(rest, ", ended %lf s ago%n", &number, &used) == 1 && used)
            ago_s = number;
        else {
            player_complain(player, "cannot read '%s' of the call", rest);
            return true;
        }
    }
    snprintf(call->class_name, sizeof call->class_name, "test");
    call->channel = 1;
    call->end_ns = player->now_ns - time_from_s(ago_s);
    call->start_ns = call->end_ns - TIME_NS_PER_S / 2;
    call->bearing_deg = call->mirror_deg = call->interval_s = NAN;
    push(player, &event, player->now_ns);
    return true;
}

/* the last S s [up to A s ago] were a gap | too quiet | own source | clipped [on channel C] */
static bool play_unheard(struct player *player, const char *text)
{
    struct event event = {.kind = EVENT_UNHEARD, .stream = 1};
    double seconds, ago = 0;
    unsigned channel = 0;
    int used = 0;
    if (sscanf(text, "the last %lf s were %n", &seconds, &used) != 1 || !used) {
        used = 0;
        if (sscanf(text, "the last %lf s up to %lf s ago were %n", &seconds, &ago, &used) != 2 || !used)
            return false;
    }
    char cause[LINE_SIZE];
    snprintf(cause, sizeof cause, "%s", text + used);
    char *on = strstr(cause, " on channel ");
    if (on) {
        channel = (unsigned)strtoul(on + 12, NULL, 10);
        *on = '\0';
    }
    static const char *const words[] = {"a gap", "clipped", "own source", "dead", "too quiet"};
    unsigned i = 0;
    while (i < 5 && strcmp(cause, words[i]) != 0)
        i++;
    if (i == 5)
        player_complain(player, "cannot read the cause '%s'", cause);
    event.as.unheard = (struct unheard){.channel = channel,
                                        .high_hz = 48000,
                                        .end_ns = player->now_ns - time_from_s(ago),
                                        .start_ns = player->now_ns - time_from_s(ago + seconds),
                                        .cause = (enum unheard_cause)(i % 5)};
    push(player, &event, player->now_ns);
    return true;
}

/* "impulse", "impulses every S s until CLOCK" */
static bool play_impulses(struct player *player, const char *text)
{
    double step;
    int used = 0;
    if (strcmp(text, "impulse") == 0) {
        push_impulse(player, player->now_ns);
        return true;
    }
    if (sscanf(text, "impulses every %lf s until %n", &step, &used) != 1 || !used)
        return false;
    if (!player_read_clock(text + used, &player->impulse_until_ns))
        player_complain(player, "cannot read the time '%s'", text + used);
    player->impulse_step_ns = time_from_s(step);
    player->next_impulse_ns = player->now_ns;
    push_blows(player, player->now_ns);
    return true;
}

/* NAME says impulse N is another's | is ours [since CLOCK] */
static bool play_whose(struct player *player, const char *who, const char *rest)
{
    struct note note;
    char id[FLOW_ID_SIZE];
    unsigned number;
    int used = 0;
    if (sscanf(rest, "says impulse %u is %n", &number, &used) != 1 || !used)
        return false;
    note_reset(&note, NOTE_WHOSE);
    flow_id(player->run, 1, "impulse", number, id);
    const char *since = strstr(rest + used, " since ");
    set(player, &note, "person", who);
    set(player, &note, "impulse", id);
    set(player, &note, "answer", player_after(rest + used, "ours") ? "ours" : "other");
    if (since && !player_read_clock(since + 7, &note.occurred_ns))
        player_complain(player, "cannot read the time in '%s'", rest);
    push_note(player, &note);
    return true;
}

/* What the work does: source, job, the program itself. */
static bool play_work(struct player *player, const char *text)
{
    struct note note;
    char job[32], word[32];
    const char *state = player_after(text, "the crew says: ");
    if (state) {
        note_reset(&note, NOTE_SOURCE);
        set(player, &note, "source_state", state);
        push_note(player, &note);
        return true;
    }
    if (sscanf(text, "job %31s %31s", job, word) == 2 &&
        (strcmp(word, "opens") == 0 || strcmp(word, "closes") == 0)) {
        note_reset(&note, NOTE_JOB);
        set(player, &note, "job", job);
        set(player, &note, "answer", strcmp(word, "opens") == 0 ? "open" : "close");
        push_note(player, &note);
        return true;
    }
    return false;
}

/* the program starts again after an outage since CLOCK: called before time passes. */
void player_restart(struct player *player, const char *text, int64_t at_ns)
{
    const char *since = player_after(text, "the program starts again, down since ");
    struct event event = {.kind = EVENT_RUN};
    if (!since || !player_read_clock(since, &event.as.run_mark.outage_start_ns))
        player_complain(player, "cannot read the outage in '%s'", text);
    event.as.run_mark.outage_end_ns = at_ns;
    player->run++;
    memset(player->counters, 0, sizeof player->counters);
    player->now_ns = at_ns;
    push(player, &event, at_ns);
}

void player_event(struct player *player, const char *text)
{
    char who[NOTE_NAME_SIZE];
    int used = 0;
    if (play_call(player, text) || play_unheard(player, text) || play_impulses(player, text) ||
        play_work(player, text))
        return;
    if (sscanf(text, "%63s %n", who, &used) == 1 && used &&
        (play_sign(player, who, text + used) || play_sighting(player, who, text + used) ||
         play_answer(player, who, text + used) || play_whose(player, who, text + used) ||
         play_word(player, who, text + used)))
        return;
    player_complain(player, "cannot read the event '%s'", text);
}
