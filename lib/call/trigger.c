/* The pulse finder of one class. */
#include "call/trigger.h"
#include "base/units.h"
#include "call/noise_rate.h"
#include "call/trigger_sizes.h"
#include "call/whitened.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define FALL 10.0            /* a pulse is over when its window has fallen by this ratio (10 dB) */
#define RISE 4.0             /* a new pulse in the tail of another must rise by this ratio (6 dB) */
#define FROZEN_LENGTHS 8     /* a background stands still for so many longest pulses, then goes on */
#define GUARD_DEVIATIONS 2.5 /* benefit of the doubt for a guard band of which noise is all we see */
#define RUN 40               /* windows in a row on one side of the median that say it is out of date */
enum trigger_state { SETTLING, IDLE, OPEN, WAITING, TAIL };

/* A band that must be quieter than the pulse. */
struct guard {
    struct band_parts parts;
    uint32_t window, after; /* slots in all, and after the peak */
    double ratio;
    struct window_median median;
    float settle[WINDOW_MEDIAN_SETTLE];
};

struct trigger {
    struct trigger_setup setup;
    uint32_t window;   /* slots */
    uint32_t max_open; /* slots */
    struct guard guards[TRIGGER_GUARDS];
    uint32_t guard_window, guard_after; /* of the longest */
    double threshold;                   /* ratio of a window's power to the background */
    struct noise_tables noise;
    double echo_frames, tail_frames;

    enum trigger_state state;
    struct whitened *whitened;
    double delay_frames; /* of the bank: by which its power is late */
    struct window_median band;
    double slope_db; /* of the noise, a decade */
    uint32_t n_settled, frozen_slots;
    uint32_t run; /* windows since one lay on the other side of the median */
    bool run_above;
    uint64_t n_slots; /* before the block at hand */
    double energy;    /* before the block at hand */
    int64_t start, peak, fallen;
    double start_power, peak_power, low_power; /* window means */
    struct pulse held;
    double held_slot; /* its arrival, from the start of the bank's first block */
    double held_first;
    bool holds, held_rejected;
    float *sums; /* [block_slots] window means of the block */
    struct pulse_shaper *shaper;
    uint64_t block_slot; /* slots before the block that the bank holds */
};

/* Fills the guard that the setup names. */
static enum status fill_guard(struct trigger *trigger, uint32_t g, double step)
{
    const struct trigger_setup *setup = &trigger->setup;
    const struct train_shape *shape = &setup->call_class->train;
    struct guard *guard = &trigger->guards[g];
    guard->parts = setup->guards[g];
    if (guard->parts.n == 0)
        return STATUS_OK;
    double width =
        g == 0 ? shape->guard_high_hz - shape->guard_low_hz : shape->upper_high_hz - shape->upper_low_hz;
    guard->ratio = units_power_ratio(-(g == 0 ? shape->min_guard_db : shape->min_upper_db));
    guard->window = trigger_guard_slots(setup->call_class, width, setup->rate_hz, setup->slot_frames);
    guard->after = guard->window > trigger->window ? (guard->window - trigger->window + 1) / 2 : 0;
    struct window_statistics statistics = {.freedom = 1, .skewness = 1};
    enum status status = bands_get_statistics(setup->bands, &guard->parts, guard->window, 0, &statistics);
    guard->median = window_median_of(&statistics, step);
    if (guard->window > trigger->guard_window)
        trigger->guard_window = guard->window;
    if (guard->after > trigger->guard_after)
        trigger->guard_after = guard->after;
    return status;
}

