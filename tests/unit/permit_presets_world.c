/* The presets of all other countries against their documents: the source stands beside each check. Values
 * from memory are held against what is remembered, and say so in their mark. */
#include "support/test.h"

#include "support/permits.h"
#include <math.h>

#define BIT(group) PERMIT_GROUP_BIT(GROUP_##group)

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

static bool names(const struct permit_zone *zone, const char *species)
{
    for (uint32_t i = 0; i < zone->n_species; i++)
        if (strcmp(zone->species[i], species) == 0)
            return true;
    return false;
}

/* BOEM/BSEE NTL 2016-G02. */
static void us_ntl_2016(void **state)
{
    (void)state;
    load("us-ntl-2016-g02");
    states("pre_watch.minutes", "30", MARK_SECONDARY); /* protectedspeciesobservation.co.uk */
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[0].origin == ORIGIN_ARRAY_CENTRE);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_STOP); /* whales */
    assert_int_equal(permit.zones[0].groups & (BIT(DELPHINID) | BIT(TURTLE)), 0);
    assert_int_equal(permit.zones[0].groups & BIT(SIRENIAN), BIT(SIRENIAN)); /* manatee added */
    assert_int_equal(permit.zones[1].groups & (BIT(DELPHINID) | BIT(TURTLE)), BIT(DELPHINID) | BIT(TURTLE));
    assert_int_equal(permit.zones[1].action[PHASE_READY], ACTION_DELAY);
    assert_int_equal(permit.zones[1].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_true(permit.clearances[0].minutes == 30 && !permit.clearances[0].leaving_ends);
    states("soft_start.least_minutes", "20", MARK_SECONDARY); /* BOEM 2012-015: 20 to 40 minutes */
    states("soft_start.longest_minutes", "40", MARK_SECONDARY);
    /* Silence of at most 20 min by day without a ramp-up */
    const struct permit_break *last = permit_last_break(&permit, false);
    assert_true(last->minutes == 20 && last->limit_included && last->daylight && !last->soft_start);
    assert_true(permit_last_break(&permit, true)->minutes == 1);
    assert_true(permit.mitigation_source.stated);
    assert_int_equal(permit.start.dark, DARK_START_ACOUSTIC);
    assert_true(permit.staff.least_visual == 2 && permit.staff.longest_hours == 4 &&
                permit.staff.rest_hours == 2 && permit.staff.day_hours == 12);
    assert_true(permit.confirm_countdown_s == 0); /* immediate */
    assert_true(permit.n_records == 2 && permit.records[1].within_hours == 24);
}

/* NMFS, 50 CFR 217 subpart S, with a research authorisation of the same form (Federal Register, 4 June 2021).
 */
static void us_gulf_2021(void **state)
{
    (void)state;
    load("us-nmfs-gulf-2021");
    assert_string_equal(permit.ended, "2026-04-19"); /* Federal Register: effective until 19 April 2026 */
    assert_int_equal(permit.n_zones, 5);
    for (uint32_t i = 0; i < 5; i++) /* from the edges of the source */
        assert_int_equal(permit.zones[i].origin, ORIGIN_ARRAY_EDGE);
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[2].radius_m == 1000 &&
                permit.zones[3].radius_m == 1500);
    assert_int_equal(permit.zones[0].groups & BIT(DELPHINID), 0);
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_STOP);
    assert_int_equal(permit.zones[2].action[PHASE_FULL_POWER], ACTION_PREPARE);
    assert_int_equal(permit.zones[3].groups, BIT(BEAKED_WHALE) | BIT(PORPOISE)); /* beaked whales, Kogia */
    assert_true(names(&permit.zones[4], "Rice's whale"));
    /* Small delphinids are exempt; a delphinid that is only heard stops nothing */
    assert_true(permit.zones[1].found == PERMIT_SEEN && permit.zones[1].groups == BIT(DELPHINID));
    assert_true(names(&permit.zones[1], "killer whale") && !names(&permit.zones[1], "bottlenose dolphin"));
    states("zones[1].species_unknown", "listed", MARK_FILLED); /* the observer's judgement: the site's */
    /* 15 min for small delphinids, 30 for all others, or seen leaving */
    assert_true(permit.clearances[0].minutes == 30 && permit.clearances[0].n_species == 0);
    assert_true(permit.clearances[1].minutes == 15 && permit.clearances[1].groups == BIT(DELPHINID) &&
                permit.clearances[1].n_species == 9);
    assert_true(permit.clearances[0].leaving_ends && permit.clearances[1].leaving_ends);
    assert_false(permit_pre_watch_at(&permit, 100)->acoustic);
    assert_true(permit_pre_watch_at(&permit, 101)->acoustic &&
                permit_pre_watch_at(&permit, 101)->minutes == 30);
    assert_true(permit.soft_start.least_minutes == 20 && isinf(permit.soft_start.longest_minutes));
    assert_int_equal(permit.soft_start.step, STEP_DOUBLING);
    assert_true(permit.breaks[0].minutes == 30 && !permit.breaks[0].limit_included);
    /* Watch from 30 min before sunrise to 30 min after sunset; two observers; an hour after the source */
    assert_true(permit.start.after_sunrise_minutes == -30 && permit.start.before_sunset_minutes == -30);
    assert_true(permit.staff.least_visual == 2 && permit.staff.rest_hours == 1 &&
                permit.post_watch_minutes == 60);
    assert_true(permit.outage.diagnose_minutes == 30 && permit.outage.extra_minutes == 300 &&
                permit.outage.day_minutes == 300 && permit.outage.daylight &&
                permit.outage.most_sea_state == 4 && permit.outage.quiet_minutes == 120);
    assert_true(permit.confirm_countdown_s == 0);
    assert_true(permit.records[0].within_hours == 90 * 24);
}

