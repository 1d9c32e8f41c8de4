/* The pulse finder of one class. */
#include "call/trigger.h"
#include "base/units.h"
#include "call/noise_rate.h"
#include "call/window_median.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define MAX_ECHO_S 0.03
#define FALL 10.0            /* a pulse is over when its window has fallen by this ratio (10 dB) */
#define RISE 4.0             /* a new pulse in the tail of another must rise by this ratio (6 dB) */
#define FROZEN_LENGTHS 8     /* a background stands still for so many longest pulses, then goes on */
#define GUARD_DEVIATIONS 2.5 /* benefit of the doubt for a guard band of which noise is all we see */
#define GUARD_MARGIN 2       /* slots: the two filters are not equally late */
#define RUN 40               /* windows in a row on one side of the median that say it is out of date */
enum trigger_state { SETTLING, IDLE, OPEN, WAITING, TAIL };

struct trigger {
    struct trigger_setup setup;
    uint32_t window;                    /* slots */
    uint32_t max_open;                  /* slots */
    uint32_t guard_window, guard_after; /* slots in all, and after the peak */
    double threshold;                   /* ratio of a window's power to the background */
    double guard_ratio;
    struct noise_table noise;
    double echo_frames;
    bool has_guard;

    enum trigger_state state;
    struct window_median band, guard;
    float settle[2][WINDOW_MEDIAN_SETTLE];
    uint32_t n_settled, frozen_slots;
    uint32_t run; /* windows since one lay on the other side of the median */
    bool run_above;
    uint64_t n_slots; /* before the block at hand */
    double energy;    /* before the block at hand */
    int64_t start, peak, fallen;
    double start_power, peak_power, low_power; /* window means */
    struct pulse held;
    double held_first;
    bool holds, held_rejected;
    float *sums; /* [block_slots] window means of the block */
};

static uint32_t window_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    double slots = call_class->train.pulse_s * rate_hz / slot_frames;
    return slots < 1.5 ? 1 : (uint32_t)lround(slots);
}

static uint32_t open_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    return (uint32_t)ceil(call_class->train.max_pulse_s * rate_hz / slot_frames) +
           2 * window_slots(call_class, rate_hz, slot_frames);
}

/* A guard band answers no faster than its width lets it: its window is at least two of its response times. */
static uint32_t guard_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    const struct train_shape *shape = &call_class->train;
    if (shape->guard_high_hz <= 0)
        return 0;
    double seconds = 2 / (shape->guard_high_hz - shape->guard_low_hz);
    return (uint32_t)ceil(fmax(shape->pulse_s, seconds) * rate_hz / slot_frames) + 2 * GUARD_MARGIN;
}

uint32_t trigger_get_history(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    return open_slots(call_class, rate_hz, slot_frames) + 2 * window_slots(call_class, rate_hz, slot_frames) +
           2 * GUARD_MARGIN + 8;
}

double trigger_get_echo(const struct call_class *call_class)
{
    return fmin(MAX_ECHO_S, call_class->train.min_interval_s / 4);
}

