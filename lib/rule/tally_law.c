/* Which loss law moves which levels: the one fitted to the job's own blows where it covers their band, else
 * the one that was set. */
#include "rule/tally_inner.h"
#include <math.h>

static struct source_law set_law(const struct tally_setup *setup)
{
    return (struct source_law){.metric = setup->sound == SOUND_CONTINUOUS ? METRIC_SPL : METRIC_SEL_SINGLE,
                               .low_hz = 1,
                               .high_hz = 1e6,
                               .loss = {.law = LOSS_POWER, .n_db = setup->loss_n_db},
                               .n_spread_db = setup->loss_n_spread_db,
                               .scatter_db = setup->scatter_db};
}

void tally_set_laws(struct tally *tally)
{
    const struct source_law *fitted = tally_fit_get(tally->fit);
    struct source_sea *sea = &tally->sea;
    *sea =
        (struct source_sea){.has_water = true, .water = tally->setup.water, .n_db = tally->setup.loss_n_db};
    if (fitted)
        sea->laws[sea->n_laws++] = *fitted;
    sea->laws[sea->n_laws++] = set_law(&tally->setup);
    const struct exposure_loss loss = {.between = source_sea_between, .context = sea};
    for (uint32_t i = 0; i < tally->setup.n_streams; i++)
        (void)exposure_set_loss(tally->sums[i].exposure, &loss); /* refuses only losses that are not finite */
    if (tally->together)
        together_set_loss(tally->together, &loss);
}

static const struct source_law *law_for(const struct tally *tally, double low_hz, double high_hz)
{
    const struct source_law *fitted = tally_fit_get(tally->fit);
    return fitted && source_law_covers(fitted, low_hz, high_hz) ? fitted
                                                                : &tally->sea.laws[tally->sea.n_laws - 1];
}

const struct source_law *tally_law_of_channel(const struct tally *tally, const struct tally_channel *channel)
{
    double low_hz = 0, high_hz = INFINITY;
    tally_channel_band(channel, &low_hz, &high_hz);
    return law_for(tally, low_hz, high_hz);
}

const struct source_law *tally_law_of_impulse(const struct tally *tally, const struct impulse *impulse)
{
    double energy[LEVEL_MAX_BANDS] = {0}, low_hz = 0, high_hz = INFINITY;
    tally_channel_add_energy(impulse, energy);
    tally_fit_band(energy, 0.1, 0.9, &low_hz, &high_hz);
    return law_for(tally, low_hz, high_hz);
}
