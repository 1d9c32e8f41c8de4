/* From an entry's body back to the event that the watch took, and the rounding that makes it the same event.
 * Strict: a missing key, another type or an unknown word is a body that this program did not write. */
#include "base/round.h"
#include "base/time.h"
#include "record/entry.h"
#include "record/reading.h"
#include <errno.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum status reading_begin(const char *body, struct reading *out)
{
    json_error_t error;
    *out = (struct reading){.root = json_loads(body, JSON_REJECT_DUPLICATES, &error), .good = true};
    if (out->root)
        return STATUS_OK;
    return json_error_code(&error) == json_error_out_of_memory ? STATUS_NO_MEMORY : STATUS_BAD_FORMAT;
}

enum status reading_end(struct reading *reading)
{
    json_decref(reading->root);
    return reading->good ? STATUS_OK : STATUS_BAD_FORMAT;
}

json_t *reading_member(struct reading *reading, const char *key, bool required)
{
    json_t *value = json_object_get(reading->root, key);
    if (!value && required)
        reading->good = false;
    return value;
}

void reading_text(struct reading *reading, const char *key, bool required, char *out, size_t size)
{
    json_t *value = reading_member(reading, key, required);
    out[0] = '\0';
    if (!value || json_is_null(value))
        return;
    const char *text = json_string_value(value);
    if (!text || json_string_length(value) >= size) {
        reading->good = false;
        return;
    }
    memcpy(out, text, json_string_length(value) + 1);
}

double reading_number(struct reading *reading, const char *key, bool required, double if_null)
{
    json_t *value = reading_member(reading, key, required);
    if (!value || json_is_null(value))
        return if_null;
    if (!json_is_number(value)) {
        reading->good = false;
        return if_null;
    }
    return json_number_value(value);
}

static int64_t read_time(struct reading *reading, const char *key)
{
    double seconds = reading_number(reading, key, true, NAN);
    /* 9e9 s: beyond it a double no longer holds whole microseconds. */
    if (!(fabs(seconds) < 9e9)) {
        reading->good = false;
        return 0;
    }
    return time_from_s(seconds);
}

uint32_t reading_count(struct reading *reading, const char *key, bool required)
{
    json_t *value = reading_member(reading, key, required);
    if (!value)
        return 0;
    json_int_t n = json_integer_value(value);
    if (!json_is_integer(value) || n < 0 || n > UINT32_MAX) {
        reading->good = false;
        return 0;
    }
    return (uint32_t)n;
}

bool reading_bool(struct reading *reading, const char *key, bool required)
{
    json_t *value = reading_member(reading, key, required);
    if (value && !json_is_boolean(value))
        reading->good = false;
    return json_is_true(value);
}

/* The index of a word in its table, by the table's own text function. */
static int read_word(struct reading *reading, const char *key, int count, const char *(*text)(int))
{
    char word[NOTE_NAME_SIZE];
    reading_text(reading, key, true, word, sizeof word);
    for (int i = 0; i < count; i++)
        if (strcmp(word, text(i)) == 0)
            return i;
    reading->good = false;
    return 0;
}

static const char *cause_word(int i)
{
    return unheard_cause_text((enum unheard_cause)i);
}

static const char *whose_word(int i)
{
    return impulse_whose_text((enum impulse_whose)i);
}

static const char *form_word(int i)
{
    return call_form_text((enum call_form)i);
}

static const char *from_word(int i)
{
    return bearing_from_text((enum bearing_from)i);
}

static const char *group_word(int i)
{
    return group_text((enum group)i);
}

static const char *note_word(int i)
{
    return note_kind_text((enum note_kind)i);
}

static const char *range_word(int i)
{
    return range_from_text((enum range_from)i);
}

static const char *of_word(int i)
{
    return position_of_text((enum position_of)i);
}

static const char *position_from_word(int i)
{
    return position_from_text((enum position_from)i);
}

static void read_run(struct reading *reading, struct run_mark *mark)
{
    mark->outage_start_ns = read_time(reading, "outage_start_s");
    mark->outage_end_ns = read_time(reading, "outage_end_s");
}

static void read_unheard(struct reading *reading, struct unheard *unheard)
{
    unheard->channel = reading_count(reading, "channel", true);
    unheard->low_hz = reading_number(reading, "low_hz", true, 0);
    unheard->high_hz = reading_number(reading, "high_hz", true, INFINITY); /* no upper limit */
    unheard->start_ns = read_time(reading, "start_s");
    unheard->end_ns = read_time(reading, "end_s");
    unheard->cause = (enum unheard_cause)read_word(reading, "cause", UNHEARD_TOO_QUIET + 1, cause_word);
}

static uint32_t read_bands(struct reading *reading, const char *key, double out[LEVEL_MAX_BANDS])
{
    json_t *array = reading_member(reading, key, true);
    const size_t n = json_array_size(array);
    if (!json_is_array(array) || n > LEVEL_MAX_BANDS) {
        reading->good = false;
        return 0;
    }
    for (size_t b = 0; b < n; b++) {
        json_t *value = json_array_get(array, b);
        reading->good = reading->good && (json_is_null(value) || json_is_number(value));
        out[b] = json_is_null(value) ? NAN : json_number_value(value);
    }
    return (uint32_t)n;
}

