/* A sea with calls of known time, kind and signal-to-noise ratio in it; seas.c sails it. */
#ifndef BENCH_CALLS_SEA_H
#define BENCH_CALLS_SEA_H

#include "bench/calls/voices.h"

#define SEA_MAX_VOICES 6

struct sea {
    const char *name;
    double rate_hz, minutes, stretch_s;
    void (*fill)(struct scene *scene); /* seed, rate and duration of the scene are set */
    struct voice voices[SEA_MAX_VOICES];
};

/* A new object, as calls_sea gives it; `number` chooses the seeds. NULL where something failed. */
json_t *sea_sail(const struct calls_setup *setup, const struct sea *sea, uint64_t number);

#endif
