/* Notes: the one table of fields with what each allows, and what each kind needs. */
#include "rule/note.h"
#include "base/round.h"
#include "level/impulse.h"
#include <errno.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

static const char *const kind_words[NOTE_KIND_COUNT] = {
    [NOTE_SIGN_ON] = "sign-on",
    [NOTE_SIGN_OFF] = "sign-off",
    [NOTE_SIGHTING] = "sighting",
    [NOTE_DISTANCE] = "distance",
    [NOTE_VERDICT] = "verdict",
    [NOTE_RELEASE] = "release",
    [NOTE_SOURCE] = "source state",
    [NOTE_JOB] = "job",
    [NOTE_WEATHER] = "weather",
    [NOTE_QUIETING] = "quieting",
    [NOTE_OTHER] = "other source",
    [NOTE_DETERRENT] = "deterrent",
    [NOTE_OVERRIDE] = "safety override",
    [NOTE_PLAN] = "plan",
    [NOTE_ANSWER] = "answer to a finding",
    [NOTE_WHOSE] = "whose",
    [NOTE_POSITION] = "position",
    [NOTE_CHECK] = "check",
    [NOTE_HAND_OVER] = "hand-over",
    [NOTE_MARK] = "mark",
    [NOTE_CORRECTION] = "correction",
    [NOTE_REMARK] = "remark",
    [NOTE_ACKNOWLEDGEMENT] = "acknowledgement",
};

static const char *const watch_words[] = {"visual", "acoustic", "crew", NULL};
static const char *const verdict_words[] = {"confirm", "dismiss", "left", NULL};
static const char *const job_words[] = {"pile", "line", "test", "charge", NULL};
static const char *const reason_words[] = {"life", "refusal", "instability", NULL};
static const char *const answer_words[] = {"seen", "passed", "stopped", "declined", "open", "begin",
                                           "end",  "close",  "on",      "off",      "ours", "other",
                                           "good", "bad",    "gives",   "takes",    NULL};
static const char *const check_words[] = {"clock",       "array", "channels", "noise",
                                          "field check", "radio", "sound",    NULL};
static const char *const certainty_words[] = {"definite", "probable", "possible", NULL};
static const char *const behaviour_words[] = {
    "closing",     "opening", "passing",   "travelling", "milling",    "resting", "feeding",
    "socialising", "diving",  "breaching", "bow riding", "hauled out", NULL};
static const char *const source_words[] = {"off",   "soft start", "full power", "hold", "reduced", "stopped",
                                           "vibro", "drilling",   "line turn",  "test", NULL};

#define TEXT(member)                                                                                         \
    .name = #member, .form = NOTE_FORM_TEXT, .offset = offsetof(struct note, member),                        \
    .size = sizeof(((struct note *)0)->member)
#define WORD(member, list)                                                                                   \
    .name = #member, .form = NOTE_FORM_WORD, .offset = offsetof(struct note, member),                        \
    .size = sizeof(((struct note *)0)->member), .words = list
#define NUMBER(member, low, high, places)                                                                    \
    .name = #member, .form = NOTE_FORM_NUMBER, .offset = offsetof(struct note, member), .min = low,          \
    .max = high, .decimals = places
#define OTHER(member, kind) .name = #member, .form = kind, .offset = offsetof(struct note, member)

#define NAME_ALLOWED "at most 63 bytes, no control characters"

