/* Marks and clips as JSON. */
#include "base/time.h"
#include "http/board_json.h"

static void one_mark(struct text *text, const struct hearing_mark *mark)
{
    json_next(text);
    text_append(text, "{");
    json_text(text, "id", mark->id);
    json_time(text, "time_s", mark->occurred_ns);
    json_text(text, "person", mark->person);
    json_text(text, "state", mark->withdrawn ? "withdrawn" : *mark->completed ? "completed" : "open");
    json_text(text, "completed_by", mark->completed);
    json_text(text, "text", mark->text);
    text_append(text, "}");
}

static void one_clip(struct text *text, const struct hearing_clip *clip)
{
    const struct sound_entry_facts *facts = &clip->facts;
    json_next(text);
    text_append(text, "{");
    json_text(text, "id", clip->id);
    json_number(text, "stream", facts->stream, 0);
    json_number(text, "channel", facts->channel, 0);
    json_text(text, "reason", sound_reason_text(facts->reason));
    json_time(text, "start_s", facts->start_ns);
    json_time(text, "end_s", facts->end_ns);
    json_number(text, "low_hz", facts->low_hz, 1);
    json_number(text, "high_hz", facts->high_hz, 1);
    json_name(text, "causes");
    text_append(text, "[");
    for (uint32_t i = 0; i < facts->n_causes; i++) {
        json_next(text);
        text_json_string(text, facts->causes[i]);
    }
    text_append(text, "]}");
}

void board_json_marks(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "marks");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_marks; i++)
        one_mark(text, &hearing->marks[i]);
    text_append(text, "]");
    json_name(text, "clips");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_clips; i++)
        one_clip(text, &hearing->clips[i]);
    text_append(text, "]");
}
