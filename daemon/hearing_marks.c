/* Marks and clips for the pages; see hearing.h. */
#include "base/time.h"
#include "hearing.h"
#include "ledger/ledger.h"
#include "record/entry.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static struct hearing_mark *find_mark(struct hearing_view *hearing, const char *id)
{
    for (uint32_t i = 0; i < hearing->n_marks; i++)
        if (strcmp(hearing->marks[i].id, id) == 0)
            return &hearing->marks[i];
    return NULL;
}

static void add_mark(struct hearing_view *hearing, const char *id, const struct note *note)
{
    uint32_t n = hearing->n_marks < BOARD_MAX_MARKS ? hearing->n_marks : BOARD_MAX_MARKS - 1;
    memmove(&hearing->marks[1], &hearing->marks[0], n * sizeof hearing->marks[0]);
    hearing->n_marks = n + 1;
    struct hearing_mark *mark = &hearing->marks[0];
    *mark = (struct hearing_mark){.occurred_ns = note->occurred_ns};
    snprintf(mark->id, sizeof mark->id, "%s", id);
    memcpy(mark->person, note->person, sizeof mark->person);
    snprintf(mark->text, sizeof mark->text, "%.*s", BOARD_LINE_SIZE - 1, note->text);
    if (*note->text) /* it was said at once */
        snprintf(mark->completed, sizeof mark->completed, "%s", id);
}

/* What was typed; of a note with fields alone, its kind and group. */
static void complete(struct hearing_mark *mark, const char *id, const struct note *note)
{
    snprintf(mark->completed, sizeof mark->completed, "%s", id);
    if (*note->text)
        snprintf(mark->text, sizeof mark->text, "%.*s", BOARD_LINE_SIZE - 1, note->text);
    else
        snprintf(mark->text, sizeof mark->text, "%s: %s", note_kind_text(note->kind),
                 group_text(note->group));
}

/* A mark that is taken back is none; where what completed it is, the mark is open again. */
static void take_back(struct hearing_view *hearing, const struct note *note)
{
    struct hearing_mark *mark = find_mark(hearing, note->corrects);
    if (mark)
        mark->withdrawn = true;
    for (uint32_t i = 0; i < hearing->n_marks && !mark; i++)
        if (strcmp(hearing->marks[i].completed, note->corrects) == 0) {
            hearing->marks[i].completed[0] = hearing->marks[i].text[0] = '\0';
            return;
        }
}

void hearing_take_mark(struct hearing_view *hearing, const char *id, const struct note *note)
{
    struct hearing_mark *mark = *note->mark ? find_mark(hearing, note->mark) : NULL;
    if (note->kind == NOTE_MARK)
        add_mark(hearing, id, note);
    else if (note->kind == NOTE_CORRECTION)
        take_back(hearing, note);
    else if (mark && !mark->withdrawn)
        complete(mark, id, note);
}

void hearing_add_clip(struct hearing_view *hearing, const char *id, const struct sound_entry_facts *facts)
{
    uint32_t n = hearing->n_clips < BOARD_MAX_CLIPS ? hearing->n_clips : BOARD_MAX_CLIPS - 1;
    memmove(&hearing->clips[1], &hearing->clips[0], n * sizeof hearing->clips[0]);
    hearing->n_clips = n + 1;
    hearing->clips[0].facts = *facts;
    snprintf(hearing->clips[0].id, FLOW_ID_SIZE, "%s", id);
}

static enum status recall_note(void *context, const struct entry *entry)
{
    struct event event;
    char id[FLOW_ID_SIZE];
    if (entry_event(entry->kind, entry->body, 0, &event) != STATUS_OK)
        return STATUS_OK;
    flow_id(event.run, event.stream, "note", event.counter, id);
    hearing_take_mark(context, id, &event.as.note);
    return STATUS_OK;
}

static double number_of(const char *text)
{
    return text ? strtod(text, NULL) : NAN;
}

static enum status recall_clip(void *context, int n_columns, const char *const *columns)
{
    struct sound_entry_facts facts = {.reason = SOUND_MARK, .n_causes = 1};
    if (n_columns != 9 || !columns[0])
        return STATUS_OK;
    facts.stream = (uint32_t)number_of(columns[1]);
    facts.channel = (uint32_t)number_of(columns[2]);
    for (int i = SOUND_ADVICE; i <= SOUND_DISMISSED; i++)
        if (columns[3] && strcmp(columns[3], sound_reason_text((enum sound_reason)i)) == 0)
            facts.reason = (enum sound_reason)i;
    facts.start_ns = time_from_s(number_of(columns[4]));
    facts.end_ns = time_from_s(number_of(columns[5]));
    facts.low_hz = number_of(columns[6]);
    facts.high_hz = number_of(columns[7]);
    snprintf(facts.causes[0], FLOW_ID_SIZE, "%s", columns[8] ? columns[8] : "");
    hearing_add_clip(context, columns[0], &facts);
    return STATUS_OK;
}

void hearing_recall(struct hearing_view *hearing, const char *ledger_path)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    if (ledger_open(ledger_path, LEDGER_READ, &ledger, problem) != STATUS_OK)
        return;
    ledger_read(ledger, &(struct ledger_query){.kind = "note"}, recall_note, hearing);
    ledger_select(
        ledger,
        "SELECT id, stream, channel, reason, start_s, end_s, low_hz, high_hz, json_extract(causes, '$[0]') "
        "FROM sound ORDER BY seq",
        0, NULL, recall_clip, hearing);
    ledger_close(ledger);
}
