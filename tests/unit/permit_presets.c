/* The presets of the United Kingdom and Ireland against their documents: the source stands beside each check.
 * Values from memory are held against what is remembered, and say so in their mark. */
#include "support/test.h"

#include "support/permits.h"
#include <math.h>

static struct permit permit;

static void load(const char *id)
{
    memset(&permit, 0, sizeof permit);
    assert_true(test_load_permit(id, &permit));
}

static void states(const char *key, const char *text, enum value_mark mark)
{
    test_permit_states(&permit, key, text, mark);
}

static const uint32_t mammals = PERMIT_ALL_GROUPS & ~PERMIT_GROUP_BIT(GROUP_TURTLE);

/* JNCC guidelines for geophysical surveys, August 2017: from memory of high and medium confidence. */
static void uk_seismic_2017(void **state)
{
    (void)state;
    load("uk-seismic-2017");
    assert_int_equal(permit.activity, ACTIVITY_SEISMIC);
    states("pre_watch.minutes", "30", MARK_MEMORY_HIGH);
    states("pre_watch.deeper[0].minutes", "60", MARK_MEMORY_HIGH);
    assert_true(permit_pre_watch_at(&permit, 200)->minutes == 30); /* 'deeper than 200 m' */
    assert_true(permit_pre_watch_at(&permit, 201)->minutes == 60);
    assert_true(permit_pre_watch_at(&permit, NAN)->minutes == 60);
    assert_int_equal(permit.n_zones, 1);
    states("zones[0].radius_m", "500", MARK_MEMORY_HIGH);
    assert_int_equal(permit.zones[0].origin, ORIGIN_ARRAY_CENTRE);
    assert_int_equal(permit.zones[0].groups, mammals);
    /* No shutdown in the soft start or at full power; an animal in a break delays */
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_LOG);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_int_equal(permit.zones[0].action[PHASE_BREAK], ACTION_DELAY);
    assert_true(permit.clearances[0].minutes == 20 && !permit.clearances[0].leaving_ends);
    assert_true(permit.soft_start.least_minutes == 20 && permit.soft_start.longest_to_line_minutes == 40);
    assert_true(permit.breaks[0].minutes == 10 && permit.breaks[0].limit_included);
    assert_int_equal(permit.break_watch, BREAK_WATCH_COUNTS);
    /* Arrays up to 500 cubic inches: shots at most 5 min apart, up again in the last 10; how long: the site
     */
    assert_true(permit.turn.longest_interval_s == 300 && permit.turn.step_up_minutes == 10);
    states("line_turn.longest_minutes", "40", MARK_FILLED);
    assert_int_equal(permit.start.dark, DARK_START_ACOUSTIC);
    assert_int_equal(permit.unknown[GROUP_SPERM_WHALE], UNKNOWN_ASK_OBSERVER);
    assert_true(permit.test.stated && permit.test.soft_start);
}

/* JNCC, NE and CCW piling protocol, August 2010. */
static void uk_piling_2010(void **state)
{
    (void)state;
    load("uk-piling-2010");
    /* MEDIN record 015_fb195e1f: 500 m and 30 minutes, visual and acoustic; East Anglia THREE, chapter 9 */
    states("pre_watch.minutes", "30", MARK_SECONDARY);
    assert_true(permit.pre_watches[0].visual && permit.pre_watches[0].acoustic);
    assert_int_equal(permit.n_zones, 1);
    states("zones[0].radius_m", "500", MARK_SECONDARY);
    assert_int_equal(permit.zones[0].origin, ORIGIN_PILE);
    assert_int_equal(permit.zones[0].groups, mammals);
    /* From memory of the protocol from here on */
    assert_int_equal(permit.zones[0].action[PHASE_PRE_WATCH], ACTION_DELAY);
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_HOLD);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_LOG);
    states("clearances[0].minutes", "20", MARK_MEMORY_HIGH);
    assert_false(permit.clearances[0].leaving_ends);
    assert_true(permit.soft_start.least_minutes == 20 && isinf(permit.soft_start.longest_minutes));
    assert_true(permit.soft_start.stop_if_possible_else_hold);
    assert_int_equal(permit.soft_start.step, STEP_NONE); /* no numeric step rule */
    assert_true(permit.breaks[0].minutes == 10 && permit.breaks[0].limit_included);
    assert_int_equal(permit.break_watch, BREAK_WATCH_STANDS);
    states("start.dark", "never", MARK_MEMORY_MEDIUM);
    states("start.most_sea_state", "4", MARK_MEMORY_MEDIUM);
    assert_false(permit.deterrent.stated); /* optional */
    assert_int_equal(permit.unknown[GROUP_PORPOISE], UNKNOWN_ASK_OBSERVER);
    assert_true(permit.confirm_countdown_s == 30); /* the program's own, where the permit is silent */
    assert_false(permit.demonstration);
    assert_string_equal(permit.ended, "");
}

/* JNCC explosives guidelines of August 2010, read in Ossian's mitigation protocol, part 4, paragraph 1.6.2.
 */
static void uk_explosives_2010(void **state)
{
    (void)state;
    load("uk-explosives-2010");
    assert_int_equal(permit.activity, ACTIVITY_EXPLOSIVES);
    states("zones[0].radius_m", "1000", MARK_SECONDARY);
    assert_int_equal(permit.zones[0].origin, ORIGIN_CHARGE);
    states("pre_watch.minutes", "60", MARK_MEMORY_MEDIUM);
    states("clearances[0].minutes", "20", MARK_SECONDARY);
    states("start.dark", "never", MARK_SECONDARY); /* daylight and good visibility only */
    assert_true(permit.staff.least_visual == 2 && permit.staff.least_acoustic == 1);
    states("post_watch.minutes", "15", MARK_MEMORY_MEDIUM);
    assert_true(permit.deterrent.stated);
    states("deterrent.least_minutes", "30", MARK_FILLED); /* by charge size: the site's */
    assert_true(permit.soft_start.least_minutes == 0);
    assert_string_equal(permit.ended, "2025-01"); /* replaced in January 2025: jncc.gov.uk */
}

