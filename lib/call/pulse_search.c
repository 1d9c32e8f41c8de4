/* What may be pulses in one band; see pulse_search.h. */
#include "call/pulse_search.h"
#include "base/units.h"
#include "call/noise_rate.h"
#include "call/sliding.h"
#include "call/trigger_sizes.h"
#include <math.h>
#include <stdlib.h>

#define FALL 10.0            /* a pulse is over when its window has fallen by this ratio (10 dB) */
#define RISE 4.0             /* a new pulse in the tail of another must rise by this ratio (6 dB) */
#define FROZEN_LENGTHS 8     /* a background stands still for so many longest pulses, then goes on */
#define GUARD_DEVIATIONS 2.5 /* benefit of the doubt for a guard band of which noise is all we see */
#define SLOPE_BLOCKS 8       /* the noise's slope is looked at once in so many blocks */
#define RUN 40               /* windows in a row on one side of the median that say it is out of date */
enum search_state { SETTLING, IDLE, OPEN, WAITING, TAIL };

/* A band that must be quieter than the pulse. */
struct guard {
    struct band_parts parts;
    uint32_t window, after; /* slots in all, and after the peak */
    uint32_t every; /* learned with so many of the band's windows: as often as its own do not overlap */
    double ratio;
    struct window_median median;
    float settle[WINDOW_MEDIAN_SETTLE];
};

struct pulse_search {
    struct search_setup setup;
    uint32_t window;   /* slots */
    uint32_t max_open; /* slots */
    struct guard guards[SEARCH_GUARDS];
    uint32_t guard_window, guard_after; /* of the longest */
    double threshold;                   /* ratio of a window's power to the background */
    struct noise_tables noise;

    enum search_state state;
    struct whitened *whitened;
    double delay_frames; /* of the bank: by which its power is late */
    struct window_median band;
    double slope_db;       /* of the noise, a decade */
    uint32_t slope_blocks; /* since the background was learned anew */
    uint32_t n_settled, frozen_slots, n_learned;
    uint32_t run; /* windows since one lay on the other side of the median */
    bool run_above;
    uint64_t n_slots; /* before the block at hand */
    double energy;    /* before the block at hand */
    int64_t start, peak, fallen;
    double start_power, peak_power, low_power; /* window means */
    float *sums;                               /* [block_slots] window means of the block */
    uint32_t n_found;
    struct search_found *found; /* [block_slots] */
};

static double min_guard_ratio(const struct call_class *call_class, uint32_t g)
{
    return units_power_ratio(-(g == 0 ? call_class->train.min_guard_db : call_class->train.min_upper_db));
}

static bool same_parts(const struct band_parts *a, const struct band_parts *b)
{
    bool same = a->n == b->n;
    for (uint32_t p = 0; p < a->n && same; p++)
        same = a->bands[p] == b->bands[p];
    return same;
}

static bool same_guard(const struct search_setup *a, uint32_t g, const struct search_setup *b, uint32_t h)
{
    return same_parts(&a->guards[g], &b->guards[h]) &&
           (a->guards[g].n == 0 || min_guard_ratio(a->call_class, g) == min_guard_ratio(b->call_class, h));
}

bool pulse_search_serves(const struct search_setup *a, const struct search_setup *b)
{
    const struct train_shape *x = &a->call_class->train, *y = &b->call_class->train;
    /* The first guard is also what tells the slope of a band of one part. */
    bool turned = a->band.n > 1 && same_guard(a, 0, b, 1) && same_guard(a, 1, b, 0);
    return a->bands == b->bands && same_parts(&a->band, &b->band) &&
           (turned || (same_guard(a, 0, b, 0) && same_guard(a, 1, b, 1))) && x->pulse_s == y->pulse_s &&
           x->max_pulse_s == y->max_pulse_s && x->min_snr_db == y->min_snr_db;
}

/* Fills the guard that the setup names. */
static enum status fill_guard(struct pulse_search *search, uint32_t g, double step)
{
    const struct search_setup *setup = &search->setup;
    const struct train_shape *shape = &setup->call_class->train;
    struct guard *guard = &search->guards[g];
    guard->parts = setup->guards[g];
    if (guard->parts.n == 0)
        return STATUS_OK;
    double width =
        g == 0 ? shape->guard_high_hz - shape->guard_low_hz : shape->upper_high_hz - shape->upper_low_hz;
    guard->ratio = min_guard_ratio(setup->call_class, g);
    guard->window = trigger_guard_slots(setup->call_class, width, setup->rate_hz, setup->slot_frames);
    guard->after = guard->window > search->window ? (guard->window - search->window + 1) / 2 : 0;
    struct window_statistics statistics = {.freedom = 1, .skewness = 1};
    enum status status = bands_get_statistics(setup->bands, &guard->parts, guard->window, 0, &statistics);
    guard->every = guard->window > search->window ? guard->window / search->window : 1;
    guard->median = window_median_of(&statistics, step * sqrt(guard->every)); /* as precise, a root slower */
    if (guard->window > search->guard_window)
        search->guard_window = guard->window;
    if (guard->after > search->guard_after)
        search->guard_after = guard->after;
    return status;
}

