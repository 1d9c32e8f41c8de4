/* `hushwatch report --sheet` on a ledger whose contents are known: the figures on the page are those worked
 * out by hand here, the page is well-formed (read by Python's XML parser) and it says when the ledger was
 * tampered with. */
#include "support/test.h"

#include "base/time.h"
#include "ledger/ledger.h"
#include "record/entry.h"
#include "record/marks.h"
#include "record/minute.h"
#include <math.h>
#include <stdlib.h>
#include <sys/wait.h>
#include <unistd.h>

static char folder[512];

/* ---- a watch of 20 minutes, told by hand */

#define ZERO_NS (INT64_C(1772366400) * TIME_NS_PER_S) /* 2026-03-01T12:00:00Z */

struct story {
    struct ledger *ledger;
    struct minutes *minutes;
    struct text body;
    uint64_t counters[8];
    double now_s;
};

static void add_line(struct story *story, int64_t watch_ns, const char *kind, const char *body)
{
    char utc[TIME_UTC_SIZE], problem[LEDGER_PROBLEM_SIZE];
    time_format_utc(ZERO_NS + watch_ns, utc);
    struct ledger_line line = {.utc = utc, .kind = kind, .body = body};
    assert_int_equal(ledger_append(story->ledger, &line, 1, problem), STATUS_OK);
}

static void add_minute(void *context, const struct minute_body *minute)
{
    add_line(context, minute->watch_ns, "level", minute->body);
}

static void push(struct story *story, struct outcome *outcome)
{
    outcome->run = 1;
    outcome->watch_ns = time_from_s(story->now_s);
    if (outcome->kind == OUTCOME_EVENT) {
        outcome->as.event.run = 1;
        outcome->as.event.known_ns = outcome->watch_ns;
        outcome->as.event.counter = ++story->counters[outcome->as.event.kind];
    } else
        outcome->counter = ++story->counters[7];
    assert_int_equal(minutes_take(story->minutes, outcome, &(struct minute_sink){add_minute, story}),
                     STATUS_OK);
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_LEVEL)
        return;
    assert_int_equal(entry_body(outcome, ZERO_NS, &story->body), STATUS_OK);
    add_line(story, outcome->watch_ns, flow_outcome_kind_text(outcome), story->body.data);
}

static struct note *begin_note(struct story *story, struct outcome *outcome, enum note_kind kind,
                               const char *person)
{
    *outcome = (struct outcome){.kind = OUTCOME_EVENT};
    outcome->as.event.kind = EVENT_NOTE;
    struct note *note = &outcome->as.event.as.note;
    note_reset(note, kind);
    note->occurred_ns = note->known_ns = time_from_s(story->now_s);
    snprintf(note->person, sizeof note->person, "%s", person);
    return note;
}

static void sign(struct story *story, double at_s, enum note_kind kind, const char *person, const char *watch)
{
    struct outcome outcome;
    story->now_s = at_s;
    snprintf(begin_note(story, &outcome, kind, person)->watch, NOTE_NAME_SIZE, "%s", watch);
    push(story, &outcome);
}

static void enter_phase(struct story *story, double at_s, enum phase phase, const char *reason)
{
    struct outcome outcome = {.kind = OUTCOME_PHASE};
    story->now_s = at_s;
    outcome.as.phase.phase = phase;
    snprintf(outcome.as.phase.reason, FLOW_TEXT_SIZE, "%s", reason);
    snprintf(outcome.as.phase.clause, FLOW_TEXT_SIZE, "demonstration 2, stop zone");
    push(story, &outcome);
}

/* Gives the advice's counter, for its id. */
static uint64_t advise(struct story *story, double at_s, enum advice_word word, const char *station,
                       const char *reason)
{
    struct outcome outcome = {.kind = OUTCOME_ADVICE};
    story->now_s = at_s;
    outcome.as.advice.advice = word;
    outcome.as.advice.confirmed = true;
    outcome.as.advice.until_ns = word == ADVICE_STOP ? time_from_s(at_s + 60) : -1;
    snprintf(outcome.as.advice.station, NOTE_NAME_SIZE, "%s", station);
    snprintf(outcome.as.advice.reason, FLOW_TEXT_SIZE, "%s", reason);
    snprintf(outcome.as.advice.clause, FLOW_TEXT_SIZE, "demonstration 2, stop zone");
    push(story, &outcome);
    return story->counters[7];
}

