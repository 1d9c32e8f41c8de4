/* What must follow in a scenario: outcomes one by one, and the view. */
#include "support/scenario_inner.h"
#include <stdio.h>
#include <string.h>

/* Cuts 'key "text"' out of an expectation; true when it was there. */
static bool cut_quoted(char *text, const char *key, char *out, size_t size)
{
    char wanted[32];
    snprintf(wanted, sizeof wanted, " %s \"", key);
    char *from = strstr(text, wanted);
    char *end = from ? strchr(from + strlen(wanted), '"') : NULL;
    if (!end)
        return false;
    snprintf(out, size, "%.*s", (int)(end - from - (long)strlen(wanted)), from + strlen(wanted));
    memmove(from, end + 1, strlen(end + 1) + 1);
    return true;
}

/* Cuts ' key WORD' at the end of an expectation. */
static bool cut_word(char *text, const char *key, char *out, size_t size)
{
    char wanted[32];
    snprintf(wanted, sizeof wanted, " %s ", key);
    char *from = strstr(text, wanted);
    if (!from)
        return false;
    snprintf(out, size, "%s", from + strlen(wanted));
    *from = '\0';
    return true;
}

struct expectation {
    char head[LINE_SIZE], because[LINE_SIZE], clause[LINE_SIZE], causes[LINE_SIZE], until[LINE_SIZE];
};

static void read_expectation(const char *text, struct expectation *out)
{
    memset(out, 0, sizeof *out);
    snprintf(out->head, sizeof out->head, "%s", text);
    cut_quoted(out->head, "because", out->because, sizeof out->because);
    cut_quoted(out->head, "clause", out->clause, sizeof out->clause);
    cut_word(out->head, "causes", out->causes, sizeof out->causes);
    cut_word(out->head, "until", out->until, sizeof out->until);
    for (size_t n = strlen(out->head); n && (out->head[n - 1] == ' ' || out->head[n - 1] == ',');)
        out->head[--n] = '\0';
}

static void compare_causes(struct player *player, const char *wanted, uint32_t n,
                           const char (*causes)[FLOW_ID_SIZE])
{
    char list[LINE_SIZE], *rest = list;
    snprintf(list, sizeof list, "%s", wanted);
    for (char *kind; (kind = strtok_r(rest, ", ", &rest)) != NULL;) {
        char dotted[64];
        snprintf(dotted, sizeof dotted, ".%s.", kind);
        bool found = false;
        for (uint32_t i = 0; i < n; i++)
            found = found || strstr(causes[i], dotted);
        if (!found)
            player_complain(player, "no cause is a %s", kind);
    }
}

static void compare_texts(struct player *player, const struct expectation *wanted, const char *because,
                          const char *clause, uint32_t n, const char (*causes)[FLOW_ID_SIZE])
{
    if (*wanted->because && !strstr(because, wanted->because))
        player_complain(player, "the reason is \"%s\", not \"%s\"", because, wanted->because);
    if (*wanted->clause && !strstr(clause, wanted->clause))
        player_complain(player, "the clause is \"%s\", not \"%s\"", clause, wanted->clause);
    if (!*because)
        player_complain(player, "there is no reason");
    compare_causes(player, wanted->causes, n, causes);
}

static void compare(struct player *player, int64_t at_ns, const char *head, const struct expectation *wanted)
{
    char text[1024], want[LINE_SIZE + 64], at[32], got[LINE_SIZE];
    const struct outcome *outcome = &player->pending[0];
    player_clock_text(at_ns, at);
    snprintf(want, sizeof want, "%s => %s", at, head);
    if (player->n_pending == 0) {
        player_complain(player, "expected \"%s\", and nothing comes", want);
        return;
    }
    player_outcome_text(outcome, text, sizeof text);
    if (outcome->kind == OUTCOME_PHASE) {
        const struct phase_outcome *phase = &outcome->as.phase;
        snprintf(got, sizeof got, "phase %s", phase_text(phase->phase));
        compare_texts(player, wanted, phase->reason, phase->clause, phase->n_causes, phase->causes);
    } else if (outcome->kind == OUTCOME_ADVICE) {
        const struct advice_outcome *advice = &outcome->as.advice;
        snprintf(got, sizeof got, "%s is told: %s%s", advice->station, advice_text(advice->advice),
                 advice->confirmed ? "" : ", not yet confirmed");
        int64_t until_ns = -1;
        if (*wanted->until && !player_read_clock(wanted->until, &until_ns) &&
            strcmp(wanted->until, "unknown") != 0)
            player_complain(player, "cannot read the time '%s'", wanted->until);
        if (strcmp(got, head) == 0 && *wanted->until && until_ns != advice->until_ns)
            player_complain(player, "the earliest end is another: %s", text);
        compare_texts(player, wanted, advice->reason, advice->clause, advice->n_causes, advice->causes);
    } else {
        const struct finding_outcome *finding = &outcome->as.finding;
        snprintf(got, sizeof got, "finding %s%s%s", finding->code, player_basis_text(finding->basis),
                 strcmp(finding->grade, "firm") == 0 ? "" : ", indicative");
        compare_texts(player, wanted, finding->detail, finding->clause, finding->n_causes, finding->causes);
    }
    if (strcmp(got, head) != 0 || outcome->watch_ns != at_ns) {
        player->failed = false; /* this says more than a differing reason */
        player_complain(player, "expected \"%s\", but it is \"%s\"", want, text);
    }
    player->n_pending--;
    memmove(&player->pending[0], &player->pending[1], player->n_pending * sizeof player->pending[0]);
}

