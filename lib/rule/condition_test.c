/* Tests of the source, vibro piling and drilling: what they, and what follows them, need of the pre-watch and
 * the soft start. */
#include "rule/condition.h"

static bool is_steady(enum phase phase)
{
    return phase == PHASE_VIBRO || phase == PHASE_DRILLING;
}

bool conditions_need_pre_watch(const struct watch *watch, enum phase to)
{
    const struct permit *permit = watch->permit;
    if (to == PHASE_TEST && permit->test.stated)
        return permit->test.pre_watch;
    if (is_steady(to) && permit->steady.stated)
        return permit->steady.pre_watch;
    return to != PHASE_DRILLING && to != PHASE_LINE_TURN;
}

static void say(struct watch *watch, const char *code, const char *clause, const char *text)
{
    struct why why;
    why_reset(&why, clause, "%s", text);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, code, "firm", &why);
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    const struct permit_test *test = &watch->permit->test;
    const struct permit_steady *steady = &watch->permit->steady;
    if (from == PHASE_TEST && to == PHASE_FULL_POWER && test->stated && test->soft_start)
        say(watch, "soft start missing", test->clause, "full power after a test without a soft start");
    if (!is_steady(from) || is_steady(to) || !source_sounds(to) || !steady->stated)
        return;
    if (!steady->stands && !effort_complete(watch))
        say(watch, "start without a complete pre-watch", steady->clause,
            "impact piling follows vibro piling or drilling without a complete pre-watch");
    if (to == PHASE_FULL_POWER && steady->soft_start)
        say(watch, "soft start missing", steady->clause,
            "impact piling at full power follows vibro piling or drilling without a soft start");
}

const struct condition condition_test = {.enter_phase = enter_phase};
