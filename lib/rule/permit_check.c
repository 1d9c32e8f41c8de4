/* What makes a permit usable, said one problem at a time, each with the key of the permit file. */
#include "rule/permit_search.h"
#include <string.h>

static void need_text(struct permit_search *search, const char *key, const char *name, const char *text)
{
    permit_look_at(search, "%s", key);
    if (!*text)
        permit_problem(search, "%s is not stated", name);
}

static bool before_sound(enum phase phase)
{
    return phase == PHASE_OFF || phase == PHASE_PRE_WATCH || phase == PHASE_READY || phase == PHASE_DELAY ||
           phase == PHASE_DETERRENT || phase == PHASE_BREAK || phase == PHASE_SHUTDOWN ||
           phase == PHASE_POST_WATCH;
}

/* A distance from what the activity does not have would never be measured. */
static bool fits_activity(enum zone_origin origin, enum permit_activity activity)
{
    return origin == ORIGIN_VESSEL || (origin == ORIGIN_PILE && activity == ACTIVITY_PILING) ||
           (origin == ORIGIN_CHARGE && activity == ACTIVITY_EXPLOSIVES) ||
           ((origin == ORIGIN_ARRAY_CENTRE || origin == ORIGIN_ARRAY_EDGE) && activity == ACTIVITY_SEISMIC);
}

static void check_zone_groups(struct permit_search *search, const struct permit_zone *zone, uint32_t i)
{
    permit_look_at(search, "zones[%u].groups", i);
    if (zone->groups == 0 || (zone->groups & ~PERMIT_ALL_GROUPS) != 0)
        permit_problem(search, "zone '%.60s' names no known group", zone->name);
    permit_look_at(search, "zones[%u].found", i);
    if ((zone->found & (PERMIT_SEEN | PERMIT_HEARD)) == 0)
        permit_problem(search, "zone '%.60s' counts neither what is seen nor what is heard", zone->name);
    permit_look_at(search, "zones[%u].species", i);
    if (zone->n_species > 0 && zone->species_unknown == SPECIES_NOT_STATED)
        permit_problem(search, "zone '%.60s' names species and does not say what one unknown means",
                       zone->name);
}

static void check_zone_actions(struct permit_search *search, const struct permit_zone *zone, uint32_t i)
{
    bool acts = false;
    permit_look_at(search, "zones[%u].actions", i);
    for (unsigned k = 0; k < PHASE_COUNT; k++) {
        enum permit_action action = zone->action[k];
        acts = acts || action != ACTION_LOG;
        bool fits = before_sound((enum phase)k) ? action <= ACTION_DELAY : action != ACTION_DELAY;
        if ((unsigned)action > ACTION_STOP || !fits)
            permit_problem(search, "zone '%.60s': the action in phase %s cannot be '%s'", zone->name,
                           phase_text((enum phase)k), permit_action_text(action));
    }
    if (!acts)
        permit_problem(search, "zone '%.60s' asks for nothing in any phase", zone->name);
}

static void check_zone(struct permit_search *search, const struct permit *permit, uint32_t i)
{
    const struct permit_zone *zone = &permit->zones[i];
    permit_look_at(search, "zones[%u]", i);
    if (!*zone->name)
        permit_problem(search, "a zone's name is not stated");
    if (!*zone->clause)
        permit_problem(search, "zone '%.60s': its clause is not stated", zone->name);
    for (uint32_t k = 0; k < i; k++)
        if (*zone->name && strcmp(zone->name, permit->zones[k].name) == 0)
            permit_problem(search, "another zone is called '%.60s'", zone->name);
    permit_look_at(search, "zones[%u].radius_m", i);
    if (!(zone->radius_m > 0))
        permit_problem(search, "zone '%.60s': radius is %g m; allowed: more than 0", zone->name,
                       zone->radius_m);
    permit_look_at(search, "zones[%u].origin", i);
    if ((unsigned)zone->origin > ORIGIN_VESSEL)
        permit_problem(search, "zone '%.60s' has no origin", zone->name);
    else if (!fits_activity(zone->origin, permit->activity))
        permit_problem(search, "zone '%.60s' begins at the %s, which %s has not", zone->name,
                       permit_origin_text(zone->origin), permit_activity_text(permit->activity));
    check_zone_groups(search, zone, i);
    check_zone_actions(search, zone, i);
}

/* A row that names species stands beside the row of its groups, not in its place. */
static void check_clearances(struct permit_search *search, const struct permit *permit, uint32_t zone_groups)
{
    uint32_t covered = 0;
    for (uint32_t i = 0; i < permit->n_clearances && i < PERMIT_MAX_CLEARANCES; i++) {
        const struct permit_clearance *clearance = &permit->clearances[i];
        permit_look_at(search, "clearances[%u].minutes", i);
        permit_need_minutes(search, "a clearance time", clearance->minutes);
        permit_look_at(search, "clearances[%u].deeper", i);
        if (clearance->deeper_minutes > 0)
            permit_need_minutes(search, "a clearance time in deeper water", clearance->deeper_minutes);
        permit_look_at(search, "clearances[%u]", i);
        if (!*clearance->clause)
            permit_problem(search, "the clause of a clearance time is not stated");
        permit_look_at(search, "clearances[%u].species", i);
        if (clearance->n_species > 0 && clearance->species_unknown == SPECIES_NOT_STATED)
            permit_problem(search, "a clearance time names species and does not say what one unknown means");
        permit_look_at(search, "clearances[%u].groups", i);
        for (unsigned g = 0; g < GROUP_COUNT; g++) {
            bool again = (covered & clearance->groups & PERMIT_GROUP_BIT(g)) != 0;
            if (clearance->n_species == 0 && again)
                permit_problem(search, "group %s has two clearance times", group_text((enum group)g));
            if (clearance->n_species > 0 && !again && (clearance->groups & PERMIT_GROUP_BIT(g)))
                permit_problem(search,
                               "group %s has a time for some species and none before it for all others",
                               group_text((enum group)g));
        }
        covered |= clearance->n_species == 0 ? clearance->groups : 0;
    }
    permit_look_at(search, "clearances");
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        if (zone_groups & ~covered & PERMIT_GROUP_BIT(g))
            permit_problem(search,
                           "group %s is in a zone and has no clearance time: a delay for it would never end",
                           group_text((enum group)g));
}

