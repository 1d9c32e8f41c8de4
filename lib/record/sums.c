/* Bodies of what the tally says: exposure against each criterion, and the three numbers of the source. */
#include "base/round.h"
#include "record/body.h"

enum status body_of_exposure(const struct outcome *outcome, struct text *out)
{
    const struct exposure_outcome *exposure = &outcome->as.exposure;
    struct body body;
    body_begin(&body, out);
    body_number(&body, "at_750_m_db", exposure->at_750_m_db, ROUND_DECIMALS_DB);
    body_integer(&body, "channel", exposure->channel);
    body_text(&body, "criteria", exposure->set);
    body_text(&body, "criterion", exposure->criterion);
    body_number(&body, "distance_high_m", exposure->distance_high_m, ROUND_DECIMALS_M);
    body_number(&body, "distance_low_m", exposure->distance_low_m, ROUND_DECIMALS_M);
    body_number(&body, "distance_m", exposure->distance_m, ROUND_DECIMALS_M);
    body_id(&body, outcome->run, outcome->stream, "exposure", outcome->counter);
    body_number(&body, "impulses_left", exposure->left, 0);
    body_text_or_null(&body, "job", exposure->job);
    body_number(&body, "level_db", exposure->level_db, ROUND_DECIMALS_DB);
    body_text(&body, "metric", exposure->metric);
    body_integer(&body, "n", exposure->n);
    body_bool(&body, "reached", exposure->reached);
    body_text(&body, "reference", exposure->reference);
    body_time(&body, "start_s", exposure->start_ns);
    body_integer(&body, "stream", exposure->stream);
    body_bool(&body, "unverified", exposure->unverified);
    body_number(&body, "value_db", exposure->value_db, ROUND_DECIMALS_DB);
    body_text(&body, "weighting", exposure->weighting);
    body_text(&body, "window", exposure->window);
    return body_end(&body);
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
    body_id(&body, outcome->run, outcome->stream, "source", outcome->counter);
    body_number(&body, "insertion_db", source->insertion_db, ROUND_DECIMALS_DB);
    body_number(&body, "insertion_high_db", source->insertion_high_db, ROUND_DECIMALS_DB);
    body_number(&body, "insertion_low_db", source->insertion_low_db, ROUND_DECIMALS_DB);
    body_text_or_null(&body, "job", source->job);
    body_text_or_null(&body, "model", source->model);
    body_number(&body, "n_db", source->n_db, ROUND_DECIMALS_DB);
    body_integer(&body, "n_impulses", source->n_impulses);
    body_number(&body, "peak_db", source->peak_db, ROUND_DECIMALS_DB);
    body_bool(&body, "quieting_on", source->quieting_on);
    body_number(&body, "range_m", source->range_m, ROUND_DECIMALS_M);
    body_text_or_null(&body, "reason", source->reason);
    body_number(&body, "sel_db", source->sel_db, ROUND_DECIMALS_DB);
    body_integer(&body, "stream", source->stream);
    return body_end(&body);
}