/* The texts of January 2025 were not read: nothing that could be wrong stands in the file. */
static void uk_explosives_2025(void **state)
{
    (void)state;
    load("uk-explosives-2025");
    assert_int_equal(permit.activity, ACTIVITY_EXPLOSIVES);
    states("zones[0].radius_m", "900", MARK_FILLED); /* invented, and not the 1 km of 2010 */
    for (uint32_t i = 0; i < permit.n_values; i++)   /* but that a charge has no soft start */
        assert_true(permit.values[i].mark == MARK_FILLED ||
                    strcmp(permit.values[i].key, "soft_start.least_minutes") == 0);
    assert_string_equal(permit.ended, "");
}

static void ireland(const char *id, enum permit_activity activity, enum zone_origin origin)
{
    load(id);
    assert_int_equal(permit.activity, activity);
    assert_int_equal(permit.zones[0].origin, origin);
    assert_true(permit.zones[0].radius_m == 1000);
    assert_int_equal(permit.zones[0].groups, mammals);
    /* iwdg.ie, review of the code of 2007: 30 min, 60 in more than 200 m of water; PAM by agreement only */
    states("pre_watch.minutes", "30", MARK_SECONDARY);
    states("pre_watch.deeper[0].deeper_than_m", "200", MARK_SECONDARY);
    states("pre_watch.deeper[0].minutes", "60", MARK_SECONDARY);
    assert_false(permit.pre_watches[0].acoustic);
    states("clearances[0].minutes", "30", MARK_SECONDARY);
    states("clearances[0].deeper.minutes", "60", MARK_SECONDARY);
    /* Once the ramp-up has begun no halt (thecre.com, quoting pages 26 and 27); starts by day (memory) */
    assert_int_equal(permit.zones[0].action[PHASE_READY], ACTION_DELAY);
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_LOG);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_int_equal(permit.start.dark, DARK_START_NEVER);
    assert_true(permit.n_records == 1 && permit.records[0].within_hours == 30 * 24); /* memory */
}

/* DAHG/NPWS guidance of January 2014, sections 4.3.3 to 4.3.5. */
static void ireland_2014(void **state)
{
    (void)state;
    ireland("ireland-2014-seismic", ACTIVITY_SEISMIC, ORIGIN_ARRAY_CENTRE);
    states("zones[0].radius_m", "1000", MARK_SECONDARY);      /* thecre.com, pages 26 and 27 */
    states("soft_start.least_minutes", "40", MARK_SECONDARY); /* the same: over 40 minutes */
    assert_true(permit.breaks[0].minutes == 10);
    states("line_turn.longest_minutes", "40", MARK_FILLED); /* low-confidence memory: the site's */
    ireland("ireland-2014-piling", ACTIVITY_PILING, ORIGIN_PILE);
    assert_true(permit.soft_start.least_minutes == 20 && permit.soft_start.longest_minutes == 40);
    assert_true(permit.breaks[0].minutes == 30); /* memory: piling and others */
    ireland("ireland-2014-blasting", ACTIVITY_EXPLOSIVES, ORIGIN_CHARGE);
}

/* The same sperm whale at 400 m at full power: nothing in the UK, a stop in the US Gulf; a dolphin at 50 m is
 * exempt in the Gulf, heard, and delays a UK start. */
static void presets_differ_as_documented(void **state)
{
    (void)state;
    static struct permit gulf;
    load("uk-seismic-2017");
    assert_true(test_load_permit("us-nmfs-gulf-2021", &gulf));
    enum permit_action uk = ACTION_LOG, us = ACTION_LOG, heard = ACTION_LOG;
    for (uint32_t i = 0; i < permit.n_zones; i++)
        if (permit.zones[i].radius_m >= 400 && permit.zones[i].action[PHASE_FULL_POWER] > uk)
            uk = permit.zones[i].action[PHASE_FULL_POWER];
    for (uint32_t i = 0; i < gulf.n_zones; i++) {
        const struct permit_zone *zone = &gulf.zones[i];
        enum permit_action action = zone->action[PHASE_FULL_POWER];
        if (zone->radius_m >= 400 && (zone->groups & PERMIT_GROUP_BIT(GROUP_SPERM_WHALE)) && action > us)
            us = action;
        if ((zone->found & PERMIT_HEARD) && (zone->groups & PERMIT_GROUP_BIT(GROUP_DELPHINID)) &&
            action > heard)
            heard = action;
    }
    assert_int_equal(uk, ACTION_LOG);
    assert_int_equal(us, ACTION_STOP);
    assert_int_equal(heard, ACTION_PREPARE); /* the buffer's, and no stop */
    assert_int_equal(permit.zones[0].action[PHASE_READY], ACTION_DELAY);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(uk_seismic_2017),    cmocka_unit_test(uk_piling_2010),
        cmocka_unit_test(uk_explosives_2010), cmocka_unit_test(uk_explosives_2025),
        cmocka_unit_test(ireland_2014),       cmocka_unit_test(presets_differ_as_documented),
    };
    return cmocka_run_group_tests_name("permit presets", tests, NULL, NULL);
}
