/* How many slots the pulse finder of a class looks at. */
#include "call/trigger_sizes.h"
#include "call/pulse_shape.h"
#include "call/trigger.h"
#include <math.h>

#define MAX_ECHO_S 0.03
#define GUARD_MARGIN 2      /* slots: the two filters are not equally late */
#define MOST_BLOCK_SLOTS 64 /* of the bank */

uint32_t trigger_window_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    double slots = call_class->train.pulse_s * rate_hz / slot_frames;
    return slots < 1.5 ? 1 : (uint32_t)lround(slots);
}

uint32_t trigger_open_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    return (uint32_t)ceil(call_class->train.max_pulse_s * rate_hz / slot_frames) +
           2 * trigger_window_slots(call_class, rate_hz, slot_frames);
}

uint32_t trigger_guard_slots(const struct call_class *call_class, double width_hz, double rate_hz,
                             uint32_t slot_frames)
{
    if (width_hz <= 0)
        return 0;
    double seconds = fmax(call_class->train.pulse_s, 2 / width_hz);
    return (uint32_t)ceil(seconds * rate_hz / slot_frames) + 2 * GUARD_MARGIN;
}

uint32_t trigger_get_history(const struct call_class *call_class, double rate_hz, uint32_t slot_frames)
{
    /* From where the first of a pulse's echoes could be known to where the last is: then it is looked at. */
    double echo = trigger_get_echo(call_class) * rate_hz / slot_frames;
    const struct train_shape *shape = &call_class->train;
    double width = shape->guard_high_hz - shape->guard_low_hz,
           upper = shape->upper_high_hz - shape->upper_low_hz;
    uint32_t guard = trigger_guard_slots(call_class, width, rate_hz, slot_frames) +
                     trigger_guard_slots(call_class, upper, rate_hz, slot_frames);
    double reach = fmax(PULSE_SHAPE_REACH_S * rate_hz / slot_frames, PULSE_SHAPE_LAGS);
    return 2 * trigger_open_slots(call_class, rate_hz, slot_frames) +
           8 * trigger_window_slots(call_class, rate_hz, slot_frames) + guard + (uint32_t)ceil(echo + reach) +
           MOST_BLOCK_SLOTS * 2 + 8;
}

double trigger_get_echo(const struct call_class *call_class)
{
    double stated = call_class->train.echo_s;
    return stated > 0 ? stated : fmin(MAX_ECHO_S, call_class->train.min_interval_s / 4);
}
