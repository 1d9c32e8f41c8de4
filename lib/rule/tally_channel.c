/* What one channel heard of a job's own impulses; see tally_channel.h. */
#include "rule/tally_channel.h"
#include "base/student.h"
#include "base/units.h"
#include "rule/tally_fit.h"
#include "rule/tally_place.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

void tally_channel_begin_job(struct tally_channel *channel)
{
    double last_range_m = channel->last_range_m;
    enum range_from last_from = channel->last_from;
    memset(channel, 0, sizeof *channel);
    channel->last_range_m = last_range_m;
    channel->last_from = last_from;
}

bool tally_channel_counts(struct tally_channel *channel, const struct impulse *impulse)
{
    channel->changed = channel->changed || impulse->whose == IMPULSE_OURS;
    return tally_counts_take(&channel->counts, impulse);
}

bool tally_channel_heard(const struct tally_channel *channel)
{
    return channel->n_impulses + channel->counts.n_relative + channel->counts.n_refused > 0;
}

void tally_channel_add_energy(const struct impulse *impulse, double energy[LEVEL_MAX_BANDS])
{
    for (uint32_t b = 0; b < impulse->n_bands && b < LEVEL_MAX_BANDS; b++)
        if (isfinite(impulse->band_sel_db[b]))
            energy[b] += units_power_ratio(impulse->band_sel_db[b]);
}

void tally_channel_push(struct tally_channel *channel, const struct impulse *impulse, double range_m)
{
    bool highest = channel->n_impulses == 0 || impulse->peak_db > channel->peak_db;
    channel->peak_db = highest ? impulse->peak_db : channel->peak_db;
    channel->range_m[channel->n_impulses % TALLY_KEPT_IMPULSES] = (float)range_m;
    channel->sel_db[channel->n_impulses++ % TALLY_KEPT_IMPULSES] = (float)impulse->sel_db;
    tally_channel_add_energy(impulse, channel->energy);
}

void tally_channel_push_level(struct tally_channel *channel, const struct level *level, double range_m)
{
    channel->changed = true;
    channel->counts.n_relative += level->relative;
    if (level->relative || !isfinite(level->spl_db))
        return;
    bool highest = channel->n_impulses == 0 || level->peak_db > channel->peak_db;
    channel->peak_db = highest ? level->peak_db : channel->peak_db;
    channel->range_m[channel->n_impulses % TALLY_KEPT_IMPULSES] = (float)range_m;
    channel->sel_db[channel->n_impulses++ % TALLY_KEPT_IMPULSES] = (float)level->spl_db;
    for (uint32_t b = 0; b < level->n_bands && b < LEVEL_MAX_BANDS; b++)
        if (isfinite(level->band_db[b]))
            channel->energy[b] += units_power_ratio(level->band_db[b]);
}

bool tally_channel_band(const struct tally_channel *channel, double *out_low_hz, double *out_high_hz)
{
    return tally_fit_band(channel->energy, 0.1, 0.9, out_low_hz, out_high_hz);
}

static void fill_law(const struct source_law *law, const struct source_numbers *numbers,
                     struct source_outcome *out)
{
    double half_db = student_quantile(0.95, INFINITY) * numbers->n_spread_db;
    snprintf(out->model, sizeof out->model, "%s", numbers->model);
    out->n_db = numbers->n_db;
    out->n_low_db = numbers->n_db - half_db;
    out->n_high_db = numbers->n_db + half_db;
    out->fitted = law->is_fitted;
    if (law->is_fitted) {
        out->range_low_m = law->fitted.nearest_m;
        out->range_high_m = law->fitted.farthest_m;
    }
}

void tally_channel_fill(const struct tally_channel *channel, const struct source_measurement *measured,
                        const struct source_shape *shape, const struct source_law *law,
                        struct source_outcome *out)
{
    struct source_measurement measurement = *measured;
    struct source_numbers numbers;
    const bool seconds = measured->metric == METRIC_SPL;
    out->n_impulses = seconds ? 0 : channel->n_impulses;
    out->n_seconds = seconds ? channel->n_impulses : 0;
    tally_counts_fill(&channel->counts, out);
    measurement.level_db = tally_median_db(channel);
    out->sel_db = seconds ? NAN : measurement.level_db;
    out->spl_db = seconds ? measurement.level_db : NAN;
    uint32_t n_placed = tally_placed_median(channel, &law->loss, &measurement);
    out->range_m = measurement.range_m;
    out->peak_db = channel->n_impulses > 0 && isfinite(channel->peak_db) ? channel->peak_db : NAN;
    out->at_750_m_db = out->at_750_m_low_db = out->at_750_m_high_db = NAN;
    out->back_db = out->back_low_db = out->back_high_db = NAN;
    out->n_db = out->n_low_db = out->n_high_db = out->range_low_m = out->range_high_m = NAN;
    if (source_numbers_get(&measurement, shape, law, &numbers) != STATUS_OK) {
        snprintf(out->reason, sizeof out->reason,
                 seconds ? "no second with a level in dB re 1 uPa"
                         : "no impulse with a level in dB re 1 uPa");
        return;
    }
    if (numbers.at_750_m.known) {
        out->at_750_m_db = numbers.at_750_m.db;
        out->at_750_m_low_db = numbers.at_750_m.low_db;
        out->at_750_m_high_db = numbers.at_750_m.high_db;
    }
    if (numbers.back_calculated.known) {
        out->back_db = numbers.back_calculated.db;
        out->back_low_db = numbers.back_calculated.low_db;
        out->back_high_db = numbers.back_calculated.high_db;
    }
    const char *reason = numbers.at_750_m.known ? numbers.back_calculated.reason : numbers.at_750_m.reason;
    snprintf(out->reason, sizeof out->reason, "%s", reason);
    tally_say_range(channel, n_placed, out->reason);
    fill_law(law, &numbers, out);
}
