/* Exposure: what is received and how it is kept; exposure_range.c moves it to other ranges. See exposure.h.
 */
#include "level/exposure.h"
#include "base/time.h"
#include "base/units.h"
#include "level/exposure_inner.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

static bool bad_loss(const struct exposure_loss *loss)
{
    return !loss->between &&
           !(loss->n_db > 0 && isfinite(loss->n_db) && loss->n_spread_db >= 0 && isfinite(loss->n_spread_db));
}

static bool bad_setup(const struct exposure_setup *setup)
{
    char problem[CRITERION_TEXT_SIZE];
    const char *key;
    uint32_t n_quiet = 0;
    if (setup->n_criteria < 1 || setup->n_criteria > CRITERIA_MAX || !setup->criteria)
        return true;
    for (uint32_t i = 0; i < setup->n_criteria; i++) {
        if (criterion_check(&setup->criteria[i], 0, &key, problem) != STATUS_OK)
            return true;
        n_quiet += isnan(setup->criteria[i].quiet_db) ? 0 : 1;
    }
    return n_quiet > EXPOSURE_MAX_QUIET ||
           (setup->sound != SOUND_IMPULSIVE && setup->sound != SOUND_CONTINUOUS) ||
           !(setup->reference_m >= EXPOSURE_NEAREST_M && setup->reference_m <= EXPOSURE_FARTHEST_M) ||
           !(setup->level_spread_db >= 0 && isfinite(setup->level_spread_db)) || bad_loss(&setup->loss);
}

static void prepare(const struct exposure_setup *setup, struct exposure *exposure)
{
    int n_quiet = 0;
    exposure->n = setup->n_criteria;
    exposure->sound = setup->sound;
    exposure->reference_m = setup->reference_m;
    exposure->level_spread_db = setup->level_spread_db;
    exposure->day_start_ns = setup->day_start_ns;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        exposure->centre_hz[b] = 1000 * units_power_ratio(LEVEL_FIRST_BAND + (int)b);
    for (uint32_t i = 0; i < setup->n_criteria; i++) {
        struct prepared *item = &exposure->items[i];
        item->criterion = setup->criteria[i];
        item->quiet = isnan(item->criterion.quiet_db) ? -1 : n_quiet++;
        weighting_factors(item->criterion.weighting, setup->how, LEVEL_MAX_BANDS, item->factor);
    }
}

enum status exposure_create(const struct exposure_setup *setup, struct exposure **out)
{
    if (!setup || !out || bad_setup(setup))
        return STATUS_BAD_ARGUMENT;
    struct exposure *exposure = calloc(1, sizeof *exposure);
    if (!exposure)
        return STATUS_NO_MEMORY;
    exposure->items = calloc(setup->n_criteria, sizeof *exposure->items);
    exposure->table = calloc(TABLE_N * LEVEL_MAX_BANDS, sizeof *exposure->table);
    uint32_t n_received = (uint32_t)(DAY_S / RECEIVED_WIDTH_S), n_placed = (uint32_t)(DAY_S / PLACED_WIDTH_S);
    int64_t day_ns = setup->day_start_ns;
    if (!exposure->items || !exposure->table ||
        buckets_create(&exposure->received_ring, n_received + 1, RECEIVED_WIDTH_S, true, day_ns) !=
            STATUS_OK ||
        buckets_create(&exposure->placed_ring, n_placed + 1, PLACED_WIDTH_S, true, day_ns) != STATUS_OK ||
        buckets_create(&exposure->placed_job, n_placed + 1, PLACED_WIDTH_S, false, 0) != STATUS_OK) {
        exposure_destroy(exposure);
        return STATUS_NO_MEMORY;
    }
    prepare(setup, exposure);
    exposure_set_loss(exposure, &setup->loss);
    exposure_reset(exposure);
    *out = exposure;
    return STATUS_OK;
}