enum status trigger_create(const struct trigger_setup *setup, struct trigger **out)
{
    struct trigger *trigger = calloc(1, sizeof *trigger);
    if (!trigger)
        return STATUS_NO_MEMORY;
    const struct train_shape *shape = &setup->call_class->train;
    trigger->setup = *setup;
    trigger->window = trigger_window_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    trigger->max_open = trigger_open_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    trigger->threshold = 1 + units_power_ratio(shape->min_snr_db);
    /* A step of 0.002 at 0.1 ms keeps the median within 0.1 dB and lets it follow 87 dB/s; longer windows
       step more, since there are fewer. */
    double step = fmin(0.05, 0.002 * fmax(1, sqrt(shape->pulse_s / 1e-4)));
    struct whitened_setup whitened = {.bands = setup->bands,
                                      .parts = setup->band,
                                      .window = trigger->window,
                                      .step = step,
                                      .block_slots = setup->block_slots,
                                      .history_slots = setup->history_slots};
    trigger->delay_frames = bands_align(setup->bands, &whitened.parts);
    struct window_statistics band[NOISE_SLOPES];
    enum status status = whitened_create(&whitened, &trigger->whitened);
    for (int s = 0; s < NOISE_SLOPES; s++) {
        band[s] = (struct window_statistics){.freedom = 1, .skewness = 1};
        if (status == STATUS_OK)
            status = bands_get_statistics(setup->bands, &whitened.parts, trigger->window, noise_slope(s),
                                          &band[s]);
    }
    noise_tables_fill(band, shape->pulse_s, &trigger->noise);
    trigger->band = window_median_of(&band[0], step);
    for (uint32_t g = 0; g < TRIGGER_GUARDS && status == STATUS_OK; g++)
        status = fill_guard(trigger, g, step);
    trigger->echo_frames = trigger_get_echo(setup->call_class) * setup->rate_hz * setup->frames_per_frame;
    trigger->tail_frames = shape->tail_s * setup->rate_hz * setup->frames_per_frame;
    trigger->sums = calloc(setup->block_slots, sizeof *trigger->sums);
    if (status == STATUS_OK)
        status = pulse_shaper_create(setup->call_class, setup->rate_hz, setup->slot_frames, &trigger->shaper);
    if (status != STATUS_OK || !trigger->sums) {
        trigger_destroy(trigger);
        return STATUS_NO_MEMORY;
    }
    trigger_reset(trigger);
    *out = trigger;
    return STATUS_OK;
}

void trigger_reset(struct trigger *trigger)
{
    trigger->state = SETTLING;
    trigger->n_settled = trigger->frozen_slots = trigger->run = 0;
    trigger->n_slots = 0;
    trigger->energy = 0;
    trigger->block_slot = 0;
    trigger->held = (struct pulse){.frame = -INFINITY};
    trigger->holds = false;
    whitened_reset(trigger->whitened);
    window_median_reset(&trigger->band);
    trigger->slope_db = 0;
    for (uint32_t g = 0; g < TRIGGER_GUARDS; g++)
        window_median_reset(&trigger->guards[g].median);
}

/* Mean power of a guard's window that ends with slot `last`. */
static double guard_power(const struct trigger *trigger, const struct guard *guard, int64_t last)
{
    double sum = 0;
    for (uint32_t p = 0; p < guard->parts.n; p++)
        sum +=
            window_power(bands_get_power(trigger->setup.bands, guard->parts.bands[p]), last, guard->window);
    return sum;
}

/* Takes one of the first windows; gives whether they are enough. */
static bool settle_on(struct trigger *trigger, int64_t slot)
{
    if (trigger->n_slots + (uint64_t)slot < 4 * trigger->window + 2 * trigger->guard_window)
        return false; /* the filters are still filling */
    whitened_settle_on(trigger->whitened, slot, trigger->n_settled);
    for (uint32_t g = 0; g < TRIGGER_GUARDS; g++) {
        struct guard *guard = &trigger->guards[g];
        if (guard->parts.n)
            guard->settle[trigger->n_settled] = (float)guard_power(trigger, guard, slot);
    }
    return ++trigger->n_settled == WINDOW_MEDIAN_SETTLE;
}

/* Window means of the block, and the greatest of them. */
static float sum_windows(struct trigger *trigger)
{
    const float *band = whitened_get_power(trigger->whitened);
    const uint32_t n = trigger->setup.block_slots, window = trigger->window;
    const float scale = 1.0F / (float)window;
    lanes greatest = {0};
    for (uint32_t i = 0; i < n; i += 2 * LANES) {
        lanes first = lanes_load(band + i), second = lanes_load(band + i + LANES);
        const float *late = band + i;
        for (uint32_t k = 1; k < window; k++) {
            late--;
            first += lanes_load(late);
            second += lanes_load(late + LANES);
        }
        first *= scale;
        second *= scale;
        greatest = lanes_greatest(lanes_greatest(first, second), greatest);
        lanes_store(trigger->sums + i, first);
        lanes_store(trigger->sums + i + LANES, second);
    }
    greatest = lanes_greatest(greatest, __builtin_shufflevector(greatest, greatest, 2, 3, 0, 1));
    return greatest[0] > greatest[1] ? greatest[0] : greatest[1];
}