enum status trigger_create(const struct trigger_setup *setup, struct trigger **out)
{
    struct trigger *trigger = calloc(1, sizeof *trigger);
    if (!trigger)
        return STATUS_NO_MEMORY;
    const struct train_shape *shape = &setup->call_class->train;
    trigger->setup = *setup;
    trigger->window = window_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    trigger->max_open = open_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    trigger->threshold = 1 + units_power_ratio(shape->min_snr_db);
    trigger->has_guard = shape->guard_high_hz > 0;
    trigger->guard_ratio = units_power_ratio(-shape->min_guard_db);
    trigger->guard_window = guard_slots(setup->call_class, setup->rate_hz, setup->slot_frames);
    trigger->guard_after =
        trigger->guard_window > trigger->window ? (trigger->guard_window - trigger->window + 1) / 2 : 0;
    struct window_statistics band = {.freedom = 1, .skewness = 1}, guard = band;
    enum status status = bands_get_statistics(setup->bands, setup->band, trigger->window, &band);
    if (status == STATUS_OK && trigger->has_guard)
        status = bands_get_statistics(setup->bands, setup->guard, trigger->guard_window, &guard);
    noise_table_fill(&band, shape->pulse_s, &trigger->noise);
    /* A step of 0.002 at 0.1 ms keeps the median within 0.1 dB and lets it follow 87 dB/s; longer windows
       step more, since there are fewer. */
    double step = fmin(0.05, 0.002 * fmax(1, sqrt(shape->pulse_s / 1e-4)));
    trigger->band = window_median_of(band.freedom, step);
    trigger->guard = window_median_of(guard.freedom, step);
    trigger->echo_frames = trigger_get_echo(setup->call_class) * setup->rate_hz * setup->frames_per_frame;
    trigger->sums = calloc(setup->block_slots, sizeof *trigger->sums);
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
    trigger->holds = false;
    window_median_reset(&trigger->band);
    window_median_reset(&trigger->guard);
}

static double sum_slots(const float *power, uint32_t n)
{
    lanes first = {0}, second = {0};
    uint32_t i = 0;
    for (; i + 2 * LANES <= n; i += 2 * LANES) {
        first += lanes_load(power + i);
        second += lanes_load(power + i + LANES);
    }
    double sum = lanes_sum(first + second);
    for (; i < n; i++)
        sum += power[i];
    return sum;
}

/* Mean power of the window that ends with slot `last`. */
static double window_power(const float *power, int64_t last, uint32_t window)
{
    return sum_slots(power + last + 1 - (int64_t)window, window) / window;
}

/* Once a window: every window counts once in the background. */
static void learn(struct trigger *trigger, int64_t slot, const float *band, const float *guard)
{
    double guard_power = trigger->has_guard ? window_power(guard, slot, trigger->guard_window) : 0;
    if (trigger->state == SETTLING) {
        if (trigger->n_slots + (uint64_t)slot < 4 * trigger->window + 2 * trigger->guard_window)
            return; /* the filters are still filling */
        trigger->settle[0][trigger->n_settled] = (float)window_power(band, slot, trigger->window);
        trigger->settle[1][trigger->n_settled] = (float)guard_power;
        if (++trigger->n_settled < WINDOW_MEDIAN_SETTLE)
            return;
        window_median_settle(&trigger->band, trigger->settle[0]);
        if (trigger->has_guard)
            window_median_settle(&trigger->guard, trigger->settle[1]);
        trigger->state = IDLE;
        return;
    }
    if (trigger->state != IDLE && trigger->frozen_slots < FROZEN_LENGTHS * trigger->max_open)
        return;
    bool above = window_median_follow(&trigger->band, trigger->sums[slot]);
    if (trigger->has_guard)
        window_median_follow(&trigger->guard, guard_power);
    trigger->run = trigger->run * (above == trigger->run_above) + 1;
    trigger->run_above = above;
    if (trigger->run >= RUN) {
        trigger->state = SETTLING;
        trigger->n_settled = trigger->run = 0;
    }
}

static void give_held(struct trigger *trigger, const struct pulse_sink *sink)
{
    if (trigger->holds && !trigger->held_rejected)
        sink->take(sink->context, &trigger->held);
    trigger->holds = false;
}

/* Ties a pulse to the one before or starts the next. What was rejected ties its echoes too: they are no more
 * the class's than it is. */
