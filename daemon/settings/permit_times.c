/* What comes before the first impulse and between impulses: pre-watch, deterrent, quieting, soft start,
 * breaks, line turns, tests, vibro and drilling. */
#include "settings/permit_parts.h"
#include <math.h>
#include <stdio.h>

#define LONGEST_MINUTES 1440.0
#define LONGEST_SOFT_START_MINUTES 240.0 /* more is a time in seconds */

static void read_pre_watch_row(struct permit_reader *reader, struct group_reader *group, bool is_row)
{
    struct permit *permit = reader->permit;
    struct permit_pre_watch *row = &permit->pre_watches[permit->n_pre_watches++];
    if (is_row)
        value_number(reader, group, "deeper_than_m", READER_REQUIRED, 0, 12000, &row->deeper_than_m);
    value_number(reader, group, "minutes", READER_REQUIRED, 0.01, LONGEST_MINUTES, &row->minutes);
    value_flag(reader, group, "visual", READER_REQUIRED, &row->visual);
    value_flag(reader, group, "acoustic", READER_REQUIRED, &row->acoustic);
}

/* pre_watch = { clause; minutes; visual; acoustic; deeper = ( { deeper_than_m; minutes; visual; acoustic } );
 * longest_hole_minutes }. */
static void read_pre_watch(struct permit_reader *reader, struct group_reader *root)
{
    struct permit *permit = reader->permit;
    struct group_reader group, row;
    group_child(root, "pre_watch", READER_REQUIRED, &group);
    read_pre_watch_row(reader, &group, false);
    unsigned n = group_count_to(&group, "deeper", READER_OPTIONAL, PERMIT_MAX_PRE_WATCHES - 1);
    for (unsigned i = 0; i < n; i++) {
        group_at(&group, "deeper", i, &row);
        read_pre_watch_row(reader, &row, true);
        group_done(&row);
    }
    value_number(reader, &group, "longest_hole_minutes", READER_OPTIONAL, 0.01, LONGEST_MINUTES,
                 &permit->pre_watch_hole_minutes);
    group_string(&group, "clause", READER_REQUIRED, permit->pre_watch_clause,
                 sizeof permit->pre_watch_clause);
    group_done(&group);
}

static void read_step(struct permit_reader *reader, struct group_reader *group,
                      struct permit_soft_start *soft)
{
    static const char *const words[] = {"none", "doubling", "level"};
    unsigned step = STEP_NONE;
    double stages = 0;
    value_word(reader, group, "step", READER_OPTIONAL, words, 3, &step);
    soft->step = (enum step_rule)step;
    value_number(reader, group, "largest_step_db", step == STEP_LEVEL, 0.1, 60, &soft->largest_step_db);
    soft->first_energy_percent = 100;
    value_number(reader, group, "first_energy_percent", READER_OPTIONAL, 1, 100, &soft->first_energy_percent);
    value_number(reader, group, "least_stages", READER_OPTIONAL, 1, 100, &stages);
    soft->least_stages = (uint32_t)stages;
}

/* bursts = { number; burst_s; pause_s }: instead of a gradual rise. */
static void read_bursts(struct permit_reader *reader, struct group_reader *parent,
                        struct permit_soft_start *soft)
{
    struct group_reader group;
    double number = 0;
    if (!group_child(parent, "bursts", READER_OPTIONAL, &group))
        return;
    value_number(reader, &group, "number", READER_REQUIRED, 1, 20, &number);
    value_number(reader, &group, "burst_s", READER_REQUIRED, 1, 600, &soft->burst_s);
    value_number(reader, &group, "pause_s", READER_REQUIRED, 1, 600, &soft->pause_s);
    soft->bursts = (uint32_t)number;
    group_done(&group);
}