static enum status fill_guards(struct pulse_search *search, double step)
{
    enum status status = STATUS_OK;
    for (uint32_t g = 0; g < SEARCH_GUARDS && status == STATUS_OK; g++)
        status = fill_guard(search, g, step);
    return status;
}

/* The band with its weights, its median and what noise makes of it. */
static enum status fill_band(struct pulse_search *search, double step)
{
    const struct search_setup *setup = &search->setup;
    struct whitened_setup whitened = {.bands = setup->bands,
                                      .parts = setup->band,
                                      .window = search->window,
                                      .step = step,
                                      .block_slots = setup->block_slots,
                                      .history_slots = setup->history_slots};
    search->delay_frames = bands_align(setup->bands, &whitened.parts);
    struct window_statistics band[NOISE_SLOPES];
    enum status status = whitened_create(&whitened, &search->whitened);
    for (int s = 0; s < NOISE_SLOPES && status == STATUS_OK; s++)
        status =
            bands_get_statistics(setup->bands, &whitened.parts, search->window, noise_slope(s), &band[s]);
    if (status != STATUS_OK)
        return status;
    noise_tables_fill(band, setup->call_class->train.pulse_s, &search->noise);
    search->band = window_median_of(&band[0], step);
    return STATUS_OK;
}

enum status pulse_search_create(const struct search_setup *setup, struct pulse_search **out)
{
    struct pulse_search *search = calloc(1, sizeof *search);
    if (!search)
        return STATUS_NO_MEMORY;
    const struct train_shape *shape = &setup->call_class->train;
    search->setup = *setup;
    search->window = trigger_window_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    search->max_open = trigger_open_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    search->threshold = 1 + units_power_ratio(shape->min_snr_db);
    /* A step of 0.002 at 0.1 ms keeps the median within 0.1 dB and lets it follow 87 dB/s; longer windows
       step more, since there are fewer. */
    double step = fmin(0.05, 0.002 * fmax(1, sqrt(shape->pulse_s / 1e-4)));
    search->sums = calloc(setup->block_slots, sizeof *search->sums);
    search->found = calloc(setup->block_slots, sizeof *search->found);
    enum status status = search->sums && search->found ? STATUS_OK : STATUS_NO_MEMORY;
    if (status == STATUS_OK)
        status = fill_band(search, step);
    if (status == STATUS_OK)
        status = fill_guards(search, step);
    if (status != STATUS_OK) {
        pulse_search_destroy(search);
        return status;
    }
    pulse_search_reset(search);
    *out = search;
    return STATUS_OK;
}

void pulse_search_reset(struct pulse_search *search)
{
    search->state = SETTLING;
    search->n_settled = search->frozen_slots = search->run = search->n_found = search->n_learned = 0;
    search->n_slots = 0;
    search->energy = 0;
    whitened_reset(search->whitened);
    window_median_reset(&search->band);
    search->slope_db = 0;
    search->slope_blocks = 0;
    for (uint32_t g = 0; g < SEARCH_GUARDS; g++)
        window_median_reset(&search->guards[g].median);
}

/* Mean power of a guard's window that ends with slot `last`. */
static double guard_power(const struct pulse_search *search, const struct guard *guard, int64_t last)
{
    lanes sums = {0};
    float rest = 0;
    for (uint32_t p = 0; p < guard->parts.n; p++) {
        const float *power =
            bands_get_power(search->setup.bands, guard->parts.bands[p]) + last + 1 - (int64_t)guard->window;
        uint32_t i = 0;
        for (; i + LANES <= guard->window; i += LANES)
            sums += lanes_load(power + i);
        for (; i < guard->window; i++)
            rest += power[i];
    }
    return (lanes_sum(sums) + (double)rest) / guard->window;
}

/* Takes one of the first windows; gives whether they are enough. */
static bool settle_on(struct pulse_search *search, int64_t slot)
{
    if (search->n_slots + (uint64_t)slot < 4 * search->window + 2 * search->guard_window)
        return false; /* the filters are still filling */
    whitened_settle_on(search->whitened, slot, search->n_settled);
    for (uint32_t g = 0; g < SEARCH_GUARDS; g++) {
        struct guard *guard = &search->guards[g];
        if (guard->parts.n)
            guard->settle[search->n_settled] = (float)guard_power(search, guard, slot);
    }
    return ++search->n_settled == WINDOW_MEDIAN_SETTLE;
}