/* Once a window: every window counts once in the background. */
static void learn(struct trigger *trigger, int64_t slot)
{
    if (trigger->state == SETTLING) {
        float windows[WINDOW_MEDIAN_SETTLE];
        if (!settle_on(trigger, slot))
            return;
        whitened_settle(trigger->whitened, windows);
        window_median_settle(&trigger->band, windows);
        sum_windows(trigger);
        for (uint32_t g = 0; g < TRIGGER_GUARDS; g++)
            if (trigger->guards[g].parts.n)
                window_median_settle(&trigger->guards[g].median, trigger->guards[g].settle);
        trigger->state = IDLE;
        return;
    }
    if (trigger->state != IDLE && trigger->frozen_slots < FROZEN_LENGTHS * trigger->max_open)
        return;
    bool above = window_median_follow(&trigger->band, trigger->sums[slot]);
    whitened_follow(trigger->whitened, slot);
    for (uint32_t g = 0; g < TRIGGER_GUARDS; g++) {
        struct guard *guard = &trigger->guards[g];
        if (guard->parts.n)
            window_median_follow(&guard->median, guard_power(trigger, guard, slot));
    }
    trigger->run = trigger->run * (above == trigger->run_above) + 1;
    trigger->run_above = above;
    if (trigger->run >= RUN) {
        trigger->state = SETTLING;
        trigger->n_settled = trigger->run = 0;
    }
}

/* Looks at the sound around the held pulse, as far as the bank still or already has it. */
static void look_at_held(struct trigger *trigger)
{
    const struct trigger_setup *setup = &trigger->setup;
    const int64_t per_slot = setup->slot_frames, history = setup->history_slots;
    double from_block = trigger->held_slot - (double)trigger->block_slot; /* slots */
    int64_t slot = (int64_t)floor(from_block);
    int64_t frame = llround(from_block * setup->slot_frames - trigger->delay_frames);
    struct pulse_sound sound = {
        .samples = bands_get_samples(setup->bands) + frame,
        .samples_before = history * per_slot + frame,
        .samples_after = setup->block_slots * per_slot - frame,
        .power = whitened_get_power(trigger->whitened) + slot,
        .slots_before = history + slot,
        .slots_after = setup->block_slots - slot,
        .background_pa2 = trigger->band.mean_pa2,
        .density = whitened_get_density(trigger->whitened, trigger->band.mean_pa2),
    };
    pulse_shaper_get(trigger->shaper, &sound, &trigger->held.shape);
}

static void give_held(struct trigger *trigger, const struct pulse_sink *sink)
{
    if (trigger->holds && !trigger->held_rejected) {
        look_at_held(trigger);
        sink->take(sink->context, &trigger->held);
    }
    trigger->holds = false;
}

/* Ties a pulse to the one before or starts the next. What was rejected ties its echoes too: they are no more
 * the class's than it is. */
static void emit(struct trigger *trigger, const struct pulse *pulse, double slot, bool rejected,
                 const struct pulse_sink *sink)
{
    bool echo = trigger->holds && pulse->frame - trigger->held_first < trigger->echo_frames;
    bool late_echo =
        pulse->snr * FALL < trigger->held.snr && pulse->frame - trigger->held.frame < trigger->tail_frames;
    if (late_echo || (echo && pulse->snr <= trigger->held.snr))
        return;
    if (!echo) {
        give_held(trigger, sink);
        trigger->held_first = pulse->frame;
    }
    trigger->held = *pulse;
    trigger->held_slot = slot;
    trigger->held_rejected = rejected;
    trigger->holds = true;
}

