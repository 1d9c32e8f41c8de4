/* What the work and the sea do in a scenario: impulses, unheard time, source, jobs, measures, restarts. */
#include "base/time.h"
#include "support/scenario_inner.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void push_impulse(struct player *player, int64_t at_ns)
{
    struct event event = {.kind = EVENT_IMPULSE, .stream = 1};
    event.as.impulse.channel = 1;
    event.as.impulse.time_ns = at_ns;
    event.as.impulse.peak_db = NAN;
    event.as.impulse.sel_db = player->sel_db + player->sel_step_db * player->n_blows++;
    player_push(player, &event, at_ns);
}

/* The blows that fall by then. */
static void push_blows(struct player *player, int64_t to_ns)
{
    while (player->impulse_step_ns && player->next_impulse_ns <= to_ns) {
        if (player->next_impulse_ns >= player->impulse_until_ns) {
            player->impulse_step_ns = 0;
            break;
        }
        push_impulse(player, player->next_impulse_ns);
        player->next_impulse_ns += player->impulse_step_ns;
    }
}

void player_pass_to(struct player *player, int64_t to_ns)
{
    push_blows(player, to_ns);
    if (watch_advance(player->watch, to_ns, &player->sink) != STATUS_OK)
        player_complain(player, "time runs backwards");
    player->now_ns = to_ns;
}

/* the last S s [up to A s ago] were a gap | too quiet | own source | clipped [on channel C] */
static bool play_unheard(struct player *player, const char *text)
{
    struct event event = {.kind = EVENT_UNHEARD, .stream = 1};
    double seconds, ago = 0;
    unsigned channel = 0;
    int used = 0;
    if (sscanf(text, "the last %lf s were %n", &seconds, &used) != 1 || !used) {
        used = 0;
        if (sscanf(text, "the last %lf s up to %lf s ago were %n", &seconds, &ago, &used) != 2 || !used)
            return false;
    }
    char cause[LINE_SIZE];
    snprintf(cause, sizeof cause, "%s", text + used);
    char *on = strstr(cause, " on channel ");
    if (on) {
        channel = (unsigned)strtoul(on + 12, NULL, 10);
        *on = '\0';
    }
    static const char *const words[] = {"a gap", "clipped", "own source", "dead", "too quiet"};
    unsigned i = 0;
    while (i < 5 && strcmp(cause, words[i]) != 0)
        i++;
    if (i == 5)
        player_complain(player, "cannot read the cause '%s'", cause);
    event.as.unheard = (struct unheard){.channel = channel,
                                        .high_hz = 48000,
                                        .end_ns = player->now_ns - time_from_s(ago),
                                        .start_ns = player->now_ns - time_from_s(ago + seconds),
                                        .cause = (enum unheard_cause)(i % 5)};
    player_push(player, &event, player->now_ns);
    return true;
}

/* "impulse", "impulses every S s until CLOCK [at L dB [rising by D dB each]]" */
static bool play_impulses(struct player *player, const char *text)
{
    double step;
    int used = 0;
    if (strcmp(text, "impulse") == 0) {
        player->sel_db = NAN;
        push_impulse(player, player->now_ns);
        return true;
    }
    if (sscanf(text, "impulses every %lf s until %n", &step, &used) != 1 || !used)
        return false;
    const char *rest = player_read_clock(text + used, &player->impulse_until_ns);
    player->sel_db = NAN;
    player->sel_step_db = 0;
    player->n_blows = 0;
    if (!rest ||
        (*rest && sscanf(rest, " at %lf dB rising by %lf dB", &player->sel_db, &player->sel_step_db) < 1))
        player_complain(player, "cannot read '%s' of the impulses", text + used);
    player->impulse_step_ns = time_from_s(step);
    player->next_impulse_ns = player->now_ns;
    push_blows(player, player->now_ns);
    return true;
}

/* job NAME opens | begins | ends | closes */
static bool play_job(struct player *player, const char *text)
{
    static const char *const words[][2] = {
        {"opens", "open"}, {"begins", "begin"}, {"ends", "end"}, {"closes", "close"}};
    struct note note;
    char job[32], word[32], line[LINE_SIZE];
    note_reset(&note, NOTE_JOB);
    if (sscanf(text, "job %31s %31s", job, word) != 2)
        return false;
    player_split_fields(player, &note, text, line, sizeof line);
    for (size_t i = 0; i < sizeof words / sizeof words[0]; i++)
        if (strcmp(word, words[i][0]) == 0) {
            player_set(player, &note, "job", job);
            player_set(player, &note, "answer", words[i][1]);
            player_push_note(player, &note);
            return true;
        }
    return false;
}

/* the deterrent is on | off; the quieting measure is on | off; weather (...); the source is moved (...) */
static bool play_measure(struct player *player, const char *text)
{
    static const struct {
        const char *line, *answer;
        enum note_kind kind;
    } lines[] = {{"the deterrent is on", "on", NOTE_DETERRENT},
                 {"the deterrent is off", "off", NOTE_DETERRENT},
                 {"the quieting measure is on", "on", NOTE_QUIETING},
                 {"the quieting measure is off", "off", NOTE_QUIETING},
                 {"weather", "", NOTE_WEATHER},
                 {"the source is moved", "", NOTE_POSITION}};
    for (size_t i = 0; i < sizeof lines / sizeof lines[0]; i++) {
        struct note note;
        char line[LINE_SIZE];
        const char *rest = player_after(text, lines[i].line);
        if (!rest || (*rest && *rest != ' '))
            continue;
        note_reset(&note, lines[i].kind);
        player_split_fields(player, &note, text, line, sizeof line);
        if (*lines[i].answer)
            player_set(player, &note, "answer", lines[i].answer);
        player_push_note(player, &note);
        return true;
    }
    return false;
}

/* the crew says: STATE */
static bool play_source(struct player *player, const char *text)
{
    struct note note;
    char line[LINE_SIZE];
    const char *state = player_after(text, "the crew says: ");
    if (!state)
        return false;
    note_reset(&note, NOTE_SOURCE);
    player_split_fields(player, &note, state, line, sizeof line);
    player_set(player, &note, "source_state", line);
    player_push_note(player, &note);
    return true;
}

/* What the work does. */
bool player_work(struct player *player, const char *text)
{
    return play_unheard(player, text) || play_impulses(player, text) || play_source(player, text) ||
           play_job(player, text) || play_measure(player, text);
}

/* the program starts again after an outage since CLOCK: called before time passes. */
void player_restart(struct player *player, const char *text, int64_t at_ns)
{
    const char *since = player_after(text, "the program starts again, down since ");
    struct event event = {.kind = EVENT_RUN};
    if (!since || !player_read_clock(since, &event.as.run_mark.outage_start_ns))
        player_complain(player, "cannot read the outage in '%s'", text);
    event.as.run_mark.outage_end_ns = at_ns;
    player->run++;
    memset(player->counters, 0, sizeof player->counters);
    player->now_ns = at_ns;
    player_push(player, &event, at_ns);
}