/* Every group is in a zone, as heard or seen, or is stated as neither by 'ignore'. */
static void check_groups(struct permit_search *search, const struct permit *permit, uint32_t zone_groups)
{
    permit_look_at(search, "unknown_distance");
    for (unsigned g = 0; g < GROUP_COUNT; g++) {
        enum unknown_policy policy = permit->unknown[g];
        if (policy == UNKNOWN_NOT_STATED || (unsigned)policy > UNKNOWN_IGNORE)
            permit_problem(
                search, "group %s: what a call of unknown distance means is not stated; there is no default",
                group_text((enum group)g));
        else if (zone_groups && !(zone_groups & PERMIT_GROUP_BIT(g)) && policy != UNKNOWN_IGNORE)
            permit_problem(search,
                           "group %s is in no zone, heard or seen, and unknown distance means '%s'; allowed: "
                           "ignore, or a zone",
                           group_text((enum group)g), permit_unknown_text(policy));
    }
}

static void check_zones(struct permit_search *search, const struct permit *permit)
{
    permit_look_at(search, "zones");
    if (permit->n_zones == 0 || permit->n_zones > PERMIT_MAX_ZONES)
        permit_problem(search, "there are %u zones; allowed: 1 to %d", permit->n_zones, PERMIT_MAX_ZONES);
    permit_look_at(search, "clearances");
    if (permit->n_clearances == 0 || permit->n_clearances > PERMIT_MAX_CLEARANCES)
        permit_problem(search, "there are %u clearance times; allowed: 1 to %d", permit->n_clearances,
                       PERMIT_MAX_CLEARANCES);
    uint32_t zone_groups = 0;
    for (uint32_t i = 0; i < permit->n_zones && i < PERMIT_MAX_ZONES; i++) {
        check_zone(search, permit, i);
        zone_groups |= permit->zones[i].groups;
    }
    check_clearances(search, permit, zone_groups);
    check_groups(search, permit, zone_groups);
}

static void check_values(struct permit_search *search, const struct permit *permit)
{
    permit_look_at(search, "values");
    if (permit->n_values > PERMIT_MAX_VALUES)
        permit_problem(search, "there are %u values; allowed: at most %d", permit->n_values,
                       PERMIT_MAX_VALUES);
    for (uint32_t i = 0; i < permit->n_values && i < PERMIT_MAX_VALUES; i++) {
        const struct permit_value *value = &permit->values[i];
        permit_look_at(search, "%.63s", value->key);
        if (value->mark == MARK_MEMORY_LOW)
            permit_problem(search, "it rests on a low-confidence memory: the site has to fill it in");
        if (value->mark == MARK_TO_BE_FILLED)
            permit_problem(search, "it is left to the site, which has not stated it");
        if (value->mark == MARK_FILLED && !*value->who)
            permit_problem(search, "it was filled in, and nobody says by whom");
        if (value->mark == MARK_INVENTED && !permit->demonstration)
            permit_problem(search, "it is invented: only a demonstration permit may hold it");
        if (!*value->source)
            permit_problem(search, "its source is not stated");
    }
}

static void check_head(struct permit_search *search, const struct permit *permit)
{
    need_text(search, "id", "the permit's id", permit->id);
    need_text(search, "title", "the permit's title", permit->title);
    need_text(search, "document", "the permit's document", permit->document);
    need_text(search, "pre_watch", "the clause of the pre-watch", permit->pre_watch_clause);
    need_text(search, "unknown_distance", "the clause on unknown distance", permit->unknown_clause);
    need_text(search, "soft_start", "the clause of the soft start", permit->soft_start.clause);
    need_text(search, "break", "the clause on breaks", permit->break_clause);
    permit_look_at(search, "document_sha256");
    size_t n = strlen(permit->document_sha256);
    if (n > 0 && (n != 64 || strspn(permit->document_sha256, "0123456789abcdef") != 64))
        permit_problem(search, "it is no SHA-256: 64 characters of 0 to 9 and a to f");
}

enum status permit_check(const struct permit *permit, uint32_t n, char out_problem[PERMIT_TEXT_SIZE])
{
    struct permit_search search = {.wanted = n, .out = out_problem};
    check_head(&search, permit);
    permit_check_times(&search, permit);
    check_zones(&search, permit);
    check_values(&search, permit);
    return search.seen > n ? STATUS_OUT_OF_RANGE : STATUS_OK;
}