/* Where a pulse that is still open could have arrived at the earliest. */
static double open_frame(const struct trigger *trigger)
{
    double slots = (double)trigger->n_slots - 2.0 * trigger->max_open - trigger->guard_window;
    return slots * trigger->setup.slot_frames * trigger->setup.frames_per_frame - trigger->setup.delay_frames;
}

/* Gives the held pulse once no echo of it can come any more. */
static void release(struct trigger *trigger, const struct pulse_sink *sink)
{
    if (trigger->holds && open_frame(trigger) - trigger->held_first > trigger->echo_frames)
        give_held(trigger, sink);
}

double trigger_get_known(const struct trigger *trigger)
{
    return trigger->holds ? trigger->held.frame : open_frame(trigger);
}

/* False when a guard band holds too much energy around the pulse, beyond what its noise explains. */
static bool guards_are_quiet(const struct trigger *trigger)
{
    double pulse =
        whitened_get_excess(trigger->whitened, trigger->peak, trigger->band.mean_pa2) * trigger->window;
    for (uint32_t g = 0; g < TRIGGER_GUARDS; g++) {
        const struct guard *guard = &trigger->guards[g];
        if (guard->parts.n == 0)
            continue;
        double n = guard->window, background = guard->median.mean_pa2;
        double power = guard_power(trigger, guard, trigger->peak + guard->after);
        double doubt = GUARD_DEVIATIONS * background * guard->median.deviation;
        if ((power - background) * n > pulse * guard->ratio + doubt * n)
            return false;
    }
    return true;
}

/* Centroid of the energy above the background, in slots from the start of the block. */
static double arrival_slot(const struct trigger *trigger, const float *band, int64_t last)
{
    int64_t first = trigger->peak - (int64_t)trigger->window;
    int64_t end = trigger->peak + 1 < last ? trigger->peak + 1 : last;
    double sum = 0, moment = 0;
    for (int64_t slot = first; slot <= end; slot++) {
        double excess = fmax(0, band[slot] - trigger->band.mean_pa2);
        sum += excess;
        moment += excess * ((double)slot + 0.5);
    }
    return sum > 0 ? moment / sum : (double)trigger->peak;
}

static double energy_until(const struct trigger *trigger, int64_t slot)
{
    const struct whitened *whitened = trigger->whitened;
    double sum =
        slot < 0 ? -whitened_sum(whitened, slot, (uint32_t)-slot) : whitened_sum(whitened, 0, (uint32_t)slot);
    return trigger->energy + sum * trigger->setup.slot_frames * trigger->setup.frames_per_frame;
}

static void complete(struct trigger *trigger, int64_t slot, const float *band, const struct pulse_sink *sink,
                     uint64_t *rejections)
{
    const struct trigger_setup *setup = &trigger->setup;
    double seconds = (double)(trigger->fallen - trigger->start - (int64_t)trigger->window) *
                     setup->slot_frames / setup->rate_hz;
    bool too_long = seconds > setup->call_class->train.max_pulse_s;
    bool broadband = !too_long && !guards_are_quiet(trigger);
    rejections[REJECT_TOO_LONG] += too_long;
    rejections[REJECT_BROADBAND] += broadband;
    double arrival = (double)trigger->n_slots + arrival_slot(trigger, band, slot);
    double frames = arrival * setup->slot_frames - trigger->delay_frames;
    struct pulse pulse = {
        .frame = frames * setup->frames_per_frame - setup->delay_frames,
        .snr = (trigger->peak_power - trigger->band.mean_pa2) / trigger->band.mean_pa2,
        .energy = energy_until(trigger, trigger->peak),
    };
    emit(trigger, &pulse, arrival, too_long || broadband, sink);
}

static void open_at(struct trigger *trigger, int64_t slot)
{
    trigger->state = OPEN;
    trigger->frozen_slots = 0;
    trigger->start = trigger->peak = slot;
    trigger->start_power = trigger->peak_power = trigger->sums[slot];
}

