/* What the tally sums, and what counts as said; see tally_inner.h. */
#include "base/time.h"
#include "rule/tally_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

double tally_set_range(struct tally *tally, uint32_t stream, uint32_t channel, double said_m,
                       enum range_from said_from)
{
    struct tally_channel *heard = &tally->sums[stream - 1].channels[channel - 1];
    heard->last_from = said_from;
    heard->last_range_m = said_from != RANGE_UNSET ? said_m : tally->setup.range_m[stream - 1][channel - 1];
    return heard->last_range_m;
}

double tally_range_m(const struct tally *tally, uint32_t stream, uint32_t channel)
{
    const struct tally_channel *heard = &tally->sums[stream - 1].channels[channel - 1];
    return heard->last_from != RANGE_UNSET ? heard->last_range_m
                                           : tally->setup.range_m[stream - 1][channel - 1];
}

bool tally_sum(struct tally *tally, uint32_t stream, const struct impulse *impulse, double range_m,
               bool quieting_on)
{
    struct sums *sums = &tally->sums[stream - 1];
    struct exposure_sound sound;
    struct tally_channel *channel = &sums->channels[impulse->channel - 1];
    bool counts = tally_channel_counts(channel, impulse);
    if (counts && impulse->beside)
        tally_channel_push(channel, impulse, range_m);
    if (impulse->whose != IMPULSE_OURS || impulse->beside)
        return counts; /* of a blow that counts the reference channel has the level */
    sums->changed = true;
    if (!counts) {
        sums->channel = sums->channel ? sums->channel : impulse->channel;
        return false;
    }
    exposure_of_impulse(impulse, impulse->n_bands, impulse->band_sel_db, range_m, &sound);
    if (exposure_push(sums->exposure, &sound) != STATUS_OK)
        return counts;
    sums->channel = impulse->channel;
    tally_channel_push(channel, impulse, range_m);
    const struct tally_move move = {.role = tally->setup.role[stream - 1][impulse->channel - 1],
                                    .range_m = range_m,
                                    .law = tally_law_of_impulse(tally, impulse),
                                    .level_spread_db = tally->setup.level_spread_db};
    tally_limits_push(&sums->limits, impulse, &move);
    tally_warnings_push(&sums->warnings, impulse, &move);
    struct quieting_impulse quieted = {
        .on = quieting_on, .sel_db = impulse->sel_db, .energy_kj = NAN, .n_bands = impulse->n_bands};
    memcpy(quieted.band_db, impulse->band_sel_db, sizeof quieted.band_db);
    (void)quieting_push(&sums->quieting, &quieted); /* a level that is not finite says nothing of it */
    return counts;
}

/* The one channel of a stream whose seconds are summed. */
static bool is_reference(const struct tally *tally, uint32_t stream, uint32_t channel)
{
    uint32_t reference = tally->setup.reference[stream - 1], first = tally->sums[stream - 1].channel;
    return reference ? channel == reference : !first || channel == first;
}

void tally_take_level(struct tally *tally, uint32_t stream, const struct level *level)
{
    struct sums *sums = &tally->sums[stream - 1];
    struct exposure_sound sound;
    /* By its own time: seconds that come in again from a ledger come a minute late. */
    const bool before_job = level->start_ns < tally->job_ns;
    const bool reference = is_reference(tally, stream, level->channel);
    if (tally->setup.sound != SOUND_CONTINUOUS || level->channel < 1 || level->channel > FLOW_MAX_CHANNELS ||
        !(reference || tally->setup.role[stream - 1][level->channel - 1] != ROLE_LISTEN) ||
        !tally_sounding_in(&tally->sounding, level->start_ns, level->start_ns + time_from_s(level->seconds)))
        return;
    double range_m = tally_set_range(tally, stream, level->channel, level->range_m, level->range_from);
    if (!before_job)
        tally_channel_push_level(&sums->channels[level->channel - 1], level, range_m);
    if (!reference || level->relative)
        return;
    exposure_of_level(level, range_m, &sound);
    sound.before_job = before_job;
    if (exposure_push(sums->exposure, &sound) != STATUS_OK)
        return;
    sums->channel = level->channel;
    sums->changed = true;
}

void tally_take_other(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink)
{
    const struct note *note = &outcome->as.event.as.note;
    struct finding_outcome finding = {.code = "note without effect", .grade = "firm", .n_causes = 1};
    struct tally_said unsaid;
    bool on = strcmp(note->answer, "on") == 0;
    if (tally->together && together_switch(tally->together, note->text, on, outcome->watch_ns) > 0) {
        for (uint32_t i = 0; i < tally->setup.n_streams; i++)
            tally->sums[i].changed = tally->sums[i].changed || tally->sums[i].channel > 0;
        return;
    }
    snprintf(finding.job, sizeof finding.job, "%s", tally->job);
    snprintf(finding.detail, sizeof finding.detail, "'%.60s' is no other source of the settings", note->text);
    flow_id(outcome->run, outcome->stream, "note", outcome->counter, finding.causes[0]);
    if (!tally->silent)
        tally_say_finding(tally, 0, outcome->watch_ns, &finding, &unsaid, sink);
}

void tally_begin_job(struct tally *tally, const char *job, int64_t watch_ns)
{
    tally->job_ns = watch_ns;
    tally_fit_begin_job(tally->fit);
    tally_set_laws(tally);
    snprintf(tally->job, sizeof tally->job, "%.*s", IMPULSE_JOB_SIZE - 1, job);
    for (uint32_t i = 0; i < tally->setup.n_streams; i++) {
        struct sums *sums = &tally->sums[i];
        exposure_begin_job(sums->exposure);
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
            tally_channel_begin_job(&sums->channels[c]);
        if (sums->before_job)
            exposure_copy(sums->exposure, sums->before_job);
        sums->n_kept = sums->n_beyond = 0;
        tally_limits_begin_job(&sums->limits);
        quieting_reset(&sums->quieting);
        sums->falling = (struct tally_said){ZONE_NOTHING, ""};
        memset(sums->said, 0, sizeof sums->said);
        memset(sums->said_together, 0, sizeof sums->said_together);
    }
}

bool tally_wants_levels(const struct tally *tally)
{
    return tally->setup.sound == SOUND_CONTINUOUS;
}

void tally_set_silent(struct tally *tally, bool silent)
{
    tally->silent = silent;
}

void tally_set_said(struct tally *tally, const struct outcome *outcome)
{
    const struct finding_outcome *finding = &outcome->as.finding;
    if (outcome->stream < 1 || outcome->stream > tally->setup.n_streams ||
        strcmp(finding->job, tally->job) != 0)
        return;
    struct sums *sums = &tally->sums[outcome->stream - 1];
    struct tally_said said = {zone_grade_from_text(finding->grade), ""};
    flow_id(outcome->run, outcome->stream, "finding", outcome->counter, said.id);
    if (strcmp(finding->code, TALLY_QUIETING_FALLS) == 0)
        sums->falling = said;
    tally_limits_set_said(&sums->limits, tally->setup.criteria, finding, &said);
    for (uint32_t c = 0; c < tally->setup.criteria->n; c++)
        if (tally_is_zone_finding(&tally->setup.criteria->items[c], finding))
            sums->said[c] = said;
        else if (tally_is_together_finding(&tally->setup.criteria->items[c], finding))
            sums->said_together[c] = said;
}
