/* Seeded random numbers; each object owns its generator, so a seed printed by a test replays it. */
#ifndef BASE_RANDOM_H
#define BASE_RANDOM_H

#include <stdbool.h>
#include <stdint.h>

/* xoshiro256** of Blackman and Vigna (2018), seeded by splitmix64. */
struct random {
    uint64_t state[4];
    double spare;
    bool has_spare;
};

void random_reset(struct random *random, uint64_t seed);
uint64_t random_bits(struct random *random);
/* Uniform in [0, 1). */
double random_uniform(struct random *random);
/* Uniform in [low, high). */
double random_between(struct random *random, double low, double high);
/* Standard normal, polar method of Marsaglia and Bray (1964). */
double random_normal(struct random *random);
/* Exponential with mean 1. */
double random_exponential(struct random *random);

#endif
