/* A person has said whose impulses are: the sums of the job are made again, from what they were when it began
 * and from its impulses, so that they are what they would have been had it been known from the start.
 * Findings that no longer hold stay, and are answered. See tally_inner.h. */
#include "rule/tally_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

/* Levels are kept to the 0.01 dB that entries have. */
static int16_t pack_db(double db)
{
    return fabs(db) < 327 ? (int16_t)lround(100 * db) : INT16_MIN;
}

static double unpack_db(int16_t packed)
{
    return packed == INT16_MIN ? NAN : packed / 100.0;
}

void tally_keep(struct tally *tally, uint32_t stream, uint32_t run, uint64_t counter,
                const struct impulse *impulse)
{
    struct sums *sums = &tally->sums[stream - 1];
    if (!*tally->job || sums->n_kept == TALLY_MAX_KEPT) {
        sums->n_beyond += *tally->job != '\0';
        return;
    }
    struct tally_kept *kept = &sums->kept[sums->n_kept++];
    *kept = (struct tally_kept){.time_ns = impulse->time_ns,
                                .counter = counter,
                                .order = tally->n_kept++,
                                .run = run,
                                .range_m = tally_range_m(tally, stream, impulse->channel),
                                .t90_s = impulse->t90_s,
                                .positive_impulse_pa_s = impulse->positive_impulse_pa_s,
                                .sel_db = pack_db(impulse->sel_db),
                                .peak_db = pack_db(impulse->peak_db),
                                .peak_to_peak_db = pack_db(impulse->peak_to_peak_db),
                                .rms90_db = pack_db(impulse->rms90_db),
                                .channel = (uint8_t)impulse->channel,
                                .n_bands = (uint8_t)impulse->n_bands,
                                .whose = (uint8_t)impulse->whose,
                                .refused = impulse->refused,
                                .relative = impulse->relative,
                                .clipped = impulse->clipped,
                                .overlapped = impulse->overlapped,
                                .weak = impulse->weak,
                                .beside = impulse->beside,
                                .quieting_on = tally->quieting_on};
    for (uint32_t b = 0; b < impulse->n_bands && b < LEVEL_MAX_BANDS; b++)
        kept->band_db[b] = pack_db(impulse->band_sel_db[b]);
}

static void unpack(const struct tally_kept *kept, struct impulse *out)
{
    *out = (struct impulse){.channel = kept->channel,
                            .time_ns = kept->time_ns,
                            .sel_db = unpack_db(kept->sel_db),
                            .peak_db = unpack_db(kept->peak_db),
                            .peak_to_peak_db = unpack_db(kept->peak_to_peak_db),
                            .rms90_db = unpack_db(kept->rms90_db),
                            .t90_s = kept->t90_s,
                            .positive_impulse_pa_s = kept->positive_impulse_pa_s,
                            .n_bands = kept->n_bands,
                            .refused = kept->refused,
                            .relative = kept->relative,
                            .clipped = kept->clipped,
                            .overlapped = kept->overlapped,
                            .weak = kept->weak,
                            .beside = kept->beside,
                            .whose = (enum impulse_whose)kept->whose};
    for (uint32_t b = 0; b < kept->n_bands && b < LEVEL_MAX_BANDS; b++)
        out->band_sel_db[b] = unpack_db(kept->band_db[b]);
}

/* The loss law that the blows show, from those of all streams in the order in which they became known. */
static void fit_again(struct tally *tally)
{
    uint32_t next[TALLY_MAX_STREAMS] = {0};
    tally_fit_begin_job(tally->fit);
    for (;;) {
        uint32_t first = UINT32_MAX;
        for (uint32_t i = 0; i < tally->setup.n_streams; i++) {
            const struct sums *sums = &tally->sums[i];
            if (next[i] < sums->n_kept &&
                (first == UINT32_MAX ||
                 sums->kept[next[i]].order < tally->sums[first].kept[next[first]].order))
                first = i;
        }
        if (first == UINT32_MAX)
            break;
        const struct tally_kept *kept = &tally->sums[first].kept[next[first]++];
        struct impulse impulse;
        unpack(kept, &impulse);
        if (impulse.whose == IMPULSE_OURS && !impulse.refused && !impulse.relative)
            tally_fit_push(tally->fit, first + 1, kept->range_m, &impulse);
    }
    (void)tally_fit_update(tally->fit);
    tally_set_laws(tally);
}

static void sum_again(struct tally *tally, uint32_t i)
{
    struct sums *sums = &tally->sums[i];
    struct impulse impulse;
    exposure_copy(sums->before_job, sums->exposure);
    for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
        tally_channel_begin_job(&sums->channels[c]);
    tally_limits_recount(&sums->limits);
    tally_warnings_recount(&sums->warnings);
    quieting_reset(&sums->quieting);
    for (uint32_t k = 0; k < sums->n_kept; k++) {
        unpack(&sums->kept[k], &impulse);
        (void)tally_sum(tally, i + 1, &impulse, sums->kept[k].range_m, sums->kept[k].quieting_on);
    }
    sums->changed = true;
}

/* ---- findings that no longer hold */
struct answering {
    struct tally *tally;
    uint32_t i;
    int64_t watch_ns;
    const char *note;
    const struct outcome_sink *sink;
};

