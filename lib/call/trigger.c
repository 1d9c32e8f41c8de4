/* The pulses of one class; see trigger.h. */
#include "call/trigger.h"
#include "call/train.h"
#include "call/trigger_sizes.h"
#include "call/whitened.h"
#include <math.h>
#include <stdlib.h>

#define FALL 10.0 /* what follows a pulse and is weaker by this ratio (10 dB) may be its tail */

#define HELD 4 /* looked at together, of those within an echo time */
/* Pulses of one sound have spectra no more unlike than this (pulse_shape_alike_spectra); nearer than so many
 * pulse lengths each has the other's spectrum. Judgements, no source. */
#define UNLIKE -2.0
#define APART_PULSES 3.0

struct trigger {
    const struct pulse_search *search;
    const struct call_class *call_class;
    bool ties_own; /* the class states in what time its sound repeats itself */
    double echo_frames, tail_frames, apart_frames, reach_frames;
    struct pulse_shaper *shaper;
    /* What came within an echo time of the first, in order of arrival. */
    struct search_found held[HELD];
    struct pulse pulses[HELD];
    uint32_t n_held;
    double first_frame;
    double last_frame, last_snr; /* of the strongest of them, or of those before */
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
    trigger->apart_frames = APART_PULSES * call_class->train.pulse_s * input_rate_hz;
    trigger->reach_frames = PULSE_SHAPE_REACH_S * input_rate_hz;
    trigger->call_class = call_class;
    trigger->ties_own = call_class->train.echo_s > 0;
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
    trigger->n_held = 0;
    trigger->last_frame = -INFINITY;
    trigger->last_snr = 0;
}

/* Looks at the sound around one that is held, as far as the bank still or already has it. */
static void look_at(struct trigger *trigger, uint32_t i)
{
    const struct search_found *found = &trigger->held[i];
    struct pulse *pulse = &trigger->pulses[i];
    const struct search_setup *setup = pulse_search_get_setup(trigger->search);
    const struct whitened *whitened = pulse_search_get_power(trigger->search);
    const double background = pulse_search_get_background(trigger->search);
    const int64_t per_slot = setup->slot_frames, history = setup->history_slots;
    double from_block = found->slot - (double)pulse_search_get_block_slot(trigger->search); /* slots */
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
    *pulse = (struct pulse){.frame = found->frame, .snr = found->snr, .energy = found->energy};
    pulse_shaper_get(trigger->shaper, &sound, &pulse->shape);
    pulse->foreign = !train_may_have(pulse, trigger->call_class);
}

/* Whether what was found has the echoes of everything that follows it. A burst that is too long and narrower
 * than any pulse of the class, a ping, has only those that look like it. */
static bool ties_all(const struct trigger *trigger, uint32_t i)
{
    return trigger->held[i].broadband ||
           (trigger->held[i].too_long && !train_is_narrow(&trigger->pulses[i], &trigger->call_class->train));
}

/* An echo of what is no pulse of the class is none either. What is far weaker, and farther from it than the
 * pulses of one sound are, is none where it comes first, and where it comes after must look more like it than
 * not: so weak a one says little of what it looks like. */
static bool is_echo_of(const struct trigger *trigger, uint32_t i, uint32_t of)
{
    const struct pulse *pulse = &trigger->pulses[i], *other = &trigger->pulses[of];
    double later = pulse->frame - other->frame;
    bool far_weaker = pulse->snr * FALL < other->snr && fabs(later) > trigger->reach_frames;
    if (trigger->ties_own || fabs(later) < trigger->apart_frames)
        return true;
    if (pulse->foreign != other->foreign || (far_weaker && later < 0))
        return false;
    return pulse_shape_alike_spectra(&pulse->shape, &other->shape) > (far_weaker ? 0 : UNLIKE);
}

/* Gives those held of which each is the strongest that looks so: the rest are their echoes. What was rejected
 * ties its echoes too: they are no more the class's than it is. */
static void give_held(struct trigger *trigger, const struct pulse_sink *sink)
{
    enum { OPEN, GIVEN, ECHO } fate[HELD] = {OPEN};
    uint32_t n = trigger->n_held;
    double all_from = INFINITY; /* frame: nothing sounds before its cause */
    for (uint32_t i = 0; i < n; i++)
        if (n > 1 || !(trigger->held[i].broadband || trigger->held[i].too_long))
            look_at(trigger, i);
    for (uint32_t left = n; left > 0; left--) {
        uint32_t best = HELD;
        for (uint32_t i = 0; i < n; i++)
            if (fate[i] == OPEN && (best == HELD || trigger->held[i].snr > trigger->held[best].snr))
                best = i;
        if (best == HELD)
            break;
        const struct search_found *found = &trigger->held[best];
        bool good = !found->broadband && !found->too_long && found->frame <= all_from;
        fate[best] = good ? GIVEN : ECHO;
        if (n > 1 && ties_all(trigger, best))
            all_from = fmin(all_from, found->frame);
        for (uint32_t i = 0; i < n; i++)
            if (fate[i] == OPEN && is_echo_of(trigger, i, best))
                fate[i] = ECHO;
    }
    for (uint32_t i = 0; i < n; i++)
        if (fate[i] == GIVEN)
            sink->take(sink->context, &trigger->pulses[i]);
    trigger->n_held = 0;
}

/* Makes room for one more by forgetting the weakest; false when that is the new one. */
static bool make_room(struct trigger *trigger, double snr)
{
    if (trigger->n_held < HELD)
        return true;
    uint32_t weakest = 0;
    for (uint32_t i = 1; i < HELD; i++)
        if (trigger->held[i].snr < trigger->held[weakest].snr)
            weakest = i;
    if (trigger->held[weakest].snr >= snr)
        return false;
    for (uint32_t i = weakest; i + 1 < HELD; i++)
        trigger->held[i] = trigger->held[i + 1];
    trigger->n_held--;
    return true;
}

/* Holds what was found beside what came just before it. */
static void take(struct trigger *trigger, const struct search_found *found, const struct pulse_sink *sink)
{
    bool echo = trigger->n_held > 0 && found->frame - trigger->first_frame < trigger->echo_frames;
    if (found->snr * FALL < trigger->last_snr && found->frame - trigger->last_frame < trigger->tail_frames)
        return;
    if (!echo) {
        give_held(trigger, sink);
        trigger->first_frame = found->frame;
    }
    if (!echo || found->snr > trigger->last_snr) {
        trigger->last_frame = found->frame;
        trigger->last_snr = found->snr;
    }
    if (make_room(trigger, found->snr))
        trigger->held[trigger->n_held++] = *found;
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
    if (trigger->n_held > 0 &&
        pulse_search_get_known(trigger->search) - trigger->first_frame > trigger->echo_frames)
        give_held(trigger, sink);
}

bool trigger_is_idle(const struct trigger *trigger)
{
    uint32_t n;
    pulse_search_get(trigger->search, &n);
    return n == 0 && trigger->n_held == 0;
}

double trigger_get_known(const struct trigger *trigger)
{
    return trigger->n_held > 0 ? trigger->first_frame : pulse_search_get_known(trigger->search);
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