/* By name, as an entry lists them. */
static const struct note_field fields[] = {
    {TEXT(account), .allowed = NAME_ALLOWED},
    {TEXT(advice), .allowed = "the id of an advice, at most 63 bytes"},
    {WORD(answer, answer_words),
     .allowed = "seen, passed, stopped, declined (acknowledgement); open, begin, end, close "
                "(job); on, off (quieting, deterrent, other source); "
                "ours, other (whose); good, bad (check); gives, takes (hand-over)"},
    {NUMBER(bearing_deg, 0, 360, ROUND_DECIMALS_DEG), .allowed = "0 to 360 degrees"},
    {WORD(behaviour, behaviour_words),
     .allowed = "closing, opening, passing, travelling, milling, resting, feeding, socialising, diving, "
                "breaching, bow riding, hauled out"},
    {NUMBER(blows, 0, 100000, 0), .allowed = "0 to 100000 blows"},
    {NUMBER(cable_m, 0, 20000, ROUND_DECIMALS_M), .allowed = "0 to 20000 m"},
    {OTHER(calf, NOTE_FORM_FLAG), .allowed = "true, false"},
    {NUMBER(calves, 0, 100000, 0), .allowed = "0 to 100000 calves"},
    {WORD(certainty, certainty_words), .allowed = "definite, probable, possible"},
    {NUMBER(charge_kg, 0, 10000, 3), .allowed = "0 to 10000 kg"},
    {WORD(check, check_words), .allowed = "clock, array, channels, noise, field check, radio, sound"},
    {NUMBER(closest_m, 0, 100000, ROUND_DECIMALS_M), .allowed = "0 to 100000 m"},
    {OTHER(contact, NOTE_FORM_WHOLE), .min = 1, .max = UINT32_MAX, .allowed = "a contact's number, from 1"},
    {TEXT(corrects), .allowed = "the id of a note, at most 63 bytes"},
    {NUMBER(depth_m, 0, 12000, ROUND_DECIMALS_M), .allowed = "0 to 12000 m"},
    {NUMBER(distance_m, 0, 100000, ROUND_DECIMALS_M), .allowed = "0 to 100000 m"},
    {NUMBER(donor_kg, 0, 1000, 3), .allowed = "0 to 1000 kg"},
    {NUMBER(elements, 0, 1000, 0), .allowed = "0 to 1000 elements"},
    {NUMBER(energy_kj, 0, 100000, 1), .allowed = "0 to 100000 kJ"},
    {TEXT(finding), .allowed = "the id of a finding, at most 63 bytes"},
    {NUMBER(first_point, 0, 10000000, 1), .allowed = "0 to 10000000"},
    {OTHER(group, NOTE_FORM_GROUP),
     .allowed = "unknown, baleen whale, sperm whale, beaked whale, delphinid, porpoise, phocid, otariid, "
                "sirenian, sea otter, turtle"},
    {TEXT(hammer), .allowed = NAME_ALLOWED},
    {NUMBER(hydrophone_depth_m, 0, 12000, ROUND_DECIMALS_M), .allowed = "0 to 12000 m"},
    {TEXT(impulse), .allowed = "the id of an impulse, at most 63 bytes"},
    {OTHER(in_zone_ns, NOTE_FORM_TIME), .allowed = "watch time in nanoseconds, not before 0"},
    {.name = "job",
     .form = NOTE_FORM_TEXT,
     .offset = offsetof(struct note, job),
     .size = IMPULSE_JOB_SIZE,
     .allowed = "at most 31 bytes, no control characters"},
    {WORD(job_kind, job_words), .allowed = "pile, line, test, charge"},
    {NUMBER(last_point, 0, 10000000, 1), .allowed = "0 to 10000000"},
    {NUMBER(latitude_deg, -90, 90, ROUND_DECIMALS_POSITION), .allowed = "-90 to 90 degrees, north positive"},
    {OTHER(leaving, NOTE_FORM_FLAG), .allowed = "true, false"},
    {TEXT(leg), .allowed = NAME_ALLOWED},
    {NUMBER(longitude_deg, -180, 180, ROUND_DECIMALS_POSITION),
     .allowed = "-180 to 180 degrees, east positive"},
    {TEXT(mark), .allowed = "the id of a mark, at most 63 bytes"},
    {NUMBER(minutes, 0, 10080, 2), .allowed = "0 to 10080 minutes"},
    {NUMBER(number, 1, 100000, 0), .allowed = "1 to 100000 animals"},
    {NUMBER(number_high, 1, 100000, 0), .allowed = "1 to 100000 animals"},
    {NUMBER(number_low, 1, 100000, 0), .allowed = "1 to 100000 animals"},
    {OTHER(occurred_ns, NOTE_FORM_TIME), .allowed = "watch time in nanoseconds, not before 0"},
    {NUMBER(offset_m, 0, 100000, ROUND_DECIMALS_M), .allowed = "0 to 100000 m"},
    {OTHER(out_zone_ns, NOTE_FORM_TIME), .allowed = "watch time in nanoseconds, not before 0"},
    {TEXT(person), .allowed = NAME_ALLOWED},
    {OTHER(planned_ns, NOTE_FORM_TIME), .allowed = "watch time in nanoseconds, not before 0"},
    {TEXT(rank), .allowed = NAME_ALLOWED},
    {WORD(reason, reason_words), .allowed = "life, refusal, instability"},
    {OTHER(refusal, NOTE_FORM_FLAG), .allowed = "true, false"},
    {OTHER(restrike, NOTE_FORM_FLAG), .allowed = "true, false"},
    {NUMBER(sea_state, 0, 12, 1), .allowed = "0 to 12"},
    {TEXT(sequence), .allowed = NAME_ALLOWED},
    {TEXT(sighting), .allowed = "the id of a note, at most 63 bytes"},
    {WORD(source_state, source_words),
     .allowed = "off, soft start, full power, hold, reduced, stopped, vibro, drilling, line turn, test"},
    {TEXT(species), .allowed = NAME_ALLOWED},
    {TEXT(station), .allowed = NAME_ALLOWED},
    {TEXT(text), .allowed = "at most 255 bytes, no control characters"},
    {WORD(verdict, verdict_words), .allowed = "confirm, dismiss, left"},
    {NUMBER(visibility_m, 0, 100000, ROUND_DECIMALS_M), .allowed = "0 to 100000 m"},
    {WORD(watch, watch_words), .allowed = "visual, acoustic, crew"},
};