static void read_soft_start(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_soft_start *soft = &reader->permit->soft_start;
    struct group_reader group;
    group_child(root, "soft_start", READER_REQUIRED, &group);
    value_number(reader, &group, "least_minutes", READER_REQUIRED, 0, LONGEST_SOFT_START_MINUTES,
                 &soft->least_minutes);
    soft->longest_minutes = soft->longest_to_line_minutes = INFINITY;
    value_number(reader, &group, "longest_minutes", READER_OPTIONAL, 0.01, LONGEST_MINUTES,
                 &soft->longest_minutes);
    value_number(reader, &group, "longest_to_line_minutes", READER_OPTIONAL, 0.01, LONGEST_MINUTES,
                 &soft->longest_to_line_minutes);
    read_step(reader, &group, soft);
    read_bursts(reader, &group, soft);
    value_flag(reader, &group, "stop_if_possible_else_hold", READER_OPTIONAL,
               &soft->stop_if_possible_else_hold);
    value_flag(reader, &group, "equal_stages", READER_OPTIONAL, &soft->equal_stages);
    value_flag(reader, &group, "smallest_charge_first", READER_OPTIONAL, &soft->smallest_charge_first);
    group_string(&group, "clause", READER_REQUIRED, soft->clause, sizeof soft->clause);
    group_done(&group);
}

static void read_break_row(struct permit_reader *reader, struct group_reader *group)
{
    struct permit *permit = reader->permit;
    struct permit_break *row = &permit->breaks[permit->n_breaks++];
    value_number(reader, group, "minutes", READER_REQUIRED, 0.01, LONGEST_MINUTES, &row->minutes);
    value_flag(reader, group, "limit_resumes", READER_REQUIRED, &row->limit_included);
    value_flag(reader, group, "soft_start", READER_OPTIONAL, &row->soft_start);
    value_flag(reader, group, "daylight", READER_OPTIONAL, &row->daylight);
}

/* break = { clause; minutes; limit_resumes; [soft_start; daylight;] longer = ( the same, ... ); watch_kept }.
 */
static void read_break(struct permit_reader *reader, struct group_reader *root)
{
    static const char *const words[] = {"nothing", "counts", "stands"};
    struct permit *permit = reader->permit;
    struct group_reader group, row;
    unsigned worth = BREAK_WATCH_NOTHING;
    group_child(root, "break", READER_REQUIRED, &group);
    read_break_row(reader, &group);
    unsigned n = group_count_to(&group, "longer", READER_OPTIONAL, PERMIT_MAX_BREAKS - 1);
    for (unsigned i = 0; i < n; i++) {
        group_at(&group, "longer", i, &row);
        read_break_row(reader, &row);
        group_done(&row);
    }
    value_word(reader, &group, "watch_kept", READER_REQUIRED, words, 3, &worth);
    permit->break_watch = (enum break_watch)worth;
    group_string(&group, "clause", READER_REQUIRED, permit->break_clause, sizeof permit->break_clause);
    group_done(&group);
}

static void read_deterrent(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_deterrent *deterrent = &reader->permit->deterrent;
    struct group_reader group;
    deterrent->longest_minutes = deterrent->gap_minutes = INFINITY;
    deterrent->stated = value_part(root, "deterrent", &group, deterrent->clause);
    if (!deterrent->stated)
        return;
    value_flag(reader, &group, "required", READER_OPTIONAL, &deterrent->stated);
    value_number(reader, &group, "least_minutes", READER_REQUIRED, 0, LONGEST_MINUTES,
                 &deterrent->least_minutes);
    value_number(reader, &group, "longest_minutes", READER_OPTIONAL, 0.01, LONGEST_MINUTES,
                 &deterrent->longest_minutes);
    value_number(reader, &group, "gap_minutes", READER_OPTIONAL, 0, LONGEST_MINUTES, &deterrent->gap_minutes);
    value_number(reader, &group, "again_minutes", READER_OPTIONAL, 0, LONGEST_MINUTES,
                 &deterrent->again_minutes);
    group_done(&group);
}

