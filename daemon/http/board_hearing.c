/* The board's text of what is heard: streams, levels, calls, impulses, unheard time, recording, faults. */
#include "base/round.h"
#include "base/time.h"
#include "base/units.h"
#include "call/certainty.h"
#include "http/board_json.h"
#include <math.h>

/* Of each class what was found, and by name how much was rejected: only counts above 0. */
static void accounts(struct text *text, const struct hearing_stream *stream)
{
    json_name(text, "classes");
    text_append(text, "[");
    for (uint32_t i = 0; i < stream->n_accounts; i++) {
        const struct class_account *account = &stream->accounts[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "class", account->name);
        if (account->group != GROUP_UNKNOWN)
            json_text(text, "group", group_text(account->group));
        json_flag(text, "hearable", account->hearable);
        json_number(text, "found", (double)account->n_found, 0);
        json_name(text, "rejected");
        text_append(text, "{");
        for (unsigned r = 0; r < REJECT_COUNT; r++)
            if (account->rejected[r] > 0)
                json_number(text, rejection_text((enum rejection)r), (double)account->rejected[r], 0);
        text_append(text, "}}");
    }
    text_append(text, "]");
}

static void streams(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "streams");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_streams; i++) {
        const struct hearing_stream *stream = &hearing->streams[i];
        json_next(text);
        text_append(text, "{");
        json_number(text, "stream", i + 1, 0);
        json_text(text, "name", stream->name);
        json_text(text, "input", stream->input);
        json_number(text, "rate_hz", stream->rate_hz, 1);
        json_number(text, "channels", stream->n_channels, 0);
        json_flag(text, "hearing", stream->hearing);
        json_text(text, "health", stream->health);
        json_time(text, "heard_s", stream->heard_ns);
        json_number(text, "block_age_s", stream->block_age_s, 3);
        json_number(text, "unheard_s", stream->unheard_s, 3);
        json_number(text, "masked_s", stream->masked_s, 3);
        accounts(text, stream);
        text_append(text, "}");
    }
    text_append(text, "]");
}

/* Of each group what listening can say of it, by the stream that hears most. */
static void groups(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "groups");
    text_append(text, "[");
    for (unsigned g = GROUP_UNKNOWN + 1; g < GROUP_COUNT; g++) {
        enum group_hearing best = GROUP_VISUAL_ONLY;
        for (uint32_t i = 0; i < hearing->n_streams; i++) {
            const struct hearing_stream *stream = &hearing->streams[i];
            enum group_hearing one =
                listen_group_hearing(stream->accounts, stream->n_accounts, (enum group)g);
            best = one < best ? one : best;
        }
        json_next(text);
        text_append(text, "{");
        json_text(text, "group", group_text((enum group)g));
        json_text(text, "hearing", group_hearing_text(best));
        text_append(text, "}");
    }
    text_append(text, "]");
}