void note_reset(struct note *note, enum note_kind kind)
{
    *note = (struct note){.kind = kind, .group = GROUP_UNKNOWN};
    for (size_t i = 0; i < sizeof fields / sizeof fields[0]; i++)
        if (fields[i].form == NOTE_FORM_NUMBER)
            *(double *)((char *)note + fields[i].offset) = NAN;
}

static enum status set_text(const struct note_field *field, const char *value, char *out)
{
    size_t length = strlen(value);
    if (length >= field->size)
        return STATUS_OUT_OF_RANGE;
    for (const char *c = value; *c; c++)
        if ((unsigned char)*c < 0x20 || *c == 0x7f)
            return STATUS_BAD_FORMAT;
    memcpy(out, value, length + 1);
    return STATUS_OK;
}

static enum status set_word(const struct note_field *field, const char *value, char *out)
{
    for (const char *const *word = field->words; *word; word++)
        if (strcmp(value, *word) == 0)
            return set_text(field, value, out);
    return STATUS_OUT_OF_RANGE;
}

/* A plain decimal number and nothing else: no hexadecimal, no "nan", no spaces before it. */
static enum status read_number(const char *value, double min, double max, double *out)
{
    if (*value == '\0' || value[strspn(value, "0123456789.-+eE")] != '\0')
        return STATUS_BAD_FORMAT;
    char *end;
    double number = strtod(value, &end);
    if (*end != '\0')
        return STATUS_BAD_FORMAT;
    if (!(number >= min && number <= max))
        return STATUS_OUT_OF_RANGE;
    *out = number;
    return STATUS_OK;
}

static enum status read_whole(const char *value, int64_t min, int64_t max, int64_t *out)
{
    if (*value == '\0' || value[strspn(value, "0123456789")] != '\0')
        return STATUS_BAD_FORMAT;
    errno = 0;
    long long number = strtoll(value, NULL, 10);
    if (errno != 0 || number < min || number > max)
        return STATUS_OUT_OF_RANGE;
    *out = number;
    return STATUS_OK;
}