/* "phase ...", "finding ...", "crew is told: ...", "observer is told: ...", "all are told: ..." */
void player_expect(struct player *player, int64_t at_ns, const char *text)
{
    struct expectation wanted;
    char head[LINE_SIZE + 32];
    read_expectation(text, &wanted);
    const char *all = player_after(wanted.head, "all are told: ");
    if (all) {
        snprintf(head, sizeof head, "observer is told: %s", all);
        compare(player, at_ns, head, &wanted);
        snprintf(head, sizeof head, "crew is told: %s", all);
        compare(player, at_ns, head, &wanted);
    } else
        compare(player, at_ns, wanted.head, &wanted);
}

static void check_timer(struct player *player, const struct watch_view *view, const char *name,
                        const char *rest)
{
    int64_t elapsed;
    char held[LINE_SIZE] = "", text[LINE_SIZE];
    snprintf(text, sizeof text, "%s", rest);
    cut_quoted(text, "held by", held, sizeof held);
    if (!player_read_clock(text, &elapsed))
        player_complain(player, "cannot read the time '%s'", text);
    for (uint32_t i = 0; i < view->n_timers; i++) {
        const struct watch_timer *timer = &view->timers[i];
        if (strcmp(timer->name, name) != 0)
            continue;
        char at[32];
        player_clock_text(timer->elapsed_ns, at);
        if (timer->elapsed_ns != elapsed)
            player_complain(player, "timer %s stands at %s", name, at);
        if (timer->running != (*held == '\0') || !strstr(timer->held_by, held))
            player_complain(player, "timer %s is held by \"%s\"", name, timer->held_by);
        return;
    }
    player_complain(player, "there is no timer %s", name);
}

/* "timer NAME stands at CLOCK [held by "..."]", "contact N is GRADE, STATE", "release possible",
 * "crew is still told: ...", "N contacts", "N blows of ours" */
void player_check(struct player *player, const char *text)
{
    static struct watch_view view;
    char name[LINE_SIZE];
    const char *timer = player_after(text, "timer "), *stands = timer ? strstr(timer, " stands at ") : NULL;
    const char *told = player_after(text, "crew is still told: ");
    unsigned n;
    int used = 0;
    watch_get_view(player->watch, &view);
    if (timer && stands) {
        snprintf(name, sizeof name, "%.*s", (int)(stands - timer), timer);
        check_timer(player, &view, name, stands + 11);
    } else if (told) {
        for (uint32_t i = 0; i < view.n_advice; i++)
            if (view.advice[i].in_force && strcmp(view.advice[i].advice.station, "crew") == 0 &&
                strcmp(advice_text(view.advice[i].advice.advice), told) != 0)
                player_complain(player, "the crew is told: %s", advice_text(view.advice[i].advice.advice));
    } else if (sscanf(text, "contact %u is %n", &n, &used) == 1 && used) {
        bool found = false;
        for (uint32_t i = 0; i < view.n_contacts; i++) {
            const struct contact_outcome *contact = &view.contacts[i].contact;
            if (contact->contact != n)
                continue;
            snprintf(name, sizeof name, "%s, %s",
                     *grade_text(contact->grade) ? grade_text(contact->grade) : "none",
                     contact_state_text(contact->state));
            found = true;
            if (strcmp(name, text + used) != 0)
                player_complain(player, "contact %u is %s", n, name);
        }
        if (!found)
            player_complain(player, "there is no contact %u", n);
    } else if (sscanf(text, "%u contacts%n", &n, &used) == 1 && used) {
        if (view.n_contacts != n)
            player_complain(player, "there are %u contacts", view.n_contacts);
    } else if (sscanf(text, "%u blows of ours%n", &n, &used) == 1 && used) {
        if (view.n_impulses != n)
            player_complain(player, "there are %u blows of ours", view.n_impulses);
    } else if (strcmp(text, "release possible") == 0 || strcmp(text, "release not possible") == 0) {
        if (view.release_possible != (strcmp(text, "release possible") == 0))
            player_complain(player, "it is the other way round");
    } else
        player_complain(player, "cannot read the check '%s'", text);
}
