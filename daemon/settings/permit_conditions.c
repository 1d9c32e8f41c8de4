/* When a start is allowed, who keeps the watch and how long, outages, override, limits, records, decisions.
 */
#include "settings/permit_parts.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

static void read_dark(struct permit_reader *reader, struct group_reader *group, struct permit_start *start)
{
    static const char *const words[] = {"allowed", "acoustic", "never"};
    unsigned dark = DARK_START_ALLOWED;
    double orders = 0;
    value_word(reader, group, "dark", READER_REQUIRED, words, 3, &dark);
    start->dark = (enum dark_start)dark;
    value_number(reader, group, "good_watch_minutes", READER_OPTIONAL, 1, 1440, &start->good_watch_minutes);
    value_number(reader, group, "good_watch_within_hours", start->good_watch_minutes > 0, 0.1, 240,
                 &start->good_watch_within_hours);
    value_number(reader, group, "most_orders", READER_OPTIONAL, 1, 100, &orders);
    start->most_orders = (uint32_t)orders;
}

static void read_start(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_start *start = &reader->permit->start;
    struct group_reader group;
    double from = 0, to = 0;
    start->most_sea_state = INFINITY;
    start->stated = value_part(root, "start", &group, start->clause);
    if (!start->stated)
        return;
    read_dark(reader, &group, start);
    value_number(reader, &group, "after_sunrise_minutes", READER_OPTIONAL, -180, 360,
                 &start->after_sunrise_minutes);
    value_number(reader, &group, "before_sunset_minutes", READER_OPTIONAL, -180, 360,
                 &start->before_sunset_minutes);
    value_number(reader, &group, "least_visibility_m", READER_OPTIONAL, 0, 100000,
                 &start->least_visibility_m);
    value_number(reader, &group, "most_sea_state", READER_OPTIONAL, 0, 12, &start->most_sea_state);
    value_number(reader, &group, "closed_from_month_day", READER_OPTIONAL, 101, 1231, &from);
    value_number(reader, &group, "closed_to_month_day", from > 0, 101, 1231, &to);
    start->closed_from = (uint32_t)from;
    start->closed_to = (uint32_t)to;
    group_done(&group);
}

static void read_outage(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_outage *outage = &reader->permit->outage;
    struct group_reader group;
    outage->day_minutes = outage->most_sea_state = INFINITY;
    outage->stated = value_part(root, "outage", &group, outage->clause);
    if (!outage->stated)
        return;
    value_number(reader, &group, "diagnose_minutes", READER_REQUIRED, 0, 1440, &outage->diagnose_minutes);
    value_number(reader, &group, "extra_minutes", READER_REQUIRED, 0, 1440, &outage->extra_minutes);
    value_number(reader, &group, "day_minutes", READER_OPTIONAL, 0, 1440, &outage->day_minutes);
    value_flag(reader, &group, "daylight", READER_OPTIONAL, &outage->daylight);
    value_number(reader, &group, "most_sea_state", READER_OPTIONAL, 0, 12, &outage->most_sea_state);
    value_number(reader, &group, "quiet_minutes", READER_OPTIONAL, 0, 1440, &outage->quiet_minutes);
    group_done(&group);
}

static void read_override(struct permit_reader *reader, struct group_reader *root)
{
    static const char *const leaves[] = {"log", NULL, NULL, NULL, "reduce"};
    static const char *const reasons[] = {"life", "refusal", "instability"};
    struct permit_override *override = &reader->permit->override;
    struct group_reader group;
    char words[3][PERMIT_NAME_SIZE];
    unsigned action = ACTION_LOG;
    override->reasons = OVERRIDE_LIFE;
    if (!value_part(root, "override", &group, override->clause))
        return;
    unsigned n = value_texts(reader, &group, "reasons", READER_REQUIRED, words[0], sizeof words[0], 3);
    for (unsigned i = 0; i < n; i++) {
        unsigned k = 0;
        while (k < 3 && strcmp(words[i], reasons[k]) != 0)
            k++;
        if (k == 3)
            group_problem(&group, "reasons", "has no reason \"%s\"; allowed: life, refusal, instability",
                          words[i]);
        override->reasons |= k < 3 ? 1U << k : 0;
    }
    value_word(reader, &group, "leaves", READER_REQUIRED, leaves, 5, &action);
    override->leaves = (enum permit_action)action;
    group_done(&group);
}

