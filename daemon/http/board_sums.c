/* The board's text of what the source's sound adds up to: exposure against each criterion, the source's three
 * numbers. */
#include "base/round.h"
#include "http/board_json.h"

static void exposure(struct text *text, const struct exposure_outcome *exposure)
{
    json_next(text);
    text_append(text, "{");
    json_number(text, "stream", exposure->stream, 0);
    json_number(text, "channel", exposure->channel, 0);
    json_text(text, "job", exposure->job);
    json_text(text, "criteria", exposure->set);
    json_text(text, "criterion", exposure->criterion);
    json_text(text, "metric", exposure->metric);
    json_text(text, "weighting", exposure->weighting);
    json_text(text, "window", exposure->window);
    json_text(text, "reference", exposure->reference);
    json_text(text, "effect", exposure->effect);
    json_number(text, "limit_range_m", exposure->limit_range_m, ROUND_DECIMALS_M);
    json_number(text, "value_pa_s", exposure->value_pa_s, ROUND_DECIMALS_PA_S);
    json_number(text, "level_pa_s", exposure->level_pa_s, ROUND_DECIMALS_PA_S);
    json_text(text, "distance", exposure->distance);
    json_number(text, "n_clipped", exposure->n_clipped, 0);
    json_number(text, "n_quiet", exposure->n_quiet, 0);
    json_number(text, "n_unweighted", exposure->n_unweighted, 0);
    json_number(text, "n_without_range", exposure->n_without_range, 0);
    json_number(text, "value_db", exposure->value_db, ROUND_DECIMALS_DB);
    json_number(text, "level_db", exposure->level_db, ROUND_DECIMALS_DB);
    json_number(text, "at_750_m_db", exposure->at_750_m_db, ROUND_DECIMALS_DB);
    json_number(text, "distance_m", exposure->distance_m, ROUND_DECIMALS_M);
    json_number(text, "distance_low_m", exposure->distance_low_m, ROUND_DECIMALS_M);
    json_number(text, "distance_high_m", exposure->distance_high_m, ROUND_DECIMALS_M);
    json_text(text, "together", exposure->together);
    json_number(text, "together_m", exposure->together_m, ROUND_DECIMALS_M);
    json_number(text, "together_low_m", exposure->together_low_m, ROUND_DECIMALS_M);
    json_number(text, "together_high_m", exposure->together_high_m, ROUND_DECIMALS_M);
    json_number(text, "together_middle_m", exposure->together_middle_m, ROUND_DECIMALS_M);
    json_number(text, "together_bearing_deg", exposure->together_bearing_deg, ROUND_DECIMALS_DEG);
    json_number(text, "islands", exposure->islands, 0);
    json_number(text, "n", exposure->n, 0);
    json_flag(text, "reached", exposure->reached);
    json_number(text, "impulses_left", exposure->left, 0);
    json_flag(text, "unverified", exposure->unverified);
    text_append(text, "}");
}

static void bands(struct text *text, const char *name, const double *bands_db, uint32_t n)
{
    json_name(text, name);
    text_append(text, "[");
    for (uint32_t i = 0; i < n && i < LEVEL_MAX_BANDS; i++) {
        text_append(text, i > 0 ? "," : "");
        text_json_number(text, bands_db[i], ROUND_DECIMALS_DB);
    }
    text_append(text, "]");
}

static void quieting(struct text *text, const struct source_outcome *source)
{
    bands(text, "insertion_bands_db", source->insertion_band_db, source->n_insertion_bands);
    bands(text, "insertion_bands_low_db", source->insertion_band_low_db, source->n_insertion_bands);
    bands(text, "insertion_bands_high_db", source->insertion_band_high_db, source->n_insertion_bands);
    json_number(text, "quieting_falls_db", source->quieting_falls_db, ROUND_DECIMALS_DB);
    json_number(text, "n_quieting_off", source->n_quieting_off, 0);
    json_number(text, "n_quieting_on", source->n_quieting_on, 0);
    json_name(text, "reductions");
    text_append(text, "[");
    for (uint32_t i = 0; i < source->n_reductions && i < FLOW_MAX_REDUCTIONS; i++) {
        json_next(text);
        text_append(text, "{");
        json_text(text, "weighting", source->reductions[i].weighting);
        json_number(text, "db", source->reductions[i].db, ROUND_DECIMALS_DB);
        json_number(text, "low_db", source->reductions[i].low_db, ROUND_DECIMALS_DB);
        json_number(text, "high_db", source->reductions[i].high_db, ROUND_DECIMALS_DB);
        text_append(text, "}");
    }
    text_append(text, "]");
}