void exposure_destroy(struct exposure *exposure)
{
    if (!exposure)
        return;
    buckets_destroy(&exposure->received_ring);
    buckets_destroy(&exposure->placed_ring);
    buckets_destroy(&exposure->placed_job);
    free(exposure->table);
    free(exposure->items);
    free(exposure);
}

enum status exposure_set_loss(struct exposure *exposure, const struct exposure_loss *loss)
{
    if (bad_loss(loss))
        return STATUS_BAD_ARGUMENT;
    exposure->loss = *loss;
    exposure->table_ready = false;
    return STATUS_OK;
}

void exposure_begin_job(struct exposure *exposure)
{
    buckets_reset(&exposure->placed_job);
    exposure->received_job = (struct bucket){.n = 0};
    exposure->job_first_ns = -1;
    exposure->n_recent = exposure->next_recent = 0;
    for (uint32_t i = 0; i < exposure->n; i++)
        exposure->items[i].loudest = (struct loudest){
            .received_db = exposure->items[i].criterion.metric == METRIC_POSITIVE_IMPULSE ? 0 : -INFINITY,
            .placed_db = -INFINITY};
    exposure->pushes++; /* sums that were kept are void */
}

void exposure_reset(struct exposure *exposure)
{
    buckets_reset(&exposure->received_ring);
    buckets_reset(&exposure->placed_ring);
    exposure->latest_ns = INT64_MIN;
    for (uint32_t i = 0; i < exposure->n; i++)
        exposure->items[i].latest_db = NAN;
    exposure_begin_job(exposure);
}

static void copy_buckets(const struct buckets *from, struct buckets *to)
{
    struct bucket *items = to->items;
    memcpy(items, from->items, from->n * sizeof *items);
    *to = *from;
    to->items = items;
}

void exposure_copy(const struct exposure *from, struct exposure *to)
{
    struct exposure kept = *to;
    *to = *from;
    to->items = kept.items;
    to->table = kept.table;
    to->received_ring = kept.received_ring;
    to->placed_ring = kept.placed_ring;
    to->placed_job = kept.placed_job;
    memcpy(to->items, from->items, from->n * sizeof *to->items);
    memcpy(to->table, from->table, TABLE_N * LEVEL_MAX_BANDS * sizeof *to->table);
    copy_buckets(&from->received_ring, &to->received_ring);
    copy_buckets(&from->placed_ring, &to->placed_ring);
    copy_buckets(&from->placed_job, &to->placed_job);
}

/* One sound as a bucket of its own; energies as received. */
static void to_bucket(const struct exposure *exposure, const struct exposure_sound *sound, bool ranged,
                      struct bucket *out)
{
    *out =
        (struct bucket){.energy = units_power_ratio(sound->sel_db), .n = 1, .top_band = LEVEL_FIRST_BAND - 1};
    double sum = 0;
    for (uint32_t b = 0; b < sound->n_bands; b++)
        if (isfinite(sound->band_sel_db[b])) {
            sum += out->band[b] = units_power_ratio(sound->band_sel_db[b]);
            out->top_band = LEVEL_FIRST_BAND + (int)b;
        }
    out->amount = exposure->sound == SOUND_CONTINUOUS ? sound->seconds : 1;
    out->n_unweighted = sum == 0;
    out->n_clipped = sound->clipped;
    out->n_without_range = !ranged;
}

/* The same at the reference range. */
static void place(const struct exposure *exposure, double range_m, struct bucket *bucket)
{
    double before = 0, after = 0, spread_db;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        if (bucket->band[b] > 0) {
            before += bucket->band[b];
            bucket->band[b] *= units_power_ratio(
                -exposure_between_db(exposure, b, range_m, exposure->reference_m, &spread_db));
            after += bucket->band[b];
        }
    if (before == 0) {
        before = 1;
        after = units_power_ratio(
            -exposure_between_db(exposure, BARE_BAND, range_m, exposure->reference_m, &spread_db));
    }
    bucket->energy *= after / before;
    bucket->lg_range = bucket->energy * log10(range_m);
}

