/* How many slots the pulse finder of a class looks at. For lib/call/trigger*.c only. */
#ifndef CALL_TRIGGER_SIZES_H
#define CALL_TRIGGER_SIZES_H

#include "call/catalogue.h"
#include <stdint.h>

/* Its window: pulse_s. */
uint32_t trigger_window_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames);
/* For how long a pulse may stay open. */
uint32_t trigger_open_slots(const struct call_class *call_class, double rate_hz, uint32_t slot_frames);
/* A guard band answers no faster than its width lets it: its window is at least two of its response times. */
uint32_t trigger_guard_slots(const struct call_class *call_class, double width_hz, double rate_hz,
                             uint32_t slot_frames);

#endif