static void read_staff(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_staff *staff = &reader->permit->staff;
    struct group_reader group;
    double visual = 1, acoustic = 1;
    staff->longest_hours = staff->day_hours = INFINITY;
    if (value_part(root, "staff", &group, staff->clause)) {
        value_number(reader, &group, "least_visual", READER_OPTIONAL, 1, 20, &visual);
        value_number(reader, &group, "least_acoustic", READER_OPTIONAL, 1, 20, &acoustic);
        value_number(reader, &group, "longest_hours", READER_OPTIONAL, 0.1, 24, &staff->longest_hours);
        value_number(reader, &group, "rest_hours", READER_OPTIONAL, 0, 24, &staff->rest_hours);
        value_number(reader, &group, "day_hours", READER_OPTIONAL, 0.1, 24, &staff->day_hours);
        group_done(&group);
    }
    staff->least_visual = (uint32_t)visual;
    staff->least_acoustic = (uint32_t)acoustic;
}

/* limits = { criteria = { value = ["germany-2008"]; mark; source } }. */
static void read_limits(struct permit_reader *reader, struct group_reader *root)
{
    static const char *const actions[] = {"log", NULL, NULL, "hold", "reduce", "stop"};
    struct permit *permit = reader->permit;
    struct group_reader group;
    unsigned action = ACTION_LOG;
    if (!group_child(root, "limits", READER_OPTIONAL, &group))
        return;
    permit->n_criteria = value_texts(reader, &group, "criteria", READER_REQUIRED, permit->criteria[0],
                                     sizeof permit->criteria[0], PERMIT_MAX_CRITERIA);
    value_word(reader, &group, "action", READER_OPTIONAL, actions, 6, &action);
    permit->limit_action = (enum permit_action)action;
    group_done(&group);
}

/* records = ( { what = { value; mark; source }; within_hours = { ... } }, ... ). */
static void read_records(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    unsigned n = group_count_to(root, "records", READER_OPTIONAL, PERMIT_MAX_RECORDS);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        struct permit_record *record = &permit->records[permit->n_records++];
        group_at(root, "records", i, &group);
        value_text(reader, &group, "what", READER_REQUIRED, record->what, sizeof record->what);
        value_number(reader, &group, "within_hours", READER_REQUIRED, 0, 24 * 366, &record->within_hours);
        group_done(&group);
    }
}

/* Who is asked, and from which probability; where a permit is silent, this program's own rules hold. */
static void read_decisions(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    struct group_reader group;
    permit->confirm_countdown_s = 30;
    permit->p_inside_prepare = 0.1;
    permit->p_inside_act = 0.5;
    if (!group_child(root, "decisions", READER_OPTIONAL, &group))
        return;
    value_number(reader, &group, "countdown_s", READER_OPTIONAL, 0, 600, &permit->confirm_countdown_s);
    value_number(reader, &group, "p_inside_prepare", READER_OPTIONAL, 0.001, 1, &permit->p_inside_prepare);
    value_number(reader, &group, "p_inside_act", READER_OPTIONAL, 0.001, 1, &permit->p_inside_act);
    group_done(&group);
}

void permit_read_conditions(struct permit_reader *reader, struct group_reader *root)
{
    read_start(reader, root);
    read_outage(reader, root);
    read_override(reader, root);
    read_staff(reader, root);
    read_limits(reader, root);
    read_records(reader, root);
    read_decisions(reader, root);
}
