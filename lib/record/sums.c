/* Bodies of what the tally says: exposure against each criterion, and the three numbers of the source. */
#include "base/round.h"
#include "record/body.h"
#include <math.h>

enum status body_of_exposure(const struct outcome *outcome, struct text *out)
{
    const struct exposure_outcome *exposure = &outcome->as.exposure;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "at_750_m_db", exposure->at_750_m_db, ROUND_DECIMALS_DB);
    body_integer(&body, "channel", exposure->channel);
    body_text(&body, "criteria", exposure->set);
    body_text(&body, "criterion", exposure->criterion);
    body_text(&body, "distance", exposure->distance);
    body_number(&body, "distance_high_m", exposure->distance_high_m, ROUND_DECIMALS_M);
    body_number(&body, "distance_low_m", exposure->distance_low_m, ROUND_DECIMALS_M);
    body_number(&body, "distance_m", exposure->distance_m, ROUND_DECIMALS_M);
    body_text(&body, "effect", exposure->effect);
    body_id(&body, outcome->run, outcome->stream, "exposure", outcome->counter);
    body_number(&body, "impulses_left", exposure->left, 0);
    body_number(&body, "islands", isnan(exposure->together_m) ? (double)NAN : exposure->islands, 0);
    body_text_or_null(&body, "job", exposure->job);
    body_number(&body, "level_db", exposure->level_db, ROUND_DECIMALS_DB);
    body_number(&body, "level_pa_s", exposure->level_pa_s, ROUND_DECIMALS_PA_S);
    body_number(&body, "limit_range_m", exposure->limit_range_m, ROUND_DECIMALS_M);
    body_text(&body, "metric", exposure->metric);
    body_integer(&body, "n", exposure->n);
    body_integer(&body, "n_clipped", exposure->n_clipped);
    body_integer(&body, "n_quiet", exposure->n_quiet);
    body_integer(&body, "n_unweighted", exposure->n_unweighted);
    body_integer(&body, "n_without_range", exposure->n_without_range);
    body_bool(&body, "reached", exposure->reached);
    body_text(&body, "reference", exposure->reference);
    body_time(&body, "start_s", exposure->start_ns);
    body_integer(&body, "stream", exposure->stream);
    body_text_or_null(&body, "together", exposure->together);
    body_number(&body, "together_bearing_deg", exposure->together_bearing_deg, ROUND_DECIMALS_DEG);
    body_number(&body, "together_high_m", exposure->together_high_m, ROUND_DECIMALS_M);
    body_number(&body, "together_low_m", exposure->together_low_m, ROUND_DECIMALS_M);
    body_number(&body, "together_m", exposure->together_m, ROUND_DECIMALS_M);
    body_number(&body, "together_middle_m", exposure->together_middle_m, ROUND_DECIMALS_M);
    body_bool(&body, "unverified", exposure->unverified);
    body_number(&body, "value_db", exposure->value_db, ROUND_DECIMALS_DB);
    body_number(&body, "value_pa_s", exposure->value_pa_s, ROUND_DECIMALS_PA_S);
    body_text(&body, "weighting", exposure->weighting);
    body_text(&body, "window", exposure->window);
    return body_end(&body);
}

static void put_reductions(struct body *body, const struct source_outcome *source)
{
    body_key(body, "reductions");
    text_append(body->out, "[");
    for (uint32_t i = 0; i < source->n_reductions && i < FLOW_MAX_REDUCTIONS; i++) {
        const struct source_reduction *reduction = &source->reductions[i];
        struct body object = {.out = body->out};
        text_append(body->out, i > 0 ? ",{" : "{");
        body_number(&object, "db", reduction->db, ROUND_DECIMALS_DB);
        body_number(&object, "high_db", reduction->high_db, ROUND_DECIMALS_DB);
        body_number(&object, "low_db", reduction->low_db, ROUND_DECIMALS_DB);
        body_text(&object, "weighting", reduction->weighting);
        body_object_end(&object);
    }
    text_append(body->out, "]");
}

static void put_counts(struct body *body, const struct source_outcome *source)
{
    body_integer(body, "n_other", source->n_other);
    body_integer(body, "n_overlapped", source->n_overlapped);
    body_integer(body, "n_quieting_off", source->n_quieting_off);
    body_integer(body, "n_quieting_on", source->n_quieting_on);
    body_integer(body, "n_refused", source->n_refused);
    body_integer(body, "n_relative", source->n_relative);
    body_integer(body, "n_seconds", source->n_seconds);
    body_integer(body, "n_unknown", source->n_unknown);
    body_integer(body, "n_weak", source->n_weak);
}

enum status body_of_source(const struct outcome *outcome, struct text *out)
{
    const struct source_outcome *source = &outcome->as.source;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "at_750_m_db", source->at_750_m_db, ROUND_DECIMALS_DB);
    body_number(&body, "at_750_m_high_db", source->at_750_m_high_db, ROUND_DECIMALS_DB);
    body_number(&body, "at_750_m_low_db", source->at_750_m_low_db, ROUND_DECIMALS_DB);
    body_number(&body, "back_db", source->back_db, ROUND_DECIMALS_DB);
    body_number(&body, "back_high_db", source->back_high_db, ROUND_DECIMALS_DB);
    body_number(&body, "back_low_db", source->back_low_db, ROUND_DECIMALS_DB);
    body_integer(&body, "channel", source->channel);
    body_bool(&body, "fitted", source->fitted);
    body_id(&body, outcome->run, outcome->stream, "source", outcome->counter);
    body_decibels(&body, "insertion_bands_db", source->insertion_band_db, source->n_insertion_bands);
    body_decibels(&body, "insertion_bands_high_db", source->insertion_band_high_db,
                  source->n_insertion_bands);
    body_decibels(&body, "insertion_bands_low_db", source->insertion_band_low_db, source->n_insertion_bands);
    body_number(&body, "insertion_db", source->insertion_db, ROUND_DECIMALS_DB);
    body_number(&body, "insertion_high_db", source->insertion_high_db, ROUND_DECIMALS_DB);
    body_number(&body, "insertion_low_db", source->insertion_low_db, ROUND_DECIMALS_DB);
    body_text_or_null(&body, "job", source->job);
    body_text_or_null(&body, "model", source->model);
    body_integer(&body, "n_clipped", source->n_clipped);
    body_number(&body, "n_db", source->n_db, ROUND_DECIMALS_DB);
    body_number(&body, "n_high_db", source->n_high_db, ROUND_DECIMALS_DB);
    body_integer(&body, "n_impulses", source->n_impulses);
    body_number(&body, "n_low_db", source->n_low_db, ROUND_DECIMALS_DB);
    put_counts(&body, source);
    body_number(&body, "peak_db", source->peak_db, ROUND_DECIMALS_DB);
    body_number(&body, "quieting_falls_db", source->quieting_falls_db, ROUND_DECIMALS_DB);
    body_bool(&body, "quieting_on", source->quieting_on);
    body_number(&body, "range_high_m", source->range_high_m, ROUND_DECIMALS_M);
    body_number(&body, "range_low_m", source->range_low_m, ROUND_DECIMALS_M);
    body_number(&body, "range_m", source->range_m, ROUND_DECIMALS_M);
    body_text_or_null(&body, "reason", source->reason);
    put_reductions(&body, source);
    body_number(&body, "sel_db", source->sel_db, ROUND_DECIMALS_DB);
    body_number(&body, "spl_db", source->spl_db, ROUND_DECIMALS_DB);
    body_integer(&body, "stream", source->stream);
    body_text_or_null(&body, "warning", source->warning);
    return body_end(&body);
}