static void answer(struct story *story, double at_s, uint64_t advice, const char *person, const char *word)
{
    struct outcome outcome;
    story->now_s = at_s;
    struct note *note = begin_note(story, &outcome, NOTE_ACKNOWLEDGEMENT, person);
    flow_id(1, 0, "advice", advice, note->advice);
    snprintf(note->answer, sizeof note->answer, "%s", word);
    snprintf(note->station, sizeof note->station, "crane");
    push(story, &outcome);
}

static void hear_contact(struct story *story, double at_s, enum contact_grade grade, double distance_m,
                         enum contact_state contact_state)
{
    struct outcome outcome = {.kind = OUTCOME_CONTACT};
    story->now_s = at_s;
    outcome.as.contact = (struct contact_outcome){.contact = 1,
                                                  .group = GROUP_PORPOISE,
                                                  .grade = grade,
                                                  .state = contact_state,
                                                  .n_calls = (uint32_t)(at_s / 100),
                                                  .whereabouts = {!isnan(distance_m), distance_m, 0.2},
                                                  .bearing_deg = NAN,
                                                  .mirror_deg = NAN,
                                                  .p_inside = NAN};
    push(story, &outcome);
}

static void blow(struct story *story, double at_s, double sel_db)
{
    struct outcome outcome = {.kind = OUTCOME_EVENT};
    story->now_s = at_s;
    outcome.as.event = (struct event){.kind = EVENT_IMPULSE, .stream = 1};
    outcome.as.event.as.impulse = (struct impulse){.channel = 1,
                                                   .time_ns = time_from_s(at_s),
                                                   .sel_db = sel_db,
                                                   .peak_db = sel_db + 25,
                                                   .whose = IMPULSE_OURS};
    snprintf(outcome.as.event.as.impulse.job, IMPULSE_JOB_SIZE, "pile <7> & 8");
    push(story, &outcome);
}

static void miss(struct story *story, double from_s, double to_s, enum unheard_cause cause)
{
    struct outcome outcome = {.kind = OUTCOME_EVENT};
    story->now_s = to_s;
    outcome.as.event = (struct event){.kind = EVENT_UNHEARD, .stream = 1};
    outcome.as.event.as.unheard = (struct unheard){
        .high_hz = 24000, .start_ns = time_from_s(from_s), .end_ns = time_from_s(to_s), .cause = cause};
    push(story, &outcome);
}

static void hear_second(struct story *story, double at_s)
{
    struct outcome outcome = {.kind = OUTCOME_EVENT};
    story->now_s = at_s + 1;
    outcome.as.event = (struct event){.kind = EVENT_LEVEL, .stream = 1};
    outcome.as.event.as.level = (struct level){
        .channel = 1, .start_ns = time_from_s(at_s), .seconds = 1, .spl_db = 110, .peak_db = 130};
    push(story, &outcome);
}

static void tell_permit(struct story *story)
{
    struct permit *permit = calloc(1, sizeof *permit);
    assert_non_null(permit);
    snprintf(permit->id, sizeof permit->id, "demonstration");
    snprintf(permit->title, sizeof permit->title, "Demonstration permit: never for work");
    snprintf(permit->document, sizeof permit->document, "none");
    permit->year = 2026;
    permit->demonstration = true;
    static const struct permit_value values[] = {
        {"pre_watch.minutes", "1.0", "for the test", "", MARK_INVENTED},
        {"zones[0].radius_m", "500", "page 3", "", MARK_READ},
        {"break.minutes", "10", "from memory", "", MARK_MEMORY_HIGH}};
    permit->n_values = 3;
    memcpy(permit->values, values, sizeof values);
    assert_int_equal(entry_body_permit(1, 1, permit, "id = \"demonstration\";\n", &story->body), STATUS_OK);
    add_line(story, 0, "permit", story->body.data);
    free(permit);
}