/* Once a window: every window counts once in the background. */
static void learn(struct pulse_search *search, int64_t slot)
{
    if (search->state == SETTLING) {
        float windows[WINDOW_MEDIAN_SETTLE];
        if (!settle_on(search, slot))
            return;
        whitened_settle(search->whitened, windows);
        window_median_settle(&search->band, windows);
        sliding_means(whitened_get_power(search->whitened), search->setup.block_slots, search->window,
                      search->sums);
        for (uint32_t g = 0; g < SEARCH_GUARDS; g++)
            if (search->guards[g].parts.n)
                window_median_settle(&search->guards[g].median, search->guards[g].settle);
        search->state = IDLE;
        search->slope_blocks = 0;
        return;
    }
    if (search->state != IDLE && search->frozen_slots < FROZEN_LENGTHS * search->max_open)
        return;
    bool above = window_median_follow(&search->band, search->sums[slot]);
    whitened_follow(search->whitened, slot);
    for (uint32_t g = 0; g < SEARCH_GUARDS; g++) {
        struct guard *guard = &search->guards[g];
        if (guard->parts.n && search->n_learned % guard->every == 0)
            window_median_follow(&guard->median, guard_power(search, guard, slot));
    }
    search->n_learned++;
    search->run = search->run * (above == search->run_above) + 1;
    search->run_above = above;
    if (search->run >= RUN) {
        search->state = SETTLING;
        search->n_settled = search->run = 0;
    }
}

/* False when a guard band holds too much energy around the pulse, beyond what its noise explains. */
static bool guards_are_quiet(const struct pulse_search *search)
{
    double pulse =
        whitened_get_excess(search->whitened, search->peak, search->band.mean_pa2) * search->window;
    for (uint32_t g = 0; g < SEARCH_GUARDS; g++) {
        const struct guard *guard = &search->guards[g];
        if (guard->parts.n == 0)
            continue;
        double n = guard->window, background = guard->median.mean_pa2;
        double power = guard_power(search, guard, search->peak + guard->after);
        double doubt = GUARD_DEVIATIONS * background * guard->median.deviation;
        if ((power - background) * n > pulse * guard->ratio + doubt * n)
            return false;
    }
    return true;
}

/* Centroid of the energy above the background, in slots from the start of the block. */
static double arrival_slot(const struct pulse_search *search, const float *band, int64_t last)
{
    int64_t first = search->peak - (int64_t)search->window;
    int64_t end = search->peak + 1 < last ? search->peak + 1 : last;
    double sum = 0, moment = 0;
    for (int64_t slot = first; slot <= end; slot++) {
        double excess = fmax(0, band[slot] - search->band.mean_pa2);
        sum += excess;
        moment += excess * ((double)slot + 0.5);
    }
    return sum > 0 ? moment / sum : (double)search->peak;
}

static double energy_until(const struct pulse_search *search, int64_t slot)
{
    const struct whitened *whitened = search->whitened;
    double sum =
        slot < 0 ? -whitened_sum(whitened, slot, (uint32_t)-slot) : whitened_sum(whitened, 0, (uint32_t)slot);
    return search->energy + sum * search->setup.slot_frames * search->setup.frames_per_frame;
}

static void complete(struct pulse_search *search, int64_t slot, const float *band)
{
    const struct search_setup *setup = &search->setup;
    double seconds = (double)(search->fallen - search->start - (int64_t)search->window) * setup->slot_frames /
                     setup->rate_hz;
    double arrival = (double)search->n_slots + arrival_slot(search, band, slot);
    double frames = arrival * setup->slot_frames - search->delay_frames;
    bool too_long = seconds > setup->call_class->train.max_pulse_s;
    search->found[search->n_found++] = (struct search_found){
        .slot = arrival,
        .frame = frames * setup->frames_per_frame - setup->delay_frames,
        .snr = (search->peak_power - search->band.mean_pa2) / search->band.mean_pa2,
        .energy = energy_until(search, search->peak),
        .too_long = too_long,
        .broadband = !too_long && !guards_are_quiet(search),
    };
}

static void open_at(struct pulse_search *search, int64_t slot)
{
    search->state = OPEN;
    search->frozen_slots = 0;
    search->start = search->peak = slot;
    search->start_power = search->peak_power = search->sums[slot];
}