static enum status set_number(const struct note_field *field, const char *value, double *out)
{
    double number;
    enum status status = read_number(value, field->min, field->max, &number);
    if (status == STATUS_OK)
        *out = round_decimals(number, field->decimals);
    return status;
}

static enum status set_flag(const char *value, bool *out)
{
    bool yes = strcmp(value, "true") == 0;
    if (!yes && strcmp(value, "false") != 0)
        return STATUS_BAD_FORMAT;
    *out = yes;
    return STATUS_OK;
}

static enum status set_field(const struct note_field *field, const char *value, struct note *note)
{
    void *member = (char *)note + field->offset;
    int64_t whole;
    enum status status;
    switch (field->form) {
    case NOTE_FORM_TEXT:
        return set_text(field, value, member);
    case NOTE_FORM_WORD:
        return set_word(field, value, member);
    case NOTE_FORM_GROUP:
        return group_from_text(value, &note->group) ? STATUS_OK : STATUS_OUT_OF_RANGE;
    case NOTE_FORM_WHOLE:
        status = read_whole(value, (int64_t)field->min, (int64_t)field->max, &whole);
        if (status == STATUS_OK)
            note->contact = (uint32_t)whole;
        return status;
    case NOTE_FORM_NUMBER:
        return set_number(field, value, member);
    case NOTE_FORM_FLAG:
        return set_flag(value, member);
    case NOTE_FORM_TIME:
        status = read_whole(value, 0, INT64_MAX, &whole);
        if (status == STATUS_OK)
            *(int64_t *)member = whole;
        return status;
    }
    return STATUS_BUG;
}

const struct note_field *note_field_at(unsigned i)
{
    return i < sizeof fields / sizeof fields[0] ? &fields[i] : NULL;
}

enum status note_set(struct note *note, const char *field, const char *value, const char **out_allowed)
{
    for (size_t i = 0; i < sizeof fields / sizeof fields[0]; i++)
        if (strcmp(field, fields[i].name) == 0) {
            enum status status = set_field(&fields[i], value, note);
            if (status != STATUS_OK && out_allowed)
                *out_allowed = fields[i].allowed;
            return status;
        }
    return STATUS_NOT_FOUND;
}

/* Each kind has its own answers. */
static const char *missing_of_answer(const struct note *note)
{
    bool of_job = strcmp(note->answer, "open") == 0 || strcmp(note->answer, "close") == 0 ||
                  strcmp(note->answer, "begin") == 0 || strcmp(note->answer, "end") == 0;
    bool of_quieting = strcmp(note->answer, "on") == 0 || strcmp(note->answer, "off") == 0;
    bool of_whose = strcmp(note->answer, "ours") == 0 || strcmp(note->answer, "other") == 0;
    bool of_check = strcmp(note->answer, "good") == 0 || strcmp(note->answer, "bad") == 0;
    bool of_hand_over = strcmp(note->answer, "gives") == 0 || strcmp(note->answer, "takes") == 0;
    bool good = *note->answer && of_check == (note->kind == NOTE_CHECK) &&
                of_hand_over == (note->kind == NOTE_HAND_OVER) && of_job == (note->kind == NOTE_JOB) &&
                of_quieting == (note->kind == NOTE_QUIETING || note->kind == NOTE_OTHER ||
                                note->kind == NOTE_DETERRENT || note->kind == NOTE_OVERRIDE) &&
                of_whose == (note->kind == NOTE_WHOSE);
    return good ? NULL : "answer";
}

