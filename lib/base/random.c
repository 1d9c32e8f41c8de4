/* xoshiro256** (Blackman and Vigna, "Scrambled linear pseudorandom number generators", 2018). */
#include "base/random.h"
#include <math.h>

static uint64_t splitmix64(uint64_t *x)
{
    uint64_t z = (*x += UINT64_C(0x9e3779b97f4a7c15));
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

void random_reset(struct random *random, uint64_t seed)
{
    for (int i = 0; i < 4; i++)
        random->state[i] = splitmix64(&seed);
    random->spare = 0;
    random->has_spare = false;
}

static uint64_t rotate_left(uint64_t x, int k)
{
    return (x << k) | (x >> (64 - k));
}

uint64_t random_bits(struct random *random)
{
    uint64_t *s = random->state;
    uint64_t result = rotate_left(s[1] * 5, 7) * 9;
    uint64_t t = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= t;
    s[3] = rotate_left(s[3], 45);
    return result;
}

double random_uniform(struct random *random)
{
    return (double)(random_bits(random) >> 11) * 0x1.0p-53;
}

double random_between(struct random *random, double low, double high)
{
    return low + (high - low) * random_uniform(random);
}

double random_normal(struct random *random)
{
    if (random->has_spare) {
        random->has_spare = false;
        return random->spare;
    }
    double u, v, s;
    do {
        u = 2.0 * random_uniform(random) - 1.0;
        v = 2.0 * random_uniform(random) - 1.0;
        s = u * u + v * v;
    } while (s >= 1.0 || s == 0.0);
    double factor = sqrt(-2.0 * log(s) / s);
    random->spare = v * factor;
    random->has_spare = true;
    return u * factor;
}

double random_exponential(struct random *random)
{
    return -log(1.0 - random_uniform(random));
}