static void step(struct trigger *trigger, int64_t slot, const float *band, const struct pulse_sink *sink,
                 uint64_t *rejections)
{
    double power = trigger->sums[slot], limit = trigger->threshold * trigger->band.mean_pa2;
    if (trigger->state == IDLE) {
        if (power > limit)
            open_at(trigger, slot);
    } else if (trigger->state == OPEN || trigger->state == WAITING) {
        if (power > trigger->peak_power) {
            trigger->peak_power = power;
            trigger->peak = slot;
            trigger->state = OPEN;
        }
        if (power > FALL * trigger->start_power) { /* the length counts from 10 dB below the peak */
            trigger->start = slot;
            trigger->start_power = power;
        }
        bool fallen = power < trigger->peak_power / FALL || power < limit;
        if (trigger->state == OPEN && (fallen || slot - trigger->start > (int64_t)trigger->max_open)) {
            trigger->state = WAITING;
            trigger->fallen = slot;
        }
        if (trigger->state == WAITING && slot >= trigger->peak + trigger->guard_after) {
            complete(trigger, slot, band, sink, rejections);
            trigger->state = TAIL;
            trigger->low_power = power;
        }
    } else if (trigger->state == TAIL) {
        trigger->low_power = power < trigger->low_power ? power : trigger->low_power;
        if (power > RISE * trigger->low_power && power > limit)
            open_at(trigger, slot);
        else if (power < limit)
            trigger->state = IDLE;
    }
}

/* From the parts of the band or, where it has but one, from its guard band on: what lies between the two is
 * taken to be as steep as the band is. */
static void find_slope(struct trigger *trigger)
{
    struct noise_density density = whitened_get_density(trigger->whitened, trigger->band.mean_pa2);
    const struct guard *guard = &trigger->guards[0];
    if (density.n == 1 && guard->parts.n > 0) {
        double low = bands_get_edges(trigger->setup.bands, guard->parts.bands[0]).low_hz;
        double high = bands_get_edges(trigger->setup.bands, guard->parts.bands[guard->parts.n - 1]).high_hz;
        density.middle_hz[1] = sqrt(low * high);
        density.pa2_hz[1] = guard->median.mean_pa2 / (high - low);
        density.n = 2;
    }
    trigger->slope_db = noise_density_slope(&density);
    trigger->band.median_ratio = noise_tables_get_median(&trigger->noise, trigger->slope_db);
}

void trigger_push(struct trigger *trigger, const struct pulse_sink *sink, uint64_t *rejections)
{
    const struct trigger_setup *setup = &trigger->setup;
    whitened_push(trigger->whitened);
    if (trigger->state != SETTLING)
        find_slope(trigger);
    const float *band = whitened_get_power(trigger->whitened);
    int64_t n = setup->block_slots;
    trigger->block_slot = trigger->n_slots;
    float greatest = sum_windows(trigger);
    /* Until the background has moved by as much as it can in a block, no window can pass. */
    bool quiet = trigger->state == IDLE && greatest < 0.8 * trigger->threshold * trigger->band.mean_pa2;
    int64_t next = (int64_t)((trigger->window - trigger->n_slots % trigger->window) % trigger->window);
    for (int64_t slot = quiet ? next : 0; slot < n; slot += quiet ? trigger->window : 1) {
        if (!quiet && trigger->state != SETTLING) {
            step(trigger, slot, band, sink, rejections);
            trigger->frozen_slots += trigger->state != IDLE;
        }
        if (slot == next) {
            learn(trigger, slot);
            next += trigger->window;
        }
    }
    trigger->energy = energy_until(trigger, n);
    trigger->n_slots += setup->block_slots;
    trigger->start -= n;
    trigger->peak -= n;
    trigger->fallen -= n;
    release(trigger, sink);
}

void trigger_finish(struct trigger *trigger, const struct pulse_sink *sink)
{
    give_held(trigger, sink);
}

double trigger_get_background(const struct trigger *trigger)
{
    return trigger->band.mean_pa2;
}

double trigger_get_noise_rate(const struct trigger *trigger, double snr)
{
    return noise_tables_get(&trigger->noise, trigger->slope_db, snr);
}

void trigger_destroy(struct trigger *trigger)
{
    if (!trigger)
        return;
    whitened_destroy(trigger->whitened);
    pulse_shaper_destroy(trigger->shaper);
    free(trigger->sums);
    free(trigger);
}
