/* Lets the watch say its facts to a script: watch_facts permit ID prints the values of config/permits/ID.cfg
 * with the tests' invented ones as JSON; watch_facts play ID reads sequences of events from standard input,
 * one event a line, and answers each line "?" with a line of facts:
 *
 *   new DEPTH_M HALF_LENGTH_M UNIX_S LATITUDE LONGITUDE CHANNELS   another sequence ("-": nobody knows)
 *   n NS KIND|FIELD=VALUE|...         a note           c NS GROUP EVIDENCE END_NS    a call
 *   u NS START_NS END_NS CHANNEL CAUSE  unheard time   r NS OUTAGE_START_NS          the program starts again
 *   i NS TIME_NS                      an impulse       ? NS                          facts, please
 *
 * PHASE COMPLETE CREDIT_NS RELEASE HELD_BY_CONDITIONS OBSERVER CREW CONFIRMED CONTACT:CLEARS_NS ...
 *
 * To an impulse the answer is whose it is. watch_facts light ID answers lines UNIX_S LATITUDE LONGITUDE HOURS
 * with when it becomes light and dark: NS:LIGHT ... */
#include "base/time.h"
#include "rule/watch_inner.h"
#include "support/permits.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void number(const char *name, double value)
{
    if (isfinite(value))
        printf("\"%s\": %.17g, ", name, value);
    else
        printf("\"%s\": Infinity, ", name);
}

static void groups(uint32_t bits)
{
    printf("\"groups\": [");
    for (unsigned i = 0, n = 0; i < GROUP_COUNT; i++)
        if (bits & PERMIT_GROUP_BIT(i))
            printf("%s\"%s\"", n++ ? ", " : "", group_text((enum group)i));
    printf("], ");
}

static void species(uint32_t n, const char names[PERMIT_MAX_SPECIES][NOTE_NAME_SIZE],
                    enum species_policy unknown)
{
    printf("\"species\": [");
    for (uint32_t i = 0; i < n; i++)
        printf("%s\"%s\"", i ? ", " : "", names[i]);
    printf("], \"species_unknown\": %d, ", unknown == SPECIES_LISTED);
}

static void print_zone(const struct permit_zone *zone)
{
    printf("{");
    groups(zone->groups);
    species(zone->n_species, zone->species, zone->species_unknown);
    number("radius_m", zone->radius_m);
    number("least_number", zone->least_number);
    printf("\"edge\": %d, \"seen\": %d, \"heard\": %d, \"calf_only\": %d, \"action\": [",
           zone->origin == ORIGIN_ARRAY_EDGE, (zone->found & PERMIT_SEEN) != 0,
           (zone->found & PERMIT_HEARD) != 0, zone->calf_only);
    for (unsigned i = 0; i < PHASE_COUNT; i++)
        printf("%s%d", i ? ", " : "", (int)zone->action[i]);
    printf("]}");
}

static void print_rows(const struct permit *permit)
{
    printf("\"pre_watches\": [");
    for (uint32_t i = 0; i < permit->n_pre_watches; i++) {
        const struct permit_pre_watch *row = &permit->pre_watches[i];
        printf("%s{", i ? ", " : "");
        number("deeper", row->deeper_than_m);
        number("minutes", row->minutes);
        printf("\"visual\": %d, \"acoustic\": %d}", row->visual, row->acoustic);
    }
    printf("], \"zones\": [");
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        printf("%s", i ? ", " : "");
        print_zone(&permit->zones[i]);
    }
    printf("], \"clearances\": [");
    for (uint32_t i = 0; i < permit->n_clearances; i++) {
        const struct permit_clearance *row = &permit->clearances[i];
        printf("%s{", i ? ", " : "");
        groups(row->groups);
        species(row->n_species, row->species, row->species_unknown);
        number("minutes", row->minutes);
        number("deeper", row->deeper_than_m);
        number("deeper_minutes", row->deeper_minutes);
        printf("\"leaving_ends\": %d}", row->leaving_ends);
    }
    printf("], \"breaks\": [");
    for (uint32_t i = 0; i < permit->n_breaks; i++) {
        printf("%s{", i ? ", " : "");
        number("minutes", permit->breaks[i].minutes);
        printf("\"included\": %d, \"soft_start\": %d, \"daylight\": %d}", permit->breaks[i].limit_included,
               permit->breaks[i].soft_start, permit->breaks[i].daylight);
    }
    printf("], \"unknown\": [");
    for (unsigned i = 0; i < GROUP_COUNT; i++)
        printf("%s\"%s\"", i ? ", " : "", permit_unknown_text(permit->unknown[i]));
    printf("], \"all_groups\": {");
    groups(PERMIT_ALL_GROUPS);
    printf("\"n\": %d}, ", GROUP_COUNT);
}