/* The first field that the kind needs and the note has not; NULL when it is complete. */
static const char *missing_of(const struct note *note)
{
    bool person = *note->person != '\0';
    switch (note->kind) {
    case NOTE_SIGN_ON:
        if (person && *note->watch && strcmp(note->watch, "crew") == 0 && !*note->station)
            return "station";
        return !person ? "person" : !*note->watch ? "watch" : NULL;
    case NOTE_SIGN_OFF:
        return !person ? "person" : !*note->watch ? "watch" : NULL;
    case NOTE_SIGHTING:
    case NOTE_RELEASE:
        return !person ? "person" : NULL;
    case NOTE_DISTANCE:
        return !person                                     ? "person"
               : !note->contact                            ? "contact"
               : isnan(note->distance_m) && !note->leaving ? "distance_m"
                                                           : NULL;
    case NOTE_VERDICT:
        return !person           ? "person"
               : !note->contact  ? "contact"
               : !*note->verdict ? "verdict"
               : !*note->text    ? "text"
                                 : NULL;
    case NOTE_ACKNOWLEDGEMENT:
        return !person           ? "person"
               : !*note->station ? "station"
               : !*note->advice  ? "advice"
                                 : missing_of_answer(note);
    case NOTE_CHECK:
        return !person ? "person" : !*note->check ? "check" : missing_of_answer(note);
    case NOTE_HAND_OVER:
        return !person ? "person" : missing_of_answer(note);
    case NOTE_SOURCE:
        return !*note->source_state ? "source_state" : NULL;
    case NOTE_PLAN:
        return note->planned_ns <= 0 ? "planned_ns" : NULL;
    case NOTE_ANSWER:
        return !person ? "person" : !*note->finding ? "finding" : !*note->text ? "text" : NULL;
    case NOTE_OVERRIDE:
        return !person                                             ? "person"
               : strcmp(note->answer, "on") == 0 && !*note->reason ? "reason"
                                                                   : missing_of_answer(note);
    case NOTE_JOB:
        return !*note->job ? "job" : missing_of_answer(note);
    case NOTE_QUIETING:
    case NOTE_DETERRENT:
        return missing_of_answer(note);
    case NOTE_OTHER:
        return !*note->text ? "text" : missing_of_answer(note);
    case NOTE_WHOSE:
        return !person ? "person" : !*note->impulse ? "impulse" : missing_of_answer(note);
    case NOTE_WEATHER:
        return isnan(note->sea_state) && isnan(note->visibility_m) && isnan(note->depth_m) ? "sea_state"
                                                                                           : NULL;
    case NOTE_POSITION:
        return isnan(note->latitude_deg)    ? "latitude_deg"
               : isnan(note->longitude_deg) ? "longitude_deg"
                                            : NULL;
    case NOTE_MARK:
        return NULL;
    case NOTE_CORRECTION:
        return !*note->corrects ? "corrects" : NULL;
    case NOTE_REMARK:
        return !*note->text ? "text" : NULL;
    case NOTE_KIND_COUNT:
        break;
    }
    return "kind";
}

enum status note_check(const struct note *note, const char **out_missing)
{
    const char *missing = missing_of(note);
    if (missing && out_missing)
        *out_missing = missing;
    return missing ? STATUS_BAD_FORMAT : STATUS_OK;
}

void note_time_key(const struct note_field *field, char out[NOTE_NAME_SIZE])
{
    size_t length = strlen(field->name) - 2; /* "ns" */
    memcpy(out, field->name, length);
    memcpy(out + length, "s", 2);
}

const char *const *note_words(const char *field)
{
    for (size_t i = 0; i < sizeof fields / sizeof fields[0]; i++)
        if (strcmp(field, fields[i].name) == 0)
            return fields[i].form == NOTE_FORM_WORD ? fields[i].words : NULL;
    return NULL;
}

const char *note_kind_text(enum note_kind kind)
{
    return (unsigned)kind < NOTE_KIND_COUNT ? kind_words[kind] : "unknown";
}

bool note_kind_from_text(const char *text, enum note_kind *out)
{
    for (unsigned i = 0; i < NOTE_KIND_COUNT; i++)
        if (strcmp(text, kind_words[i]) == 0) {
            *out = (enum note_kind)i;
            return true;
        }
    return false;
}
