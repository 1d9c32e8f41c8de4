/* What happens in a scenario: each function reads one kind of line and pushes its events. */
#include "base/time.h"
#include "support/scenario_inner.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void player_push(struct player *player, struct event *event, int64_t known_ns)
{
    event->run = player->run;
    event->known_ns = known_ns;
    event->counter = ++player->counters[event->kind];
    if (watch_push(player->watch, event, &player->sink) != STATUS_OK)
        player_complain(player, "the watch refuses the event");
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

bool player_set(struct player *player, struct note *note, const char *field, const char *value)
{
    const char *allowed = "";
    if (note_set(note, field, value, &allowed) == STATUS_OK)
        return true;
    player_complain(player, "%s cannot be '%s'; allowed: %s", field, value, allowed);
    return false;
}

void player_push_note(struct player *player, struct note *note)
{
    struct event event = {.kind = EVENT_NOTE};
    event.as.note = *note;
    if (!player->failed)
        player_push(player, &event, player->now_ns);
}

/* " (FIELD VALUE; FIELD VALUE)": any field of a note, by its name. */
static void set_fields(struct player *player, struct note *note, const char *text)
{
    char copy[LINE_SIZE], *state = NULL;
    snprintf(copy, sizeof copy, "%s", text);
    char *end = strrchr(copy, ')');
    if (copy[0] != '(' || !end || end[1] != '\0') {
        player_complain(player, "cannot read the fields '%s'", text);
        return;
    }
    *end = '\0';
    for (char *one = strtok_r(copy + 1, ";", &state); one; one = strtok_r(NULL, ";", &state)) {
        one += strspn(one, " ");
        char *value = strchr(one, ' ');
        if (!value) {
            player_complain(player, "the field '%s' has no value", one);
            return;
        }
        *value++ = '\0';
        player_set(player, note, one, value);
    }
}

/* What stands before the fields of a line; they are set. */
void player_split_fields(struct player *player, struct note *note, const char *text, char *out, size_t size)
{
    const char *fields = strstr(text, " (");
    snprintf(out, size, "%.*s", fields ? (int)(fields - text) : (int)strlen(text), text);
    if (fields)
        set_fields(player, note, fields + 1);
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
    player_set(player, &note, "person", who);
    player_set(player, &note, "station", station ? station : "");
    player_set(player, &note, "watch",
               station                              ? "crew"
               : strcmp(as, "visual observer") == 0 ? "visual"
                                                    : "acoustic");
    if (!station && strcmp(as, "visual observer") != 0 && strcmp(as, "acoustic observer") != 0)
        player_complain(player, "nobody signs on as '%s'", as);
    player_push_note(player, &note);
    return true;
}

/* NAME sights GROUP [at D m] [with calf] [leaving] [as contact N] [(FIELD VALUE; ...)] */
static bool play_sighting(struct player *player, const char *who, const char *rest)
{
    struct note note;
    note_reset(&note, NOTE_SIGHTING);
    const char *text = read_group(player_after(rest, "sights "), &note.group);
    if (!text)
        return false;
    player_set(player, &note, "person", who);
    char number[32];
    int used;
    while (*text && !player->failed) {
        if (sscanf(text, " at %31[0-9.] m%n", number, &used) == 1)
            player_set(player, &note, "distance_m", number);
        else if (player_after(text, " (")) {
            set_fields(player, &note, text + 1);
            used = (int)strlen(text);
        } else if (sscanf(text, " as contact %31[0-9]%n", number, &used) == 1)
            player_set(player, &note, "contact", number);
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
    player_push_note(player, &note);
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
        player_set(player, &note, "distance_m", distance);
    } else if (sscanf(rest, "confirms contact %31[0-9]: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        player_set(player, &note, "verdict", "confirm");
        player_set(player, &note, "text", rest + used);
    } else if (sscanf(rest, "dismisses contact %31[0-9]: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        player_set(player, &note, "verdict", "dismiss");
        player_set(player, &note, "text", rest + used);
    } else if (sscanf(rest, "says contact %31[0-9] left: %n", number, &used) == 1 && used) {
        note_reset(&note, NOTE_VERDICT);
        player_set(player, &note, "verdict", "left");
        player_set(player, &note, "text", rest + used);
    } else if (strcmp(rest, "releases the start") == 0) {
        note_reset(&note, NOTE_RELEASE);
        number[0] = '\0';
    } else
        return false;
    player_set(player, &note, "person", who);
    if (*number)
        player_set(player, &note, "contact", number);
    player_push_note(player, &note);
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
    player_set(player, &note, "person", who);
    player_set(player, &note, "station", text);
    player_set(player, &note, "answer", answer + 9);
    player_set(player, &note, "advice", "none");
    watch_get_view(player->watch, &view);
    for (uint32_t i = view.n_advice; i-- > 0;)
        if (view.advice[i].in_force && strcmp(view.advice[i].advice.station, "crew") == 0)
            player_set(player, &note, "advice", view.advice[i].id);
    player_push_note(player, &note);
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
    player_push(player, &event, player->now_ns);
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
    player_set(player, &note, "person", who);
    player_set(player, &note, "impulse", id);
    player_set(player, &note, "answer", player_after(rest + used, "ours") ? "ours" : "other");
    if (since && !player_read_clock(since + 7, &note.occurred_ns))
        player_complain(player, "cannot read the time in '%s'", rest);
    player_push_note(player, &note);
    return true;
}

/* NAME overrides for REASON: TEXT | NAME ends the override */
static bool play_override(struct player *player, const char *who, const char *rest)
{
    struct note note;
    char reason[32];
    int used = 0;
    note_reset(&note, NOTE_OVERRIDE);
    if (sscanf(rest, "overrides for %31[a-z]: %n", reason, &used) == 1 && used) {
        player_set(player, &note, "answer", "on");
        player_set(player, &note, "reason", reason);
        player_set(player, &note, "text", rest + used);
    } else if (strcmp(rest, "ends the override") == 0)
        player_set(player, &note, "answer", "off");
    else
        return false;
    player_set(player, &note, "person", who);
    player_push_note(player, &note);
    return true;
}

void player_event(struct player *player, const char *text)
{
    char who[NOTE_NAME_SIZE];
    int used = 0;
    if (play_call(player, text) || player_work(player, text))
        return;
    if (sscanf(text, "%63s %n", who, &used) == 1 && used &&
        (play_sign(player, who, text + used) || play_sighting(player, who, text + used) ||
         play_answer(player, who, text + used) || play_whose(player, who, text + used) ||
         play_override(player, who, text + used) || play_word(player, who, text + used)))
        return;
    player_complain(player, "cannot read the event '%s'", text);
}