static void tell_watch(struct story *story)
{
    const struct run_mark no_outage = {0, 0};
    const struct run_facts facts = {
        .site = "north yard", .command = "watch", .version = "0.1.0", .start_from = "clock"};
    assert_int_equal(entry_body_run(1, &no_outage, ZERO_NS, &facts, &story->body), STATUS_OK);
    add_line(story, 0, "run", story->body.data);
    tell_permit(story);
    enter_phase(story, 0, PHASE_PRE_WATCH, "the source is off");
    sign(story, 5, NOTE_SIGN_ON, "Ada", "visual");
    sign(story, 10, NOTE_SIGN_ON, "Bo \xc3\x85s", "acoustic");
    for (int s = 0; s < 120; s++)
        hear_second(story, s);
    miss(story, 130, 140, UNHEARD_GAP);
    miss(story, 135, 142.5, UNHEARD_GAP);    /* 5 s of it counted already: 12.5 s in all */
    miss(story, 138, 150, UNHEARD_CLIPPING); /* with the gaps 20 s of the stream */
    hear_contact(story, 200, GRADE_LOOK, NAN, CONTACT_OPEN);
    enter_phase(story, 240, PHASE_SOFT_START, "released by Ada");
    static const double sel_db[] = {160, 171.5, 168, 165, 170};
    for (int i = 0; i < 5; i++)
        blow(story, 250 + 2 * i, sel_db[i]);
    hear_contact(story, 300, GRADE_ACT, 400, CONTACT_OPEN);
    uint64_t stop = advise(story, 301, ADVICE_STOP, "crew", "porpoise within 500 m of the pile");
    enter_phase(story, 301, PHASE_SHUTDOWN, "contact 1 inside the stop zone");
    answer(story, 312, stop, "Cy", "stopped");
    hear_contact(story, 600, GRADE_NONE, NAN, CONTACT_CLEARED);
    advise(story, 601, ADVICE_MAY_START, "crew", "one minute clear");
    struct outcome outcome = {.kind = OUTCOME_FINDING};
    snprintf(outcome.as.finding.code, NOTE_NAME_SIZE, "late-stop");
    snprintf(outcome.as.finding.detail, FLOW_TEXT_SIZE, "stopped after 11 s");
    push(story, &outcome);
    sign(story, 905, NOTE_SIGN_OFF, "Ada", "visual");
    enter_phase(story, 1200, PHASE_OFF, "the watch ends");
}

static int set_up(void **state)
{
    (void)state;
    char path[600], problem[LEDGER_PROBLEM_SIZE];
    struct story story = {0};
    snprintf(folder, sizeof folder, "%s/report-XXXXXX", test_build());
    if (!mkdtemp(folder))
        return -1;
    snprintf(path, sizeof path, "%s/watch.ledger", folder);
    assert_int_equal(ledger_open(path, LEDGER_CREATE, &story.ledger, problem), STATUS_OK);
    assert_int_equal(minutes_create(1, 4, &story.minutes), STATUS_OK);
    tell_watch(&story);
    minutes_destroy(story.minutes);
    text_destroy(&story.body);
    ledger_close(story.ledger);
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    return getenv("KEEP") ? 0 : test_shell("rm -rf '%s'", folder);
}

static int report(const char *ledger, const char *page)
{
    return test_shell("'%s/hushwatch' report '%s/%s' --sheet '%s/%s' > '%s/out' 2>&1", test_build(), folder,
                      ledger, folder, page, folder);
}

/* The text of a table's row that begins with the given cells, cells parted by '|', as Python's XML parser
 * reads it. */
static const char read_rows[] = "import sys, xml.etree.ElementTree as e\n"
                                "t = e.fromstring(open(sys.argv[1]).read().replace('<!DOCTYPE html>', ''))\n"
                                "for r in t.iter('tr'):\n"
                                "    print('|'.join(' / '.join(c.itertext()) for c in r))\n"
                                "for p in t.iter('p'):\n"
                                "    print(''.join(p.itertext()))\n"
                                "for p in t.iter('div'):\n"
                                "    print(' '.join(' '.join(p.itertext()).split()))\n";

static void assert_page_says(const char *line)
{
    if (test_shell("grep -qF -- '%s' '%s/rows'", line, folder) != 0) {
        test_shell("cat '%s/rows' >&2", folder);
        fail_msg("the page does not say: %s", line);
    }
}