/* SPL of an impulse over the criterion's time, or over the impulse where that is longer. */
static double spl_db(const struct exposure *exposure, const struct criterion *c,
                     const struct exposure_sound *sound)
{
    if (exposure->sound == SOUND_CONTINUOUS || c->average == AVERAGE_T90)
        return sound->spl_db;
    double over_s = c->average == AVERAGE_125_MS ? 0.125 : 1;
    return sound->sel_db - units_power_db(sound->seconds > over_s ? sound->seconds : over_s);
}

/* Unweighted, dB, or Pa s; NAN where it was not measured. */
static double metric_of(const struct exposure *exposure, const struct criterion *c,
                        const struct exposure_sound *sound)
{
    switch (c->metric) {
    case METRIC_PEAK:
        return sound->peak_db;
    case METRIC_PEAK_TO_PEAK:
        return sound->peak_to_peak_db;
    case METRIC_SPL:
        return spl_db(exposure, c, sound);
    case METRIC_POSITIVE_IMPULSE:
        return sound->positive_impulse_pa_s;
    default:
        return sound->sel_db;
    }
}

/* What the weighting adds, dB: weighted over unweighted energy of the bands. */
static double weighting_gain_db(const struct prepared *item, const struct bucket *bucket)
{
    double sum = 0, weighted = 0;
    if (!item->criterion.weighting)
        return 0;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++) {
        sum += bucket->band[b];
        weighted += bucket->band[b] * item->factor[b];
    }
    return sum > 0 ? units_power_db(weighted / sum) : NAN;
}

static void take_single(const struct exposure *exposure, struct prepared *item,
                        const struct exposure_sound *sound, const struct bucket *received, bool ranged)
{
    double level_db = metric_of(exposure, &item->criterion, sound);
    double weighted_db = level_db + weighting_gain_db(item, received);
    item->latest_db = weighted_db;
    struct loudest *loudest = &item->loudest;
    if (sound->before_job)
        return;
    if (weighted_db > loudest->received_db)
        loudest->received_db = weighted_db;
    if (!ranged || isnan(weighted_db) || item->criterion.metric == METRIC_POSITIVE_IMPULSE)
        return;
    struct loudest trial = {
        .received_db = loudest->received_db, .level_db = level_db, .range_m = sound->range_m};
    memcpy(trial.energy, received->band, sizeof trial.energy);
    double spread_db;
    trial.placed_db = exposure_loudest_db(exposure, item, &trial, exposure->reference_m, &spread_db);
    if (trial.placed_db > loudest->placed_db)
        *loudest = trial;
}

/* Counts the sound's energy for a criterion with effective quiet, or that it was quiet. */
static void take_cumulative(const struct exposure *exposure, struct prepared *item, struct bucket *received)
{
    double energy = exposure_energy(item, received, NULL);
    item->latest_db = energy > 0 ? units_power_db(energy) : NAN;
    if (item->quiet < 0)
        return;
    double judged = exposure->sound == SOUND_CONTINUOUS ? energy / received->amount : energy;
    if (judged >= units_power_ratio(item->criterion.quiet_db))
        received->quiet[item->quiet] = energy;
    else
        received->n_quiet[item->quiet] = 1;
}

static void keep(struct buckets *buckets, struct bucket *sound, int64_t time_ns)
{
    struct bucket *bucket = buckets_open(buckets, time_ns);
    if (!bucket)
        return; /* more than 24 h back: in no window any more */
    sound->first_s = buckets_seconds(buckets, time_ns);
    sound->moment_s = sound->energy * sound->first_s;
    bucket_add(bucket, sound);
}