static void emit(struct trigger *trigger, const struct pulse *pulse, bool rejected,
                 const struct pulse_sink *sink)
{
    bool echo = trigger->holds && pulse->frame - trigger->held_first < trigger->echo_frames;
    if (echo && pulse->snr <= trigger->held.snr)
        return;
    if (!echo) {
        give_held(trigger, sink);
        trigger->held_first = pulse->frame;
    }
    trigger->held = *pulse;
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

/* False when the guard band holds too much energy around the pulse, beyond what its noise explains. */
static bool guard_is_quiet(const struct trigger *trigger, const float *guard)
{
    if (!trigger->has_guard)
        return true;
    double n = trigger->guard_window, background = trigger->guard.mean_pa2;
    double power = window_power(guard, trigger->peak + trigger->guard_after, trigger->guard_window);
    double doubt = GUARD_DEVIATIONS * background * trigger->guard.deviation;
    double pulse = (trigger->peak_power - trigger->band.mean_pa2) * trigger->window;
    return (power - background) * n <= pulse * trigger->guard_ratio + doubt * n;
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

static double energy_until(const struct trigger *trigger, const float *band, int64_t slot)
{
    double sum = slot < 0 ? -sum_slots(band + slot, (uint32_t)-slot) : sum_slots(band, (uint32_t)slot);
    return trigger->energy + sum * trigger->setup.slot_frames * trigger->setup.frames_per_frame;
}

static void complete(struct trigger *trigger, int64_t slot, const float *band, const float *guard,
                     const struct pulse_sink *sink, uint64_t *rejections)
{
    const struct trigger_setup *setup = &trigger->setup;
    double seconds = (double)(trigger->fallen - trigger->start - (int64_t)trigger->window) *
                     setup->slot_frames / setup->rate_hz;
    bool too_long = seconds > setup->call_class->train.max_pulse_s;
    bool broadband = !too_long && !guard_is_quiet(trigger, guard);
    rejections[REJECT_TOO_LONG] += too_long;
    rejections[REJECT_BROADBAND] += broadband;
    double frames = ((double)trigger->n_slots + arrival_slot(trigger, band, slot)) * setup->slot_frames -
                    bands_get_delay(setup->bands, setup->band);
    struct pulse pulse = {
        .frame = frames * setup->frames_per_frame - setup->delay_frames,
        .snr = (trigger->peak_power - trigger->band.mean_pa2) / trigger->band.mean_pa2,
        .energy = energy_until(trigger, band, trigger->peak),
    };
    emit(trigger, &pulse, too_long || broadband, sink);
}

static void open_at(struct trigger *trigger, int64_t slot)
{
    trigger->state = OPEN;
    trigger->frozen_slots = 0;
    trigger->start = trigger->peak = slot;
    trigger->start_power = trigger->peak_power = trigger->sums[slot];
}

static void step(struct trigger *trigger, int64_t slot, const float *band, const float *guard,
                 const struct pulse_sink *sink, uint64_t *rejections)
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
            complete(trigger, slot, band, guard, sink, rejections);
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

/* Window means of the block, and the greatest of them. */
static float sum_windows(struct trigger *trigger, const float *band)
{
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

void trigger_push(struct trigger *trigger, const struct pulse_sink *sink, uint64_t *rejections)
{
    const struct trigger_setup *setup = &trigger->setup;
    const float *band = bands_get_power(setup->bands, setup->band);
    const float *guard = trigger->has_guard ? bands_get_power(setup->bands, setup->guard) : NULL;
    int64_t n = setup->block_slots;
    float greatest = sum_windows(trigger, band);
    /* Until the background has moved by as much as it can in a block, no window can pass. */
    bool quiet = trigger->state == IDLE && greatest < 0.8 * trigger->threshold * trigger->band.mean_pa2;
    int64_t next = (int64_t)((trigger->window - trigger->n_slots % trigger->window) % trigger->window);
    for (int64_t slot = quiet ? next : 0; slot < n; slot += quiet ? trigger->window : 1) {
        if (!quiet && trigger->state != SETTLING) {
            step(trigger, slot, band, guard, sink, rejections);
            trigger->frozen_slots += trigger->state != IDLE;
        }
        if (slot == next) {
            learn(trigger, slot, band, guard);
            next += trigger->window;
        }
    }
    trigger->energy = energy_until(trigger, band, n);
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
    return noise_table_get(&trigger->noise, snr);
}

void trigger_destroy(struct trigger *trigger)
{
    if (!trigger)
        return;
    free(trigger->sums);
    free(trigger);
}
