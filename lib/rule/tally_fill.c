/* One criterion's words and numbers; see tally_fill.h. */
#include "rule/tally_fill.h"
#include <math.h>
#include <stdio.h>

static double finite_or_nan(double x)
{
    return isfinite(x) ? x : NAN;
}

/* Writes one of the distances; returns what snprintf does. */
static int one_distance(double m, char out[16])
{
    if (isinf(m))
        return snprintf(out, 16, "beyond %.0f km", EXPOSURE_FARTHEST_M / 1000);
    if (m < 1000)
        return snprintf(out, 16, "%.0f m", m);
    return snprintf(out, 16, m < 9950 ? "%.1f km" : "%.0f km", m / 1000);
}

void tally_distance_text(double distance_m, double low_m, double high_m, char out[NOTE_NAME_SIZE])
{
    char middle[16], low[16], high[16];
    if (isnan(distance_m)) {
        snprintf(out, NOTE_NAME_SIZE, "unknown");
        return;
    }
    if (distance_m > 0)
        one_distance(distance_m, middle);
    else
        snprintf(middle, sizeof middle, "nowhere");
    if (isnan(low_m) || isnan(high_m) || !(high_m > 0) || isinf(low_m)) {
        snprintf(out, NOTE_NAME_SIZE, "%s", middle);
        return;
    }
    one_distance(low_m, low);
    one_distance(high_m, high);
    snprintf(out, NOTE_NAME_SIZE, "%s (%s to %s)", middle, low, high);
}

static void fill_criterion(const struct criterion *criterion, struct exposure_outcome *out)
{
    char weighting[WEIGHTING_NAME_SIZE] = "none";
    bool pressure = criterion->metric == METRIC_POSITIVE_IMPULSE;
    if (criterion->weighting)
        weighting_name(criterion->weighting, weighting);
    snprintf(out->set, sizeof out->set, "%s", criterion->set);
    snprintf(out->criterion, sizeof out->criterion, "%s", criterion->name);
    snprintf(out->metric, sizeof out->metric, "%s", criterion_metric_text(criterion->metric));
    snprintf(out->weighting, sizeof out->weighting, "%s", weighting);
    snprintf(out->window, sizeof out->window, "%s", criterion_window_text(criterion->window));
    snprintf(out->reference, sizeof out->reference, "%s", criterion_reference(criterion->metric));
    snprintf(out->effect, sizeof out->effect, "%s", criterion_effect_text(criterion->effect));
    out->limit_range_m = criterion->effect == EFFECT_LIMIT ? criterion->limit_range_m : NAN;
    out->value_db = pressure ? NAN : criterion->value;
    out->value_pa_s = pressure ? criterion->value : NAN;
    out->unverified = criterion_unverified(criterion);
}

static void fill_state(const struct exposure_state *state, bool pressure, struct exposure_outcome *out)
{
    out->level_db = pressure ? NAN : finite_or_nan(state->level_db);
    out->level_pa_s = pressure ? state->level_db : NAN;
    out->at_750_m_db = finite_or_nan(state->at_reference_db);
    out->n = (uint32_t)state->n;
    out->n_clipped = (uint32_t)state->n_clipped;
    out->n_quiet = (uint32_t)state->n_quiet;
    out->n_unweighted = (uint32_t)state->n_unweighted;
    out->n_without_range = (uint32_t)state->n_without_range;
    out->reached = state->reached;
    out->start_ns = state->first_ns;
}

enum status tally_fill_exposure(struct exposure *exposure, const struct criterion *criterion, uint32_t index,
                                double zone_edge_m, int64_t watch_ns, struct exposure_outcome *out)
{
    struct exposure_state state;
    struct exposure_distance distance;
    struct exposure_left left;
    if (exposure_get(exposure, index, watch_ns, &state) != STATUS_OK || state.first_ns < 0)
        return STATUS_NOT_FOUND;
    fill_criterion(criterion, out);
    fill_state(&state, criterion->metric == METRIC_POSITIVE_IMPULSE, out);
    out->distance_m = out->distance_low_m = out->distance_high_m = out->left = NAN;
    if (exposure_get_distance(exposure, index, criterion->flee_m_s, watch_ns, &distance) == STATUS_OK) {
        out->distance_m = distance.distance_m;
        out->distance_low_m = distance.low_m;
        out->distance_high_m = distance.high_m;
    }
    tally_distance_text(out->distance_m, out->distance_low_m, out->distance_high_m, out->distance);
    if (isfinite(zone_edge_m) &&
        exposure_get_left(exposure, index, zone_edge_m, criterion->flee_m_s, watch_ns, &left) == STATUS_OK)
        out->left = left.left;
    return STATUS_OK;
}