static void keep_recent(struct exposure *exposure, const struct bucket *placed, int64_t time_ns)
{
    exposure->recent[exposure->next_recent] = *placed;
    exposure->recent_ns[exposure->next_recent] = time_ns;
    exposure->next_recent = (exposure->next_recent + 1) % RECENT;
    if (exposure->n_recent < RECENT)
        exposure->n_recent++;
}

static void keep_in_job(struct exposure *exposure, const struct bucket *received, int64_t time_ns)
{
    bucket_add(&exposure->received_job, received);
    if (exposure->job_first_ns < 0 || time_ns < exposure->job_first_ns)
        exposure->job_first_ns = time_ns;
}

enum status exposure_push(struct exposure *exposure, const struct exposure_sound *sound)
{
    bool continuous = exposure->sound == SOUND_CONTINUOUS;
    if (sound->relative || !isfinite(sound->sel_db) || sound->range_m < 0 ||
        sound->n_bands > LEVEL_MAX_BANDS || isinf(sound->range_m) ||
        (continuous && !(sound->seconds > 0 && sound->seconds <= 60)))
        return STATUS_OUT_OF_RANGE;
    bool ranged = sound->range_m > 0; /* NAN is not */
    struct bucket received;
    to_bucket(exposure, sound, ranged, &received);
    for (uint32_t i = 0; i < exposure->n; i++) {
        struct prepared *item = &exposure->items[i];
        if (!criterion_applies(&item->criterion, exposure->sound))
            continue;
        if (item->criterion.metric == METRIC_SEL_CUMULATIVE)
            take_cumulative(exposure, item, &received);
        else
            take_single(exposure, item, sound, &received, ranged);
    }
    keep(&exposure->received_ring, &received, sound->time_ns);
    if (!sound->before_job)
        keep_in_job(exposure, &received, sound->time_ns);
    if (ranged) {
        struct bucket placed = received;
        place(exposure, sound->range_m, &placed);
        keep(&exposure->placed_ring, &placed, sound->time_ns);
        if (!sound->before_job) {
            keep(&exposure->placed_job, &placed, sound->time_ns);
            keep_recent(exposure, &placed, sound->time_ns);
        }
    }
    if (sound->time_ns > exposure->latest_ns)
        exposure->latest_ns = sound->time_ns;
    exposure->pushes++;
    return STATUS_OK;
}

void exposure_of_impulse(const struct impulse *impulse, uint32_t n_bands, const double *band_sel_db,
                         double range_m, struct exposure_sound *out)
{
    *out = (struct exposure_sound){.time_ns = impulse->time_ns,
                                   .seconds = impulse->t90_s,
                                   .range_m = range_m,
                                   .sel_db = impulse->sel_db,
                                   .spl_db = impulse->rms90_db,
                                   .peak_db = impulse->peak_db,
                                   .peak_to_peak_db = impulse->peak_to_peak_db,
                                   .positive_impulse_pa_s = impulse->positive_impulse_pa_s,
                                   .n_bands = band_sel_db ? n_bands : 0,
                                   .relative = impulse->relative,
                                   .clipped = impulse->clipped};
    for (uint32_t b = 0; b < out->n_bands && b < LEVEL_MAX_BANDS; b++)
        out->band_sel_db[b] = band_sel_db[b];
}

void exposure_of_level(const struct level *level, double range_m, struct exposure_sound *out)
{
    double time_db = units_power_db(level->seconds);
    *out = (struct exposure_sound){.time_ns = level->start_ns,
                                   .seconds = level->seconds,
                                   .range_m = range_m,
                                   .sel_db = level->spl_db + time_db,
                                   .spl_db = level->spl_db,
                                   .peak_db = level->peak_db,
                                   .peak_to_peak_db = NAN,
                                   .positive_impulse_pa_s = NAN,
                                   .n_bands = level->n_bands,
                                   .relative = level->relative};
    for (uint32_t b = 0; b < level->n_bands && b < LEVEL_MAX_BANDS; b++)
        out->band_sel_db[b] = level->band_db[b] + time_db;
}