static void read_quieting(struct permit_reader *reader, struct group_reader *root)
{
    struct group_reader group;
    struct permit_quieting *quieting = &reader->permit->quieting;
    if (!value_part(root, "quieting", &group, quieting->clause))
        return;
    value_flag(reader, &group, "required", READER_REQUIRED, &quieting->stated);
    group_done(&group);
}

static void read_turn(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_turn *turn = &reader->permit->turn;
    struct group_reader group;
    turn->longest_interval_s = INFINITY;
    turn->stated = value_part(root, "line_turn", &group, turn->clause);
    if (!turn->stated)
        return;
    value_number(reader, &group, "longest_minutes", READER_REQUIRED, 0, LONGEST_MINUTES,
                 &turn->longest_minutes);
    value_flag(reader, &group, "reduced", READER_REQUIRED, &turn->reduced);
    value_number(reader, &group, "longest_interval_s", READER_OPTIONAL, 1, 3600, &turn->longest_interval_s);
    value_number(reader, &group, "step_up_minutes", READER_OPTIONAL, 0, LONGEST_MINUTES,
                 &turn->step_up_minutes);
    group_done(&group);
}

static void read_mitigation_source(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_mitigation_source *small = &reader->permit->mitigation_source;
    struct group_reader group;
    small->longest_minutes = small->longest_interval_s = INFINITY;
    small->stated = value_part(root, "mitigation_source", &group, small->clause);
    if (!small->stated)
        return;
    value_number(reader, &group, "longest_minutes", READER_OPTIONAL, 0.01, LONGEST_MINUTES,
                 &small->longest_minutes);
    value_number(reader, &group, "longest_interval_s", READER_OPTIONAL, 1, 3600, &small->longest_interval_s);
    value_flag(reader, &group, "soft_start_after", READER_REQUIRED, &small->soft_start_after);
    group_done(&group);
}

static void read_test(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_test *test = &reader->permit->test;
    struct group_reader group;
    test->stated = value_part(root, "test", &group, test->clause);
    if (!test->stated)
        return;
    value_flag(reader, &group, "pre_watch", READER_REQUIRED, &test->pre_watch);
    value_flag(reader, &group, "soft_start", READER_REQUIRED, &test->soft_start);
    group_done(&group);
}

static void read_steady(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_steady *steady = &reader->permit->steady;
    struct group_reader group;
    steady->stated = value_part(root, "vibro_and_drilling", &group, steady->clause);
    if (!steady->stated)
        return;
    value_flag(reader, &group, "pre_watch", READER_REQUIRED, &steady->pre_watch);
    value_flag(reader, &group, "stands_for_pre_watch", READER_REQUIRED, &steady->stands);
    value_flag(reader, &group, "soft_start_after", READER_REQUIRED, &steady->soft_start);
    group_done(&group);
}

static void read_job(struct permit_reader *reader, struct group_reader *root)
{
    struct permit_job *job = &reader->permit->job;
    struct group_reader group;
    job->stated = value_part(root, "job", &group, job->clause);
    if (!job->stated)
        return;
    value_number(reader, &group, "longest_minutes", READER_REQUIRED, 1, LONGEST_MINUTES,
                 &job->longest_minutes);
    group_done(&group);
}

static void read_post_watch(struct permit_reader *reader, struct group_reader *root)
{
    struct group_reader group;
    if (!value_part(root, "post_watch", &group, reader->permit->post_watch_clause))
        return;
    value_number(reader, &group, "minutes", READER_REQUIRED, 0.01, LONGEST_MINUTES,
                 &reader->permit->post_watch_minutes);
    group_done(&group);
}

void permit_read_times(struct permit_reader *reader, struct group_reader *root)
{
    read_pre_watch(reader, root);
    read_deterrent(reader, root);
    read_quieting(reader, root);
    read_soft_start(reader, root);
    read_break(reader, root);
    read_turn(reader, root);
    read_mitigation_source(reader, root);
    read_test(reader, root);
    read_steady(reader, root);
    read_job(reader, root);
    read_post_watch(reader, root);
}