/* Decades of ten decidecades each, from 10 Hz: few enough to read, and exact sums of what was measured. */
static void decades(struct text *text, const struct level *level)
{
    json_name(text, "decades");
    text_append(text, "[");
    for (uint32_t first = 0; first < level->n_bands; first += 10) {
        double sum_db = NAN;
        for (uint32_t i = first; i < first + 10 && i < level->n_bands; i++)
            if (isfinite(level->band_db[i]))
                sum_db = isnan(sum_db) ? level->band_db[i] : units_sum_db(sum_db, level->band_db[i]);
        json_next(text);
        text_append(text, "{");
        json_number(text, "low_hz", pow(10, 1 + first / 10.0 - 0.05), 1);
        uint32_t end = first + 10 < level->n_bands ? first + 10 : level->n_bands;
        json_number(text, "high_hz", pow(10, 1 + end / 10.0 - 0.05), 1);
        json_number(text, "spl_db", sum_db, 2);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void research(struct text *text, const struct hearing_research *research)
{
    bool known = isfinite(research->kurtosis);
    json_name(text, "research");
    text_append(text, "{");
    json_number(text, "kurtosis", research->kurtosis, ROUND_DECIMALS_KURTOSIS);
    json_number(text, "boundary", MOMENTS_IMPULSIVE, 0);
    json_number(text, "window_s", known ? research->window_s : NAN, 1);
    json_number(text, "high_hz", known ? research->high_hz : NAN, ROUND_DECIMALS_HZ);
    json_number(text, "sel_db", known ? research->sel_db : NAN, ROUND_DECIMALS_DB);
    json_number(text, "adjusted_sel_db", known ? research->adjusted_db : NAN, ROUND_DECIMALS_DB);
    text_append(text, "}");
}

static void levels(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "levels");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_levels; i++) {
        const struct level *level = &hearing->levels[i].level;
        json_next(text);
        text_append(text, "{");
        json_number(text, "stream", hearing->levels[i].stream, 0);
        json_number(text, "channel", level->channel, 0);
        json_time(text, "start_s", level->start_ns);
        json_number(text, "seconds", level->seconds, 3);
        json_number(text, "spl_db", level->spl_db, 2);
        json_number(text, "peak_db", level->peak_db, 2);
        json_flag(text, "relative", level->relative);
        decades(text, level);
        research(text, &hearing->levels[i].research);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void one_call(struct text *text, const struct hearing_call *heard)
{
    const struct call *call = &heard->call;
    text_append(text, "{");
    json_text(text, "id", heard->id);
    json_number(text, "stream", heard->stream, 0);
    json_number(text, "channel", call->channel, 0);
    json_text(text, "class", call->class_name);
    json_text(text, "group", group_text(call->group));
    json_text(text, "form", call_form_text(call->form));
    json_time(text, "start_s", call->start_ns);
    json_time(text, "end_s", call->end_ns);
    json_number(text, "low_hz", call->low_hz, 1);
    json_number(text, "high_hz", call->high_hz, 1);
    json_number(text, "n_pulses", call->n_pulses, 0);
    json_number(text, "interval_s", call->interval_s, 6);
    json_number(text, "snr_db", call->snr_db, 2);
    json_number(text, "level_db", call->level_db, 2);
    json_flag(text, "relative", call->relative);
    json_number(text, "bearing_deg", call->bearing_deg, 1);
    json_number(text, "mirror_deg", call->mirror_deg, 1);
    json_text(text, "bearing_from", bearing_from_text(call->bearing_from));
    json_text(text, "certainty", certainty_text(call->certainty));
    text_append(text, "}");
}

/* Sounds in the newest n steps; what is older than the view's time is left out. */
static double sounds_in(const struct hearing_sound *sound, int64_t now_step, int64_t n)
{
    double sum = 0;
    for (int64_t step = now_step - n + 1; step <= now_step; step++)
        if (step >= 0 && step <= sound->step && step > sound->step - BOARD_SOUND_STEPS)
            sum += sound->counts[step % BOARD_SOUND_STEPS];
    return sum;
}

void board_json_sounds(struct text *text, const struct hearing_view *hearing, int64_t watch_ns)
{
    int64_t now_step = watch_ns / (BOARD_SOUND_STEP_S * TIME_NS_PER_S);
    json_name(text, "sounds");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_sounds; i++) {
        const struct hearing_sound *sound = &hearing->sounds[i];
        json_next(text);
        text_append(text, "{");
        json_text(text, "class", sound->class_name);
        json_number(text, "last_hour", sounds_in(sound, now_step, 3600 / BOARD_SOUND_STEP_S), 0);
        json_number(text, "last_day", sounds_in(sound, now_step, BOARD_SOUND_STEPS), 0);
        json_number(text, "run", (double)sound->n, 0);
        json_number(text, "calls_taken_back", (double)sound->n_against, 0);
        json_time(text, "last_s", sound->last_ns);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void one_impulse(struct text *text, const struct hearing_impulse *heard)
{
    const struct impulse *impulse = &heard->impulse;
    text_append(text, "{");
    json_text(text, "id", heard->id);
    json_number(text, "stream", heard->stream, 0);
    json_number(text, "channel", impulse->channel, 0);
    json_time(text, "time_s", impulse->time_ns);
    json_number(text, "sel_db", impulse->sel_db, 2);
    json_number(text, "peak_db", impulse->peak_db, 2);
    json_number(text, "rms90_db", impulse->rms90_db, 2);
    json_number(text, "t90_s", impulse->t90_s, 6);
    json_flag(text, "relative", impulse->relative);
    json_flag(text, "clipped", impulse->clipped);
    json_flag(text, "overlapped", impulse->overlapped);
    json_flag(text, "weak", impulse->weak);
    json_flag(text, "refused", impulse->refused);
    json_text(text, "whose", impulse_whose_text(impulse->whose));
    json_text(text, "job", impulse->job);
    text_append(text, "}");
}

static void sounds(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "calls");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_calls; i++) {
        json_next(text);
        one_call(text, &hearing->calls[i]);
    }
    text_append(text, "]");
    json_name(text, "impulses");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_impulses; i++) {
        json_next(text);
        one_impulse(text, &hearing->impulses[i]);
    }
    text_append(text, "]");
}

static void unheard_time(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "unheard");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_unheard; i++) {
        const struct unheard *unheard = &hearing->unheard[i].unheard;
        json_next(text);
        text_append(text, "{");
        json_number(text, "stream", hearing->unheard[i].stream, 0);
        json_number(text, "channel", unheard->channel, 0);
        json_number(text, "low_hz", unheard->low_hz, 1);
        json_number(text, "high_hz", unheard->high_hz, 1);
        json_time(text, "start_s", unheard->start_ns);
        json_time(text, "end_s", unheard->end_ns);
        json_text(text, "cause", unheard_cause_text(unheard->cause));
        text_append(text, "}");
    }
    text_append(text, "]");
}

void board_json_hearing(struct text *text, const struct hearing_view *hearing)
{
    streams(text, hearing);
    groups(text, hearing);
    levels(text, hearing);
    sounds(text, hearing);
    unheard_time(text, hearing);
    board_json_sums(text, hearing);
    json_name(text, "recording");
    text_append(text, "{");
    json_flag(text, "recording", hearing->recording);
    json_text(text, "text", hearing->recording_text);
    json_number(text, "entry", (double)hearing->committed_seq, 0);
    json_time(text, "committed_s", hearing->committed_ns);
    text_append(text, "}");
    json_name(text, "faults");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_faults; i++) {
        json_next(text);
        text_json_string(text, hearing->faults[i]);
    }
    text_append(text, "]");
}
