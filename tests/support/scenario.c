/* The scenario player: reads lines, lets time pass, keeps what nobody has expected yet. */
#include "support/scenario.h"

#include "base/time.h"
#include "support/scenario_inner.h"
#include <ctype.h>
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void player_complain(struct player *player, const char *format, ...)
{
    if (player->failed)
        return;
    player->failed = true;
    int used = snprintf(player->problem, player->problem_size, "%s:%u: ", player->path, player->line);
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(player->problem + used, player->problem_size - (size_t)used, format, arguments);
    va_end(arguments);
}

void player_clock_text(int64_t ns, char out[32])
{
    int64_t ms = ns / 1000000;
    int used =
        snprintf(out, 32, "%d:%02d:%02d", (int)(ms / 3600000), (int)(ms / 60000 % 60), (int)(ms / 1000 % 60));
    if (ms % 1000)
        snprintf(out + used, 32 - (size_t)used, ".%03d", (int)(ms % 1000));
    if (ns % 1000000)
        strcat(out, "+");
}

/* "1:02:03" or "1:02:03.5"; out of it comes where the rest begins, NULL when it is none. "+" after it is the
 * next microsecond. */
const char *player_read_clock(const char *text, int64_t *out_ns)
{
    int hours, minutes, used = 0;
    double seconds;
    if (sscanf(text, "%d:%2d:%lf%n", &hours, &minutes, &seconds, &used) != 3 || used == 0)
        return NULL;
    *out_ns = (int64_t)(hours * 3600 + minutes * 60) * TIME_NS_PER_S + time_from_s(seconds);
    if (text[used] == '+') {
        *out_ns += TIME_NS_PER_US;
        used++;
    }
    return text + used;
}

const char *player_basis_text(enum finding_basis basis)
{
    return basis == BASIS_SOUND ? ", by sound" : basis == BASIS_BOTH ? ", by both" : "";
}

/* An outcome in the words of the file. */
void player_outcome_text(const struct outcome *outcome, char *out, size_t size)
{
    char at[32], until[32] = "";
    player_clock_text(outcome->watch_ns, at);
    if (outcome->kind == OUTCOME_PHASE)
        snprintf(out, size, "%s => phase %s because \"%s\" clause \"%s\"", at,
                 phase_text(outcome->as.phase.phase), outcome->as.phase.reason, outcome->as.phase.clause);
    else if (outcome->kind == OUTCOME_ADVICE) {
        if (outcome->as.advice.until_ns >= 0)
            player_clock_text(outcome->as.advice.until_ns, until);
        snprintf(out, size, "%s => %s is told: %s%s because \"%s\" clause \"%s\" until %s", at,
                 outcome->as.advice.station, advice_text(outcome->as.advice.advice),
                 outcome->as.advice.confirmed ? "" : ", not yet confirmed", outcome->as.advice.reason,
                 outcome->as.advice.clause, *until ? until : "unknown");
    } else if (outcome->kind == OUTCOME_FINDING)
        snprintf(out, size, "%s => finding %s%s%s because \"%s\"", at, outcome->as.finding.code,
                 player_basis_text(outcome->as.finding.basis),
                 strcmp(outcome->as.finding.grade, "firm") == 0 ? "" : ", indicative",
                 outcome->as.finding.detail);
    else
        snprintf(out, size, "%s (%s)", at, flow_outcome_kind_text(outcome));
}

/* The rest of text after a prefix, NULL where it has another beginning. */
const char *player_after(const char *text, const char *prefix)
{
    size_t n = strlen(prefix);
    return text && strncmp(text, prefix, n) == 0 ? text + n : NULL;
}

static void take(void *context, const struct outcome *outcome)
{
    struct player *player = context;
    player->n_outcomes++;
    again_take(player->again, outcome);
    if (outcome->kind == OUTCOME_EVENT)
        return;
    if (outcome->kind == OUTCOME_CONTACT || outcome->kind == OUTCOME_CORRECTION)
        return;
    if (player->writes_all) {
        char text[1024];
        player_outcome_text(outcome, text, sizeof text);
        printf("%s\n", text);
        return;
    }
    if (player->n_pending < MAX_PENDING)
        player->pending[player->n_pending++] = *outcome;
    else
        player_complain(player, "more than %d outcomes that nobody expects", MAX_PENDING);
}

static void play_given(struct player *player, const char *text)
{
    double number;
    if (sscanf(text, "contact gap %lf s", &number) == 1)
        player->setup.contact_gap_s = number;
    else if (sscanf(text, "silence %lf s", &number) == 1)
        player->setup.silence_s = number;
    else if (sscanf(text, "%lf listening channels", &number) == 1)
        player->setup.listening[0] = (UINT32_C(1) << (unsigned)number) - 1;
    else if (sscanf(text, "doubt of distances %lf", &number) == 1)
        player->setup.sighting_log_spread = number;
    else if (sscanf(text, "depth %lf m", &number) == 1)
        player->setup.depth_m = number;
    else if (sscanf(text, "array of %lf m", &number) == 1)
        permit_set_edge(&player->permit, number / 2);
    else if (sscanf(text, "position %lf %lf", &player->setup.ranges.latitude_deg,
                    &player->setup.ranges.longitude_deg) == 2)
        player->setup.ranges.has_source = true;
    else if (player_after(text, "time ") && time_parse_utc(text + 5, &player->zero_unix_ns) == STATUS_OK)
        player->has_clock = true;
    else
        player_complain(player, "cannot read what is given: '%s'", text);
}