static void step(struct pulse_search *search, int64_t slot, const float *band)
{
    double power = search->sums[slot], limit = search->threshold * search->band.mean_pa2;
    if (search->state == IDLE) {
        if (power > limit)
            open_at(search, slot);
    } else if (search->state == OPEN || search->state == WAITING) {
        if (power > search->peak_power) {
            search->peak_power = power;
            search->peak = slot;
            search->state = OPEN;
        }
        if (power > FALL * search->start_power) { /* the length counts from 10 dB below the peak */
            search->start = slot;
            search->start_power = power;
        }
        bool fallen = power < search->peak_power / FALL || power < limit;
        if (search->state == OPEN && (fallen || slot - search->start > (int64_t)search->max_open)) {
            search->state = WAITING;
            search->fallen = slot;
        }
        if (search->state == WAITING && slot >= search->peak + search->guard_after) {
            complete(search, slot, band);
            search->state = TAIL;
            search->low_power = power;
        }
    } else if (search->state == TAIL) {
        search->low_power = power < search->low_power ? power : search->low_power;
        if (power > RISE * search->low_power && power > limit)
            open_at(search, slot);
        else if (power < limit)
            search->state = IDLE;
    }
}

/* From the parts of the band or, where it has but one, from its guard band on: what lies between the two is
 * taken to be as steep as the band is. */
static void find_slope(struct pulse_search *search)
{
    struct noise_density density = whitened_get_density(search->whitened, search->band.mean_pa2);
    const struct guard *guard = &search->guards[0];
    if (density.n == 1 && guard->parts.n > 0) {
        double low = bands_get_edges(search->setup.bands, guard->parts.bands[0]).low_hz;
        double high = bands_get_edges(search->setup.bands, guard->parts.bands[guard->parts.n - 1]).high_hz;
        density.middle_hz[1] = sqrt(low * high);
        density.pa2_hz[1] = guard->median.mean_pa2 / (high - low);
        density.n = 2;
    }
    search->slope_db = noise_density_slope(&density);
    search->band.median_ratio = noise_tables_get_median(&search->noise, search->slope_db);
}

void pulse_search_push(struct pulse_search *search)
{
    const struct search_setup *setup = &search->setup;
    whitened_push(search->whitened);
    if (search->state != SETTLING && search->slope_blocks++ % SLOPE_BLOCKS == 0)
        find_slope(search);
    const float *band = whitened_get_power(search->whitened);
    const int64_t n = setup->block_slots, window = search->window;
    search->n_found = 0;
    int64_t next = (window - (int64_t)(search->n_slots % search->window)) % window;
    const float greatest = sliding_means(band, setup->block_slots, search->window, search->sums);
    /* Until the background has moved by as much as it can in a block, no window can pass. */
    const bool quiet = search->state == IDLE && greatest < 0.8 * search->threshold * search->band.mean_pa2;
    for (int64_t slot = quiet ? next : 0; slot < n; slot += quiet ? window : 1) {
        if (!quiet && search->state != SETTLING) {
            step(search, slot, band);
            search->frozen_slots += search->state != IDLE;
        }
        if (slot == next) {
            learn(search, slot);
            next += window;
        }
    }
    search->energy += whitened_block_sum(search->whitened) * setup->slot_frames * setup->frames_per_frame;
    search->n_slots += setup->block_slots;
    search->start -= n;
    search->peak -= n;
    search->fallen -= n;
}

const struct search_found *pulse_search_get(const struct pulse_search *search, uint32_t *out_n)
{
    *out_n = search->n_found;
    return search->found;
}

double pulse_search_get_known(const struct pulse_search *search)
{
    double slots = (double)search->n_slots - 2.0 * search->max_open - search->guard_window;
    return slots * search->setup.slot_frames * search->setup.frames_per_frame - search->setup.delay_frames;
}

const struct search_setup *pulse_search_get_setup(const struct pulse_search *search)
{
    return &search->setup;
}

uint64_t pulse_search_get_block_slot(const struct pulse_search *search)
{
    return search->n_slots < search->setup.block_slots ? 0 : search->n_slots - search->setup.block_slots;
}

double pulse_search_get_delay(const struct pulse_search *search)
{
    return search->delay_frames;
}

const struct whitened *pulse_search_get_power(const struct pulse_search *search)
{
    return search->whitened;
}

double pulse_search_get_background(const struct pulse_search *search)
{
    return search->band.mean_pa2;
}

double pulse_search_get_noise_rate(const struct pulse_search *search, double snr)
{
    return noise_tables_get(&search->noise, search->slope_db, snr);
}

void pulse_search_destroy(struct pulse_search *search)
{
    if (!search)
        return;
    whitened_destroy(search->whitened);
    free(search->sums);
    free(search->found);
    free(search);
}
