/* Where an animal counts: sets of groups, zones, clearance times, unknown distance. */
#include "settings/permit_parts.h"
#include <math.h>
#include <stdio.h>

/* group_sets = ( { name = "marine mammals"; groups = { value = [...]; mark; source } }, ... ). */
void permit_read_sets(struct permit_reader *reader, struct group_reader *root)
{
    unsigned n = group_count_to(root, "group_sets", READER_OPTIONAL, PERMIT_MAX_SETS);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        struct group_set set = {0};
        group_at(root, "group_sets", i, &group);
        group_string(&group, "name", READER_REQUIRED, set.name, sizeof set.name);
        value_groups(reader, &group, "groups", READER_REQUIRED, &set.groups);
        group_done(&group);
        reader->sets[reader->n_sets++] = set;
    }
}

static void read_actions(struct permit_reader *reader, struct group_reader *zone_group,
                         struct permit_zone *zone)
{
    unsigned n = group_count(zone_group, "actions", READER_REQUIRED);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        group_at(zone_group, "actions", i, &group);
        value_action(reader, &group, zone->action);
    }
}

static void read_found(struct permit_reader *reader, struct group_reader *group, struct permit_zone *zone)
{
    static const char *const words[] = {NULL, "seen", "heard", "seen or heard"};
    unsigned found = PERMIT_SEEN | PERMIT_HEARD;
    value_word(reader, group, "found", READER_OPTIONAL, words, 4, &found);
    zone->found = found;
}

/* Zones and clearance times name them alike. */
static void read_species(struct permit_reader *reader, struct group_reader *group, uint32_t *n_species,
                         char species[PERMIT_MAX_SPECIES][NOTE_NAME_SIZE], enum species_policy *unknown)
{
    static const char *const words[] = {NULL, "listed", "other"};
    unsigned policy = SPECIES_NOT_STATED;
    *n_species = value_texts(reader, group, "species", READER_OPTIONAL, species[0], sizeof species[0],
                             PERMIT_MAX_SPECIES);
    value_word(reader, group, "species_unknown", *n_species > 0, words, 3, &policy);
    *unknown = (enum species_policy)policy;
}

static void read_zone(struct permit_reader *reader, struct group_reader *group, struct permit_zone *zone)
{
    static const char *const origins[] = {"pile", "array centre", "array edge", "charge", "vessel"};
    bool any_distance = false;
    unsigned origin = ORIGIN_PILE;
    group_string(group, "name", READER_REQUIRED, zone->name, sizeof zone->name);
    group_string(group, "clause", READER_REQUIRED, zone->clause, sizeof zone->clause);
    value_flag(reader, group, "any_distance", READER_OPTIONAL, &any_distance);
    zone->radius_m = any_distance ? INFINITY : 0;
    if (!any_distance)
        value_number(reader, group, "radius_m", READER_REQUIRED, 5, 100000, &zone->radius_m);
    value_word(reader, group, "origin", READER_REQUIRED, origins, 5, &origin);
    zone->origin = (enum zone_origin)origin;
    value_groups(reader, group, "groups", READER_REQUIRED, &zone->groups);
    read_found(reader, group, zone);
    value_flag(reader, group, "calf_only", READER_OPTIONAL, &zone->calf_only);
    value_number(reader, group, "least_number", READER_OPTIONAL, 1, 1000, &zone->least_number);
    read_species(reader, group, &zone->n_species, zone->species, &zone->species_unknown);
    read_actions(reader, group, zone);
    group_done(group);
}

void permit_read_zones(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    unsigned n = group_count_to(root, "zones", READER_REQUIRED, PERMIT_MAX_ZONES);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        group_at(root, "zones", i, &group);
        read_zone(reader, &group, &permit->zones[permit->n_zones++]);
    }
}

/* deeper = { deeper_than_m; minutes }. */
static void read_deeper(struct permit_reader *reader, struct group_reader *parent,
                        struct permit_clearance *clearance)
{
    struct group_reader group;
    if (!group_child(parent, "deeper", READER_OPTIONAL, &group))
        return;
    value_number(reader, &group, "deeper_than_m", READER_REQUIRED, 1, 12000, &clearance->deeper_than_m);
    value_number(reader, &group, "minutes", READER_REQUIRED, 0.01, 1440, &clearance->deeper_minutes);
    group_done(&group);
}

void permit_read_clearances(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    unsigned n = group_count_to(root, "clearances", READER_REQUIRED, PERMIT_MAX_CLEARANCES);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        struct permit_clearance *clearance = &permit->clearances[permit->n_clearances++];
        group_at(root, "clearances", i, &group);
        value_groups(reader, &group, "groups", READER_REQUIRED, &clearance->groups);
        read_species(reader, &group, &clearance->n_species, clearance->species, &clearance->species_unknown);
        value_number(reader, &group, "minutes", READER_REQUIRED, 0.01, 1440, &clearance->minutes);
        read_deeper(reader, &group, clearance);
        value_flag(reader, &group, "leaving_ends", READER_REQUIRED, &clearance->leaving_ends);
        group_string(&group, "clause", READER_REQUIRED, clearance->clause, sizeof clearance->clause);
        group_done(&group);
    }
}

/* { groups = [...]; policy = { value; mark; source } }. */
static void read_policy(struct permit_reader *reader, struct group_reader *group)
{
    static const char *const words[] = {NULL, "inside", "ask observer", "ignore"};
    struct permit *permit = reader->permit;
    uint32_t groups = group_names(reader, group, "groups");
    unsigned policy = UNKNOWN_NOT_STATED;
    value_word(reader, group, "policy", READER_REQUIRED, words, 4, &policy);
    for (unsigned g = 0; g < GROUP_COUNT; g++) {
        if (!(groups & PERMIT_GROUP_BIT(g)))
            continue;
        if (permit->unknown[g] != UNKNOWN_NOT_STATED)
            group_problem(group, "groups", "names %s, which has a policy already", group_text((enum group)g));
        permit->unknown[g] = (enum unknown_policy)policy;
    }
    group_done(group);
}

/* unknown_distance = { clause; policies = ( ... ) }. */
void permit_read_unknown(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    struct group_reader group, inner;
    group_child(root, "unknown_distance", READER_REQUIRED, &group);
    group_string(&group, "clause", READER_REQUIRED, permit->unknown_clause, sizeof permit->unknown_clause);
    unsigned n = group_count(&group, "policies", READER_REQUIRED);
    for (unsigned i = 0; i < n; i++) {
        group_at(&group, "policies", i, &inner);
        read_policy(reader, &inner);
    }
    group_done(&group);
}