static void create(struct player *player)
{
    if (player->watch)
        return;
    if (watch_create(&player->setup, &player->watch) != STATUS_OK)
        player_complain(player, "the watch cannot be made");
    else if (player->has_clock)
        watch_set_clock(player->watch, player->zero_unix_ns);
}

static void nothing_is_left(struct player *player)
{
    char text[1024];
    if (player->n_pending) {
        player_outcome_text(&player->pending[0], text, sizeof text);
        player_complain(player, "nobody expects \"%s\"", text);
    }
}

/* One line of the timetable. Returns whether it is the end. */
static bool play_line(struct player *player, const char *line)
{
    int64_t at_ns;
    const char *rest = player_read_clock(line, &at_ns);
    create(player);
    if (!rest) {
        player_complain(player, "cannot read the time in '%s'", line);
        return true;
    }
    rest += strspn(rest, " ");
    if (at_ns < player->now_ns) {
        player_complain(player, "is earlier than the line before");
        return true;
    }
    const char *expected = player_after(rest, "=> ");
    bool restart = player_after(rest, "the program starts again") != NULL;
    if (!restart && at_ns > player->now_ns)
        player_pass_to(player, at_ns);
    if (player->writes_all && !expected)
        printf("%s\n", line);
    if (expected && player->writes_all)
        return false;
    if (expected) {
        player_expect(player, at_ns, expected);
        return player->failed;
    }
    nothing_is_left(player); /* what an event leads to stands directly below it */
    if (player->failed || strcmp(rest, "end") == 0)
        return true;
    if (restart)
        player_restart(player, rest, at_ns);
    else if (player_after(rest, "check "))
        player_check(player, rest + 6);
    else
        player_event(player, rest);
    if (player->writes_all && player->failed)
        printf("# %s\n", player->problem);
    player->failed = player->failed && !player->writes_all;
    return player->failed;
}

static bool next_line(FILE *file, char line[LINE_SIZE], unsigned *number)
{
    while (fgets(line, LINE_SIZE, file)) {
        (*number)++;
        size_t n = strlen(line);
        while (n && isspace((unsigned char)line[n - 1]))
            line[--n] = '\0';
        size_t blank = strspn(line, " ");
        memmove(line, line + blank, n - blank + 1);
        if (*line && *line != '#')
            return true;
    }
    return false;
}

bool scenario_head(const char *path, char *title, size_t title_size, char *permit, size_t permit_size)
{
    FILE *file = fopen(path, "r");
    char line[LINE_SIZE];
    unsigned number = 0;
    title[0] = permit[0] = '\0';
    while (file && next_line(file, line, &number) && !(*title && *permit)) {
        if (player_after(line, "title "))
            snprintf(title, title_size, "%s", line + 6);
        if (player_after(line, "permit "))
            snprintf(permit, permit_size, "%s", line + 7);
    }
    if (file)
        fclose(file);
    return *title && *permit;
}

bool scenario_play(const char *path, const struct permit *permit, bool writes_all, unsigned *out_outcomes,
                   char *problem, size_t problem_size)
{
    struct player *player = calloc(1, sizeof *player);
    FILE *file = fopen(path, "r");
    char line[LINE_SIZE];
    bool ended = false;
    if (!player || !file)
        abort();
    player->path = path;
    player->writes_all = writes_all;
    player->problem = problem;
    player->problem_size = problem_size;
    player->run = 1;
    player->sink = (struct outcome_sink){take, player};
    player->again = again_create();
    player->permit = *permit;
    player->sel_db = NAN;
    player->setup = (struct watch_setup){.permit = &player->permit,
                                         .contact_gap_s = 300,
                                         .look_evidence = 4,
                                         .act_evidence = 8,
                                         .evidence_decay_s = 300,
                                         .sighting_log_spread = 0.2,
                                         .silence_s = 60};
    while (!ended && next_line(file, line, &player->line)) {
        if (player_after(line, "title ") || player_after(line, "permit ") || player_after(line, "about "))
            continue;
        if (player_after(line, "given "))
            play_given(player, line + 6);
        else
            ended = play_line(player, line);
        ended = ended || player->failed;
    }
    if (!ended)
        player_complain(player, "has no end");
    char other[1500];
    if (!player->failed && player->watch &&
        !again_same(player->again, &player->setup, player->has_clock, player->zero_unix_ns, other,
                    sizeof other))
        player_complain(player, "%s", other);
    *out_outcomes += player->n_outcomes;
    bool good = !player->failed;
    watch_destroy(player->watch);
    again_destroy(player->again);
    fclose(file);
    free(player);
    return good;
}
