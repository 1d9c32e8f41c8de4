/* The daemon's clocks. */
#include "clock.h"
#include "base/time.h"
#include <time.h>

static int64_t read_clock(clockid_t id)
{
    struct timespec now;
    clock_gettime(id, &now);
    return (int64_t)now.tv_sec * TIME_NS_PER_S + now.tv_nsec;
}

int64_t clock_monotonic_ns(void)
{
    return read_clock(CLOCK_MONOTONIC);
}

int64_t clock_utc_ns(void)
{
    return read_clock(CLOCK_REALTIME);
}

void clock_wait_until_ns(int64_t monotonic_ns)
{
    struct timespec until = {.tv_sec = monotonic_ns / TIME_NS_PER_S, .tv_nsec = monotonic_ns % TIME_NS_PER_S};
    while (clock_nanosleep(CLOCK_MONOTONIC, TIMER_ABSTIME, &until, NULL) != 0)
        ;
}