/* 91 FR 20784 was not read. */
static void us_gulf_2026(void **state)
{
    (void)state;
    load("us-gulf-2026");
    for (uint32_t i = 0; i < permit.n_values; i++)
        assert_int_equal(permit.values[i].mark, MARK_FILLED);
    assert_string_equal(permit.ended, "");
}

/* NMFS: offshore wind 2021 to 2024 (memory), small coastal works (50 CFR 217.214, 217.224, read), surveys. */
static void us_nmfs_works(void **state)
{
    (void)state;
    load("us-nmfs-wind");
    assert_true(permit.pre_watches[0].minutes == 60 && permit.pre_watches[0].visual &&
                permit.pre_watches[0].acoustic);
    assert_true(isinf(permit.zones[0].radius_m) && permit.zones[0].found == PERMIT_SEEN);
    assert_true(permit.zones[1].radius_m == 10000 && permit.zones[1].found == PERMIT_HEARD);
    assert_true(names(&permit.zones[0], "North Atlantic right whale"));
    states("zones[2].radius_m", "2000", MARK_FILLED); /* project data */
    assert_int_equal(permit.override.reasons, OVERRIDE_LIFE | OVERRIDE_REFUSAL | OVERRIDE_INSTABILITY);
    assert_int_equal(permit.override.leaves, ACTION_REDUCE);
    assert_true(permit.start.after_sunrise_minutes == 60 && permit.start.before_sunset_minutes == 90);
    assert_true(permit.start.closed_from == 101 && permit.start.closed_to == 430); /* 1 January to 30 April */
    assert_true(permit.soft_start.least_minutes == 20 && permit.soft_start.first_energy_percent == 20);
    assert_true(permit.staff.longest_hours == 4 && permit.staff.rest_hours == 2 &&
                permit.staff.day_hours == 12);
    assert_true(permit.clearances[0].minutes == 30 && permit.clearances[1].minutes == 15);
    assert_int_equal(permit.clearances[1].groups, BIT(PORPOISE) | BIT(PHOCID) | BIT(OTARIID));

    load("us-nmfs-coastal-works");
    states("zones[0].radius_m", "10", MARK_READ);       /* 217.214(a)(3)-(5), 218.24(b) */
    states("pre_watch.minutes", "30", MARK_READ);       /* 217.214(a)(8) */
    states("post_watch.minutes", "30", MARK_READ);      /* the same */
    states("staff.least_visual", "1", MARK_READ);       /* 217.214(a)(7): 1 to 4 */
    states("soft_start.bursts.number", "3", MARK_READ); /* 217.224(a)(4): and two more times */
    assert_true(permit.soft_start.burst_s == 15 && permit.soft_start.pause_s == 60);
    states("break.minutes", "60", MARK_READ); /* 217.224(a)(4): after more than 1 h off */
    assert_true(permit.breaks[0].limit_included);

    load("us-nmfs-hrg"); /* 500 m right whale, 100 m others; delphinids and pinnipeds exempt (memory) */
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[1].radius_m == 100);
    assert_int_equal(permit.zones[2].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_true(permit.breaks[0].minutes == 30 && !permit.breaks[0].limit_included);
}