static void answer(const struct answering *answering, struct tally_said *said, enum zone_grade now,
                   const char *code, const char *clause)
{
    struct finding_outcome finding = {.code = "finding answered", .grade = "firm", .n_causes = 2};
    struct tally_said unsaid;
    if (said->grade < ZONE_INDICATIVE || now >= said->grade)
        return;
    snprintf(finding.clause, sizeof finding.clause, "%s", clause);
    snprintf(finding.job, sizeof finding.job, "%s", answering->tally->job);
    snprintf(finding.detail, sizeof finding.detail, "finding %s, %.60s: with what was corrected it %s",
             said->id, code, now == ZONE_INDICATIVE ? "is only indicative" : "no longer holds");
    memcpy(finding.causes[0], said->id, sizeof finding.causes[0]);
    snprintf(finding.causes[1], sizeof finding.causes[1], "%s", answering->note);
    if (!answering->tally->silent)
        tally_say_finding(answering->tally, answering->i, answering->watch_ns, &finding, &unsaid,
                          answering->sink);
    *said = (struct tally_said){ZONE_NOTHING, ""};
}

/* How far beyond the zone a criterion is met by now: by ours alone, and with the others. */
static enum zone_grade zone_now(const struct answering *answering, uint32_t c, enum zone_grade *with_others)
{
    struct tally *tally = answering->tally;
    struct exposure *sums = tally->sums[answering->i].exposure;
    const struct criterion *criterion = &tally->setup.criteria->items[c];
    struct exposure_outcome exposure;
    struct zone_distance distance;
    struct together_reach reach;
    struct finding_outcome finding;
    *with_others = ZONE_NOTHING;
    if (tally_fill_exposure(sums, criterion, c, tally->setup.zone_edge_m, answering->watch_ns, &exposure) !=
            STATUS_OK ||
        !tally_zone_distance(tally, answering->i, &exposure, &distance))
        return ZONE_NOTHING;
    if (tally_fill_together(tally->together, sums, criterion, c, answering->watch_ns, &exposure, &reach) &&
        tally_together_finding(criterion, &reach, &tally->setup, tally->job, ZONE_NOTHING, &finding))
        *with_others = zone_grade_from_text(finding.grade);
    return zone_check_distance(&distance);
}

static void answer_all(const struct answering *answering)
{
    const struct criteria *criteria = answering->tally->setup.criteria;
    struct sums *sums = &answering->tally->sums[answering->i];
    char clause[FLOW_TEXT_SIZE];
    for (uint32_t l = 0; l < sums->limits.n; l++) {
        struct tally_limit *limit = &sums->limits.limits[l];
        tally_clause(&criteria->items[limit->criterion], clause);
        answer(answering, &limit->said, zone_check_limit(&limit->tally, &limit->limit).grade,
               TALLY_LIMIT_PASSED, clause);
    }
    for (uint32_t c = 0; c < criteria->n; c++)
        if (sums->said[c].grade >= ZONE_INDICATIVE || sums->said_together[c].grade >= ZONE_INDICATIVE) {
            enum zone_grade with_others, alone = zone_now(answering, c, &with_others);
            tally_clause(&criteria->items[c], clause);
            answer(answering, &sums->said[c], alone, TALLY_ZONE_TOO_SMALL, clause);
            answer(answering, &sums->said_together[c], with_others, TALLY_ZONE_TOO_SMALL_TOGETHER, clause);
        }
    bool falls = quieting_falls(&sums->quieting, NULL);
    answer(answering, &sums->falling, falls ? sums->falling.grade : ZONE_NOTHING, TALLY_QUIETING_FALLS, "");
}

/* Impulses beyond those that are kept stay as they were counted. */
static void say_beyond(const struct answering *answering)
{
    struct sums *sums = &answering->tally->sums[answering->i];
    struct finding_outcome finding = {.code = "correction incomplete", .grade = "firm", .n_causes = 1};
    struct tally_said unsaid;
    snprintf(finding.job, sizeof finding.job, "%s", answering->tally->job);
    snprintf(finding.detail, sizeof finding.detail,
             "the job has %u impulses more than the %u that can be counted again: its sums stay as they were",
             sums->n_beyond, TALLY_MAX_KEPT);
    snprintf(finding.causes[0], sizeof finding.causes[0], "%s", answering->note);
    if (!answering->tally->silent)
        tally_say_finding(answering->tally, answering->i, answering->watch_ns, &finding, &unsaid,
                          answering->sink);
}

/* Counters rise in a correction, and among what is kept of a run. */
static void mark(struct sums *sums, const struct correction_outcome *correction)
{
    uint32_t next = 0;
    for (uint32_t k = 0; k < sums->n_kept && next < correction->n; k++) {
        struct tally_kept *kept = &sums->kept[k];
        if (kept->run != correction->run || kept->counter != correction->counters[next])
            continue;
        kept->whose = (uint8_t)correction->whose;
        sums->corrected = true;
        next++;
    }
}

void tally_correct(struct tally *tally, const struct correction_outcome *correction, int64_t watch_ns,
                   const struct outcome_sink *sink)
{
    if (tally->setup.sound != SOUND_IMPULSIVE)
        return;
    if (correction->stream >= 1 && correction->stream <= tally->setup.n_streams)
        mark(&tally->sums[correction->stream - 1], correction);
    if (correction->n_following > 0)
        return;
    fit_again(tally);
    for (uint32_t i = 0; i < tally->setup.n_streams; i++) {
        const struct answering answering = {tally, i, watch_ns, correction->note, sink};
        if (!tally->sums[i].corrected)
            continue;
        tally->sums[i].corrected = false;
        if (tally->sums[i].n_beyond > 0) {
            say_beyond(&answering);
            continue;
        }
        sum_again(tally, i);
        answer_all(&answering);
    }
}