static void read_impulse(struct reading *reading, struct impulse *impulse)
{
    impulse->channel = reading_count(reading, "channel", true);
    impulse->time_ns = read_time(reading, "time_s");
    impulse->sel_db = reading_number(reading, "sel_db", true, NAN);
    impulse->peak_db = reading_number(reading, "peak_db", true, NAN);
    impulse->peak_to_peak_db = reading_number(reading, "peak_to_peak_db", true, NAN);
    impulse->rms90_db = reading_number(reading, "rms90_db", true, NAN);
    impulse->t90_s = reading_number(reading, "t90_s", true, NAN);
    impulse->background_db = reading_number(reading, "background_db", true, NAN);
    impulse->effective_s = reading_number(reading, "effective_s", true, NAN);
    impulse->kurtosis = reading_number(reading, "kurtosis", true, NAN);
    impulse->window_s = reading_number(reading, "window_s", true, NAN);
    impulse->positive_impulse_pa_s = reading_number(reading, "positive_impulse_pa_s", true, NAN);
    impulse->n_bands = read_bands(reading, "bands", impulse->band_sel_db);
    impulse->refused = reading_bool(reading, "refused", true);
    impulse->relative = reading_bool(reading, "relative", true);
    impulse->clipped = reading_bool(reading, "clipped", true);
    impulse->overlapped = reading_bool(reading, "overlapped", true);
    impulse->weak = reading_bool(reading, "weak", true);
    impulse->beside = reading_bool(reading, "beside", false); /* not in ledgers of formats 1 and 2 */
    impulse->whose = (enum impulse_whose)read_word(reading, "whose", IMPULSE_UNKNOWN + 1, whose_word);
    reading_text(reading, "job", true, impulse->job, sizeof impulse->job);
    impulse->range_m = reading_number(reading, "range_m", true, NAN);
    impulse->range_from = (enum range_from)read_word(reading, "range_from", RANGE_FROM_COUNT, range_word);
}

/* Decimal digits up to `end`, at least one. */
static bool read_digits(const char **text, char end, uint64_t max, uint64_t *out)
{
    if (**text < '0' || **text > '9')
        return false;
    char *stop;
    errno = 0;
    unsigned long long value = strtoull(*text, &stop, 10);
    if (errno || *stop != end || value > max)
        return false;
    *text = stop + (end != '\0');
    *out = value;
    return true;
}

/* "run.stream.kind.counter" of that kind. */
static bool read_id(const char *id, const char *kind, uint32_t *out_run, uint32_t *out_stream,
                    uint64_t *out_counter)
{
    const char *at = id;
    uint64_t run = 0, stream = 0;
    size_t length = strlen(kind);
    if (!read_digits(&at, '.', UINT32_MAX, &run) || !read_digits(&at, '.', UINT32_MAX, &stream) ||
        strncmp(at, kind, length) != 0 || at[length] != '.')
        return false;
    at += length + 1;
    if (!read_digits(&at, '\0', UINT64_MAX, out_counter))
        return false;
    *out_run = (uint32_t)run;
    *out_stream = (uint32_t)stream;
    return true;
}

void reading_id(struct reading *reading, const char *kind, uint32_t *out_run, uint32_t *out_stream,
                uint64_t *out_counter)
{
    char id[FLOW_ID_SIZE];
    reading_text(reading, "id", true, id, sizeof id);
    if (!read_id(id, kind, out_run, out_stream, out_counter))
        reading->good = false;
}

/* The calls that a sound speaks against: ids of the entry's own run and stream. */
static void read_against(struct reading *reading, struct call *call)
{
    json_t *ids = reading_member(reading, "against", false);
    uint32_t run = 0, stream = 0;
    uint64_t own = 0;
    reading_id(reading, "call", &run, &stream, &own);
    if (!ids)
        return;
    if (!json_is_array(ids) || json_array_size(ids) > CALL_MAX_AGAINST || call->n_sounds == 0) {
        reading->good = false;
        return;
    }
    for (size_t i = 0; i < json_array_size(ids); i++) {
        uint32_t its_run = 0, its_stream = 0;
        const char *text = json_string_value(json_array_get(ids, i));
        if (!text || !read_id(text, "call", &its_run, &its_stream, &call->against[i]) || its_run != run ||
            its_stream != stream)
            reading->good = false;
    }
    call->n_against = (uint32_t)json_array_size(ids);
}

