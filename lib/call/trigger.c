/* The pulses of one class; see trigger.h. */
#include "call/trigger.h"
#include "call/trigger_sizes.h"
#include "call/whitened.h"
#include <math.h>
#include <stdlib.h>

#define FALL 10.0 /* what follows a pulse and is weaker by this ratio (10 dB) may be its tail */

struct trigger {
    const struct pulse_search *search;
    double echo_frames, tail_frames;
    struct pulse_shaper *shaper;
    struct pulse held;
    double held_slot; /* its arrival, from the start of the bank's first block */
    double held_first;
    bool holds, held_rejected;
};

enum status trigger_create(const struct call_class *call_class, const struct pulse_search *search,
                           struct trigger **out)
{
    struct trigger *trigger = calloc(1, sizeof *trigger);
    if (!trigger)
        return STATUS_NO_MEMORY;
    const struct search_setup *setup = pulse_search_get_setup(search);
    const double input_rate_hz = setup->rate_hz * setup->frames_per_frame;
    trigger->search = search;
    trigger->echo_frames = trigger_get_echo(call_class) * input_rate_hz;
    trigger->tail_frames = call_class->train.tail_s * input_rate_hz;
    enum status status =
        pulse_shaper_create(call_class, setup->rate_hz, setup->slot_frames, &trigger->shaper);
    if (status != STATUS_OK) {
        trigger_destroy(trigger);
        return status;
    }
    trigger_reset(trigger);
    *out = trigger;
    return STATUS_OK;
}

void trigger_reset(struct trigger *trigger)
{
    trigger->held = (struct pulse){.frame = -INFINITY};
    trigger->holds = false;
}

/* Looks at the sound around the held pulse, as far as the bank still or already has it. */
static void look_at_held(struct trigger *trigger)
{
    const struct search_setup *setup = pulse_search_get_setup(trigger->search);
    const struct whitened *whitened = pulse_search_get_power(trigger->search);
    const double background = pulse_search_get_background(trigger->search);
    const int64_t per_slot = setup->slot_frames, history = setup->history_slots;
    double from_block = trigger->held_slot - (double)pulse_search_get_block_slot(trigger->search); /* slots */
    int64_t slot = (int64_t)floor(from_block);
    int64_t frame = llround(from_block * setup->slot_frames - pulse_search_get_delay(trigger->search));
    struct pulse_sound sound = {
        .samples = bands_get_samples(setup->bands) + frame,
        .samples_before = history * per_slot + frame,
        .samples_after = setup->block_slots * per_slot - frame,
        .power = whitened_get_power(whitened) + slot,
        .slots_before = history + slot,
        .slots_after = setup->block_slots - slot,
        .background_pa2 = background,
        .density = whitened_get_density(whitened, background),
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
static void take(struct trigger *trigger, const struct search_found *found, const struct pulse_sink *sink)
{
    bool echo = trigger->holds && found->frame - trigger->held_first < trigger->echo_frames;
    bool late_echo =
        found->snr * FALL < trigger->held.snr && found->frame - trigger->held.frame < trigger->tail_frames;
    if (late_echo || (echo && found->snr <= trigger->held.snr))
        return;
    if (!echo) {
        give_held(trigger, sink);
        trigger->held_first = found->frame;
    }
    trigger->held = (struct pulse){.frame = found->frame, .snr = found->snr, .energy = found->energy};
    trigger->held_slot = found->slot;
    trigger->held_rejected = found->too_long || found->broadband;
    trigger->holds = true;
}

void trigger_push(struct trigger *trigger, const struct pulse_sink *sink, uint64_t *rejections)
{
    uint32_t n;
    const struct search_found *found = pulse_search_get(trigger->search, &n);
    for (uint32_t i = 0; i < n; i++) {
        rejections[REJECT_TOO_LONG] += found[i].too_long;
        rejections[REJECT_BROADBAND] += found[i].broadband;
        take(trigger, &found[i], sink);
    }
    /* Given once no echo of it can come any more. */
    if (trigger->holds &&
        pulse_search_get_known(trigger->search) - trigger->held_first > trigger->echo_frames)
        give_held(trigger, sink);
}

bool trigger_is_idle(const struct trigger *trigger)
{
    uint32_t n;
    pulse_search_get(trigger->search, &n);
    return n == 0 && !trigger->holds;
}

double trigger_get_known(const struct trigger *trigger)
{
    return trigger->holds ? trigger->held.frame : pulse_search_get_known(trigger->search);
}

void trigger_finish(struct trigger *trigger, const struct pulse_sink *sink)
{
    give_held(trigger, sink);
}

void trigger_destroy(struct trigger *trigger)
{
    if (!trigger)
        return;
    pulse_shaper_destroy(trigger->shaper);
    free(trigger);
}