static void counts(struct text *text, const struct source_outcome *source)
{
    json_number(text, "n_clipped", source->n_clipped, 0);
    json_number(text, "n_overlapped", source->n_overlapped, 0);
    json_number(text, "n_weak", source->n_weak, 0);
    json_number(text, "n_other", source->n_other, 0);
    json_number(text, "n_unknown", source->n_unknown, 0);
    json_number(text, "n_relative", source->n_relative, 0);
    json_number(text, "n_refused", source->n_refused, 0);
}

static void source(struct text *text, const struct source_outcome *source)
{
    json_next(text);
    text_append(text, "{");
    json_number(text, "stream", source->stream, 0);
    json_number(text, "channel", source->channel, 0);
    json_text(text, "job", source->job);
    json_number(text, "n_impulses", source->n_impulses, 0);
    json_number(text, "n_seconds", source->n_seconds, 0);
    json_number(text, "spl_db", source->spl_db, ROUND_DECIMALS_DB);
    json_number(text, "range_m", source->range_m, ROUND_DECIMALS_M);
    json_number(text, "sel_db", source->sel_db, ROUND_DECIMALS_DB);
    json_number(text, "peak_db", source->peak_db, ROUND_DECIMALS_DB);
    json_number(text, "at_750_m_db", source->at_750_m_db, ROUND_DECIMALS_DB);
    json_number(text, "at_750_m_low_db", source->at_750_m_low_db, ROUND_DECIMALS_DB);
    json_number(text, "at_750_m_high_db", source->at_750_m_high_db, ROUND_DECIMALS_DB);
    json_number(text, "back_db", source->back_db, ROUND_DECIMALS_DB);
    json_number(text, "back_low_db", source->back_low_db, ROUND_DECIMALS_DB);
    json_number(text, "back_high_db", source->back_high_db, ROUND_DECIMALS_DB);
    json_number(text, "insertion_db", source->insertion_db, ROUND_DECIMALS_DB);
    json_number(text, "insertion_low_db", source->insertion_low_db, ROUND_DECIMALS_DB);
    json_number(text, "insertion_high_db", source->insertion_high_db, ROUND_DECIMALS_DB);
    json_flag(text, "quieting_on", source->quieting_on);
    quieting(text, source);
    json_text(text, "warning", source->warning);
    counts(text, source);
    json_text(text, "model", source->model);
    json_number(text, "n_db", source->n_db, ROUND_DECIMALS_DB);
    json_number(text, "n_low_db", source->n_low_db, ROUND_DECIMALS_DB);
    json_number(text, "n_high_db", source->n_high_db, ROUND_DECIMALS_DB);
    json_flag(text, "fitted", source->fitted);
    json_number(text, "range_low_m", source->range_low_m, ROUND_DECIMALS_M);
    json_number(text, "range_high_m", source->range_high_m, ROUND_DECIMALS_M);
    json_text(text, "reason", source->reason);
    text_append(text, "}");
}

void board_json_sums(struct text *text, const struct hearing_view *hearing)
{
    json_name(text, "curve");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_curve; i++) {
        text_format(text, "%s[%lld,", i ? "," : "", (long long)hearing->curve_step[i] * BOARD_CURVE_STEP_S);
        text_json_number(text, (double)hearing->curve_sel_db[i], 1);
        text_append(text, ",");
        text_json_number(text, (double)hearing->curve_peak_db[i], 1);
        text_append(text, "]");
    }
    text_append(text, "]");
    json_name(text, "exposures");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_exposures; i++)
        exposure(text, &hearing->exposures[i]);
    text_append(text, "]");
    json_name(text, "sources");
    text_append(text, "[");
    for (uint32_t i = 0; i < hearing->n_sources; i++)
        source(text, &hearing->sources[i]);
    text_append(text, "]");
}