static int print_permit(const struct permit *permit)
{
    printf("{\"id\": \"%s\", \"explosives\": %d, ", permit->id, permit->activity == ACTIVITY_EXPLOSIVES);
    print_rows(permit);
    number("hole_minutes", permit->pre_watch_hole_minutes);
    number("burst_pause_s", permit->soft_start.bursts > 0 ? permit->soft_start.pause_s : 0);
    printf("\"break_watch\": \"%s\", ", permit_break_watch_text(permit->break_watch));
    printf("\"deterrent\": %d, ", permit->deterrent.stated);
    number("deterrent_least", permit->deterrent.least_minutes);
    number("deterrent_gap", permit->deterrent.gap_minutes);
    printf("\"quieting\": %d, \"turn\": %d, \"turn_reduced\": %d, ", permit->quieting.stated,
           permit->turn.stated, permit->turn.reduced);
    number("turn_longest", permit->turn.longest_minutes);
    printf("\"small\": %d, ", permit->mitigation_source.stated);
    number("small_longest", permit->mitigation_source.longest_minutes);
    printf("\"test\": %d, \"test_pre_watch\": %d, \"steady\": %d, \"steady_pre_watch\": %d, ",
           permit->test.stated, permit->test.pre_watch, permit->steady.stated, permit->steady.pre_watch);
    printf("\"start\": %d, \"dark\": %d, ", permit->start.stated, (int)permit->start.dark);
    number("least_visibility", permit->start.least_visibility_m);
    number("most_sea_state", permit->start.most_sea_state);
    number("after_sunrise", permit->start.after_sunrise_minutes);
    number("before_sunset", permit->start.before_sunset_minutes);
    number("good_minutes", permit->start.good_watch_minutes);
    number("good_within_hours", permit->start.good_watch_within_hours);
    number("most_orders", permit->start.most_orders);
    printf("\"closed_from\": %u, \"closed_to\": %u, ", permit->start.closed_from, permit->start.closed_to);
    printf("\"outage\": %d, \"outage_daylight\": %d, ", permit->outage.stated, permit->outage.daylight);
    number("outage_diagnose", permit->outage.diagnose_minutes);
    number("outage_extra", permit->outage.extra_minutes);
    number("outage_day", permit->outage.day_minutes);
    number("outage_sea", permit->outage.most_sea_state);
    number("outage_quiet", permit->outage.quiet_minutes);
    number("post_minutes", permit->post_watch_minutes);
    number("countdown_s", permit->confirm_countdown_s);
    number("p_prepare", permit->p_inside_prepare);
    number("p_act", permit->p_inside_act);
    printf(
        "\"override_reasons\": %u, \"override_leaves\": %d, \"least_visual\": %u, \"least_acoustic\": %u}\n",
        permit->override.reasons, (int)permit->override.leaves, permit->staff.least_visual,
        permit->staff.least_acoustic);
    return 0;
}

struct player {
    struct permit permit;
    struct watch *watch;
    uint32_t run;
    uint64_t counters[8];
};

static void take(void *context, const struct outcome *outcome)
{
    (void)context;
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_IMPULSE)
        printf("%s\n", impulse_whose_text(outcome->as.event.as.impulse.whose));
}

static const struct outcome_sink sink = {take, NULL};

static double value_of(const char *text)
{
    return strcmp(text, "-") == 0 ? NAN : strtod(text, NULL);
}

static bool begin(struct player *player, const char *line)
{
    char word[6][32];
    if (sscanf(line, "new %31s %31s %31s %31s %31s %31s", word[0], word[1], word[2], word[3], word[4],
               word[5]) != 6)
        return false;
    double depth_m = value_of(word[0]), unix_s = value_of(word[2]);
    uint32_t channels = (uint32_t)atoi(word[5]);
    permit_set_edge(&player->permit, value_of(word[1]));
    struct watch_setup setup = {.permit = &player->permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60,
                                .depth_m = isnan(depth_m) ? 0 : depth_m,
                                .listening = {(UINT32_C(1) << channels) - 1}};
    if (!isnan(unix_s)) {
        setup.ranges.has_source = true;
        setup.ranges.latitude_deg = value_of(word[3]);
        setup.ranges.longitude_deg = value_of(word[4]);
    }
    watch_destroy(player->watch);
    player->watch = NULL;
    player->run = 1;
    memset(player->counters, 0, sizeof player->counters);
    if (watch_create(&setup, &player->watch) != STATUS_OK)
        return false;
    if (!isnan(unix_s))
        watch_set_clock(player->watch, (int64_t)unix_s * TIME_NS_PER_S);
    return true;
}

static bool push(struct player *player, struct event *event, long long at_ns)
{
    event->run = player->run;
    event->known_ns = at_ns;
    event->counter = ++player->counters[event->kind];
    return watch_push(player->watch, event, &sink) == STATUS_OK;
}

static bool push_note(struct player *player, char *text, long long at_ns)
{
    struct event event = {.kind = EVENT_NOTE};
    char *state = NULL, *kind_text = strtok_r(text, "|", &state);
    enum note_kind kind;
    if (!kind_text || !note_kind_from_text(kind_text, &kind))
        return false;
    note_reset(&event.as.note, kind);
    for (char *field; (field = strtok_r(NULL, "|", &state)) != NULL;) {
        char *value = strchr(field, '=');
        if (!value)
            return false;
        *value++ = '\0';
        if (note_set(&event.as.note, field, value, NULL) != STATUS_OK)
            return false;
    }
    return push(player, &event, at_ns);
}