static void nz_level(const char *id, double with_calf_m, double of_concern_m)
{
    load(id);
    assert_int_equal(permit.n_zones, 7);
    /* From memory of the Code: species of concern with calf, without, and other marine mammals within 200 m
     */
    assert_true(permit.zones[0].radius_m == with_calf_m && permit.zones[0].calf_only);
    assert_true(permit.zones[1].radius_m == of_concern_m && !permit.zones[1].calf_only);
    assert_true(permit.zones[2].radius_m == 200);
    assert_true(permit.zones[3].radius_m == with_calf_m && permit.zones[3].calf_only &&
                permit.zones[3].n_species);
    assert_true(permit.zones[4].radius_m == of_concern_m && names(&permit.zones[4], "killer whale"));
    assert_int_equal(permit.zones[4].species_unknown, SPECIES_LISTED);
    assert_false(names(&permit.zones[4], "common dolphin"));
    /* Public summary: shutdown only for species of concern, soft start included */
    assert_int_equal(permit.zones[1].action[PHASE_SOFT_START], ACTION_STOP);
    assert_int_equal(permit.zones[1].action[PHASE_FULL_POWER], ACTION_STOP);
    assert_int_equal(permit.zones[2].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_int_equal(permit.zones[2].action[PHASE_DELAY], ACTION_DELAY);
    states("pre_watch.minutes", "30", MARK_SECONDARY);
    states("clearances[0].minutes", "30", MARK_SECONDARY);
    assert_true(permit.clearances[0].leaving_ends);
    assert_int_equal(permit.clearances[1].groups, BIT(OTARIID)); /* New Zealand fur seal */
    assert_true(permit.clearances[1].minutes == 10);
    /* From memory: the sea lion is of concern, and no fur seal; an otariid that nobody names is one */
    assert_true(names(&permit.zones[6], "New Zealand sea lion") && permit.zones[6].radius_m == of_concern_m);
    assert_int_equal(permit.zones[6].species_unknown, SPECIES_OTHER);
    assert_true(permit.clearances[2].minutes == 30 && permit.clearances[2].n_species == 1);
    assert_true(permit.soft_start.least_minutes == 20 && permit.soft_start.longest_minutes == 40);
    assert_true(permit.breaks[0].minutes == 10 && !permit.breaks[0].limit_included);
    assert_int_equal(permit.unknown[GROUP_PORPOISE], UNKNOWN_INSIDE); /* ultra-high-frequency cetaceans */
    /* marinemammalmitigation.org: raw sheets 14 days, report 60 days, departures at once */
    assert_true(permit.records[0].within_hours == 336 && permit.records[1].within_hours == 1440 &&
                permit.records[2].within_hours == 0);
}

/* Department of Conservation, 2013 Code of Conduct. */
static void nz_2013(void **state)
{
    (void)state;
    nz_level("nz-2013-level-1", 1500, 1000);
    assert_true(permit.pre_watches[0].acoustic); /* nzlevel1seismicsurveys: visual and PAM */
    /* Poor sighting: night, less than 1.5 km, sea state of 4 or more (the same) */
    assert_true(permit.start.least_visibility_m == 1500 && permit.start.most_sea_state < 4);
    assert_int_equal(permit.start.dark, DARK_START_ACOUSTIC);
    /* Memory: 20 min, then 2 h by day up to Beaufort 4 after 2 quiet hours, 4 h in 24 */
    assert_true(permit.outage.diagnose_minutes == 20 && permit.outage.extra_minutes == 120 &&
                permit.outage.day_minutes == 240 && permit.outage.quiet_minutes == 120 &&
                permit.outage.daylight);
    nz_level("nz-2013-level-2", 1000, 600);
    assert_false(permit.pre_watches[0].acoustic); /* PAM optional */
    assert_false(permit.outage.stated);
}

/* DFO, Statement of Canadian Practice. */
static void canada_2007(void **state)
{
    (void)state;
    load("canada-2007");
    states("pre_watch.minutes", "30", MARK_SECONDARY); /* CSAS 2009/048, abstract */
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[0].origin == ORIGIN_ARRAY_CENTRE);
    assert_int_equal(permit.zones[0].groups & BIT(TURTLE), BIT(TURTLE)); /* definitions, page04-eng */
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_int_equal(permit.zones[1].action[PHASE_FULL_POWER], ACTION_STOP);
    assert_true(permit.zones[1].n_species > 0);
    states("zones[1].species_unknown", "listed", MARK_MEMORY_HIGH); /* assume a listed whale */
    assert_true(permit.clearances[0].minutes == 30 && permit.soft_start.least_minutes == 20);
    assert_true(permit.mitigation_source.stated && permit.mitigation_source.soft_start_after);
    assert_true(permit.confirm_countdown_s == 0);
}

