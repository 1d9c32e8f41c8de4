/* The one place where the daemon reads clocks. */
#ifndef CLOCK_H
#define CLOCK_H

#include <stdint.h>

/* CLOCK_MONOTONIC, nanoseconds: for durations and deadlines. */
int64_t clock_monotonic_ns(void);
/* CLOCK_REALTIME, nanoseconds since 1970-01-01T00:00:00Z: only to map watch time to UTC at a run's start. */
int64_t clock_utc_ns(void);
/* Waits until the monotonic time, or not at all when it is past. */
void clock_wait_until_ns(int64_t monotonic_ns);

#endif