static const struct advice_outcome *told(const struct watch *watch, const char *station)
{
    for (uint32_t i = 0; i < watch->n_advice; i++)
        if (watch->advice[i].in_force && strcmp(watch->advice[i].advice.station, station) == 0)
            return &watch->advice[i].advice;
    return NULL;
}

static bool say(struct player *player, long long at_ns)
{
    const struct watch *watch = player->watch;
    if (watch_advance(player->watch, at_ns, &sink) != STATUS_OK)
        return false;
    const struct advice_outcome *observer = told(watch, "observer"), *crew = told(watch, "crew");
    unsigned held = 0;
    struct why why;
    int64_t until_ns;
    for (unsigned i = 0; (i = conditions_hold(watch, i, &why, &until_ns)) != 0;)
        held |= 1U << i;
    printf("%d %d %lld %d %u %d %d %d", (int)watch->phase, effort_complete(watch),
           (long long)watch->effort.credit_ns, view_release_possible(watch), held,
           observer ? (int)observer->advice : -1, crew ? (int)crew->advice : -1, crew && crew->confirmed);
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        int64_t clears_ns = contact_clears_at_ns(contact, watch->permit, watch->now_ns);
        if (contact->holding && clears_ns >= 0)
            printf(" %u:%lld", contact->number, (long long)clears_ns);
    }
    printf("\n");
    return true;
}

static bool say_light(const struct permit *permit, const char *line)
{
    struct surroundings around;
    long long unix_s;
    double latitude_deg, longitude_deg, hours;
    if (sscanf(line, "%lld %lf %lf %lf", &unix_s, &latitude_deg, &longitude_deg, &hours) != 4)
        return false;
    surroundings_reset(&around, permit);
    surroundings_set_clock(&around, unix_s * TIME_NS_PER_S);
    surroundings_set_place(&around, latitude_deg, longitude_deg);
    for (int64_t at_ns = 0; at_ns < time_from_s(hours * 3600); at_ns = around.light_until_ns) {
        surroundings_update(&around, at_ns);
        printf("%s%lld:%s", at_ns ? " " : "", (long long)at_ns, surroundings_dark(&around) ? "dark" : "day");
    }
    printf("\n");
    return true;
}

static bool play_line(struct player *player, char *line)
{
    struct event event = {.stream = 1};
    long long at_ns, first = 0, second = 0;
    unsigned channel, cause;
    char group[64];
    int used = 0;
    if (line[0] == 'n' && line[1] == 'e')
        return begin(player, line);
    if (!player->watch || sscanf(line + 1, "%lld %n", &at_ns, &used) != 1)
        return false;
    char *rest = line + 1 + used;
    switch (line[0]) {
    case 'n':
        return push_note(player, rest, at_ns);
    case '?':
        return say(player, at_ns);
    case 'i':
        event.kind = EVENT_IMPULSE;
        event.as.impulse =
            (struct impulse){.channel = 1, .time_ns = strtoll(rest, NULL, 10), .peak_db = NAN, .sel_db = NAN};
        return push(player, &event, at_ns);
    case 'u':
        event.kind = EVENT_UNHEARD;
        if (sscanf(rest, "%lld %lld %u %u", &first, &second, &channel, &cause) != 4)
            return false;
        event.as.unheard = (struct unheard){
            .start_ns = first, .end_ns = second, .channel = channel, .cause = (enum unheard_cause)cause};
        return push(player, &event, at_ns);
    case 'r':
        event.kind = EVENT_RUN;
        event.stream = 0;
        event.as.run_mark = (struct run_mark){strtoll(rest, NULL, 10), at_ns};
        player->run++;
        memset(player->counters, 0, sizeof player->counters);
        return push(player, &event, at_ns);
    case 'c':
        event.kind = EVENT_CALL;
        if (sscanf(rest, "%63s %lf %lld", group, &event.as.call.evidence, &second) != 3)
            return false;
        for (unsigned i = 0; i < GROUP_COUNT; i++)
            if ((unsigned)atoi(group) == i)
                event.as.call.group = (enum group)i;
        event.as.call.end_ns = second;
        event.as.call.start_ns = second - TIME_NS_PER_S / 2;
        event.as.call.bearing_deg = event.as.call.mirror_deg = event.as.call.interval_s = NAN;
        return push(player, &event, at_ns);
    default:
        return false;
    }
}

int main(int argc, char **argv)
{
    static struct player player;
    static char line[512];
    if (argc != 3 || !test_load_permit(argv[2], &player.permit))
        return 2;
    if (strcmp(argv[1], "permit") == 0)
        return print_permit(&player.permit);
    const bool light = strcmp(argv[1], "light") == 0;
    for (unsigned n = 1; fgets(line, sizeof line, stdin); n++) {
        line[strcspn(line, "\n")] = '\0';
        if (!(light ? say_light(&player.permit, line) : play_line(&player, line))) {
            fprintf(stderr, "line %u cannot be played: %s\n", n, line);
            return 1;
        }
    }
    watch_destroy(player.watch);
    return 0;
}