static void the_figures_are_right(void **state)
{
    (void)state;
    assert_int_equal(report("watch.ledger", "sheet.html"), 0);
    assert_int_equal(test_shell("grep -q 'sheet.html: written' '%s/out'", folder), 0);
    char path[600];
    snprintf(path, sizeof path, "%s/read.py", folder);
    FILE *script = fopen(path, "w");
    assert_non_null(script);
    fputs(read_rows, script);
    fclose(script);
    assert_int_equal(test_shell("/usr/bin/python3 '%s' '%s/sheet.html' > '%s/rows'", path, folder, folder),
                     0);
    assert_page_says("north yard, 2026-03-01 12:00:00 to 2026-03-01 12:20:00 UTC");
    assert_page_says("1|watch|2026-03-01 12:00:00|2026-03-01 12:20:00|0:20:00||clock|");
    /* Ada from 5 s to 905 s; Bo from 10 s to the end, 1200 s */
    assert_page_says("Ada|visual||2026-03-01 12:00:05|2026-03-01 12:15:05|0:15:00");
    assert_page_says("Bo \xc3\x85s|acoustic||2026-03-01 12:00:10|still on at the end|0:19:50");
    /* 130 to 150 s unheard; two whole minutes of levels */
    assert_page_says("1|0:20:00|0:00:20|0:19:40|0:02:00");
    assert_page_says("gap|1|0|0|24000|2|0:00:13"); /* 12.5 s */
    assert_page_says("clipping|1|0|0|24000|1|0:00:12");
    assert_page_says(
        "2026-03-01 12:05:01|crew|stop|porpoise within 500 m of the pile|demonstration 2, stop zone|"
        "12:06:01|stopped by Cy, crane at 12:05:12, 11 s after");
    assert_page_says("2026-03-01 12:10:01|crew|may start|one minute clear|");
    /* 400 m exp(-+1.6449 * 0.2): the 5 and 95 % quantiles of a log-normal */
    assert_page_says("1|porpoise|act|2026-03-01 12:03:20|12:10:00|cleared|6|400|288 to 556|");
    /* of 160, 165, 168, 170, 171.5 the median is 168 */
    assert_page_says("pile <7> & 8|ours|1|1|5|171.5|168.0|196.5|2026-03-01 12:04:10|12:04:18|");
    assert_page_says("|late-stop|stopped after 11 s|");
    assert_page_says("demonstration|Demonstration permit: never for work|none|2026|NO: a demonstration|");
    assert_page_says("pre_watch.minutes|1.0|invented|for the test");
    assert_page_says("break.minutes|10|memory, high|from memory");
    assert_int_equal(test_shell("grep -q 'zones\\[0\\]' '%s/rows'", folder), 1); /* read: not in the list */
    assert_page_says("The ledger is good:");
    assert_page_says("Acoustic silence does not prove absence");
    assert_page_says("A qualified observer decides");
    assert_page_says("the competent authority come first");
    /* nothing is fetched from elsewhere */
    assert_int_equal(test_shell("grep -Eq 'https?:|src=|@import|<script' '%s/sheet.html'", folder), 1);
}

static void a_tampered_ledger_is_said(void **state)
{
    (void)state;
    assert_int_equal(
        test_shell(
            "cp '%s/watch.ledger' '%s/bad.ledger' && sqlite3 '%s/bad.ledger' \"UPDATE entry SET body = "
            "replace(body, '171.50', '151.50') WHERE kind = 'impulse'\"",
            folder, folder, folder),
        0);
    assert_int_equal(report("bad.ledger", "bad.html"), 1);
    assert_int_equal(test_shell("grep -q 'NOT AS IT WAS WRITTEN (1 faults)' '%s/bad.html'", folder), 0);
}

static void wrong_use_is_refused(void **state)
{
    (void)state;
    assert_int_equal(report("none.ledger", "x.html"), 2);
    assert_int_equal(report("watch.ledger", "watch.ledger"), 2);
    assert_int_equal(test_shell("grep -q 'is the ledger itself' '%s/out'", folder), 0);
    assert_int_equal(
        test_shell("'%s/hushwatch' verify '%s/watch.ledger' > '%s/out'", test_build(), folder, folder), 0);
    assert_int_equal(report("watch.ledger", "no-folder/x.html"), 3);
    assert_int_equal(
        test_shell("'%s/hushwatch' report '%s/watch.ledger' > '%s/out' 2>&1", test_build(), folder, folder),
        2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_figures_are_right),
        cmocka_unit_test(a_tampered_ledger_is_said),
        cmocka_unit_test(wrong_use_is_refused),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