/* EPBC Act Policy Statement 2.1: memory, but for the report (dcceew.gov.au, A.4). */
static void australia_2008(void **state)
{
    (void)state;
    load("australia-2008");
    assert_int_equal(permit.n_zones, 6);
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[2].radius_m == 2000 &&
                permit.zones[4].radius_m == 3000);
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_STOP);
    assert_int_equal(permit.zones[2].action[PHASE_FULL_POWER], ACTION_REDUCE);
    assert_int_equal(permit.zones[4].action[PHASE_FULL_POWER], ACTION_PREPARE);
    assert_int_equal(permit.zones[0].groups & (BIT(PORPOISE) | BIT(DELPHINID)), 0);
    assert_true(names(&permit.zones[1], "killer whale"));
    assert_int_equal(permit.unknown[GROUP_PORPOISE], UNKNOWN_IGNORE);
    assert_true(permit.soft_start.least_minutes == 30 && permit.clearances[0].minutes == 30);
    assert_true(permit.start.good_watch_minutes == 120 && permit.start.good_watch_within_hours == 24 &&
                permit.start.most_orders == 3 && permit.start.least_visibility_m == 3000);
    states("records[0].within_hours", "1440", MARK_READ);
}

/* ACCOBAMS was not read, of Brazil's guide only what the news and its contents say. */
static void accobams_and_brazil(void **state)
{
    (void)state;
    load("accobams-2019");
    states("zones[0].radius_m", "1200", MARK_FILLED); /* modelled, no fixed radius */
    states("clearances[1].minutes", "120", MARK_FILLED);
    assert_int_equal(permit.clearances[1].groups, BIT(SPERM_WHALE) | BIT(BEAKED_WHALE));
    load("brazil-2018");
    assert_int_equal(permit.zones[0].groups, PERMIT_ALL_GROUPS); /* mammals and turtles: oeco */
    states("pre_watch.acoustic", "true", MARK_READ);             /* PAM added in 2018: oeco */
    states("soft_start.least_minutes", "20", MARK_SECONDARY);    /* ramosetal2010 */
    states("zones[0].radius_m", "1000", MARK_FILLED);
}

/* Limits at 750 m: each names its set of criteria, which holds the numbers (tests/unit/criteria.c). */
static void piling_limits(void **state)
{
    (void)state;
    static const char *const pairs[][2] = {{"germany-2013", "germany-2008"},
                                           {"belgium-2018", "belgium-2018"},
                                           {"denmark-2022", "denmark-2022"},
                                           {"taiwan-2018", "taiwan-2018"}};
    for (int i = 0; i < 4; i++) {
        char path[128];
        load(pairs[i][0]);
        assert_int_equal(permit.n_criteria, 1);
        assert_string_equal(permit.criteria[0], pairs[i][1]);
        snprintf(path, sizeof path, "config/criteria/%s.cfg", pairs[i][1]);
        FILE *file = fopen(path, "r");
        assert_non_null(file);
        fclose(file);
    }
    load("germany-2013");
    assert_true(permit.deterrent.stated);                                /* JASA 147(2): 685 */
    assert_true(permit.job.stated && permit.job.longest_minutes == 180); /* memory: 180 min a monopile */
    load("denmark-2022");
    assert_true(permit.deterrent.stated); /* tethys, abstract of the guideline */
    load("netherlands");
    states("limits.criteria", "belgium-2018", MARK_FILLED); /* invented: the kavelbesluit decides */
    states("records[0].within_hours", "48", MARK_READ);     /* windopzee.nl */
    load("taiwan-2018"); /* e-info.org.tw 220805; JASA 141: 3922; owf-yunlin.tw */
    assert_true(permit.zones[0].radius_m == 750 && permit.zones[2].radius_m == 1500);
    assert_true(permit.zones[0].found == PERMIT_SEEN &&
                permit.zones[0].action[PHASE_FULL_POWER] == ACTION_STOP);
    assert_true(permit.zones[1].found == PERMIT_HEARD &&
                permit.zones[1].action[PHASE_FULL_POWER] == ACTION_PREPARE);
    assert_true(permit.start.before_sunset_minutes == 120 && permit.start.dark == DARK_START_NEVER);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(us_ntl_2016),    cmocka_unit_test(us_gulf_2021),
        cmocka_unit_test(us_gulf_2026),   cmocka_unit_test(us_nmfs_works),
        cmocka_unit_test(nz_2013),        cmocka_unit_test(canada_2007),
        cmocka_unit_test(australia_2008), cmocka_unit_test(accobams_and_brazil),
        cmocka_unit_test(piling_limits),
    };
    return cmocka_run_group_tests_name("permit presets of the world", tests, NULL, NULL);
}