static void read_call(struct reading *reading, struct call *call)
{
    call->channel = reading_count(reading, "channel", true);
    reading_text(reading, "class", true, call->class_name, sizeof call->class_name);
    call->group = (enum group)read_word(reading, "group", GROUP_COUNT, group_word);
    call->form = (enum call_form)read_word(reading, "form", CALL_NOISE + 1, form_word);
    call->start_ns = read_time(reading, "start_s");
    call->end_ns = read_time(reading, "end_s");
    call->low_hz = reading_number(reading, "low_hz", true, NAN);
    call->high_hz = reading_number(reading, "high_hz", true, NAN);
    call->n_pulses = reading_count(reading, "n_pulses", true);
    call->interval_s = reading_number(reading, "interval_s", true, NAN);
    call->snr_db = reading_number(reading, "snr_db", true, NAN);
    call->level_db = reading_number(reading, "level_db", true, NAN);
    call->relative = reading_bool(reading, "relative", true);
    call->bearing_deg = reading_number(reading, "bearing_deg", true, NAN);
    call->mirror_deg = reading_number(reading, "mirror_deg", true, NAN);
    call->bearing_from = (enum bearing_from)read_word(reading, "bearing_from", BEARING_AHEAD + 1, from_word);
    call->certainty = reading_number(reading, "certainty", true, NAN);
    call->evidence = reading_number(reading, "evidence", true, NAN);
    call->n_sounds = reading_count(reading, "n_sounds", false); /* an animal's call has none */
    read_against(reading, call);
}

static void read_field(struct reading *reading, const struct note_field *field, struct note *note)
{
    void *member = (char *)note + field->offset;
    char key[NOTE_NAME_SIZE];
    switch (field->form) {
    case NOTE_FORM_TEXT:
    case NOTE_FORM_WORD:
        reading_text(reading, field->name, false, member, field->size);
        break;
    case NOTE_FORM_GROUP:
        if (json_object_get(reading->root, field->name))
            note->group = (enum group)read_word(reading, field->name, GROUP_COUNT, group_word);
        break;
    case NOTE_FORM_WHOLE:
        *(uint32_t *)member = reading_count(reading, field->name, false);
        break;
    case NOTE_FORM_NUMBER:
        *(double *)member = reading_number(reading, field->name, false, NAN);
        break;
    case NOTE_FORM_FLAG:
        *(bool *)member = reading_bool(reading, field->name, false);
        break;
    case NOTE_FORM_TIME: /* but occurred_s, which every note has */
        note_time_key(field, key);
        if (strcmp(key, "occurred_s") != 0 && json_object_get(reading->root, key))
            *(int64_t *)member = read_time(reading, key);
        break;
    }
}

static void read_note(struct reading *reading, struct note *note)
{
    note->kind = (enum note_kind)read_word(reading, "note", NOTE_KIND_COUNT, note_word);
    note->occurred_ns = read_time(reading, "occurred_s");
    note->known_ns = read_time(reading, "known_s");
    const struct note_field *field;
    for (unsigned i = 0; (field = note_field_at(i)) != NULL; i++)
        read_field(reading, field, note);
}

static void read_position(struct reading *reading, struct position *position)
{
    position->of = (enum position_of)read_word(reading, "whose", POSITION_OF_COUNT, of_word);
    position->from =
        (enum position_from)read_word(reading, "source", POSITION_FROM_COUNT, position_from_word);
    position->latitude_deg = reading_number(reading, "latitude_deg", true, NAN);
    position->longitude_deg = reading_number(reading, "longitude_deg", true, NAN);
    position->heading_deg = reading_number(reading, "heading_deg", true, NAN);
    position->course_deg = reading_number(reading, "course_deg", true, NAN);
    position->speed_m_s = reading_number(reading, "speed_m_s", true, NAN);
    position->accuracy_m = reading_number(reading, "accuracy_m", true, NAN);
    position->occurred_ns = read_time(reading, "occurred_s");
    reading->good = reading->good && position_check(position) == STATUS_OK;
}

static bool input_kind(const char *kind, enum event_kind *out)
{
    static const enum event_kind inputs[] = {EVENT_RUN,  EVENT_UNHEARD, EVENT_IMPULSE,
                                             EVENT_CALL, EVENT_NOTE,    EVENT_POSITION};
    for (size_t i = 0; i < sizeof inputs / sizeof inputs[0]; i++)
        if (strcmp(kind, flow_event_kind_text(inputs[i])) == 0) {
            *out = inputs[i];
            return true;
        }
    return false;
}

static void read_event(struct reading *reading, struct event *event)
{
    switch (event->kind) {
    case EVENT_RUN:
        read_run(reading, &event->as.run_mark);
        break;
    case EVENT_UNHEARD:
        read_unheard(reading, &event->as.unheard);
        break;
    case EVENT_IMPULSE:
        read_impulse(reading, &event->as.impulse);
        break;
    case EVENT_CALL:
        read_call(reading, &event->as.call);
        break;
    case EVENT_NOTE:
        read_note(reading, &event->as.note);
        break;
    case EVENT_POSITION:
        read_position(reading, &event->as.position);
        break;
    case EVENT_LEVEL: /* not among the inputs */
        break;
    }
}

enum status entry_event(const char *kind, const char *body, int64_t watch_ns, struct event *out)
{
    struct event event = {.known_ns = watch_ns};
    if (!input_kind(kind, &event.kind))
        return STATUS_NOT_FOUND;
    struct reading reading;
    enum status status = reading_begin(body, &reading);
    if (status != STATUS_OK)
        return status;
    reading_id(&reading, kind, &event.run, &event.stream, &event.counter);
    read_event(&reading, &event);
    status = reading_end(&reading);
    if (status == STATUS_OK)
        *out = event;
    return status;
}
