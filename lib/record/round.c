/* An event as its entry will say it. */
#include "base/round.h"
#include "base/time.h"
#include "record/entry.h"

static void to(double *value, int decimals)
{
    *value = round_decimals(*value, decimals);
}

/* How many bytes the UTF-8 sequence (RFC 3629) at s takes; 0 when it is none. */
static size_t utf8_length(const unsigned char *s)
{
    size_t n = s[0] < 0x80 ? 1 : s[0] >= 0xc2 && s[0] < 0xe0 ? 2 : (s[0] & 0xf0) == 0xe0 ? 3 : 0;
    if (s[0] >= 0xf0 && s[0] <= 0xf4)
        n = 4;
    for (size_t i = 1; i < n; i++)
        if ((s[i] & 0xc0) != 0x80)
            return 0;
    unsigned char low = s[0] == 0xe0 ? 0xa0 : s[0] == 0xf0 ? 0x90 : 0x80;
    unsigned char high = s[0] == 0xed ? 0x9f : s[0] == 0xf4 ? 0x8f : 0xbf;
    if (n > 2 && (s[1] < low || s[1] > high))
        return 0;
    return n;
}

static void clean(char *text)
{
    unsigned char *s = (unsigned char *)text;
    while (*s) {
        size_t n = utf8_length(s);
        if (n == 0)
            *s = '?';
        s += n > 0 ? n : 1;
    }
}

static void round_unheard(struct unheard *unheard)
{
    to(&unheard->low_hz, ROUND_DECIMALS_HZ);
    to(&unheard->high_hz, ROUND_DECIMALS_HZ);
    unheard->start_ns = time_round_us(unheard->start_ns);
    unheard->end_ns = time_round_us(unheard->end_ns);
}

static void round_level(struct level *level)
{
    level->start_ns = time_round_us(level->start_ns);
    to(&level->seconds, ROUND_DECIMALS_S);
    to(&level->spl_db, ROUND_DECIMALS_DB);
    to(&level->peak_db, ROUND_DECIMALS_DB);
    to(&level->sel_db, ROUND_DECIMALS_DB);
    to(&level->fast_max_db, ROUND_DECIMALS_DB);
    to(&level->slow_max_db, ROUND_DECIMALS_DB);
    for (uint32_t b = 0; b < level->n_bands && b < LEVEL_MAX_BANDS; b++)
        to(&level->band_db[b], ROUND_DECIMALS_DB);
}

static void round_impulse(struct impulse *impulse)
{
    impulse->time_ns = time_round_us(impulse->time_ns);
    to(&impulse->sel_db, ROUND_DECIMALS_DB);
    to(&impulse->peak_db, ROUND_DECIMALS_DB);
    to(&impulse->peak_to_peak_db, ROUND_DECIMALS_DB);
    to(&impulse->rms90_db, ROUND_DECIMALS_DB);
    to(&impulse->t90_s, ROUND_DECIMALS_S);
    to(&impulse->background_db, ROUND_DECIMALS_DB);
    to(&impulse->effective_s, ROUND_DECIMALS_S);
    to(&impulse->kurtosis, ROUND_DECIMALS_KURTOSIS);
    to(&impulse->window_s, ROUND_DECIMALS_S);
    to(&impulse->positive_impulse_pa_s, ROUND_DECIMALS_PA_S);
    for (uint32_t b = 0; b < impulse->n_bands && b < LEVEL_MAX_BANDS; b++)
        to(&impulse->band_sel_db[b], ROUND_DECIMALS_DB);
    to(&impulse->range_m, ROUND_DECIMALS_M);
    clean(impulse->job);
}

static void round_call(struct call *call)
{
    clean(call->class_name);
    call->start_ns = time_round_us(call->start_ns);
    call->end_ns = time_round_us(call->end_ns);
    to(&call->low_hz, ROUND_DECIMALS_HZ);
    to(&call->high_hz, ROUND_DECIMALS_HZ);
    to(&call->interval_s, ROUND_DECIMALS_S);
    to(&call->snr_db, ROUND_DECIMALS_DB);
    to(&call->level_db, ROUND_DECIMALS_DB);
    to(&call->bearing_deg, ROUND_DECIMALS_DEG);
    to(&call->mirror_deg, ROUND_DECIMALS_DEG);
    to(&call->certainty, ROUND_DECIMALS_PROBABILITY);
    to(&call->evidence, ROUND_DECIMALS_EVIDENCE);
}

static void round_note(struct note *note)
{
    note->known_ns = time_round_us(note->known_ns);
    const struct note_field *field;
    for (unsigned i = 0; (field = note_field_at(i)) != NULL; i++) {
        char *member = (char *)note + field->offset;
        if (field->form == NOTE_FORM_TEXT || field->form == NOTE_FORM_WORD)
            clean(member);
        else if (field->form == NOTE_FORM_TIME)
            *(int64_t *)(void *)member = time_round_us(*(int64_t *)(void *)member);
        else if (field->form == NOTE_FORM_NUMBER)
            to((double *)member, field->decimals);
    }
}

static void round_position(struct position *position)
{
    position->occurred_ns = time_round_us(position->occurred_ns);
    to(&position->latitude_deg, ROUND_DECIMALS_POSITION);
    to(&position->longitude_deg, ROUND_DECIMALS_POSITION);
    to(&position->heading_deg, ROUND_DECIMALS_DEG);
    to(&position->course_deg, ROUND_DECIMALS_DEG);
    to(&position->speed_m_s, ROUND_DECIMALS_M_S);
    to(&position->accuracy_m, ROUND_DECIMALS_M);
}

void entry_round(struct event *event)
{
    event->known_ns = time_round_us(event->known_ns);
    switch (event->kind) {
    case EVENT_RUN:
        event->as.run_mark.outage_start_ns = time_round_us(event->as.run_mark.outage_start_ns);
        event->as.run_mark.outage_end_ns = time_round_us(event->as.run_mark.outage_end_ns);
        break;
    case EVENT_UNHEARD:
        round_unheard(&event->as.unheard);
        break;
    case EVENT_LEVEL:
        round_level(&event->as.level);
        break;
    case EVENT_IMPULSE:
        round_impulse(&event->as.impulse);
        break;
    case EVENT_CALL:
        round_call(&event->as.call);
        break;
    case EVENT_NOTE:
        round_note(&event->as.note);
        break;
    case EVENT_POSITION:
        round_position(&event->as.position);
        break;
    }
}
